//! The rows of one run beside every method, with the second looks that an honest claim
//! deserves before it is contradicted: single precision that the digits do not show, another
//! method for the first step, steps of its own at jumps where states are missing.

use super::chance::{binds, elsewhere, is_plain, of_iteration};
use super::claims::{Answer, Claimed, Support, early, of_claim};
use crate::method::{
    Evidence, Family, Linear, Method, Reading, Record, Scheme, evidence, evidence_of, fitting,
    forms,
};

/// Where another method fits, single precision is thought of up to this many times what
/// digits and double precision allow: few digits are coarser than its roundings by then.
const NEARLY: f64 = 4.0;
/// Roundings of `y + h f` with `f` of a stiff state found by iteration, in units of those of
/// `h |A|`.
const STIFF: f64 = 4.0;
/// Jumps that are looked at, and how near to a step they are at it, in steps.
const MOST_JUMPS: usize = 1000;
const ON_GRID: f64 = 1e-6;
/// A method of its own without a start to choose comes so many times closer to rows that have
/// its name than the exact solution.
const NAMED: f64 = 1e4;
/// Rows that another method may have made at the start: up to four short steps.
const OTHER_START: usize = 4;

/// Lays the rows of one run beside every method and says what they say of its claim. A
/// claim that single precision would explain, with digits that do not show it, is left open.
pub fn ask(linear: &Linear, record: &Record, claimed: &Claimed) -> (Evidence, Option<Answer>) {
    let steps: Vec<u64> = claimed.steps.into_iter().collect();
    let found = evidence(linear, record, claimed.methods, &steps);
    let answer = of_claim(&found, claimed).map(|answer| {
        if answer.support != Support::Contradicts {
            return answer;
        }
        if claimed.methods.is_empty() && linear.stands_still() {
            let text = "no mode of the case grows or decays, so that methods meet each other's rows at \
                        other steps; name the method, or run a case that has a time constant";
            return answer.left_open(text.to_owned());
        }
        if starts_otherwise(linear, record, claimed, &steps) {
            return answer.left_open(format!(
                "the rows fit {} but for the first of them: another method has made the first \
                 step, to damp what is fast or to start",
                claimed.name.unwrap_or_default()
            ));
        }
        // A step that does not divide the rows has no pair beside them.
        let own = found.best(claimed.methods, claimed.steps);
        let own = own.filter(|_| claimed.divides_rows());
        // A mode of a pair and the pair at another step may both meet the digits.
        let elsewhere = !claimed.methods.iter().any(|method| is_pair(method))
            && own.is_some_and(|own| elsewhere(&found, claimed, own).is_some());
        if !elsewhere && let Some(text) = unfinished(linear, record, claimed, &found) {
            return answer.left_open(text);
        }
        if record.states(linear.size()).is_none() && misses_jumps(linear, record, claimed) {
            let text = "states are missing and inputs jump between the steps, where programs take \
                        steps of their own; write every state";
            return answer.left_open(text.to_owned());
        }
        if let Some((step, own)) = claimed.step.zip(own)
            && own.fit.residual <= STIFF * record.unit * step * linear.matrix.row_sum_norm()
        {
            let text = "the rates are so fast for the step that the roundings of its solution may be \
                        all that is left; a smaller step would tell";
            return answer.left_open(text.to_owned());
        }
        let close = own.is_some_and(|own| own.fit.ratio <= NEARLY);
        let known = found.consistent.iter().any(Family::is_beyond_chance);
        if claimed.methods.is_empty() || (known && !close) {
            return answer;
        }
        let Some(single) = record.in_single() else {
            return answer;
        };
        let again = evidence_of(linear, &single, claimed.methods, &steps);
        let own = again.best(claimed.methods, claimed.steps);
        // Nothing is compared where its roundings hide all.
        if own.is_some_and(|own| !own.fit.holds()) {
            return answer;
        }
        answer.left_open(format!(
            "the rows are off {} by more than digits and the rounding of double precision \
             allow; single precision arithmetic would explain it; print more digits",
            claimed.name.unwrap_or_default()
        ))
    });
    (found, answer)
}

/// What leaves the claim of an implicit method open, where the program may have given its
/// solution up after so many iterations.
fn unfinished(
    linear: &Linear,
    record: &Record,
    claimed: &Claimed,
    found: &Evidence,
) -> Option<String> {
    let steps = claimed.steps?;
    let own = found.best(claimed.methods, Some(steps));
    let close = own.filter(|own| own.fit.residual <= of_iteration(steps));
    // Far from the method, the rows of another one have its name, however it came to them.
    let named = found.consistent.iter().any(has_a_name);
    // A pair that leaves its result as corrected steps like its predictor: the name of that
    // says nothing against it.
    let pair = claimed.methods.iter().any(|method| is_pair(method));
    if close.is_some() || !named || pair {
        for &method in claimed.methods {
            let forms = forms(method);
            if let Some(form) = fitting(linear, record, method, &forms, steps, !named) {
                return Some(format!(
                    "the rows are those of {} {}, and not of the formula as it stands; {}",
                    claimed.label(),
                    form.text,
                    if is_pair(method) {
                        "predict, evaluate, correct once and evaluate to have it confirmed"
                    } else {
                        "let iterations run to a tolerance"
                    }
                ));
            }
        }
    }
    // A method with a memory passes over the first rows, where rows that soon settle hold
    // all that an iteration has left.
    let own = close.filter(|_| claimed.is_iterated())?;
    let of_claim = |family: &Family| family.methods.iter().any(|m| claimed.is_claimed(m));
    if found.consistent.iter().any(of_claim) {
        return None;
    }
    let back = |family: &Family| family.methods.iter().map(|m| m.steps_back()).min();
    let passed = found.consistent.iter().map(|f| back(f).unwrap_or(1));
    let passed = passed.min().filter(|&passed| passed > 1)?;
    let rest = record.from_row(passed);
    let rest = evidence_of(linear, &rest, claimed.methods, &[steps]);
    let same = rest.best(claimed.methods, Some(steps))?;
    let open = same.fit.holds() || !found.consistent.iter().any(|family| binds(family, same));
    open.then(|| early(own, &claimed.label()))
}

/// True for a predictor with its corrector.
fn is_pair(method: &Method) -> bool {
    method.schemes.iter().any(Scheme::is_predicted)
}

/// True where rows are those of a family that can be told from the exact solution so well that
/// they have its name.
fn has_a_name(family: &Family) -> bool {
    is_plain(family) && !family.free && family.apart > NAMED * family.fit.ratio
}

/// True where a method without a memory fits all rows but the first few, and can be told
/// from the exact solution on them.
fn starts_otherwise(linear: &Linear, record: &Record, claimed: &Claimed, steps: &[u64]) -> bool {
    let remembers = |m: &&Method| m.steps_back() > 1;
    let all = record.states(linear.size()).is_some() && claimed.step.is_some();
    if !all
        || !claimed.divides_rows()
        || claimed.methods.is_empty()
        || claimed.methods.iter().any(remembers)
    {
        return false;
    }
    let rest = record.from_row(OTHER_START);
    let rest = evidence_of(linear, &rest, claimed.methods, steps);
    let own = rest.best(claimed.methods, claimed.steps);
    own.is_some_and(|own| own.fit.holds() && own.reading == Reading::AtNodes && own.is_told())
}

/// True where an input jumps off the grid of the claimed steps.
fn misses_jumps(linear: &Linear, record: &Record, claimed: &Claimed) -> bool {
    let times = record
        .windows
        .first()
        .map_or(&[][..], |window| &window.times);
    let (Some(step), Some(&from), Some(&to)) = (claimed.step, times.first(), times.last()) else {
        return false;
    };
    let next = |time: &f64| linear.next_jump(*time).filter(|jump| *jump < to);
    let jumps = std::iter::successors(next(&from), next);
    jumps.take(MOST_JUMPS).any(|jump| {
        let count = (jump - from) / step;
        (count - count.round()).abs() > ON_GRID
    })
}

#[cfg(test)]
mod tests {
    use super::super::planted::{claimed, family, method, tried};
    use super::*;
    use crate::case::Library;
    use crate::method::Window;

    /// A pulse from 600 s to 1500 s, in rows from `from` to `to`.
    fn misses(step: f64, from: f64, to: f64) -> bool {
        let case = Library::new().load("thermal/cold-room-defrost", &Default::default());
        let linear = Linear::new(&case.unwrap());
        let window = Window {
            times: vec![from, to],
            ..Window::default()
        };
        let record = Record {
            windows: vec![window],
            ..Record::default()
        };
        let claimed = Claimed {
            step: Some(step),
            ..claimed("Heun", &[])
        };
        misses_jumps(&linear, &record, &claimed)
    }

    #[test]
    fn steps_miss_jumps_that_are_no_multiple_from_the_first_row() {
        assert!(!misses(100.0, 0.0, 14400.0) && !misses(300.0, 0.0, 14400.0));
        assert!(misses(70.0, 0.0, 14400.0) && misses(400.0, 0.0, 14400.0));
        // From 100 s the jumps are 500 s and 1400 s away.
        assert!(!misses(100.0, 100.0, 14400.0) && misses(300.0, 100.0, 14400.0));
        // The first alone is met by 250 s, and only what jumps before the last row counts.
        assert!(misses(250.0, 100.0, 1501.0));
        assert!(!misses(250.0, 100.0, 1500.0) && !misses(70.0, 0.0, 600.0));
        // What has jumped before the first row does not.
        assert!(misses(70.0, 601.0, 14400.0) && !misses(70.0, 1500.0, 14400.0));
        // Stamps round: a millionth of a step is none beside it.
        assert!(!misses(100.0 * (1.0 + 5e-8), 0.0, 14400.0));
        assert!(misses(100.0 * (1.0 + 1e-6), 0.0, 14400.0));
        let none = Claimed {
            step: None,
            ..claimed("Heun", &[])
        };
        let case = Library::new().load("thermal/cold-room-defrost", &Default::default());
        let linear = Linear::new(&case.unwrap());
        assert!(!misses_jumps(&linear, &Record::default(), &none));
    }

    #[test]
    fn a_name_is_ten_thousand_times_nearer_than_the_exact_solution() {
        let named = |change: &dyn Fn(&mut Family)| {
            let mut found = family(&tried("Heun", 1, 0.5, 1e-9));
            change(&mut found);
            has_a_name(&found)
        };
        // Half of what digits allow, so 5000 of it.
        assert!(named(&|f| f.apart = 5001.0) && !named(&|f| f.apart = 4999.0));
        assert!(!named(&|f| f.free = true) && !named(&|f| f.steps = 65));
        assert!(!named(&|f| f.reading = Reading::Held));
    }

    #[test]
    fn pairs_are_predicted_and_corrected() {
        assert!(is_pair(method("Adams-Bashforth-Moulton 3")));
        for name in ["Heun", "backward Euler", "Adams-Moulton 3", "BDF 2"] {
            assert!(!is_pair(method(name)), "{name}");
        }
    }
}

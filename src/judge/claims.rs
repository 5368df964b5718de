//! What the rows say of a claimed method and step: they agree, contradict, or cannot tell.
//!
//! A claim is contradicted only where a bound is broken: the rows differ from what the claimed
//! method would have written by more than digits and rounding allow. Beyond the bound, what an
//! honest program may leave (a solution by iteration, an adaptive code, a step that nobody
//! stated) is told by thresholds, see `chance.rs`, that only ever leave a claim open.

use super::chance::{
    BY_CHANCE_FEW, LAST_DIGITS, binds, elsewhere, far_closer, is_implicit, is_sharp, is_undone,
    of_arithmetic, of_iteration,
};
use super::stated::{at_no_such_step, no_such_step, of_step_alone};
use super::words::{family_at, of_peak, reading, share};
use crate::fault::nearest;
use crate::method::{Evidence, Family, METHODS, Method, Reading, Skipped, Tried};
use crate::number::{plain, short};

/// What the rows say of a claim.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[allow(missing_docs)]
pub enum Support {
    Agrees,
    CannotTell,
    Contradicts,
}

impl Support {
    /// The word in reports.
    pub fn word(self) -> &'static str {
        match self {
            Support::Agrees => "agrees",
            Support::CannotTell => "cannot tell",
            Support::Contradicts => "contradicts",
        }
    }
}

/// What is claimed of one run.
#[derive(Clone, Copy, Debug)]
pub struct Claimed<'a> {
    /// The method as named; `None` where only a step is stated.
    pub name: Option<&'a str>,
    /// The methods that go by the name; empty where it is not in the catalogue.
    pub methods: &'a [&'static Method],
    /// The step as stated.
    pub step: Option<f64>,
    /// Steps of that length from row to row, where it fits the rows.
    pub steps: Option<u64>,
    /// True for a run with an error setting: its steps are its own business.
    pub adaptive: bool,
    /// Unit roundoff of the arithmetic that the rows show.
    pub unit: f64,
    /// The unit of time.
    pub time_unit: &'a str,
}

impl Claimed<'_> {
    /// Method and step for a sentence.
    pub(super) fn label(&self) -> String {
        let name = self.name.unwrap_or_default();
        match self.step {
            Some(step) => format!("{name} at step {} {}", plain(step), self.time_unit),
            None => name.to_owned(),
        }
    }

    /// True where the name means a method whose steps have to be solved for.
    pub(super) fn is_iterated(&self) -> bool {
        self.methods.iter().any(|method| is_implicit(method))
    }

    /// True unless a step is stated of which the rows do not lie a whole number apart.
    pub(super) fn divides_rows(&self) -> bool {
        self.step.is_none() || self.steps.is_some()
    }

    /// True for the methods that the name means.
    pub(super) fn is_claimed(&self, method: &Method) -> bool {
        self.methods.iter().any(|own| own.name == method.name)
    }
}

/// The answer for one run.
#[derive(Clone, Debug, PartialEq)]
pub struct Answer {
    /// Of method and step together.
    pub support: Support,
    /// Of the method alone, where one is claimed.
    pub method: Option<Support>,
    /// Of the step alone, where one is stated.
    pub step: Option<Support>,
    /// Why, in one sentence; where nothing can be told, what would settle it.
    pub text: String,
}

impl Answer {
    /// The same claim, left open after all.
    pub fn left_open(self, text: String) -> Answer {
        let open = |_| Support::CannotTell;
        Answer {
            support: Support::CannotTell,
            method: self.method.map(open),
            step: self.step.map(open),
            text,
        }
    }
}

/// A residual this many times below that of every other method is near to its own.
const FAR_BELOW: f64 = 0.05;
/// A pair that fits within a wide bound is not what wrote the rows where another one comes
/// so many times closer.
const FAR_BEYOND: f64 = 100.0;

/// What the rows of one run say of its claim; `None` where nothing is claimed.
pub fn of_claim(evidence: &Evidence, claimed: &Claimed) -> Option<Answer> {
    if claimed.name.is_none() && claimed.step.is_none() {
        return None;
    }
    let cannot = |text: String| Answer {
        support: Support::CannotTell,
        method: claimed.name.map(|_| Support::CannotTell),
        step: claimed.step.map(|_| Support::CannotTell),
        text,
    };
    if let (Some(name), true) = (claimed.name, claimed.methods.is_empty()) {
        let known = METHODS
            .iter()
            .flat_map(|m| std::iter::once(m.name).chain(m.aliases.iter().copied()));
        let near = nearest(name, known);
        let near = near.map_or(String::new(), |near| format!(", did you mean `{near}`?"));
        let text = format!(
            "`{name}` is not in the catalogue{near}; `stepgauge methods` lists what it holds"
        );
        return Some(of_step_alone(evidence, claimed).map_or_else(
            || cannot(text.clone()),
            |step| Answer {
                method: Some(Support::CannotTell),
                support: step.support.max(Support::CannotTell),
                text: format!("{text}; {}", step.text),
                ..step
            },
        ));
    }
    if !evidence.is_any() {
        let text = "the rows are too few, or too many states are missing, to run a method beside \
                    them; write every state at an even spacing";
        return Some(cannot(text.to_owned()));
    }
    if claimed.name.is_none() {
        return Some(of_step_alone(evidence, claimed).unwrap_or_else(|| {
            let text = if claimed.adaptive {
                "a run with an error setting chooses its own steps"
            } else if evidence.is_exact() {
                "the rows cannot be told from the exact solution, so nothing says what the step was"
            } else if claimed.steps.is_none() {
                "rows are not a whole number of steps apart; write rows at steps"
            } else if evidence.consistent.is_empty() {
                "no method fits the rows, so none says what the step was; name the method"
            } else {
                "methods at several steps fit the rows; name the method"
            };
            cannot(text.to_owned())
        }));
    }
    Some(of_method(evidence, claimed, &cannot))
}

fn of_method(evidence: &Evidence, claimed: &Claimed, cannot: &dyn Fn(String) -> Answer) -> Answer {
    let name = claimed.name.unwrap_or_default();
    let label = claimed.label();
    let all = |support: Support, text: String| Answer {
        support,
        method: Some(support),
        step: claimed.step.map(|_| support),
        text,
    };
    let own = evidence.best(claimed.methods, claimed.steps);
    let own = own.filter(|_| claimed.divides_rows());
    if let Some(own) = own.filter(|own| own.fit.holds()) {
        let others = evidence.tried.iter().filter(|tried| tried.fit.compared > 0);
        let ruled_out: std::collections::BTreeSet<&str> = others
            .filter(|tried| !tried.fit.holds())
            .map(|tried| tried.method.name)
            .filter(|other| {
                evidence
                    .best_of(other)
                    .is_some_and(|best| !best.fit.holds())
            })
            .collect();
        let any = evidence.tried.iter().any(|tried| !tried.fit.holds());
        let plainer = evidence.consistent.iter().find(|family| {
            own.reading == Reading::EitherSide && family.reading != Reading::EitherSide
        });
        if let Some(family) = plainer {
            return cannot(format!(
                "the rows fit {label} if it reads its inputs now on one side of a jump, now on the \
                 other, but also {}; every state in the file would tell them apart",
                family_at(family, claimed.time_unit)
            ));
        }
        if !any {
            let text = format!(
                "the rows fit {label}, and every other method as well; more digits, a larger step \
                 or a case with a moving input would tell them apart"
            );
            return cannot(text);
        }
        let outdone = evidence.outdone(own, claimed.methods, claimed.unit);
        // A stiff step is computed in more ways than one, each with roundings of its own.
        let rounded = own.fit.residual <= own.coarse;
        let far = outdone.filter(|(times, family)| {
            *times > FAR_BEYOND && family.steps <= Family::MANY_STEPS && !own.free && !rounded
        });
        if let Some((times, family)) = far {
            let text = format!(
                "the rows fit {}, {} times closer than {label}, whose roundings would stand in \
                 the way of both",
                family_at(family, claimed.time_unit),
                short(times)
            );
            return all(Support::Contradicts, text);
        }
        if evidence.is_left_out(own, claimed.methods) && own.at_jumps.ratio <= 1.0 {
            return cannot(format!(
                "the rows fit {label} within what its steps can round, yet something else comes \
                 closer; print more digits, or write every state and every step"
            ));
        }
        if own.at_jumps.ratio > 1.0
            && own.at_jumps.residual <= of_iteration(own.steps)
            && claimed.is_iterated()
        {
            return cannot(early(own, &label));
        }
        if let Some(family) = evidence.better_at_jumps(own, claimed.methods) {
            let text = format!(
                "the steps at jumps of the inputs fit {}, not {label} on either side of them",
                family_at(family, claimed.time_unit)
            );
            return all(Support::Contradicts, text);
        }
        if own.at_jumps.ratio > 1.0 && !evidence.any_at_jumps(own, claimed.methods) {
            return cannot(format!(
                "the rows fit {label} between the jumps of the inputs and not at them ({} of the \
                 peak off, on whichever side); a case without jumps would tell",
                short(own.at_jumps.residual)
            ));
        }
        if own.free && evidence.jumps && own.at_jumps.compared == 0 {
            return cannot(format!(
                "the rows fit {label} between the jumps of the inputs; its steps at them are not \
                 among the rows; write every step"
            ));
        }
        if own.apart <= 1.0 {
            return cannot(format!(
                "the rows fit {label}, and the exact solution as well; more digits, a larger step \
                 or a case with a moving input would tell them apart"
            ));
        }
        let mut text = format!(
            "the rows fit {label}: the largest residual is {} of what digits and rounding allow",
            share(own.fit.ratio)
        );
        if !ruled_out.is_empty() {
            text += &format!("; {} methods are ruled out at any step", ruled_out.len());
        }
        if own.reading != Reading::AtNodes {
            text += &format!("; inputs {}", reading(own.reading));
        }
        return all(Support::Agrees, text);
    }
    if claimed.adaptive {
        return cannot(format!(
            "a run with an error setting chooses its own steps; rows of every accepted step with \
             all states would show whether {name} made them"
        ));
    }
    if evidence.is_skipped(claimed.methods, claimed.steps) {
        let other = |family: &&Family| {
            let names = |m: &&Method| !claimed.is_claimed(m);
            let bounded = evidence.exact.residual <= 1.0;
            bounded && family.is_beyond_chance() && family.methods.iter().all(names)
        };
        if let Some(family) = evidence.consistent.iter().find(other) {
            let text = format!(
                "the rows fit {}, not {name}",
                family_at(family, claimed.time_unit)
            );
            return all(Support::Contradicts, text);
        }
        return cannot(format!(
            "the rows are too few for every form of {name} to be run beside them; write more \
             rows, or every step"
        ));
    }
    let off = own.map_or(String::new(), |own| {
        format!(
            " (off by {}, {} times what digits and rounding allow)",
            of_peak(own.fit.residual),
            short(own.fit.ratio)
        )
    });
    if own.is_none() && claimed.step.is_some() {
        if claimed.steps.is_none() {
            if let Some(family) = at_no_such_step(evidence, claimed) {
                let own = family.methods.iter().any(|m| claimed.is_claimed(m));
                let method = if own {
                    Support::Agrees
                } else {
                    Support::Contradicts
                };
                return Answer {
                    support: Support::Contradicts,
                    method: Some(method),
                    step: Some(Support::Contradicts),
                    text: no_such_step(family, claimed),
                };
            }
            return cannot(format!(
                "rows do not lie a whole number of steps of {} {} apart; write rows at steps",
                plain(claimed.step.unwrap_or_default()),
                claimed.time_unit
            ));
        }
        return cannot(format!(
            "{label} cannot be run beside these rows; write every state, and rows without gaps from the start on"
        ));
    }
    // A solver that stops early leaves a residual that something free enough may fit.
    let implicit = own.is_some() && claimed.is_iterated();
    let exactly = evidence.exact.residual / evidence.exact.ratio;
    let stopped_early = own.filter(|own| {
        let loose = own.fit.residual <= of_iteration(own.steps)
            && own.fit.astray <= of_iteration(own.steps).sqrt()
            && !evidence
                .consistent
                .iter()
                .any(|f| binds(f, own) && is_sharp(f, own))
            && !is_undone(evidence, own)
            && elsewhere(evidence, claimed, own).is_none()
            && !(evidence.is_exact() && own.fit.residual > 2.0 * exactly);
        let explained = evidence.is_exact() || !evidence.consistent.is_empty();
        implicit && explained && (loose || own.fit.residual <= LAST_DIGITS)
    });
    if let Some(own) = stopped_early {
        return cannot(early(own, &label));
    }
    // Something else explains the rows to the last digit.
    let closer_to_exact =
        || format!("the values are closer to the exact solution than {label} can come{off}");
    if evidence.is_exact() && claimed.step.is_some() {
        return all(Support::Contradicts, closer_to_exact());
    }
    let explains = |family: &Family| {
        // An iteration that stops early leaves most where rows move most.
        let loose = |own: &&Tried| implicit && own.fit.residual <= of_iteration(own.steps);
        if own.filter(loose).is_some_and(|own| !is_sharp(family, own)) {
            return false;
        }
        let bound = |own| (family.free || family.is_told()) && binds(family, own);
        family.is_beyond_chance() || (claimed.step.is_some() && own.is_some_and(bound))
    };
    let is_claimed = |m: &&'static Method| claimed.is_claimed(m);
    let named = |family: &&Family| {
        let plain =
            !family.free && (family.is_told() || own.is_some_and(|own| far_closer(family, own)));
        family.methods.iter().any(is_claimed) && (explains(family) || plain)
    };
    let at_other_step = own
        .and_then(|own| elsewhere(evidence, claimed, own))
        .or_else(|| evidence.consistent.iter().find(named))
        .map(|family| family.steps);
    // Rows that some start meets, if ever so few of them, for the very method claimed.
    let meets = |skipped: &&Skipped| {
        skipped.fit.compared > 0
            && skipped.steps <= Family::MANY_STEPS
            && is_claimed(&skipped.method)
            && own.is_some_and(|own| skipped.fit.residual <= BY_CHANCE_FEW * own.fit.residual)
    };
    let at_other_step =
        at_other_step.or_else(|| evidence.skipped.iter().find(meets).map(|s| s.steps));
    if let (Some(other), Some(stated)) = (at_other_step, claimed.step) {
        let step = stated * claimed.steps.unwrap_or_default() as f64 / other as f64;
        let step = format!(" {} {}", short(step), claimed.time_unit);
        let text = format!(
            "the rows fit {name} at step{step}, not {} {}{off}",
            plain(stated),
            claimed.time_unit
        );
        return Answer {
            support: Support::Contradicts,
            method: Some(Support::Agrees),
            step: Some(Support::Contradicts),
            text,
        };
    }
    // What fits by chance, or with a start of its own choosing, is no name for the rows.
    let mut others = evidence.consistent.iter();
    if let Some(family) = others.find(|family| explains(family)) {
        let text = format!(
            "the rows fit {}, not {label}{off}",
            family_at(family, claimed.time_unit)
        );
        return all(Support::Contradicts, text);
    }
    let Some(own) = own else {
        return cannot(format!("nothing could be compared with {label}"));
    };
    if implicit && claimed.step.is_some() && is_undone(evidence, own) {
        return all(Support::Contradicts, closer_to_exact());
    }
    // Nothing fits: the claim is near, or an iteration has left its tolerance, or it is not
    // true.
    let nearest_other = evidence
        .tried
        .iter()
        .filter(|tried| !claimed.is_claimed(tried.method))
        .map(|tried| tried.fit.residual)
        .fold(evidence.exact.residual, f64::min);
    if own.fit.residual < FAR_BELOW * nearest_other {
        let text = format!(
            "the rows are close to {label}: {} of the peak away, every other method is more than \
             {} times further",
            short(own.fit.residual),
            (1.0 / FAR_BELOW).round()
        );
        return all(Support::Agrees, text);
    }
    if implicit && own.fit.residual <= of_iteration(own.steps) {
        return cannot(early(own, &label));
    }
    if own.fit.residual <= of_arithmetic(own.steps) && evidence.consistent.is_empty() {
        return cannot(format!(
            "the rows are {} of the peak away from {label}, which coarser arithmetic or constants \
             would explain; run it in double precision with the constants of the case",
            short(own.fit.residual)
        ));
    }
    if claimed.step.is_none() {
        return cannot(format!(
            "no method of the catalogue fits the rows (interpolated output, an adaptive code, or a \
             fault); state the step to have {name} tested at it"
        ));
    }
    let nor = if evidence.consistent.is_empty() {
        ", nor any method of the catalogue"
    } else {
        ""
    };
    let text = format!("the rows do not follow {label}{off}{nor}");
    all(Support::Contradicts, text)
}

pub(super) fn early(own: &Tried, label: &str) -> String {
    format!(
        "the rows are {} of the peak away from {label}, which an iteration that stops early would \
         explain; a tighter tolerance of its solver would settle it",
        short(own.fit.residual)
    )
}

#[cfg(test)]
mod tests;

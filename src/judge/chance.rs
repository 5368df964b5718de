//! What an honest program can leave of its method, and what fits rows too closely to have met
//! them by chance.

use super::claims::Claimed;
use crate::method::{Evidence, Family, Method, Reading, Tried};

/// Codes that solve implicit steps by iteration stop at tolerances up to about a third of this
/// part of the state, and leave some times their tolerance, over several steps from row to
/// row (common practice, no source).
const ITERATION: f64 = 3e-5;
/// More steps than this from row to row may leave more in proportion.
const FEW_STEPS: f64 = 5.0;

/// What an iteration that stops early may leave from row to row.
pub(super) fn of_iteration(steps: u64) -> f64 {
    ITERATION * (steps as f64 / FEW_STEPS).max(1.0)
}

/// What coarser arithmetic may leave from row to row.
pub(super) fn of_arithmetic(steps: u64) -> f64 {
    of_iteration(steps) * COARSE / ITERATION
}

/// What an iteration may leave of the peak however tight its tolerance: it stops where its
/// own roundings end.
pub(super) const LAST_DIGITS: f64 = 256.0 * f64::EPSILON;
/// A fit that leaves no more than this part of the residual of another one is not met by
/// chance, over eight comparisons or more.
const BY_CHANCE: f64 = 0.05;
/// The same for a method whose start is free to choose, over more comparisons than a few, and
/// for one that the exact solution is near to.
const BY_CHANCE_FREE: f64 = 1e-3;
/// The same over few comparisons, for the method claimed at another step.
pub(super) const BY_CHANCE_FEW: f64 = 1e-4;
/// The same for one that nothing tells from the exact solution between rows.
const FAR_CLOSER: f64 = 0.01;
/// Residuals so many times what digits and rounding allow another method are about as small.
const AS_CLOSE: f64 = 10.0;

/// Coarser arithmetic or constants of the program leave up to this part of the peak, some
/// ten roundings of single precision in every step.
const COARSE: f64 = 3e-6;
/// Where the method claimed fits at another step, so many times what digits and rounding
/// allow at the stated one is more than an iteration would leave by chance.
const BY_CHANCE_ELSEWHERE: f64 = 8.0;

/// The claimed method at another step, where that fits so much better that the stated one is
/// not it, however it was solved: what an iteration has left would have had to be the
/// difference of the two steps.
pub(super) fn elsewhere<'a>(
    evidence: &'a Evidence,
    claimed: &Claimed,
    own: &Tried,
) -> Option<&'a Family> {
    let is_claimed = |m: &&'static Method| claimed.is_claimed(m);
    let clearly = own.fit.ratio > BY_CHANCE_ELSEWHERE && claimed.step.is_some();
    evidence.consistent.iter().find(|family| {
        clearly
            && family.methods.iter().any(is_claimed)
            && family.steps != own.steps
            && is_plain(family)
            && family.apart > 1.0
    })
}

/// True where the exact solution, or a method between rows that nothing tells from it, is so
/// near to the rows that what an iteration had left would have had to undo the errors of
/// the method.
pub(super) fn is_undone(evidence: &Evidence, own: &Tried) -> bool {
    let nearest = evidence.exact.residual <= BY_CHANCE * own.fit.residual;
    let between = |family: &Family| {
        !family.free
            && family.is_compared_well()
            && is_sharp(family, own)
            && is_plain(family)
            && family.fit.residual <= FAR_CLOSER * own.fit.residual
    };
    nearest || (!own.free && evidence.consistent.iter().any(between))
}

/// True for inputs read at the stages and no more steps to a row than tell a method.
pub(super) fn is_plain(family: &Family) -> bool {
    family.reading == Reading::AtNodes && family.steps <= Family::MANY_STEPS
}

/// True where a step of the method has to be solved for.
pub(super) fn is_implicit(method: &Method) -> bool {
    method.schemes.iter().any(|scheme| scheme.is_implicit())
}

/// True where a family fits so closely that what an iteration had left would have had to
/// hit it by chance: the exact solution is no such family, see `Evidence::is_exact`.
pub(super) fn binds(family: &Family, own: &Tried) -> bool {
    if family.free {
        family.apart > 1.0 && family.is_compared_well() && far_closer(family, own)
    } else {
        closer(family, own, BY_CHANCE)
    }
}

/// True where a family that has a wide bound comes about as close to the rows as the digits
/// let a claimed method come, or far closer than that does.
pub(super) fn is_sharp(family: &Family, own: &Tried) -> bool {
    let digits = own.fit.residual / own.fit.ratio;
    family.fit.residual <= AS_CLOSE * digits || far_closer(family, own)
}

/// True where a family comes so much closer to the rows that even a free start would not do so
/// by chance.
pub(super) fn far_closer(family: &Family, own: &Tried) -> bool {
    closer(family, own, BY_CHANCE_FREE)
}

fn closer(family: &Family, own: &Tried, by_chance: f64) -> bool {
    is_plain(family)
        && (family.fit.residual <= by_chance * own.fit.residual
            || family.fit.astray <= by_chance * own.fit.astray)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::judge::planted::{beside, claimed, family, fit, method, tried};

    #[test]
    fn iteration_and_arithmetic_leave_more_over_more_than_five_steps() {
        for (steps, iteration, arithmetic) in [
            (1, 3e-5, 3e-6),
            (5, 3e-5, 3e-6),
            (10, 6e-5, 6e-6),
            (50, 3e-4, 3e-5),
        ] {
            assert!((of_iteration(steps) / iteration - 1.0).abs() < 1e-15);
            assert!((of_arithmetic(steps) / arithmetic - 1.0).abs() < 1e-15);
        }
    }

    #[test]
    fn the_claimed_method_at_another_step_speaks_against_the_stated_one() {
        let own = |ratio: f64| tried("backward Euler", 1, ratio, 1e-6);
        let other = |steps: u64| tried("backward Euler", steps, 0.5, 1e-15);
        let methods = [method("backward Euler")];
        let is_elsewhere = |own: &Tried, other: Tried| {
            let evidence = beside(vec![other]);
            elsewhere(&evidence, &claimed("backward Euler", &methods), own).is_some()
        };
        assert!(is_elsewhere(&own(8.1), other(2)));
        assert!(!is_elsewhere(&own(8.0), other(2)));
        assert!(!is_elsewhere(&own(8.1), other(1)));
        assert!(is_elsewhere(&own(8.1), other(64)));
        assert!(!is_elsewhere(&own(8.1), other(65)));
        assert!(!is_elsewhere(&own(8.1), tried("Heun", 2, 0.5, 1e-15)));
        let mut near = other(2);
        near.apart = 1.0;
        assert!(!is_elsewhere(&own(8.1), near));
        let mut held = other(2);
        held.reading = Reading::Held;
        assert!(!is_elsewhere(&own(8.1), held));
        let evidence = beside(vec![other(2)]);
        let mut stepless = claimed("backward Euler", &methods);
        stepless.step = None;
        assert!(elsewhere(&evidence, &stepless, &own(8.1)).is_none());
    }

    #[test]
    fn an_iteration_does_not_undo_the_errors_of_its_method() {
        let own = tried("backward Euler", 1, 1e3, 1e-6);
        let mut evidence = beside(vec![]);
        assert!(!is_undone(&evidence, &own));
        // A twentieth of the residual.
        evidence.exact = fit(9.0, 0.049e-6);
        assert!(is_undone(&evidence, &own));
        evidence.exact = fit(9.0, 0.051e-6);
        assert!(!is_undone(&evidence, &own));
        // A method nothing tells from it, a hundred times closer and as close as digits allow.
        let with = |change: &dyn Fn(&mut Tried)| {
            let mut other = tried("Heun", 1, 0.5, 0.99e-8);
            change(&mut other);
            let mut evidence = beside(vec![other]);
            evidence.exact = fit(9.0, 1.0);
            is_undone(&evidence, &own)
        };
        assert!(with(&|_| ()));
        assert!(!with(&|other| other.fit.residual = 1.01e-8));
        assert!(!with(&|other| other.free = true));
        assert!(!with(&|other| other.fit.compared = 15));
        assert!(!with(&|other| other.reading = Reading::Held));
        assert!(!with(&|other| other.steps = 65));
        // Digits that let the claimed method come no closer than 1e-7 leave the hundredth alone.
        let coarse = tried("backward Euler", 1, 10.0, 1e-6);
        for (residual, undone) in [(0.99e-8, true), (1.01e-8, false)] {
            let mut evidence = beside(vec![tried("Heun", 1, 0.5, residual)]);
            evidence.exact = fit(9.0, 1.0);
            assert_eq!(is_undone(&evidence, &coarse), undone, "{residual}");
        }
        let mut free = own.clone();
        free.free = true;
        let evidence = beside(vec![tried("Heun", 1, 0.5, 0.99e-8)]);
        assert!(!is_undone(&evidence, &free));
        // Its digits would let the claimed method come to 1e-10, ten times that is as close.
        let sharp = tried("backward Euler", 1, 1e4, 1e-6);
        let (close, far) = (tried("Heun", 1, 0.5, 0.99e-9), tried("Heun", 1, 0.5, 2e-9));
        assert!(is_sharp(&family(&close), &sharp) && !is_sharp(&family(&far), &sharp));
        assert!(is_undone(&beside(vec![close]), &sharp));
        let mut other = beside(vec![far]);
        other.exact = fit(9.0, 1.0);
        assert!(!is_undone(&other, &sharp));
    }

    #[test]
    fn what_binds_is_closer_than_by_chance() {
        let own = tried("backward Euler", 1, 1e6, 1e-3);
        let one = |residual: f64, astray: f64, change: &dyn Fn(&mut Family)| {
            let mut found = family(&tried("Heun", 1, 0.5, residual));
            found.fit.astray = astray;
            change(&mut found);
            (binds(&found, &own), far_closer(&found, &own))
        };
        let plain = |_: &mut Family| ();
        assert_eq!(one(0.049e-3, 1.0, &plain), (true, false));
        assert_eq!(one(0.051e-3, 1.0, &plain), (false, false));
        assert_eq!(one(1.0, 0.049e-3, &plain), (true, false));
        assert_eq!(one(1.0, 0.051e-3, &plain), (false, false));
        assert_eq!(one(0.99e-6, 1.0, &plain), (true, true));
        assert_eq!(one(1.0, 0.99e-6, &plain), (true, true));
        assert_eq!(one(1.01e-6, 1.0, &plain), (true, false));
        assert_eq!(
            one(1e-9, 1.0, &|f| f.reading = Reading::Mean),
            (false, false)
        );
        assert_eq!(one(1e-9, 1.0, &|f| f.steps = 65), (false, false));
        // A start that is free to choose has to be told from the exact solution, over many rows.
        let free = |f: &mut Family| (f.free, f.apart) = (true, 1.01);
        assert_eq!(one(0.99e-6, 1.0, &free), (true, true));
        assert_eq!(one(1.01e-6, 1.0, &free), (false, false));
        assert!(!one(0.99e-6, 1.0, &|f| (f.free, f.apart) = (true, 1.0)).0);
        let few = |f: &mut Family| (f.free, f.fit.compared) = (true, 15);
        assert!(!one(0.99e-6, 1.0, &few).0);
    }
}

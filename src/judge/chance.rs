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

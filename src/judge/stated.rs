//! The stated step by itself: where no method is claimed, and where the rows do not lie a whole
//! number of such steps apart.

use super::claims::{Answer, Claimed, Support};
use super::words::family_at;
use crate::method::{Evidence, Family};
use crate::number::plain;

/// Steps that differ by less may be one, stated to a few digits.
const NEAR_STEP: f64 = 0.05;

/// What has written the rows beyond chance, at a step that the stated one, of which the rows
/// do not lie a whole number apart, is not even near to.
pub(super) fn at_no_such_step<'a>(evidence: &'a Evidence, claimed: &Claimed) -> Option<&'a Family> {
    let stated = claimed.step.filter(|_| !claimed.adaptive)?;
    let apart = |family: &&Family| {
        let step = family.step.filter(|_| family.is_beyond_chance());
        step.is_some_and(|step| (step / stated - 1.0).abs() > NEAR_STEP)
    };
    evidence.consistent.iter().find(apart)
}

pub(super) fn no_such_step(family: &Family, claimed: &Claimed) -> String {
    format!(
        "the rows fit {}, and do not lie a whole number of steps of {} {} apart",
        family_at(family, claimed.time_unit),
        plain(claimed.step.unwrap_or_default()),
        claimed.time_unit
    )
}

/// A step without a method: what the consistent methods say.
///
/// A method that nobody named may be one that the catalogue does not hold. Only a fit that
/// no such method would meet by chance speaks against the step.
pub(super) fn of_step_alone(evidence: &Evidence, claimed: &Claimed) -> Option<Answer> {
    let stated = claimed.step?;
    if evidence.is_exact() || claimed.adaptive {
        return None;
    }
    let answer = |support: Support, text: String| Answer {
        support,
        method: None,
        step: Some(support),
        text,
    };
    let Some(steps) = claimed.steps else {
        let family = at_no_such_step(evidence, claimed)?;
        return Some(answer(Support::Contradicts, no_such_step(family, claimed)));
    };
    let at = |family: &Family| {
        family.steps == steps || (family.range.0..=family.range.1).contains(&steps)
    };
    let family = evidence.consistent.first()?;
    if evidence.consistent.iter().all(at) && family.is_told() {
        let text = format!("the rows fit {}", family_at(family, claimed.time_unit));
        return Some(answer(Support::Agrees, text));
    }
    let mut families = evidence.consistent.iter();
    let family = families.find(|family| family.is_beyond_chance())?;
    if evidence.consistent.iter().any(at) {
        return None;
    }
    let text = format!(
        "the rows fit {}, and no method at step {} {}",
        family_at(family, claimed.time_unit),
        plain(stated),
        claimed.time_unit
    );
    Some(answer(Support::Contradicts, text))
}

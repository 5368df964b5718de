//! Sentences: what, where, how to mend it.

use crate::judge::{OrderVerdict, Verdict};
use crate::number::{measured, plain, short};
use crate::outcome::ErrorOutcome;
use crate::trajectory::Finding;

/// A fault of a file that it cannot pass with.
pub fn fatal_finding(file: &str, finding: &Finding) -> String {
    match finding.line {
        Some(line) => format!("{file}:{line}: {}", finding.text),
        None => format!("{file}: {}", finding.text),
    }
}

/// A channel without a single value.
pub fn without_values(file: &str, channel: &str) -> String {
    format!("{file}: `{channel}` has no values to compare")
}

/// A limit that is broken; `observed` is the order and the step of the run, from which
/// a step follows that would keep it.
pub fn limit_broken(
    file: &str,
    channel: &str,
    unit: &str,
    time_unit: &str,
    errors: &ErrorOutcome,
    observed: Option<(f64, f64)>,
) -> String {
    let mut text = format!(
        "{file}: `{channel}` is off by {} {unit} at t = {} {time_unit}, {} times the limit",
        measured(errors.worst, errors.resolution),
        plain(errors.at),
        short(errors.limit_used),
    );
    if let Some((order, step)) = observed
        && order > 0.3
        && errors.limit_used.is_finite()
    {
        // A tenth is left for the error to be not quite as regular as its order.
        let needed = 0.9 * step * errors.limit_used.powf(-1.0 / order);
        text += &format!(
            "; at the order {order:.1} seen, a step of {} would keep it",
            short_step(needed)
        );
    }
    text
}

/// A limit that the digits are too few for.
pub fn limit_hidden(file: &str, channel: &str, unit: &str, errors: &ErrorOutcome) -> String {
    format!(
        "{file}: `{channel}` is printed too coarsely to tell: {} resolve {} {unit}, the limit is {} {unit} \
         and the error {} {unit}; print more digits",
        errors.digits,
        short(errors.resolution),
        short(errors.limit),
        measured(errors.worst, errors.resolution),
    )
}

/// An order that does not pass.
pub fn order_reason(channel: &str, claimed: f64, order: &OrderVerdict) -> Option<String> {
    let note = order.note.as_deref();
    match (order.verdict?, &order.finest) {
        (Verdict::Pass, _) => None,
        (Verdict::Fail, Some(pair)) => {
            let mut text = format!(
                "`{channel}` shows order {:.2} ({:.2} to {:.2}) from {} runs, {} is claimed",
                pair.order,
                pair.low,
                pair.high,
                order.rungs_used,
                plain(claimed),
            );
            if let Some(note) = note {
                text += &format!("; {note}");
            }
            Some(text)
        }
        _ => {
            let why = note.unwrap_or("too few runs count");
            Some(format!(
                "`{channel}`: the claimed order {} cannot be told: {why}",
                plain(claimed)
            ))
        }
    }
}

/// A step for a sentence: two digits, rounded down.
fn short_step(step: f64) -> String {
    let unit = 10f64.powf(step.log10().floor() - 1.0);
    short((step / unit).floor() * unit)
}

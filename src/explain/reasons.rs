//! Sentences: what, where, how to mend it.

use super::advice::measured_step;
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

/// Where a sentence points.
#[derive(Clone, Copy, Debug)]
pub struct Place<'a> {
    /// The file.
    pub file: &'a str,
    /// The channel.
    pub channel: &'a str,
    /// Its unit.
    pub unit: &'a str,
    /// The unit of time of the case.
    pub time_unit: &'a str,
}

/// A channel without a single value.
pub fn without_values(place: &Place) -> String {
    format!(
        "{}: `{}` has no values to compare",
        place.file, place.channel
    )
}

/// A limit that is broken; `observed` is the order and the step of the run, from which
/// a step follows that would keep it.
pub fn limit_broken(place: &Place, errors: &ErrorOutcome, observed: Option<(f64, f64)>) -> String {
    let Place {
        file,
        channel,
        unit,
        time_unit,
    } = place;
    let row = &errors.decisive;
    let mut text = format!(
        "{file}: `{channel}` is off by {} {unit} at t = {} {time_unit}, {}",
        measured(row.error, row.resolution),
        plain(row.at),
        share_of_limit(errors.limit_used),
    );
    if let Some((order, step)) = observed
        && let Some(needed) = measured_step(step, errors.limit_used, order)
    {
        text += &format!(
            "; at the order {order:.1} seen, a step of {} {time_unit} would keep it",
            plain(needed)
        );
    }
    text
}

fn share_of_limit(used: f64) -> String {
    if used.is_infinite() {
        "where no error is allowed".to_owned()
    } else if used < 10.0 {
        format!("{:.0} % of the limit", 100.0 * used)
    } else {
        format!("{} times the limit", short(used))
    }
}

/// A limit that the digits are too few for.
pub fn limit_hidden(place: &Place, errors: &ErrorOutcome, stamps: &str) -> String {
    let Place {
        file,
        channel,
        unit,
        time_unit,
    } = place;
    let row = &errors.doubtful;
    let text = format!(
        "{file}: `{channel}` cannot be told at t = {} {time_unit}: an error of {} {unit} against a \
         limit of {} {unit}, known to {} {unit} only",
        plain(row.at),
        measured(row.error, row.resolution),
        short(row.limit),
        short(row.resolution),
    );
    let text = format!("{text} (values: {}; time stamps: {stamps})", errors.digits);
    if errors.digits.contains("double") && (stamps.contains("double") || stamps.contains("exact")) {
        format!("{text}; the limit lies at the rounding of double precision")
    } else {
        // Two digits below the limit leave a hundredth of it open.
        let more = (row.resolution / row.limit).log10().ceil().max(0.0) + 2.0;
        let (values_full, stamps_exact) =
            (errors.digits.contains("double"), stamps.contains("exact"));
        let what = match (values_full, stamps_exact) {
            (true, _) => "the time stamps",
            (false, true) => "the values",
            (false, false) => "both",
        };
        if more.is_finite() {
            format!("{text}; print {what} to {more} digits more")
        } else {
            format!("{text}; no number of digits would do for a limit of zero")
        }
    }
}

/// An order that does not pass.
pub fn order_reason(channel: &str, claimed: f64, order: &OrderVerdict) -> Option<String> {
    let note = order.note.as_deref();
    match (order.verdict?, &order.finest) {
        (Verdict::Pass, _) => None,
        (Verdict::Fail, Some(pair)) => {
            let mut text = format!(
                "`{channel}` shows order {:.2}{} from {} runs, {} is claimed",
                pair.order,
                interval(pair.low, pair.high),
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

/// An interval where it says more than the value itself.
fn interval(low: f64, high: f64) -> String {
    if high - low < 0.015 {
        String::new()
    } else {
        format!(" ({low:.2} to {high:.2})")
    }
}

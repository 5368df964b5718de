//! Errors, verdicts and orders of channels, beside the earlier ones.

use super::{Sink, Way, paired, way_of_verdict};
use crate::number::{measured, plain, short};
use crate::outcome::ChangeKind;
use crate::report::{ChannelReport, OrderReport, RunReport, SubmissionReport};

/// Orders are told to two places, and another rung moves them by some hundredths: what
/// fell by less is no change of method.
const LEAST_FALL: f64 = 0.05;

/// The channels of one run.
pub(super) fn channels(before: &RunReport, after: &RunReport, worse_by: f64, sink: &mut Sink) {
    let (pairs, _) = paired(&before.channels, &after.channels, |one| one.name.clone());
    for (then, now) in pairs {
        let vanished = |sink: &mut Sink, text: String| {
            let numbers = [then.worst_error, None];
            let kind = ChangeKind::ChannelVanished;
            sink.tell_of(Way::Worse, kind, Some(&then.name), numbers, text);
        };
        let name = &then.name;
        let Some(now) = now else {
            vanished(sink, format!("channel `{name}` is not there any more"));
            continue;
        };
        if then.unit != now.unit {
            let (unit, was) = (&now.unit, &then.unit);
            let text = format!("channel `{name}` is in {unit} now, in {was} earlier: not compared");
            vanished(sink, text);
            continue;
        }
        // A rung has no limits to keep.
        let results = before.role == "result" && after.role == "result";
        if results && let Some(way) = way_of_verdict(&then.verdict, &now.verdict) {
            let text = format!(
                "`{name}`: the verdict is {}, was {}",
                now.verdict, then.verdict
            );
            // Nothing is better for being measured by a wider limit.
            let way = match way {
                Way::Better if is_wider(then, now) => Way::Other,
                way => way,
            };
            sink.tell_of(way, ChangeKind::Verdict, Some(name), [None, None], text);
        }
        if results && is_wider(then, now) {
            let (new, old) = (now.limit.unwrap_or(0.0), then.limit.unwrap_or(0.0));
            let text = format!(
                "`{name}`: the limit is {} {unit}, was {} {unit}",
                short(new),
                short(old),
                unit = now.unit
            );
            let numbers = [then.limit, now.limit];
            sink.tell_of(Way::Other, ChangeKind::Limits, Some(name), numbers, text);
        }
        errors(then, now, worse_by, sink);
    }
}

/// True where a channel is allowed more than it was. Relative limits are those of the row with
/// the worst error, which may have moved: a tenth is no change of limits.
fn is_wider(then: &ChannelReport, now: &ChannelReport) -> bool {
    let limits = then.limit.zip(now.limit);
    limits.is_some_and(|(old, new)| new > 1.1 * old)
}

/// Which way an error went. It has to leave what both files resolve, and the share.
fn way_of_error(then: &ChannelReport, now: &ChannelReport, worse_by: f64) -> Option<Way> {
    let (old, new) = match (then.worst_error, now.worst_error) {
        (Some(old), Some(new)) => (old.abs(), new.abs()),
        // No values, or values beyond all numbers.
        (Some(_), None) => return Some(Way::Worse),
        (None, Some(_)) => return Some(Way::Better),
        (None, None) => return None,
    };
    let doubt = then.resolution.unwrap_or(0.0).abs() + now.resolution.unwrap_or(0.0).abs();
    let grew = |old: f64, new: f64| new - old > doubt && new > old * (1.0 + worse_by);
    if grew(old, new) {
        Some(Way::Worse)
    } else if grew(new, old) {
        Some(Way::Better)
    } else {
        None
    }
}

fn errors(then: &ChannelReport, now: &ChannelReport, worse_by: f64, sink: &mut Sink) {
    let Some(way) = way_of_error(then, now, worse_by) else {
        return;
    };
    let error = |one: &ChannelReport| {
        let doubt = one.resolution.unwrap_or(0.0);
        one.worst_error.map(|error| measured(error.abs(), doubt))
    };
    let name = &then.name;
    let text = match (error(then), error(now)) {
        (Some(old), Some(new)) => {
            let ratio = match (then.worst_error, now.worst_error) {
                (Some(old), Some(new)) if old != 0.0 && new != 0.0 && way == Way::Worse => {
                    format!(" ({} times)", short((new / old).abs()))
                }
                _ => String::new(),
            };
            let unit = &now.unit;
            format!("`{name}` is off by {new} {unit}, was off by {old} {unit}{ratio}")
        }
        (Some(old), None) => {
            let unit = &then.unit;
            format!("`{name}` has no error that is a number, was off by {old} {unit}")
        }
        (_, new) => {
            let (new, unit) = (new.unwrap_or_default(), &now.unit);
            format!("`{name}` is off by {new} {unit}, had no error that is a number")
        }
    };
    let numbers = [then.worst_error, now.worst_error];
    sink.tell_of(way, ChangeKind::Error, Some(name), numbers, text);
}

/// What a ladder shows of an order.
enum Seen {
    Exact,
    Order(f64, f64, f64),
    Nothing,
}

impl Seen {
    fn of(order: &OrderReport) -> Seen {
        let note = order.note.as_deref().unwrap_or_default();
        match order.observed {
            // An end of the interval that is absent lies beyond all numbers.
            Some(value) => Seen::Order(
                value,
                order.low.unwrap_or(f64::NEG_INFINITY),
                order.high.unwrap_or(f64::INFINITY),
            ),
            None if note.starts_with("exact") => Seen::Exact,
            None => Seen::Nothing,
        }
    }

    fn text(&self) -> String {
        match self {
            Seen::Exact => "no error to see an order in".to_owned(),
            Seen::Order(value, ..) => format!("order {value:.2}"),
            Seen::Nothing => "no order".to_owned(),
        }
    }
}

fn way_of_order(then: &Seen, now: &Seen) -> Option<Way> {
    match (then, now) {
        (Seen::Order(old, old_low, old_high), Seen::Order(new, new_low, new_high)) => {
            if new_high < old_low && old - new > LEAST_FALL {
                Some(Way::Worse)
            } else if old_high < new_low && new - old > LEAST_FALL {
                Some(Way::Better)
            } else {
                None
            }
        }
        (Seen::Exact, Seen::Exact) | (Seen::Nothing, Seen::Nothing) => None,
        (Seen::Exact, _) | (_, Seen::Nothing) => Some(Way::Worse),
        (_, Seen::Exact) => Some(Way::Better),
        // Good or bad, its verdict says.
        (Seen::Nothing, Seen::Order(..)) => Some(Way::Other),
    }
}

/// The orders of all channels.
pub(super) fn orders(before: &SubmissionReport, after: &SubmissionReport, sink: &mut Sink) {
    let (pairs, _) = paired(&before.orders, &after.orders, |one| one.channel.clone());
    for (then, now) in pairs {
        let name = then.channel.as_str();
        let Some(now) = now else {
            gone(then, sink);
            continue;
        };
        let (old, new) = (Seen::of(then), Seen::of(now));
        if let Some(way) = way_of_order(&old, &new) {
            let mut text = format!("`{name}` shows {}, showed {}", new.text(), old.text());
            if let Some(note) = now.note.as_deref().filter(|_| way == Way::Worse) {
                text += &format!("; {note}");
            }
            let numbers = [then.observed, now.observed];
            sink.tell_of(way, ChangeKind::Order, Some(name), numbers, text);
        }
        if let (Some(old), Some(new)) = (&then.verdict, &now.verdict)
            && let Some(way) = way_of_verdict(old, new)
        {
            let text = format!("`{name}`: the verdict on the order is {new}, was {old}");
            sink.tell_of(way, ChangeKind::Verdict, Some(name), [None, None], text);
        }
        claimed(then, now, sink);
    }
}

/// A channel without an order, unless it is told already that the channel is gone.
fn gone(then: &OrderReport, sink: &mut Sink) {
    let name = then.channel.as_str();
    let told = sink.changes.worse.iter().any(|change| {
        change.kind == ChangeKind::ChannelVanished
            && change.submission == sink.submission
            && change.channel.as_deref() == Some(name)
    });
    if !told {
        let text = format!("channel `{name}` has no ladder to see an order in any more");
        let numbers = [then.observed, None];
        let kind = ChangeKind::ChannelVanished;
        sink.tell_of(Way::Worse, kind, Some(name), numbers, text);
    }
}

/// An order that less is claimed of is easier to reach.
fn claimed(then: &OrderReport, now: &OrderReport, sink: &mut Sink) {
    let name = then.channel.as_str();
    let (way, text) = match (then.claimed, now.claimed) {
        (Some(old), Some(new)) if new != old => {
            let way = if new < old { Way::Worse } else { Way::Other };
            (
                way,
                format!("{} is claimed, {} was", plain(new), plain(old)),
            )
        }
        (Some(old), None) => (Way::Worse, format!("none is claimed, {} was", plain(old))),
        _ => return,
    };
    let text = format!("order of `{name}`: {text}");
    let numbers = [then.claimed, now.claimed];
    sink.tell_of(way, ChangeKind::Claim, Some(name), numbers, text);
}

#[cfg(test)]
mod tests {
    use super::*;

    fn channel(worst_error: Option<f64>, resolution: f64) -> ChannelReport {
        ChannelReport {
            name: "air".to_owned(),
            unit: "degC".to_owned(),
            worst_error,
            at: None,
            rms_error: None,
            end_error: None,
            peak: None,
            resolution: Some(resolution),
            digits: None,
            limit: None,
            limit_used: None,
            limit_used_at: None,
            verdict: "pass".to_owned(),
        }
    }

    #[test]
    fn an_error_has_to_leave_both_resolutions_and_the_share() {
        for (old, new, resolution, way) in [
            (Some(1.0), Some(1.19), 1e-3, None),
            (Some(1.0), Some(1.21), 1e-3, Some(Way::Worse)),
            (Some(1.21), Some(1.0), 1e-3, Some(Way::Better)),
            // Half a unit either side: 0.2 is not beyond 0.1 and 0.1.
            (Some(0.1), Some(0.3), 0.1, None),
            (Some(0.1), Some(0.31), 0.1, Some(Way::Worse)),
            (Some(0.0), Some(0.01), 1e-3, Some(Way::Worse)),
            (Some(0.0), Some(0.001), 1e-3, None),
            (Some(0.0), Some(0.0), 0.0, None),
            (Some(1.0), None, 0.0, Some(Way::Worse)),
            (None, Some(1.0), 0.0, Some(Way::Better)),
            (None, None, 0.0, None),
        ] {
            let found = way_of_error(&channel(old, resolution), &channel(new, resolution), 0.2);
            assert_eq!(found, way, "{old:?} {new:?} {resolution}");
        }
    }

    #[test]
    fn an_order_has_to_leave_both_intervals() {
        let order = |value: f64, half: f64| Seen::Order(value, value - half, value + half);
        let endless = |value: f64| Seen::Order(value, f64::NEG_INFINITY, f64::INFINITY);
        for (then, now, way) in [
            (order(2.0, 0.1), order(1.9, 0.1), None),
            (order(2.0, 0.1), order(1.0, 0.1), Some(Way::Worse)),
            (order(1.0, 0.1), order(2.0, 0.1), Some(Way::Better)),
            (order(2.0, 0.001), order(1.97, 0.001), None),
            (endless(2.0), order(1.0, 0.1), None),
            (order(2.0, 0.1), endless(1.0), None),
            (Seen::Exact, order(2.0, 0.1), Some(Way::Worse)),
            (order(2.0, 0.1), Seen::Nothing, Some(Way::Worse)),
            (order(2.0, 0.1), Seen::Exact, Some(Way::Better)),
            (Seen::Nothing, order(2.0, 0.1), Some(Way::Other)),
            (Seen::Nothing, Seen::Nothing, None),
        ] {
            assert_eq!(
                way_of_order(&then, &now),
                way,
                "{} {}",
                then.text(),
                now.text()
            );
        }
    }
}

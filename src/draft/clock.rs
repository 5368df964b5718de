//! The stamps of a file against the window of a case: in which unit of time they cover it.

use super::look::Clock;
use crate::case::Case;
use crate::number::{Conversion, Double};
use crate::outcome::Cover;
use crate::submission::convert;

/// Units of time that are tried where the file names none.
const UNITS: [&str; 8] = ["s", "ms", "min", "h", "us", "d", "ns", "a"];
/// Stamps may miss the ends of the window by so many steps, or by this part of it.
const SLACK_STEPS: f64 = 1.5;
const SLACK_PART: f64 = 0.05;
/// Rows within the window, where the stamps go on beyond it.
const LEAST_ROWS: usize = 8;
/// A shorter part of the window tells nothing.
const LEAST_PART: f64 = 0.05;

/// One reading of the stamps.
#[derive(Clone, Debug)]
pub(super) struct Frame {
    /// Place among the clocks of the file.
    pub clock: usize,
    /// The unit that has to be stated.
    pub unit: Option<String>,
    /// To the unit of the case.
    pub conversion: Conversion,
    pub cover: Cover,
}

/// Every reading that is worth a look: those that cover the window, else those that go on
/// beyond its end, else those that cover a part of it.
pub(super) fn frames(case: &Case, clocks: &[Clock]) -> Vec<Frame> {
    let mut frames: Vec<Frame> = Vec::new();
    for (index, clock) in clocks.iter().enumerate() {
        for (unit, conversion) in readings(case, clock) {
            let new = |frame: &&Frame| frame.clock == index && frame.conversion == conversion;
            if frames.iter().any(|frame| new(&frame)) {
                continue;
            }
            if let Some(cover) = cover(case, clock, conversion) {
                frames.push(Frame {
                    clock: index,
                    unit,
                    conversion,
                    cover,
                });
            }
        }
    }
    let best = |cover| frames.iter().any(|frame| frame.cover == cover);
    let wanted = [Cover::Whole, Cover::Longer, Cover::Part];
    let wanted = wanted.into_iter().find(|&cover| best(cover));
    frames.retain(|frame| Some(frame.cover) == wanted);
    frames
}

/// Units with their conversions: what the header says, else that of the case first.
fn readings(case: &Case, clock: &Clock) -> Vec<(Option<String>, Conversion)> {
    let target = &case.time.unit;
    if let Some(unit) = &clock.unit {
        // What is no unit of time is refused by the audit too.
        return convert(unit, target)
            .map(|conversion| vec![(None, conversion)])
            .unwrap_or_default();
    }
    let hint = clock.hint.as_deref();
    let tried = hint.into_iter().chain([target.as_str()]).chain(UNITS);
    let read = |unit: &str| {
        let conversion = convert(unit, target).ok()?;
        let stated = (!conversion.is_none()).then(|| unit.to_owned());
        Some((stated, conversion))
    };
    tried.filter_map(read).collect()
}

fn cover(case: &Case, clock: &Clock, conversion: Conversion) -> Option<Cover> {
    let (from, to) = (case.time.from.to_f64(), case.time.to.to_f64());
    let span = to - from;
    let at = |stamp: f64| conversion.apply(Double::from(stamp)).to_f64();
    let (first, last) = (at(clock.first), at(clock.last));
    let spacing = (last - first) / clock.rows.saturating_sub(1).max(1) as f64;
    let slack = (SLACK_STEPS * spacing).min(SLACK_PART * span);
    let rises = last > first;
    if first > from + slack || !rises {
        return None;
    }
    let inside = |time: &&Double| {
        let time = conversion.apply(**time).to_f64();
        (from..=to).contains(&time)
    };
    if first < from - slack || last > to + slack {
        let enough = clock.times.iter().filter(inside).count() >= LEAST_ROWS;
        return (enough && last >= to - slack).then_some(Cover::Longer);
    }
    if last >= to - slack {
        return Some(Cover::Whole);
    }
    (last - first >= LEAST_PART * span).then_some(Cover::Part)
}

//! Jumps of inputs that fall between steps or at stages, and what a step that ends at them
//! would have left.

use super::bench::{Gap, Rows, Stepping, Way, stopping_at, trajectory};
use super::{Candidate, Kind, Names};
use crate::method::{Linear, Side, Sides};
use crate::number::{plain, short};

/// Jumps that a step passes over, or that its last stage already sees: what is written fits
/// the method as it is, and a step that ends at the jump would leave far less.
pub(super) fn jumps(linear: &Linear, rows: &Rows, names: &Names, way: &Way) -> Vec<Candidate> {
    let Way::Stepped(stepping) = way else {
        return Vec::new();
    };
    let Some(plain_values) = trajectory(linear, rows, way) else {
        return Vec::new();
    };
    let step = stepping.step;
    let mut jumps = Vec::new();
    let mut next = linear.next_jump(linear.window.0 + 1e-6 * step);
    while let Some(jump) = next.filter(|&jump| jump < linear.window.1 && jumps.len() < 1000) {
        if linear.leaps_at(jump) {
            jumps.push(jump);
        }
        next = linear.next_jump(jump + 1e-9 * step);
    }
    let off = |jump: f64| {
        let count = (jump - linear.window.0) / step;
        (count - count.round()).abs() > 1e-6
    };
    let error = |values: &[f64]| -> f64 {
        let mut worst = 0.0f64;
        for (at, value) in values.iter().enumerate() {
            let gap = (value - rows.exact[at]).abs()
                / rows.peaks[at % rows.width()].max(f64::MIN_POSITIVE);
            worst = worst.max(gap);
        }
        worst
    };
    let plain_error = error(&plain_values);
    let mut found = Vec::new();
    if let Some(&first) = jumps.iter().find(|&&jump| off(jump)) {
        let smoothed = stopping_at(linear, rows, stepping, &jumps);
        if smoothed.is_some_and(|values| error(&values) < 0.25 * plain_error) {
            let text = format!(
                "an input jumps at t = {} {}, between two steps of {} {}: first order, whatever the \
                 method; let a step end there",
                plain(first),
                names.time_unit,
                short(step),
                names.time_unit
            );
            found.push(Candidate::new(
                Kind::JumpOffGrid,
                0,
                Some(first),
                plain_values.clone(),
                text,
            ));
        }
    } else if let Some(&first) = jumps.first() {
        let own = Stepping {
            sides: Sides::Own,
            ..stepping.clone()
        };
        let own = trajectory(linear, rows, &Way::Stepped(own));
        if own.is_some_and(|values| error(&values) < 0.25 * plain_error) {
            let what = match stepping.sides {
                Sides::Before => {
                    "at the start of a step whose first stage still sees the old value: first order, \
                     though the step hits the jump; take the value after it in the step that begins \
                     there"
                }
                Sides::After | Sides::Own => {
                    "at the end of a step whose last stage already sees the new value: first order, \
                     though the step hits the jump; take the value before it in the step that ends \
                     there"
                }
            };
            let text = format!(
                "an input jumps at t = {} {}, {what}",
                plain(first),
                names.time_unit
            );
            found.push(Candidate::new(
                Kind::JumpAtStage,
                0,
                Some(first),
                plain_values,
                text,
            ));
        }
    }
    found
}

/// Jumps on the grid of the steps at which a program has seen the value of one side here
/// and of the other there, as sums of steps do: up to the first jump the rows are those of
/// the method, and with the value of each step itself it would have left far less.
pub(super) fn wrong_side(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    stepping: &Stepping,
    before: Gap,
) -> Option<Candidate> {
    let step = stepping.step;
    let first = linear.next_jump(linear.window.0 + 1e-6 * step)?;
    let count = (first - linear.window.0) / step;
    if !linear.leaps_at(first) || (count - count.round()).abs() > 1e-6 {
        return None;
    }
    let own = Stepping {
        sides: Sides::Own,
        ..stepping.clone()
    };
    let values = trajectory(linear, rows, &Way::Stepped(own))?;
    let mut early = values.clone();
    for (row, line) in early.chunks_exact_mut(rows.width()).enumerate() {
        if rows.times[row] >= first - 0.5 * step {
            line.fill(f64::NAN);
        }
    }
    if !rows.gap(&early).is_closed() || rows.error_of(&values) > 0.25 * before.share {
        return None;
    }
    let text = format!(
        "inputs jump at steps (first at t = {} {}), and stages see the value of the wrong side: sums \
         of steps fall short of a jump or beyond it; take the value before it in the step that ends \
         there and the value after it in the step that begins there",
        plain(first),
        names.time_unit
    );
    Some(Candidate::new(
        Kind::JumpAtStage,
        0,
        Some(first),
        values,
        text,
    ))
}

impl Linear {
    /// True where an input takes a new value, not only a new slope.
    fn leaps_at(&self, time: f64) -> bool {
        let near = 1e-12 * time.abs();
        self.signals
            .iter()
            .any(|signal| signal.at(time, Side::After, near) != signal.at(time, Side::Before, near))
    }
}

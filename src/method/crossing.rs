//! Steps that touch a jump of an input: what a method does there depends on the side that it
//! sees, so each is tried with all of them.
//!
//! A program that restarts at a jump off its grid takes steps of its own there: only jumps
//! on the grid of the steps say something.

use super::exponential::exponential;
use super::linear::{Linear, Side};
use super::march::{NEAR, Sides};
use super::record::{Piece, Record, Window};
use super::scale::Rows;
use super::sheet::Sheet;
use super::trial::{Fit, Room, Trial};

/// Intervals that are compared at most, and steps that one of them may take.
const MOST_INTERVALS: usize = 24;
const MOST_STEPS: u64 = 2000;

/// How far the rows leave the exact solution in the steps at jumps, in terms of what their
/// digits resolve: as far as the side that a method sees can be told from it.
pub(super) fn kicked(linear: &Linear, record: &Record) -> f64 {
    let onward = record.spacing.zip(record.states(linear.size()));
    let onward = onward.and_then(|((spacing, _), places)| {
        let onward = exponential(&linear.matrix.dense(), spacing)?;
        Some((onward.past.into_iter().next()?, places))
    });
    let Some((onward, places)) = onward else {
        return 0.0;
    };
    let peaks = record.peaks();
    let mut most = 0.0f64;
    for window in &record.windows {
        for row in 1..window.rows() {
            let near = NEAR * (window.times[row] - window.times[row - 1]);
            let (from, to) = (window.times[row - 1] - near, window.times[row] + near);
            if !record.follows(window, row) || !linear.jumps_within(from, to) {
                continue;
            }
            let at = |values: &[f64], row: usize| -> Vec<f64> {
                let line = &values[row * record.width()..];
                places.iter().map(|&place| line[place]).collect()
            };
            let carried = onward.apply(&at(&window.errors, row - 1));
            let doubts = onward.map(f64::abs).apply(&at(&window.doubts, row - 1));
            let (errors, own) = (at(&window.errors, row), at(&window.doubts, row));
            for (i, &place) in places.iter().enumerate() {
                let noise = own[i] + doubts[i] + 32.0 * record.unit * peaks[place];
                most = most.max((errors[i] - carried[i]).abs() / noise);
            }
        }
    }
    most
}

impl Trial<'_> {
    /// Compares the rows before and after every jump, for a method without a memory and a
    /// file with every state.
    pub(super) fn across_jumps(&self, sheet: &Sheet) -> Fit {
        let (record, peaks) = (&sheet.record, &sheet.peaks);
        let size = self.linear.size();
        let Some(places) = record.states(size) else {
            return Fit::NOTHING;
        };
        if self.leg.recurrence.back() > 1 || self.leg.steps > MOST_STEPS {
            return Fit::NOTHING;
        }
        let rows = Rows { record, places };
        let mut intervals = Vec::new();
        for window in &record.windows {
            let touched = (0..window.rows().saturating_sub(1))
                .filter(|&row| record.follows(window, row + 1) && self.meets_jump(window, row));
            intervals.extend(touched.map(|row| (window, row)));
        }
        let stride = intervals.len() / MOST_INTERVALS + 1;
        let mut fit = Fit::NOTHING;
        for &(window, row) in intervals.iter().step_by(stride) {
            let sides = [Sides::After, Sides::Own, Sides::Before];
            let tried = sides.map(|sides| self.over(&rows, window, row, peaks, sides));
            let best = tried.into_iter().min_by(|a, b| a.ratio.total_cmp(&b.ratio));
            fit = fit.and(best.unwrap_or(Fit::NOTHING));
        }
        fit
    }

    /// True where jumps lie between a row and the next or at them, and all of them on the
    /// grid of the steps.
    fn meets_jump(&self, window: &Window, row: usize) -> bool {
        let step = self.leg.recurrence.step;
        let near = NEAR * step;
        let (from, to) = (window.times[row] - near, window.times[row + 1] + near);
        let mut time = from.next_down();
        let mut met = false;
        while let Some(jump) = self.linear.next_jump(time).filter(|jump| *jump <= to) {
            let count = (jump - window.times[row]) / step;
            if (count - count.round()).abs() > 2.0 * NEAR {
                return false;
            }
            (met, time) = (true, jump);
        }
        met
    }

    fn over(&self, rows: &Rows, window: &Window, row: usize, peaks: &[f64], sides: Sides) -> Fit {
        let time = window.times[row];
        let piece = Piece {
            window: 0,
            start: row,
            rows: 2,
        };
        let mut scale = rows.scale(self.linear, window, piece);
        let mut before = vec![0.0; self.linear.size()];
        for time in &window.times[row..row + 2] {
            let near = NEAR * self.leg.recurrence.step;
            self.linear.forcing(*time, Side::Before, near, &mut before);
            scale.see_forcing(&before);
        }
        let states = rows.values(window, row);
        let mut predicted = states.clone();
        self.advance(
            &mut Room::default(),
            &mut predicted,
            time,
            self.leg.steps,
            sides,
        );
        let rounding = self.rounding(&scale, time, window.first + row as u64);
        let rounding: Vec<f64> = rounding.collect();
        let (doubts, next_doubts) = (rows.doubts(window, row), rows.doubts(window, row + 1));
        let (next, rates) = (rows.values(window, row + 1), rows.rates(window, piece, row));
        let stamp = 2.0 * f64::EPSILON * window.times[row + 1].abs() + scale.spacing_doubt;
        let mut fit = Fit::NOTHING;
        for (i, line) in self.across().rows().enumerate() {
            let carried = line.iter().zip(&doubts).map(|(m, d)| m.abs() * d);
            let allowed = next_doubts[i] + rounding[i] + rates[i] * stamp + carried.sum::<f64>();
            let residual = (next[i] - predicted[i]).abs();
            if residual.is_finite() {
                fit.add(residual, allowed, peaks[i]);
            }
        }
        fit
    }
}

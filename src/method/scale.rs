//! What roundings are relative to: how large states and forcing become, how fast they
//! move, and the rows that this is read from.

use super::linear::{Linear, Side};
use super::record::{Piece, Record, Window};

/// The largest states and forcing within a piece, which roundings are relative to.
#[derive(Clone, Debug)]
pub(super) struct Scale {
    pub(super) states: Vec<f64>,
    pub(super) forcing: Vec<f64>,
    pub(super) slopes: Vec<f64>,
    pub(super) time_doubt: f64,
    pub(super) spacing_doubt: f64,
}

impl Scale {
    pub(super) fn of_start(linear: &Linear, start: &[f64], record: &Record) -> Scale {
        let mut scale = Scale {
            states: start.iter().map(|x| x.abs()).collect(),
            forcing: vec![0.0; linear.size()],
            slopes: vec![0.0; linear.size()],
            time_doubt: 0.0,
            spacing_doubt: record.spacing.map_or(0.0, |(_, doubt)| doubt),
        };
        let mut forcing = vec![0.0; linear.size()];
        linear.forcing(linear.window.0, Side::After, 0.0, &mut forcing);
        scale.see_forcing(&forcing);
        scale
    }

    pub(super) fn see(&mut self, state: &[f64]) {
        larger(&mut self.states, state);
    }

    pub(super) fn see_forcing(&mut self, forcing: &[f64]) {
        larger(&mut self.forcing, forcing);
    }

    pub(super) fn see_slopes(&mut self, slopes: &[f64]) {
        larger(&mut self.slopes, slopes);
    }
}

fn larger(into: &mut [f64], values: &[f64]) {
    for (largest, value) in into.iter_mut().zip(values) {
        *largest = largest.max(value.abs());
    }
}

/// Rows of a record with every state.
pub(super) struct Rows<'a> {
    pub(super) record: &'a Record,
    pub(super) places: Vec<usize>,
}

impl Rows<'_> {
    pub(super) fn values(&self, window: &Window, row: usize) -> Vec<f64> {
        let line = &window.values[row * self.record.width()..];
        self.places.iter().map(|&place| line[place]).collect()
    }

    pub(super) fn doubts(&self, window: &Window, row: usize) -> Vec<f64> {
        let line = &window.doubts[row * self.record.width()..];
        self.places.iter().map(|&place| line[place]).collect()
    }

    pub(super) fn scale(&self, linear: &Linear, window: &Window, piece: Piece) -> Scale {
        let start = self.values(window, piece.start);
        let mut scale = Scale::of_start(linear, &start, self.record);
        scale.forcing.fill(0.0);
        let mut forcing = vec![0.0; linear.size()];
        for row in piece.start..piece.start + piece.rows {
            scale.see(&self.values(window, row));
            linear.forcing(window.times[row], Side::After, 0.0, &mut forcing);
            scale.see_forcing(&forcing);
            linear.forcing_slope(window.times[row], Side::After, 0.0, &mut forcing);
            scale.see_slopes(&forcing);
            scale.time_doubt = scale.time_doubt.max(window.time_doubts[row]);
        }
        scale
    }

    /// How fast each state moves about a row.
    pub(super) fn rates(&self, window: &Window, piece: Piece, row: usize) -> Vec<f64> {
        let mut rates = vec![0.0f64; self.places.len()];
        let first = row.saturating_sub(1).max(piece.start);
        let last = (row + 1).min(piece.start + piece.rows - 1);
        (first..last).for_each(|at| self.see_rate(window, at, &mut rates));
        rates
    }

    pub(super) fn steepest(&self, window: &Window, piece: Piece) -> Vec<f64> {
        let mut steepest = vec![0.0f64; self.places.len()];
        let rows = piece.start..piece.start + piece.rows - 1;
        rows.for_each(|row| self.see_rate(window, row, &mut steepest));
        steepest
    }

    /// How fast each state moves from a row to the next, where that is faster.
    fn see_rate(&self, window: &Window, row: usize, rates: &mut [f64]) {
        let gap = window.times[row + 1] - window.times[row];
        let (before, after) =
            window.values[row * self.record.width()..].split_at(self.record.width());
        for (rate, &place) in rates.iter_mut().zip(&self.places) {
            *rate = rate.max((after[place] - before[place]).abs() / gap);
        }
    }
}

impl Linear {
    /// What noise of the states can do to a channel.
    pub(super) fn observe_noise(
        &self,
        channel: usize,
        noise: &[f64],
        unit: f64,
        states: &[f64],
    ) -> f64 {
        let output = channel
            .checked_sub(self.size())
            .and_then(|o| self.outputs.get(o));
        let Some((row, _, _)) = output else {
            return noise.get(channel).copied().unwrap_or(0.0);
        };
        let terms = row.iter().zip(noise).zip(states);
        terms
            .map(|((c, noise), state)| c.abs() * (noise + 8.0 * unit * state))
            .sum()
    }
}

//! A method at work: step after step over a linear model.

use std::collections::VecDeque;

use super::linear::{Linear, Side};
use super::recurrence::Recurrence;

/// Which value a program sees where a node falls on a jump of an input.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sides {
    /// Always the value after it, as a formula `t >= at` gives it.
    After,
    /// Always the value before it, as a formula `t > at` gives it.
    Before,
    /// That of the step itself: before it at the end of a step, after it at its start.
    Own,
}

/// Steps of equal length from given states.
#[derive(Clone, Debug)]
pub struct March<'a> {
    recurrence: &'a Recurrence,
    linear: &'a Linear,
    sides: Sides,
    /// Jumps this near to a node are at it.
    near: f64,
    /// The states that the next step needs, oldest first.
    history: VecDeque<Vec<f64>>,
    /// Time of the newest of them, counted in steps from a fixed time.
    origin: f64,
    count: u64,
    forcing: Vec<f64>,
}

/// Nodes and jumps that lie closer than this, in steps, are taken to coincide: sums of
/// many steps miss the jump by their rounding, on either side.
pub const NEAR: f64 = 1e-6;

impl<'a> March<'a> {
    /// From as many states as the method needs, oldest first, one step apart; the newest
    /// is at `origin + count * step`.
    pub fn new(
        recurrence: &'a Recurrence,
        linear: &'a Linear,
        sides: Sides,
        states: impl IntoIterator<Item = Vec<f64>>,
        origin: f64,
        count: u64,
    ) -> March<'a> {
        March {
            recurrence,
            linear,
            sides,
            near: NEAR * recurrence.step,
            history: states.into_iter().collect(),
            origin,
            count,
            forcing: vec![0.0; linear.size()],
        }
    }

    /// The newest state.
    pub fn state(&self) -> &[f64] {
        self.history.back().map_or(&[], Vec::as_slice)
    }

    /// The states that the next step needs, oldest first.
    pub fn history(&self) -> impl Iterator<Item = &Vec<f64>> {
        self.history.iter()
    }

    /// Its time.
    pub fn time(&self) -> f64 {
        self.origin + self.count as f64 * self.recurrence.step
    }

    /// One step on.
    pub fn step(&mut self) -> &[f64] {
        let recurrence = self.recurrence;
        let mut next = vec![0.0; self.linear.size()];
        for (matrix, state) in recurrence.past.iter().zip(&self.history) {
            for (sum, row) in next.iter_mut().zip(matrix.rows()) {
                *sum += row.iter().zip(state).map(|(m, x)| m * x).sum::<f64>();
            }
        }
        let time = self.time();
        add_forcing(
            recurrence,
            self.linear,
            self.sides,
            time,
            self.near,
            &mut self.forcing,
            &mut next,
        );
        // The oldest gives its place to the newest.
        self.history.pop_front();
        self.history.push_back(next);
        self.count += 1;
        self.state()
    }
}

/// Adds what the forcing does in the step that starts at a time.
pub fn add_forcing(
    recurrence: &Recurrence,
    linear: &Linear,
    sides: Sides,
    time: f64,
    near: f64,
    forcing: &mut [f64],
    into: &mut [f64],
) {
    for node in &recurrence.nodes {
        let side = match sides {
            Sides::After => Side::After,
            Sides::Before => Side::Before,
            Sides::Own if node.at > 0.999_999 => Side::Before,
            Sides::Own => Side::After,
        };
        let at = time + node.at * recurrence.step;
        if node.slope {
            linear.forcing_slope(at, side, near, forcing);
        } else {
            linear.forcing(at, side, near, forcing);
        }
        for (sum, row) in into.iter_mut().zip(node.weight.rows()) {
            *sum += row.iter().zip(&*forcing).map(|(w, g)| w * g).sum::<f64>();
        }
    }
}

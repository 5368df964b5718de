//! A case as a time-stepping program sees it: matrices in `f64`, inputs as functions of
//! time with a value on either side of a jump.

use std::sync::Arc;

use super::shelf::{Section, Shelf};
use crate::case::{Case, Shape};
use crate::number::Matrix;

/// Which value of an input counts at the instant of a jump.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// The value before it.
    Before,
    /// The value after it, as in the exact solution.
    After,
}

/// `x' = A x + B u(t) + constant`, outputs `C x + D u + constant`, in `f64`.
///
/// # Units
/// Those of the case.
#[derive(Clone, Debug)]
pub struct Linear {
    /// `A`, states by states.
    pub matrix: Matrix<f64>,
    /// `B`, one row for each state.
    pub drive: Vec<Vec<f64>>,
    /// Constant part of the rates.
    pub constant: Vec<f64>,
    /// States at the start of the window.
    pub start: Vec<f64>,
    /// Start and end of the window.
    pub window: (f64, f64),
    /// Inputs.
    pub signals: Vec<Signal>,
    /// Rows over states of every output, the same over inputs, and its constant.
    pub outputs: Vec<(Vec<f64>, Vec<f64>, f64)>,
    /// Steps of methods over it that were worked out before.
    pub(super) legs: Section,
}

/// One input in `f64`.
#[derive(Clone, Debug, PartialEq)]
pub enum Signal {
    /// A value that jumps: value before the first edge, edges and the values from there on.
    Held(f64, Vec<(f64, f64)>),
    /// Pulses of a height: first, width, period, count.
    Pulses(f64, f64, f64, f64, f64),
    /// Straight lines: knots and values; the nearest value outside.
    Lines(Vec<(f64, f64)>),
    /// A slope from a time on.
    Ramp(f64, f64),
    /// `amplitude * sin(rate * t + phase)`.
    Sine(f64, f64, f64),
    /// `scale * exp(rate * t)`.
    Exponential(f64, f64),
    /// Lowest power first.
    Polynomial(Vec<f64>),
}

impl Linear {
    /// The case in `f64`.
    pub fn new(case: &Case) -> Linear {
        let size = case.states.len();
        let numbers = |coefficients: &[crate::number::Double]| -> Vec<f64> {
            coefficients.iter().map(|c| c.to_f64()).collect()
        };
        let mut matrix = Matrix::zero(size);
        let mut drive = Vec::with_capacity(size);
        for (i, state) in case.states.iter().enumerate() {
            let row = numbers(&state.rate.coefficients);
            for (j, &entry) in row.iter().take(size).enumerate() {
                matrix[(i, j)] = entry;
            }
            drive.push(row[size.min(row.len())..].to_vec());
        }
        let output = |output: &crate::case::Output| {
            let row = numbers(&output.value.coefficients);
            let (states, inputs) = row.split_at(size.min(row.len()));
            let constant = output.value.constant.to_f64();
            (states.to_vec(), inputs.to_vec(), constant)
        };
        Linear {
            matrix,
            drive,
            constant: case
                .states
                .iter()
                .map(|s| s.rate.constant.to_f64())
                .collect(),
            start: case.states.iter().map(|s| s.start.to_f64()).collect(),
            window: (case.time.from.to_f64(), case.time.to.to_f64()),
            signals: case.inputs.iter().map(|i| Signal::new(&i.shape)).collect(),
            outputs: case.outputs.iter().map(output).collect(),
            legs: Section::default(),
        }
    }

    /// The same with a shelf for the steps of methods over it.
    pub fn on(mut self, shelf: &Arc<Shelf>) -> Linear {
        self.legs = Section::on(shelf);
        self
    }

    /// True where no mode moves by itself: some power of the matrix is zero, as with chains of
    /// integrators.
    pub fn stands_still(&self) -> bool {
        let (mut power, mut exponent) = (self.matrix.clone(), 1);
        while exponent < self.size() {
            power = power.product(&power);
            exponent *= 2;
        }
        power.rows().flatten().all(|&entry| entry == 0.0)
    }

    /// Number of states.
    pub fn size(&self) -> usize {
        self.start.len()
    }

    /// True where no input moves between its jumps.
    pub fn is_steady(&self) -> bool {
        self.signals.iter().all(Signal::is_steady)
    }

    /// `B u(t) + constant`; a jump within `near` of the time counts as at it.
    pub fn forcing(&self, time: f64, side: Side, near: f64, into: &mut [f64]) {
        into.copy_from_slice(&self.constant);
        for (index, signal) in self.signals.iter().enumerate() {
            let value = signal.at(time, side, near);
            if value != 0.0 {
                for (rate, row) in into.iter_mut().zip(&self.drive) {
                    *rate += row[index] * value;
                }
            }
        }
    }

    /// The rate of change of [`Linear::forcing`].
    pub fn forcing_slope(&self, time: f64, side: Side, near: f64, into: &mut [f64]) {
        into.fill(0.0);
        for (index, signal) in self.signals.iter().enumerate() {
            let slope = signal.slope(time, side, near);
            if slope != 0.0 {
                for (rate, row) in into.iter_mut().zip(&self.drive) {
                    *rate += row[index] * slope;
                }
            }
        }
    }

    /// Values of chosen channels (states, then outputs) from the states.
    pub fn observe(&self, channel: usize, states: &[f64], time: f64, side: Side, near: f64) -> f64 {
        let Some((row, direct, constant)) = channel
            .checked_sub(self.size())
            .and_then(|o| self.outputs.get(o))
        else {
            return states.get(channel).copied().unwrap_or(f64::NAN);
        };
        let from_states: f64 = row.iter().zip(states).map(|(c, x)| c * x).sum();
        let inputs = direct.iter().zip(&self.signals);
        let from_inputs: f64 = inputs
            .filter(|(d, _)| **d != 0.0)
            .map(|(d, signal)| d * signal.at(time, side, near))
            .sum();
        from_states + from_inputs + constant
    }

    /// What a change of the states does to a channel.
    pub fn observe_change(&self, channel: usize, change: &dyn Fn(usize) -> f64) -> f64 {
        match channel
            .checked_sub(self.size())
            .and_then(|o| self.outputs.get(o))
        {
            Some((row, _, _)) => row.iter().enumerate().map(|(i, c)| c * change(i)).sum(),
            None => change(channel),
        }
    }
}

impl Signal {
    fn new(shape: &Shape) -> Signal {
        let pairs = |times: &[crate::number::Double], values: &[crate::number::Double]| {
            let pairs = times.iter().zip(values);
            pairs.map(|(t, v)| (t.to_f64(), v.to_f64())).collect()
        };
        match shape {
            Shape::Constant { value } => Signal::Held(value.to_f64(), Vec::new()),
            Shape::Step { height, at } => Signal::Held(0.0, vec![(at.to_f64(), height.to_f64())]),
            Shape::Ramp { slope, from } => Signal::Ramp(slope.to_f64(), from.to_f64()),
            Shape::Pulse {
                height,
                from,
                width,
            } => Signal::Held(
                0.0,
                vec![
                    (from.to_f64(), height.to_f64()),
                    ((*from + *width).to_f64(), 0.0),
                ],
            ),
            Shape::PulseTrain {
                height,
                from,
                width,
                period,
                count,
            } => Signal::Pulses(
                height.to_f64(),
                from.to_f64(),
                width.to_f64(),
                period.to_f64(),
                count.map_or(f64::INFINITY, |count| count as f64),
            ),
            Shape::Sine {
                amplitude,
                angular_frequency,
                phase,
            } => Signal::Sine(
                amplitude.to_f64(),
                angular_frequency.to_f64(),
                phase.to_f64(),
            ),
            Shape::Exponential { scale, rate } => {
                Signal::Exponential(scale.to_f64(), rate.to_f64())
            }
            Shape::Polynomial { coefficients } => {
                Signal::Polynomial(coefficients.iter().map(|c| c.to_f64()).collect())
            }
            Shape::HeldSamples { times, values } => Signal::Held(0.0, pairs(times, values)),
            Shape::LinearSamples { times, values } => Signal::Lines(pairs(times, values)),
        }
    }

    /// True where it does not move between its jumps.
    pub fn is_steady(&self) -> bool {
        match self {
            Signal::Held(..) | Signal::Pulses(..) => true,
            Signal::Polynomial(coefficients) => coefficients.iter().skip(1).all(|c| *c == 0.0),
            _ => false,
        }
    }

    /// The value at a time.
    pub fn at(&self, time: f64, side: Side, near: f64) -> f64 {
        // Shifted so that what counts as at a jump falls on the wanted side of it.
        let shifted = match side {
            Side::After => time + near,
            Side::Before => time - near,
        };
        let reached = |at: f64| match side {
            Side::After => shifted >= at,
            Side::Before => shifted > at,
        };
        match self {
            Signal::Held(before, edges) => {
                let passed = edges.partition_point(|&(at, _)| reached(at));
                passed.checked_sub(1).map_or(*before, |last| edges[last].1)
            }
            Signal::Pulses(height, from, width, period, count) => {
                let number = ((shifted - from) / period).floor();
                let on = |number: f64| {
                    let begin = from + period * number;
                    number >= 0.0 && number < *count && reached(begin) && !reached(begin + width)
                };
                // The quotient may be off by one where a pulse begins.
                let any = [number - 1.0, number, number + 1.0].into_iter().any(on);
                if any { *height } else { 0.0 }
            }
            Signal::Lines(knots) => lines(knots, time),
            Signal::Ramp(slope, from) => slope * (time - from).max(0.0),
            Signal::Sine(amplitude, rate, phase) => amplitude * (rate * time + phase).sin(),
            Signal::Exponential(scale, rate) => scale * (rate * time).exp(),
            Signal::Polynomial(coefficients) => {
                coefficients.iter().rev().fold(0.0, |sum, c| sum * time + c)
            }
        }
    }

    /// Its rate of change.
    pub fn slope(&self, time: f64, side: Side, near: f64) -> f64 {
        let shifted = match side {
            Side::After => time + near,
            Side::Before => time - near,
        };
        match self {
            Signal::Held(..) | Signal::Pulses(..) => 0.0,
            Signal::Lines(knots) => {
                let right = knots.partition_point(|&(at, _)| match side {
                    Side::After => shifted >= at,
                    Side::Before => shifted > at,
                });
                match (
                    right.checked_sub(1).and_then(|l| knots.get(l)),
                    knots.get(right),
                ) {
                    (Some(left), Some(right)) => (right.1 - left.1) / (right.0 - left.0),
                    _ => 0.0,
                }
            }
            Signal::Ramp(slope, from) => {
                let on = match side {
                    Side::After => shifted >= *from,
                    Side::Before => shifted > *from,
                };
                if on { *slope } else { 0.0 }
            }
            Signal::Sine(amplitude, rate, phase) => amplitude * rate * (rate * time + phase).cos(),
            Signal::Exponential(scale, rate) => scale * rate * (rate * time).exp(),
            Signal::Polynomial(coefficients) => {
                let terms = coefficients.iter().enumerate().skip(1).rev();
                terms.fold(0.0, |sum, (power, c)| sum * time + power as f64 * c)
            }
        }
    }
}

fn lines(knots: &[(f64, f64)], time: f64) -> f64 {
    let right = knots.partition_point(|&(at, _)| at <= time);
    match (
        right.checked_sub(1).and_then(|l| knots.get(l)),
        knots.get(right),
    ) {
        (Some(left), Some(right)) => {
            let share = (time - left.0) / (right.0 - left.0);
            left.1 + share * (right.1 - left.1)
        }
        (Some(last), None) => last.1,
        (None, Some(first)) => first.1,
        (None, None) => 0.0,
    }
}

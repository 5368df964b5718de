//! The forcing of a linear model as the output of a small linear system of its own, so
//! that any number of steps over smooth inputs is one matrix: between jumps and kinks
//! `w(t + s) = exp(G s) w(t)` and the forcing is `P w`.

use super::linear::{Linear, Side, Signal};
use super::recurrence::Recurrence;
use crate::number::Matrix;

/// What the inputs look like between two of their jumps.
#[derive(Clone, Debug)]
pub struct Drive {
    /// Number of entries of `w`.
    pub size: usize,
    /// `P`: states by entries of `w`.
    pub onto: Vec<Vec<f64>>,
    /// Where each input begins in `w`; the constant part comes first.
    places: Vec<usize>,
}

impl Drive {
    /// The system behind the forcing of a model.
    pub fn new(linear: &Linear) -> Drive {
        let mut size = 1;
        let mut places = Vec::with_capacity(linear.signals.len());
        for signal in &linear.signals {
            places.push(size);
            size += signal.entries();
        }
        let row = |state: usize| {
            let mut row = vec![0.0; size];
            row[0] = linear.constant[state];
            for (input, &place) in places.iter().enumerate() {
                row[place] = linear.drive[state][input];
            }
            row
        };
        Drive {
            onto: (0..linear.size()).map(row).collect(),
            size,
            places,
        }
    }

    /// Number of entries of `w` for a model.
    pub(super) fn width(linear: &Linear) -> usize {
        1 + linear.signals.iter().map(Signal::entries).sum::<usize>()
    }

    /// `w` at a time.
    pub fn state(&self, linear: &Linear, time: f64, side: Side, near: f64) -> Vec<f64> {
        let mut state = Vec::with_capacity(self.size);
        self.extend(linear, time, side, near, &mut state);
        state
    }

    /// Puts `w` at a time behind other numbers.
    pub fn extend(
        &self,
        linear: &Linear,
        time: f64,
        side: Side,
        near: f64,
        numbers: &mut Vec<f64>,
    ) {
        numbers.push(1.0);
        for signal in &linear.signals {
            signal.entries_at(time, side, near, numbers);
        }
    }

    /// `exp(G s)`.
    fn flow(&self, linear: &Linear, shift: f64) -> Matrix<f64> {
        let mut flow = Matrix::zero(self.size);
        flow[(0, 0)] = 1.0;
        for (signal, &place) in linear.signals.iter().zip(&self.places) {
            signal.flow(shift, place, &mut flow);
        }
        flow
    }

    /// `G exp(G s)` by rows of the inputs alone: how fast they move.
    fn slope(&self, linear: &Linear, shift: f64) -> Matrix<f64> {
        let flow = self.flow(linear, shift);
        let mut slope = Matrix::zero(self.size);
        for (signal, &place) in linear.signals.iter().zip(&self.places) {
            for column in 0..self.size {
                slope[(place, column)] = match signal {
                    Signal::Held(..) | Signal::Pulses(..) => 0.0,
                    Signal::Sine(_, rate, _) => rate * flow[(place + 1, column)],
                    Signal::Exponential(_, rate) => rate * flow[(place, column)],
                    Signal::Polynomial(c) if c.len() < 2 => 0.0,
                    Signal::Lines(_) | Signal::Ramp(..) | Signal::Polynomial(_) => {
                        flow[(place + 1, column)]
                    }
                };
            }
        }
        slope
    }

    /// One step over the stack of states and `w` together.
    pub fn joined(&self, linear: &Linear, recurrence: &Recurrence) -> Matrix<f64> {
        let (size, back) = (recurrence.size(), recurrence.back());
        let stacked = size * back;
        let mut joined = Matrix::zero(stacked + self.size);
        for i in 0..stacked - size {
            joined[(i, i + size)] = 1.0;
        }
        for (j, matrix) in recurrence.past.iter().enumerate() {
            for i in 0..size {
                for k in 0..size {
                    joined[(stacked - size + i, size * j + k)] = matrix[(i, k)];
                }
            }
        }
        for node in &recurrence.nodes {
            let shift = node.at * recurrence.step;
            let there = if node.slope {
                self.slope(linear, shift)
            } else {
                self.flow(linear, shift)
            };
            for i in 0..size {
                // weight times P times what w has become there
                let mut row = vec![0.0; self.size];
                for (k, &weight) in node.weight.row(i).iter().enumerate() {
                    if weight == 0.0 {
                        continue;
                    }
                    for (entry, &p) in row.iter_mut().zip(&self.onto[k]) {
                        *entry += weight * p;
                    }
                }
                if node.slope {
                    row[0] = 0.0;
                }
                for (entry, factor) in row.iter().enumerate().filter(|(_, f)| **f != 0.0) {
                    for column in 0..self.size {
                        joined[(stacked - size + i, stacked + column)] +=
                            factor * there[(entry, column)];
                    }
                }
            }
        }
        let flow = self.flow(linear, recurrence.step);
        for i in 0..self.size {
            for j in 0..self.size {
                joined[(stacked + i, stacked + j)] = flow[(i, j)];
            }
        }
        joined
    }
}

impl Signal {
    fn entries(&self) -> usize {
        match self {
            Signal::Held(..) | Signal::Pulses(..) | Signal::Exponential(..) => 1,
            Signal::Lines(_) | Signal::Ramp(..) | Signal::Sine(..) => 2,
            Signal::Polynomial(coefficients) => coefficients.len(),
        }
    }

    fn entries_at(&self, time: f64, side: Side, near: f64, into: &mut Vec<f64>) {
        match self {
            Signal::Held(..) | Signal::Pulses(..) | Signal::Exponential(..) => {
                into.push(self.at(time, side, near));
            }
            Signal::Lines(_) | Signal::Ramp(..) => {
                into.push(self.at(time, side, near));
                into.push(self.slope(time, side, near));
            }
            Signal::Sine(amplitude, rate, phase) => {
                let (sine, cosine) = (rate * time + phase).sin_cos();
                into.push(amplitude * sine);
                into.push(amplitude * cosine);
            }
            Signal::Polynomial(coefficients) => {
                let mut derivative = coefficients.clone();
                while !derivative.is_empty() {
                    into.push(derivative.iter().rev().fold(0.0, |sum, c| sum * time + c));
                    let next = derivative.iter().enumerate().skip(1);
                    derivative = next.map(|(power, c)| power as f64 * c).collect();
                }
            }
        }
    }

    fn flow(&self, shift: f64, place: usize, flow: &mut Matrix<f64>) {
        match self {
            Signal::Held(..) | Signal::Pulses(..) => flow[(place, place)] = 1.0,
            Signal::Exponential(_, rate) => flow[(place, place)] = (rate * shift).exp(),
            Signal::Sine(_, rate, _) => {
                let (sine, cosine) = (rate * shift).sin_cos();
                flow[(place, place)] = cosine;
                flow[(place, place + 1)] = sine;
                flow[(place + 1, place)] = -sine;
                flow[(place + 1, place + 1)] = cosine;
            }
            Signal::Lines(_) | Signal::Ramp(..) | Signal::Polynomial(_) => {
                let size = self.entries();
                for i in 0..size {
                    let mut term = 1.0;
                    for j in i..size {
                        flow[(place + i, place + j)] = term;
                        term *= shift / (j - i + 1) as f64;
                    }
                }
            }
        }
    }
}

impl Drive {
    /// `G`, so that `w' = G w` between jumps and kinks.
    pub fn generator(&self, linear: &Linear) -> Matrix<f64> {
        let mut generator = Matrix::zero(self.size);
        for (signal, &place) in linear.signals.iter().zip(&self.places) {
            match signal {
                Signal::Held(..) | Signal::Pulses(..) => {}
                Signal::Exponential(_, rate) => generator[(place, place)] = *rate,
                Signal::Sine(_, rate, _) => {
                    generator[(place, place + 1)] = *rate;
                    generator[(place + 1, place)] = -rate;
                }
                Signal::Lines(_) | Signal::Ramp(..) | Signal::Polynomial(_) => {
                    for i in place..place + signal.entries() - 1 {
                        generator[(i, i + 1)] = 1.0;
                    }
                }
            }
        }
        generator
    }
}

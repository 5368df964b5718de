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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Case, Replacements};
    use crate::method::catalogue::find;

    /// `x' = -2 x + y + a + b`, `y' = -y + c + d + 3`, with a sine, an exponential, a ramp and
    /// a polynomial.
    fn linear() -> Linear {
        let input =
            |name: &str, shape: &str| format!("[[inputs]]\nname = '{name}'\nunit = 'V'\n{shape}\n");
        let inputs = [
            input(
                "a",
                "shape = 'sine'\namplitude = 3\nangular_frequency = 4\nphase = 0.5",
            ),
            input("b", "shape = 'exponential'\nscale = 2\nrate = -0.5"),
            input("c", "shape = 'ramp'\nslope = 0.25\nfrom = -1"),
            input("d", "shape = 'polynomial'\ncoefficients = [1, -2, 0, 0.5]"),
        ];
        let state = |name: &str, rate: &str| {
            format!("[[states]]\nname = '{name}'\nunit = 'V'\nstart = 0\nrate = '{rate}'\n")
        };
        let text = format!(
            "title = 'trial'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 10\n{}{}{}\
             [limits]\nabsolute = 1\nrelative = 0\n",
            state("x", "-2*x + y + a + b"),
            state("y", "-y + c + d + 3"),
            inputs.concat(),
        );
        Linear::new(&Case::parse("trial", &text, &Replacements::new()).unwrap())
    }

    /// The forcing of both states by its formulas.
    fn forcing(t: f64) -> [f64; 2] {
        let x = 3.0 * (4.0 * t + 0.5).sin() + 2.0 * (-0.5 * t).exp();
        let y = 0.25 * (t + 1.0) + 1.0 - 2.0 * t + 0.5 * t.powi(3) + 3.0;
        [x, y]
    }

    fn close(found: f64, wanted: f64) {
        assert!(
            (found - wanted).abs() < 1e-12 * wanted.abs().max(1.0),
            "{found}, not {wanted}"
        );
    }

    #[test]
    fn inputs_go_on_as_their_formulas_do() {
        let linear = linear();
        let drive = Drive::new(&linear);
        // One, then 2, 1, 2 and 4 numbers.
        assert_eq!((drive.size, Drive::width(&linear)), (10, 10));
        for (time, shift) in [(0.0, 0.1), (1.5, 0.7), (2.0, 3.0)] {
            let state = drive.state(&linear, time, Side::After, 0.0);
            let later = drive.flow(&linear, shift).apply(&state);
            for (onto, wanted) in drive.onto.iter().zip(forcing(time + shift)) {
                let found = onto.iter().zip(&later).map(|(p, w)| p * w).sum();
                close(found, wanted);
            }
        }
    }

    #[test]
    fn a_step_of_states_and_inputs_is_that_of_the_formula() {
        let linear = linear();
        let drive = Drive::new(&linear);
        let (step, newest) = (0.05, 1.0);
        let coefficients = find("AB3").unwrap().schemes[0].coefficients();
        let recurrence = Recurrence::new(&coefficients, &linear, step, &Vec::new()).unwrap();
        // Oldest first.
        let states = [[0.3, -0.2], [0.5, 0.4], [0.8, -0.9]];
        let mut stack: Vec<f64> = states.concat();
        stack.extend(drive.state(&linear, newest, Side::After, 0.0));
        let found = drive.joined(&linear, &recurrence).apply(&stack);
        // x + h/12 (23 f_n - 16 f_(n-1) + 5 f_(n-2)).
        let mut wanted = states[2];
        for (back, weight) in [(0, 23.0), (1, -16.0), (2, 5.0)] {
            let [x, y] = states[2 - back];
            let [u, v] = forcing(newest - step * back as f64);
            wanted[0] += step / 12.0 * weight * (-2.0 * x + y + u);
            wanted[1] += step / 12.0 * weight * (-y + v);
        }
        for (found, wanted) in found.iter().zip([states[1], states[2], wanted].concat()) {
            close(*found, wanted);
        }
        let later = drive.state(&linear, newest + step, Side::After, 0.0);
        found[6..]
            .iter()
            .zip(&later)
            .for_each(|(found, wanted)| close(*found, *wanted));
    }
}

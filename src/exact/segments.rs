//! A case as one constant matrix over its states and the generators of its inputs,
//! with the times at which a generator is set anew.

use super::MOST_JUMPS;
use crate::case::{Case, Shape};
use crate::fault::Fault;
use crate::formula::Affine;
use crate::number::{Double, Matrix, Quad};

/// `z' = M z` between jumps; the states come first in `z`.
#[derive(Debug)]
pub(super) struct System {
    pub matrix: Matrix<Double>,
    pub start: Vec<Double>,
    pub jumps: Vec<Jump>,
    /// Every channel as a row over `z`.
    pub channels: Vec<Vec<Double>>,
    /// How many of the channels, the last ones, are outputs.
    pub outputs: usize,
    pub has_feed_through: bool,
}

/// Products that the states at all jumps may cost, so that neither time nor memory is without
/// end: some 1.5 s; 2700 jumps of 64 states, all that are allowed of 9.
const MOST_PRODUCTS: usize = 12_000_000;
/// Whole numbers of an `f64` follow each other up to here.
const LAST_NUMBER: f64 = 9_007_199_254_740_992.0;

/// Entries of `z` that take new values at one time.
#[derive(Debug)]
pub(super) struct Jump {
    pub time: Double,
    pub resets: Vec<(usize, Double)>,
}

/// The small linear system whose output is one input.
struct Generator {
    /// Rows of its matrix.
    matrix: Vec<Vec<Double>>,
    /// Its state at the start of the window.
    start: Vec<Double>,
    /// The input as a row over its state.
    output: Vec<Double>,
    /// Its state after each jump, within the window.
    jumps: Vec<(Double, Vec<Double>)>,
}

impl System {
    pub(super) fn new(case: &Case) -> Result<System, Fault> {
        let states = case.states.len();
        let (from, to) = (case.time.from, case.time.to);
        let mut generators = vec![Generator::held(Double::ONE)];
        for input in &case.inputs {
            generators.push(generator(&input.shape, from, to).ok_or_else(|| {
                let text = format!("input `{}` jumps more than {MOST_JUMPS} times", input.name);
                Fault::new(text).help("shorten the window or lengthen the period")
            })?);
        }
        let size = states + generators.iter().map(|g| g.start.len()).sum::<usize>();
        let mut matrix = Matrix::zero(size);
        let mut start: Vec<Double> = case.states.iter().map(|state| state.start).collect();
        let mut jumps = Vec::new();
        let mut offsets = Vec::new();
        for generator in &generators {
            let offset = start.len();
            offsets.push(offset);
            for (i, row) in generator.matrix.iter().enumerate() {
                for (j, &entry) in row.iter().enumerate() {
                    matrix[(offset + i, offset + j)] = entry;
                }
            }
            start.extend(&generator.start);
            for (time, values) in &generator.jumps {
                let resets = values.iter().enumerate().map(|(i, &v)| (offset + i, v));
                jumps.push(Jump {
                    time: *time,
                    resets: resets.collect(),
                });
            }
        }
        // Row over z of something affine in states and inputs: the first generator
        // is the constant one, the others follow the order of the inputs.
        let row = |affine: &Affine| {
            let mut row = vec![Double::ZERO; size];
            row[offsets[0]] = affine.constant;
            for (index, &coefficient) in affine.coefficients.iter().enumerate() {
                if index < states {
                    row[index] = coefficient;
                    continue;
                }
                let which = index - states + 1;
                for (k, &weight) in generators[which].output.iter().enumerate() {
                    row[offsets[which] + k] = coefficient * weight;
                }
            }
            row
        };
        for (i, state) in case.states.iter().enumerate() {
            for (j, entry) in row(&state.rate).into_iter().enumerate() {
                matrix[(i, j)] = entry;
            }
        }
        let unit = |index: usize| {
            let mut row = vec![Double::ZERO; size];
            row[index] = Double::ONE;
            row
        };
        let channels = (0..states)
            .map(unit)
            .chain(case.outputs.iter().map(|o| row(&o.value)));
        let channels = channels.collect();
        let direct = |c: &Double| c.to_f64() != 0.0;
        let has_feed_through = case
            .outputs
            .iter()
            .any(|output| output.value.coefficients.iter().skip(states).any(direct));
        let (jumps, outputs) = (merged(jumps)?, case.outputs.len());
        if jumps.len().saturating_mul(size * size) > MOST_PRODUCTS {
            let text = format!(
                "the inputs jump {} times, too often for states and inputs of {size} numbers",
                jumps.len()
            );
            return Err(Fault::new(text).help("shorten the window or lengthen the periods"));
        }
        Ok(System {
            matrix,
            start,
            jumps,
            channels,
            outputs,
            has_feed_through,
        })
    }
}

/// Jumps in order of time, those of one instant together.
fn merged(mut jumps: Vec<Jump>) -> Result<Vec<Jump>, Fault> {
    if jumps.len() > MOST_JUMPS {
        let text = format!(
            "the inputs jump {} times, at most {MOST_JUMPS} are allowed",
            jumps.len()
        );
        return Err(Fault::new(text).help("shorten the window or lengthen the periods"));
    }
    jumps.sort_by(|a, b| {
        a.time
            .partial_cmp(&b.time)
            .unwrap_or(std::cmp::Ordering::Equal)
    });
    let mut merged: Vec<Jump> = Vec::with_capacity(jumps.len());
    for jump in jumps {
        match merged.last_mut() {
            Some(last) if last.time == jump.time => last.resets.extend(jump.resets),
            _ => merged.push(jump),
        }
    }
    Ok(merged)
}

impl Generator {
    fn held(value: Double) -> Generator {
        Generator {
            matrix: vec![vec![Double::ZERO]],
            start: vec![value],
            output: vec![Double::ONE],
            jumps: Vec::new(),
        }
    }

    /// A constant that jumps: value before the first edge, then each edge's value.
    fn edges(
        before: Double,
        edges: impl Iterator<Item = (Double, Double)>,
        window: (Double, Double),
    ) -> Option<Generator> {
        let knots = edges.map(|(time, value)| (time, vec![value]));
        Generator::held(before).with_jumps(knots, window)
    }

    /// A straight line that is set anew: `(value, slope)` at each knot.
    fn line(
        before: Vec<Double>,
        knots: impl Iterator<Item = (Double, Vec<Double>)>,
        window: (Double, Double),
    ) -> Option<Generator> {
        let (zero, one) = (Double::ZERO, Double::ONE);
        let matrix = vec![vec![zero, one], vec![zero, zero]];
        let generator = Generator {
            matrix,
            start: before,
            output: vec![one, zero],
            jumps: Vec::new(),
        };
        generator.with_jumps(knots, window)
    }

    /// Takes in the knots of the window; those before it give the state at its start.
    fn with_jumps(
        mut self,
        knots: impl Iterator<Item = (Double, Vec<Double>)>,
        (from, to): (Double, Double),
    ) -> Option<Generator> {
        for (time, values) in knots {
            if time <= from {
                // The value of a line moves on from its knot to the window's start.
                self.start = values;
                if let [value, slope] = self.start[..] {
                    self.start[0] = value + slope * (from - time);
                }
            } else if time <= to {
                if self.jumps.len() >= MOST_JUMPS {
                    return None;
                }
                self.jumps.push((time, values));
            } else {
                break;
            }
        }
        Some(self)
    }
}

/// `None` where there are too many jumps.
fn generator(shape: &Shape, from: Double, to: Double) -> Option<Generator> {
    let (zero, one) = (Double::ZERO, Double::ONE);
    let window = (from, to);
    match shape {
        Shape::Constant { value } => Some(Generator::held(*value)),
        Shape::Step { height, at } => {
            Generator::edges(zero, std::iter::once((*at, *height)), window)
        }
        Shape::Ramp { slope, from } => {
            let knot = (*from, vec![zero, *slope]);
            Generator::line(vec![zero, zero], std::iter::once(knot), window)
        }
        Shape::Pulse {
            height,
            from,
            width,
        } => {
            let edges = [(*from, *height), (*from + *width, zero)];
            Generator::edges(zero, edges.into_iter(), window)
        }
        Shape::PulseTrain {
            height,
            from: first,
            width,
            period,
            count,
        } => {
            // Pulses that ended before the window are passed over.
            let done = ((from - *first - *width) / *period)
                .floor()
                .to_f64()
                .max(0.0);
            let count = count.map_or(f64::INFINITY, |count| count as f64);
            // From here on a pulse and the next one would have the same number.
            if done >= LAST_NUMBER && done < count {
                return None;
            }
            let mut number = done;
            let mut rising = true;
            let edges = std::iter::from_fn(|| {
                if number >= count {
                    return None;
                }
                let begin = *first + *period * Double::from(number);
                let edge = if rising {
                    (begin, *height)
                } else {
                    (begin + *width, zero)
                };
                number += if rising { 0.0 } else { 1.0 };
                rising = !rising;
                Some(edge)
            });
            Generator::edges(zero, edges, window)
        }
        Shape::Sine {
            amplitude,
            angular_frequency,
            phase,
        } => {
            let (sine, cosine) = (*angular_frequency * from + *phase).sin_cos();
            let rate = *angular_frequency;
            Some(Generator {
                matrix: vec![vec![zero, rate], vec![-rate, zero]],
                start: vec![sine, cosine],
                output: vec![*amplitude, zero],
                jumps: Vec::new(),
            })
        }
        Shape::Exponential { scale, rate } => Some(Generator {
            matrix: vec![vec![*rate]],
            start: vec![*scale * (*rate * from).exp()],
            output: vec![one],
            jumps: Vec::new(),
        }),
        Shape::Polynomial { coefficients } => Some(polynomial(coefficients, from)),
        Shape::HeldSamples { times, values } => {
            let edges = times.iter().copied().zip(values.iter().copied());
            Generator::edges(zero, edges, window)
        }
        Shape::LinearSamples { times, values } => {
            let slope = |k: usize| match (times.get(k + 1), values.get(k + 1)) {
                (Some(&time), Some(&value)) => (value - values[k]) / (time - times[k]),
                _ => zero,
            };
            let knots = (0..times.len()).map(|k| (times[k], vec![values[k], slope(k)]));
            Generator::line(vec![values[0], zero], knots, window)
        }
    }
}

/// A chain of integrators that starts at the polynomial's derivatives.
fn polynomial(coefficients: &[Double], from: Double) -> Generator {
    let size = coefficients.len();
    let mut matrix = vec![vec![Double::ZERO; size]; size];
    for (k, row) in matrix.iter_mut().enumerate() {
        if k + 1 < size {
            row[k + 1] = Double::ONE;
        }
    }
    // In quad-double: far from t = 0 the terms cancel.
    let wide = |x: Double| Quad::from(x);
    let mut derivative: Vec<Quad> = coefficients.iter().map(|&c| wide(c)).collect();
    let mut start = Vec::with_capacity(size);
    for _ in 0..size {
        // Horner's rule, then the next derivative.
        let terms = derivative.iter().rev();
        let value = terms.fold(Quad::default(), |sum, &c| sum * wide(from) + c);
        start.push(value.to_double());
        let next = derivative.iter().enumerate().skip(1);
        derivative = next
            .map(|(k, &c)| c * wide(Double::from(k as f64)))
            .collect();
    }
    let mut output = vec![Double::ZERO; size];
    output[0] = Double::ONE;
    Generator {
        matrix,
        start,
        output,
        jumps: Vec::new(),
    }
}

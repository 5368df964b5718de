//! Faults in the model that was run: inputs late, early, held or missing, scaled, a wrong start,
//! pulses that no step has seen.

use super::bench::{Gap, Rows, Way, trajectory};
use super::written::slip;
use super::{Candidate, Kind, Names, rates};
use crate::method::{Linear, Reading, Signal};
use crate::number::{beside, plain, short};

/// Every fault of this kind that could have turned the model, solved in one way, into what
/// is written. `step` is the one of the program, as far as it is known; what cannot explain
/// an error of `before` need not be among them.
pub(super) fn candidates(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    way: &Way,
    step: f64,
    before: Gap,
    rough: &rates::Rough,
) -> Vec<Candidate> {
    let mut found = Vec::new();
    found.extend(moved_inputs(linear, rows, names, way, step, before));
    found.extend(missing_inputs(linear, rows, names, way, step));
    found.extend(scaled_inputs(linear, rows, names, way));
    found.extend(held(linear, rows, names, way, step));
    found.extend(start(linear, rows, names, way));
    found.extend(rates::candidates(linear, rows, names, way, rough));
    found
}

/// Steps by which an input may be late.
const SHIFTS: [f64; 7] = [1.0, 0.5, 2.0, 3.0, 4.0, 5.0, 10.0];

/// Inputs that act early or late.
pub(super) fn moved_inputs(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    way: &Way,
    step: f64,
    before: Gap,
) -> Vec<Candidate> {
    let mut found: Vec<Candidate> = Vec::new();
    // There are many shifts: the first rows rule most of them out.
    let few = rows.few();
    let may_explain = |moved: &Linear| {
        let meets = |values: Vec<f64>| few.gap(&values).closes(before);
        matches!(way, Way::Exact) || trajectory(moved, &few, way).is_some_and(meets)
    };
    let moving: Vec<usize> = (0..linear.signals.len())
        .filter(
            |&input| !matches!(&linear.signals[input], Signal::Held(_, edges) if edges.is_empty()),
        )
        .collect();
    let mut sets: Vec<Vec<usize>> = moving.iter().map(|&input| vec![input]).collect();
    if moving.len() > 1 {
        sets.push(moving);
    }
    for inputs in sets {
        for shift in SHIFTS {
            for late in [true, false] {
                let by = if late { shift * step } else { -shift * step };
                let mut moved = linear.clone();
                for &input in &inputs {
                    moved.signals[input] = linear.signals[input].later(by);
                }
                if !may_explain(&moved) {
                    continue;
                }
                let Some(values) = trajectory(&moved, rows, way) else {
                    continue;
                };
                // To a method that looks at steps only, half a step is a whole one.
                if found.iter().any(|other| other.values == values) {
                    continue;
                }
                let list: Vec<String> = inputs
                    .iter()
                    .map(|&i| format!("`{}`", names.inputs[i]))
                    .collect();
                let steps = match shift {
                    0.5 => "half a step".to_owned(),
                    1.0 => "one step".to_owned(),
                    more => format!("{} steps", plain(more)),
                };
                let acts = if inputs.len() == 1 { "input" } else { "inputs" };
                let verb = if inputs.len() == 1 { "acts" } else { "act" };
                let mut text = format!(
                    "{acts} {} {verb} {} {} {}: {steps}",
                    list.join(", "),
                    short(by.abs()),
                    names.time_unit,
                    if late { "late" } else { "early" }
                );
                text += match (late, shift == 1.0) {
                    (true, true) => "; the value of the step before is being used",
                    (false, true) => "; the value of the next step is being used",
                    _ => "; check the times at which inputs are read",
                };
                let kind = if late {
                    Kind::InputLate
                } else {
                    Kind::InputEarly
                };
                let complexity = if inputs.len() > 1 { 2 } else { 1 };
                found.push(Candidate::new(
                    kind,
                    complexity,
                    Some(by.abs()),
                    values,
                    text,
                ));
            }
        }
    }
    found
}

fn missing_inputs(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    way: &Way,
    step: f64,
) -> Vec<Candidate> {
    let missing = |input: usize| {
        let mut without = linear.clone();
        without.signals[input] = Signal::Held(0.0, Vec::new());
        let values = trajectory(&without, rows, way)?;
        let name = &names.inputs[input];
        let width = linear.signals[input].pulse_width();
        Some(match width.filter(|&width| width < step) {
            Some(width) => Candidate::new(
                Kind::PulseMissed,
                0,
                Some(width),
                values,
                format!(
                    "the pulse of input `{name}`, {} {} wide, is stepped over: a step of {} {} never \
                     sees it; keep steps below the width, or let them end at its edges",
                    short(width),
                    names.time_unit,
                    short(step),
                    names.time_unit
                ),
            ),
            None => Candidate::new(
                Kind::InputMissing,
                0,
                None,
                values,
                format!("input `{name}` has no effect; connect it"),
            ),
        })
    };
    (0..linear.signals.len()).filter_map(missing).collect()
}

/// Inputs that act with a wrong strength: the response is linear in it.
fn scaled_inputs(linear: &Linear, rows: &Rows, names: &Names, way: &Way) -> Vec<Candidate> {
    let Some(base) = trajectory(linear, rows, way) else {
        return Vec::new();
    };
    let scaled = |input: usize| {
        let mut without = linear.clone();
        without.signals[input] = Signal::Held(0.0, Vec::new());
        let rest = trajectory(&without, rows, way)?;
        let effect: Vec<f64> = base
            .iter()
            .zip(&rest)
            .map(|(all, rest)| all - rest)
            .collect();
        let factor = share(rows, &rest, &effect)?;
        if factor.abs() < 1e-6 || (factor - 1.0).abs() < 1e-6 {
            return None;
        }
        let values = rest
            .iter()
            .zip(&effect)
            .map(|(x, e)| x + factor * e)
            .collect();
        let name = &names.inputs[input];
        let (kind, text) = if (factor + 1.0).abs() < 1e-3 {
            (
                Kind::Sign,
                format!("input `{name}` acts with the wrong sign"),
            )
        } else if let Some(slip) = slip(factor) {
            let text = format!(
                "input `{name}` acts {} times as strongly as it should, as from a slip of units \
                 ({slip}); check the number that it was given",
                short(factor)
            );
            (Kind::Unit, text)
        } else {
            let text = format!(
                "input `{name}` is multiplied by {}; check its size",
                beside(factor, factor - 1.0)
            );
            (Kind::Gain, text)
        };
        Some(Candidate::new(kind, 1, Some(factor), values, text))
    };
    (0..linear.signals.len()).filter_map(scaled).collect()
}

/// How much of an effect, on top of a base, fits the rows best.
fn share(rows: &Rows, base: &[f64], effect: &[f64]) -> Option<f64> {
    let (mut both, mut own) = (0.0, 0.0);
    for at in 0..base.len() {
        let weight = 1.0 / rows.peaks[at % rows.width()].max(f64::MIN_POSITIVE);
        both += effect[at] * weight * (rows.written[at] - base[at]) * weight;
        own += (effect[at] * weight).powi(2);
    }
    (own > 0.0).then_some(both / own)
}

/// Inputs that are held over the step though they vary.
fn held(linear: &Linear, rows: &Rows, names: &Names, way: &Way, step: f64) -> Option<Candidate> {
    if linear.is_steady() {
        return None;
    }
    let stepping = match way {
        Way::Stepped(stepping) => super::bench::Stepping {
            reading: Reading::Held,
            ..stepping.clone()
        },
        Way::Exact => super::bench::Stepping {
            reading: Reading::Held,
            ..super::bench::Stepping::all(crate::method::find("exponential Euler")?, linear, step)
                .into_iter()
                .next()?
        },
    };
    let values = trajectory(linear, rows, &Way::Stepped(stepping))?;
    Some(held_text(linear, names, step, values))
}

/// The same where the rows are known to fit it.
pub(super) fn held_as_found(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    way: &Way,
    step: f64,
) -> Option<Candidate> {
    let values = trajectory(linear, rows, way)?;
    Some(held_text(linear, names, step, values))
}

fn held_text(linear: &Linear, names: &Names, step: f64, values: Vec<f64>) -> Candidate {
    let varying: Vec<String> = linear
        .signals
        .iter()
        .zip(names.inputs)
        .filter(|(signal, _)| !signal.is_steady())
        .map(|(_, name)| format!("`{name}`"))
        .collect();
    let text = format!(
        "input {} is held over each step of {} {} though it varies: first order in the step, whatever the \
         method; read inputs at the stages of the method",
        varying.join(", "),
        short(step),
        names.time_unit
    );
    Candidate::new(Kind::InputHeld, 0, Some(step), values, text)
}

/// A wrong start of one state.
fn start(linear: &Linear, rows: &Rows, names: &Names, way: &Way) -> Vec<Candidate> {
    let Some(base) = trajectory(linear, rows, way) else {
        return Vec::new();
    };
    let one = |state: usize| {
        // The response is linear in the start: one unit more of it tells the rest.
        let unit = linear.start[state]
            .abs()
            .max(rows.peaks.iter().copied().fold(0.0, f64::max))
            .max(1.0);
        let mut moved = linear.clone();
        moved.start[state] += unit;
        let response = trajectory(&moved, rows, way)?;
        let effect: Vec<f64> = response.iter().zip(&base).map(|(r, x)| r - x).collect();
        let share = share(rows, &base, &effect)?;
        let values = base
            .iter()
            .zip(&response)
            .map(|(x, r)| x + share * (r - x))
            .collect();
        let value = linear.start[state] + share * unit;
        let least = rows.open_at_start(state).max(1e-9 * unit);
        if !share.is_finite() || (share * unit).abs() <= least {
            return None;
        }
        let text = format!(
            "`{}` starts at {} {} where the case starts it at {}",
            names.states[state].0,
            beside(value, value - linear.start[state]),
            names.states[state].1,
            plain(linear.start[state])
        );
        Some(Candidate::new(
            Kind::StartValue,
            1,
            Some(value),
            values,
            text,
        ))
    };
    (0..linear.size()).filter_map(one).collect()
}

impl Signal {
    /// The same signal some time later.
    fn later(&self, by: f64) -> Signal {
        match self {
            Signal::Held(before, edges) => Signal::Held(
                *before,
                edges.iter().map(|(at, value)| (at + by, *value)).collect(),
            ),
            Signal::Pulses(height, first, width, period, count) => {
                Signal::Pulses(*height, first + by, *width, *period, *count)
            }
            Signal::Lines(knots) => {
                Signal::Lines(knots.iter().map(|(at, v)| (at + by, *v)).collect())
            }
            Signal::Ramp(slope, from) => Signal::Ramp(*slope, from + by),
            Signal::Sine(amplitude, rate, phase) => {
                Signal::Sine(*amplitude, *rate, phase - rate * by)
            }
            Signal::Exponential(scale, rate) => {
                Signal::Exponential(scale * (-rate * by).exp(), *rate)
            }
            Signal::Polynomial(coefficients) => {
                // Horner's rule in t - by.
                let mut shifted: Vec<f64> = Vec::new();
                for &c in coefficients.iter().rev() {
                    shifted.insert(0, 0.0);
                    for place in 0..shifted.len() - 1 {
                        let next = shifted[place + 1];
                        shifted[place] -= by * next;
                    }
                    shifted[0] += c;
                }
                Signal::Polynomial(shifted)
            }
        }
    }

    /// How long it stays away from its rest, where it is a pulse.
    fn pulse_width(&self) -> Option<f64> {
        match self {
            Signal::Pulses(_, _, width, _, _) => Some(*width),
            Signal::Held(before, edges) => match edges[..] {
                [(from, _), (to, back)] if back == *before => Some(to - from),
                _ => None,
            },
            _ => None,
        }
    }
}

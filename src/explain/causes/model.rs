//! Faults in the model that was run: inputs late, early, held or missing, a wrong start, a
//! rate scaled, jumps between steps or at stages, pulses that no step has seen.

use super::bench::{Gap, Rows, Way, trajectory};
use super::written::slip;
use super::{Candidate, FOUND, Kind, Names};
use crate::method::{Linear, Reading, Signal};
use crate::number::{plain, short};

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
    rough: &Rough,
) -> Vec<Candidate> {
    let mut found = Vec::new();
    found.extend(moved_inputs(linear, rows, names, way, step, before));
    found.extend(missing_inputs(linear, rows, names, way, step));
    found.extend(scaled_inputs(linear, rows, names, way));
    found.extend(held(linear, rows, names, way, step));
    found.extend(start(linear, rows, names, way));
    found.extend(rates(linear, rows, names, way, rough));
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
    let mut found = Vec::new();
    // There are many shifts: the first rows rule most of them out.
    let few = rows.few();
    let closes = |gap: Gap| gap.is_closed() || gap.share <= FOUND * before.share;
    let may_explain = |moved: &Linear| {
        let meets = |values: Vec<f64>| closes(few.gap(&values));
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
                short(factor)
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
            short(value),
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

/// What is scaled: every rate, or that of one state.
#[derive(Clone, Copy, PartialEq)]
enum Scaled {
    All,
    Time,
    One(usize),
}

impl Scaled {
    fn apply(self, linear: &Linear, factor: f64) -> Linear {
        let mut scaled = linear.clone();
        let hit = |state: usize| match self {
            Scaled::One(one) => one == state,
            Scaled::All | Scaled::Time => true,
        };
        for state in (0..linear.size()).filter(|&state| hit(state)) {
            for column in 0..linear.size() {
                scaled.matrix[(state, column)] *= factor;
            }
            if self != Scaled::Time {
                scaled.drive[state].iter_mut().for_each(|d| *d *= factor);
                scaled.constant[state] *= factor;
            }
        }
        scaled
    }
}

/// Factors that are tried before the best of them is refined.
const FACTORS: [f64; 31] = [
    1e-3,
    3e-3,
    1e-2,
    1.0 / 60.0,
    0.03,
    0.1,
    0.159,
    0.3,
    0.5,
    0.7,
    0.8,
    0.9,
    0.95,
    0.99,
    0.999,
    1.001,
    1.01,
    1.05,
    1.1,
    1.2,
    1.5,
    2.0,
    3.0,
    std::f64::consts::TAU,
    10.0,
    30.0,
    60.0,
    100.0,
    300.0,
    1000.0,
    3600.0,
];

/// What may be scaled, each with the place of the factor that fits the exact solution best:
/// methods come about as close with one near to it.
pub(super) struct Rough(Vec<(Scaled, usize)>);

/// Places to either side that a method may prefer.
const ASIDE: usize = 3;

impl Rough {
    pub(super) fn new(linear: &Linear, rows: &Rows) -> Rough {
        let mut kinds = vec![Scaled::All];
        if !linear.is_steady()
            || linear.constant.iter().any(|c| *c != 0.0)
            || !linear.signals.is_empty()
        {
            kinds.push(Scaled::Time);
        }
        if linear.size() > 1 {
            kinds.extend((0..linear.size()).map(Scaled::One));
        }
        let few = rows.few();
        let best = |scaled: Scaled| {
            let all = 0..FACTORS.len();
            let best = nearest(linear, &few, &Way::Exact, scaled, all)?;
            Some((scaled, best))
        };
        Rough(kinds.into_iter().filter_map(best).collect())
    }
}

/// How far the rows are from a model with something scaled. Squares: smooth in the factor, so
/// that it can be refined.
fn miss(linear: &Linear, few: &Rows, way: &Way, scaled: Scaled, factor: f64) -> f64 {
    let values = trajectory(&scaled.apply(linear, factor), few, way);
    values.map_or(f64::INFINITY, |values| few.squares(&values))
}

/// The best of some factors.
fn nearest(
    linear: &Linear,
    few: &Rows,
    way: &Way,
    scaled: Scaled,
    places: std::ops::Range<usize>,
) -> Option<usize> {
    let tried = places.map(|place| (place, miss(linear, few, way, scaled, FACTORS[place])));
    let best = tried.min_by(|a, b| a.1.total_cmp(&b.1))?;
    best.1.is_finite().then_some(best.0)
}

/// Rates that are scaled, by a factor that is looked for.
fn rates(linear: &Linear, rows: &Rows, names: &Names, way: &Way, rough: &Rough) -> Vec<Candidate> {
    let few = rows.few();
    let mut found = Vec::new();
    for &(scaled, rough) in &rough.0 {
        let near = rough.saturating_sub(ASIDE)..(rough + ASIDE + 1).min(FACTORS.len());
        let Some(best) = nearest(linear, &few, way, scaled, near) else {
            continue;
        };
        let low = FACTORS[best.saturating_sub(1)];
        let high = FACTORS[(best + 1).min(FACTORS.len() - 1)];
        let far = |x: f64| miss(linear, &few, way, scaled, x.exp());
        let factor = least(&far, low.ln(), high.ln()).exp();
        // Known slips are exact.
        let factor = [1e3, 60.0, 3600.0, std::f64::consts::TAU]
            .into_iter()
            .flat_map(|known| [known, 1.0 / known])
            .find(|known| (factor / known - 1.0).abs() < 2e-4)
            .unwrap_or(factor);
        if (factor - 1.0).abs() < 1e-9 {
            continue;
        }
        let Some(values) = trajectory(&scaled.apply(linear, factor), rows, way) else {
            continue;
        };
        let what = match scaled {
            Scaled::All => "every rate is".to_owned(),
            Scaled::Time => "every coefficient of the states, but not the inputs, is".to_owned(),
            Scaled::One(state) => format!("the rate of `{}` is", names.states[state].0),
        };
        let mut text = format!("{what} scaled by {}", short(factor));
        if let Some(slip) = slip(factor) {
            text += &format!(", as from a slip of units ({slip})");
        } else {
            text += "; check the parameters that go into it";
        }
        let complexity = if scaled == Scaled::All { 1 } else { 2 };
        found.push(Candidate::new(
            Kind::RateScaled,
            complexity,
            Some(factor),
            values,
            text,
        ));
    }
    found
}

/// Where a smooth function of one number is least, by golden sections and a parabola.
fn least(function: &dyn Fn(f64) -> f64, low: f64, high: f64) -> f64 {
    let golden = 0.5 * (5f64.sqrt() - 1.0);
    let (mut a, mut b) = (low, high);
    let (mut c, mut d) = (b - golden * (b - a), a + golden * (b - a));
    let (mut fc, mut fd) = (function(c), function(d));
    for _ in 0..16 {
        if fc <= fd {
            (b, d, fd) = (d, c, fc);
            c = b - golden * (b - a);
            fc = function(c);
        } else {
            (a, c, fc) = (c, d, fd);
            d = a + golden * (b - a);
            fd = function(d);
        }
    }
    // Squares are flat about their least value, where golden sections see roundings: the
    // vertices of ever narrower parabolas are known better.
    let (mut middle, mut width) = (0.5 * (a + b), (b - a).max(1e-4));
    for _ in 0..4 {
        let (left, at, right) = (
            function(middle - width),
            function(middle),
            function(middle + width),
        );
        let bend = left - 2.0 * at + right;
        if bend > 0.0 && bend.is_finite() {
            middle += (0.5 * width * (left - right) / bend).clamp(-width, width);
        }
        width *= 0.1;
    }
    middle
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

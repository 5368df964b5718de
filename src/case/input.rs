//! Inputs: the shapes a signal can have, and the rules each shape's numbers obey.

use crate::number::Double;

/// One input signal.
#[derive(Clone, Debug)]
pub struct Input {
    /// As used in formulas.
    pub name: String,
    /// As written in the case.
    pub unit: String,
    /// What it does over time.
    pub shape: Shape,
}

/// A signal over time; before a step, ramp or pulse begins it is zero, and at a jump
/// the value after it counts.
#[derive(Clone, Debug)]
#[allow(missing_docs)]
pub enum Shape {
    /// `value` at all times.
    Constant { value: Double },
    /// `height` from `at` on.
    Step { height: Double, at: Double },
    /// `slope * (t - from)` after `from`.
    Ramp { slope: Double, from: Double },
    /// `height` from `from` for `width`.
    Pulse {
        height: Double,
        from: Double,
        width: Double,
    },
    /// Pulses every `period`, `count` of them or without end.
    PulseTrain {
        height: Double,
        from: Double,
        width: Double,
        period: Double,
        count: Option<u64>,
    },
    /// `amplitude * sin(angular_frequency * t + phase)`.
    Sine {
        amplitude: Double,
        angular_frequency: Double,
        phase: Double,
    },
    /// `scale * exp(rate * t)`.
    Exponential { scale: Double, rate: Double },
    /// `sum of coefficients[k] * t^k`.
    Polynomial { coefficients: Vec<Double> },
    /// The last sample before or at `t`; zero before the first.
    HeldSamples {
        times: Vec<Double>,
        values: Vec<Double>,
    },
    /// Straight lines between the samples; the nearest sample outside.
    LinearSamples {
        times: Vec<Double>,
        values: Vec<Double>,
    },
}

impl Shape {
    /// The name in case files.
    pub fn name(&self) -> &'static str {
        match self {
            Shape::Constant { .. } => "constant",
            Shape::Step { .. } => "step",
            Shape::Ramp { .. } => "ramp",
            Shape::Pulse { .. } => "pulse",
            Shape::PulseTrain { .. } => "pulse-train",
            Shape::Sine { .. } => "sine",
            Shape::Exponential { .. } => "exponential",
            Shape::Polynomial { .. } => "polynomial",
            Shape::HeldSamples { .. } => "held-samples",
            Shape::LinearSamples { .. } => "linear-samples",
        }
    }

    /// All names, for complaints.
    pub const NAMES: [&'static str; 10] = [
        "constant",
        "step",
        "ramp",
        "pulse",
        "pulse-train",
        "sine",
        "exponential",
        "polynomial",
        "held-samples",
        "linear-samples",
    ];

    /// The numbers by the keys of case files, for printing; samples and coefficients
    /// come as lists.
    pub fn numbers(&self) -> Vec<(&'static str, Vec<f64>)> {
        let one = |key, value: &Double| (key, vec![value.to_f64()]);
        let many = |key, values: &[Double]| (key, values.iter().map(|v| v.to_f64()).collect());
        match self {
            Shape::Constant { value } => vec![one("value", value)],
            Shape::Step { height, at } => vec![one("height", height), one("at", at)],
            Shape::Ramp { slope, from } => vec![one("slope", slope), one("from", from)],
            Shape::Pulse {
                height,
                from,
                width,
            } => {
                vec![
                    one("height", height),
                    one("from", from),
                    one("width", width),
                ]
            }
            Shape::PulseTrain {
                height,
                from,
                width,
                period,
                count,
            } => {
                let mut numbers = vec![one("height", height), one("from", from)];
                numbers.extend([one("width", width), one("period", period)]);
                numbers.extend(count.map(|count| ("count", vec![count as f64])));
                numbers
            }
            Shape::Sine {
                amplitude,
                angular_frequency,
                phase,
            } => vec![
                one("amplitude", amplitude),
                one("angular_frequency", angular_frequency),
                one("phase", phase),
            ],
            Shape::Exponential { scale, rate } => vec![one("scale", scale), one("rate", rate)],
            Shape::Polynomial { coefficients } => vec![many("coefficients", coefficients)],
            Shape::HeldSamples { times, values } | Shape::LinearSamples { times, values } => {
                vec![many("times", times), many("values", values)]
            }
        }
    }

    /// What is wrong with the numbers, if anything.
    pub(super) fn complaint(&self) -> Option<&'static str> {
        let positive = |x: &Double| x.to_f64() > 0.0;
        match self {
            Shape::Pulse { width, .. } if !positive(width) => Some("`width` must be above zero"),
            Shape::PulseTrain { width, .. } if !positive(width) => {
                Some("`width` must be above zero")
            }
            Shape::PulseTrain { width, period, .. } if period <= width => {
                Some("`period` must be longer than `width`")
            }
            Shape::Polynomial { coefficients } if coefficients.is_empty() => {
                Some("`coefficients` must hold at least one number")
            }
            Shape::Polynomial { coefficients } if coefficients.len() > 16 => {
                Some("`coefficients` may hold at most 16 numbers")
            }
            Shape::HeldSamples { times, values } | Shape::LinearSamples { times, values } => {
                if times.is_empty() {
                    Some("`times` must hold at least one number")
                } else if times.len() != values.len() {
                    Some("`times` and `values` must be equally long")
                } else if times.windows(2).any(|pair| pair[0] >= pair[1]) {
                    Some("`times` must increase from each to the next")
                } else {
                    None
                }
            }
            _ => None,
        }
    }
}

//! The fastest things that a simulator of a case has to follow.

use crate::case::{Case, Shape};
use crate::number::{Matrix, approx_eigenvalues};

/// Shortest time constant and shortest period of a case.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TimeScales {
    /// `1 / |Re lambda|` of the fastest mode that decays or grows.
    pub time_constant: Option<f64>,
    /// `2 pi / |Im lambda|` of the fastest mode that turns, or the period of a sine
    /// among the inputs.
    pub period: Option<f64>,
}

/// Parts of an eigenvalue below this fraction of its size are rounding: eigenvalues of
/// a Jordan block of four are off by the fourth root of it.
const PART_OF_AN_EIGENVALUE: f64 = 1e-3;

/// The time scales of a case, from eigenvalues computed in `f64`.
///
/// # Units
/// The time unit of the case.
///
/// # Error bound
/// None: eigenvalues of nearly defective matrices keep few digits.
pub fn approx_time_scales(case: &Case) -> TimeScales {
    let size = case.states.len();
    let mut matrix = Matrix::zero(size);
    for (i, state) in case.states.iter().enumerate() {
        for (j, coefficient) in state.rate.coefficients.iter().take(size).enumerate() {
            matrix[(i, j)] = coefficient.to_f64();
        }
    }
    let eigenvalues = approx_eigenvalues(&matrix).unwrap_or_default();
    let counts = |part: f64, size: f64| part.abs() > PART_OF_AN_EIGENVALUE * size;
    let mut fastest_rate = 0.0f64;
    let mut fastest_turn = 0.0f64;
    for value in eigenvalues.iter() {
        let size = value.re.hypot(value.im);
        if counts(value.re, size) {
            fastest_rate = fastest_rate.max(value.re.abs());
        }
        if counts(value.im, size) {
            fastest_turn = fastest_turn.max(value.im.abs());
        }
    }
    for input in &case.inputs {
        if let Shape::Sine {
            angular_frequency, ..
        } = &input.shape
        {
            fastest_turn = fastest_turn.max(angular_frequency.to_f64().abs());
        }
    }
    let inverse = |rate: f64, of: f64| (rate > 0.0).then(|| of / rate).filter(|t| t.is_finite());
    TimeScales {
        time_constant: inverse(fastest_rate, 1.0),
        period: inverse(fastest_turn, 2.0 * std::f64::consts::PI),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Library, Replacements};

    fn scales(name: &str) -> TimeScales {
        approx_time_scales(&Library::new().load(name, &Replacements::new()).unwrap())
    }

    #[test]
    fn known_scales() {
        // LV02 of certified-values.json: one Jordan block with eigenvalue -1/2.
        let jordan = scales("stress/jordan-4");
        assert_eq!(jordan.period, None);
        assert!((jordan.time_constant.unwrap() - 2.0).abs() < 2e-2);
        // SO09 of published-checks.md (R): poles -2.00250078174 and -9.99749921826.
        let motor = scales("control/dc-motor");
        assert!((motor.time_constant.unwrap() - 1.0 / 9.99749921826).abs() < 1e-9);
        assert_eq!(motor.period, None);
        let undamped = scales("mechanical/oscillator-undamped");
        assert_eq!(undamped.time_constant, None);
        assert!(undamped.period.is_some());
    }
}

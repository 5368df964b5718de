//! The largest stable step of a method on a case, from the eigenvalues of the case.

use nalgebra::Complex;

use super::run::Stepper;
use crate::method::{Coefficients, Linear, Recurrence, amplification, approx_stable_length};
use crate::number::{Matrix, approx_eigenvalues};

/// Real or imaginary parts below this fraction of an eigenvalue are its rounding.
const PART: f64 = 1e-9;
/// Eigenvalues below this fraction of the matrix are rounded zeros.
const ZERO: f64 = 1e-13;
/// Rays are followed from here on.
const FIRST: f64 = 0.02;
/// A shorter length on the imaginary axis is growth so slow that rounding hides it: that
/// of the sixth power of the step passes 1e-11 near 0.07. True lengths there begin at 0.25.
const FIRST_ON_AXIS: f64 = 0.1;
/// Finite lengths end below 60; one beyond this is rounding at a great distance.
const FAR: f64 = 1e6;
/// How far from one a factor of the semi-implicit step may be by rounding.
const ROUNDING: f64 = 1e-9;

/// The largest step at which no mode of the case that stays bounded grows; `None` where
/// any step is stable, zero where none is.
///
/// # Formula
/// For every eigenvalue of `A` with `Re <= 0`, the length along its ray from
/// [`approx_stable_length`] over its magnitude; the least of them. A semi-implicit step
/// treats states differently, so its own matrix is taken instead: no more of its factors
/// may lie outside the unit circle than `A` has growing modes.
///
/// # Units
/// The time unit of the case.
///
/// # Error bound
/// None: eigenvalues are those of `f64`, and those of nearly defective matrices keep few
/// digits. An eigenvalue within 1e-9 of an axis, relative to its magnitude, is taken to lie on it.
pub fn approx_stable_step(linear: &Linear, stepper: &Stepper) -> Option<f64> {
    // Where no eigenvalue is known, no step is called stable.
    let Some(modes) = modes(&linear.matrix) else {
        return Some(0.0);
    };
    if stepper.coefficients == Coefficients::SemiImplicit {
        return semi_implicit(linear, stepper, &modes);
    }
    // Rays come often: all real modes share one.
    let mut known: Vec<(Complex<f64>, Option<f64>)> = Vec::new();
    let mut least: Option<f64> = None;
    for mode in modes.iter().filter(|mode| mode.re <= 0.0) {
        let size = mode.norm();
        let direction = Complex::new(mode.re / size, (mode.im / size).abs());
        let same = |(other, _): &&(Complex<f64>, Option<f64>)| (other - direction).norm() < 1e-12;
        let length = match known.iter().find(same) {
            Some(&(_, length)) => length,
            None => {
                let length = length(&stepper.coefficients, direction);
                known.push((direction, length));
                length
            }
        };
        if let Some(length) = length {
            let step = length / size;
            least = Some(least.map_or(step, |least| least.min(step)));
        }
    }
    least
}

/// The length along a ray, where [`approx_stable_length`] cannot tell also.
fn length(coefficients: &Coefficients, direction: Complex<f64>) -> Option<f64> {
    let length = approx_stable_length(coefficients, direction)?;
    if length > FAR {
        return None;
    }
    if direction.re == 0.0 {
        return Some(if length > FIRST_ON_AXIS { length } else { 0.0 });
    }
    if length > FIRST {
        return Some(length);
    }
    // Close to the imaginary axis the stable stretch of an Euler step is twice the damping
    // ratio: down to the digits of the factors it is followed here.
    let shrinks = |r: f64| amplification(coefficients, direction * r) < 1.0;
    let mut good = FIRST;
    while !shrinks(good) {
        good *= 0.9;
        if good < PART {
            return Some(0.0);
        }
    }
    let mut bad = good / 0.9;
    for _ in 0..50 {
        let middle = 0.5 * (good + bad);
        if shrinks(middle) {
            good = middle;
        } else {
            bad = middle;
        }
    }
    Some(good)
}

/// Eigenvalues without rounded zeros, parts that are rounding set to zero.
fn modes(matrix: &Matrix<f64>) -> Option<Vec<Complex<f64>>> {
    let size = matrix.row_sum_norm();
    let part = |part: f64, size: f64| if part.abs() <= PART * size { 0.0 } else { part };
    let values = approx_eigenvalues(matrix)?.into_iter();
    let values = values.filter(|value| value.norm() > ZERO * size);
    let cleaned = values.map(|v| Complex::new(part(v.re, v.norm()), part(v.im, v.norm())));
    Some(cleaned.collect())
}

fn semi_implicit(linear: &Linear, stepper: &Stepper, modes: &[Complex<f64>]) -> Option<f64> {
    let growing = modes.iter().filter(|mode| mode.re > 0.0).count();
    let stable = |step: f64| {
        let recurrence = Recurrence::new(&stepper.coefficients, linear, step, &stepper.ranks);
        let Some(recurrence) = recurrence else {
            return false;
        };
        // A step whose factors are not known is not called stable.
        let factors: Option<Vec<_>> = recurrence.past.iter().map(approx_eigenvalues).collect();
        let large = |f: &&Complex<f64>| f.norm() > 1.0 + ROUNDING;
        factors.is_some_and(|all| all.iter().flatten().filter(large).count() <= growing)
    };
    let norm = linear.matrix.row_sum_norm();
    let span = linear.window.1 - linear.window.0;
    if norm == 0.0 {
        return None;
    }
    let mut good = 0.0;
    let mut bad = 1e-3 / norm;
    while stable(bad) {
        if bad > span {
            return None;
        }
        good = bad;
        bad *= 1.1;
    }
    if good == 0.0 {
        return Some(0.0);
    }
    for _ in 0..60 {
        let middle = 0.5 * (good + bad);
        if stable(middle) {
            good = middle;
        } else {
            bad = middle;
        }
    }
    Some(good)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Library, Replacements};
    use crate::method::{Sides, find};

    fn limit(case: &str, method: &str) -> Option<f64> {
        with(case, method, &Replacements::new())
    }

    fn with(case: &str, method: &str, replaced: &Replacements) -> Option<f64> {
        let case = Library::new().load(case, replaced).unwrap();
        let stepper = Stepper::new(find(method).unwrap(), Sides::After).unwrap();
        approx_stable_step(&Linear::new(&case), &stepper)
    }

    fn near(found: Option<f64>, wanted: f64) {
        let found = found.unwrap();
        assert!((found / wanted - 1.0).abs() < 1e-7, "{found} {wanted}");
    }

    #[test]
    fn closed_forms() {
        // 1/tau = 1/(R C) of the case, in 1/ms.
        let rate = 1.0 / (2.2 * 0.47);
        near(limit("electrical/rc-pulse", "forward Euler"), 2.0 / rate);
        // The real root of 1 + z + z^2/2 + z^3/6 + z^4/24 = 1.
        let rk4 = 2.785_293_563_405_282;
        near(limit("electrical/rc-pulse", "RK4"), rk4 / rate);
        near(limit("stress/stiff-1e4", "forward Euler"), 2e-4);
        near(limit("stress/stiff-1e4", "RK4"), rk4 * 1e-4);
        assert_eq!(limit("stress/stiff-1e4", "backward Euler"), None);
        // w = 1.
        near(limit("stress/million-periods", "RK4"), 8f64.sqrt());
        near(limit("stress/million-periods", "semi-implicit Euler"), 2.0);
        // |1 + iy - y^2/2|^2 = 1 + y^4/4.
        for method in ["forward Euler", "Heun", "RKF4", "Cash-Karp 5", "AM4"] {
            assert_eq!(
                limit("stress/million-periods", method),
                Some(0.0),
                "{method}"
            );
        }
        for case in ["stress/million-periods", "thermal/cooling-body"] {
            assert_eq!(limit(case, "trapezoidal"), None, "{case}");
            assert_eq!(limit(case, "backward Euler"), None, "{case}");
        }
        // Beside the axis: |1 + z|^2 = 1 - 2 zeta r + r^2, w = 5.
        for zeta in [5e-2, 1e-4] {
            let replaced = Replacements::from([("zeta".to_owned(), zeta)]);
            let found = with("mechanical/oscillator-light", "forward Euler", &replaced);
            near(found, 2.0 * zeta / 5.0);
        }
        // Free integrators alone limit nothing.
        assert_eq!(limit("control/double-integrator", "forward Euler"), None);
        // Two poles; the fast one rules (SO09 of published-checks.md).
        near(
            limit("control/dc-motor", "forward Euler"),
            2.0 / 9.99749921826,
        );
    }
}

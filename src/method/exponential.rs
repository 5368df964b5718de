//! Steps of the exponential Euler method: `exp(hA)` for the states, inputs held.

use nalgebra::DMatrix;

use super::recurrence::{Recurrence, identity};

/// Roundings of one step, beside those of the exponential itself.
const ROUNDINGS: f64 = 8.0;

/// `exp(hA)` and `h phi(hA)` as blocks of one exponential (Van Loan).
pub(super) fn exponential(matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let both = DMatrix::from_fn(2 * size, 2 * size, |i, j| {
        if i < size && j < size {
            step * matrix[(i, j)]
        } else if i < size && j == i + size {
            step
        } else {
            0.0
        }
    });
    // Programs compute it in several ways, all of which lose digits with the norm.
    let norm = both
        .row_iter()
        .map(|r| r.iter().map(|x| x.abs()).sum::<f64>());
    let amplified = 8.0 * (1.0 + norm.fold(0.0, f64::max));
    let exponential = both.exp();
    let stay = exponential.view((0, 0), (size, size)).into_owned();
    let weight = exponential.view((0, size), (size, size)).into_owned();
    // Some add `h phi(hA) (A x + g)` to the state.
    let spread = (stay.abs() + identity(size) + weight.abs() * matrix.abs()) * amplified;
    let pull = weight.abs() * amplified;
    Some(Recurrence::held(
        step,
        &stay,
        &weight,
        (&spread, &pull),
        ROUNDINGS,
    ))
}

/// Each state by itself: `exp(h a_ii)` for its own rate, everything else held.
pub(super) fn by_state(matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let own = |i: usize| step * matrix[(i, i)];
    // (exp(z) - 1) / z without its cancellation.
    let phi = |z: f64| if z == 0.0 { 1.0 } else { z.exp_m1() / z };
    let diagonal = |of: &dyn Fn(usize) -> f64| {
        DMatrix::from_fn(size, size, |i, j| if i == j { of(i) } else { 0.0 })
    };
    let weight = diagonal(&|i| step * phi(own(i)));
    let others = DMatrix::from_fn(size, size, |i, j| if i == j { 0.0 } else { matrix[(i, j)] });
    let stay = diagonal(&|i| own(i).exp()) + &weight * &others;
    let amplified = 8.0 * (0..size).map(|i| 1.0 + own(i).abs()).fold(1.0, f64::max);
    let spread = (stay.abs() + identity(size) + &weight * matrix.abs()) * amplified;
    let pull = weight.abs() * amplified;
    Some(Recurrence::held(
        step,
        &stay,
        &weight,
        (&spread, &pull),
        ROUNDINGS,
    ))
}

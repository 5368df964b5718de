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

#[cfg(test)]
mod tests {
    use super::*;

    // [hochbruck-ostermann-2010] 2.1: x1 = exp(h a) x0 + (exp(h a) - 1)/a g, a the own rate of
    // the state, g what the other states and the inputs add to its rate of change.
    #[test]
    fn each_state_decays_by_itself_under_what_the_others_add() {
        let matrix =
            DMatrix::from_row_slice(3, 3, &[-2.0, 0.5, 0.0, 3.0, -8.0, -0.25, 1.5, 0.0, 0.0]);
        let step = 0.3;
        let found = by_state(&matrix, step).unwrap();
        let [stay] = &found.past[..] else { panic!() };
        let [node] = &found.nodes[..] else { panic!() };
        for i in 0..3 {
            let own: f64 = matrix[(i, i)];
            let held = match own {
                0.0 => step,
                own => ((own * step).exp() - 1.0) / own,
            };
            for j in 0..3 {
                let expected = match i == j {
                    true => [(own * step).exp(), held],
                    false => [held * matrix[(i, j)], 0.0],
                };
                for (found, expected) in [stay[(i, j)], node.weight[(i, j)]].iter().zip(expected) {
                    assert!(
                        (found - expected).abs() < 1e-15,
                        "{i} {j}: {found} {expected}"
                    );
                }
            }
        }
        assert_eq!((node.at, node.slope), (0.0, false));
    }
}

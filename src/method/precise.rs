//! The weights of the stages of a stiff step, in twice the precision.
//!
//! A step is `I + h sum b_i (I - h a A)^-1 A` with terms as large as `h |A|` that cancel, for each
//! stage before the last one once more. A program that solves its stages for the states never
//! sees these terms; so must the matrix not, that its rows are compared with.

use nalgebra::DMatrix;

use super::recurrence::identity;
use super::scheme::Stages;
use crate::number::Double;

/// Steps so many times the shortest time constant are stiff enough to matter.
const STIFF: f64 = 32.0;
/// Equations for all stages together that are worth it.
const MOST_EQUATIONS: usize = 96;

/// A whole step.
pub(super) struct Whole {
    /// What each stage's right side does to the new state.
    pub(super) weights: Vec<DMatrix<f64>>,
    /// What the old state does to it.
    pub(super) stay: DMatrix<f64>,
}

impl Whole {
    /// From weights in double precision, which do where the step is not stiff.
    pub(super) fn new(
        stages: &Stages,
        weights: Vec<DMatrix<f64>>,
        matrix: &DMatrix<f64>,
        step: f64,
    ) -> Whole {
        precise(stages, matrix, step).unwrap_or_else(|| {
            let moved = weights.iter().map(|weight| weight * matrix);
            let stay = moved.fold(identity(matrix.nrows()), |stay, moved| stay + moved);
            Whole { weights, stay }
        })
    }
}

/// `None` where double precision does, or where the stages cannot be solved for.
///
/// # Formula
/// `(W_1 ... W_s) (I - h a (x) A) = h (b_1 I ... b_s I)` and `I + sum W_i A`.
fn precise(stages: &Stages, matrix: &DMatrix<f64>, step: f64) -> Option<Whole> {
    let (size, count) = (matrix.nrows(), stages.weights.len());
    let norm = |row: usize| matrix.row(row).iter().map(|x| x.abs()).sum::<f64>();
    let stiffness = step * (0..size).map(norm).fold(0.0, f64::max);
    let solved = (0..count).any(|i| (i..count).any(|j| stages.matrix[i][j].to_f64() != 0.0));
    let all = size * count;
    if stiffness.is_nan() || stiffness < STIFF || !solved || all > MOST_EQUATIONS {
        return None;
    }
    // Transposed: each row is an equation for a column of the weights.
    let step = Double::from(step);
    let mut rows = vec![vec![Double::ZERO; all + size]; all];
    for (row, equation) in rows.iter_mut().enumerate() {
        let (j, l) = (row / size, row % size);
        for (column, entry) in equation[..all].iter_mut().enumerate() {
            let (i, k) = (column / size, column % size);
            let link = step * stages.matrix[i][j] * Double::from(matrix[(k, l)]);
            *entry = one(row == column) - link;
        }
        equation[all + l] = step * stages.weights[j];
    }
    eliminate(&mut rows, all)?;
    let weight = |i: usize, row: usize, column: usize| rows[i * size + column][all + row];
    let weights = (0..count)
        .map(|i| DMatrix::from_fn(size, size, |row, column| weight(i, row, column).to_f64()));
    let stay = DMatrix::from_fn(size, size, |row, column| {
        let mut sum = one(row == column);
        for i in 0..count {
            for k in 0..size {
                sum += weight(i, row, k) * Double::from(matrix[(k, column)]);
            }
        }
        sum.to_f64()
    });
    Some(Whole {
        weights: weights.collect(),
        stay,
    })
}

/// An entry of the identity.
fn one(on_diagonal: bool) -> Double {
    match on_diagonal {
        true => Double::ONE,
        false => Double::ZERO,
    }
}

/// Gauss-Jordan with row exchanges; the right sides behind the first `size` columns become the
/// solutions.
fn eliminate(rows: &mut [Vec<Double>], size: usize) -> Option<()> {
    for column in 0..size {
        let magnitude = |row: &usize| rows[*row][column].to_f64().abs();
        let pivot = (column..size).max_by(|a, b| magnitude(a).total_cmp(&magnitude(b)))?;
        rows.swap(column, pivot);
        let divisor = rows[column][column];
        if divisor == Double::ZERO || !divisor.is_finite() {
            return None;
        }
        for entry in &mut rows[column][column..] {
            *entry = *entry / divisor;
        }
        let own = rows[column].clone();
        for (row, other) in rows.iter_mut().enumerate() {
            let factor = other[column];
            if row == column || factor == Double::ZERO {
                continue;
            }
            for (entry, &x) in other[column..].iter_mut().zip(&own[column..]) {
                *entry -= factor * x;
            }
        }
    }
    Some(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::method::catalogue::find;
    use crate::method::scheme::Coefficients;

    /// `exp(-t)` and `exp(-1e6 t)` behind a change of variables: what a step does to the slow
    /// direction `(2, -1)` is the stability function at `-h`, to the fast one `(1, -1)` that at
    /// `-1e6 h`, TR-BDF2 and SDIRK 2 share theirs ([hosea-shampine-1996], §3).
    #[test]
    fn a_slow_state_beside_a_fast_one_is_kept() {
        let k = 1e6;
        let a = DMatrix::from_row_slice(2, 2, &[k - 2.0, 2.0 * k - 2.0, 1.0 - k, 1.0 - 2.0 * k]);
        let gamma = 1.0 - 0.5f64.sqrt();
        let step = 0.05;
        for name in ["TR-BDF2", "SDIRK 2"] {
            let Coefficients::Stages(stages) = find(name).unwrap().schemes[0].coefficients() else {
                panic!("{name} has stages");
            };
            let stay = precise(&stages, &a, step).unwrap().stay;
            let of = |z: f64| (1.0 + (1.0 - 2.0 * gamma) * z) / (1.0 - gamma * z).powi(2);
            for (direction, rate) in [([2.0, -1.0], -1.0), ([1.0, -1.0], -k)] {
                let wanted = of(rate * step);
                for i in 0..2 {
                    let got = stay[(i, 0)] * direction[0] + stay[(i, 1)] * direction[1];
                    let gap = (got - wanted * direction[i]).abs();
                    assert!(gap < 1e-14, "{name} {rate}: {gap:e}");
                }
            }
        }
    }
}

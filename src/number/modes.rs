//! Eigenvalues of small real matrices in `f64`, for what needs few digits of them: time scales,
//! stable steps, growing modes. What needs more goes through the matrix exponential.

use nalgebra::{Complex, Schur};

use super::Matrix;

/// Turns of the iteration for every row; as a rule two or three suffice.
const TURNS_PER_ROW: usize = 30;
const FEWEST_ROWS: usize = 4;
/// What counts as zero beside the diagonal, as a fraction of it. Matrices with one eigenvalue
/// many times over can go round in circles for ever at the first.
const ZEROS: [f64; 4] = [f64::EPSILON, 1e-14, 1e-12, 1e-9];

/// The eigenvalues, or `None` where the matrix has entries that are no number or the iteration
/// does not end.
///
/// # Error bound
/// None: eigenvalues of nearly defective matrices keep few digits.
///
/// # Cost
/// Bounded by some thousand turns of `n^2` for 64 rows.
pub fn approx_eigenvalues(matrix: &Matrix<f64>) -> Option<Vec<Complex<f64>>> {
    let matrix = matrix.dense();
    if !matrix.iter().all(|entry| entry.is_finite()) {
        return None;
    }
    let turns = schur_turns(matrix.nrows());
    let schur = ZEROS
        .iter()
        .find_map(|&zero| Schur::try_new(matrix.clone(), zero, turns))?;
    let values = schur.complex_eigenvalues();
    Some(values.iter().copied().collect())
}

/// Turns after which the iteration for a matrix of so many rows is given up.
pub(crate) fn schur_turns(rows: usize) -> usize {
    TURNS_PER_ROW * rows.max(FEWEST_ROWS)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn filled(size: usize, entry: impl Fn(usize, usize) -> f64) -> Matrix<f64> {
        let mut matrix = Matrix::zero(size);
        for (i, j) in (0..size).flat_map(|i| (0..size).map(move |j| (i, j))) {
            matrix[(i, j)] = entry(i, j);
        }
        matrix
    }

    /// Without a bound on its turns the iteration never ends on this one: 64 states, all but
    /// eleven of its eigenvalues the same.
    #[test]
    fn one_eigenvalue_many_times_over_does_not_take_for_ever() {
        let matrix = filled(64, |k, j| {
            let sign = if (j * k) % 2 == 1 { 1.0 } else { -1.0 };
            let entry = format!("{:.4}", 0.1 * ((j * 7 + k * 3) % 11) as f64 / 11.0);
            sign * entry.parse::<f64>().unwrap() - if j == k { 3.0 } else { 0.0 }
        });
        let values = approx_eigenvalues(&matrix).unwrap();
        let sum: Complex<f64> = values.iter().sum();
        // The trace; the sum of what an iteration leaves is as good as its turns.
        assert!((sum.re - matrix.dense().trace()).abs() < 1e-9, "{sum}");
        let near = values.iter().filter(|v| (**v + 3.0).norm() < 1e-3);
        assert!(near.count() >= 32);
    }

    #[test]
    fn a_turn_has_two_and_what_is_no_number_none() {
        let rows = [[0.0, 2.0, 0.0], [-2.0, 0.0, 0.0], [0.0, 0.0, -1.0]];
        let turn = filled(3, |i, j| rows[i][j]);
        let mut values = approx_eigenvalues(&turn).unwrap();
        values.sort_by(|a, b| a.im.total_cmp(&b.im));
        let wanted = [(0.0, -2.0), (-1.0, 0.0), (0.0, 2.0)];
        for (value, (re, im)) in values.iter().zip(wanted) {
            assert!((value - Complex::new(re, im)).norm() < 1e-14, "{values:?}");
        }
        for bad in [f64::NAN, f64::INFINITY] {
            assert!(approx_eigenvalues(&filled(3, |_, _| bad)).is_none());
        }
    }
}

//! Eigenvalues of small real matrices in `f64`, for what needs few digits of them: time scales,
//! stable steps, growing modes. What needs more goes through the matrix exponential.

use nalgebra::{Complex, DMatrix, Schur};

/// Turns of the iteration for every row; as a rule two or three suffice.
const TURNS_PER_ROW: usize = 30;
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
pub fn approx_eigenvalues(matrix: &DMatrix<f64>) -> Option<Vec<Complex<f64>>> {
    if !matrix.iter().all(|entry| entry.is_finite()) {
        return None;
    }
    let turns = TURNS_PER_ROW * matrix.nrows().max(4);
    let schur = ZEROS
        .iter()
        .find_map(|&zero| Schur::try_new(matrix.clone(), zero, turns))?;
    let values = schur.complex_eigenvalues();
    Some(values.iter().copied().collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Without a bound on its turns the iteration never ends on this one: 64 states, all but
    /// eleven of its eigenvalues the same.
    #[test]
    fn one_eigenvalue_many_times_over_does_not_take_for_ever() {
        let matrix = DMatrix::from_fn(64, 64, |k, j| {
            let sign = if (j * k) % 2 == 1 { 1.0 } else { -1.0 };
            let entry = format!("{:.4}", 0.1 * ((j * 7 + k * 3) % 11) as f64 / 11.0);
            sign * entry.parse::<f64>().unwrap() - if j == k { 3.0 } else { 0.0 }
        });
        let values = approx_eigenvalues(&matrix).unwrap();
        let sum: Complex<f64> = values.iter().sum();
        // The trace; the sum of what an iteration leaves is as good as its turns.
        assert!((sum.re - matrix.trace()).abs() < 1e-9, "{sum}");
        let near = values.iter().filter(|v| (**v + 3.0).norm() < 1e-3);
        assert!(near.count() >= 32);
    }

    #[test]
    fn a_turn_has_two_and_what_is_no_number_none() {
        let turn = DMatrix::from_row_slice(3, 3, &[0.0, 2.0, 0.0, -2.0, 0.0, 0.0, 0.0, 0.0, -1.0]);
        let mut values = approx_eigenvalues(&turn).unwrap();
        values.sort_by(|a, b| a.im.total_cmp(&b.im));
        let wanted = [(0.0, -2.0), (-1.0, 0.0), (0.0, 2.0)];
        for (value, (re, im)) in values.iter().zip(wanted) {
            assert!((value - Complex::new(re, im)).norm() < 1e-14, "{values:?}");
        }
        for bad in [f64::NAN, f64::INFINITY] {
            assert!(approx_eigenvalues(&DMatrix::from_element(3, 3, bad)).is_none());
        }
    }
}

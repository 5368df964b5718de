//! Powers of the matrix of one step.

use crate::number::Matrix;

/// The leading corner of a matrix.
pub(super) fn corner(matrix: &Matrix<f64>, size: usize) -> Matrix<f64> {
    let mut corner = Matrix::zero(size);
    for i in 0..size {
        for j in 0..size {
            corner[(i, j)] = matrix[(i, j)];
        }
    }
    corner
}

pub(super) fn to_the_power(matrix: &Matrix<f64>, count: u64) -> Matrix<f64> {
    let mut power = identity(matrix.size());
    let mut block = matrix.clone();
    let mut rest = count;
    while rest > 0 {
        if rest & 1 == 1 {
            power = block.product(&power);
        }
        rest >>= 1;
        if rest > 0 {
            block = block.product(&block);
        }
    }
    power
}

pub(super) fn identity(size: usize) -> Matrix<f64> {
    let mut identity = Matrix::zero(size);
    for i in 0..size {
        identity[(i, i)] = 1.0;
    }
    identity
}

/// `C^m` and `sum_(j<m) |C^j|`, by doubling: `S_2a = S_a + |C^a| S_a`, which is an upper
/// bound.
pub(super) fn repeated(companion: &Matrix<f64>, count: u64) -> (Matrix<f64>, Matrix<f64>) {
    let size = companion.size();
    let (mut power, mut sum) = (identity(size), Matrix::zero(size));
    // The block that is doubled, and what has been put together of blocks so far.
    let (mut block, mut block_sum) = (companion.clone(), identity(size));
    let mut rest = count;
    while rest > 0 {
        if rest & 1 == 1 {
            // sum over the block first, then over what is already there, shifted by it.
            let shifted = block.map(f64::abs).product(&sum);
            sum = block_sum.zip(&shifted, |a, b| a + b);
            power = block.product(&power);
        }
        rest >>= 1;
        if rest > 0 {
            let shifted = block.map(f64::abs).product(&block_sum);
            block_sum = block_sum.zip(&shifted, |a, b| a + b);
            block = block.product(&block);
        }
    }
    (power, sum)
}

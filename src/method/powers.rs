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
    let mut power: Option<Matrix<f64>> = None;
    let mut block = matrix.clone();
    let mut rest = count;
    while rest > 0 {
        if rest & 1 == 1 {
            power = Some(power.map_or_else(|| block.clone(), |power| block.product(&power)));
        }
        rest >>= 1;
        if rest > 0 {
            block = block.product(&block);
        }
    }
    power.unwrap_or_else(|| identity(matrix.size()))
}

pub(super) fn identity(size: usize) -> Matrix<f64> {
    let mut identity = Matrix::zero(size);
    for i in 0..size {
        identity[(i, i)] = 1.0;
    }
    identity
}

/// `sum_(j<m) |C^j|` or an upper bound of it: blocks of the square root of `m` powers, each
/// carried on by a true power. (Doubling, `S_2a = S_a + |C^a| S_a`, overestimates by orders
/// of magnitude where a method has a long memory.)
pub(super) fn gathered(companion: &Matrix<f64>, count: u64) -> Matrix<f64> {
    let size = companion.size();
    let block = (count as f64).sqrt().ceil() as u64;
    let mut power = identity(size);
    let mut sum: Matrix<f64> = Matrix::zero(size);
    for _ in 0..block.min(count) {
        sum = sum.zip(&power, |s, p| s + p.abs());
        power = companion.product(&power);
    }
    // `power` is now that of one block.
    let (leap, mut carried) = (power, identity(size));
    let mut total: Matrix<f64> = Matrix::zero(size);
    for _ in 0..count.div_ceil(block.max(1)) {
        let shifted = carried.map(f64::abs).product(&sum);
        total = total.zip(&shifted, |a, b| a + b);
        carried = leap.product(&carried);
    }
    total
}

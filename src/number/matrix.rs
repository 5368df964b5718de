//! Small dense square matrices, row-major, over any [`Real`] or over `f64` bounds.

use std::ops::{Add, Index, IndexMut, Mul};

use nalgebra::DMatrix;

/// A square matrix.
#[derive(Clone, Debug, PartialEq)]
pub struct Matrix<T> {
    size: usize,
    entries: Vec<T>,
}

impl<T: Copy + Default> Matrix<T> {
    /// All entries zero.
    ///
    /// # Shape
    /// `size x size`.
    pub fn zero(size: usize) -> Matrix<T> {
        Matrix {
            size,
            entries: vec![T::default(); size * size],
        }
    }

    /// Number of rows.
    pub fn size(&self) -> usize {
        self.size
    }

    /// One row.
    pub fn row(&self, row: usize) -> &[T] {
        &self.entries[row * self.size..][..self.size]
    }

    /// Entry by entry into another type.
    pub fn map<U: Copy + Default>(&self, convert: impl Fn(T) -> U) -> Matrix<U> {
        Matrix {
            size: self.size,
            entries: self.entries.iter().map(|&x| convert(x)).collect(),
        }
    }

    /// Entry by entry with another matrix of the same size.
    pub fn zip<U: Copy, V: Copy + Default>(
        &self,
        other: &Matrix<U>,
        join: impl Fn(T, U) -> V,
    ) -> Matrix<V> {
        debug_assert_eq!(self.size, other.size);
        let pairs = self.entries.iter().zip(&other.entries);
        Matrix {
            size: self.size,
            entries: pairs.map(|(&x, &y)| join(x, y)).collect(),
        }
    }

    /// Row by row.
    pub fn rows(&self) -> impl Iterator<Item = &[T]> {
        self.entries.chunks_exact(self.size.max(1))
    }
}

impl<T: Copy + Default + Add<Output = T> + Mul<Output = T> + PartialZero> Matrix<T> {
    /// Matrix product; terms with a zero factor on the left are skipped, since the
    /// matrices of chains and ladders are mostly zeros.
    pub fn product(&self, other: &Matrix<T>) -> Matrix<T> {
        let mut result = Matrix::zero(self.size);
        self.product_into(other, &mut result);
        result
    }

    /// The same into a matrix that is there.
    pub fn product_into(&self, other: &Matrix<T>, result: &mut Matrix<T>) {
        result.entries.fill(T::default());
        for i in 0..self.size {
            for k in 0..self.size {
                let factor = self[(i, k)];
                if factor.vanishes() {
                    continue;
                }
                let target = &mut result.entries[i * self.size..][..self.size];
                for (entry, &x) in target.iter_mut().zip(other.row(k)) {
                    *entry = *entry + factor * x;
                }
            }
        }
    }

    /// Matrix times vector.
    pub fn apply(&self, vector: &[T]) -> Vec<T> {
        self.rows().map(|row| dot(row, vector)).collect()
    }
}

/// Sum of products of two slices of one length.
pub fn dot<T: Copy + Default + Add<Output = T> + Mul<Output = T>>(a: &[T], b: &[T]) -> T {
    a.iter()
        .zip(b)
        .fold(T::default(), |sum, (&x, &y)| sum + x * y)
}

/// Exactly zero, for skipping terms.
pub trait PartialZero {
    /// True for zero of either sign.
    fn vanishes(self) -> bool;
}

impl PartialZero for f64 {
    fn vanishes(self) -> bool {
        self == 0.0
    }
}

impl<T: super::Real> PartialZero for T {
    fn vanishes(self) -> bool {
        self.is_zero()
    }
}

impl Matrix<f64> {
    /// The same for linear algebra.
    pub fn dense(&self) -> DMatrix<f64> {
        DMatrix::from_row_slice(self.size, self.size, &self.entries)
    }

    /// Largest row sum of magnitudes: the norm that belongs to the largest entry of
    /// a vector.
    pub fn row_sum_norm(&self) -> f64 {
        // Not f64::max, which would pass over a NaN.
        let sums = self.rows().map(|row| row.iter().map(|x| x.abs()).sum());
        sums.fold(
            0.0,
            |largest, sum: f64| if sum <= largest { largest } else { sum },
        )
    }
}

impl<T> Index<(usize, usize)> for Matrix<T> {
    type Output = T;
    fn index(&self, (row, column): (usize, usize)) -> &T {
        &self.entries[row * self.size + column]
    }
}

impl<T> IndexMut<(usize, usize)> for Matrix<T> {
    fn index_mut(&mut self, (row, column): (usize, usize)) -> &mut T {
        &mut self.entries[row * self.size + column]
    }
}

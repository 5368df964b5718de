//! The rows of a square matrix without their zeros, for multiplying vectors. Inputs are chains of
//! a few generators each beside the states, so that most entries of a model are zero; skipping
//! them changes no sum.

use std::ops::{Add, Mul};

use super::matrix::{Matrix, PartialZero};

/// What is not zero in a square matrix, row by row.
#[derive(Clone, Debug)]
pub struct Sparse<T> {
    /// Where each row ends among the entries.
    ends: Vec<usize>,
    entries: Vec<(usize, T)>,
}

impl<T: Copy + Default + PartialZero + Add<Output = T> + Mul<Output = T>> Sparse<T> {
    /// All but the zeros of a matrix.
    pub fn of(matrix: &Matrix<T>) -> Sparse<T> {
        let mut entries = Vec::new();
        let ends = matrix.rows().map(|row| {
            let places = row.iter().copied().enumerate();
            entries.extend(places.filter(|(_, entry)| !entry.vanishes()));
            entries.len()
        });
        Sparse {
            ends: ends.collect(),
            entries,
        }
    }

    /// Number of rows.
    pub fn size(&self) -> usize {
        self.ends.len()
    }

    /// Each row times a vector.
    ///
    /// # Shape
    /// `vector`: [`Sparse::size`] entries; as many sums come out.
    pub fn sums<'a>(&'a self, vector: &'a [T]) -> impl Iterator<Item = T> + 'a {
        let mut begin = 0;
        self.ends.iter().map(move |&end| {
            let row = &self.entries[begin..end];
            begin = end;
            row.iter()
                .fold(T::default(), |sum, &(at, entry)| sum + entry * vector[at])
        })
    }

    /// The same into another vector, each sum times a factor.
    pub fn sums_into(&self, vector: &[T], factor: T, result: &mut [T]) {
        for (entry, sum) in result.iter_mut().zip(self.sums(vector)) {
            *entry = sum * factor;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn zeros_are_left_out_and_sums_are_those_of_the_whole_rows() {
        let mut matrix: Matrix<f64> = Matrix::zero(3);
        for (row, column, entry) in [(0, 2, 2.0), (2, 0, -1.0), (2, 1, 0.5), (2, 2, 4.0)] {
            matrix[(row, column)] = entry;
        }
        let sparse = Sparse::of(&matrix);
        assert_eq!(sparse.entries.len(), 4);
        assert_eq!(sparse.size(), 3);
        let vector = [3.0, 8.0, 0.25];
        assert!(sparse.sums(&vector).eq([0.5, 0.0, 2.0]));
        let mut scaled = [9.0; 3];
        sparse.sums_into(&vector, 2.0, &mut scaled);
        assert_eq!(scaled, [1.0, 0.0, 4.0]);
    }
}

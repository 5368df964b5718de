//! The table of a propagator while it is built: the exponentials of doubled steps as whole
//! matrices, each with the bound of its error, and how far any of them can reach.

use super::{MOST_LEVELS, SMALLEST_BASE, UPWARD, terms};
use crate::number::matrix::Matrix;
use crate::number::{Double, Real};

/// A table that grows: see [`Propagator`](super::Propagator) for what its parts become.
pub(super) struct Table<T> {
    pub generator: Matrix<T>,
    pub magnitude: Matrix<f64>,
    /// The matrix in `f64`.
    pub plain: Matrix<f64>,
    pub norm: f64,
    pub base: f64,
    pub levels: Vec<Level<T>>,
    pub growth_rate: f64,
    /// `exp(|M| base)`, rounded up.
    pub nearby: Matrix<f64>,
    pub reach: Matrix<f64>,
}

/// `exp(Mh) - I` for one step `h`.
pub(super) struct Level<T> {
    /// The step `h`.
    pub time: f64,
    pub growth: Matrix<T>,
    /// `|growth|`, rounded up.
    pub size: Matrix<f64>,
    /// What `growth` may be off by, entry by entry.
    pub error: Matrix<f64>,
}

impl<T: Real> Table<T> {
    /// Builds the table for times up to twice `span`.
    pub fn new(generator: &Matrix<Double>, span: f64) -> Option<Table<T>> {
        let magnitude = generator.map(|x| x.to_f64().abs() * (1.0 + f64::EPSILON));
        let norm = magnitude.row_sum_norm() * UPWARD;
        if !(norm.is_finite() && span.is_finite() && span >= 0.0) {
            return None;
        }
        let longest = (2.0 * span).max(f64::MIN_POSITIVE);
        let finest = if norm > 0.0 {
            (0.5 / norm).log2().floor()
        } else {
            1000.0
        };
        let finest = finest.min(longest.log2().ceil()) as i32;
        let top = (longest.log2().ceil() as i32 - finest).max(0);
        if finest < SMALLEST_BASE || top > MOST_LEVELS {
            return None;
        }
        let base = 2f64.powi(finest);
        let exact = generator.map(T::from_double);
        let mut table = Table {
            nearby: Matrix::zero(generator.size()),
            reach: Matrix::zero(generator.size()),
            plain: generator.map(Double::to_f64),
            generator: exact,
            magnitude,
            norm,
            base,
            levels: Vec::new(),
            growth_rate: 0.0,
        };
        table.build(top as usize);
        let mut levels = table.levels.iter();
        let finite = levels.all(|level| level.size.row_sum_norm().is_finite());
        (finite && table.reach.row_sum_norm().is_finite()).then_some(table)
    }

    /// Fills levels and reach: first the factors, each with the error that repeated
    /// squaring gives it, then the reach, then the errors once more through the
    /// reach where that is tighter.
    fn build(&mut self, top: usize) {
        self.nearby = self.series_size(self.base);
        let (growth, error) = self.series_matrix();
        let mut fresh = vec![error.clone()];
        self.levels.push(Level::new(self.base, growth, error));
        for level in 0..top {
            let (next, rounding) = self.levels[level].doubled();
            fresh.push(rounding);
            self.levels.push(next);
        }
        let last = &self.levels[top];
        self.growth_rate = last.whole().row_sum_norm().ln().max(0.0) / last.time;
        self.reach = self.longest_reach();
        let mut sum: Matrix<f64> = Matrix::zero(self.generator.size());
        for (step, fresh) in self.levels.iter_mut().zip(&fresh) {
            // What was lost at one level is repeated in every factor of the next.
            // First order in the errors; the second order is covered by the factor
            // as long as the errors are small, which is checked.
            let (before, after) = (
                (-self.growth_rate * step.time).exp(),
                self.growth_rate * step.time,
            );
            sum = sum.zip(fresh, |a, b| (2.0 * a + b * before) * UPWARD);
            let through = self.reach.product(&sum.product(&self.reach));
            if through.row_sum_norm() < 1e-3 {
                let factor = 1.01 * after.exp();
                step.error = step.error.zip(&through, |a, b| a.min(factor * b));
            }
        }
    }

    /// Entry by entry a bound of `exp(-growth t) |exp(Mt)|` over `0 <= t <= 2 span`: the binary
    /// digits of `t` are taken in groups, each group's factor is one of the powers
    /// of its lowest step, and the largest of these counts, entry by entry. Large
    /// groups keep the bound tight for oscillators, where every further factor costs
    /// up to the square root of the size; they are as large as their cost allows.
    fn longest_reach(&self) -> Matrix<f64> {
        let group = match self.generator.size() {
            0..=6 => 8,
            7..=16 => 6,
            17..=32 => 4,
            _ => 3,
        };
        let mut reach = self.nearby.clone();
        for steps in self.levels.chunks(group) {
            let mut powers = vec![Matrix::zero(self.generator.size())];
            for i in 0..self.generator.size() {
                powers[0][(i, i)] = T::from_f64(1.0);
            }
            let mut slack: Matrix<f64> = Matrix::zero(self.generator.size());
            for step in steps {
                let damping = T::from_f64((-self.growth_rate * step.time).exp());
                for known in 0..powers.len() {
                    let further = step.growth.product(&powers[known]);
                    powers.push(powers[known].zip(&further, |a, b| (a + b) * damping));
                }
                slack = slack.zip(&step.error, |a, b| a.max(2.0 * b * damping.to_f64()));
            }
            let largest = powers.iter().fold(slack, |largest, power| {
                largest.zip(power, |a, b: T| a.max(b.to_f64().abs() * UPWARD))
            });
            reach = largest.product(&reach).map(|x| x * UPWARD);
        }
        reach
    }

    /// `exp(|M| time)` in `f64`, rounded up.
    fn series_size(&self, time: f64) -> Matrix<f64> {
        let size = self.magnitude.size();
        let mut sum = Matrix::zero(size);
        for i in 0..size {
            sum[(i, i)] = 1.0;
        }
        let mut term = sum.clone();
        for k in 1..40 {
            let factor = time / f64::from(k);
            term = self.magnitude.product(&term).map(|x| x * factor);
            sum = sum.zip(&term, |a, b| a + b);
        }
        sum.map(|x| x * UPWARD)
    }

    /// `exp(M base) - I` with its error.
    fn series_matrix(&self) -> (Matrix<T>, Matrix<f64>) {
        let size = self.generator.size();
        let count = terms::<T>(self.norm * self.base);
        let scaled = self.generator.map(|x| x.scale(self.base));
        let mut term = scaled.clone();
        let mut sum = scaled.clone();
        for k in 2..=count {
            term = scaled.product(&term).map(|x| x.divide(k));
            sum = sum.zip(&term, |a, b| a + b);
        }
        let unit = (size as f64 + 4.0) * f64::from(count) * T::UNIT;
        let whole = self.nearby.clone();
        let mut next = self.magnitude.map(|x| x * self.base);
        for k in 2..=count + 1 {
            let factor = self.base / f64::from(k) * UPWARD;
            next = self.magnitude.product(&next).map(|x| x * factor);
        }
        let tail = whole.product(&next);
        let mut error = whole;
        for i in 0..size {
            // exp(|M|b) - I, with what its own rounding may hide.
            error[(i, i)] = (error[(i, i)] - 1.0).max(0.0) + 1e-9;
        }
        (sum, error.zip(&tail, |x, tail| x * unit + tail))
    }
}

impl<T: Real> Level<T> {
    pub fn new(time: f64, growth: Matrix<T>, error: Matrix<f64>) -> Level<T> {
        let size = growth.map(|x| x.to_f64().abs() * (1.0 + f64::EPSILON));
        Level {
            time,
            growth,
            size,
            error,
        }
    }

    /// The step of twice the length, and what rounding adds on the way there.
    fn doubled(&self) -> (Level<T>, Matrix<f64>) {
        let unit = (self.size.size() as f64 + 4.0) * T::UNIT;
        let square = self.growth.product(&self.growth);
        let growth = self.growth.zip(&square, |f, f2| f.scale(2.0) + f2);
        let rounding = self.size.product(&self.size);
        let rounding = self
            .size
            .zip(&rounding, |f, f2| unit * (2.0 * f + f2) * UPWARD);
        let whole = self.whole();
        let carried = whole.product(&self.error);
        let carried = carried.zip(&self.error.product(&whole), |a, b| a + b);
        let second_order = self.error.product(&self.error);
        let error = carried.zip(&second_order, |a, b| a + b);
        let error = error.zip(&rounding, |a, b| (a + b) * UPWARD);
        (Level::new(2.0 * self.time, growth, error), rounding)
    }

    /// `|exp(Mh)|`, rounded up.
    fn whole(&self) -> Matrix<f64> {
        let mut whole = self.size.clone();
        for i in 0..whole.size() {
            let entry = (1.0 + self.growth[(i, i)].to_f64()).abs();
            whole[(i, i)] = entry * (1.0 + f64::EPSILON) + f64::EPSILON;
        }
        whole
    }
}

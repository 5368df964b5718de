//! The exponential of a constant matrix along time, with a bound of everything
//! that rounding and truncation can have done to it.
//!
//! Advice to whoever changes this: the table holds `exp(Mh) - I`, not `exp(Mh)`.
//! Squared up in that form a slow mode keeps its own relative precision beside a
//! fast one; in the plain form each squaring doubles its error.

use super::matrix::{Matrix, dot};
use super::{Double, Real};

/// `exp(Mt)` for one matrix `M` and any `0 <= t <= 2 span`, applied to vectors.
///
/// # Formula
/// `exp(Mt) = exp(Mr) prod_l exp(M 2^l b)` over the binary digits `l` of
/// `floor(t/b)`, with `r < b` the rest and `b` a power of two such that
/// `|M| b <= 1/2`; each factor by squaring `exp(Mb)`, which like `exp(Mr)` is summed
/// as a Taylor series.
///
/// # Shape
/// `M`: n x n; vectors of n.
///
/// # Units
/// `t` in the unit of time of the case, `M` in its inverse.
///
/// # Domain
/// Finite entries and `|M| span <= 2^58` in the row-sum norm; outside: `None`.
///
/// # Error bound
/// [`Propagator::bound`], entry by entry: every operation adds what it may have lost to
/// a local sum, and `|exp(Mt)| <= exp(growth t) reach` carries that sum to any later
/// time (`growth` is zero for a system that does not grow).
///
/// # Cost
/// About 30 + 2 log2(|M| span) products of n^3 to build; log2(|M| t)/2 + 25 products
/// of n^2 to apply.
///
/// # Source
/// `[higham-2005]`; `[moler-van-loan-2003]`, method 3; the bound is ours.
#[derive(Debug)]
pub struct Propagator<T> {
    generator: Matrix<T>,
    magnitude: Matrix<f64>,
    /// The matrix in `f64`.
    plain: Matrix<f64>,
    norm: f64,
    base: f64,
    levels: Vec<Step<T>>,
    growth_rate: f64,
    /// `exp(|M| base)`, rounded up.
    nearby: Matrix<f64>,
    reach: Matrix<f64>,
}

/// `exp(Mh) - I` for one step `h`.
#[derive(Debug, Clone)]
pub struct Step<T> {
    /// The step `h`.
    time: f64,
    growth: Matrix<T>,
    /// `|growth|`, rounded up.
    size: Matrix<f64>,
    /// What `growth` may be off by, entry by entry.
    error: Matrix<f64>,
}

/// A vector on its way through time, with what rounding may have done so far.
#[derive(Clone, Debug)]
pub struct Flow<T> {
    /// The vector.
    pub value: Vec<T>,
    /// Time since the vector was exact.
    elapsed: f64,
    /// Sum of the local errors, entry by entry, each times `exp(-growth t)` of its
    /// own time; not yet carried forward.
    local: Vec<f64>,
}

/// Covers the rounding of a bound that is itself computed in `f64`.
const UPWARD: f64 = 1.0 + 1e-9;
/// In units of roundoff and of `1/|M|`: 1e-13 in double-double, where some hundred such times lose
/// less than 1e-24 of the vector.
const A_LITTLE: f64 = 1.6e18;
const SMALLEST_BASE: i32 = -1000;
const MOST_LEVELS: i32 = 61;

impl<T: Real> Flow<T> {
    /// A vector taken as exact.
    pub fn exact(value: Vec<T>) -> Flow<T> {
        let local = vec![0.0; value.len()];
        Flow {
            value,
            elapsed: 0.0,
            local,
        }
    }

    /// Sets one entry to a number taken as exact (an input after its jump).
    pub fn set(&mut self, entry: usize, value: T) {
        self.value[entry] = value;
        // The local sum stays: what was lost before lives on in the other entries.
    }
}

impl<T: Real> Propagator<T> {
    /// Builds the table for times up to twice `span`.
    pub fn new(generator: &Matrix<Double>, span: f64) -> Option<Propagator<T>> {
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
        let mut table = Propagator {
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
        let finite = table
            .levels
            .iter()
            .all(|step| step.size.row_sum_norm().is_finite());
        (finite && table.reach.row_sum_norm().is_finite()).then_some(table)
    }

    /// Fills levels and reach: first the factors, each with the error that repeated
    /// squaring gives it, then the reach, then the errors once more through the
    /// reach where that is tighter.
    fn build(&mut self, top: usize) {
        self.nearby = self.series_size(self.base);
        let (growth, error) = self.series_matrix();
        let mut fresh = vec![error.clone()];
        self.levels.push(Step::new(self.base, growth, error));
        for level in 0..top {
            let (next, rounding) = self.levels[level].doubled();
            fresh.push(rounding);
            self.levels.push(next);
        }
        let last = &self.levels[top];
        self.growth_rate = last.whole().row_sum_norm().ln().max(0.0) / last.time;
        self.reach = self.longest_reach();
        let mut sum: Matrix<f64> = Matrix::zero(self.size());
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
            let mut powers = vec![Matrix::zero(self.size())];
            for i in 0..self.size() {
                powers[0][(i, i)] = T::from_f64(1.0);
            }
            let mut slack: Matrix<f64> = Matrix::zero(self.size());
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

    /// Number of terms after which the series of `exp(M time)` is cut: the rest is
    /// below 2^-(bits + 40) of the vector's largest entry. What it is entry by entry
    /// follows from the last term: the rest is at most `exp(|M| time)` times the next.
    fn terms(&self, time: f64) -> u32 {
        let angle = self.norm * time.abs();
        let target = 2f64.powf(-T::BITS - 40.0);
        let mut term = 1.0;
        let mut count = 0;
        loop {
            count += 1;
            term *= angle / f64::from(count);
            // The tail is at most twice its first term while angle <= 1/2.
            if 2.0 * term < target || count > 80 {
                return count;
            }
        }
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
        let count = self.terms(self.base);
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

    /// Number of entries of a vector.
    pub fn size(&self) -> usize {
        self.generator.size()
    }

    /// Row-sum norm of the matrix.
    pub fn norm(&self) -> f64 {
        self.norm
    }

    /// Carries a vector forward by `time >= 0`.
    pub fn advance(&self, flow: &mut Flow<T>, time: Double) {
        debug_assert!(time.to_f64() >= 0.0);
        let count = time.scale(1.0 / self.base).floor();
        let rest = time - count.scale(self.base);
        let mut digits = (count.to_f64().max(0.0)) as u64;
        // The low word of a whole number is whole; it can be negative.
        digits = digits.saturating_add_signed(count.low() as i64);
        let top = self.levels.len() - 1;
        for _ in 0..(digits >> top).min(4) {
            self.step(flow, &self.levels[top]);
        }
        for level in (0..top).rev() {
            if digits >> level & 1 == 1 {
                self.step(flow, &self.levels[level]);
            }
        }
        self.nudge(flow, rest);
    }

    /// The longest time for [`Propagator::nudge`]: between `1/4` and `1/2` of `1/|M|`.
    pub fn base(&self) -> f64 {
        self.base
    }

    /// Carries a vector by a short time of either sign, at most [`Propagator::base`].
    pub fn nudge(&self, flow: &mut Flow<T>, time: Double) {
        if time.to_f64() == 0.0 {
            return;
        }
        if self.norm * time.to_f64().abs() <= A_LITTLE * T::UNIT {
            return self.nudge_a_little(flow, time.to_f64());
        }
        let count = self.terms(time.to_f64());
        let time_exact = T::from_double(time);
        let time_size = time.to_f64().abs() * (1.0 + f64::EPSILON);
        let mut term = flow.value.clone();
        let mut size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let mut lost = size.clone();
        let (mut next_term, mut next_size) = (term.clone(), size.clone());
        for k in 1..=count {
            self.generator.apply_to(&term, &mut next_term);
            self.magnitude.apply_to(&size, &mut next_size);
            std::mem::swap(&mut term, &mut next_term);
            std::mem::swap(&mut size, &mut next_size);
            for (x, s) in term.iter_mut().zip(&mut size) {
                *x = *x * time_exact;
                if k > 1 {
                    *x = x.divide(k);
                }
                *s *= time_size / f64::from(k) * UPWARD;
            }
            for (i, &x) in term.iter().enumerate() {
                flow.value[i] = flow.value[i] + x;
                lost[i] += f64::from(k) * size[i];
            }
        }
        let unit = (self.size() as f64 + 4.0) * T::UNIT * UPWARD;
        flow.elapsed += time.to_f64();
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        let next = self.magnitude.apply(&size);
        let next: Vec<f64> = next
            .iter()
            .map(|x| x * time_size / f64::from(count + 1))
            .collect();
        for (i, (local, lost)) in flow.local.iter_mut().zip(&lost).enumerate() {
            let tail = dot(self.nearby.row(i), &next);
            *local += (unit * lost + tail) * damping;
        }
    }

    /// The same for a time so short that one term in `f64` is nearly as good as the vector itself.
    ///
    /// # Error bound
    /// The term is rounded `size + 8` times by half a unit of an `f64`: those of its factors, of
    /// the products and of the sum. What follows it is bounded as in [`Propagator::nudge`].
    fn nudge_a_little(&self, flow: &mut Flow<T>, time: f64) {
        let near: Vec<f64> = flow.value.iter().map(|x| x.to_f64()).collect();
        let size: Vec<f64> = near.iter().map(|x| x.abs()).collect();
        let (time_size, rows) = (time.abs() * UPWARD, self.size());
        let moved = |row: usize| dot(self.magnitude.row(row), &size) * time_size * UPWARD;
        let moved: Vec<f64> = (0..rows).map(moved).collect();
        let next = |row: usize| dot(self.magnitude.row(row), &moved) * 0.5 * time_size * UPWARD;
        let next: Vec<f64> = (0..rows).map(next).collect();
        let in_f64 = (rows as f64 + 8.0) * 0.5 * f64::EPSILON * UPWARD;
        let unit = (rows as f64 + 4.0) * T::UNIT * UPWARD;
        flow.elapsed += time;
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        for i in 0..rows {
            let term = dot(self.plain.row(i), &near) * time;
            flow.value[i] = flow.value[i] + T::from_f64(term);
            let lost = unit * (size[i] + moved[i]) + in_f64 * moved[i];
            flow.local[i] += (lost + dot(self.nearby.row(i), &next)) * damping;
        }
    }

    /// Carries a vector by one tabulated step.
    pub fn step(&self, flow: &mut Flow<T>, step: &Step<T>) {
        let unit = (self.size() as f64 + 4.0) * T::UNIT * UPWARD;
        let size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let moved = step.growth.apply(&flow.value);
        flow.elapsed += step.time;
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        for (i, change) in moved.into_iter().enumerate() {
            let rounding = dot(step.size.row(i), &size) + size[i];
            flow.local[i] += (unit * rounding + dot(step.error.row(i), &size)) * damping;
            flow.value[i] = flow.value[i] + change;
        }
    }

    /// The step of length `time` as a table of its own, for a uniform grid.
    pub fn tabulate(&self, time: Double) -> Step<T> {
        let size = self.size();
        let mut growth = Matrix::zero(size);
        let mut error = Matrix::zero(size);
        for column in 0..size {
            let mut unit = vec![T::default(); size];
            unit[column] = T::from_f64(1.0);
            let mut flow = Flow::exact(unit);
            self.advance(&mut flow, time);
            flow.value[column] = flow.value[column] - T::from_f64(1.0);
            for (row, bound) in self.bound(&flow).into_iter().enumerate() {
                growth[(row, column)] = flow.value[row];
                error[(row, column)] = bound;
            }
        }
        Step::new(time.to_f64(), growth, error)
    }

    /// Bound of the error of every entry of a vector.
    pub fn bound(&self, flow: &Flow<T>) -> Vec<f64> {
        let growth = (self.growth_rate * flow.elapsed).exp() * UPWARD;
        self.reach
            .rows()
            .map(|row| dot(row, &flow.local) * growth)
            .collect()
    }

    /// `M x` in `f64`: the rate of change.
    pub fn approx_rate(&self, flow: &Flow<T>) -> Vec<f64> {
        self.generator
            .apply(&flow.value)
            .into_iter()
            .map(Real::to_f64)
            .collect()
    }
}

impl<T: Real> Step<T> {
    fn new(time: f64, growth: Matrix<T>, error: Matrix<f64>) -> Step<T> {
        let size = growth.map(|x| x.to_f64().abs() * (1.0 + f64::EPSILON));
        Step {
            time,
            growth,
            size,
            error,
        }
    }

    /// The step of twice the length, and what rounding adds on the way there.
    fn doubled(&self) -> (Step<T>, Matrix<f64>) {
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
        (Step::new(2.0 * self.time, growth, error), rounding)
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

mod expand;

pub use expand::{Expansion, Nearby};

#[cfg(test)]
mod tests;

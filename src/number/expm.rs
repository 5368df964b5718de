//! The exponential of a constant matrix along time, with a bound of everything
//! that rounding and truncation can have done to it.
//!
//! Advice to whoever changes this: the table holds `exp(Mh) - I`, not `exp(Mh)`.
//! Squared up in that form a slow mode keeps its own relative precision beside a
//! fast one; in the plain form each squaring doubles its error.

use super::matrix::Matrix;
use super::sparse::Sparse;
use super::{Double, Real};
use table::{Level, Table};

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
    generator: Sparse<T>,
    magnitude: Sparse<f64>,
    /// The matrix in `f64`.
    plain: Sparse<f64>,
    norm: f64,
    base: f64,
    levels: Vec<Step<T>>,
    growth_rate: f64,
    /// `exp(|M| base)`, rounded up.
    nearby: Sparse<f64>,
    reach: Sparse<f64>,
}

/// `exp(Mh) - I` for one step `h`.
#[derive(Debug, Clone)]
pub struct Step<T> {
    /// The step `h`.
    time: f64,
    growth: Sparse<T>,
    /// `|growth|`, rounded up.
    size: Sparse<f64>,
    /// What `growth` may be off by, entry by entry.
    error: Sparse<f64>,
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

/// Number of terms after which the series of `exp(M time)` is cut, where `angle` is `|M| time`: the
/// rest is below 2^-(bits + 40) of the vector's largest entry. What it is entry by entry
/// follows from the last term: the rest is at most `exp(|M| time)` times the next.
fn terms<T: Real>(angle: f64) -> u32 {
    let target = 2f64.powi(-(T::BITS as i32) - 40);
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

impl<T: Real> Propagator<T> {
    /// Builds the table for times up to twice `span`.
    pub fn new(generator: &Matrix<Double>, span: f64) -> Option<Propagator<T>> {
        let table = Table::new(generator, span)?;
        Some(Propagator {
            generator: Sparse::of(&table.generator),
            magnitude: Sparse::of(&table.magnitude),
            plain: Sparse::of(&table.plain),
            norm: table.norm,
            base: table.base,
            levels: table.levels.iter().map(Step::of).collect(),
            growth_rate: table.growth_rate,
            nearby: Sparse::of(&table.nearby),
            reach: Sparse::of(&table.reach),
        })
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
        let count = terms::<T>(self.norm * time.to_f64().abs());
        let time_exact = T::from_double(time);
        let time_size = time.to_f64().abs() * (1.0 + f64::EPSILON);
        let mut term = flow.value.clone();
        let mut size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let mut lost = size.clone();
        let (mut next_term, mut next_size) = (term.clone(), size.clone());
        for k in 1..=count {
            // One division for all entries.
            let part = if k > 1 {
                time_exact.divide(k)
            } else {
                time_exact
            };
            let part_size = time_size / f64::from(k) * UPWARD;
            self.generator.sums_into(&term, part, &mut next_term);
            self.magnitude.sums_into(&size, part_size, &mut next_size);
            std::mem::swap(&mut term, &mut next_term);
            std::mem::swap(&mut size, &mut next_size);
            for (i, &x) in term.iter().enumerate() {
                flow.value[i] = flow.value[i] + x;
                lost[i] += f64::from(k) * size[i];
            }
        }
        let unit = (self.size() as f64 + 4.0) * T::UNIT * UPWARD;
        flow.elapsed += time.to_f64();
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        let part_size = time_size / f64::from(count + 1);
        self.magnitude.sums_into(&size, part_size, &mut next_size);
        let tails = self.nearby.sums(&next_size);
        for ((local, lost), tail) in flow.local.iter_mut().zip(&lost).zip(tails) {
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
        let (mut moved, mut next) = (vec![0.0; rows], vec![0.0; rows]);
        self.magnitude
            .sums_into(&size, time_size * UPWARD, &mut moved);
        self.magnitude
            .sums_into(&moved, 0.5 * time_size * UPWARD, &mut next);
        let in_f64 = (rows as f64 + 8.0) * 0.5 * f64::EPSILON * UPWARD;
        let unit = (rows as f64 + 4.0) * T::UNIT * UPWARD;
        flow.elapsed += time;
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        let rates = self.plain.sums(&near).zip(self.nearby.sums(&next));
        for (i, (rate, tail)) in rates.enumerate() {
            flow.value[i] = flow.value[i] + T::from_f64(rate * time);
            let lost = unit * (size[i] + moved[i]) + in_f64 * moved[i];
            flow.local[i] += (lost + tail) * damping;
        }
    }

    /// Carries a vector by one tabulated step.
    pub fn step(&self, flow: &mut Flow<T>, step: &Step<T>) {
        let unit = (self.size() as f64 + 4.0) * T::UNIT * UPWARD;
        let size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let moved: Vec<T> = step.growth.sums(&flow.value).collect();
        flow.elapsed += step.time;
        let damping = (-self.growth_rate * flow.elapsed).exp() * UPWARD;
        let bounds = step.size.sums(&size).zip(step.error.sums(&size));
        for (i, (moved_size, error)) in bounds.enumerate() {
            let rounding = moved_size + size[i];
            flow.local[i] += (unit * rounding + error) * damping;
            flow.value[i] = flow.value[i] + moved[i];
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
        Step::of(&Level::new(time.to_f64(), growth, error))
    }

    /// Bound of the error of every entry of a vector.
    pub fn bound(&self, flow: &Flow<T>) -> Vec<f64> {
        let growth = (self.growth_rate * flow.elapsed).exp() * UPWARD;
        self.reach
            .sums(&flow.local)
            .map(|sum| sum * growth)
            .collect()
    }

    /// `M x` in `f64`: the rate of change.
    pub fn approx_rate(&self, flow: &Flow<T>) -> Vec<f64> {
        let rates = self.generator.sums(&flow.value);
        rates.map(Real::to_f64).collect()
    }
}

impl<T: Real> Step<T> {
    fn of(level: &Level<T>) -> Step<T> {
        Step {
            time: level.time,
            growth: Sparse::of(&level.growth),
            size: Sparse::of(&level.size),
            error: Sparse::of(&level.error),
        }
    }
}

mod expand;
mod table;

pub use expand::{Expansion, Nearby};

#[cfg(test)]
mod tests;

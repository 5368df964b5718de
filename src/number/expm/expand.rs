//! A vector and its rates at one time, for values close by in plain `f64`.

use super::{Flow, Propagator, UPWARD};
use crate::number::{Double, dot};

/// Taylor's polynomial of `exp(M s) z` around one time.
///
/// # Error bound
/// Entry by entry, for `|s| <= reach`: [`Expansion::entry`] gives it for any row over the
/// vector. The terms are sums of products in `f64`; what they lose is bounded with the
/// magnitudes of their parts, so that cancelling rates of stiff systems are no exception.
#[derive(Debug, Default)]
pub struct Expansion {
    value: Vec<Double>,
    bound: Vec<f64>,
    /// `M^k z / k!` for `k` from one, and the same of magnitudes.
    terms: Vec<Vec<f64>>,
    sizes: Vec<Vec<f64>>,
    /// What follows the last term.
    tail: Vec<f64>,
    reach: f64,
}

/// One channel close to a node: `high + low + sum terms[k] s^(k+1)`.
#[derive(Clone, Debug, Default)]
pub struct Nearby {
    /// The value at the node.
    pub value: Double,
    /// Coefficients of `s`, `s^2`, ...
    pub terms: Vec<f64>,
    /// What the sum may be off by.
    pub bound: f64,
}

const UNIT: f64 = f64::EPSILON / 2.0;

impl Nearby {
    /// How far the value lies from that at the node.
    pub fn moved(&self, offset: f64) -> f64 {
        let sum = |sum, &term: &f64| sum * offset + term;
        self.terms.iter().rev().fold(0.0, sum) * offset
    }

    /// The rate of change.
    pub fn rate(&self, offset: f64) -> f64 {
        let terms = self.terms.iter().enumerate().rev();
        terms.fold(0.0, |sum, (k, &term)| sum * offset + (k + 1) as f64 * term)
    }
}

impl Propagator<Double> {
    /// How many terms reach far below an `f64` at `|s| <= reach`.
    pub fn terms_within(&self, reach: f64) -> usize {
        let angle = self.norm * reach;
        let (mut term, mut count) = (1.0, 0);
        // 2^-68 of the vector; the tail is part of the bound whatever it is.
        while term > 3.4e-21 && count < 40 {
            count += 1;
            term *= angle / f64::from(count + 1);
        }
        count as usize
    }

    /// Fills in the polynomial around a vector; `reach` is at most [`Propagator::base`].
    pub fn expand(&self, flow: &Flow<Double>, count: usize, reach: f64, into: &mut Expansion) {
        into.reach = reach;
        into.value.clone_from(&flow.value);
        into.bound = self.bound(flow);
        into.terms.resize(count, Vec::new());
        into.sizes.resize(count, Vec::new());
        let mut size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let rates = self.generator.apply(&flow.value);
        let mut term: Vec<f64> = rates.iter().map(|x| x.to_f64()).collect();
        for k in 1..=count {
            let divisor = k as f64;
            if k > 1 {
                term = self.plain.apply(&term);
                term.iter_mut().for_each(|x| *x /= divisor);
            }
            size = self.magnitude.apply(&size);
            size.iter_mut().for_each(|x| *x *= UPWARD / divisor);
            into.terms[k - 1].clone_from(&term);
            into.sizes[k - 1].clone_from(&size);
        }
        let next = self.magnitude.apply(&size);
        let power = reach.powi(count as i32 + 1) / (count + 1) as f64;
        let tail = self
            .nearby
            .rows()
            .map(|row| dot(row, &next) * power * UPWARD);
        into.tail = tail.collect();
    }
}

impl Expansion {
    /// A channel that is one entry of the vector.
    pub fn entry(&self, entry: usize, into: &mut Nearby) {
        into.value = self.value[entry];
        into.terms.clear();
        into.terms.extend(self.terms.iter().map(|term| term[entry]));
        let lost = self.lost(|list| list[entry].abs());
        into.bound = (lost + self.tail[entry] + self.bound[entry]) * UPWARD;
    }

    /// A channel that is a row over the vector.
    pub fn row(&self, row: &[Double], weights: &[f64], into: &mut Nearby) {
        into.value = dot(row, &self.value);
        let plain = |list: &[f64]| {
            row.iter()
                .zip(list)
                .map(|(w, x)| w.to_f64() * x)
                .sum::<f64>()
        };
        into.terms.clear();
        into.terms.extend(self.terms.iter().map(|term| plain(term)));
        let size = |list: &[f64]| {
            weights
                .iter()
                .zip(list)
                .map(|(w, x)| w * x.abs())
                .sum::<f64>()
        };
        // Sums of products once more, and the sum in double-double.
        let more = 1.0 + 0.5 * self.value.len() as f64;
        let own: f64 = weights
            .iter()
            .zip(&self.value)
            .map(|(w, x)| w * x.to_f64().abs())
            .sum();
        let lost = more * self.lost(size) + more * 1e-30 * own;
        into.bound = (lost + size(&self.tail) + size(&self.bound)) * UPWARD;
    }

    /// What Horner's rule and the terms themselves lose within the reach. The first term comes
    /// from double-double; each later one is a sum of products of the one before it.
    fn lost(&self, of: impl Fn(&[f64]) -> f64) -> f64 {
        let products = self.value.len() as f64 + 5.0;
        let (mut power, mut sum) = (1.0, 0.0);
        for (index, (term, size)) in self.terms.iter().zip(&self.sizes).enumerate() {
            power *= self.reach;
            let k = (index + 1) as f64;
            let own = if index == 0 { 1.0 } else { products * k };
            sum += power
                * ((2.0 * k + 5.0) * of(term) + own * of(if index == 0 { term } else { size }));
        }
        sum * UNIT
    }
}

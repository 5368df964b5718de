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
    /// `M^k z / k!` for `k` from one, and the same of magnitudes from zero.
    terms: Vec<Vec<f64>>,
    sizes: Vec<Vec<f64>>,
    /// What follows the last term.
    tail: Vec<f64>,
    next: Vec<f64>,
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
    /// The rate of change at the node, its own rate, and what the other terms add at most.
    rates: [f64; 3],
    reach: f64,
}

const UNIT: f64 = f64::EPSILON / 2.0;

impl Nearby {
    /// How far the values at some offsets lie from that at the node.
    pub fn moved(&self, offsets: &[f64], moved: &mut Vec<f64>) {
        moved.clear();
        moved.resize(offsets.len(), 0.0);
        // Term by term over all offsets: they do not wait for each other.
        for &term in self.terms.iter().rev() {
            for (sum, offset) in moved.iter_mut().zip(offsets) {
                *sum = (*sum + term) * offset;
            }
        }
    }

    /// No rate of change within the reach is larger.
    pub fn fastest(&self) -> f64 {
        let [rate, change, rest] = self.rates;
        rate.abs() + change.abs() * self.reach + rest
    }

    /// No rate of change at an offset is larger.
    pub fn rate(&self, offset: f64) -> f64 {
        let [rate, change, rest] = self.rates;
        (rate + change * offset).abs() + rest
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
        let size = self.size();
        into.reach = reach;
        into.value.clone_from(&flow.value);
        into.bound = self.bound(flow);
        into.terms.resize_with(count, || vec![0.0; size]);
        into.sizes.resize_with(count + 1, || vec![0.0; size]);
        let [first, ..] = &mut into.terms[..] else {
            return;
        };
        for (rate, exact) in first.iter_mut().zip(self.generator.sums(&flow.value)) {
            *rate = exact.to_f64();
        }
        for k in 1..count {
            let (before, after) = into.terms.split_at_mut(k);
            self.plain
                .sums_into(&before[k - 1], 1.0 / (k + 1) as f64, &mut after[0]);
        }
        for (entry, value) in into.sizes[0].iter_mut().zip(&flow.value) {
            *entry = value.to_f64().abs();
        }
        for k in 1..=count {
            let (before, after) = into.sizes.split_at_mut(k);
            self.magnitude
                .sums_into(&before[k - 1], UPWARD / k as f64, &mut after[0]);
        }
        // One term more, and what `exp(|M| s)` makes of it.
        let power = reach.powi(count as i32 + 1) / (count + 1) as f64 * UPWARD;
        into.next.resize(size, 0.0);
        self.magnitude
            .sums_into(&into.sizes[count], power, &mut into.next);
        into.tail.resize(size, 0.0);
        self.nearby.sums_into(&into.next, 1.0, &mut into.tail);
    }
}

impl Expansion {
    /// A channel that is one entry of the vector.
    pub fn entry(&self, entry: usize, into: &mut Nearby) {
        into.value = self.value[entry];
        into.terms.clear();
        into.terms.extend(self.terms.iter().map(|term| term[entry]));
        into.rates = self.rates(&into.terms);
        into.reach = self.reach;
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

    fn rates(&self, terms: &[f64]) -> [f64; 3] {
        let term = |k: usize| terms.get(k).copied().unwrap_or(0.0);
        let mut power = self.reach;
        let mut rest = 0.0;
        for (k, term) in terms.iter().enumerate().skip(2) {
            power *= self.reach;
            rest += (k + 1) as f64 * term.abs() * power;
        }
        [term(0), 2.0 * term(1), rest]
    }

    /// What Horner's rule and the terms themselves lose within the reach. The first term comes
    /// from double-double; each later one is a sum of products of the one before it.
    fn lost(&self, of: impl Fn(&[f64]) -> f64) -> f64 {
        let products = self.value.len() as f64 + 5.0;
        let (mut power, mut sum) = (1.0, 0.0);
        for (index, (term, size)) in self.terms.iter().zip(&self.sizes[1..]).enumerate() {
            power *= self.reach;
            let k = (index + 1) as f64;
            let own = if index == 0 { 1.0 } else { products * k };
            sum += power
                * ((2.0 * k + 5.0) * of(term) + own * of(if index == 0 { term } else { size }));
        }
        sum * UNIT
    }
}

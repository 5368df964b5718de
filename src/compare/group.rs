//! Rows of one channel that lie near one node: bounds of what they can come to together, which
//! mostly spares looking at them one by one.

use super::sums::Mark;
use crate::number::Double;

/// Rows of one channel that follow each other, list by list.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rows<'a> {
    pub times: &'a [Double],
    pub blurs: &'a [f64],
    pub written: &'a [f64],
    pub exact: &'a [f64],
    pub signed: &'a [f64],
    pub doubts: [&'a [f64]; 2],
    /// The shortest time between two of them, and a bound of the rate of change.
    pub shortest: f64,
    pub rate: f64,
    /// True where the digits are in full, and both kinds of doubt are the same.
    pub in_full: bool,
}

impl Rows<'_> {
    pub(super) fn mark(&self, row: usize) -> Mark {
        Mark {
            time: self.times[row],
            blur: self.blurs[row],
            written: self.written[row],
            signed: self.signed[row],
            size: self.exact[row].abs(),
            doubts: [self.doubts[0][row], self.doubts[1][row]],
        }
    }

    /// Bounds of what any of the rows can come to, with the digits of their pattern.
    pub(super) fn extremes(&self) -> Extremes {
        let [_, error] = ends_of(self.signed);
        let [smallest, size] = ends_of(self.exact);
        let [finest, coarsest] = ends_of(self.doubts[0]);
        Extremes {
            error,
            smallest,
            size,
            finest,
            coarsest,
        }
    }
}

/// Magnitudes that no row goes beyond.
pub(super) struct Extremes {
    pub error: f64,
    pub smallest: f64,
    pub size: f64,
    pub finest: f64,
    pub coarsest: f64,
}

/// The smallest and the largest magnitude of a list; four lanes, so that none waits for
/// another.
pub(super) fn ends_of(list: &[f64]) -> [f64; 2] {
    let (mut low, mut high) = ([f64::INFINITY; 4], [0.0f64; 4]);
    let fours = list.chunks_exact(4);
    let rest = fours.remainder();
    for four in fours {
        for lane in 0..4 {
            let x = four[lane].abs();
            low[lane] = if x < low[lane] { x } else { low[lane] };
            high[lane] = if x > high[lane] { x } else { high[lane] };
        }
    }
    let low = low.into_iter().chain(rest.iter().map(|x| x.abs()));
    let high = high.into_iter().chain(rest.iter().map(|x| x.abs()));
    [low.fold(f64::INFINITY, f64::min), high.fold(0.0, f64::max)]
}

/// The largest score of any row and the first row that has it.
pub(super) fn largest_of(rows: usize, score: impl Fn(usize) -> f64) -> (usize, f64) {
    let mut best = (0, f64::NEG_INFINITY);
    for row in 0..rows {
        let score = score(row);
        if score > best.1 {
            best = (row, score);
        }
    }
    best
}

/// Four sums beside each other, so that none waits for the last.
pub(super) fn squares(list: &[f64]) -> f64 {
    let mut sums = [0.0; 4];
    let fours = list.chunks_exact(4);
    let rest: f64 = fours.remainder().iter().map(|x| x * x).sum();
    for four in fours {
        for (sum, x) in sums.iter_mut().zip(four) {
            *sum += x * x;
        }
    }
    (sums[0] + sums[1]) + (sums[2] + sums[3]) + rest
}

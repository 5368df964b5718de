//! Running sums of one channel: its errors, how they lie to the limit, and whether its
//! digits carry more than their pattern says. Sums over parts of a file are joined in the
//! order of the parts.

use super::group::{Extremes, Rows, ends_of, largest_of, squares};
use super::margin::{Deviation, Limit, Margin, Spot};
use super::trace::Traced;
use crate::number::Double;
use crate::trajectory::{Resolution, half_ulp};

/// Rows that must all lie far below the assumed resolution before it is dropped.
const ROWS_TO_REFUTE: u64 = 8;
/// How far: where digits are really rounded, one row in ten lies below this.
const FAR_BELOW: f64 = 0.1;
/// Errors that are known to this part of their root mean square show it to all the digits
/// that are printed anywhere; below the rounding of the peak nobody looks for digits.
const SHARP: f64 = 1.0 / 2048.0;

/// One value of a row and what it comes to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Mark {
    /// The time of the row, and how far it is known.
    pub time: Double,
    pub blur: f64,
    /// As written, not converted.
    pub written: f64,
    /// `written - exact`, converted.
    pub signed: f64,
    /// The magnitude of the exact value.
    pub size: f64,
    /// What the digits resolve: as their pattern says, and in full.
    pub doubts: [f64; 2],
}

/// Running sums of one channel.
#[derive(Clone, Debug)]
pub(super) struct Sums {
    limit: Limit,
    rows: u64,
    worst: Option<Mark>,
    squares: f64,
    last: Option<Mark>,
    peak: f64,
    steepest: f64,
    /// First and last time and exact value.
    ends: Option<[(f64, f64); 2]>,
    /// First and last value written.
    written: Option<[f64; 2]>,
    /// The smallest and the largest magnitude of them; of values in full nobody asks.
    sizes: [f64; 2],
    /// Rows that tell of the digits, and the largest error in units of the resolution.
    telling: u64,
    largest_in_units: f64,
    /// With the digits as their pattern says, and in full.
    with: [Against; 2],
    /// The most that any exact value may be off by.
    loosest: f64,
}

/// Extremes of one assumption on the digits.
#[derive(Clone, Copy, Debug)]
struct Against {
    /// Against the limit of each row.
    margin: Margin,
    decisive: Option<Mark>,
    doubtful: Option<Mark>,
    /// The row farthest from the exact value at most, for a limit that is known only
    /// at the end; and the largest certain error.
    above: Option<Mark>,
    below: f64,
}

/// `error / limit`, with no error using nothing of any limit.
fn share(error: f64, limit: f64) -> f64 {
    if error == 0.0 { 0.0 } else { error / limit }
}

impl Mark {
    fn error(&self) -> f64 {
        self.signed.abs()
    }

    /// As a point of a plot.
    pub(super) fn traced(&self, value: f64) -> Traced {
        Traced {
            time: self.time.to_f64(),
            written: value,
            error: self.signed,
            doubts: self.doubts,
        }
    }

    /// The part of the limit that the error uses; where the limit is a part of the peak, which
    /// is known at the end only, it is the same in all rows.
    pub(super) fn share_of(&self, limit: &Limit) -> f64 {
        let allowed = match limit.of_peak {
            true => 1.0,
            false => limit.at(self.size),
        };
        self.error() / allowed
    }

    fn spot(&self, limit: &Limit, with: usize) -> Spot {
        Spot {
            at: self.time.to_f64(),
            error: self.error(),
            resolution: self.doubts[with],
            limit: limit.at(self.size),
        }
    }
}

impl Against {
    const NOTHING: Against = Against {
        margin: Margin::NOTHING,
        decisive: None,
        doubtful: None,
        above: None,
        below: f64::NEG_INFINITY,
    };

    fn add(&mut self, mark: &Mark, limit: &Limit, with: usize) {
        let row = mark.spot(limit, with);
        // f64::max would pass over what is not a number.
        let certain = row.most() - row.limit;
        let certain = if certain.is_nan() {
            f64::INFINITY
        } else {
            certain
        };
        self.margin.certain = self.margin.certain.max(certain);
        let broken = row.error - row.resolution - row.limit;
        self.margin.broken = self.margin.broken.max(broken);
        self.below = self.below.max(row.error - row.resolution);
        self.consider(mark, limit, with);
    }

    /// Keeps a row where it goes before those kept so far.
    fn consider(&mut self, mark: &Mark, limit: &Limit, with: usize) {
        let row = mark.spot(limit, with);
        let used = share(row.error, row.limit);
        if self.decisive.is_none() || used > self.margin.used {
            self.margin.used = used;
            self.decisive = Some(*mark);
        }
        let share_of = |mark: &Mark| {
            let row = mark.spot(limit, with);
            share(row.most(), row.limit)
        };
        if self.doubtful.is_none_or(|d| share_of(mark) > share_of(&d)) {
            self.doubtful = Some(*mark);
        }
        let above = self.above.map(|above| above.error() + above.doubts[with]);
        if above.is_none_or(|above| row.most() > above) {
            self.above = Some(*mark);
        }
    }

    fn join(&mut self, next: &Against, limit: &Limit, with: usize) {
        self.margin.certain = self.margin.certain.max(next.margin.certain);
        self.margin.broken = self.margin.broken.max(next.margin.broken);
        self.below = self.below.max(next.below);
        for mark in [&next.decisive, &next.doubtful, &next.above]
            .into_iter()
            .flatten()
        {
            self.consider(mark, limit, with);
        }
    }

    fn marks(&mut self) -> impl Iterator<Item = &mut Mark> {
        let marks = [&mut self.decisive, &mut self.doubtful, &mut self.above];
        marks.into_iter().flatten()
    }
}

impl Sums {
    pub(super) fn new(limit: Limit) -> Sums {
        Sums {
            limit,
            rows: 0,
            worst: None,
            squares: 0.0,
            last: None,
            peak: 0.0,
            steepest: 0.0,
            ends: None,
            written: None,
            sizes: [f64::INFINITY, 0.0],
            telling: 0,
            largest_in_units: 0.0,
            with: [Against::NOTHING; 2],
            loosest: 0.0,
        }
    }

    /// How steeply the exact value changes up to the next row.
    fn slope(&mut self, next: (f64, f64)) {
        if let Some([_, (time, value)]) = self.ends
            && next.0 > time
        {
            self.steepest = self.steepest.max((next.1 - value).abs() / (next.0 - time));
        }
    }

    /// Only values that move, and are not rounded away to zero, tell of the digits.
    fn tells(&self, written: f64) -> bool {
        written != 0.0 && self.written.is_none_or(|[_, last]| last != written)
    }

    fn see(&mut self, [smallest, largest]: [f64; 2]) {
        self.sizes = [self.sizes[0].min(smallest), self.sizes[1].max(largest)];
    }

    /// The smallest and the largest magnitude of values that were not printed in full.
    pub(super) fn sizes(&self) -> [f64; 2] {
        self.sizes
    }

    /// The next row, whose exact value is `exact`, with its bound.
    pub(super) fn add(&mut self, mark: Mark, exact: f64, bound: f64) {
        let here = (mark.time.to_f64(), exact);
        self.slope(here);
        self.telling += u64::from(self.tells(mark.written));
        self.ends = Some([self.ends.map_or(here, |[first, _]| first), here]);
        let first = self.written.map_or(mark.written, |[first, _]| first);
        self.written = Some([first, mark.written]);
        self.see([mark.written.abs(); 2]);
        let error = mark.error();
        if self.worst.is_none_or(|worst| error > worst.error()) {
            self.worst = Some(mark);
        }
        self.rows += 1;
        self.squares += error * error;
        self.last = Some(mark);
        self.peak = self.peak.max(mark.size);
        let in_units = share(error, mark.doubts[0]);
        self.largest_in_units = self.largest_in_units.max(in_units);
        for (with, against) in self.with.iter_mut().enumerate() {
            against.add(&mark, &self.limit, with);
        }
        self.loosest = self.loosest.max(bound);
    }

    /// The next rows, whose exact values may all be off by `bound`: what comes out is the same as
    /// row by row, but for the order in which squares are added. Rows are looked at one by one
    /// only where together they could go beyond what was seen before.
    pub(super) fn add_group(&mut self, group: &Rows, bound: f64) {
        let rows = group.times.len();
        let own = group.extremes();
        if rows < 4 || !(own.error + own.size + own.coarsest).is_finite() {
            for row in 0..rows {
                self.add(group.mark(row), group.exact[row], bound);
            }
            return;
        }
        let ends = [0, rows - 1].map(|row| (group.times[row].to_f64(), group.exact[row]));
        self.slope(ends[0]);
        self.slopes(group, own.size);
        self.telling += u64::from(self.tells(group.written[0]));
        let moving = group.written.windows(2);
        self.telling += moving.filter(|w| w[1] != 0.0 && w[1] != w[0]).count() as u64;
        self.ends = Some([self.ends.map_or(ends[0], |[first, _]| first), ends[1]]);
        let first = self.written.map_or(group.written[0], |[first, _]| first);
        self.written = Some([first, group.written[rows - 1]]);
        self.see(match group.in_full {
            true => [0.0, f64::INFINITY],
            false => ends_of(group.written),
        });
        self.rows += rows as u64;
        self.squares += squares(group.signed);
        self.last = Some(group.mark(rows - 1));
        self.peak = self.peak.max(own.size);
        if self.worst.is_none_or(|known| own.error > known.error()) {
            let (place, _) = largest_of(rows, |row| group.signed[row].abs());
            self.worst = Some(group.mark(place));
        }
        if share(own.error, own.finest) > self.largest_in_units {
            let in_units = |row: usize| share(group.signed[row].abs(), group.doubts[0][row]);
            let (_, in_units) = largest_of(rows, in_units);
            self.largest_in_units = self.largest_in_units.max(in_units);
        }
        let [pattern, full] = &mut self.with;
        if pattern.could_grow(&own, &self.limit, 0) {
            pattern.add_group(group, &self.limit, 0);
        }
        // Digits in full have no pattern that could be given up.
        if !group.in_full {
            let [finest, coarsest] = ends_of(group.doubts[1]);
            let own = Extremes {
                finest,
                coarsest,
                ..own
            };
            if full.could_grow(&own, &self.limit, 1) {
                full.add_group(group, &self.limit, 1);
            }
        }
        self.loosest = self.loosest.max(bound);
    }

    /// The steepest change between two rows of a group.
    fn slopes(&mut self, group: &Rows, size: f64) {
        let change = |pair: &[f64]| (pair[1] - pair[0]).abs();
        // Nowhere steeper than the rate of change, but for the rounding of two values.
        let rounding = 4.0 * half_ulp(size);
        if group.shortest > 0.0 && group.rate + rounding / group.shortest <= self.steepest {
            return;
        }
        for (pair, values) in group.times.windows(2).zip(group.exact.windows(2)) {
            let span = pair[1].to_f64() - pair[0].to_f64();
            if span > 0.0 {
                self.steepest = self.steepest.max(change(values) / span);
            }
        }
    }

    /// Takes in what the rows after these come to.
    pub(super) fn join(&mut self, next: &Sums) {
        let (Some([first, last]), Some([written, last_written])) = (next.ends, next.written) else {
            return;
        };
        self.slope(first);
        // The first row of a part counts as one that moves unless it is zero.
        let counted = written != 0.0;
        self.telling += next.telling - u64::from(counted) + u64::from(self.tells(written));
        self.ends = Some([self.ends.map_or(first, |[first, _]| first), last]);
        let first = self.written.map_or(written, |[first, _]| first);
        self.written = Some([first, last_written]);
        self.see(next.sizes);
        self.steepest = self.steepest.max(next.steepest);
        self.rows += next.rows;
        self.squares += next.squares;
        self.last = next.last;
        self.peak = self.peak.max(next.peak);
        self.largest_in_units = self.largest_in_units.max(next.largest_in_units);
        if let Some(worst) = next.worst
            && self.worst.is_none_or(|known| worst.error() > known.error())
        {
            self.worst = Some(worst);
        }
        for (with, (own, next)) in self.with.iter_mut().zip(&next.with).enumerate() {
            own.join(next, &self.limit, with);
        }
        self.loosest = self.loosest.max(next.loosest);
    }

    /// Every row that is quoted, to be computed once more.
    pub(super) fn marks(&mut self) -> impl Iterator<Item = &mut Mark> {
        let [pattern, full] = &mut self.with;
        let own = [&mut self.worst, &mut self.last].into_iter().flatten();
        own.chain(pattern.marks()).chain(full.marks())
    }

    /// True where the exact values are known well enough for every digit that is printed and
    /// for every decision.
    pub(super) fn is_sharp(&self, printed: Resolution) -> bool {
        let floor = self.root_mean_square().max(half_ulp(self.peak));
        let place = usize::from(self.refuted(printed));
        let Margin {
            certain, broken, ..
        } = self.margin(place);
        let bound = 2.0 * self.loosest;
        let near = |number: f64| number.abs() <= bound;
        let units = (self.largest_in_units - FAR_BELOW).abs();
        self.loosest <= SHARP * floor && !near(certain) && !near(broken) && units > 1e-3
    }

    fn root_mean_square(&self) -> f64 {
        (self.squares / self.rows.max(1) as f64).sqrt()
    }

    fn refuted(&self, printed: Resolution) -> bool {
        let guessed = printed != Resolution::Full;
        guessed && self.telling >= ROWS_TO_REFUTE && self.largest_in_units < FAR_BELOW
    }

    fn margin(&self, place: usize) -> Margin {
        let with = &self.with[place];
        if !self.limit.of_peak {
            return with.margin;
        }
        let allowed = self.limit.at(self.peak);
        let above = with
            .above
            .map_or(0.0, |above| above.error() + above.doubts[place]);
        Margin {
            certain: above - allowed,
            broken: with.below - allowed,
            used: share(self.worst.map_or(0.0, |worst| worst.error()), allowed),
        }
    }

    pub(super) fn conclude(self, printed: Resolution) -> Deviation {
        let refuted = self.refuted(printed);
        let place = usize::from(refuted);
        let with = self.with[place];
        let spot =
            |mark: Option<Mark>| mark.map_or(Spot::NOWHERE, |mark| mark.spot(&self.limit, place));
        let mut margin = self.margin(place);
        let (mut worst, mut doubtful) = (spot(self.worst), spot(with.doubtful));
        let mut decisive = spot(with.decisive);
        if self.limit.of_peak {
            let allowed = self.limit.at(self.peak);
            worst.limit = allowed;
            decisive = worst;
            doubtful = Spot {
                limit: allowed,
                ..spot(with.above)
            };
        } else if with.decisive.is_some() {
            margin.used = share(decisive.error, decisive.limit);
        }
        Deviation {
            rows: self.rows,
            worst: worst.error,
            worst_at: worst.at,
            worst_resolution: worst.resolution,
            worst_limit: worst.limit,
            rms: self.root_mean_square(),
            end: self.last.map_or(0.0, |last| last.signed),
            peak: self.peak,
            steepest: self.steepest,
            resolution: if refuted { Resolution::Full } else { printed },
            margin,
            decisive,
            doubtful,
        }
    }
}

impl Against {
    /// False where no row within these bounds can go beyond what was seen before: every score
    /// rises with the error and falls with the limit, and rounding keeps that so.
    fn could_grow(&self, rows: &Extremes, limit: &Limit, with: usize) -> bool {
        let (Some(doubtful), Some(above)) = (&self.doubtful, &self.above) else {
            return true;
        };
        let least = limit.at(rows.smallest);
        let most = rows.error + rows.coarsest;
        let doubtful = doubtful.spot(limit, with);
        most - least > self.margin.certain
            || rows.error - rows.finest - least > self.margin.broken
            || rows.error - rows.finest > self.below
            || share(rows.error, least) > self.margin.used
            || share(most, least) > share(doubtful.most(), doubtful.limit)
            || most > above.error() + above.doubts[with]
    }

    fn add_group(&mut self, group: &Rows, limit: &Limit, with: usize) {
        let rows = group.times.len();
        let error = |row: usize| group.signed[row].abs();
        let doubt = |row: usize| group.doubts[with][row];
        let limit_at = |row: usize| limit.at(group.exact[row].abs());
        let (_, certain) = largest_of(rows, |row| (error(row) + doubt(row)) - limit_at(row));
        let (_, broken) = largest_of(rows, |row| error(row) - doubt(row) - limit_at(row));
        let (_, below) = largest_of(rows, |row| error(row) - doubt(row));
        self.margin.certain = self.margin.certain.max(certain);
        self.margin.broken = self.margin.broken.max(broken);
        self.below = self.below.max(below);
        let (decisive, _) = largest_of(rows, |row| share(error(row), limit_at(row)));
        let (doubtful, _) = largest_of(rows, |row| share(error(row) + doubt(row), limit_at(row)));
        let (above, _) = largest_of(rows, |row| error(row) + doubt(row));
        for place in [decisive, doubtful, above] {
            self.consider(&group.mark(place), limit, with);
        }
    }
}

#[cfg(test)]
mod tests;

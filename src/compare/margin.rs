//! Running sums of one channel: its errors, how they lie to the limit, and whether its
//! digits carry more than their pattern says.

use crate::trajectory::Resolution;

/// The error that is allowed: `absolute + relative * |exact|`, or relative to the
/// channel's peak.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limit {
    /// In the unit of the channel.
    pub absolute: f64,
    /// A fraction.
    pub relative: f64,
    /// True where the fraction is of the peak.
    pub of_peak: bool,
}

/// Errors of one channel of one run.
///
/// # Units
/// Those of the channel in the case; times in the unit of the case.
#[derive(Clone, Debug)]
pub struct Deviation {
    /// Rows that were compared.
    pub rows: u64,
    /// Largest `|written - exact|`.
    pub worst: f64,
    /// The time of it.
    pub worst_at: f64,
    /// What the digits resolve there.
    pub worst_resolution: f64,
    /// The limit there.
    pub worst_limit: f64,
    /// Root mean square of the errors.
    pub rms: f64,
    /// `written - exact` in the last row.
    pub end: f64,
    /// Largest `|exact|` at the rows.
    pub peak: f64,
    /// Steepest change of the exact value from row to row.
    pub steepest: f64,
    /// What was assumed of the digits in the end.
    pub resolution: Resolution,
    /// How the errors lie to the limit.
    pub margin: Margin,
    /// The row that uses most of its limit.
    pub decisive: Spot,
    /// The same with the resolution counted against it.
    pub doubtful: Spot,
}

/// One row of one channel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spot {
    /// Its time.
    pub at: f64,
    /// `|written - exact|`.
    pub error: f64,
    /// What its digits resolve.
    pub resolution: f64,
    /// The limit there.
    pub limit: f64,
}

/// How the errors of all rows lie to the limit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Margin {
    /// Largest `|error| + resolution - limit`: below zero, every row keeps the limit.
    pub certain: f64,
    /// Largest `|error| - resolution - limit`: above zero, some row breaks it.
    pub broken: f64,
    /// Largest `|error| / limit`.
    pub used: f64,
}

/// Rows that must all lie far below the assumed resolution before it is dropped.
const ROWS_TO_REFUTE: u64 = 8;
/// How far: where digits are really rounded, one row in ten lies below this.
const FAR_BELOW: f64 = 0.1;

/// Running sums of one channel.
pub(super) struct Sums {
    rows: u64,
    worst: Spot,
    worst_full: f64,
    squares: f64,
    end: f64,
    peak: f64,
    steepest: f64,
    last: Option<(f64, f64)>,
    last_written: Option<f64>,
    /// The value written differs from that of the row before.
    moves: bool,
    /// Rows that tell of the digits, and the largest error in units of the resolution.
    telling: u64,
    largest_in_units: f64,
    /// With the digits as their pattern says, and in full.
    with: [Against; 2],
}

/// Extremes of one assumption on the digits.
#[derive(Clone, Copy)]
struct Against {
    /// Against the limit of each row.
    margin: Margin,
    decisive: Spot,
    doubtful: Spot,
    /// The row farthest from the exact value at most, for a limit that is known only
    /// at the end; and the largest certain error.
    above: Spot,
    below: f64,
}

impl Limit {
    /// The limit where the exact value has this magnitude.
    pub fn at(&self, size: f64) -> f64 {
        self.absolute + self.relative * size
    }
}

impl Margin {
    const NOTHING: Margin = Margin {
        certain: f64::NEG_INFINITY,
        broken: f64::NEG_INFINITY,
        used: 0.0,
    };
}

impl Spot {
    const NOWHERE: Spot = Spot {
        at: f64::NAN,
        error: 0.0,
        resolution: 0.0,
        limit: f64::INFINITY,
    };

    fn most(&self) -> f64 {
        self.error + self.resolution
    }
}

/// `error / limit`, with no error using nothing of any limit.
fn share(error: f64, limit: f64) -> f64 {
    if error == 0.0 { 0.0 } else { error / limit }
}

impl Against {
    const NOTHING: Against = Against {
        margin: Margin::NOTHING,
        decisive: Spot::NOWHERE,
        doubtful: Spot::NOWHERE,
        above: Spot::NOWHERE,
        below: f64::NEG_INFINITY,
    };

    fn add(&mut self, row: Spot, first: bool) {
        let Spot {
            error,
            resolution,
            limit,
            ..
        } = row;
        // f64::max would pass over what is not a number.
        let certain = row.most() - limit;
        let certain = if certain.is_nan() {
            f64::INFINITY
        } else {
            certain
        };
        self.margin.certain = self.margin.certain.max(certain);
        self.margin.broken = self.margin.broken.max(error - resolution - limit);
        let used = share(error, limit);
        if first || used > self.margin.used {
            self.margin.used = used;
            self.decisive = row;
        }
        if first || share(row.most(), limit) > share(self.doubtful.most(), self.doubtful.limit) {
            self.doubtful = row;
        }
        if first || row.most() > self.above.most() {
            self.above = row;
        }
        self.below = self.below.max(error - resolution);
    }
}

impl Sums {
    pub(super) fn new() -> Sums {
        Sums {
            rows: 0,
            worst: Spot::NOWHERE,
            worst_full: 0.0,
            squares: 0.0,
            end: 0.0,
            peak: 0.0,
            steepest: 0.0,
            last: None,
            last_written: None,
            moves: false,
            telling: 0,
            largest_in_units: 0.0,
            with: [Against::NOTHING; 2],
        }
    }

    /// Follows how steeply the exact value changes.
    pub(super) fn slope(&mut self, time: f64, value: f64) {
        if let Some((last_time, last_value)) = self.last
            && time > last_time
        {
            let slope = (value - last_value).abs() / (time - last_time);
            self.steepest = self.steepest.max(slope);
        }
        self.last = Some((time, value));
    }

    /// Only values that move, and are not rounded away to zero, tell of the digits.
    pub(super) fn written(&mut self, value: f64) {
        self.moves = value != 0.0 && self.last_written != Some(value);
        self.last_written = Some(value);
    }

    pub(super) fn add(&mut self, at: f64, signed: f64, size: f64, doubts: [f64; 2], limit: &Limit) {
        let error = signed.abs();
        let first = self.rows == 0;
        let limit = limit.at(size);
        let rows = doubts.map(|resolution| Spot {
            at,
            error,
            resolution,
            limit,
        });
        if first || error > self.worst.error {
            self.worst = rows[0];
            self.worst_full = doubts[1];
        }
        self.rows += 1;
        self.squares += error * error;
        self.end = signed;
        self.peak = self.peak.max(size);
        self.telling += u64::from(self.moves);
        self.largest_in_units = self.largest_in_units.max(share(error, doubts[0]));
        for (with, row) in self.with.iter_mut().zip(rows) {
            with.add(row, first);
        }
    }

    pub(super) fn conclude(self, limit: &Limit, printed: Resolution) -> Deviation {
        let guessed = printed != Resolution::Full;
        let refuted =
            guessed && self.telling >= ROWS_TO_REFUTE && self.largest_in_units < FAR_BELOW;
        let with = self.with[usize::from(refuted)];
        let worst_resolution = if refuted {
            self.worst_full
        } else {
            self.worst.resolution
        };
        let mut worst = Spot {
            resolution: worst_resolution,
            ..self.worst
        };
        let (mut margin, mut decisive, mut doubtful) = (with.margin, with.decisive, with.doubtful);
        if limit.of_peak {
            let allowed = limit.at(self.peak);
            margin = Margin {
                certain: with.above.most() - allowed,
                broken: with.below - allowed,
                used: share(worst.error, allowed),
            };
            worst.limit = allowed;
            decisive = worst;
            doubtful = Spot {
                limit: allowed,
                ..with.above
            };
        }
        Deviation {
            rows: self.rows,
            worst: worst.error,
            worst_at: worst.at,
            worst_resolution,
            worst_limit: worst.limit,
            rms: (self.squares / self.rows.max(1) as f64).sqrt(),
            end: self.end,
            peak: self.peak,
            steepest: self.steepest,
            resolution: if refuted { Resolution::Full } else { printed },
            margin,
            decisive,
            doubtful,
        }
    }
}

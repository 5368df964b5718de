//! Errors of one run in one pass over its rows.

use super::coverage::Coverage;
use super::stride::Strides;
use crate::exact::{Exact, Walk};
use crate::fault::Result;
use crate::number::{Conversion, Decimal, Double};
use crate::trajectory::{Findings, Grid, Kind, Resolution, Row, Source, Survey};

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

/// One run to be compared.
#[derive(Clone, Copy, Debug)]
pub struct Comparison<'a> {
    /// The truth.
    pub exact: &'a Exact,
    /// The bytes.
    pub source: &'a Source,
    /// What the first pass has found.
    pub survey: &'a Survey,
    /// From the file's unit of time to the case's.
    pub time: Conversion,
    /// For each selected column: place among the channels of the case, conversion to
    /// its unit, limit.
    pub channels: &'a [(usize, Conversion, Limit)],
    /// The step that the producer states, in the unit of the case.
    pub step: Option<f64>,
    /// Fewest rows within the window.
    pub least_rows: u64,
    /// The unit of time of the case, for findings.
    pub time_unit: &'a str,
}

/// What came out for one run.
#[derive(Clone, Debug)]
pub struct Compared {
    /// Rows within the window.
    pub rows: u64,
    /// Rows outside the window, which are not compared.
    pub outside: u64,
    /// Spacing of the rows in the unit of the case, where it is uniform.
    pub spacing: Option<f64>,
    /// In the order of the selected columns.
    pub channels: Vec<Deviation>,
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
    /// True where the errors showed that the digits carry more than their pattern says.
    pub refuted: bool,
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

/// Time constants or radians within the rounding of one stamp that are still followed.
const MOST_TURNS: f64 = 16.0;
/// Rows that must all lie far below the assumed resolution before it is dropped.
const ROWS_TO_REFUTE: u64 = 8;
/// How far: where digits are really rounded, one row in ten lies below this.
const FAR_BELOW: f64 = 0.1;

/// Running sums of one channel.
struct Sums {
    rows: u64,
    worst: Spot,
    worst_full: f64,
    squares: f64,
    end: f64,
    peak: f64,
    steepest: f64,
    last: Option<(f64, f64)>,
    /// The exact value differs from that of the row before.
    moves: bool,
    /// Rows whose error is not zero, and the largest error in units of the resolution.
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

impl<'a> Comparison<'a> {
    /// Goes through the rows of the run.
    ///
    /// # Errors
    /// A file that cannot be read.
    pub fn run(&self, findings: &mut Findings) -> Result<Compared> {
        let (from, to) = (self.exact.from(), self.exact.to());
        let span = (to - from).to_f64();
        let mut pass = Pass::new(self);
        let is_event = |stamp: f64| {
            let time = self.time.apply(Double::from(stamp));
            self.exact.jumps_near(time, 1e-9 * span)
        };
        // Findings of the rows and of their coverage come in turn.
        let mut gaps = Findings::default();
        let (start, end) = (from.to_f64(), to.to_f64());
        let mut coverage = Coverage::new(start, end, self.time_unit);
        let mut strides = self.step.map(|step| Strides::new(start, step));
        self.survey
            .rows(self.source, findings, &is_event, &mut |row| {
                let time = self.time.apply(row.time);
                let blur = self.time.stretch(row.time_resolution);
                if coverage.add(row.line, time.to_f64(), blur, &mut gaps) {
                    if let Some(strides) = &mut strides {
                        strides.add(row.line, time.to_f64());
                    }
                    let (time, blur) = self.on_step(time, blur);
                    pass.add(if time < from { from } else { time }, blur, row);
                }
                Ok(())
            })?;
        if let Some(strides) = strides.filter(|_| !findings.has(Kind::MissingRows)) {
            strides.conclude(self.time_unit, findings);
        }
        if !findings.has(Kind::MissingRows) {
            // Single rows that are missing from a uniform grid are seen by the reader.
            findings.append(gaps);
        }
        let (rows, outside) = coverage.conclude(self.least_rows, findings);
        let spacing = match self.survey.grid {
            Grid::Uniform { spacing, .. } => Some(self.time.stretch(spacing)),
            Grid::Varied => None,
        };
        Ok(Compared {
            rows,
            outside,
            spacing,
            channels: pass.conclude(),
        })
    }

    /// The exact multiple of the stated step, where the stamp agrees with it to its
    /// printed digits.
    fn on_step(&self, time: Double, blur: f64) -> (Double, f64) {
        let Some(step) = self.step else {
            return (time, blur);
        };
        if blur == 0.0 {
            return (time, blur);
        }
        let since = time - self.exact.from();
        let count = (since.to_f64() / step).round();
        // The step as it is written is meant, not the f64 nearest to it.
        let exact = Decimal::shortest(step).map_or(Double::from(step), Decimal::to_double);
        let multiple = exact * Double::from(count);
        // Of a step finer than the stamps every stamp would be a multiple.
        // A product in f64 is off by a unit in the last place.
        let allowed = (1.0001 * blur).max(2.0 * f64::EPSILON * time.to_f64().abs());
        let agrees = (since - multiple).abs().to_f64() <= allowed && step > 8.0 * blur;
        if count.abs() < 1e15 && agrees {
            (self.exact.from() + multiple, 0.0)
        } else {
            (time, blur)
        }
    }
}

/// The walk along the exact solution and the sums of all channels.
struct Pass<'c, 'a> {
    comparison: &'c Comparison<'a>,
    walk: Walk<'a>,
    sides: Option<[Walk<'a>; 2]>,
    sums: Vec<Sums>,
}

impl<'c, 'a> Pass<'c, 'a> {
    fn new(comparison: &'c Comparison<'a>) -> Pass<'c, 'a> {
        let sums = comparison.channels.iter().map(|_| Sums::new()).collect();
        Pass {
            comparison,
            walk: comparison.exact.walk(),
            sides: None,
            sums,
        }
    }

    fn add(&mut self, time: Double, blur: f64, row: &Row) {
        let exact = self.comparison.exact;
        // A stamp that fell short of a jump by its rounding alone is at the jump.
        let ulps = 4.0 * f64::EPSILON * time.to_f64().abs();
        let time = match exact.has_feed_through() {
            true => exact.jump_after(time, ulps).unwrap_or(time),
            false => time,
        };
        self.walk.go(time);
        let moved = self.moved_by(time, blur);
        let values = self.walk.values();
        let channels = self
            .comparison
            .channels
            .iter()
            .zip(&mut self.sums)
            .enumerate();
        for (place, ((channel, conversion, limit), sums)) in channels {
            let Some(written) = row.values[place] else {
                continue;
            };
            let truth = values.value[*channel];
            sums.slope(time.to_f64(), truth.to_f64());
            let error = (conversion.apply(Double::from(written)) - truth).to_f64();
            let rest = moved.as_ref().map_or(0.0, |moved| moved[*channel]) + values.bound[*channel];
            let as_printed = self.comparison.survey.channels[place];
            let doubts = [as_printed, Resolution::Full]
                .map(|resolution| conversion.stretch(resolution.at(written)) + rest);
            sums.add(time.to_f64(), error, truth.to_f64().abs(), doubts, limit);
        }
    }

    /// How far the exact values move within the rounding of the stamp.
    fn moved_by(&mut self, time: Double, blur: f64) -> Option<Vec<f64>> {
        if blur == 0.0 {
            return None;
        }
        let exact = self.comparison.exact;
        // While the fastest mode hardly moves, the rate tells; its own change within
        // the blur is covered by a tenth.
        let slow = exact.fastest_rate() * blur < 0.05;
        if slow && !exact.jumps_near(time, blur) {
            let rates = self.walk.approx_rates();
            return Some(rates.iter().map(|rate| 1.1 * rate.abs() * blur).collect());
        }
        let middle = &self.walk.values().value;
        let turns = exact.fastest_rate() * blur;
        if turns > MOST_TURNS {
            // Anything can have happened meanwhile.
            return Some(exact.peaks().iter().map(|peak| 2.0 * peak).collect());
        }
        // Densely enough that no swing of the fastest mode hides between the points.
        let points = (4.0 * turns).ceil().max(1.0);
        let [before, after] = self
            .sides
            .get_or_insert_with(|| [exact.walk(), exact.walk()]);
        let mut moved = vec![0.0f64; middle.len()];
        for point in 1..=points as u32 {
            let shift = blur * f64::from(point) / points;
            for (walk, shift) in [(&mut *before, -shift), (&mut *after, shift)] {
                let there = walk.go(time + Double::from(shift));
                for ((moved, there), middle) in moved.iter_mut().zip(&there.value).zip(middle) {
                    *moved = moved.max((*there - *middle).abs().to_f64());
                }
            }
        }
        Some(moved)
    }

    fn conclude(self) -> Vec<Deviation> {
        let channels = self
            .comparison
            .channels
            .iter()
            .zip(&self.comparison.survey.channels);
        let concluded = channels.zip(self.sums);
        concluded
            .map(|(((_, _, limit), printed), sums)| sums.conclude(limit, *printed))
            .collect()
    }
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
    fn new() -> Sums {
        Sums {
            rows: 0,
            worst: Spot::NOWHERE,
            worst_full: 0.0,
            squares: 0.0,
            end: 0.0,
            peak: 0.0,
            steepest: 0.0,
            last: None,
            moves: false,
            telling: 0,
            largest_in_units: 0.0,
            with: [Against::NOTHING; 2],
        }
    }

    /// Follows how steeply the exact value changes.
    fn slope(&mut self, time: f64, value: f64) {
        if let Some((last_time, last_value)) = self.last
            && time > last_time
        {
            let slope = (value - last_value).abs() / (time - last_time);
            self.steepest = self.steepest.max(slope);
        }
        self.moves = self.last.is_some_and(|(_, last)| last != value);
        self.last = Some((time, value));
    }

    fn add(&mut self, at: f64, signed: f64, size: f64, doubts: [f64; 2], limit: &Limit) {
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
        // A row that is hit exactly tells as well, unless nothing moves.
        self.telling += u64::from(error > 0.0 || self.moves);
        self.largest_in_units = self.largest_in_units.max(share(error, doubts[0]));
        for (with, row) in self.with.iter_mut().zip(rows) {
            with.add(row, first);
        }
    }

    fn conclude(self, limit: &Limit, printed: Resolution) -> Deviation {
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
            refuted,
            margin,
            decisive,
            doubtful,
        }
    }
}

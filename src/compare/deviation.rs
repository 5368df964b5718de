//! Errors of one run in one pass over its rows.

use super::coverage::Coverage;
use super::margin::{Deviation, Limit, Sums};
use super::stride::Strides;
use super::trace::{Trace, Traced};
use crate::exact::{Exact, Walk};
use crate::fault::Result;
use crate::number::{Conversion, Decimal, Double};
use crate::trajectory::{Findings, Grid, Kind, Resolution, Row, Source, Survey};

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
    /// True where points for a plot are wanted.
    pub traced: bool,
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
    /// Points for a plot of each of them; empty where none are wanted.
    pub traces: Vec<Vec<Traced>>,
}

/// One row as it is handed on to whoever looks closer, in the units of the case.
#[derive(Clone, Debug)]
pub struct Kept {
    /// Number of the row within the window, from zero.
    pub number: u64,
    /// Its time, and how far that is known.
    pub time: (f64, f64),
    /// For each selected column.
    pub channels: Vec<Option<KeptValue>>,
}

/// One value of such a row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct KeptValue {
    /// As written, converted.
    pub value: f64,
    /// As written, not converted.
    pub written: f64,
    /// `written - exact`.
    pub error: f64,
    /// What the digits resolve: as their pattern says, and in full.
    pub doubts: [f64; 2],
}

/// Takes some of the rows along.
pub struct Keeper<'k> {
    /// Which rows.
    pub wanted: &'k dyn Fn(u64) -> bool,
    /// What to do with them.
    pub take: &'k mut dyn FnMut(Kept),
}

/// Time constants or radians within the rounding of one stamp that are still followed.
const MOST_TURNS: f64 = 16.0;
impl<'a> Comparison<'a> {
    /// Goes through the rows of the run.
    ///
    /// # Errors
    /// A file that cannot be read.
    pub fn run(&self, findings: &mut Findings, keeper: &mut Keeper) -> Result<Compared> {
        let (from, to) = (self.exact.from(), self.exact.to());
        let span = (to - from).to_f64();
        let mut pass = Pass::new(self, keeper);
        let is_event = |stamp: f64| {
            let time = self.time.apply(Double::from(stamp));
            self.exact.jumps_near(time, 1e-9 * span)
        };
        // Findings of the rows and of their coverage come in turn.
        let mut gaps = Findings::default();
        let (start, end) = (from.to_f64(), to.to_f64());
        let mut coverage = Coverage::new(start, end, self.time_unit);
        let mut strides = self.step.map(|step| Strides::new(start, step));
        let rounded_start = self.start_is_rounded();
        self.survey
            .rows(self.source, findings, &is_event, &mut |row| {
                let time = self.time.apply(row.time);
                let printed = self.survey.time.at(row.time.to_f64());
                let printed = self.time.stretch(printed);
                let blur = match rounded_start {
                    true => printed,
                    false => self.time.stretch(row.time_resolution),
                };
                if coverage.add(row.line, time.to_f64(), printed, &mut gaps) {
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
            traces: std::mem::take(&mut pass.traces)
                .into_iter()
                .map(Trace::conclude)
                .collect(),
            channels: pass.conclude(),
        })
    }

    /// An even grid whose first stamp misses the start of the window, but no further than
    /// its digits allow: every stamp is off by as much as the first.
    fn start_is_rounded(&self) -> bool {
        let Some(first) = self.survey.first else {
            return false;
        };
        let first = first.to_double();
        let gap = (self.time.apply(first) - self.exact.from()).abs().to_f64();
        let printed = self.time.stretch(self.survey.time.at(first.to_f64()));
        let start = self.exact.from().to_f64().abs();
        gap > 4.0 * f64::EPSILON * start && gap <= 1.0001 * printed
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
struct Pass<'c, 'a, 'k> {
    comparison: &'c Comparison<'a>,
    keeper: &'c mut Keeper<'k>,
    rows: u64,
    walk: Walk<'a>,
    sides: Option<[Walk<'a>; 2]>,
    sums: Vec<Sums>,
    /// One for each of them, or none at all.
    traces: Vec<Trace>,
}

impl<'c, 'a, 'k> Pass<'c, 'a, 'k> {
    fn new(comparison: &'c Comparison<'a>, keeper: &'c mut Keeper<'k>) -> Pass<'c, 'a, 'k> {
        let sums = comparison.channels.iter().map(|_| Sums::new()).collect();
        let trace = Trace::new(comparison.exact.from(), comparison.exact.to());
        let traced = if comparison.traced {
            comparison.channels.len()
        } else {
            0
        };
        Pass {
            comparison,
            keeper,
            rows: 0,
            walk: comparison.exact.walk(),
            sides: None,
            sums,
            traces: vec![trace; traced],
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
        let number = self.rows;
        self.rows += 1;
        let mut kept = (self.keeper.wanted)(number).then(|| Kept {
            number,
            time: (time.to_f64(), blur),
            channels: vec![None; self.sums.len()],
        });
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
            let value = conversion.apply(Double::from(written));
            let error = (value - truth).to_f64();
            let rest = moved.as_ref().map_or(0.0, |moved| moved[*channel]) + values.bound[*channel];
            let as_printed = self.comparison.survey.channels[place];
            let digits = [as_printed, Resolution::Full]
                .map(|resolution| conversion.stretch(resolution.at(written)));
            let doubts = digits.map(|digits| digits + rest);
            if let Some(kept) = &mut kept {
                kept.channels[place] = Some(KeptValue {
                    value: value.to_f64(),
                    written,
                    error,
                    doubts: digits,
                });
            }
            if let Some(trace) = self.traces.get_mut(place) {
                let traced = Traced {
                    time: time.to_f64(),
                    written: value.to_f64(),
                    error,
                    doubts,
                };
                // Where the limit is a part of the peak, which is known at the end only, it
                // is the same in all rows.
                let allowed = match limit.of_peak {
                    true => 1.0,
                    false => limit.at(truth.to_f64().abs()),
                };
                trace.add(traced, error.abs() / allowed);
            }
            sums.written(written);
            sums.add(time.to_f64(), error, truth.to_f64().abs(), doubts, limit);
        }
        if let Some(kept) = kept {
            (self.keeper.take)(kept);
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

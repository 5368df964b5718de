//! The rows of a run in their order: which lie within the window, at what time, and what is
//! missing. What is left to do for each of them is handed out in chunks.

use super::chunk::{CHUNK_ROWS, Chunk};
use super::coverage::Coverage;
use super::deviation::Comparison;
use super::stride::Strides;
use crate::number::{Decimal, Double};
use crate::trajectory::{Batch, Findings, IsEvent, Kind, Order, Row, Survey, Surveyor};

/// Takes the batches of a file.
pub(super) struct Stage<'a> {
    order: Order<'a>,
    surveyor: Surveyor,
    findings: Findings,
    /// True where the last line had no end.
    open: bool,
    /// True where the survey is no guess.
    whole: bool,
    window: Window<'a>,
}

/// What the rows come to in the order of time.
struct Window<'a> {
    comparison: &'a Comparison<'a>,
    survey: &'a Survey,
    /// Findings of the rows and of their coverage come in turn.
    gaps: Findings,
    coverage: Coverage<'a>,
    strides: Option<Strides>,
    step: Option<Steps>,
    rounded_start: bool,
    chunk: Chunk,
    /// The last rows of the chunk before.
    tail: Chunk,
    full: Vec<Chunk>,
}

/// The stated step, as it is written and exactly.
struct Steps {
    plain: f64,
    exact: Double,
}

/// What is known when all rows were seen.
pub(super) struct Staged {
    pub survey: Survey,
    pub findings: Findings,
    pub rows: u64,
    pub outside: u64,
    pub largest_gap: f64,
    pub open: bool,
    /// The rows that no full chunk has.
    pub chunk: Chunk,
    pub last_rows: Chunk,
}

impl<'a> Stage<'a> {
    pub(super) fn new(
        comparison: &'a Comparison<'a>,
        survey: &'a Survey,
        whole: bool,
        is_event: &'a IsEvent<'a>,
    ) -> Stage<'a> {
        let exact = comparison.exact;
        let (start, end) = (exact.from().to_f64(), exact.to().to_f64());
        // The step as it is written is meant, not the f64 nearest to it.
        let decimal = |step| Decimal::shortest(step).map_or(Double::from(step), Decimal::to_double);
        let step = comparison.step;
        Stage {
            order: Order::new(survey, is_event),
            surveyor: Surveyor::new(comparison.channels.len()),
            findings: Findings::default(),
            open: false,
            whole,
            window: Window {
                comparison,
                survey,
                gaps: Findings::default(),
                coverage: Coverage::new(start, end, comparison.time_unit),
                strides: step.map(|step| Strides::new(start, step)),
                step: step.map(|step| Steps {
                    plain: step,
                    exact: decimal(step),
                }),
                rounded_start: start_is_rounded(comparison, survey),
                chunk: Chunk::default(),
                tail: Chunk::default(),
                full: Vec::new(),
            },
        }
    }

    /// The next batch; gives the chunks that are full now.
    pub(super) fn take(&mut self, batch: &Batch) -> Vec<Chunk> {
        if !self.whole {
            self.surveyor.add(batch);
        }
        self.open |= batch.open.is_some();
        let window = &mut self.window;
        self.order
            .take(batch, &mut self.findings, &mut |row| window.add(row));
        std::mem::take(&mut self.window.full)
    }

    pub(super) fn finish(mut self) -> Staged {
        let Comparison {
            stated,
            last_rows,
            least_rows,
            time_unit,
            ..
        } = *self.window.comparison;
        let mut findings = self.findings;
        self.order.finish(&mut findings);
        let window = self.window;
        if let Some(strides) = window.strides.filter(|_| !findings.has(Kind::MissingRows)) {
            strides.conclude(time_unit, &mut findings);
        }
        if !findings.has(Kind::MissingRows) {
            // Single rows that are missing from a uniform grid are seen by the reader.
            findings.append(window.gaps);
        }
        let (rows, outside) = window.coverage.conclude(least_rows, &mut findings);
        let mut last = window.tail;
        last.append(&window.chunk);
        Staged {
            survey: if self.whole {
                window.survey.clone()
            } else {
                self.surveyor.conclude_with(window.survey, stated)
            },
            findings,
            rows,
            outside,
            largest_gap: self.order.largest_gap(),
            open: self.open,
            last_rows: last.last(last_rows),
            chunk: window.chunk,
        }
    }
}

impl Window<'_> {
    fn add(&mut self, row: &Row) {
        let Comparison { time, exact, .. } = *self.comparison;
        let at = time.apply(row.time);
        let printed = time.stretch(row.stamp_resolution);
        let blur = match self.rounded_start {
            true => printed,
            false => time.stretch(row.time_resolution),
        };
        let inside = self
            .coverage
            .add(row.line, at.to_f64(), printed, &mut self.gaps);
        if !inside {
            return;
        }
        if let Some(strides) = &mut self.strides {
            strides.add(row.line, at.to_f64());
        }
        let (at, blur) = self.on_step(at, blur);
        let from = exact.from();
        self.chunk
            .push(if at < from { from } else { at }, blur, row.values);
        if self.chunk.times.len() == CHUNK_ROWS {
            let next = Chunk {
                first: self.chunk.first + CHUNK_ROWS as u64,
                ..Chunk::with_room(row.values.len())
            };
            let full = std::mem::replace(&mut self.chunk, next);
            self.tail = full.last(self.comparison.last_rows);
            self.full.push(full);
        }
    }

    /// The exact multiple of the stated step, where the stamp agrees with it to its
    /// printed digits.
    fn on_step(&self, time: Double, blur: f64) -> (Double, f64) {
        let Some(step) = self.step.as_ref().filter(|_| blur != 0.0) else {
            return (time, blur);
        };
        let from = self.comparison.exact.from();
        let since = time - from;
        let count = (since.to_f64() / step.plain).round();
        let multiple = step.exact * Double::from(count);
        // Of a step finer than the stamps every stamp would be a multiple.
        // A product in f64 is off by a unit in the last place.
        let allowed = (1.0001 * blur).max(2.0 * f64::EPSILON * time.to_f64().abs());
        let agrees = (since - multiple).abs().to_f64() <= allowed && step.plain > 8.0 * blur;
        // A program whose times are summed up short of a jump writes what was before it.
        let exact = self.comparison.exact;
        let gap = (multiple - since).to_f64();
        let short = gap > 0.0 && exact.has_feed_through() && exact.jump_after(time, gap).is_some();
        if count.abs() < 1e15 && agrees && !short {
            (from + multiple, 0.0)
        } else {
            (time, blur)
        }
    }
}

/// An even grid whose first stamp misses the start of the window, but no further than
/// its digits allow: every stamp is off by as much as the first.
fn start_is_rounded(comparison: &Comparison, survey: &Survey) -> bool {
    let Some(first) = survey.first else {
        return false;
    };
    let first = first.to_double();
    let Comparison { time, exact, .. } = *comparison;
    let gap = (time.apply(first) - exact.from()).abs().to_f64();
    let printed = time.stretch(survey.time.at(first.to_f64()));
    let start = exact.from().to_f64().abs();
    gap > 4.0 * f64::EPSILON * start && gap <= 1.0001 * printed
}

impl Chunk {
    fn with_room(channels: usize) -> Chunk {
        Chunk {
            first: 0,
            times: Vec::with_capacity(CHUNK_ROWS),
            blurs: Vec::with_capacity(CHUNK_ROWS),
            values: Vec::with_capacity(CHUNK_ROWS * channels),
        }
    }

    fn push(&mut self, time: Double, blur: f64, values: &[f64]) {
        self.times.push(time);
        self.blurs.push(blur);
        self.values.extend_from_slice(values);
    }

    fn append(&mut self, next: &Chunk) {
        if self.times.is_empty() {
            self.first = next.first;
        }
        self.times.extend_from_slice(&next.times);
        self.blurs.extend_from_slice(&next.blurs);
        self.values.extend_from_slice(&next.values);
    }

    /// The last rows, at most `most` of them.
    fn last(&self, most: usize) -> Chunk {
        let rows = self.times.len();
        let skip = rows.saturating_sub(most);
        let channels = self.values.len() / rows.max(1);
        Chunk {
            first: self.first + skip as u64,
            times: self.times[skip..].to_vec(),
            blurs: self.blurs[skip..].to_vec(),
            values: self.values[skip * channels..].to_vec(),
        }
    }
}

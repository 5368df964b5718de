//! Errors of one run in one pass over its rows.

use super::chunk::{Chunk, Part, Pass};
use super::margin::{Deviation, Limit};
use super::stage::{Stage, Staged};
use super::sums::Sums;
use super::trace::{Trace, Traced};
use crate::exact::{Exact, Nodes};
use crate::fault::Result;
use crate::number::Conversion;
use crate::trajectory::{
    Batch, Crew, Findings, Grid, Layout, Sample, Selection, Source, Stages, Stated, Survey,
};

/// One run to be compared.
#[derive(Clone, Copy)]
pub struct Comparison<'a> {
    /// The truth.
    pub exact: &'a Exact,
    /// The bytes.
    pub source: &'a Source,
    /// How the rows are laid out, and which columns are read.
    pub layout: &'a Layout,
    /// The columns that are read.
    pub selection: &'a Selection,
    /// What the submission says of the layout.
    pub stated: &'a Stated,
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
    /// The first row from this one on that is handed on, by its number within the window.
    pub next_wanted: &'a (dyn Fn(u64) -> u64 + Sync),
    /// So many of the last rows are handed on as well.
    pub last_rows: usize,
    /// Threads that may help.
    pub crew: &'a Crew,
}

/// What came out for one run.
#[derive(Clone, Debug)]
pub struct Compared {
    /// What the file looks like as a whole.
    pub survey: Survey,
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
    /// The rows that were wanted, in their order.
    pub kept: Vec<Kept>,
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

/// With fewer rows the quick way does not pay for its table.
const MANY_ROWS: u64 = 4096;
/// A guess that did not come true is replaced by what was seen; a file that then still looks
/// different is being written to.
const MOST_GUESSES: usize = 3;

impl Comparison<'_> {
    /// Goes through the rows of the run: with a guess of what the file looks like as a whole,
    /// and with plain `f64` where rows are dense; again where the guess does not come true or
    /// the exact values turn out to be needed more sharply.
    ///
    /// # Errors
    /// A file that cannot be read.
    pub fn run(&self, findings: &mut Findings) -> Result<Compared> {
        let sample = self
            .source
            .sample_rows(self.layout, self.selection, self.stated)?;
        let Sample {
            survey: mut guess,
            batches,
        } = sample;
        let batches = batches.as_deref();
        let (mut quick, mut guesses) = (true, 1);
        loop {
            let many = batches.is_none() || guess.rows >= MANY_ROWS;
            let step = self.time.stretch(guess.mean_step);
            let nodes = if quick && many {
                self.exact.nodes(step)
            } else {
                None
            };
            let Done { staged, part } = self.pass(&guess, nodes.as_ref(), batches)?;
            let sizes = part.sums.iter().map(Sums::sizes);
            let Staged {
                survey,
                largest_gap,
                open,
                ..
            } = &staged;
            if batches.is_none() && guess.has_guessed_end(*open) {
                guess.known.channels.clear();
                continue;
            }
            let came_true = survey.confirms(&guess, sizes, *largest_gap, *open);
            if !came_true && guesses < MOST_GUESSES {
                guess = staged.survey;
                guesses += 1;
                continue;
            }
            let mut sharp = part.sums.iter().zip(&guess.channels);
            if nodes.is_some() && !sharp.all(|(sums, &printed)| sums.is_sharp(printed)) {
                quick = false;
                guess = staged.survey;
                continue;
            }
            return Ok(self.conclude(staged, part, findings));
        }
    }

    /// Once through the file.
    fn pass(
        &self,
        guess: &Survey,
        nodes: Option<&Nodes>,
        batches: Option<&[Batch]>,
    ) -> Result<Done> {
        let is_event = |stamp: f64| self.is_event(stamp);
        let mut stage = Stage::new(self, guess, batches.is_some(), &is_event);
        let mut part = Part::new(self);
        let apart = |chunk: Chunk| Pass::new(self, guess, nodes).run(&chunk);
        match batches {
            Some(batches) => {
                for batch in batches {
                    for chunk in stage.take(batch) {
                        part.join(apart(chunk));
                    }
                }
            }
            None => self.source.stream(
                guess,
                self.crew,
                Stages {
                    in_order: &mut |batch| stage.take(batch),
                    apart: &apart,
                    gather: &mut |next| part.join(next),
                },
            )?,
        }
        let mut staged = stage.finish();
        part.join(apart(std::mem::take(&mut staged.chunk)));
        // The last rows, but for those that were wanted anyway.
        let first = staged.last_rows.first;
        let known = part.kept.partition_point(|row| row.number < first);
        if part.kept.len() - known < staged.last_rows.times.len() {
            part.kept.truncate(known);
            let mut last = Pass::new(self, guess, None).keep(&staged.last_rows);
            part.kept.append(&mut last);
        }
        if nodes.is_some() {
            let mut pass = Pass::new(self, guess, None);
            for (place, sums) in part.sums.iter_mut().enumerate() {
                sums.marks()
                    .for_each(|mark| *mark = pass.again(place, mark));
            }
        }
        Ok(Done { staged, part })
    }
}

/// One pass over a file.
struct Done {
    staged: Staged,
    part: Part,
}

impl Comparison<'_> {
    /// True where an input jumps at a stamp.
    fn is_event(&self, stamp: f64) -> bool {
        let span = (self.exact.to() - self.exact.from()).to_f64();
        let time = self.time.apply(stamp.into());
        self.exact.jumps_near(time, 1e-9 * span)
    }

    fn conclude(&self, staged: Staged, part: Part, findings: &mut Findings) -> Compared {
        findings.append(staged.findings);
        let spacing = match staged.survey.grid {
            Grid::Uniform { spacing, .. } => Some(self.time.stretch(spacing)),
            Grid::Varied => None,
        };
        let sums = part.sums.into_iter().zip(&staged.survey.channels);
        Compared {
            rows: staged.rows,
            outside: staged.outside,
            spacing,
            channels: sums
                .map(|(sums, &printed)| sums.conclude(printed))
                .collect(),
            traces: part.traces.into_iter().map(Trace::conclude).collect(),
            kept: part.kept,
            survey: staged.survey,
        }
    }
}

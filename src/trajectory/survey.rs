//! The first pass: what can be known only after every row was seen.

use super::batch::{Batch, Known};
use super::columns::recognise;
use super::grid::{Grid, GridFinder};
use super::layout::{Layout, SAMPLE_BYTES, Stated};
use super::long::{self, Head};
use super::open::Source;
use super::pieces::{check_length, line_end};
use super::resolution::{Pattern, Resolution};
use super::tables;
use crate::fault::{Fault, Result};
use crate::number::Decimal;

/// Which columns are read, counted from zero.
#[derive(Clone, Debug, PartialEq)]
pub struct Selection {
    /// The time stamps.
    pub time: usize,
    /// The channels, in the order in which their values are handed out.
    pub channels: Vec<usize>,
}

/// What one file looks like as a whole.
#[derive(Clone, Debug)]
pub struct Survey {
    /// The layout.
    pub layout: Layout,
    /// The columns that are read.
    pub selection: Selection,
    /// Rows with a time stamp.
    pub rows: u64,
    /// The grid of the stamps.
    pub grid: Grid,
    /// The average step between stamps.
    pub mean_step: f64,
    /// How finely the stamps are printed, where they are not exact multiples.
    pub time: Resolution,
    /// How finely each channel is printed.
    pub channels: Vec<Resolution>,
    /// Digits after the decimal sign and whether with an exponent, where that is the
    /// same in every row of a channel.
    pub even: Vec<Option<(u8, bool)>>,
    /// Digits of the longest value of each channel, where they are few.
    pub longest: Vec<Option<u8>>,
    /// Digits that nearly every value of a channel has, zero where that is not clear.
    pub usual_digits: Vec<usize>,
    /// The first stamp.
    pub first: Option<Decimal>,
    /// Columns whose text shows the same whatever other rows there are.
    pub(crate) known: Known,
}

impl Source {
    /// The layout of the file; `None` where it holds no rows.
    ///
    /// # Errors
    /// A file that cannot be read, is no text, or fits no layout.
    pub fn layout(&self, stated: &Stated) -> Result<Option<Layout>> {
        if let Some(table) = self.table() {
            return match stated.long {
                Some(_) => Err(long::refusal()),
                None => tables::layout(table),
            };
        }
        let Some(columns) = &stated.long else {
            return self.first_lines(&|lines| Layout::find(lines, stated));
        };
        let head = self.first_lines(&|lines| Head::find(lines, stated, columns))?;
        head.map_or(Ok(None), |head| self.long_layout(head).map(Some))
    }

    /// What is found in the first lines. A long preamble can fill the first sample; a larger one
    /// is taken only then.
    fn first_lines<T>(&self, find: &Find<T>) -> Result<Option<T>> {
        let (small, large) = SAMPLE_BYTES;
        let (sample, whole) = self.sample(small)?;
        let found = find(&lines(&sample, whole)?);
        if whole || matches!(found, Ok(Some(_))) {
            return found;
        }
        let (sample, whole) = self.sample(large)?;
        find(&lines(&sample, whole)?)
    }
}

type Find<'a, T> = dyn Fn(&[&[u8]]) -> Result<Option<T>> + 'a;

/// The whole lines of a text.
fn lines(sample: &[u8], whole: bool) -> Result<Vec<&[u8]>> {
    if let Some(format) = recognise(sample) {
        return Err(format.refusal());
    }
    if memchr::memchr(0, sample).is_some() {
        let fault = Fault::new("this file is not text: it holds zero bytes");
        return Err(fault.help("write CSV, or one of the binary formats that README.md names"));
    }
    let mut lines = Vec::new();
    let mut rest = sample.strip_prefix(b"\xef\xbb\xbf").unwrap_or(sample);
    while let Some((end, next)) = line_end(rest, whole) {
        check_length(end).map_err(|fault| fault.at(lines.len() as u64 + 1, 1))?;
        lines.push(&rest[..end]);
        rest = &rest[next..];
    }
    check_length(rest.len()).map_err(|fault| fault.at(lines.len() as u64 + 1, 1))?;
    if whole && !rest.is_empty() {
        lines.push(rest);
    }
    Ok(lines)
}

/// Gathers what the batches of a file show, in their order.
#[derive(Debug)]
pub(crate) struct Surveyor {
    channels: Vec<Pattern>,
    time: Pattern,
    grid: GridFinder,
    rows: u64,
    first: Option<Decimal>,
}

impl Surveyor {
    pub(crate) fn new(channels: usize) -> Surveyor {
        Surveyor {
            channels: vec![Pattern::new(); channels],
            time: Pattern::new(),
            grid: GridFinder::default(),
            rows: 0,
            first: None,
        }
    }

    pub(crate) fn add(&mut self, batch: &Batch) {
        self.time.join(&batch.time);
        for (pattern, more) in self.channels.iter_mut().zip(&batch.channels) {
            pattern.join(more);
        }
        for row in batch.rows.iter().filter(|row| !row.time.is_nan()) {
            if self.rows == 0 {
                self.first = batch.exact(row).decimal();
            }
            self.rows += 1;
            self.grid.add(row.time, batch.exact(row), row.printed);
        }
    }

    /// Rows are left out here: a sample goes on elsewhere in the file.
    pub(crate) fn interrupt(&mut self) {
        self.grid.interrupt();
        self.time.interrupt();
        self.channels.iter_mut().for_each(Pattern::interrupt);
    }

    /// What was found; of columns that had been known before, what was known.
    pub(crate) fn conclude_with(&self, guess: &Survey, stated: &Stated) -> Survey {
        let mut survey = self.conclude(&guess.layout, &guess.selection, stated);
        for place in (0..self.channels.len()).filter(|&place| guess.known.channel(place)) {
            survey.channels[place] = guess.channels[place];
            survey.longest[place] = guess.longest[place];
            survey.usual_digits[place] = guess.usual_digits[place];
            survey.even[place] = guess.even[place];
        }
        if guess.known.time {
            survey.time = guess.time;
            survey.grid = self.grid.conclude(guess.time);
        }
        survey.known = guess.known.clone();
        survey
    }

    pub(crate) fn conclude(&self, layout: &Layout, of: &Selection, stated: &Stated) -> Survey {
        // Stamps show their own pattern: what is stated is how values were printed.
        let digits = stated.digits.filter(|_| !self.time.is_clear());
        let time = match self.time.conclude_stamps(digits) {
            Resolution::Single => Resolution::Single,
            printed if printed.is_finer_than_single() && self.grid.is_single() => {
                Resolution::Single
            }
            _ if digits.is_none() && self.grid.is_chosen() => Resolution::Full,
            printed => printed,
        };
        let patterns = &self.channels;
        Survey {
            grid: self.grid.conclude(time),
            mean_step: self.grid.mean_step(),
            time,
            channels: resolutions(patterns, stated.digits),
            longest: patterns.iter().map(Pattern::longest).collect(),
            usual_digits: patterns.iter().map(Pattern::usual_digits).collect(),
            even: patterns.iter().map(Pattern::even).collect(),
            layout: layout.clone(),
            selection: of.clone(),
            rows: self.rows,
            first: self.first,
            known: Known {
                time: self.time.is_settled() && time == Resolution::Full,
                channels: patterns.iter().map(Pattern::is_settled).collect(),
            },
        }
    }
}

impl Survey {
    /// True where a last line without an end was held against digits that only samples of the file
    /// have shown: whether it is cut off is for all rows to say.
    pub(crate) fn has_guessed_end(&self, open: bool) -> bool {
        open && self.known.channels.contains(&true)
    }

    /// True where rows that were read with a guess of the survey came out as with this one.
    /// Holes of a grid are looked for with its step as it was known then: that does not matter as
    /// long as no gap between rows could be one with either step. `sizes` are the smallest and
    /// the largest magnitude of each channel.
    pub(crate) fn confirms(
        &self,
        guess: &Survey,
        sizes: impl Iterator<Item = [f64; 2]>,
        largest_gap: f64,
        open: bool,
    ) -> bool {
        let mut pairs = self.channels.iter().zip(&guess.channels).zip(sizes);
        let digits = self.time == guess.time
            && pairs.all(|((seen, &guessed), sizes)| seen.agrees_with(guessed, sizes));
        let end = !open || self.even == guess.even && self.usual_digits == guess.usual_digits;
        let grid = self.grid == guess.grid
            || match (self.grid, guess.grid) {
                (
                    Grid::Uniform {
                        spacing,
                        exact,
                        phases,
                    },
                    Grid::Uniform {
                        spacing: guessed,
                        exact: exactly,
                        phases: guessed_phases,
                    },
                ) => {
                    let near = (spacing - guessed).abs() <= 0.02 * spacing;
                    let holes = largest_gap >= 0.95 * spacing.min(guessed);
                    near && exact == exactly && phases == guessed_phases && !holes
                }
                _ => false,
            };
        digits && end && grid && self.first == guess.first
    }

    /// Goes through the whole file once.
    ///
    /// # Errors
    /// A file that cannot be read, or a line too long.
    pub fn new(
        source: &Source,
        layout: Layout,
        selection: Selection,
        stated: &Stated,
    ) -> Result<Survey> {
        source.survey(&layout, &selection, stated, &mut |_| {})
    }
}

impl Source {
    /// Goes through the whole file once; `each` gets every batch.
    pub(super) fn survey(
        &self,
        layout: &Layout,
        of: &Selection,
        stated: &Stated,
        each: &mut dyn FnMut(Batch),
    ) -> Result<Survey> {
        let mut surveyor = Surveyor::new(of.channels.len());
        self.batches(layout, of, &mut |batch| {
            surveyor.add(&batch);
            each(batch);
            Ok(())
        })?;
        let mut survey = surveyor.conclude(layout, of, stated);
        if let Some(table) = self.table() {
            tables::stored(table, &mut survey, stated.digits);
        }
        Ok(survey)
    }
}

/// The resolution of every column; one that tells nothing is printed like those beside it.
fn resolutions(patterns: &[Pattern], stated: Option<u8>) -> Vec<Resolution> {
    let concluded = patterns.iter().map(|pattern| pattern.conclude(stated));
    let concluded: Vec<Resolution> = concluded.collect();
    let of_others = |decimals: u8| {
        concluded
            .contains(&Resolution::Decimals(decimals))
            .then_some(Resolution::Decimals(decimals))
    };
    let each = patterns
        .iter()
        .zip(&concluded)
        .map(|(pattern, &own)| match pattern.even() {
            Some((decimals, false)) if pattern.tells_nothing() => {
                of_others(decimals).unwrap_or(own)
            }
            _ => own,
        });
    each.collect()
}

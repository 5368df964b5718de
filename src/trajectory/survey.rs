//! The first pass: what can be known only after every row was seen.

use super::grid::{Grid, GridFinder};
use super::layout::{Layout, SAMPLE_BYTES, Stated};
use super::number::Field;
use super::open::Source;
use super::resolution::{Pattern, Resolution};
use crate::fault::{Fault, Result};

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
    pub first: Option<crate::number::Decimal>,
}

impl Source {
    /// The layout of the file; `None` where it holds no rows.
    ///
    /// # Errors
    /// A file that cannot be read, is no text, or fits no layout.
    pub fn layout(&self, stated: &Stated) -> Result<Option<Layout>> {
        // A long preamble can fill the first sample; a larger one is taken only then.
        let (small, large) = SAMPLE_BYTES;
        let (sample, whole) = self.sample(small)?;
        let found = layout_of(&sample, whole, stated);
        if whole || matches!(found, Ok(Some(_))) {
            return found;
        }
        let (sample, whole) = self.sample(large)?;
        layout_of(&sample, whole, stated)
    }
}

fn layout_of(sample: &[u8], whole: bool, stated: &Stated) -> Result<Option<Layout>> {
    let format = match *sample {
        [0x1f, 0x8b, ..] => Some("gzip data"),
        [0x28, 0xb5, 0x2f, 0xfd, ..] => Some("zstd data"),
        [b'P', b'A', b'R', b'1', ..] => Some("Parquet data"),
        [0x93, b'N', b'U', b'M', ..] => Some("a NumPy array"),
        [b'P', b'K', 3, 4, ..] => Some("a zip archive"),
        [0xff, 0xfe, ..] | [0xfe, 0xff, ..] => Some("UTF-16 text"),
        _ => memchr::memchr(0, sample).map(|_| "not text: it holds zero bytes"),
    };
    if let Some(format) = format {
        let fault = Fault::new(format!("this file is {format}"));
        return Err(fault.help("this build reads plain text files; write CSV"));
    }
    let mut owned: Vec<Vec<u8>> = Vec::new();
    let mut lines = super::lines::Lines::default();
    let mut keep = |_: u64, line: &[u8]| {
        owned.push(line.to_vec());
        Ok(())
    };
    lines.feed(sample, &mut keep)?;
    if whole {
        lines.finish(&mut keep)?;
    }
    let lines: Vec<&[u8]> = owned.iter().map(Vec::as_slice).collect();
    Layout::find(&lines, stated)
}

impl Survey {
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
        let mut patterns = vec![Pattern::new(); selection.channels.len()];
        let mut time_pattern = Pattern::new();
        let mut finder = GridFinder::default();
        let mut rows = 0;
        let mut first = None;
        source.each_line(&mut |number, line, ended| {
            if number < layout.first_row || layout.passes_over(line) {
                return Ok(());
            }
            layout.split(line, &mut |column, field| {
                if column == selection.time
                    && let Field::Number(time, printed) = Field::read(field, layout.decimal_comma)
                {
                    let exact = Field::decimal(field, layout.decimal_comma);
                    if rows == 0 {
                        first = exact;
                    }
                    rows += 1;
                    time_pattern.add(time, printed);
                    finder.add(time, exact, printed);
                }
                // A last line without an end may be cut off: it must not spoil the pattern.
                // A column can serve two channels only by mistake, which is refused
                // before; the first place is the only one.
                if let Some(place) = selection
                    .channels
                    .iter()
                    .position(|&c| ended && c == column)
                    && let Field::Number(value, printed) = Field::read(field, layout.decimal_comma)
                {
                    patterns[place].add(value, printed);
                }
            });
            Ok(())
        })?;
        // Stamps show their own pattern: what is stated is how values were printed.
        let time = time_pattern.conclude_stamps(stated.digits.filter(|_| !time_pattern.is_clear()));
        Ok(Survey {
            grid: finder.conclude(time),
            time,
            channels: resolutions(&patterns, stated.digits),
            longest: patterns.iter().map(Pattern::longest).collect(),
            usual_digits: patterns.iter().map(Pattern::usual_digits).collect(),
            even: patterns.iter().map(Pattern::even).collect(),
            layout,
            selection,
            rows,
            first,
        })
    }
}

/// The resolution of every column; a constant one is printed like those beside it.
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
            Some((decimals, false)) if pattern.is_constant() => of_others(decimals).unwrap_or(own),
            _ => own,
        });
    each.collect()
}

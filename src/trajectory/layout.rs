//! How the rows of a text file are laid out: found from its first lines, or stated.

use std::sync::Arc;

use super::long::{Long, LongStated};
use super::number::Field;
use super::{MOST_COLUMNS, MOST_LINE_BYTES};
use crate::fault::{Fault, Result, quoted};

/// What stands between two fields.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Separator {
    Comma,
    Semicolon,
    Tab,
    Blank,
    /// None: the file holds numbers in columns and no text.
    Columns,
}

impl Separator {
    /// The word in submissions and reports.
    pub fn word(self) -> &'static str {
        match self {
            Separator::Comma => ",",
            Separator::Semicolon => ";",
            Separator::Tab => "tab",
            Separator::Blank => "blank",
            Separator::Columns => "columns",
        }
    }

    /// The byte between two fields; `None` where it is any number of blanks.
    pub(super) fn byte(self) -> Option<u8> {
        match self {
            Separator::Comma => Some(b','),
            Separator::Semicolon => Some(b';'),
            Separator::Tab => Some(b'\t'),
            Separator::Blank | Separator::Columns => None,
        }
    }

    /// From the word in a submission.
    pub fn find(word: &str) -> Option<Separator> {
        let all = [
            Separator::Comma,
            Separator::Semicolon,
            Separator::Tab,
            Separator::Blank,
        ];
        all.into_iter().find(|separator| separator.word() == word)
    }
}

/// A column by the name in the header or by number from one.
#[derive(Clone, Debug, PartialEq)]
#[allow(missing_docs)]
pub enum ColumnName {
    Name(String),
    Number(usize),
}

/// What a submission says of the layout; the rest is found.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Stated {
    /// Between fields.
    pub separator: Option<Separator>,
    /// True for a decimal comma.
    pub decimal_comma: Option<bool>,
    /// What a comment line begins with.
    pub comment: Option<String>,
    /// Lines before the first row of numbers.
    pub skip_lines: Option<u64>,
    /// Significant digits that the producer printed.
    pub digits: Option<u8>,
    /// That there is one row for each time and channel.
    pub long: Option<LongStated>,
}

/// The layout of one file.
#[derive(Clone, Debug, PartialEq)]
pub struct Layout {
    /// Between fields.
    pub separator: Separator,
    /// True for a decimal comma.
    pub decimal_comma: bool,
    /// What a comment line begins with.
    pub comments: Vec<String>,
    /// Fields of a row.
    pub columns: usize,
    /// The line of the first row of numbers, counted from one.
    pub first_row: u64,
    /// Rows end with a separator and nothing after it.
    pub last_is_empty: bool,
    /// Names of the columns, where the file has them.
    pub names: Option<Vec<String>>,
    /// Units in a line of their own below the names.
    pub units: Option<Vec<String>>,
    /// A column holds words, which may be the names of channels.
    pub words: bool,
    /// Of a long table, how it is read: columns, names and units are those of the table that
    /// its rows make side by side.
    pub long: Option<Arc<Long>>,
}

/// In the order in which they are tried.
pub(super) const SEPARATORS: [Separator; 4] = [
    Separator::Tab,
    Separator::Semicolon,
    Separator::Comma,
    Separator::Blank,
];
const USUAL_COMMENTS: [&str; 4] = ["#", "%", "//", "!"];
/// Rows of the sample that are tried on each layout.
pub(super) const ROWS_TRIED: usize = 200;

impl Layout {
    /// Finds the layout from the first lines of a file (the last one whole); `None`
    /// where they hold no row of numbers.
    ///
    /// # Errors
    /// Lines that fit no layout, and a layout stated that does not fit.
    pub fn find(lines: &[&[u8]], stated: &Stated) -> Result<Option<Layout>> {
        // Rows of numbers alone come first; a column of words is borne where it must be.
        let mut best: Option<((bool, usize), Layout)> = None;
        let holds = |byte: u8| {
            lines
                .iter()
                .any(|line| memchr::memchr(byte, line).is_some())
        };
        let comma = holds(b',');
        // What does not occur makes single numbers of whole lines: looked at last.
        let (there, absent): (Vec<_>, Vec<_>) = SEPARATORS.into_iter().partition(|s| match s {
            Separator::Blank => holds(b' ') || holds(b'\t'),
            other => other.byte().is_some_and(holds),
        });
        let of_words = |words: bool| {
            let there = there.iter().map(move |s| (words, false, *s));
            there.chain(absent.iter().map(move |s| (words, true, *s)))
        };
        for (words, absent, separator) in of_words(false).chain(of_words(true)) {
            let found = best.as_ref().map(|(rank, _)| *rank);
            if words && found.is_some() {
                break;
            }
            if absent && found.is_some_and(|(several, _)| several) {
                continue;
            }
            for decimal_comma in [false, true] {
                // Without a comma both signs are the same.
                if decimal_comma && !comma && stated.decimal_comma.is_none() {
                    continue;
                }
                let Some(layout) = Layout::bare(separator, decimal_comma, stated) else {
                    continue;
                };
                let Some((fits, layout)) = layout.try_on(lines, stated.skip_lines, words) else {
                    continue;
                };
                // A list of single numbers is the last resort: it also fits `0,5`.
                let rank = (layout.columns > 1, fits);
                if best.as_ref().is_none_or(|(most, _)| rank > *most) {
                    best = Some((rank, layout));
                }
            }
        }
        let Some((_, mut layout)) = best else {
            return Layout::complain(lines, &comments(stated), stated.skip_lines);
        };
        if layout.columns > MOST_COLUMNS {
            let text = format!(
                "{} columns, at most {MOST_COLUMNS} are read",
                layout.columns
            );
            return Err(Fault::new(text).at(layout.first_row, 1));
        }
        layout.find_names(lines);
        Ok(Some(layout))
    }

    /// Without columns yet; `None` where something else is stated.
    pub(super) fn bare(
        separator: Separator,
        decimal_comma: bool,
        stated: &Stated,
    ) -> Option<Layout> {
        let allowed = stated.separator.is_none_or(|s| s == separator)
            && stated.decimal_comma.is_none_or(|d| d == decimal_comma)
            && !(separator == Separator::Comma && decimal_comma);
        allowed.then(|| Layout {
            separator,
            decimal_comma,
            comments: comments(stated),
            columns: 0,
            first_row: 0,
            last_is_empty: false,
            names: None,
            units: None,
            words: false,
            long: None,
        })
    }

    /// Fields of a line that is as it should be.
    pub(super) fn fields(&self) -> usize {
        self.long
            .as_ref()
            .map_or(self.columns, |long| long.fields())
    }

    /// Without any row of numbers: nothing there, or nothing that could be read.
    fn complain(lines: &[&[u8]], comments: &[String], skip: Option<u64>) -> Result<Option<Layout>> {
        if let Some(skip) = skip.filter(|&skip| skip as usize >= lines.len()) {
            let text = format!("no rows of numbers follow the {skip} lines that are skipped");
            let help = "correct `skip_lines` under `[layout]` in submission.toml";
            return Err(Fault::new(text).help(help));
        }
        let says_something = |line: &&[u8]| {
            !line.trim_ascii().is_empty() && !is_comment(line.trim_ascii(), comments)
        };
        let told: Vec<_> = lines
            .iter()
            .enumerate()
            .filter(|(_, l)| says_something(l))
            .collect();
        match told[..] {
            // A header alone: the file is empty.
            [] | [_] => Ok(None),
            [_, (number, line), ..] => {
                let text = format!(
                    "no rows of numbers found: this line is {}",
                    quoted(&String::from_utf8_lossy(line))
                );
                let help = "set `separator`, `decimal`, `comment` or `skip_lines` under `[layout]` \
                            in submission.toml";
                Err(Fault::new(text).help(help).at(number as u64 + 1, 1))
            }
        }
    }

    /// How many lines are rows of this layout, from the first that is one.
    fn try_on(
        mut self,
        lines: &[&[u8]],
        skip: Option<u64>,
        words: bool,
    ) -> Option<(usize, Layout)> {
        let skip = skip.unwrap_or(0) as usize;
        let rows = lines.iter().enumerate().skip(skip);
        let mut rows = rows.filter(|(_, line)| !self.passes_over(line));
        let numeric = |line: &[u8]| -> Option<usize> {
            let (mut count, mut numbers, mut foreign) = (0, 0, 0);
            self.split(line, &mut |_, field| {
                count += 1;
                match Field::read(field, self.decimal_comma) {
                    Field::Number(..) => numbers += 1,
                    Field::Absent => {}
                    Field::Foreign => foreign += 1,
                }
            });
            let mostly = words && numbers >= 2 && 2 * numbers >= count;
            (numbers > 0 && (foreign == 0 || mostly)).then_some(count)
        };
        let (first, columns) =
            rows.find_map(|(number, line)| numeric(line).map(|count| (number, count)))?;
        let more = rows
            .take(ROWS_TRIED)
            .filter(|(_, line)| numeric(line) == Some(columns));
        let fits = 1 + more.count();
        let mut nothing_last = false;
        self.columns = columns;
        self.first_row = first as u64 + 1;
        self.split(lines[first], &mut |_, field| {
            nothing_last = field.is_empty()
        });
        self.last_is_empty = nothing_last;
        self.words = words;
        Some((fits, self))
    }

    /// Names: the last line before the rows that has as many fields and is told in
    /// words, be it a comment; above it there may be names, and it has the units.
    fn find_names(&mut self, lines: &[&[u8]]) {
        let before = lines[..(self.first_row - 1) as usize].iter().rev();
        let mut found: Vec<(bool, Vec<String>)> = Vec::new();
        for line in before {
            let (is_comment, bare) = self.without_mark(line);
            match self.name_fields(bare) {
                Some(names) => found.push((is_comment, names)),
                // Remarks may stand between names and rows, anything else may not.
                None if is_comment || bare.is_empty() => {}
                None => break,
            }
            if found.len() == 2 {
                break;
            }
        }
        let mut found = found.into_iter();
        let Some((below_is_comment, below)) = found.next() else {
            return;
        };
        // Two such lines: names above, units below, unless the lower one has the time.
        let above = found.next().filter(|(is_comment, above)| {
            let plain = !is_comment && !below_is_comment;
            !names_time(&below) && (plain || names_time(above))
        });
        if let Some((_, above)) = above {
            self.units = Some(below);
            self.names = Some(above);
        } else {
            self.names = Some(below);
        }
    }

    /// What a comment says, or a line that is none.
    pub(super) fn without_mark<'l>(&self, line: &'l [u8]) -> (bool, &'l [u8]) {
        let line = line.trim_ascii();
        let starts = |mark: &&String| line.starts_with(mark.as_bytes());
        match self.comments.iter().find(starts) {
            Some(mark) => (true, line[mark.len()..].trim_ascii()),
            None => (false, line),
        }
    }

    /// The fields of a line, if they can be names of the columns: as many, with words.
    /// A separator at the end of the rows alone, or of this line alone, is borne, and
    /// blanks between names above rows that have another separator.
    pub(super) fn name_fields(&self, line: &[u8]) -> Option<Vec<String>> {
        let blank = Layout {
            separator: Separator::Blank,
            ..self.clone()
        };
        [self, &blank].into_iter().find_map(|layout| {
            let mut names = Vec::new();
            layout.split(line, &mut |_, field| {
                names.push(String::from_utf8_lossy(field).trim().to_owned());
            });
            if names.len() == self.columns + 1 && names.last().is_some_and(String::is_empty) {
                names.pop();
            } else if names.len() + 1 == self.columns && self.last_is_empty {
                names.push(String::new());
            }
            let words = names
                .iter()
                .any(|name| name.chars().any(char::is_alphabetic));
            (names.len() == self.columns && words).then_some(names)
        })
    }

    /// True for a line that holds no row: blank, or a comment.
    pub fn passes_over(&self, line: &[u8]) -> bool {
        let line = line.trim_ascii();
        line.is_empty() || is_comment(line, &self.comments)
    }

    /// Hands out the fields of a line with their numbers from zero, without blanks
    /// around them and without quotes.
    pub fn split(&self, line: &[u8], each: &mut dyn FnMut(usize, &[u8])) {
        if memchr::memchr(b'"', line).is_some() {
            return self.split_quoted(line, each);
        }
        match self.separator.byte() {
            None => {
                let fields = line
                    .split(|b| matches!(b, b' ' | b'\t'))
                    .filter(|f| !f.is_empty());
                fields
                    .enumerate()
                    .for_each(|(index, field)| each(index, field));
            }
            Some(byte) => {
                let fields = line.split(|b| *b == byte).enumerate();
                fields.for_each(|(index, field)| each(index, field.trim_ascii()));
            }
        }
    }

    fn split_quoted(&self, line: &[u8], each: &mut dyn FnMut(usize, &[u8])) {
        let mut reader = csv::ReaderBuilder::new()
            .has_headers(false)
            .flexible(true)
            .delimiter(self.separator.byte().unwrap_or(b' '))
            .trim(csv::Trim::All)
            .from_reader(line);
        let mut record = csv::ByteRecord::new();
        // Reading from memory cannot fail; a quote that is not closed ends with the line.
        if let Ok(true) = reader.read_byte_record(&mut record) {
            let blank = self.separator == Separator::Blank;
            let fields = record.iter().filter(|field| !(blank && field.is_empty()));
            fields
                .enumerate()
                .for_each(|(index, field)| each(index, field.trim_ascii()));
        }
    }

    /// In words, for reports.
    pub fn describe(&self) -> String {
        let separator = match self.separator {
            Separator::Comma => "comma",
            Separator::Semicolon => "semicolon",
            Separator::Tab => "tab",
            Separator::Blank => "blanks",
            Separator::Columns => "numbers in columns",
        };
        let decimal = if self.decimal_comma {
            ", decimal comma"
        } else {
            ""
        };
        let header = if self.names.is_some() {
            ""
        } else {
            ", no header"
        };
        let long = match self.long {
            Some(_) => ", a row for each time and channel",
            None => "",
        };
        format!("{separator}{decimal}{header}{long}")
    }
}

fn names_time(names: &[String]) -> bool {
    names
        .iter()
        .any(|name| name == "t" || name.to_lowercase().contains("time"))
}

/// True for a name that can only be that of the time stamps. Not `T`, which is a
/// temperature or a period as often as a time.
pub fn is_time_name(name: &str) -> bool {
    name == "t" || name.eq_ignore_ascii_case("time")
}

/// A header split into a name and a unit in brackets.
pub(crate) fn unit_in_brackets(header: &str) -> Option<(&str, &str)> {
    [('[', ']'), ('(', ')')]
        .into_iter()
        .find_map(|(open, close)| {
            let (name, unit) = header.strip_suffix(close)?.rsplit_once(open)?;
            (!name.trim().is_empty()).then(|| (name.trim(), unit.trim()))
        })
}

/// A unit in a line of its own below the names, with or without brackets.
pub(crate) fn bare_unit(below: &str) -> &str {
    below.trim_matches(['[', ']', '(', ')', ' '])
}

fn comments(stated: &Stated) -> Vec<String> {
    match &stated.comment {
        Some(comment) => vec![comment.clone()],
        None => USUAL_COMMENTS.map(str::to_owned).to_vec(),
    }
}

fn is_comment(line: &[u8], comments: &[String]) -> bool {
    comments
        .iter()
        .any(|mark| !mark.is_empty() && line.starts_with(mark.as_bytes()))
}

/// Bytes from the start of a file that the layout is found from, and those that are
/// taken where the first do not tell; enough for several lines of the longest kind.
pub(super) const SAMPLE_BYTES: (usize, usize) = (64 * 1024, 4 * MOST_LINE_BYTES);

#[cfg(test)]
mod tests;

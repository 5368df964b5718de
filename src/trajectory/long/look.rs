//! The first pass over a long table: which names occur, and whether rows of one time stand
//! together. Nothing is kept but the names.

use std::collections::HashMap;
use std::io::Read;

use super::super::layout::Layout;
use super::super::number::Field;
use super::super::open::after;
use super::super::pieces::{MOST_LINE_BYTES, Piece, Pieces, check_length, line_end};
use super::{Long, Order};
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::MOST_COLUMNS;

/// Lines of a file from its first row on.
pub(super) struct Lines<'a> {
    pieces: Pieces<Box<dyn Read + Send + 'a>>,
    piece: Piece,
    at: usize,
    number: u64,
}

/// One of them.
pub(super) struct Line<'l> {
    pub number: u64,
    pub text: &'l [u8],
    /// False for a last line without an end.
    pub ended: bool,
}

impl<'a> Lines<'a> {
    pub(super) fn new(pieces: Pieces<Box<dyn Read + Send + 'a>>, rows: &Layout) -> Lines<'a> {
        Lines {
            pieces,
            piece: Piece::default(),
            at: 0,
            number: rows.first_row - 1,
        }
    }

    pub(super) fn next(&mut self) -> Result<Option<Line<'_>>> {
        if self.at >= self.piece.text.len() {
            self.at = 0;
            let next = self.pieces.next(&mut self.piece);
            if !next.map_err(|fault| after(fault, self.number))? {
                return Ok(None);
            }
        }
        self.number += 1;
        let rest = &self.piece.text[self.at..];
        // A piece ends with a whole line end, or with the file.
        let found = line_end(rest, true);
        let (end, next) = found.unwrap_or((rest.len(), rest.len()));
        check_length(end).map_err(|fault| fault.at(self.number, 1))?;
        self.at += next;
        Ok(Some(Line {
            number: self.number,
            text: &rest[..end],
            ended: found.is_some(),
        }))
    }
}

/// Bytes of a stamp or a value that are looked at; the longest number is shorter.
const MOST_FIELD_BYTES: usize = 100;

/// The three fields of a row that count.
#[derive(Debug, Default)]
pub(super) struct Fields {
    text: Vec<u8>,
    time: (usize, usize),
    name: (usize, usize),
    value: (usize, usize),
    /// How many the line has in all.
    pub count: usize,
}

impl Fields {
    pub(super) fn read(&mut self, long: &Long, line: &[u8]) {
        *self = Fields {
            text: std::mem::take(&mut self.text),
            ..Fields::default()
        };
        self.text.clear();
        long.rows.split(line, &mut |column, field| {
            self.count += 1;
            let short = &field[..field.len().min(MOST_FIELD_BYTES)];
            let (place, field) = match column {
                _ if column == long.time => (&mut self.time, short),
                _ if column == long.name => (&mut self.name, field),
                _ if column == long.value => (&mut self.value, short),
                _ => return,
            };
            let start = self.text.len();
            self.text.extend_from_slice(field);
            *place = (start, self.text.len());
        });
    }

    pub(super) fn time(&self) -> &[u8] {
        &self.text[self.time.0..self.time.1]
    }

    pub(super) fn name(&self) -> &[u8] {
        &self.text[self.name.0..self.name.1]
    }

    pub(super) fn value(&self) -> &[u8] {
        &self.text[self.value.0..self.value.1]
    }
}

/// A stamp that may stand in several rows, in another text each time.
#[derive(Debug, Default)]
pub(super) struct Stamp {
    text: Vec<u8>,
    /// NaN where there is no number.
    pub time: f64,
}

impl Stamp {
    pub(super) fn none() -> Stamp {
        Stamp {
            text: Vec::new(),
            time: f64::NAN,
        }
    }

    /// Takes the stamp of the next row; true where it is another time.
    pub(super) fn moves(&mut self, text: &[u8], decimal_comma: bool) -> bool {
        if text == self.text {
            return false;
        }
        let time = number(text, decimal_comma);
        let same = time == self.time;
        self.time = time;
        self.text.clear();
        self.text.extend_from_slice(text);
        !same
    }
}

/// NaN where there is no number; no zero has a sign.
pub(super) fn number(text: &[u8], decimal_comma: bool) -> f64 {
    match Field::read(text, decimal_comma) {
        Field::Number(number, _) => number + 0.0,
        Field::Absent | Field::Foreign => f64::NAN,
    }
}

/// What the whole file shows.
pub(super) struct Seen {
    pub names: Vec<String>,
    pub places: HashMap<Vec<u8>, usize>,
    pub order: Order,
}

/// Goes through the file.
///
/// Rows are out of order where time goes back between two rows that both lack a channel: of one
/// channel after the other every row does. A file whose whole rows are out of order is read as it
/// stands, so that what is wrong with it is found.
pub(super) fn look(long: &Long, lines: &mut Lines) -> Result<Seen> {
    let (mut names, mut places) = (Vec::new(), HashMap::<Vec<u8>, usize>::new());
    let (mut fields, mut bytes) = (Fields::default(), 0);
    let mut turns = Turns::default();
    let (mut stamp, mut row, mut seen) = (Stamp::none(), 0u64, Vec::<u64>::new());
    while let Some(line) = lines.next()? {
        if long.rows.passes_over(line.text) {
            continue;
        }
        fields.read(long, line.text);
        let known = places.get(fields.name()).copied();
        // A name at the very end may be the beginning of one.
        if fields.count != long.rows.columns || known.is_none() && !line.ended {
            continue;
        }
        let place = known.unwrap_or(names.len());
        if known.is_none() {
            let name = String::from_utf8_lossy(fields.name()).into_owned();
            bytes += name.len();
            if names.len() + 1 == MOST_COLUMNS || bytes > MOST_LINE_BYTES {
                let text = format!(
                    "{} is one name too many: at most {} channels are read",
                    quoted(&name),
                    MOST_COLUMNS - 1
                );
                let help = "correct `name` of `long` under `[layout]` in submission.toml, if this \
                            is not the column of names";
                return Err(Fault::new(text).help(help).at(line.number, 1));
            }
            names.push(name);
            places.insert(fields.name().to_vec(), place);
            seen.push(0);
        }
        let before = stamp.time;
        if stamp.moves(fields.time(), long.rows.decimal_comma) || row == 0 || seen[place] == row {
            row += 1;
            turns.begin(stamp.time < before);
        }
        seen[place] = row;
        turns.size += 1;
    }
    let least = turns.conclude();
    let scattered = least.is_some_and(|least| least < names.len());
    Ok(Seen {
        names,
        places,
        order: if scattered {
            Order::Scattered
        } else {
            Order::ByTime
        },
    })
}

/// The sizes of rows where time goes back.
#[derive(Default)]
struct Turns {
    /// Channels of this row.
    size: usize,
    /// Those of the row before, where time went back.
    before: Option<usize>,
    least: Option<usize>,
}

impl Turns {
    fn begin(&mut self, back: bool) {
        self.end();
        self.before = back.then_some(self.size);
        self.size = 0;
    }

    fn end(&mut self) {
        if let Some(before) = self.before.take() {
            let larger = before.max(self.size);
            self.least = Some(self.least.map_or(larger, |least| least.min(larger)));
        }
    }

    /// The least size that a row beside such a place has at most.
    fn conclude(mut self) -> Option<usize> {
        self.end();
        self.least
    }
}

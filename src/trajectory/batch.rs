//! A piece of text to a batch of rows: plain rows in one pass over their bytes, all others
//! line by line. Pieces are parsed apart from each other, so nothing here knows what stands in
//! the lines before.

use super::layout::Layout;
use super::number::{Field, Printed};
use super::pieces::{Piece, check_length, line_end};
use super::resolution::Pattern;
use super::scan::{Scanned, scan};
use super::survey::Selection;
use crate::fault::Result;
use crate::number::{Decimal, Double};

/// Rows that follow each other.
#[derive(Debug)]
pub(crate) struct Batch {
    /// Lines of the piece.
    pub lines: u64,
    /// Every line that is neither blank nor a comment.
    pub rows: Vec<Line>,
    /// The values of the selected channels, row after row; NaN where there is no number.
    pub values: Vec<f64>,
    /// What is wrong with those that are marked, in their order.
    pub odd: Vec<Odd>,
    /// Stamps of more digits than most.
    long: Vec<Decimal>,
    /// How the stamps and each channel are printed.
    pub(super) time: Pattern,
    pub(super) channels: Vec<Pattern>,
    /// Of a last line without an end: how a number was printed that may be cut off.
    pub open: Option<Open>,
}

/// One line with a row.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Line {
    /// Lines of the piece before it.
    pub number: u32,
    /// True where there is an [`Odd`] for it.
    pub is_odd: bool,
    /// How the stamp was printed.
    pub printed: Printed,
    /// The stamp; NaN where there is none.
    pub time: f64,
    /// The same exactly as printed, in double-double and as a decimal.
    pub moment: Double,
    exact: Digits,
}

/// A decimal in little room: one is kept for every row.
#[derive(Clone, Copy, Debug)]
enum Digits {
    None,
    Short {
        negative: bool,
        exponent: i16,
        digits: u64,
    },
    /// A place among the long ones of the batch.
    Long(u32),
}

/// A row that is not as it should be.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Odd {
    /// Fields of the line.
    pub columns: usize,
    /// The first selected column without a number, and what stands there.
    pub strange: Option<(usize, String)>,
}

/// A last line without an end.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Open {
    /// Place and look of the channel in its last field.
    pub last: Option<(usize, Printed)>,
}

/// What is read of each line.
pub(crate) struct Columns<'a> {
    layout: &'a Layout,
    /// For each column of the file.
    roles: Vec<Role>,
    channels: usize,
    /// Byte between fields, `None` for blanks.
    separator: Option<u8>,
    point: u8,
    known: Known,
    all_known: bool,
    /// False where a plain row could be a comment.
    quick: bool,
}

/// Columns of which more rows cannot change what their text shows.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Known {
    /// The stamps.
    pub time: bool,
    /// The channels; those beyond the end are not known.
    pub channels: Vec<bool>,
}

impl Known {
    pub(crate) fn channel(&self, place: usize) -> bool {
        self.channels.get(place).copied().unwrap_or(false)
    }
}

#[derive(Clone, Copy, Debug, PartialEq)]
enum Role {
    Ignored,
    Time,
    Channel(usize),
}

impl<'a> Columns<'a> {
    pub(crate) fn new(layout: &'a Layout, selection: &Selection, known: Known) -> Columns<'a> {
        let role = |column| {
            let place = selection.channels.iter().position(|&c| c == column);
            match place {
                // The time stamp goes before, should it be a channel as well.
                _ if column == selection.time => Role::Time,
                Some(place) => Role::Channel(place),
                None => Role::Ignored,
            }
        };
        let begins_a_number = |mark: &String| !matches!(mark.bytes().next(), Some(byte) if !b"+-.,0123456789 \t".contains(&byte));
        Columns {
            layout,
            roles: (0..layout.columns).map(role).collect(),
            channels: selection.channels.len(),
            separator: layout.separator.byte(),
            point: if layout.decimal_comma { b',' } else { b'.' },
            all_known: (0..selection.channels.len()).all(|place| known.channel(place)),
            known,
            quick: !layout.comments.iter().any(begins_a_number),
        }
    }

    /// All rows of a piece.
    ///
    /// # Errors
    /// A line that is too long, with its number in the piece.
    pub(crate) fn parse(&self, piece: &Piece) -> Result<Batch> {
        let mut batch = Batch::new(self.channels, piece.text.len() / 16);
        let mut looks = vec![Printed::default(); self.channels];
        let mut rest = &piece.text[..];
        while !rest.is_empty() {
            let quick = self
                .quick
                .then(|| self.quick_row(rest, &mut looks, &mut batch));
            let next = match quick.flatten() {
                Some(next) => next,
                None => {
                    // A piece ends with a whole line end, or with the file.
                    let found = line_end(rest, true);
                    let (end, next) = found.unwrap_or((rest.len(), rest.len()));
                    check_length(end).map_err(|fault| fault.at(batch.lines + 1, 1))?;
                    self.slow_row(&rest[..end], found.is_some(), &mut batch);
                    next
                }
            };
            batch.lines += 1;
            rest = &rest[next..];
        }
        Ok(batch)
    }

    /// A row of plain numbers; gives where the next line begins. `None`, and nothing has
    /// changed, where there is anything else.
    fn quick_row(&self, text: &[u8], looks: &mut [Printed], batch: &mut Batch) -> Option<usize> {
        let start = batch.values.len();
        batch.values.resize(start + self.channels, f64::NAN);
        let values = &mut batch.values[start..];
        let Some((stamp, next)) = self.quick_numbers(text, values, looks) else {
            batch.values.truncate(start);
            return None;
        };
        if !self.all_known {
            let looks = values.iter().zip(&*looks).zip(&mut batch.channels);
            for (place, ((&value, &printed), pattern)) in looks.enumerate() {
                if !self.known.channel(place) {
                    pattern.add(value, printed);
                }
            }
        }
        if !self.known.time {
            batch.time.add(stamp.value, stamp.printed);
        }
        batch
            .rows
            .push(Line::of_stamp(batch.lines as u32, false, &stamp));
        Some(next)
    }

    fn quick_numbers(
        &self,
        text: &[u8],
        values: &mut [f64],
        looks: &mut [Printed],
    ) -> Option<(Scanned, usize)> {
        let last = self.roles.len().checked_sub(1)?;
        let (mut at, mut stamp) = (0, None);
        for (column, role) in self.roles.iter().enumerate() {
            at = self.after_blanks(text, at);
            if *role == Role::Ignored {
                at += self.ignored(&text[at..])?;
            } else {
                let (scanned, length) = scan(&text[at..], self.point)?;
                at += length;
                if let Role::Channel(place) = *role {
                    (values[place], looks[place]) = (scanned.value, scanned.printed);
                } else {
                    stamp = Some(scanned);
                }
            }
            if column < last {
                match self.separator {
                    Some(byte) if text.get(at) == Some(&byte) => at += 1,
                    None if matches!(text.get(at), Some(b' ' | b'\t')) => {}
                    _ => return None,
                }
            }
        }
        at = self.after_blanks(text, at);
        let next = match (text.get(at)?, text.get(at + 1)) {
            (b'\n', _) => at + 1,
            (b'\r', Some(b'\n')) => at + 2,
            _ => return None,
        };
        Some((stamp?, next))
    }

    /// Blanks around a field are no part of it; a tab that separates is no blank.
    fn after_blanks(&self, text: &[u8], mut at: usize) -> usize {
        let tabs = self.separator != Some(b'\t');
        while matches!(text.get(at), Some(b' ')) || tabs && matches!(text.get(at), Some(b'\t')) {
            at += 1;
        }
        at
    }

    /// The length of a field that is not looked at; quotes could hold a separator.
    fn ignored(&self, text: &[u8]) -> Option<usize> {
        let is_end = |byte: &u8| match self.separator {
            Some(separator) => *byte == separator || matches!(byte, b'\n' | b'\r' | b'"'),
            None => matches!(byte, b' ' | b'\t' | b'\n' | b'\r' | b'"'),
        };
        let length = text.iter().position(is_end)?;
        // Between blanks there is no empty field: the row is shorter than the others.
        let is_missing = length == 0 && self.separator.is_none();
        (text[length] != b'"' && !is_missing).then_some(length)
    }

    /// Any line, without its end.
    fn slow_row(&self, text: &[u8], ended: bool, batch: &mut Batch) {
        if self.layout.passes_over(text) {
            return;
        }
        let comma = self.layout.decimal_comma;
        let start = batch.values.len();
        batch.values.resize(start + self.channels, f64::NAN);
        let mut row = Line::without_stamp(batch.lines as u32, false);
        let (mut columns, mut strange, mut last) = (0, None, None);
        self.layout.split(text, &mut |column, field| {
            columns += 1;
            let role = self.roles.get(column).copied().unwrap_or(Role::Ignored);
            if role == Role::Ignored {
                return;
            }
            match (Field::read(field, comma), role) {
                (Field::Number(time, printed), Role::Time) => {
                    let exact = Field::decimal(field, comma);
                    row.moment = exact.map_or(Double::from(time), Decimal::to_double);
                    if let Some(exact) = exact {
                        row.exact = Digits::Long(batch.long.len() as u32);
                        batch.long.push(exact);
                    }
                    (row.time, row.printed) = (time, printed);
                    if !self.known.time {
                        batch.time.add(time, printed);
                    }
                }
                (Field::Number(value, printed), Role::Channel(place)) => {
                    batch.values[start + place] = value;
                    last = (column + 1 == self.roles.len()).then_some((place, printed));
                    // A last line without an end may be cut off: it must not spoil the pattern.
                    if ended && !self.known.channel(place) {
                        batch.channels[place].add(value, printed);
                    }
                }
                _ if strange.is_none() => {
                    strange = Some((column, String::from_utf8_lossy(field).into_owned()));
                }
                _ => {}
            }
        });
        if !ended {
            batch.open = Some(Open { last });
        }
        if !ended || columns != self.roles.len() || strange.is_some() {
            row.is_odd = true;
            batch.odd.push(Odd { columns, strange });
        }
        batch.rows.push(row);
    }
}

impl Batch {
    /// Without rows; `numbers` are about to come.
    pub(crate) fn new(channels: usize, numbers: usize) -> Batch {
        Batch {
            lines: 0,
            rows: Vec::with_capacity(numbers / (channels + 1) + 1),
            values: Vec::with_capacity(numbers + 1),
            odd: Vec::new(),
            long: Vec::new(),
            time: Pattern::new(),
            channels: vec![Pattern::new(); channels],
            open: None,
        }
    }

    /// The stamp of a row exactly as printed.
    pub(super) fn exact(&self, row: &Line) -> Exactly {
        match row.exact {
            Digits::None => Exactly::Decimal(None),
            Digits::Short {
                negative,
                exponent,
                digits,
            } => Exactly::Digits(negative, digits, i32::from(exponent)),
            Digits::Long(place) => Exactly::Decimal(self.long.get(place as usize).copied()),
        }
    }
}

/// A decimal that is put together only where somebody asks for it.
#[derive(Clone, Copy, Debug)]
pub(super) enum Exactly {
    Digits(bool, u64, i32),
    Decimal(Option<Decimal>),
}

impl Exactly {
    pub(super) fn decimal(self) -> Option<Decimal> {
        match self {
            Exactly::Digits(negative, digits, exponent) => {
                Some(Decimal::of_digits(negative, digits, exponent))
            }
            Exactly::Decimal(decimal) => decimal,
        }
    }
}

impl Line {
    pub(super) fn of_stamp(number: u32, is_odd: bool, stamp: &Scanned) -> Line {
        Line {
            number,
            is_odd,
            printed: stamp.printed,
            time: stamp.value,
            moment: stamp.double(),
            exact: stamp.digits(),
        }
    }

    pub(super) fn without_stamp(number: u32, is_odd: bool) -> Line {
        Line {
            number,
            is_odd,
            printed: Printed::default(),
            time: f64::NAN,
            moment: Double::ZERO,
            exact: Digits::None,
        }
    }
}

impl Scanned {
    fn digits(&self) -> Digits {
        Digits::Short {
            negative: self.negative,
            exponent: self.exponent as i16,
            digits: self.digits,
        }
    }
}

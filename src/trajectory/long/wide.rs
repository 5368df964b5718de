//! Rows side by side: what stands in the file for one time becomes a line of text with a field
//! for each channel that is asked for, and goes through the same parser as any other text. The
//! rows of its batches then get the lines and columns of the file back.

use super::super::batch::{Batch, Columns, Known};
use super::super::layout::{Layout, Separator};
use super::super::pieces::Piece;
use super::super::survey::Selection;
use super::Long;
use crate::fault::{Fault, Result};

/// Text that is parsed at a time.
const PIECE_BYTES: usize = 256 * 1024;

/// Takes the cells of one row after the other.
pub(super) struct Wide<'a> {
    long: &'a Long,
    each: &'a mut dyn FnMut(Batch, usize) -> Result<bool>,
    /// The columns that are asked for, the time first.
    columns: Vec<usize>,
    /// For each name its place among them.
    places: Vec<Option<usize>>,
    row: Row,
    text: Vec<u8>,
    /// Of each line of the text.
    notes: Vec<Note>,
    /// In which order they stand in the text.
    order: Vec<usize>,
    /// The line that those of the next batch are counted from, and of the one after it.
    base: u64,
    reached: u64,
    /// False once nobody wants more.
    pub wanted: bool,
}

/// The row in the making.
#[derive(Default)]
struct Row {
    /// Its first line; zero where there is none.
    line: u64,
    /// The first line whose value does not look like a number.
    strange: Option<u64>,
    text: Vec<u8>,
    stamp: usize,
    /// For each column that is asked for.
    cells: Vec<Option<(usize, usize)>>,
}

/// What a line of the text comes from.
struct Note {
    line: u64,
    strange: Option<u64>,
    fields: usize,
}

impl<'a> Wide<'a> {
    pub(super) fn new(
        long: &'a Long,
        of: &Selection,
        each: &'a mut dyn FnMut(Batch, usize) -> Result<bool>,
    ) -> Wide<'a> {
        let columns: Vec<usize> = [of.time].iter().chain(&of.channels).copied().collect();
        let mut places = vec![None; long.names.len()];
        for (place, &column) in columns.iter().enumerate() {
            if let Some(name) = column.checked_sub(1).and_then(|name| places.get_mut(name)) {
                *name = Some(place);
            }
        }
        Wide {
            long,
            each,
            row: Row {
                cells: vec![None; columns.len()],
                ..Row::default()
            },
            order: (0..columns.len()).collect(),
            columns,
            places,
            text: Vec::new(),
            notes: Vec::new(),
            base: long.rows.first_row - 1,
            reached: long.rows.first_row - 1,
            wanted: true,
        }
    }

    /// Begins a row.
    pub(super) fn begin(&mut self, line: u64, stamp: &[u8]) {
        self.row.line = line;
        self.row.strange = None;
        self.row.text.clear();
        self.row.text.extend_from_slice(stamp);
        self.row.stamp = stamp.len();
        self.row.cells.fill(None);
    }

    /// The value of a name in the row.
    pub(super) fn put(&mut self, name: usize, value: &[u8], line: u64) {
        let Some(place) = self.places.get(name).copied().flatten() else {
            return;
        };
        let row = &mut self.row;
        let start = row.text.len();
        row.text.extend_from_slice(value);
        row.cells[place] = Some((start, row.text.len()));
        let plain = |byte: &u8| byte.is_ascii_digit() || b"+-.,eEdD".contains(byte);
        if value.is_empty() || !value.iter().all(plain) {
            row.strange.get_or_insert(line);
        }
    }

    /// The row is whole; nothing happens where none was begun.
    pub(super) fn end(&mut self) -> Result<()> {
        if self.row.line == 0 {
            return Ok(());
        }
        self.write();
        self.text.push(b'\n');
        self.flush_if_large()
    }

    /// A line that is no row of the table.
    pub(super) fn wrong_length(&mut self, line: u64, fields: usize) -> Result<()> {
        self.text.extend_from_slice(b"-\n");
        self.note(line, None, fields);
        self.flush_if_large()
    }

    /// No row that is begun or refused from now on stands above this line.
    pub(super) fn reach(&mut self, line: u64) {
        self.reached = line - 1;
    }

    /// The end of the file.
    pub(super) fn finish(&mut self) -> Result<()> {
        self.end()?;
        self.flush()
    }

    /// The end of a file whose last line has no end and belongs to the row in the making: how its
    /// number was printed must be looked at, so it goes last.
    pub(super) fn finish_open(&mut self, name: usize, line: u64) -> Result<()> {
        let Some(place) = self.places.get(name).copied().flatten() else {
            return self.finish();
        };
        self.flush()?;
        self.order.retain(|&other| other != place);
        self.order.push(place);
        self.row.strange = Some(line);
        self.write();
        self.flush()
    }

    /// The end of a file that breaks off within its last line.
    pub(super) fn finish_broken(&mut self, line: u64, fields: usize) -> Result<()> {
        self.finish()?;
        self.text.push(b'-');
        self.note(line, None, fields);
        self.flush()
    }

    fn write(&mut self) {
        let row = &self.row;
        for (number, &place) in self.order.iter().enumerate() {
            if number > 0 {
                self.text.push(b';');
            }
            let cell = match self.columns[place] {
                0 => Some((0, row.stamp)),
                _ => row.cells[place],
            };
            let field = cell.map_or(&[][..], |(start, end)| &row.text[start..end]);
            push(&mut self.text, field, number == 0);
        }
        let (line, strange) = (row.line, row.strange);
        self.row.line = 0;
        self.note(line, strange, self.long.rows.columns);
    }

    fn note(&mut self, line: u64, strange: Option<u64>, fields: usize) {
        self.notes.push(Note {
            line,
            strange,
            fields,
        });
    }

    fn flush_if_large(&mut self) -> Result<()> {
        match self.text.len() >= PIECE_BYTES {
            true => self.flush(),
            false => Ok(()),
        }
    }

    /// Parses the text and hands out the batch.
    fn flush(&mut self) -> Result<()> {
        if self.text.is_empty() || !self.wanted {
            return Ok(());
        }
        let layout = Layout {
            separator: Separator::Semicolon,
            decimal_comma: self.long.rows.decimal_comma,
            comments: Vec::new(),
            columns: self.order.len(),
            first_row: 1,
            last_is_empty: false,
            names: None,
            units: None,
            words: false,
            long: None,
        };
        let at = |place: usize| self.order.iter().position(|&p| p == place).unwrap_or(place);
        let selection = Selection {
            time: at(0),
            channels: (1..self.order.len()).map(at).collect(),
        };
        let piece = Piece {
            text: std::mem::take(&mut self.text),
            last: false,
        };
        let parsed = Columns::new(&layout, &selection, Known::default()).parse(&piece);
        let mut batch = parsed.map_err(|fault| self.placed(fault))?;
        self.restore(&mut batch);
        batch.lines = self.reached - self.base;
        self.base = self.reached;
        self.notes.clear();
        let bytes = piece.text.len();
        self.text = piece.text;
        self.text.clear();
        self.wanted = (self.each)(batch, bytes)?;
        Ok(())
    }

    /// Lines and columns of the file in place of those of the text.
    fn restore(&self, batch: &mut Batch) {
        let mut odd = batch.odd.iter_mut();
        for (row, note) in batch.rows.iter_mut().zip(&self.notes) {
            let mut line = note.line;
            if row.is_odd
                && let Some(odd) = odd.next()
            {
                line = note.strange.unwrap_or(line);
                odd.columns = note.fields;
                if let Some((column, _)) = &mut odd.strange {
                    let place = self.order.get(*column).copied();
                    *column = place.map_or(0, |place| self.columns[place]);
                }
            }
            row.number = u32::try_from(line - self.base - 1).unwrap_or(u32::MAX);
        }
    }

    fn placed(&self, fault: Fault) -> Fault {
        let line = fault
            .line
            .and_then(|line| self.notes.get(line as usize - 1));
        match line {
            Some(note) => fault.at(note.line, 1),
            None => fault,
        }
    }
}

/// A field that the parser reads back as it is; an empty one that stands first must not make the
/// line a blank one.
fn push(text: &mut Vec<u8>, field: &[u8], first: bool) {
    let quotes = field.is_empty() && first || memchr::memchr2(b';', b'"', field).is_some();
    if !quotes {
        return text.extend_from_slice(field);
    }
    text.push(b'"');
    for &byte in field {
        text.extend(std::iter::repeat_n(byte, 1 + usize::from(byte == b'"')));
    }
    text.push(b'"');
}

//! The only opener of trajectory files: text, packed or not, tables, or bytes in memory.

use std::fs::{File, Metadata};
use std::io::{ErrorKind, Read};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::SystemTime;

use super::batch::{self, Batch, Known};
use super::columns::{self, Columns, Data, FIRST_BYTES, Format, recognise};
use super::layout::Layout;
use super::packed;
use super::pieces::{Piece, Pieces};
use super::survey::Selection;
use super::tables;
use crate::fault::{Fault, Result};

/// Where the bytes of a trajectory come from.
#[derive(Clone, Debug)]
pub struct Source {
    pub(super) origin: Origin,
    /// The file when it was opened.
    state: Option<State>,
}

/// What tells whether a file is still the one that was opened.
#[derive(Clone, Debug, PartialEq, Eq)]
struct State {
    bytes: u64,
    /// Not known on every system.
    modified: Option<SystemTime>,
}

impl State {
    fn of(data: &Metadata) -> State {
        State {
            bytes: data.len(),
            modified: data.modified().ok(),
        }
    }
}

#[derive(Clone, Debug)]
pub(super) enum Origin {
    File(PathBuf),
    /// The bytes, handed out in pieces of this size.
    Memory(Vec<u8>, usize),
    /// Text behind a compression.
    Packed(PathBuf, Format),
    Table(PathBuf, Table),
}

/// Numbers in columns.
#[derive(Clone)]
pub(super) struct Table(pub Arc<dyn Columns>);

impl std::fmt::Debug for Table {
    fn fmt(&self, f: &mut std::fmt::Formatter) -> std::fmt::Result {
        f.debug_tuple("Table").field(&self.0.heads()).finish()
    }
}

/// Bytes that are parsed at a time: they stay near the processor, and a few thousand rows are
/// enough work to be handed to another one.
const PIECE_BYTES: usize = 256 * 1024;

/// Looks at the first bytes of a file, and at what a table says of itself.
///
/// # Errors
/// A file that is not there, or is no plain file: a pipe or a device could keep the
/// audit waiting for ever; a table that is damaged or of a kind that is not read.
pub fn open(path: &Path) -> Result<Source> {
    let data = std::fs::metadata(path).map_err(|error| match error.kind() {
        ErrorKind::NotFound => Fault::new("there is no such file").in_file(path),
        _ => Fault::io(path, &error),
    })?;
    if !data.is_file() {
        return Err(Fault::new("this is not a plain file").in_file(path));
    }
    let (path, file) = (path.to_owned(), Data::File(path.to_owned()));
    let first = (data.len() as usize).min(FIRST_BYTES);
    let origin = match recognise(&file.exactly(0, first)?) {
        None => Origin::File(path),
        Some(format) if format.is_packed() => Origin::Packed(path, format),
        Some(format) => Origin::Table(path, Table(columns::open(&file, format)?.into())),
    };
    Ok(Source {
        origin,
        state: Some(State::of(&data)),
    })
}

impl Source {
    /// Bytes that are already in memory.
    pub fn memory(bytes: Vec<u8>) -> Source {
        Source::in_pieces(bytes, PIECE_BYTES)
    }

    /// Bytes in memory that come in pieces of a given size, as from a slow writer;
    /// what is read must not depend on it.
    pub fn in_pieces(bytes: Vec<u8>, size: usize) -> Source {
        Source {
            origin: Origin::Memory(bytes, size.max(1)),
            state: None,
        }
    }

    /// How many bytes there are: of a file, when it was opened.
    pub fn size(&self) -> u64 {
        match (&self.origin, &self.state) {
            (Origin::Memory(bytes, _), _) => bytes.len() as u64,
            (_, state) => state.as_ref().map_or(0, |state| state.bytes),
        }
    }

    /// To be asked when everything has been read: a file is read more than once, and what is
    /// said of it would be true of no state that it ever was in.
    ///
    /// # Errors
    /// A file that another program has changed, replaced or removed since it was opened.
    pub fn is_unchanged(&self) -> Result<()> {
        let (Origin::File(path) | Origin::Packed(path, _) | Origin::Table(path, _)) = &self.origin
        else {
            return Ok(());
        };
        let now = std::fs::metadata(path).ok();
        if now.as_ref().map(State::of) == self.state {
            return Ok(());
        }
        let fault = Fault::new("this file changed while it was read");
        let help = "audit it again when the program that writes it is done";
        Err(fault.help(help).in_file(path))
    }

    /// The columns, where the file is no text.
    pub(super) fn table(&self) -> Option<&dyn Columns> {
        match &self.origin {
            Origin::Table(_, table) => Some(&*table.0),
            _ => None,
        }
    }

    /// Sentences on what is in the file and not read as a column.
    pub fn left_out(&self) -> &[String] {
        self.table().map_or(&[], |table| table.left_out())
    }

    /// The text from its beginning, and how much of it to parse at a time.
    fn text(&self) -> Result<(Box<dyn Read + Send + '_>, usize)> {
        Ok(match &self.origin {
            Origin::Memory(bytes, size) => (Box::new(&bytes[..]), *size),
            Origin::File(path) => {
                let file = File::open(path).map_err(|error| Fault::io(path, &error))?;
                (Box::new(file), PIECE_BYTES)
            }
            Origin::Packed(path, format) => (
                packed::open(&Data::File(path.clone()), *format)?,
                PIECE_BYTES,
            ),
            // Nothing of a table is text.
            Origin::Table(..) => (Box::new(std::io::empty()), PIECE_BYTES),
        })
    }

    /// The first bytes of the text, and whether they are all.
    pub(super) fn sample(&self, most: usize) -> Result<(Vec<u8>, bool)> {
        let mut sample = Vec::new();
        let (text, _) = self.text()?;
        let read = text.take(most as u64 + 1).read_to_end(&mut sample);
        read.map_err(|error| Fault::new(error.to_string()))?;
        let whole = sample.len() <= most;
        sample.truncate(most);
        Ok((sample, whole))
    }

    /// Every batch of rows, in order.
    pub(super) fn batches(
        &self,
        layout: &Layout,
        of: &Selection,
        each: &mut dyn FnMut(Batch) -> Result<()>,
    ) -> Result<()> {
        if let Some(table) = self.table() {
            return tables::batches(table, of, each);
        }
        if let Some(long) = &layout.long {
            let mut take = |batch, _| each(batch).map(|()| true);
            return self.long_batches(long, of, &mut take).map(|_| ());
        }
        let columns = batch::Columns::new(layout, of, Known::default());
        self.text_batches(layout, &columns, &mut |batch, _| each(batch).map(|()| true))
            .map(|_| ())
    }

    /// Batches of text with their bytes, in order, as long as `each` wants more; true where the
    /// text ended before that.
    pub(super) fn text_batches(
        &self,
        layout: &Layout,
        columns: &batch::Columns,
        each: &mut dyn FnMut(Batch, usize) -> Result<bool>,
    ) -> Result<bool> {
        let mut pieces = self.pieces(layout)?;
        let mut lines = layout.first_row - 1;
        let mut piece = Piece::default();
        while pieces
            .next(&mut piece)
            .map_err(|fault| after(fault, lines))?
        {
            let batch = columns.parse(&piece).map_err(|fault| after(fault, lines))?;
            lines += batch.lines;
            if !each(batch, piece.text.len())? {
                return Ok(false);
            }
        }
        Ok(true)
    }

    /// The text from the first row on, in pieces.
    pub(super) fn pieces(&self, layout: &Layout) -> Result<Pieces<Box<dyn Read + Send + '_>>> {
        let (input, size) = self.text()?;
        let mut pieces = Pieces::new(input, size);
        pieces.skip_lines(layout.first_row - 1)?;
        Ok(pieces)
    }
}

/// A complaint about a line of a piece, as one about a line of the file.
pub(super) fn after(mut fault: Fault, lines: u64) -> Fault {
    fault.line = fault.line.map(|line| lines + line);
    fault
}

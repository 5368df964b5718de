//! The only opener of trajectory files: plain files in blocks, or bytes in memory.

use std::fs::File;
use std::io::{ErrorKind, Read};
use std::path::{Path, PathBuf};

use super::batch::{Batch, Columns, Known};
use super::layout::Layout;
use super::pieces::{Piece, Pieces};
use super::survey::Selection;
use crate::fault::{Fault, Result};

/// Where the bytes of a trajectory come from.
#[derive(Clone, Debug)]
pub struct Source {
    pub(super) origin: Origin,
}

#[derive(Clone, Debug)]
pub(super) enum Origin {
    File(PathBuf),
    /// The bytes, handed out in pieces of this size.
    Memory(Vec<u8>, usize),
}

const BLOCK_BYTES: usize = 64 * 1024;
/// Bytes that are parsed at a time: they stay near the processor, and a few thousand rows are
/// enough work to be handed to another one.
const PIECE_BYTES: usize = 256 * 1024;

/// Looks at a file without reading it.
///
/// # Errors
/// A file that is not there, or is no plain file: a pipe or a device could keep the
/// audit waiting for ever.
pub fn open(path: &Path) -> Result<Source> {
    let data = std::fs::metadata(path).map_err(|error| match error.kind() {
        ErrorKind::NotFound => Fault::new("there is no such file").in_file(path),
        _ => Fault::io(path, &error),
    })?;
    if !data.is_file() {
        return Err(Fault::new("this is not a plain file").in_file(path));
    }
    Ok(Source {
        origin: Origin::File(path.to_owned()),
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
        }
    }

    /// How many bytes there are, as far as that can be known without reading them.
    pub fn size(&self) -> u64 {
        match &self.origin {
            Origin::Memory(bytes, _) => bytes.len() as u64,
            Origin::File(path) => std::fs::metadata(path).map_or(0, |data| data.len()),
        }
    }

    /// Hands the bytes over block by block, at most `most` of them.
    fn blocks(&self, most: usize, each: &mut dyn FnMut(&[u8]) -> Result<()>) -> Result<()> {
        let path = match &self.origin {
            Origin::Memory(bytes, size) => {
                return bytes[..bytes.len().min(most)]
                    .chunks(*size)
                    .try_for_each(each);
            }
            Origin::File(path) => path,
        };
        let mut file = File::open(path).map_err(|error| Fault::io(path, &error))?;
        let mut block = vec![0; BLOCK_BYTES.min(most)];
        let mut left = most;
        while left > 0 {
            let wanted = block.len().min(left);
            match file.read(&mut block[..wanted]) {
                Ok(0) => break,
                Ok(length) => {
                    left -= length;
                    each(&block[..length]).map_err(|fault| fault.in_file(path))?;
                }
                Err(error) if error.kind() == ErrorKind::Interrupted => {}
                Err(error) => return Err(Fault::io(path, &error)),
            }
        }
        Ok(())
    }

    /// The first bytes, and whether they are all.
    pub(super) fn sample(&self, most: usize) -> Result<(Vec<u8>, bool)> {
        let mut sample = Vec::new();
        self.blocks(most + 1, &mut |block| {
            sample.extend_from_slice(block);
            Ok(())
        })?;
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
        let columns = Columns::new(layout, of, Known::default());
        let mut pieces = self.pieces(layout)?;
        let mut lines = layout.first_row - 1;
        let mut piece = Piece::default();
        while pieces
            .next(&mut piece)
            .map_err(|fault| after(fault, lines))?
        {
            let batch = columns.parse(&piece).map_err(|fault| after(fault, lines))?;
            lines += batch.lines;
            each(batch)?;
        }
        Ok(())
    }

    /// The text from the first row on, in pieces.
    pub(super) fn pieces(&self, layout: &Layout) -> Result<Pieces<Box<dyn Read + Send + '_>>> {
        let (input, size): (Box<dyn Read + Send>, usize) = match &self.origin {
            Origin::Memory(bytes, size) => (Box::new(&bytes[..]), *size),
            Origin::File(path) => {
                let file = File::open(path).map_err(|error| Fault::io(path, &error))?;
                (Box::new(file), PIECE_BYTES)
            }
        };
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

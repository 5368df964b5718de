//! The only opener of trajectory files: plain files in blocks, or bytes in memory.

use std::fs::File;
use std::io::{ErrorKind, Read};
use std::path::{Path, PathBuf};

use super::lines::Lines;
use crate::fault::{Fault, Result};

/// Where the bytes of a trajectory come from.
#[derive(Clone, Debug)]
pub struct Source {
    origin: Origin,
}

#[derive(Clone, Debug)]
enum Origin {
    File(PathBuf),
    /// The bytes, handed out in pieces of this size.
    Memory(Vec<u8>, usize),
}

/// Takes a line with its number and whether it had an end.
pub(super) type EachLine<'a> = dyn FnMut(u64, &[u8], bool) -> Result<()> + 'a;

const BLOCK_BYTES: usize = 256 * 1024;

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
        Source::pieces(bytes, BLOCK_BYTES)
    }

    /// Bytes in memory that come in pieces of a given size, as from a slow writer;
    /// what is read must not depend on it.
    pub fn pieces(bytes: Vec<u8>, size: usize) -> Source {
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

    /// Every line with its number; the flag is false for a last line without an end.
    pub(super) fn each_line(&self, each: &mut EachLine) -> Result<()> {
        let mut lines = Lines::default();
        self.blocks(usize::MAX, &mut |block| {
            lines.feed(block, &mut |number, line| each(number, line, true))
        })?;
        lines.finish(&mut |number, line| each(number, line, false))
    }
}

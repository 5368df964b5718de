//! Where the bytes of a binary file are: on disk or in memory, read at any offset.
//!
//! Every decoder opens a handle of its own, so that several columns can be followed
//! side by side without the file in memory.

use std::fs::File;
use std::io::{BufReader, Cursor, Error, Read, Result as IoResult, Seek, SeekFrom, Take};
use std::path::PathBuf;
use std::sync::Arc;

use crate::fault::{Fault, Result};

/// The bytes of a file.
#[derive(Clone, Debug)]
pub enum Data {
    /// A plain file.
    File(PathBuf),
    /// Bytes in memory.
    Memory(Arc<[u8]>),
}

/// A place in the bytes, which can be moved.
#[derive(Debug)]
pub enum Handle {
    /// In a file.
    File(File),
    /// In memory.
    Memory(Cursor<Arc<[u8]>>),
}

/// A stretch of the bytes.
pub type Piece = BufReader<Take<Handle>>;

impl Data {
    /// Bytes in memory.
    pub fn memory(bytes: impl Into<Arc<[u8]>>) -> Data {
        Data::Memory(bytes.into())
    }

    /// How many bytes there are.
    ///
    /// # Errors
    /// What the system says of the file.
    pub fn length(&self) -> Result<u64> {
        match self {
            Data::File(path) => std::fs::metadata(path)
                .map(|data| data.len())
                .map_err(|error| Fault::io(path, &error)),
            Data::Memory(bytes) => Ok(bytes.len() as u64),
        }
    }

    /// A handle of its own at the first byte.
    ///
    /// # Errors
    /// What the system says of the file.
    pub fn handle(&self) -> Result<Handle> {
        match self {
            Data::File(path) => File::open(path)
                .map(Handle::File)
                .map_err(|error| Fault::io(path, &error)),
            Data::Memory(bytes) => Ok(Handle::Memory(Cursor::new(bytes.clone()))),
        }
    }

    /// A stretch of the bytes; shorter where the file ends before.
    ///
    /// # Errors
    /// What the system says of the file.
    pub fn piece(&self, start: u64, length: u64) -> Result<Piece> {
        let mut handle = self.handle()?;
        handle
            .seek(SeekFrom::Start(start))
            .map_err(|error| self.fault(&error))?;
        Ok(BufReader::new(handle.take(length)))
    }

    /// Bytes at a place, all of them or a complaint.
    ///
    /// # Errors
    /// The file ends before, or the system complains.
    pub fn exactly(&self, start: u64, length: usize) -> Result<Vec<u8>> {
        let mut bytes = Vec::new();
        self.piece(start, length as u64)?
            .read_to_end(&mut bytes)
            .map_err(|error| self.fault(&error))?;
        if bytes.len() < length {
            return Err(self.named(Fault::new(format!(
                "cut off: {length} bytes should stand at byte {start}, the file holds {}",
                bytes.len()
            ))));
        }
        Ok(bytes)
    }

    /// A complaint of the system, or of a decoder, about these bytes.
    pub fn fault(&self, error: &Error) -> Fault {
        self.named(reading(error))
    }

    /// Adds the path, where there is one.
    pub fn named(&self, fault: Fault) -> Fault {
        match self {
            Data::File(path) => fault.in_file(path),
            Data::Memory(_) => fault,
        }
    }
}

/// What a reader or a decoder says, in our words where they are known.
pub(super) fn reading(error: &Error) -> Fault {
    match error.kind() {
        std::io::ErrorKind::UnexpectedEof => Fault::new("cut off: the data end too early"),
        _ => Fault::new(format!("cannot be read: {error}")),
    }
}

impl Read for Handle {
    fn read(&mut self, buffer: &mut [u8]) -> IoResult<usize> {
        match self {
            Handle::File(file) => file.read(buffer),
            Handle::Memory(cursor) => cursor.read(buffer),
        }
    }
}

impl Seek for Handle {
    fn seek(&mut self, to: SeekFrom) -> IoResult<u64> {
        match self {
            Handle::File(file) => file.seek(to),
            Handle::Memory(cursor) => cursor.seek(to),
        }
    }
}

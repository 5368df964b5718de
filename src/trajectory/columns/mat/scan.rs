//! One array element of a MATLAB file to the places of its numbers, in one pass over
//! its bytes, which may come out of a decoder. Every size is compared with the element
//! around it.

use std::io::Read;

use super::super::cell::{Cell, Kind, Precision};
use super::super::data;
use super::super::strip::skip;
use super::super::table::Entry;
use crate::fault::{Fault, Result, quoted};

/// Longest name and most fields: MATLAB allows 63 characters, Octave more.
const MOST_NAME_BYTES: u64 = 4096;
const MOST_FIELD_BYTES: u64 = 1 << 20;
const MOST_DIMENSIONS: u64 = 64;

/// Types of elements.
const INT8: u32 = 1;
const INT32: u32 = 5;
const UINT32: u32 = 6;

/// Real numbers that were found.
#[derive(Clone, Debug)]
pub(super) struct Found {
    pub name: String,
    pub shape: Vec<u64>,
    /// How they are stored, which may be shorter than what they are.
    pub cell: Cell,
    pub precision: Precision,
    pub whole: bool,
    /// Bytes of the stream before the first.
    pub start: u64,
}

impl Found {
    pub fn entry(&self) -> Entry {
        Entry {
            name: self.name.clone(),
            shape: self.shape.clone(),
            fields: Vec::new(),
            precision: self.precision,
            whole: self.whole,
        }
    }
}

/// A pass over one element.
pub(super) struct Scan {
    pub bytes: Box<dyn Read>,
    big: bool,
    /// Bytes passed so far, and where the element ends.
    at: u64,
    end: u64,
    pub found: Vec<Found>,
    pub left_out: Vec<String>,
}

/// What stands in front of the numbers of an array.
struct Front {
    class: u8,
    complex: bool,
    logical: bool,
    shape: Vec<u64>,
    name: String,
}

/// A part of an array: its type, its bytes, and those that fill it up.
struct Part {
    kind: u32,
    size: u64,
    padding: u64,
}

impl Scan {
    pub fn new(bytes: Box<dyn Read>, big: bool, end: u64) -> Scan {
        Scan {
            bytes,
            big,
            at: 0,
            end,
            found: Vec::new(),
            left_out: Vec::new(),
        }
    }

    /// Sets the end of the element, so many bytes from here.
    pub fn bound(&mut self, size: u64) -> Result<()> {
        let end = self.at.checked_add(size).filter(|&end| end <= self.end);
        self.end = end.ok_or_else(too_long)?;
        Ok(())
    }

    /// Complains of bytes that are left.
    pub fn end(&self) -> Result<()> {
        match self.at == self.end {
            true => Ok(()),
            false => Err(Fault::new("an array is shorter than its element")),
        }
    }

    fn take(&mut self, size: u64) -> Result<Vec<u8>> {
        if size > self.end - self.at {
            return Err(too_long());
        }
        // Callers bound the size; what is not there does not take memory either.
        let mut bytes = Vec::new();
        (&mut self.bytes)
            .take(size)
            .read_to_end(&mut bytes)
            .map_err(|error| data::reading(&error))?;
        if (bytes.len() as u64) < size {
            return Err(Fault::new("cut off: the data end too early"));
        }
        self.at += size;
        Ok(bytes)
    }

    fn pass(&mut self, size: u64) -> Result<()> {
        if size > self.end - self.at {
            return Err(too_long());
        }
        skip(&mut *self.bytes, size)?;
        self.at += size;
        Ok(())
    }

    fn word(&self, bytes: &[u8]) -> u32 {
        let word = [bytes[0], bytes[1], bytes[2], bytes[3]];
        match self.big {
            true => u32::from_be_bytes(word),
            false => u32::from_le_bytes(word),
        }
    }

    /// The tag of an element: type and size.
    pub fn tag(&mut self) -> Result<(u32, u64)> {
        let tag = self.take(8)?;
        Ok((self.word(&tag[..4]), u64::from(self.word(&tag[4..]))))
    }

    /// The tag of a part. A short one has its bytes within the tag, and is told by the
    /// upper half of the first word.
    fn part(&mut self) -> Result<Part> {
        let first = self.take(4)?;
        let first = self.word(&first);
        let (upper, kind) = (u64::from(first >> 16), first & 0xffff);
        if upper == 0 {
            let second = self.take(4)?;
            let size = u64::from(self.word(&second));
            return Ok(Part {
                kind,
                size,
                padding: (8 - size % 8) % 8,
            });
        }
        if upper > 4 {
            return Err(Fault::new(
                "a short part of an array is longer than four bytes",
            ));
        }
        Ok(Part {
            kind,
            size: upper,
            padding: 4 - upper,
        })
    }

    fn small(&mut self, kinds: &[u32], most: u64, what: &str) -> Result<Vec<u8>> {
        let part = self.part()?;
        if !kinds.contains(&part.kind) || part.size > most {
            return Err(Fault::new(format!("an array has no valid {what}")));
        }
        let bytes = self.take(part.size)?;
        self.pass(part.padding)?;
        Ok(bytes)
    }

    fn front(&mut self, field: Option<&str>) -> Result<Front> {
        let flags = self.small(&[UINT32], 8, "flags")?;
        if flags.len() != 8 {
            return Err(Fault::new("an array has no valid flags"));
        }
        let flags = self.word(&flags[..4]);
        let class = (flags & 0xff) as u8;
        // An opaque object has no sides.
        let shape = match class {
            17 => Vec::new(),
            _ => {
                let sides = self.small(&[INT32], 4 * MOST_DIMENSIONS, "sides")?;
                if sides.len() % 4 != 0 || sides.len() < 8 {
                    return Err(Fault::new("an array has no valid sides"));
                }
                let side = |bytes: &[u8]| u64::from(self.word(bytes));
                sides.chunks_exact(4).map(side).collect()
            }
        };
        let name = self.small(&[INT8, 16], MOST_NAME_BYTES, "name")?;
        let name = String::from_utf8_lossy(&name).into_owned();
        Ok(Front {
            class,
            complex: flags & 0x800 != 0,
            logical: flags & 0x200 != 0,
            shape,
            name: field.map_or(name, str::to_owned),
        })
    }

    /// An array up to the end of its element; `field` is its name within a structure.
    pub fn matrix(&mut self, field: Option<&str>) -> Result<()> {
        let within = field.is_some();
        // An empty field of a structure has an element without bytes.
        if within && self.at == self.end {
            return Ok(());
        }
        let front = self.front(field)?;
        let what = match front.class {
            6..=15 if front.complex => "holds complex numbers",
            6..=15 => return self.numbers(front),
            2 if within => "is a structure within a structure",
            2 if front.shape.iter().any(|&side| side != 1) => "is a list of structures",
            2 => return self.structure(&front.name),
            1 => "is a cell array",
            4 => "holds text",
            5 => "is a sparse matrix",
            _ => "is an object",
        };
        self.left_out
            .push(format!("{} {what}", quoted(&front.name)));
        self.pass(self.end - self.at)
    }

    fn numbers(&mut self, front: Front) -> Result<()> {
        let part = self.part()?;
        let kind = match part.kind {
            1 => Kind::Signed(1),
            2 => Kind::Unsigned(1),
            3 => Kind::Signed(2),
            4 => Kind::Unsigned(2),
            5 => Kind::Signed(4),
            6 => Kind::Unsigned(4),
            7 => Kind::Float(4),
            9 => Kind::Float(8),
            12 => Kind::Signed(8),
            13 => Kind::Unsigned(8),
            other => {
                let name = quoted(&front.name);
                return Err(Fault::new(format!(
                    "{name} holds numbers of unknown type {other}"
                )));
            }
        };
        let cell = Cell {
            kind,
            big: self.big,
        };
        let bytes = front
            .shape
            .iter()
            .try_fold(cell.size() as u64, |bytes, &side| bytes.checked_mul(side));
        if bytes != Some(part.size) {
            let name = quoted(&front.name);
            return Err(Fault::new(format!(
                "{name} has another size than its sides say"
            )));
        }
        let start = self.at;
        self.pass(part.size)?;
        // Some writers leave out what fills up the last part.
        self.pass(part.padding.min(self.end - self.at))?;
        self.found.push(Found {
            name: front.name,
            shape: front.shape,
            cell,
            precision: match front.class {
                7 => Precision::Single,
                _ => cell.precision(),
            },
            whole: front.class > 7 || front.logical,
            start,
        });
        Ok(())
    }

    fn structure(&mut self, name: &str) -> Result<()> {
        let width = self.small(&[INT32], 4, "length of names")?;
        if width.len() != 4 {
            return Err(Fault::new("a structure has no valid length of names"));
        }
        let width = self.word(&width) as usize;
        let names = self.small(&[INT8], MOST_FIELD_BYTES, "names of fields")?;
        if width == 0 || names.len() % width != 0 {
            return Err(Fault::new("a structure has no valid names of fields"));
        }
        let end = self.end;
        for field in names.chunks_exact(width) {
            let field = field.split(|&byte| byte == 0).next().unwrap_or_default();
            let field = format!("{name}.{}", String::from_utf8_lossy(field));
            let (kind, size) = self.tag()?;
            if kind != super::MATRIX {
                return Err(Fault::new(format!("{} is no array", quoted(&field))));
            }
            self.bound(size)?;
            self.matrix(Some(&field))?;
            self.end()?;
            self.end = end;
        }
        Ok(())
    }
}

fn too_long() -> Fault {
    Fault::new("a part of an array is longer than its element")
}

//! MATLAB files of the versions 5 to 7: matrices of real numbers to one table, those
//! within a structure by `structure.field`.
//!
//! The file has no count of its arrays, so one that ends exactly between two arrays
//! looks complete; a cut anywhere else is an error. `mat/scan.rs` finds the numbers.

mod scan;

use std::io::Read;

use flate2::bufread::ZlibDecoder;

use self::scan::{Found, Scan};
use super::strip::{Lie, pour, skip};
use super::table::{Entry, Table, by_array, lay};
use super::{Columns, Data, EachBlock, Head, checked, data};
use crate::fault::{Fault, Result};
use crate::trajectory::budget::{Budget, Within};

const HEADER_BYTES: u64 = 128;
/// Types of elements at the top of the file.
const MATRIX: u32 = 14;
const PACKED: u32 = 15;

/// A file of matrices.
pub(super) struct Mat {
    data: Data,
    arrays: Vec<(Stream, Found)>,
    table: Table,
}

/// The element that holds an array.
#[derive(Clone, Copy, Debug)]
struct Stream {
    start: u64,
    length: u64,
    packed: bool,
}

impl Stream {
    fn open(self, data: &Data, offset: u64) -> Result<Box<dyn Read>> {
        if !self.packed {
            let start = self.start.saturating_add(offset);
            let left = self.length.saturating_sub(offset);
            return Ok(Box::new(data.piece(start, left)?));
        }
        let mut bytes = ZlibDecoder::new(data.piece(self.start, self.length)?);
        skip(&mut bytes, offset)?;
        Ok(Box::new(bytes))
    }
}

impl Mat {
    /// Goes through all elements, and unpacks those that are packed, once.
    pub fn open(data: &Data) -> Result<Mat> {
        let length = data.length()?;
        let header = data.exactly(0, HEADER_BYTES as usize)?;
        let big = header[126..128] == *b"MI";
        let budget = Budget::of(length);
        let mut arrays = Vec::new();
        let mut left_out = Vec::new();
        let mut at = HEADER_BYTES;
        while at < length {
            let tag = data.exactly(at, 8)?;
            let word = |at: usize| {
                let bytes = [tag[at], tag[at + 1], tag[at + 2], tag[at + 3]];
                match big {
                    true => u32::from_be_bytes(bytes),
                    false => u32::from_le_bytes(bytes),
                }
            };
            let (kind, size) = (word(0), u64::from(word(4)));
            let stream = Stream {
                start: at + 8,
                length: size,
                packed: kind == PACKED,
            };
            at += 8 + size;
            if at > length {
                return Err(Fault::new(format!(
                    "cut off: an array should reach to byte {at}, the file holds {length}"
                )));
            }
            let (found, sentences) = stream.scan(data, big, kind, &budget)?;
            arrays.extend(found.into_iter().map(|found| (stream, found)));
            left_out.extend(sentences);
        }
        let entries: Vec<Entry> = arrays.iter().map(|(_, found)| found.entry()).collect();
        Ok(Mat {
            data: data.clone(),
            arrays,
            table: lay(&entries, left_out)?,
        })
    }
}

impl Stream {
    fn scan(
        self,
        data: &Data,
        big: bool,
        kind: u32,
        budget: &Budget,
    ) -> Result<(Vec<Found>, Vec<String>)> {
        let bytes = self.open(data, 0)?;
        match kind {
            MATRIX => {
                let mut scan = Scan::new(bytes, big, self.length);
                scan.matrix(None)?;
                scan.end()?;
                Ok((scan.found, scan.left_out))
            }
            PACKED => {
                let bytes = Box::new(Within(bytes, budget.clone()));
                let mut scan = Scan::new(bytes, big, u64::MAX);
                let (kind, size) = scan.tag()?;
                if kind != MATRIX {
                    return Err(Fault::new("a packed element holds no array"));
                }
                scan.bound(size)?;
                scan.matrix(None)?;
                scan.end()?;
                // The checksum stands behind the last byte.
                let mut rest = [0; 1];
                match scan.bytes.read(&mut rest) {
                    Ok(0) => Ok((scan.found, scan.left_out)),
                    Ok(_) => Err(Fault::new("a packed array is longer than it says")),
                    Err(error) => Err(data::reading(&error)),
                }
            }
            // Elements of other types hold no array; MATLAB writes none today.
            other => Err(Fault::new(format!("an element of unknown type {other}"))),
        }
    }
}

impl Columns for Mat {
    fn heads(&self) -> &[Head] {
        &self.table.heads
    }

    fn rows(&self) -> u64 {
        self.table.rows
    }

    fn left_out(&self) -> &[String] {
        &self.table.left_out
    }

    fn read(&self, wanted: &[usize], each: &mut EachBlock) -> Result<()> {
        checked(wanted, self.heads())?;
        let mut strips = Vec::new();
        for (place, columns) in by_array(&self.table.places, wanted) {
            let (stream, found) = &self.arrays[place.array];
            let width = self.table.places.iter().filter(|p| p.array == place.array);
            let width = width.count() as u64;
            // MATLAB stores by columns; a matrix that lies is then stored by rows.
            let lie = Lie::matrix(self.table.rows, width, found.cell, !place.lies);
            strips.extend(lie.strips(&columns, &mut |offset| {
                stream.open(&self.data, found.start.saturating_add(offset))
            })?);
        }
        pour(self.table.rows, wanted.len(), &mut strips, each)
            .map_err(|fault| self.data.named(fault))
    }
}

//! Streams of stored numbers to blocks of rows.
//!
//! A [`Strip`] follows one stream of records of equal size and picks numbers out of
//! each: a matrix by rows is one strip with a pick per wanted column, a matrix by
//! columns is a strip per wanted column. Memory does not grow with the rows.

use std::io::Read;

use super::cell::Cell;
use super::{BLOCK_ROWS, EachBlock, data};
use crate::fault::{Fault, Result};

/// Bytes that are decoded at a time.
const PIECE_BYTES: usize = 64 * 1024;

/// One stream of records.
pub(super) struct Strip {
    /// The bytes from the first record on.
    pub bytes: Box<dyn Read>,
    /// Bytes of a record.
    pub stride: usize,
    /// What is taken out of a record.
    pub picks: Vec<Pick>,
}

/// A number within a record, and the column of the block that it goes to.
#[derive(Clone, Copy, Debug)]
pub(super) struct Pick {
    pub offset: usize,
    pub cell: Cell,
    pub to: usize,
}

impl Strip {
    fn take(&mut self, rows: usize, buffer: &mut Vec<u8>, block: &mut [Vec<f64>]) -> Result<()> {
        let stride = self.stride.max(1);
        let most = (PIECE_BYTES / stride).max(1);
        let mut left = rows;
        while left > 0 {
            let count = left.min(most);
            buffer.resize(count * stride, 0);
            self.bytes
                .read_exact(buffer)
                .map_err(|error| data::reading(&error))?;
            for record in buffer.chunks_exact(stride) {
                for pick in &self.picks {
                    let bytes = record.get(pick.offset..).unwrap_or_default();
                    if let Some(column) = block.get_mut(pick.to) {
                        column.push(pick.cell.value(bytes));
                    }
                }
            }
            left -= count;
        }
        Ok(())
    }
}

/// Hands out rows in blocks, column by column.
pub(super) fn pour(
    rows: u64,
    columns: usize,
    strips: &mut [Strip],
    each: &mut EachBlock,
) -> Result<()> {
    let mut block = vec![Vec::new(); columns];
    let mut buffer = Vec::new();
    let mut left = rows;
    while left > 0 {
        let count = left.min(BLOCK_ROWS as u64) as usize;
        block.iter_mut().for_each(Vec::clear);
        for strip in strips.iter_mut() {
            strip.take(count, &mut buffer, &mut block)?;
        }
        if block.iter().any(|column| column.len() != count) {
            return Err(Fault::new("a column has another length than its table"));
        }
        each(&block)?;
        left -= count as u64;
    }
    Ok(())
}

/// Passes over bytes of a stream that cannot be moved.
pub(super) fn skip(bytes: &mut dyn Read, count: u64) -> Result<()> {
    let passed = std::io::copy(&mut bytes.take(count), &mut std::io::sink());
    match passed {
        Ok(passed) if passed == count => Ok(()),
        Ok(_) => Err(Fault::new("cut off: the data end too early")),
        Err(error) => Err(data::reading(&error)),
    }
}

/// How the numbers of an array lie in its bytes.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Lie {
    /// Row by row: the bytes of a row, and where each column is within.
    Rows {
        stride: usize,
        columns: Vec<(usize, Cell)>,
    },
    /// Column by column, each with all its rows.
    Stacked { rows: u64, cell: Cell },
}

/// Opens the bytes of an array so many bytes after its first.
pub(super) type OpenAt<'a> = dyn FnMut(u64) -> Result<Box<dyn Read>> + 'a;

impl Lie {
    /// A matrix of plain numbers.
    pub fn matrix(rows: u64, columns: u64, cell: Cell, by_columns: bool) -> Lie {
        if by_columns {
            return Lie::Stacked { rows, cell };
        }
        let size = cell.size();
        let columns = columns as usize;
        Lie::Rows {
            stride: columns.saturating_mul(size),
            columns: (0..columns).map(|column| (column * size, cell)).collect(),
        }
    }

    /// The strips for columns of the array, each with its place in the block.
    pub fn strips(&self, wanted: &[(usize, usize)], open: &mut OpenAt) -> Result<Vec<Strip>> {
        let absent = || Fault::new("a column lies outside its array");
        match self {
            _ if wanted.is_empty() => Ok(Vec::new()),
            Lie::Rows { stride, columns } => {
                let mut picks = Vec::new();
                for &(column, to) in wanted {
                    let &(offset, cell) = columns.get(column).ok_or_else(absent)?;
                    picks.push(Pick { offset, cell, to });
                }
                Ok(vec![Strip {
                    bytes: open(0)?,
                    stride: *stride,
                    picks,
                }])
            }
            &Lie::Stacked { rows, cell } => wanted
                .iter()
                .map(|&(column, to)| {
                    let before = (column as u64)
                        .checked_mul(rows)
                        .and_then(|numbers| numbers.checked_mul(cell.size() as u64));
                    Ok(Strip {
                        bytes: open(before.ok_or_else(absent)?)?,
                        stride: cell.size(),
                        picks: vec![Pick {
                            offset: 0,
                            cell,
                            to,
                        }],
                    })
                })
                .collect(),
        }
    }
}

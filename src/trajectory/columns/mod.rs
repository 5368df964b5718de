//! Files of numbers in columns that are no text: what they are by their first bytes
//! ([`recognise`]), and their rows in blocks of columns ([`open`], [`Columns::read`]).
//!
//! A format is known by its content, never by its name. A reader takes what the file
//! holds as it is: a value that is absent is NaN in its place, an array that is not
//! part of the table is named ([`Columns::left_out`]), and a file that holds less
//! than it claims is refused. Memory does not grow with the rows.

mod cell;
mod data;
#[cfg(feature = "hdf5")]
mod hdf5;
mod literal;
mod mat;
mod npy;
mod npz;
#[cfg(feature = "parquet")]
mod parquet;
mod recognise;
mod strip;
mod table;
mod zip;

#[cfg(test)]
mod tests;

pub use cell::{Cell, Kind, Precision};
pub use data::{Data, Handle, Piece};
pub use recognise::{FIRST_BYTES, Format, recognise};

use super::budget::Budget;
use crate::fault::{Fault, Result};

/// Most rows of a block.
pub const BLOCK_ROWS: usize = 8192;

/// Takes a block: the wanted columns in the order asked for, all of the same length.
pub type EachBlock<'a> = dyn FnMut(&[Vec<f64>]) -> Result<()> + 'a;

/// What is known of a column before it is read.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Head {
    /// Its name, if the file has one.
    pub name: Option<String>,
    /// True where numbers are stored below double precision.
    pub precision: Precision,
    /// True where whole numbers are stored; beyond 2^53 they are rounded.
    pub whole: bool,
}

/// A file of numbers in columns.
pub trait Columns: Send + Sync {
    /// The columns in the order of the file.
    fn heads(&self) -> &[Head];

    /// How many rows the file claims; [`Columns::read`] hands out as many or fails.
    fn rows(&self) -> u64;

    /// Sentences on what is in the file and not in the table.
    fn left_out(&self) -> &[String];

    /// Hands out all rows in order, in blocks of at most [`BLOCK_ROWS`], with the
    /// wanted columns only, in the order asked for.
    ///
    /// # Errors
    /// The file is cut off or damaged, or `each` complains. Blocks before that have
    /// been handed out by then.
    fn read(&self, wanted: &[usize], each: &mut EachBlock) -> Result<()>;
}

/// Opens a file of columns.
///
/// # Errors
/// The file is damaged, holds no table, is of a kind that is not read, or this build
/// lacks the reader.
pub fn open(data: &Data, format: Format) -> Result<Box<dyn Columns>> {
    let opened: Result<Box<dyn Columns>> = match format {
        Format::Npy => npy::Npy::open(data).map(|file| Box::new(file) as _),
        Format::Npz => npz::Npz::open(data).map(|file| Box::new(file) as _),
        Format::Mat5 => mat::Mat::open(data).map(|file| Box::new(file) as _),
        #[cfg(feature = "parquet")]
        Format::Parquet => parquet::Table::open(data).map(|file| Box::new(file) as _),
        #[cfg(feature = "hdf5")]
        Format::Hdf5 => hdf5::Tree::open(data).map(|file| Box::new(file) as _),
        other => Err(other.refusal()),
    };
    opened
        .and_then(|table| within(&*table, data).map(|()| table))
        .map_err(|fault| data.named(fault))
}

/// Rows may be claimed that are not there, or that one number stands for: what a table holds
/// counts as what it unpacks to.
fn within(table: &dyn Columns, data: &Data) -> Result<()> {
    let numbers = table.rows().saturating_mul(table.heads().len() as u64);
    let budget = Budget::of(data.length()?);
    budget.spend(numbers.saturating_mul(8)).map_err(Fault::new)
}

/// The wanted columns, or a complaint about one that is not there.
fn checked<'a>(wanted: &[usize], heads: &'a [Head]) -> Result<Vec<&'a Head>> {
    wanted
        .iter()
        .map(|&column| {
            heads
                .get(column)
                .ok_or_else(|| Fault::new(format!("there is no column {}", column + 1)))
        })
        .collect()
}

/// Runs a library on a file that may be damaged. A library that gives up by a panic
/// would take the audit of all other files with it; here it is a complaint.
#[cfg(any(feature = "parquet", feature = "hdf5"))]
fn guarded<T>(work: impl FnOnce() -> Result<T>) -> Result<T> {
    std::panic::catch_unwind(std::panic::AssertUnwindSafe(work))
        .unwrap_or_else(|_| Err(Fault::new("the file is damaged: its reader gave up")))
}

//! Long tables: one row for each time and channel, with the channel's name in one column and its
//! value in another. Their rows are put side by side and then read like those of any other text,
//! digit by digit: what stands in a cell is handed on as it was printed.
//!
//! `head` finds the columns, `look` goes through the file once for the names and the order of
//! the rows, `order` puts together what belongs to one time, and `wide` makes batches of it that
//! know the lines of the file. A [`Layout`] with a [`Long`] describes the table that comes of it:
//! the time first, then a column for each name.

mod head;
mod look;
mod order;
mod wide;

use std::collections::HashMap;
use std::sync::Arc;

use super::batch::Batch;
use super::layout::{ColumnName, Layout};
use super::open::Source;
use super::survey::Selection;
use crate::fault::{Fault, Result};

pub(super) use head::Head;
use look::Lines;
use wide::Wide;

/// Where the parts of a row stand, as a submission says it.
#[derive(Clone, Debug, PartialEq)]
pub struct LongStated {
    /// The column of the channels' names.
    pub name: ColumnName,
    /// The column of their values.
    pub value: ColumnName,
    /// The column of the time stamps, where it does not tell by its name.
    pub time: Option<ColumnName>,
}

/// How a long table is read.
#[derive(Clone, Debug, PartialEq)]
pub struct Long {
    /// The rows as they stand in the file.
    rows: Layout,
    time: usize,
    name: usize,
    value: usize,
    /// Every name that occurs, with its place; its column is the one after it.
    names: HashMap<Vec<u8>, usize>,
    order: Order,
}

/// In which order the rows stand.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Order {
    /// Those of one time together: they are read as they come.
    ByTime,
    /// One channel after the other, or anyhow: all have to be kept to put them in order.
    Scattered,
}

/// Memory for the rows of a file whose order is not that of time.
const MOST_KEPT_BYTES: usize = 256 << 20;

impl Long {
    /// Fields of a row of the file.
    pub(super) fn fields(&self) -> usize {
        self.rows.columns
    }
}

/// The complaint about numbers in columns, none of which is a name.
pub(super) fn refusal() -> Fault {
    let text = "`long` is stated, but this file holds numbers in columns and no names";
    Fault::new(text).help(
        "leave out `long` where each channel has a column of its own, or write the rows as text",
    )
}

impl Source {
    /// The layout of a long table whose columns are found.
    ///
    /// # Errors
    /// A file that cannot be read, or more names than columns are read.
    pub(super) fn long_layout(&self, head: Head) -> Result<Layout> {
        let Head {
            rows,
            time,
            name,
            value,
            units: (time_unit, value_unit),
        } = head;
        let mut long = Long {
            rows,
            time,
            name,
            value,
            names: HashMap::new(),
            order: Order::ByTime,
        };
        let seen = look::look(&long, &mut Lines::new(self.pieces(&long.rows)?, &long.rows))?;
        let header = long.rows.names.as_ref().and_then(|names| names.get(time));
        let mut names = vec![header.map_or("t", String::as_str).to_owned()];
        names.extend(seen.names);
        let any_unit = !time_unit.is_empty() || !value_unit.is_empty();
        let units = any_unit.then(|| {
            let values = std::iter::repeat_n(value_unit, names.len() - 1);
            std::iter::once(time_unit).chain(values).collect()
        });
        (long.names, long.order) = (seen.places, seen.order);
        Ok(Layout {
            columns: names.len(),
            names: Some(names),
            units,
            last_is_empty: false,
            long: Some(Arc::new(long.clone())),
            ..long.rows
        })
    }

    /// Batches of the rows side by side, as long as `each` wants more; true where the text ended
    /// before that.
    ///
    /// # Errors
    /// A file that cannot be read, or rows in no order that are too many to be kept.
    pub(super) fn long_batches(
        &self,
        long: &Long,
        of: &Selection,
        each: &mut dyn FnMut(Batch, usize) -> Result<bool>,
    ) -> Result<bool> {
        let mut lines = Lines::new(self.pieces(&long.rows)?, &long.rows);
        let mut wide = Wide::new(long, of, each);
        match long.order {
            Order::ByTime => order::by_time(long, &mut lines, &mut wide),
            Order::Scattered => order::scattered(long, &mut lines, &mut wide, MOST_KEPT_BYTES),
        }
    }
}

#[cfg(test)]
mod tests;

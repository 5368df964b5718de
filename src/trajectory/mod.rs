//! Trajectory files: bytes to rows of a time stamp and channel values, with what the
//! printed digits can resolve and what is wrong with the file.
//!
//! A file is gone through twice. The first pass ([`Survey`]) finds the layout, the
//! pattern of the digits and the grid of the time stamps, which need every row; the
//! second ([`Survey::rows`]) hands out the rows one by one, so that memory does not
//! grow with their number. A reader knows no case; `open` is the only place with
//! I/O, everything else takes bytes.

pub mod columns;
mod finding;
mod grid;
mod layout;
mod lines;
mod number;
mod open;
pub mod packed;
mod resolution;
mod rows;
mod survey;

pub use finding::{Finding, Findings, Kind};
pub use grid::Grid;
pub use layout::{Layout, Separator, Stated, is_time_name};
pub use lines::{Lines, MOST_LINE_BYTES};
pub use number::{Field, Printed};
pub use open::{Source, open};
pub use resolution::Resolution;
pub use rows::Row;
pub use survey::{Selection, Survey};

/// Most columns of a file.
pub const MOST_COLUMNS: usize = 4096;

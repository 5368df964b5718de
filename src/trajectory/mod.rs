//! Trajectory files: bytes to rows of a time stamp and channel values, with what the
//! printed digits can resolve and what is wrong with the file.
//!
//! A file is gone through twice. The first pass ([`Survey`]) finds the layout, the
//! pattern of the digits and the grid of the time stamps, which need every row; the
//! second ([`Survey::rows`]) hands out the rows one by one, so that memory does not
//! grow with their number. A reader knows no case; `open` is the only place with
//! I/O, everything else takes bytes.

mod batch;
mod finding;
mod grid;
mod layout;
mod number;
mod open;
mod pieces;
mod resolution;
mod rows;
mod sample;
mod scan;
mod stream;
mod survey;

pub(crate) use batch::Batch;
pub use finding::{Finding, Findings, Kind};
pub use grid::Grid;
pub use layout::{Layout, Separator, Stated, is_time_name};
pub use number::{Field, Printed};
pub use open::{Source, open};
pub use pieces::MOST_LINE_BYTES;
pub use resolution::Resolution;
pub(crate) use resolution::half_ulp;
pub use rows::Row;
pub(crate) use rows::{IsEvent, Order};
pub(crate) use sample::Sample;
pub use stream::Crew;
pub(crate) use stream::Stages;
pub(crate) use survey::Surveyor;
pub use survey::{Selection, Survey};

/// Most columns of a file.
pub const MOST_COLUMNS: usize = 4096;

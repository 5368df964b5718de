//! Trajectory files: bytes to rows of a time stamp and channel values, with what the
//! printed digits can resolve and what is wrong with the file.
//!
//! Text is cut into pieces of whole lines, which are parsed to batches of rows apart from each
//! other. What needs every row — the layout's digits, the grid of the stamps — is gathered batch
//! by batch ([`Survey`]); what is wrong between rows is looked for in their order
//! ([`Survey::rows`]). Memory does not grow with the file. A reader knows no case; `open` is the
//! place that looks at files, everything else takes bytes. Packed text ([`packed`]) goes the same
//! way, long tables ([`Long`]) put
//! their rows side by side before; files of numbers in columns ([`columns`]) come as batches from the start (`tables`).

mod batch;
mod budget;
pub mod columns;
mod finding;
mod grid;
mod layout;
mod long;
mod number;
mod open;
pub mod packed;
mod pieces;
mod resolution;
mod rows;
mod sample;
mod scan;
mod stream;
mod survey;
mod tables;

pub(crate) use batch::Batch;
pub use finding::{Finding, Findings, Kind};
pub use grid::Grid;
pub(crate) use grid::{LEAST_SHARE, LONG_PHASE};
pub use layout::{ColumnName, Layout, Separator, Stated, is_time_name};
pub(crate) use layout::{bare_unit, unit_in_brackets};
pub use long::{Long, LongStated};
pub use number::{Field, Printed};
pub use open::{Source, open};
pub use pieces::MOST_LINE_BYTES;
pub use resolution::Resolution;
pub(crate) use resolution::{Neighbours, half_ulp};
pub use rows::Row;
pub(crate) use rows::{IsEvent, Order};
pub(crate) use sample::Sample;
pub use stream::Crew;
pub(crate) use stream::Stages;
pub(crate) use survey::Surveyor;
pub use survey::{Selection, Survey};

/// Most columns of a file.
pub const MOST_COLUMNS: usize = 4096;

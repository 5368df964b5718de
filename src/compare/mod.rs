//! What a file has written against what is exact: errors, coverage of the window, and
//! the order that a ladder of runs shows.
//!
//! Nothing is judged here; [`crate::judge`] does that with the numbers found.

mod convergence;
mod deviation;
mod order;

pub use convergence::{Convergence, grid_convergence};
pub use deviation::{Compared, Comparison, Deviation, Limit, Margin};
pub use order::{Pair, Rung, Sight, observe};

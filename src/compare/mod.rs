//! What a file has written against what is exact: errors, coverage of the window, and
//! the order that a ladder of runs shows.
//!
//! Nothing is judged here; [`crate::judge`] does that with the numbers found.

mod chunk;
mod convergence;
mod coverage;
mod deviation;
mod group;
mod margin;
mod order;
mod stage;
mod stride;
mod sums;
mod trace;

pub use convergence::{Convergence, grid_convergence, order_of_three};
pub use deviation::{Compared, Comparison, Kept, KeptValue};
pub use margin::{Deviation, Limit, Margin, Spot};
pub use order::{Pair, Rung, Sight, agreeing, observe};
pub use trace::Traced;

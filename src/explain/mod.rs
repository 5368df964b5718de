//! What to say of a result: one sentence for each thing that decides, with what to
//! change where that is known.

mod reasons;

pub use reasons::{Place, fatal_finding, limit_broken, limit_hidden, order_reason, without_values};

//! stepgauge
#![allow(missing_docs)]
pub mod case;
pub mod exact;
pub mod fault;
pub mod formula;
pub mod number;
pub mod submission;
pub mod trajectory;
pub use case::Library;

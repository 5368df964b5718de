//! stepgauge
#![allow(missing_docs)]
pub mod audit;
pub mod case;
pub mod cli;
pub mod compare;
pub mod exact;
pub mod explain;
pub mod fault;
pub mod formula;
pub mod judge;
pub mod method;
pub mod number;
pub mod outcome;
pub mod report;
pub mod submission;
pub mod trajectory;
pub use case::Library;

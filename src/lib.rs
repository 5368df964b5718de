//! stepgauge
#![allow(missing_docs)]
pub mod case;
pub mod fault;
pub mod formula;
pub mod number;

//! stepgauge
#![allow(missing_docs)]
pub mod number;

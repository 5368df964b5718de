//! Numbers wider than `f64`, small dense matrices of them, and the matrix
//! exponential with an error bound.
//!
//! Nothing here knows of cases or files. [`Double`] carries every exact value;
//! [`Quad`] is the second precision that serves where a bound computed in
//! [`Double`] is not good enough. Sources: `[dekker-1971]`, `[hida-li-bailey-2001]`,
//! `[higham-2005]` in [`crate::references`].

mod closed;
mod conversion;
mod decimal;
mod double;
mod elementary;
mod expm;
mod matrix;
mod modes;
mod quad;
mod real;
mod short;
mod sparse;

pub use closed::{closed_form, fraction};
pub use conversion::Conversion;
pub use decimal::Decimal;
pub(crate) use decimal::EXACT_POWERS;
pub use double::Double;
pub use expm::{Expansion, Flow, Nearby, Propagator, Step};
pub use matrix::{Matrix, dot};
pub use modes::approx_eigenvalues;
pub(crate) use modes::schur_turns;
pub use quad::Quad;
pub use real::Real;
pub use short::{beside, counted, measured, plain, short};

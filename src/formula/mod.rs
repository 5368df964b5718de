//! The arithmetic of case files: text to a short program, the program to a number.
//!
//! [`Formula::parse`] resolves names while it reads, so that every complaint has its
//! place in the text; [`Formula::evaluate`] runs over any [`Scalar`]: `f64`,
//! [`Double`](crate::number::Double) or [`Affine`], the form in which a rate has to be.
//! Neither recurses, so no input can exhaust the stack.

mod affine;
mod eval;
mod parse;

pub use affine::Affine;
pub use eval::{Obstacle, Scalar};
pub use parse::{Formula, Function, MOST_CHARACTERS, MOST_NESTING};

/// Names that a formula knows and that no parameter or channel may take.
pub fn is_reserved(name: &str) -> bool {
    name == "t" || name == "pi" || Function::find(name).is_some()
}

/// True for a letter or underscore followed by letters, digits and underscores.
pub fn is_name(name: &str) -> bool {
    let mut characters = name.chars();
    characters
        .next()
        .is_some_and(|c| c.is_ascii_alphabetic() || c == '_')
        && characters.all(|c| c.is_ascii_alphanumeric() || c == '_')
}

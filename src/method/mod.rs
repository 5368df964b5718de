//! Integration methods: what is known of each, and later what it would have written.

mod catalogue;

pub use catalogue::{METHODS, Method, find};

//! The command line: what was typed, what will be done, and the doing.

mod args;
mod drive;
mod facts;
mod methods;
mod plan;
mod run;
mod steps;

pub use args::Arguments;
pub use run::run;

//! The command line: what was typed, what will be done, and the doing.

mod args;
mod draft;
mod drive;
mod earlier;
mod facts;
mod manual;
mod methods;
mod parts;
mod plan;
mod reports;
mod required;
mod reviewer;
mod run;
mod steps;
mod watched;

pub use args::Arguments;
pub use run::run;

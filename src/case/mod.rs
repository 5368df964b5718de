//! Cases: linear models with numbers, inputs, a window of time and, where there is
//! one, a closed form.
//!
//! `schema` is the shape of the TOML file and nothing else, `check` turns it into a
//! [`Case`] or into complaints with places, `library` holds what is compiled in. A
//! case knows nothing of files of trajectories; its solution is in [`crate::exact`].

mod check;
mod input;
mod library;
mod schema;

use std::collections::BTreeMap;

use crate::fault::Fault;
use crate::formula::{Affine, Formula};
use crate::number::Double;

pub use input::{Input, Shape};
pub use library::{Library, MOST_CASE_BYTES, built_in};

/// Most states of one case.
pub const MOST_STATES: usize = 64;
/// Most inputs of one case.
pub const MOST_INPUTS: usize = 32;
/// Most parameters of one case, and most outputs.
pub const MOST_NAMES: usize = 512;

/// Numbers that replace parameters of a case, by name.
pub type Replacements = BTreeMap<String, f64>;

/// A linear model `x' = A x + B u + constant` with everything that a simulator needs
/// to run it.
#[derive(Clone, Debug)]
pub struct Case {
    /// `field/slug`.
    pub name: String,
    /// One line.
    pub title: String,
    /// The field it comes from, the first part of the name.
    pub field: String,
    /// What the model is, in a sentence or two.
    pub about: String,
    /// The published source, or that it is ours.
    pub source: String,
    /// What makes it hard for an integrator.
    pub hard_for: Vec<String>,
    /// In the order of the file.
    pub parameters: Vec<Parameter>,
    /// The window of time.
    pub time: Window,
    /// In the order of the file.
    pub states: Vec<State>,
    /// In the order of the file.
    pub inputs: Vec<Input>,
    /// In the order of the file.
    pub outputs: Vec<Output>,
    /// Limits that apply where a submission sets none.
    pub limits: Limits,
    /// The closed form of every state, over the parameters followed by `t`.
    pub closed_form: Option<Vec<Formula>>,
    /// Parameters that were replaced.
    pub replaced: Vec<String>,
}

/// A named number.
#[derive(Clone, Debug)]
pub struct Parameter {
    /// As used in formulas.
    pub name: String,
    /// In its unit.
    pub value: Double,
    /// As written in the case.
    pub unit: String,
}

/// The time that a trajectory has to cover.
#[derive(Clone, Debug)]
pub struct Window {
    /// Unit of all times and rates of the case.
    pub unit: String,
    /// Start.
    pub from: Double,
    /// End.
    pub to: Double,
    /// Fewest rows that a run may have.
    pub least_rows: u64,
}

/// One state.
#[derive(Clone, Debug)]
pub struct State {
    /// As used in formulas and matched with columns.
    pub name: String,
    /// As written in the case.
    pub unit: String,
    /// Value at the start of the window.
    pub start: Double,
    /// Rate of change: coefficients over the states followed by the inputs.
    pub rate: Affine,
    /// The rate as written.
    pub rate_text: String,
    /// The closed form as written.
    pub exact_text: Option<String>,
}

/// One output.
#[derive(Clone, Debug)]
pub struct Output {
    /// As matched with columns.
    pub name: String,
    /// As written in the case.
    pub unit: String,
    /// Value: coefficients over the states followed by the inputs.
    pub value: Affine,
    /// The value as written.
    pub value_text: String,
}

/// The error that is allowed: `absolute + relative * |exact|`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limits {
    /// In the unit of the channel.
    pub absolute: f64,
    /// A fraction.
    pub relative: f64,
}

/// A quantity that is compared: a state or an output.
#[derive(Clone, Copy, Debug)]
pub struct Channel<'a> {
    /// Its name.
    pub name: &'a str,
    /// Its unit as written.
    pub unit: &'a str,
    /// False for an output.
    pub is_state: bool,
}

impl Case {
    /// Reads a case from the text of its file; its name is `field/slug`, the slug
    /// being the name of the file without `.toml`.
    ///
    /// # Errors
    /// All complaints about the file, in the order of their places.
    pub fn parse(slug: &str, text: &str, replace: &Replacements) -> Result<Case, Vec<Fault>> {
        check::check(slug, text, replace)
    }

    /// States, then outputs.
    pub fn channels(&self) -> Vec<Channel<'_>> {
        let states = self
            .states
            .iter()
            .map(|s| (s.name.as_str(), s.unit.as_str(), true));
        let outputs = self
            .outputs
            .iter()
            .map(|o| (o.name.as_str(), o.unit.as_str(), false));
        states
            .chain(outputs)
            .map(|(name, unit, is_state)| Channel {
                name,
                unit,
                is_state,
            })
            .collect()
    }
}

//! Submissions: what a producer hands in, where it lies, and which column of a file
//! is which channel in which unit.
//!
//! A submission comes from outside. It is data and nothing in it is run; its files
//! have to lie in its own folder.

mod akin;
mod columns;
mod find;
mod links;
mod rules;
mod schema;
mod terms;
mod units;

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::sync::Arc;

use crate::case::Replacements;
use crate::fault::{Fault, Result};
use crate::trajectory::{Source, Stated, open};

pub use crate::trajectory::ColumnName;
pub use akin::akin;
pub use columns::{Column, Matched, match_columns, name_and_unit};
pub use find::{Discovered, Found, MOST_DEPTH, Place, confined, discover};
pub use rules::{MOST_RULES_BYTES, Purpose, Requirement, Rules};
pub use schema::{MOST_RUNS, MOST_SUBMISSION_BYTES};
pub use terms::Terms;
pub use units::convert;

/// What a producer hands in, with defaults filled.
#[derive(Clone, Debug, Default)]
pub struct Submission {
    /// The case, if one is named.
    pub case: Option<String>,
    /// Who wrote the files.
    pub producer: Option<String>,
    /// What the audit should find.
    pub expect: Expect,
    /// Parameters of the case that are replaced.
    pub parameters: Replacements,
    /// What the producer states of its method.
    pub claims: Claims,
    /// Limits that replace those of the case.
    pub limits: LimitsStated,
    /// Columns by channel; the time stamps under `time`.
    pub columns: BTreeMap<String, ColumnStated>,
    /// The layout as far as stated.
    pub layout: Stated,
    /// The files.
    pub runs: Vec<Run>,
    /// Lines and columns of keys that can prove wrong only later, as `case` or
    /// `parameters.R`.
    pub places: BTreeMap<String, (u64, u64)>,
}

impl Submission {
    /// A complaint with the place of a key, if the submission was read from a file.
    pub fn at_key(&self, fault: Fault, key: &str) -> Fault {
        match self.places.get(key) {
            Some(&(line, column)) => fault.at(line, column),
            None => fault,
        }
    }
}

/// What the audit should find for the submission to be in order.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Expect {
    #[default]
    Pass,
    Fail,
    Undecided,
}

impl Expect {
    /// The word in submissions and reports.
    pub fn word(self) -> &'static str {
        match self {
            Expect::Pass => "pass",
            Expect::Fail => "fail",
            Expect::Undecided => "undecided",
        }
    }

    /// What is to be said of a control that turned out otherwise.
    pub fn missed(self) -> Option<&'static str> {
        match self {
            Expect::Pass => None,
            Expect::Fail => Some("was expected to fail"),
            Expect::Undecided => Some("was expected to stay undecided"),
        }
    }
}

/// What the producer states of its method.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Claims {
    /// The name of the method.
    pub method: Option<String>,
    /// Its order.
    pub order: Option<f64>,
}

/// Limits of a submission; what is not stated comes from the case.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct LimitsStated {
    /// For channels without one of their own.
    pub general: LimitStated,
    /// By channel.
    pub channels: BTreeMap<String, LimitStated>,
    /// How far the observed order may stay below the claimed one.
    pub order_slack: Option<f64>,
}

/// One limit as far as stated.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct LimitStated {
    /// In the unit of the channel.
    pub absolute: Option<f64>,
    /// A fraction.
    pub relative: Option<f64>,
    /// True where the relative part is a fraction of the peak.
    pub of_peak: Option<bool>,
}

/// Where a channel is found in a file.
#[derive(Clone, Debug, PartialEq)]
pub struct ColumnStated {
    /// The column, if stated.
    pub column: Option<ColumnName>,
    /// Its unit, if it is not the one of the case.
    pub unit: Option<String>,
    /// Line and column where that is stated, in a file.
    pub place: Option<(u64, u64)>,
}

/// One file of a submission.
#[derive(Clone, Debug)]
pub struct Run {
    /// As written in the submission.
    pub file: String,
    /// Where it lies, after it was checked to lie within the folder.
    pub path: PathBuf,
    /// Where its rungs come from.
    pub setting: Setting,
    /// What the run cost, in a unit of the submitter's own: evaluations, seconds.
    pub cost: Option<f64>,
    /// Result or rung, if stated.
    pub role: Option<Role>,
    /// What would be read at the path, where it is in memory.
    pub text: Option<Arc<str>>,
}

impl Run {
    /// The rows, wherever they are.
    ///
    /// # Errors
    /// A file that is not there, or is no plain file.
    pub fn open(&self) -> Result<Source> {
        match &self.text {
            Some(text) => Ok(Source::memory(text.as_bytes().to_vec())),
            None => open(&self.path),
        }
    }
}

/// What sets a run apart from the others of its ladder.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Setting {
    /// The step, in the time unit of the case.
    Step(f64),
    /// The error setting of an adaptive code.
    Tolerance(f64),
    /// Not stated: the spacing of the rows is the step.
    Unstated,
}

impl Setting {
    /// The step, where one is stated.
    pub fn step(self) -> Option<f64> {
        match self {
            Setting::Step(step) => Some(step),
            Setting::Tolerance(_) | Setting::Unstated => None,
        }
    }
}

/// What a run is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Role {
    /// Limits apply to it.
    Result,
    /// It serves the order.
    Rung,
}

impl Role {
    /// The word in submissions and reports.
    pub fn word(self) -> &'static str {
        match self {
            Role::Result => "result",
            Role::Rung => "rung",
        }
    }
}

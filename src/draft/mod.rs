//! From trajectory files to what a first `submission.toml` can say: the time stamps, the
//! likely case, columns, units, steps, and where each of them is a guess.
//!
//! `look` reads files, `clock` lays their stamps to the window of a case, `names` and `fit`
//! say how a column goes with a channel, `assign` gives columns to channels, `rank` puts
//! cases in order, `conclude` compares the most likely ones row by row as an audit does.
//! Nothing is written here: the texts are in [`crate::report`].

mod assign;
mod clock;
mod conclude;
mod fit;
mod look;
mod names;
mod rank;

use std::path::PathBuf;

use crate::case::{Case, Library, Replacements};
use crate::exact::Exact;
use crate::fault::Fault;
use crate::outcome::{Drafted, StatedCase};

/// What is to be looked at.
#[derive(Debug)]
pub struct Question<'a> {
    /// The cases at hand.
    pub library: &'a Library,
    /// The case, where the user knows it.
    pub case: Option<&'a str>,
    /// The files of one submission: as they will be named in it, and where they lie.
    pub files: Vec<(String, PathBuf)>,
}

/// A case with its solution.
struct Model {
    case: Case,
    exact: Exact,
}

/// Looks at the files and the cases.
///
/// # Errors
/// Files that cannot be read or whose columns differ, a case that is not there.
pub fn draft(question: &Question) -> Result<Drafted, Vec<Fault>> {
    let files = look::look(&question.files)?;
    let named: Vec<&str> = match question.case {
        Some(name) => vec![name],
        None => question.library.names().collect(),
    };
    let mut cases = Vec::new();
    for name in named {
        cases.push(question.library.load(name, &Replacements::new())?);
    }
    let stated = question.case.and_then(|_| cases.first()).map(stated_case);
    let cases_tried = cases.len();
    let finest = look::finest(&files);
    let (likely, no_window) = rank::rank(cases, finest, question.case.is_some());
    let (candidates, runs) = conclude::conclude(&likely, &files)?;
    Ok(Drafted {
        runs,
        columns: finest.column_names(),
        rivals: rank::rivals(&likely),
        candidates,
        cases_tried,
        stated,
        no_window,
    })
}

fn stated_case(case: &Case) -> StatedCase {
    let states = case.states.iter();
    StatedCase {
        name: case.name.clone(),
        states: states
            .map(|state| (state.name.clone(), state.unit.clone()))
            .collect(),
    }
}

//! The shape of `submission.toml`. Unknown keys are refused; places are kept, so that
//! a complaint can point at the line.

use std::collections::BTreeMap;
use std::path::Path;

use toml::Spanned;

use super::terms::{ClaimsEntry, ColumnEntry, LayoutEntry, LimitEntry};
use super::{Expect, Role, Run, Setting, Submission, confined};
use crate::fault::{Fault, in_plain_words, quoted};

/// Largest `submission.toml` that is read.
pub const MOST_SUBMISSION_BYTES: u64 = 1 << 20;
/// Most keys of one table.
const MOST_KEYS: usize = 600;
/// Most runs of one submission.
pub const MOST_RUNS: usize = 1000;

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct SubmissionFile {
    case: Option<Spanned<String>>,
    producer: Option<String>,
    expect: Option<Spanned<String>>,
    #[serde(default)]
    parameters: BTreeMap<Spanned<String>, Spanned<f64>>,
    claims: Option<ClaimsEntry>,
    #[serde(default)]
    limits: BTreeMap<Spanned<String>, Spanned<LimitEntry>>,
    #[serde(default)]
    columns: BTreeMap<Spanned<String>, ColumnEntry>,
    layout: Option<LayoutEntry>,
    #[serde(default)]
    runs: Vec<Spanned<RunEntry>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct RunEntry {
    file: Spanned<String>,
    step: Option<Spanned<f64>>,
    tolerance: Option<Spanned<f64>>,
    cost: Option<Spanned<f64>>,
    role: Option<Spanned<String>>,
}

/// Collects complaints about one file.
pub(super) struct Reader<'a> {
    text: &'a str,
    folder: &'a Path,
    faults: Vec<Fault>,
}

impl Submission {
    /// Reads a submission that lies in `folder`.
    ///
    /// # Errors
    /// All complaints about the file, in order of their places.
    pub fn parse(text: &str, folder: &Path) -> Result<Submission, Vec<Fault>> {
        let file: SubmissionFile = toml::from_str(text).map_err(|error| {
            let offset = error.span().map_or(0, |span| span.start);
            vec![Fault::new(in_plain_words(error.message())).at_offset(text, offset)]
        })?;
        let mut reader = Reader::new(text, folder);
        let submission = reader.read(file);
        reader.conclude(submission)
    }
}

impl<'a> Reader<'a> {
    pub fn new(text: &'a str, folder: &'a Path) -> Reader<'a> {
        Reader {
            text,
            folder,
            faults: Vec::new(),
        }
    }
}

impl Reader<'_> {
    /// What was read, or the complaints in order of their places.
    pub fn conclude<T>(mut self, read: T) -> Result<T, Vec<Fault>> {
        if self.faults.is_empty() {
            return Ok(read);
        }
        self.faults.sort_by_key(|fault| (fault.line, fault.column));
        Err(self.faults)
    }

    pub fn complain(&mut self, text: impl Into<String>, offset: usize) {
        self.complain_of(Fault::new(text), offset);
    }

    pub fn complain_of(&mut self, fault: Fault, offset: usize) {
        self.faults.push(fault.at_offset(self.text, offset));
    }

    fn read(&mut self, file: SubmissionFile) -> Submission {
        for (what, count) in [
            ("parameters", file.parameters.len()),
            ("limits", file.limits.len()),
            ("columns", file.columns.len()),
        ] {
            if count > MOST_KEYS {
                let text = format!("[{what}] has {count} keys, at most {MOST_KEYS} are read");
                self.faults.push(Fault::new(text));
                return Submission::default();
            }
        }
        let expect = self.one_of(
            file.expect,
            "expect",
            &[
                ("pass", Expect::Pass),
                ("fail", Expect::Fail),
                ("undecided", Expect::Undecided),
            ],
        );
        let mut places = BTreeMap::new();
        let mut parameters = BTreeMap::new();
        for (name, value) in file.parameters {
            if !value.get_ref().is_finite() {
                self.complain("this is not a finite number", value.span().start);
            }
            places.insert(format!("parameters.{}", name.get_ref()), self.place(&name));
            parameters.insert(name.into_inner(), value.into_inner());
        }
        let terms = self.terms(file.claims, file.limits, file.columns, file.layout);
        places.extend(terms.places);
        let case = file.case.map(|case| {
            places.insert("case".to_owned(), self.place(&case));
            case.into_inner()
        });
        if file.runs.is_empty() {
            let fault = Fault::new("the submission has no runs");
            self.faults
                .push(fault.help("add `[[runs]]` with `file = \"...\"`"));
        }
        if file.runs.len() > MOST_RUNS {
            self.faults
                .push(Fault::new(format!("at most {MOST_RUNS} runs are read")));
            return Submission::default();
        }
        let runs: Vec<Run> = file
            .runs
            .into_iter()
            .filter_map(|run| self.run(run))
            .collect();
        self.refuse_twins(&runs);
        Submission {
            case,
            producer: file.producer,
            expect: expect.unwrap_or_default(),
            parameters,
            claims: terms.claims,
            limits: terms.limits,
            columns: terms.columns,
            layout: terms.layout,
            runs,
            places,
        }
    }

    pub fn place<T>(&self, key: &Spanned<T>) -> (u64, u64) {
        let placed = Fault::new("").at_offset(self.text, key.span().start);
        (placed.line.unwrap_or(1), placed.column.unwrap_or(1))
    }

    /// The same file under two steps would show any order.
    fn refuse_twins(&mut self, runs: &[Run]) {
        let mut seen = std::collections::BTreeSet::new();
        for run in runs {
            let path = run.path.canonicalize().unwrap_or_else(|_| run.path.clone());
            if !seen.insert(path) {
                self.faults.push(Fault::new(format!(
                    "file {} is named twice",
                    quoted(&run.file)
                )));
            }
        }
    }

    /// A word out of a short list.
    pub fn one_of<T: Copy>(
        &mut self,
        word: Option<Spanned<String>>,
        key: &str,
        known: &[(&str, T)],
    ) -> Option<T> {
        let word = word?;
        let found = known.iter().find(|(name, _)| name == word.get_ref());
        if found.is_none() {
            let names: Vec<String> = known
                .iter()
                .map(|(name, _)| format!("\"{name}\""))
                .collect();
            let text = format!(
                "`{key}` is {}, expected {}",
                quoted(word.get_ref()),
                names.join(" or ")
            );
            self.complain(text, word.span().start);
        }
        found.map(|&(_, value)| value)
    }

    fn run(&mut self, entry: Spanned<RunEntry>) -> Option<Run> {
        let offset = entry.span().start;
        let entry = entry.into_inner();
        for value in [&entry.step, &entry.tolerance, &entry.cost]
            .into_iter()
            .flatten()
        {
            if !(*value.get_ref() > 0.0 && value.get_ref().is_finite()) {
                let text = "`step`, `tolerance` and `cost` must be finite and above zero";
                self.complain(text, value.span().start);
            }
        }
        let number = |value: Option<Spanned<f64>>| value.map(Spanned::into_inner);
        let cost = number(entry.cost);
        let setting = match (number(entry.step), number(entry.tolerance)) {
            (Some(_), Some(_)) => {
                self.complain("a run has either `step` or `tolerance`, not both", offset);
                Setting::Unstated
            }
            (Some(step), None) => Setting::Step(step),
            (None, Some(tolerance)) => Setting::Tolerance(tolerance),
            (None, None) => Setting::Unstated,
        };
        let roles = [("result", Role::Result), ("rung", Role::Rung)];
        let role = self.one_of(entry.role, "role", &roles);
        let file = entry.file.get_ref().clone();
        match confined(self.folder, &file) {
            Ok(path) => Some(Run {
                file,
                path,
                setting,
                cost,
                role,
                text: None,
            }),
            Err(fault) => {
                self.faults
                    .push(fault.at_offset(self.text, entry.file.span().start));
                None
            }
        }
    }
}

#[cfg(test)]
mod tests;

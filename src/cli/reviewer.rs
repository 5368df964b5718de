//! A reviewer's rules: from the files of `--limits` and `--require`, checked against the cases
//! and methods there are, into the submissions of a plan, and beside what was found in them.

use std::io::Read;
use std::path::{Path, PathBuf};

use super::args::{AuditArguments, Whether};
use crate::audit::{Planned, required};
use crate::case::{Case, Library, Replacements};
use crate::fault::{Fault, nearest, quoted};
use crate::method::{METHODS, find_all};
use crate::number::plain;
use crate::outcome::{LimitsFrom, Outcome, Required, Review};
use crate::parts::terms;
use crate::submission::{Expect, LimitsStated, MOST_RULES_BYTES, Purpose, Rules};

/// Somebody who accepts or refuses what others hand in.
#[derive(Debug, Default)]
pub(super) struct Reviewer {
    rules: Rules,
    /// True where limits that submissions state for themselves do not count.
    own_limits_only: bool,
    /// Folders of submissions, by their true paths.
    handed_in: Vec<PathBuf>,
    /// What reports tell; `None` where nothing is laid down.
    review: Option<Review>,
    /// Digest of what the file of `--require` lays down for each submission, if it is named.
    terms: Option<String>,
}

impl Reviewer {
    /// Reads the rules, if any are named.
    ///
    /// # Errors
    /// Files that cannot be read, all that is wrong with them, limits in both of them.
    pub(super) fn read(
        arguments: &AuditArguments,
        library: &Library,
    ) -> Result<Reviewer, Vec<Fault>> {
        let asked = &arguments.review;
        let handed_in = arguments.paths.iter().filter(|path| path.is_dir());
        let mut reviewer = Reviewer {
            own_limits_only: asked.limits.is_some() || asked.require.is_some(),
            handed_in: handed_in
                .filter_map(|path| path.canonicalize().ok())
                .collect(),
            ..Reviewer::default()
        };
        let mut faults = Vec::new();
        let mut read = |path: &Option<PathBuf>, purpose| {
            let rules = rules(path.as_deref()?, purpose, library);
            rules.map_err(|found| faults.extend(found)).ok()
        };
        let limits = read(&asked.limits, Purpose::Limits);
        let rules = read(&asked.require, Purpose::Everything);
        if !faults.is_empty() {
            return Err(faults);
        }
        reviewer.terms = rules.as_ref().map(terms);
        reviewer.rules = rules.unwrap_or_default();
        if let (Some(limits), Some(file)) = (limits, &asked.limits) {
            if reviewer.rules.limits.is_some() || !reviewer.rules.case_limits.is_empty() {
                let text = "states limits beside `--require`, whose file has limits too";
                let fault = Fault::new(text).help("keep them in one of the two files");
                return Err(vec![fault.in_file(file)]);
            }
            reviewer.rules.limits = limits.limits;
            reviewer.rules.case_limits = limits.case_limits;
        }
        let refuses = |whether| whether == Whether::Refuse;
        let stated = asked.own_parameters.map(refuses);
        // What was typed goes before what a file says.
        reviewer.rules.refuses_own_parameters = stated.or(reviewer.rules.refuses_own_parameters);
        let any = reviewer.own_limits_only || stated.is_some();
        let shown = |path: &PathBuf| path.to_string_lossy().into_owned();
        reviewer.review = any.then(|| Review {
            limits: asked.limits.as_ref().map(shown),
            require: asked.require.as_ref().map(shown),
            refuses_own_parameters: reviewer.rules.refuses_own_parameters == Some(true),
            refuses_own_cases: reviewer.rules.refuses_own_cases,
            refuses_controls: reviewer.rules.refuses_controls,
            required: Vec::new(),
        });
        Ok(reviewer)
    }

    /// The one whose rules joined parts are held against.
    ///
    /// # Errors
    /// A file that cannot be read, all that is wrong with it.
    pub(super) fn of_parts(path: &Path, library: &Library) -> Result<Reviewer, Vec<Fault>> {
        let rules = rules(path, Purpose::Everything, library)?;
        Ok(Reviewer {
            terms: Some(terms(&rules)),
            rules,
            ..Reviewer::default()
        })
    }

    /// Digest of what the file of `--require` lays down for each submission, if it is named.
    pub(super) fn terms(&self) -> Option<&str> {
        self.terms.as_deref()
    }

    /// Lays the rules down for one submission.
    pub(super) fn review(&self, planned: &mut Planned, library: &Library) {
        self.limits(planned);
        // What has no submission.toml was put together by whoever typed the command.
        if planned.file.is_none() {
            return;
        }
        let submission = &mut planned.submission;
        let reviewed = &mut planned.reviewed;
        if self.rules.refuses_controls && submission.expect != Expect::Pass {
            let word = submission.expect.word();
            reviewed.refused.push(format!(
                "it marks itself as a control by `expect = \"{word}\"`, and controls are refused"
            ));
            submission.expect = Expect::Pass;
        }
        let Some(name) = submission.case.as_deref() else {
            return;
        };
        if let Some(file) = library.file(name).filter(|file| self.is_handed_in(file)) {
            let file = file.display();
            let text = format!("case {name} is its own: it was handed in as {file}");
            match self.rules.refuses_own_cases {
                true => (reviewed.refused).push(format!("{text}, and own cases are refused")),
                false => reviewed.notes.push(text),
            }
        }
        if self.rules.refuses_own_parameters == Some(true)
            && !submission.parameters.is_empty()
            // A case that is not there is complained of elsewhere.
            && let Ok(case) = library.load(name, &Replacements::new())
        {
            let changed = changed(&case, &submission.parameters);
            reviewed.refused.extend(changed);
        }
    }

    fn limits(&self, planned: &mut Planned) {
        if !self.own_limits_only {
            return;
        }
        let submission = &mut planned.submission;
        if submission.limits != LimitsStated::default() {
            let text = "states limits of its own, which do not count here";
            planned.reviewed.notes.push(text.to_owned());
        }
        let laid_down = self.rules.limits_of(submission.case.as_deref());
        submission.limits = laid_down.cloned().unwrap_or_default();
        if submission.limits != LimitsStated::default() {
            planned.reviewed.limits_from = Some(LimitsFrom::Reviewer);
        }
    }

    fn is_handed_in(&self, file: &Path) -> bool {
        let file = file.canonicalize();
        file.is_ok_and(|file| self.handed_in.iter().any(|folder| file.starts_with(folder)))
    }

    /// Holds what was found against what has to be there; a part of it is told the rules alone.
    pub(super) fn conclude(&self, outcome: &mut Outcome) {
        let required = match outcome.part {
            Some(_) => Vec::new(),
            None => self.required(outcome),
        };
        outcome.review = self
            .review
            .clone()
            .map(|review| Review { required, ..review });
    }

    /// What came of each requirement.
    pub(super) fn required(&self, outcome: &Outcome) -> Vec<Required> {
        required(&self.rules.requirements, outcome)
    }
}

/// A sentence for each parameter that is not what the case says.
fn changed(case: &Case, own: &Replacements) -> Vec<String> {
    let differing = own.iter().filter_map(|(name, &value)| {
        let parameter = case.parameters.iter().find(|one| one.name == *name)?;
        let stated = parameter.value.to_f64();
        (stated != value).then(|| {
            format!(
                "parameter {} is {} where the case has {}, and own parameters are refused",
                quoted(name),
                plain(value),
                plain(stated)
            )
        })
    });
    differing.collect()
}

fn rules(path: &Path, purpose: Purpose, library: &Library) -> Result<Rules, Vec<Fault>> {
    let placed = |faults: Vec<Fault>| -> Vec<Fault> {
        let faults = faults.into_iter();
        faults.map(|fault| fault.in_file(path)).collect()
    };
    let text = text(path).map_err(|fault| placed(vec![fault]))?;
    let rules = Rules::parse(&text, purpose).map_err(placed)?;
    let faults = unknown(&rules, library);
    if faults.is_empty() {
        Ok(rules)
    } else {
        Err(placed(faults))
    }
}

/// The text of a small file.
pub(super) fn text(path: &Path) -> Result<String, Fault> {
    let io = |error: std::io::Error| Fault::io(path, &error);
    // A pipe would be waited on for ever.
    if !std::fs::metadata(path).map_err(io)?.is_file() {
        let fault = Fault::new("this is not a plain file");
        return Err(fault.help("name the file with the rules itself"));
    }
    let mut bytes = Vec::new();
    let file = std::fs::File::open(path).map_err(io)?;
    let mut start = file.take(MOST_RULES_BYTES + 1);
    start.read_to_end(&mut bytes).map_err(io)?;
    if bytes.len() as u64 > MOST_RULES_BYTES {
        let text = format!("has more than {MOST_RULES_BYTES} bytes");
        return Err(Fault::new(text).help("name a file of rules, not a trajectory"));
    }
    String::from_utf8(bytes)
        .map_err(|_| Fault::new("this is not UTF-8 text").help("save it as UTF-8"))
}

/// Cases, channels and methods that are not there, in order of their places.
fn unknown(rules: &Rules, library: &Library) -> Vec<Fault> {
    let at = |fault: Fault, key: &str| match rules.places.get(key) {
        Some(&(line, column)) => fault.at(line, column),
        None => fault,
    };
    let load = |name: &str| library.load(name, &Replacements::new());
    let channels = |case: &Case| -> Vec<String> {
        let channels = case.channels();
        channels.iter().map(|one| one.name.to_owned()).collect()
    };
    let mut faults: Vec<Fault> = Vec::new();
    for (name, limits) in &rules.case_limits {
        let key = format!("case_limits.{name}");
        match load(name) {
            Ok(case) => {
                let known = channels(&case);
                let lacks = format!("case {} has no", quoted(name));
                let unknown = unknown_channels(limits, &known, &lacks);
                faults.extend(unknown.map(|(name, fault)| at(fault, &format!("{key}.{name}"))));
            }
            Err(found) => faults.extend(found.into_iter().map(|fault| at(fault, &key))),
        }
    }
    if let Some(limits) = rules
        .limits
        .as_ref()
        .filter(|limits| !limits.channels.is_empty())
    {
        // Not those that happen to be handed in: a slip is one whatever they are.
        let cases = library.names().filter_map(|name| load(name).ok());
        let known: Vec<String> = cases.flat_map(|case| channels(&case)).collect();
        let unknown = unknown_channels(limits, &known, "no case has a");
        faults.extend(unknown.map(|(name, fault)| at(fault, &format!("limits.{name}"))));
    }
    for (index, requirement) in rules.requirements.iter().enumerate() {
        let key = format!("require.{index}");
        if let Err(found) = load(&requirement.case) {
            faults.extend(found.into_iter().map(|fault| at(fault, &key)));
        }
        for (number, name) in requirement.methods.iter().enumerate() {
            if find_all(name).is_empty() {
                faults.push(at(unknown_method(name), &format!("{key}.{number}")));
            }
        }
    }
    faults.sort_by_key(|fault| (fault.line, fault.column));
    faults
}

fn unknown_channels<'a>(
    limits: &'a LimitsStated,
    known: &'a [String],
    lacks: &'a str,
) -> impl Iterator<Item = (&'a String, Fault)> {
    let unknown = limits.channels.keys().filter(|name| !known.contains(name));
    unknown.map(move |name| {
        let fault = Fault::new(format!("{lacks} channel {} to limit", quoted(name)));
        let near = nearest(name, known.iter().map(String::as_str));
        let help = match near {
            Some(near) => format!("did you mean `{near}`?"),
            None => "`stepgauge case NAME` shows the channels of a case".to_owned(),
        };
        (name, fault.help(help))
    })
}

fn unknown_method(name: &str) -> Fault {
    let names = METHODS.iter();
    let names = names.flat_map(|m| std::iter::once(m.name).chain(m.aliases.iter().copied()));
    let fault = Fault::new(format!("no method is known as {}", quoted(name)));
    fault.help(match nearest(name, names) {
        Some(near) => format!("did you mean `{near}`? `stepgauge methods` lists all"),
        None => "`stepgauge methods` lists all".to_owned(),
    })
}

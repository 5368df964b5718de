//! Reports of `--write`: which kind each ending asks for, which files must not be
//! overwritten, and the reports onto the disk.

use std::collections::BTreeSet;
use std::io::{BufRead, BufReader, Read};
use std::path::{Path, PathBuf};

use super::args::AuditArguments;
use super::parts::MergeArguments;
use crate::audit::Plan;
use crate::case::Library;
use crate::fault::{Fault, quoted};
use crate::outcome::Outcome;
use crate::report::{
    CSV_HEADER, audit_csv, audit_html, audit_json, audit_junit, audit_markdown, write_atomically,
};

/// What a report is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Kind {
    Json,
    Junit,
    Markdown,
    Csv,
    Html,
}

/// The one list of endings; a kind that is added here gets its line in [`bytes`].
const KINDS: [(&str, Kind); 5] = [
    ("json", Kind::Json),
    ("xml", Kind::Junit),
    ("md", Kind::Markdown),
    ("csv", Kind::Csv),
    ("html", Kind::Html),
];

/// The report of a kind.
fn bytes(kind: Kind, outcome: &Outcome) -> Result<Vec<u8>, Fault> {
    Ok(match kind {
        Kind::Json => audit_json(outcome).into_bytes(),
        Kind::Junit => audit_junit(outcome)?,
        Kind::Markdown => audit_markdown(outcome).into_bytes(),
        Kind::Csv => audit_csv(outcome)?,
        Kind::Html => audit_html(outcome).into_bytes(),
    })
}

/// A report that was asked for, and may be written.
#[derive(Clone, Debug)]
pub(super) struct Asked {
    kind: Kind,
    path: PathBuf,
}

/// Writes every report. All are made before the first one touches the disk, so that one
/// that cannot be made costs no other.
///
/// # Errors
/// A report that cannot be made or written.
pub(super) fn write(asked: &[Asked], outcome: &Outcome) -> Result<(), Fault> {
    let made = asked.iter().map(|one| {
        let bytes = bytes(one.kind, outcome).map_err(|fault| fault.in_file(&one.path))?;
        Ok((&one.path, bytes))
    });
    let made: Vec<(&PathBuf, Vec<u8>)> = made.collect::<Result<_, Fault>>()?;
    for (path, bytes) in made {
        write_atomically(path, &bytes)?;
    }
    Ok(())
}

/// Every report must be of a kind that is known, in a folder that is there, alone at its
/// place, and none may take the place of an input.
///
/// # Errors
/// Everything that is wrong with any of them; then none is written.
pub(super) fn check(reports: &[PathBuf], inputs: &Inputs) -> Result<Vec<Asked>, Vec<Fault>> {
    let mut taken: BTreeSet<PathBuf> = BTreeSet::new();
    let mut asked = Vec::new();
    let mut faults = Vec::new();
    for path in reports {
        let checked = kind(path).and_then(|kind| {
            let place = place(path)?;
            inputs.spare(path, &place, kind)?;
            if !taken.insert(place) {
                let fault = Fault::new("two reports would be written to this file");
                return Err(fault.help("give each `--write` a file of its own"));
            }
            Ok(kind)
        });
        match checked {
            Ok(kind) => asked.push(Asked {
                kind,
                path: path.clone(),
            }),
            Err(fault) => faults.push(fault.in_file(path)),
        }
    }
    if faults.is_empty() {
        Ok(asked)
    } else {
        Err(faults)
    }
}

/// The same for the report of `merge`, which is made from JSON reports and holds no more.
///
/// # Errors
/// What is wrong with it.
pub(super) fn check_merged(path: &Path, inputs: &Inputs) -> Result<(), Fault> {
    let written = kind(path).and_then(|kind| match kind {
        Kind::Json => {
            let place = place(path)?;
            let there = path.canonicalize();
            if there.is_ok_and(|there| inputs.files.contains(&there)) {
                let fault = Fault::new("this report would overwrite a file that it is made from");
                return Err(fault.help("give the report another name"));
            }
            inputs.spare(path, &place, kind)
        }
        _ => {
            let fault = Fault::new("merge writes .json reports only");
            Err(fault.help("let each part write reports of other kinds for itself"))
        }
    });
    written.map_err(|fault| fault.in_file(path))
}

/// True where one of the reports shows plots.
pub(super) fn any_plots(reports: &[PathBuf]) -> bool {
    let drawn = |path: &PathBuf| kind(path).is_ok_and(|kind| kind == Kind::Html);
    reports.iter().any(drawn)
}

fn kind(path: &Path) -> Result<Kind, Fault> {
    let ending = path.extension().unwrap_or_default().to_string_lossy();
    let ending = ending.to_lowercase();
    let known = KINDS.iter().find(|(known, _)| *known == ending);
    known.map(|(_, kind)| *kind).ok_or_else(|| {
        let text = format!("no report is known by the ending {}", quoted(&ending));
        let endings: Vec<String> = KINDS.iter().map(|(known, _)| format!(".{known}")).collect();
        let (last, others) = endings.split_last().map_or(("", &[][..]), |(l, o)| (l, o));
        Fault::new(text).help(format!("reports end in {} or {last}", others.join(", ")))
    })
}

/// Where a report will lie, whatever leads there; it need not be there yet.
fn place(path: &Path) -> Result<PathBuf, Fault> {
    let folder = path.parent().filter(|f| !f.as_os_str().is_empty());
    let folder = folder.unwrap_or(Path::new("."));
    let missing = || {
        let fault = Fault::new("the folder of this report is not there");
        fault.help("make the folder first")
    };
    if path.is_dir() {
        return Err(Fault::new("cannot be written: this is a folder"));
    }
    if !folder.is_dir() {
        return Err(missing());
    }
    let folder = folder.canonicalize().map_err(|_| missing())?;
    Ok(folder.join(path.file_name().unwrap_or_default()))
}

/// What an audit reads.
pub(super) struct Inputs {
    /// Files by their true paths.
    files: BTreeSet<PathBuf>,
    /// The report of `--against`.
    earlier: Option<PathBuf>,
    /// Folders of submissions that cannot be read: which files are theirs is not known.
    unread: Vec<PathBuf>,
}

impl Inputs {
    /// These files and nothing else.
    pub(super) fn files(paths: impl IntoIterator<Item = PathBuf>) -> Inputs {
        let paths = paths.into_iter();
        Inputs {
            files: paths.filter_map(|path| path.canonicalize().ok()).collect(),
            earlier: None,
            unread: Vec::new(),
        }
    }

    /// Reports of parts that are merged, the one that they are compared with, and the rules that
    /// they are held against.
    pub(super) fn merged(arguments: &MergeArguments, library: &Library) -> Inputs {
        let earlier = arguments.before.against.as_deref();
        let rules = arguments.require.iter().map(PathBuf::as_path);
        let beside = rules.chain(library.files()).map(Path::to_owned);
        Inputs {
            earlier: earlier.and_then(|path| path.canonicalize().ok()),
            ..Inputs::files(arguments.parts.iter().cloned().chain(beside))
        }
    }

    pub(super) fn of(arguments: &AuditArguments, plan: &Plan) -> Inputs {
        let submissions = plan.submissions.iter();
        let runs = submissions
            .clone()
            .flat_map(|planned| planned.submission.runs.iter().map(|run| &run.path));
        let described = submissions.filter_map(|planned| planned.file.as_ref());
        let unread = || {
            let faults = plan.unreadable.iter().flat_map(|one| &one.faults);
            faults.filter_map(|fault| fault.path.as_ref())
        };
        let cases = plan.library.files();
        let review = &arguments.review;
        let rules = review.limits.iter().chain(&review.require);
        let cases = cases.chain(rules.map(PathBuf::as_path));
        let files = runs.chain(described).chain(unread()).map(PathBuf::as_path);
        let folders = unread().filter_map(|file| file.parent());
        let folders = folders.map(|folder| match folder.as_os_str().is_empty() {
            true => Path::new("."),
            false => folder,
        });
        // A run that is named is an input even where it is missing.
        let true_path = |path: &Path| path.canonicalize().ok().or_else(|| place(path).ok());
        Inputs {
            files: files.chain(cases).filter_map(true_path).collect(),
            earlier: arguments.before.against.as_deref().and_then(true_path),
            unread: folders.filter_map(true_path).collect(),
        }
    }

    /// That a report leaves all of them alone.
    fn spare(&self, path: &Path, place: &Path, kind: Kind) -> Result<(), Fault> {
        let there = path.canonicalize().ok();
        let is_there = there.is_some();
        let found = there.unwrap_or_else(|| place.to_owned());
        let help = "give the report another name";
        if self.earlier.as_ref() == Some(&found) {
            let text = "this report would overwrite the one that `--against` compares with";
            return Err(Fault::new(text).help(help));
        }
        if self.files.contains(&found) {
            let text = "this report would overwrite a file that is audited";
            return Err(Fault::new(text).help(help));
        }
        let unread = is_there && self.unread.iter().any(|folder| place.starts_with(folder));
        if unread && kind == Kind::Csv && !is_own_table(path) {
            let text = "this report would overwrite a file beside a submission that cannot be \
                        read, perhaps one of its runs";
            return Err(Fault::new(text).help(help));
        }
        Ok(())
    }
}

/// True for a table that an earlier audit has written.
fn is_own_table(path: &Path) -> bool {
    let Ok(file) = std::fs::File::open(path) else {
        return false;
    };
    let own = CSV_HEADER.join(",");
    let mut line = String::new();
    let mut start = BufReader::new(file.take(own.len() as u64 + 2));
    start.read_line(&mut line).is_ok() && line.trim_end() == own
}

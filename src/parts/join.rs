//! Reports of all parts to the report that the undivided audit would have written, byte for
//! byte, or all that is wrong with them.

use std::collections::BTreeMap;
use std::path::PathBuf;

use crate::fault::{Fault, quoted};
use crate::report::{AuditReport, PartReport, Summary, WholeReport};

/// Numbers of missing parts that are listed.
const MOST_LISTED: usize = 10;

/// A report that was given, and where it lies.
#[derive(Clone, Debug)]
pub struct Given {
    /// The file.
    pub path: PathBuf,
    /// What it says.
    pub report: AuditReport,
}

/// All parts together.
#[derive(Clone, Debug)]
pub struct Joined {
    /// The report of the undivided audit, but for what `--require` looks for.
    pub report: AuditReport,
    /// What was divided.
    pub whole: WholeReport,
}

/// Joins the reports of all parts, in whatever order.
///
/// # Errors
/// Reports that are no parts, of other audits or versions, interrupted, damaged, given twice;
/// parts that are missing.
pub fn join(given: Vec<Given>) -> Result<Joined, Vec<Fault>> {
    let mut faults = Vec::new();
    let mut parts: BTreeMap<u32, (Given, PartReport)> = BTreeMap::new();
    let mut first: Option<(PathBuf, PartReport)> = None;
    for mut one in given {
        let checked = sound(&mut one.report).and_then(|part| {
            match &first {
                None => first = Some((one.path.clone(), part.clone())),
                Some((path, known)) => {
                    if let Some(what) = difference(known, &part) {
                        let shown = path.display().to_string();
                        let text = format!("belongs to another audit than {shown}: {what}");
                        let help = "audit all parts of one tree with the same arguments";
                        return Err(Fault::new(text).help(help));
                    }
                }
            }
            Ok(part)
        });
        match checked {
            Err(fault) => faults.push(fault.in_file(&one.path)),
            Ok(part) => {
                if let Some((other, _)) = parts.get(&part.number) {
                    let name = name(&part);
                    let text = format!("is {name}, as {} is", other.path.display());
                    let help = "give each part once";
                    faults.push(Fault::new(text).help(help).in_file(&one.path));
                } else {
                    parts.insert(part.number, (one, part));
                }
            }
        }
    }
    // What is refused is not missing too: one complaint for one thing.
    if !faults.is_empty() {
        return Err(faults);
    }
    let Some((_, known)) = first else {
        return Err(vec![Fault::new("no report is given")]);
    };
    if let Some(fault) = missing(&parts, known.of) {
        return Err(vec![fault]);
    }
    let report = whole(parts.into_values(), known.whole.submissions);
    Ok(Joined {
        report: report.map_err(|fault| vec![fault])?,
        whole: known.whole,
    })
}

fn name(part: &PartReport) -> String {
    format!("part {} of {}", part.number, part.of)
}

/// The part that a report is of, taken out of it.
fn sound(report: &mut AuditReport) -> Result<PartReport, Fault> {
    let own = env!("CARGO_PKG_VERSION");
    if report.stepgauge != own {
        let version = quoted(&report.stepgauge);
        let text = format!("was written by version {version}, this is {own}");
        return Err(Fault::new(text).help("audit and merge with one version of stepgauge"));
    }
    let Some(part) = report.part.take() else {
        let text = "this is the report of a whole audit, not of a part";
        return Err(Fault::new(text).help("give reports of `audit --part I/N --write FILE.json`"));
    };
    let again = format!("audit it again with `--part {}/{}`", part.number, part.of);
    if report.left > 0 {
        let text = format!("{} was interrupted, {} left", name(&part), report.left);
        return Err(Fault::new(text).help(again));
    }
    let whole = &part.whole;
    let rises = |places: &[u64]| places.is_sorted_by(|a, b| a < b);
    let (read, unread) = (&part.places, &part.places_not_audited);
    let count = |word: &str| {
        let words = report.submissions.iter().map(|one| one.verdict.as_str());
        words.filter(|verdict| *verdict == word).count()
    };
    let in_order = report.submissions.iter().all(|one| one.in_order);
    let summary = Summary {
        pass: count("pass"),
        fail: count("fail"),
        undecided: count("undecided"),
        in_order: in_order && report.not_audited.is_empty(),
    };
    let verdicts = summary.pass + summary.fail + summary.undecided;
    let complete = (1..=part.of).contains(&part.number)
        && whole.unreadable <= whole.submissions
        && read.len() == report.submissions.len()
        && unread.len() == report.not_audited.len()
        && verdicts == read.len()
        && summary == report.summary
        && rises(read)
        && read.iter().all(|place| *place >= whole.unreadable)
        && report.changes.is_none()
        && (report.review.as_ref()).is_none_or(|review| review.required.is_empty());
    if !complete {
        let text = format!("{} is damaged: its lists and counts disagree", name(&part));
        return Err(Fault::new(text).help(again));
    }
    Ok(part)
}

/// In what two parts differ that may not.
fn difference(known: &PartReport, part: &PartReport) -> Option<String> {
    if part.of != known.of {
        return Some(format!("{} parts there, {} here", known.of, part.of));
    }
    let (known, whole) = (&known.whole, &part.whole);
    let text = if whole.paths != known.paths {
        "other paths were audited"
    } else if whole.options != known.options {
        "other options were given"
    } else if whole.terms != known.terms {
        "`--require` laid down other terms"
    } else if whole.cases != known.cases {
        "the cases of `--cases` have changed"
    } else if whole.names != known.names || whole.submissions != known.submissions {
        "submissions or runs came, went or changed their names"
    } else if whole.texts != known.texts || whole.unreadable != known.unreadable {
        "a submission.toml has changed"
    } else if whole.sizes != known.sizes || whole.bytes != known.bytes {
        "a file of a run has changed its size"
    } else {
        return None;
    };
    Some(text.to_owned())
}

fn missing(parts: &BTreeMap<u32, (Given, PartReport)>, of: u32) -> Option<Fault> {
    let count = of as usize - parts.len();
    let lacking = (1..=of).filter(|number| !parts.contains_key(number));
    let listed: Vec<u32> = lacking.take(MOST_LISTED).collect();
    let example = listed.first()?;
    let numbers: Vec<String> = listed.iter().map(u32::to_string).collect();
    let mut text = match count {
        1 => format!("part {} of {of} is missing", numbers.join("")),
        _ => format!("parts {} of {of} are missing", numbers.join(", ")),
    };
    if count > listed.len() {
        text += &format!(", and {} more", count - listed.len());
    }
    let help =
        format!("audit with `--part {example}/{of} --write FILE.json`, and give all reports");
    Some(Fault::new(text).help(help))
}

/// The report of the whole. Every place must be taken once.
fn whole(
    parts: impl Iterator<Item = (Given, PartReport)>,
    count: u64,
) -> Result<AuditReport, Fault> {
    let (mut submissions, mut not_audited) = (Vec::new(), Vec::new());
    let mut places = Vec::new();
    let mut frame = None;
    for (given, part) in parts {
        let AuditReport {
            submissions: read,
            not_audited: unread,
            ..
        } = given.report;
        places.extend(part.places.iter().chain(&part.places_not_audited).copied());
        submissions.extend(part.places.into_iter().zip(read));
        not_audited.extend(part.places_not_audited.into_iter().zip(unread));
        frame.get_or_insert((
            given.report.stepgauge,
            given.report.schema,
            given.report.scope,
            given.report.review,
        ));
    }
    places.sort_unstable();
    let Some((stepgauge, schema, scope, review)) =
        frame.filter(|_| places.iter().copied().eq(0..count))
    else {
        let text = "the parts do not cover every submission once: one of them is damaged";
        return Err(Fault::new(text).help("audit all parts again"));
    };
    submissions.sort_by_key(|(place, _)| *place);
    not_audited.sort_by_key(|(place, _)| *place);
    let submissions: Vec<_> = submissions.into_iter().map(|(_, one)| one).collect();
    let not_audited: Vec<_> = not_audited.into_iter().map(|(_, one)| one).collect();
    let count = |word: &str| submissions.iter().filter(|one| one.verdict == word).count();
    let all = submissions.iter().all(|one| one.in_order);
    Ok(AuditReport {
        stepgauge,
        schema,
        summary: Summary {
            pass: count("pass"),
            fail: count("fail"),
            undecided: count("undecided"),
            in_order: all && !submissions.is_empty() && not_audited.is_empty(),
        },
        submissions,
        not_audited,
        left: 0,
        scope,
        changes: None,
        part: None,
        review,
    })
}

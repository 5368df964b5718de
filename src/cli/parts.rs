//! One part of an audit by `--part`, and parts joined by `merge`.

use std::path::{Path, PathBuf};

use clap::Args;

use super::args::{AuditArguments, Before, RelativeTo, Sources, Whether};
use super::earlier::{self, Earlier};
use super::plan::library;
use super::reports::{Inputs, check_merged};
use super::required::require;
use super::reviewer::Reviewer;
use crate::audit::Plan;
use crate::fault::Fault;
use crate::outcome::Changes;
use crate::parts::{Asked, Given, MOST_PARTS, digest, divide, join};
use crate::report::{AuditReport, changes_report, read_report, report_json, write_atomically};

/// Arguments of `merge`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: an audit in two parts, each on a machine of its own
  stepgauge audit demo-runs --part 1/2 --write part-1.json
  stepgauge audit demo-runs --part 2/2 --write part-2.json
  stepgauge merge part-1.json part-2.json --write report.json

The report is that of the undivided audit, byte for byte. The table on the terminal shows
less than that of an audit, since it is made from the reports alone.

Exit status: that of the undivided audit: 0 all in order, 1 something failed, is undecided,
not as expected or became worse, 2 a submission could not be audited, or the reports are not
the parts of one audit.")]
pub struct MergeArguments {
    /// The .json reports of all parts, in any order
    #[arg(required = true, value_name = "REPORT.json")]
    pub parts: Vec<PathBuf>,
    /// Writes the .json report of the whole audit
    #[arg(long, value_name = "FILE.json")]
    pub write: Option<PathBuf>,
    /// Prints nothing but complaints; the report and the exit status tell
    #[arg(long, short)]
    pub quiet: bool,
    /// An earlier report to compare with
    #[command(flatten)]
    pub before: Before,
    /// Holds the whole against what has to be there, as `audit --require` does; the parts must
    /// have been audited by its limits and refusals: with the same --require, or with --limits
    /// where it has none
    #[arg(long, value_name = "FILE.toml")]
    pub require: Option<PathBuf>,
    /// The --cases of the parts, where --require is given (repeatable)
    #[arg(long, value_name = "DIR", requires = "require")]
    pub cases: Vec<PathBuf>,
}

/// What `--part` says: which part, of how many.
pub(super) fn share_of(text: &str) -> Result<(u32, u32), String> {
    let complain = || format!("expected I/N with 1 <= I <= N <= {MOST_PARTS}, as in 2/8");
    // A sign or a blank would be read as well, and is a slip.
    let plain = |text: &str| text.bytes().all(|byte| byte.is_ascii_digit());
    let number = |text: &str| text.parse::<u32>().ok().filter(|_| plain(text));
    let (part, of) = text.split_once('/').ok_or_else(complain)?;
    match (number(part), number(of)) {
        (Some(part), Some(of)) if 1 <= part && part <= of && of <= MOST_PARTS => Ok((part, of)),
        _ => Err(complain()),
    }
}

/// Leaves the part of a plan that was asked for.
///
/// # Errors
/// `--against` beside it: what other parts audit would seem to be gone.
pub(super) fn take(
    arguments: &AuditArguments,
    reviewer: &Reviewer,
    plan: &mut Plan,
) -> Result<(), Fault> {
    let Some((part, of)) = arguments.part else {
        return Ok(());
    };
    if arguments.before.against.is_some() {
        let fault = Fault::new("--against goes with a whole audit, --part audits a share of it");
        return Err(fault.help("give `--against` to `stepgauge merge`"));
    }
    let shown = |path: &PathBuf| path.to_string_lossy().into_owned();
    let asked = Asked {
        paths: arguments.paths.iter().map(shown).collect(),
        options: options(arguments),
        terms: reviewer.terms().map(str::to_owned),
    };
    divide(plan, part, of, &asked);
    Ok(())
}

/// Options that change what an audit finds.
fn options(arguments: &AuditArguments) -> Vec<String> {
    let mut options = Vec::new();
    let mut add = |name: &str, value: &str| options.push(format!("--{name} {value}"));
    if let Some(case) = &arguments.case {
        add("case", case);
    }
    for (channel, column) in &arguments.columns {
        add("column", &format!("{channel}={column}"));
    }
    if let Some(step) = arguments.step {
        add("step", &step.to_string());
    }
    for (name, value) in &arguments.parameters {
        add("set", &format!("{name}={value}"));
    }
    if let Some(limit) = arguments.absolute {
        add("absolute", &limit.to_string());
    }
    if let Some(limit) = arguments.relative {
        add("relative", &limit.to_string());
    }
    match arguments.relative_to {
        Some(RelativeTo::Value) => add("relative-to", "value"),
        Some(RelativeTo::Peak) => add("relative-to", "peak"),
        None => {}
    }
    if let Some(file) = &arguments.review.limits {
        // Limits may have been changed between two parts, under the same name.
        add(
            "limits",
            &format!("{} {}", file.to_string_lossy(), digest(file)),
        );
    }
    match arguments.review.own_parameters {
        Some(Whether::Refuse) => add("own-parameters", "refuse"),
        Some(Whether::Allow) => add("own-parameters", "allow"),
        None => {}
    }
    for folder in &arguments.sources.cases {
        add("cases", &folder.to_string_lossy());
    }
    options
}

/// A merged audit.
pub(super) struct Merged {
    /// Its report.
    pub report: AuditReport,
    /// What changed since an earlier one.
    pub changes: Option<Changes>,
}

/// Reads all parts, joins them, holds them against what is required and writes the report.
///
/// # Errors
/// All that is wrong with the reports; then nothing is written.
pub(super) fn merge(arguments: &MergeArguments) -> Result<Merged, Vec<Fault>> {
    let library = library(&Sources {
        cases: arguments.cases.clone(),
    })?;
    let inputs = Inputs::merged(arguments, &library);
    if let Some(path) = &arguments.write {
        check_merged(path, &inputs).map_err(|fault| vec![fault])?;
    }
    let earlier = Earlier::read(&arguments.before);
    let earlier = earlier.map_err(|fault| vec![fault])?;
    let (mut given, mut faults) = (Vec::new(), Vec::new());
    for path in &arguments.parts {
        match part(path) {
            Ok(one) => given.push(one),
            Err(fault) => faults.push(fault.in_file(path)),
        }
    }
    let joined = join(given);
    let mut joined = match joined {
        Ok(joined) if faults.is_empty() => joined,
        Ok(_) => return Err(faults),
        Err(more) => {
            // A part that cannot be read is not missing too.
            let all_read = faults.is_empty();
            let told = more.into_iter();
            faults.extend(told.filter(|fault| all_read || fault.path.is_some()));
            return Err(faults);
        }
    };
    require(arguments, &library, &mut joined)?;
    let mut report = joined.report;
    let changes = earlier.map(|earlier| earlier.changes(&report));
    report.changes = changes.as_ref().map(changes_report);
    if let Some(path) = &arguments.write {
        let text = report_json(&report);
        write_atomically(path, text.as_bytes()).map_err(|fault| vec![fault])?;
    }
    Ok(Merged { report, changes })
}

fn part(path: &Path) -> Result<Given, Fault> {
    let report = read_report(&earlier::text(path)?)?;
    Ok(Given {
        path: path.to_owned(),
        report,
    })
}

/// That a report which stands for a whole audit is none of a part.
///
/// # Errors
/// One of a part.
pub(super) fn whole(report: AuditReport) -> Result<AuditReport, Fault> {
    match &report.part {
        None => Ok(report),
        Some(part) => {
            let name = format!("part {} of {}", part.number, part.of);
            let fault = Fault::new(format!(
                "this is the report of {name}, not of a whole audit"
            ));
            Err(fault.help("join all parts with `stepgauge merge --write FILE.json` first"))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_share_is_written_one_way() {
        assert_eq!(share_of("2/8"), Ok((2, 8)));
        assert_eq!(share_of("10000/10000"), Ok((10_000, 10_000)));
        for wrong in [
            "",
            "2",
            "/",
            "0/4",
            "5/4",
            "1/0",
            "1/10001",
            "+1/2",
            "1/ 2",
            "-1/2",
            "1/2/3",
            "1.0/2",
            "99999999999/99999999999",
        ] {
            assert!(share_of(wrong).is_err(), "{wrong}");
        }
    }
}

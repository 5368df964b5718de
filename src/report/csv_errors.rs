//! The table of errors as CSV: a row for each submission, run and channel, with the names
//! of the JSON report.

use std::io;

use super::csv_values::{kept, shortest};
use super::review_text::own_parameters;
use super::text::csv_text;
use crate::fault::{Fault, Result};
use crate::outcome::{Audited, ChannelOutcome, ErrorOutcome, Outcome, RunOutcome};
use crate::submission::Setting;

/// The names of the columns.
pub const CSV_HEADER: [&str; 19] = [
    "submission",
    "case",
    "file",
    "role",
    "step",
    "tolerance",
    "channel",
    "unit",
    "worst_error",
    "at",
    "rms_error",
    "end_error",
    "peak",
    "resolution",
    "limit",
    "limit_used",
    "verdict",
    "limits_from",
    "parameters",
];
/// Where the verdict stands, and how many columns follow it.
const VERDICT: usize = 16;
const AFTER_VERDICT: usize = CSV_HEADER.len() - VERDICT - 1;

/// The table, in the order of submissions, runs and channels. What is absent is empty;
/// numbers have the shortest digits that read back. A run without channels has one row
/// without numbers, a submission that could not be audited one with the verdict
/// `not audited`, a case that a reviewer requires in vain one with `required, missing`. Text from outside never begins like a formula.
///
/// # Errors
/// None that a table in memory can have; the writer may say otherwise.
pub fn audit_csv(outcome: &Outcome) -> Result<Vec<u8>> {
    table(outcome).map_err(|error| Fault::new(format!("the table cannot be made: {error}")))
}

fn table(outcome: &Outcome) -> io::Result<Vec<u8>> {
    let mut csv = csv::WriterBuilder::new().from_writer(Vec::new());
    csv.write_record(CSV_HEADER).map_err(kept)?;
    for submission in &outcome.submissions {
        let terms = [
            submission.limits_from.word().to_owned(),
            csv_text(&own_parameters(submission).unwrap_or_default()),
        ];
        for run in &submission.runs {
            let start = start(submission, run);
            let mut write = |rest: &[String]| {
                let row = start.iter().chain(rest).chain(&terms);
                csv.write_record(row).map_err(kept)
            };
            if run.channels.is_empty() {
                write(&vec![
                    String::new();
                    CSV_HEADER.len() - start.len() - terms.len()
                ])?;
            }
            for channel in &run.channels {
                write(&numbers(channel))?;
            }
        }
    }
    // What has no numbers: its name, its case, and what is to be said in place of a verdict.
    let mut bare = |name: &str, case: &str, verdict: &str| {
        let blank = |count| std::iter::repeat_n(String::new(), count);
        let start = [csv_text(name), csv_text(case)].into_iter();
        let row = start.chain(blank(VERDICT - 2));
        let row = row.chain([verdict.to_owned()]).chain(blank(AFTER_VERDICT));
        csv.write_record(row).map_err(kept)
    };
    for missing in &outcome.not_audited {
        bare(&missing.name, "", "not audited")?;
    }
    for missing in outcome.missing() {
        bare("", &missing.case, "required, missing")?;
    }
    if outcome.left > 0 {
        bare("", "", &format!("interrupted, {} left", outcome.left))?;
    }
    csv.into_inner()
        .map_err(|error| io::Error::other(error.to_string()))
}

fn start(submission: &Audited, run: &RunOutcome) -> [String; 6] {
    let number = |value: Option<f64>| value.map(finite).unwrap_or_default();
    let tolerance = match run.setting {
        Setting::Tolerance(tolerance) => Some(tolerance),
        Setting::Step(_) | Setting::Unstated => None,
    };
    [
        csv_text(&submission.name),
        csv_text(submission.case.as_deref().unwrap_or_default()),
        csv_text(&run.file),
        run.role.word().to_owned(),
        number(run.step),
        number(tolerance),
    ]
}

fn numbers(channel: &ChannelOutcome) -> [String; 11] {
    let number = |read: fn(&ErrorOutcome) -> f64| {
        let value = channel.errors.as_ref().map(read);
        value.map(finite).unwrap_or_default()
    };
    [
        csv_text(&channel.name),
        csv_text(&channel.unit),
        number(|e| e.worst),
        number(|e| e.at),
        number(|e| e.rms),
        number(|e| e.end),
        number(|e| e.peak),
        number(|e| e.resolution),
        number(|e| e.limit),
        number(|e| e.limit_used),
        channel.verdict.word().to_owned(),
    ]
}

/// What is not finite is absent, as in the JSON report.
fn finite(value: f64) -> String {
    if value.is_finite() {
        shortest(value)
    } else {
        String::new()
    }
}

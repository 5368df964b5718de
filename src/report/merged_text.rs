//! The terminal report of merged parts: the lines of an audit, below a table of what the JSON
//! reports hold.

use super::restored::restored;
use super::style::{Screen, coloured};
use super::table::{below, decisive, folded, verdict_text};
use super::wire::AuditReport;
use crate::fault::Fault;
use crate::number::measured;
use crate::outcome::Changes;

/// The report as text, as `audit_text` gives it.
///
/// # Errors
/// A report with words that no report has.
pub fn merged_text(
    report: &AuditReport,
    changes: Option<&Changes>,
    screen: Screen,
) -> Result<String, Fault> {
    let mut outcome = restored(report)?;
    outcome.changes = changes.cloned();
    for submission in &mut outcome.submissions {
        // The sections on methods need more than a JSON report holds.
        submission.evidence = None;
    }
    let mut text = String::new();
    if !outcome.submissions.is_empty() {
        let headings = ["verdict", "submission", "case", "channel", ">worst error"];
        let mut table = screen.table(&headings);
        let longest = usize::from(screen.width) / 4;
        for submission in &outcome.submissions {
            let (_, channel) = decisive(submission);
            let errors = channel.and_then(|channel| Some((channel, channel.errors.as_ref()?)));
            let error = errors.map(|(channel, errors)| {
                let worst = measured(errors.worst, errors.resolution);
                folded(&screen.clean(&format!("{worst} {}", channel.unit)), longest)
            });
            let outside = |text: &str| folded(&screen.clean(text), longest);
            table.add_row([
                screen.plain(&verdict_text(submission, screen.width < 100)),
                outside(&submission.name),
                outside(submission.case.as_deref().unwrap_or("")),
                outside(channel.map_or("", |channel| channel.name.as_str())),
                error.unwrap_or_default(),
            ]);
        }
        for line in table.lines() {
            text += line.trim_end();
            text.push('\n');
        }
    }
    text += &below(&outcome, screen);
    Ok(coloured(&screen.plain(&text)))
}

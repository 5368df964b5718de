//! What became worse or better since an earlier audit, on the terminal.

use super::style::Screen;
use super::table::line;
use crate::fault::escaped;
use crate::outcome::{Change, Changes, Outcome};

/// Lines shown of what became worse, and of the rest.
const MOST_WORSE: usize = 200;
const MOST_OTHER: usize = 20;

/// Names of submissions depend on the paths that an audit was given.
pub(super) const NOTHING_COMPARED: &str = "No submission has the name of an earlier one, so nothing \
was compared: audit the same paths as then.";

/// The sections, where there was an earlier audit; else nothing.
pub(super) fn changes_text(outcome: &Outcome, screen: Screen) -> String {
    let Some(changes) = &outcome.changes else {
        return String::new();
    };
    let name = screen.plain(&shown_name(changes));
    let mut text = String::new();
    if changes.worse.is_empty() {
        text += &format!("\nNothing became worse since {name}.\n");
    } else {
        text += &format!("\nWorse than in {name}:\n");
        text += &lines(&changes.worse, MOST_WORSE, screen);
    }
    if changes.compared == 0 {
        text += &line(screen, "", NOTHING_COMPARED);
    }
    if !changes.better.is_empty() {
        text += &format!("\nBetter than in {name}:\n");
        text += &lines(&changes.better, MOST_OTHER, screen);
    }
    if !changes.other.is_empty() {
        text += "\nChanged, neither worse nor better:\n";
        text += &lines(&changes.other, MOST_OTHER, screen);
    }
    if !changes.new_submissions.is_empty() {
        let new = &changes.new_submissions;
        text += &format!("\nNot in {name}:\n");
        for name in new.iter().take(MOST_OTHER) {
            text += &line(screen, "", name);
        }
        text += &more(new.len(), MOST_OTHER, screen);
    }
    text
}

/// The name of the earlier report, as a report may show it.
pub(super) fn shown_name(changes: &Changes) -> String {
    escaped(&changes.earlier)
}

/// How much became worse, where anything did.
pub(super) fn worse_count(outcome: &Outcome) -> Option<String> {
    let changes = outcome.changes.as_ref()?;
    match changes.worse.len() {
        0 => None,
        1 => Some("One thing became worse.".to_owned()),
        count => Some(format!("{count} things became worse.")),
    }
}

fn lines(changes: &[Change], most: usize, screen: Screen) -> String {
    let shown = changes.iter().take(most);
    let text: String = shown
        .map(|change| line(screen, &change.submission, &change.text))
        .collect();
    text + &more(changes.len(), most, screen)
}

fn more(count: usize, most: usize, screen: Screen) -> String {
    match count.checked_sub(most) {
        Some(more) if more > 0 => {
            line(screen, "", &format!("{more} more; the JSON report has all"))
        }
        _ => String::new(),
    }
}

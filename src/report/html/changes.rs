//! What became worse or better since an earlier audit.

use maud::{Markup, html};

use super::{more, outside};
use crate::outcome::{Change, Outcome};
use crate::report::changes_text::NOTHING_COMPARED;

/// Changes shown of each sort.
const MOST: usize = 100;

/// The section, where there was an earlier audit; else nothing.
pub(super) fn section(outcome: &Outcome) -> Markup {
    let Some(changes) = &outcome.changes else {
        return html! {};
    };
    let name = outside(&changes.earlier);
    html! {
        section aria-labelledby="changes" {
            h2 id="changes" { "Since " (name) }
            @if changes.compared == 0 { p { (NOTHING_COMPARED) } }
            @if changes.worse.is_empty() { p { "Nothing became worse." } }
            (list("Worse", &changes.worse))
            (list("Better", &changes.better))
            (list("Changed, neither worse nor better", &changes.other))
            @if !changes.new_submissions.is_empty() {
                h3 { "Not in " (name) }
                ul {
                    @for new in changes.new_submissions.iter().take(MOST) { li { (outside(new)) } }
                    (more(changes.new_submissions.len(), MOST))
                }
            }
        }
    }
}

fn list(heading: &str, changes: &[Change]) -> Markup {
    html! {
        @if !changes.is_empty() {
            h3 { (heading) }
            ul {
                @for change in changes.iter().take(MOST) {
                    li { strong { (outside(&change.submission)) } ": " (outside(&change.text)) }
                }
                (more(changes.len(), MOST))
            }
        }
    }
}

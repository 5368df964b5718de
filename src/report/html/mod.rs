//! The HTML report: one page that asks nothing of anywhere, for a mail attachment or an
//! artefact of CI. The summary says what is wrong and where; a section for each submission
//! follows. Templates by maud, which escapes at compile time.

mod changes;
mod submission;
mod summary;

use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::plot;
use crate::fault::escaped;
use crate::outcome::Outcome;

/// The page keeps below two megabytes: many submissions have one channel drawn each.
const ROOM: usize = 12;
/// Bytes of plots: tables and sentences need the rest.
const MOST_PLOTTED: usize = 1_400_000;
/// Channels drawn while there is room.
const MOST_CHANNELS: usize = 4;
/// Characters of a name or a sentence from outside.
const MOST_CHARACTERS: usize = 600;

/// The report as a page, ending with a line end.
pub fn audit_html(outcome: &Outcome) -> String {
    let channels = if outcome.submissions.len() <= ROOM {
        MOST_CHANNELS
    } else {
        1
    };
    let costs = plot::of_costs(outcome);
    let plots = plots(outcome, channels);
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light dark";
                // Asks nothing of anywhere, and runs nothing that a name may have smuggled in.
                meta http-equiv="Content-Security-Policy"
                    content="default-src 'none'; style-src 'unsafe-inline'; img-src data:";
                title { "stepgauge: " (summary::headline(outcome)) }
                // No icon is asked of anywhere.
                link rel="icon" href="data:,";
                style { (PreEscaped(include_str!("style.css"))) }
            }
            body {
                a class="skip" href="#all" { "To the table of all submissions" }
                header {
                    p class="tool" { "stepgauge " (env!("CARGO_PKG_VERSION")) }
                    h1 { (summary::headline(outcome)) }
                    (summary::troubles(outcome))
                }
                main {
                    (summary::required(outcome))
                    (changes::section(outcome))
                    (summary::table(outcome))
                    @if !costs.is_empty() {
                        section aria-labelledby="costs" {
                            h2 id="costs" { "Work against precision" }
                            div class="plots" { @for plot in &costs { (plot) } }
                        }
                    }
                    @for (number, audited) in outcome.submissions.iter().enumerate() {
                        (submission::section(audited, number, &plots[number]))
                    }
                }
                footer { p { (super::table::scope(outcome)) } }
            }
        }
    };
    let mut text = page.into_string();
    text.push('\n');
    text
}

/// Plots of every submission, of those that are not in order first, as long as there is room.
fn plots(outcome: &Outcome, channels: usize) -> Vec<Vec<Markup>> {
    let mut order: Vec<usize> = (0..outcome.submissions.len()).collect();
    order.sort_by_key(|&number| outcome.submissions[number].in_order());
    let mut plots = vec![Vec::new(); outcome.submissions.len()];
    let mut room = MOST_PLOTTED;
    for number in order {
        let drawn = plot::of_submission(&outcome.submissions[number], channels);
        let size: usize = drawn.iter().map(|plot| plot.0.len()).sum();
        let Some(left) = room.checked_sub(size) else {
            break;
        };
        room = left;
        plots[number] = drawn;
    }
    plots
}

/// How many of a list are not shown.
fn more(all: usize, most: usize) -> Markup {
    html! { @if all > most { li { (all - most) " more; the JSON report has all" } } }
}

/// Text from outside: nothing that steers, no more than fits.
pub(super) fn outside(text: &str) -> String {
    let clean = escaped(text);
    if clean.chars().count() <= MOST_CHARACTERS {
        return clean;
    }
    let kept: String = clean.chars().take(MOST_CHARACTERS).collect();
    format!("{kept}…")
}

/// The place of a submission in the page.
fn anchor(number: usize) -> String {
    format!("s{}", number + 1)
}

//! One submission: what was claimed and what was found, why it is judged as it is, plots,
//! and the numbers of every run.

use maud::{Markup, html};

use super::summary::badge;
use super::{anchor, more, outside};
use crate::judge::Verdict;
use crate::number::{measured, plain, short};
use crate::outcome::{Audited, ClaimOutcome, LimitsFrom, RunOutcome};
use crate::report::table::{order_text, share_text, step_text};
use crate::submission::Expect;

/// Sentences, rows and findings shown of one submission.
const MOST: usize = 24;

pub(super) fn section(audited: &Audited, number: usize, plots: &[Markup]) -> Markup {
    let id = anchor(number);
    html! {
        section class="submission" aria-labelledby=(id) {
            h2 id=(id) { (badge(audited)) " " (outside(&audited.name)) }
            (facts(audited))
            (sentences(audited))
            @if plots.is_empty() && !audited.curves.is_empty() { p { "No plots: the page would grow too large. Audit it alone to see them." } }
            @if !plots.is_empty() { div class="plots" { @for plot in plots { (plot) } } }
            (numbers(audited))
            (findings(audited))
            p { a href="#all" { "Back to all submissions" } }
        }
    }
}

/// Claimed beside found.
fn facts(audited: &Audited) -> Markup {
    let evidence = audited.evidence.as_ref();
    let claims = evidence.map_or(&[][..], |evidence| &evidence.claims);
    let limits = match audited.limits_from {
        LimitsFrom::Submission => "the submission's own".to_owned(),
        other => format!("those of {}", other.whose()),
    };
    html! {
        dl {
            dt { "case" } dd { (audited.case.as_deref().unwrap_or("none: runs are compared with each other")) }
            @if let Some(producer) = &audited.producer { dt { "producer" } dd { (outside(producer)) } }
            dt { "expected" } dd { (audited.expect.word()) @if audited.expect != Expect::Pass { " (a control)" } }
            dt { "limits" } dd { (limits) }
            @if !audited.parameters.is_empty() {
                dt { "parameters of its own" }
                dd { @for (name, value) in audited.parameters.iter().take(MOST) { (outside(name)) " = " (plain(*value)) " " } }
            }
            @for claim in together(claims).iter().take(MOST) {
                dt { (claim.what) " claimed" }
                dd { (outside(&claim.stated)) ": " strong { (claim.word) } ". " (outside(claim.text)) }
            }
            @let order = order_text(audited);
            @if !order.is_empty() { dt { "order seen" } dd { (order) } }
            @if claims.is_empty() && let Some(evidence) = evidence && !evidence.families.is_empty() {
                dt { "methods that fit" } dd { (evidence.families.join(", ")) }
            }
        }
    }
}

/// Claims of one kind that are answered alike, with the first of their reasons.
struct Together<'a> {
    what: &'a str,
    stated: String,
    word: &'static str,
    text: &'a str,
}

fn together(claims: &[ClaimOutcome]) -> Vec<Together<'_>> {
    let mut together: Vec<Together> = Vec::new();
    for claim in claims {
        let word = claim.support.word();
        match together.last_mut() {
            Some(last) if last.what == claim.what && last.word == word => {
                last.stated += &format!(", {}", claim.stated);
            }
            _ => together.push(Together {
                what: claim.what,
                stated: claim.stated.clone(),
                word,
                text: &claim.text,
            }),
        }
    }
    together
}

fn sentences(audited: &Audited) -> Markup {
    html! {
        @if !audited.reasons.is_empty() {
            h3 { "Why" }
            ul {
                @for reason in audited.reasons.iter().take(MOST) { li { (outside(reason)) } }
                (more(audited.reasons.len(), MOST))
            }
        }
        @if !audited.causes.is_empty() {
            h3 { "Likely causes" }
            ul {
                @for cause in &audited.causes {
                    li { (outside(&cause.text)) " (" (outside(&cause.file)) ", " (cause.kind) ")" }
                }
            }
        }
        @if let Some(advice) = &audited.advice { h3 { "Step" } p { (outside(&advice.text)) } }
        @if !audited.settings.is_empty() {
            h3 { "Error settings" }
            ul {
                @for settings in audited.settings.iter().take(MOST) { li { (outside(&settings.text)) } }
                (more(audited.settings.len(), MOST))
            }
        }
        @if !audited.notes.is_empty() {
            h3 { "Notes" }
            ul {
                @for note in audited.notes.iter().take(MOST) { li { (outside(note)) } }
                (more(audited.notes.len(), MOST))
            }
        }
    }
}

/// The error table of all runs.
fn numbers(audited: &Audited) -> Markup {
    let rows: Vec<Markup> = audited
        .runs
        .iter()
        .flat_map(|run| run_rows(audited, run))
        .collect();
    html! {
        details open[audited.verdict != Verdict::Pass] {
            summary { "Errors of every run" }
            div class="wide" tabindex="0" role="region" aria-label="Errors of every run" {
                table {
                    thead {
                        tr {
                            th scope="col" { "file" }
                            th scope="col" { "role" }
                            th scope="col" class="number" { "step" }
                            th scope="col" class="number" { "rows" }
                            th scope="col" { "channel" }
                            th scope="col" { "verdict" }
                            th scope="col" class="number" { "worst error" }
                            th scope="col" class="number" { "at t" }
                            th scope="col" class="number" { "limit used" }
                            th scope="col" class="number" { "rms error" }
                            th scope="col" class="number" { "resolution" }
                        }
                    }
                    tbody { @for row in rows.iter().take(4 * MOST) { (row) } }
                }
                @if rows.len() > 4 * MOST { p { (rows.len() - 4 * MOST) " more rows; the CSV and JSON reports have all" } }
            }
        }
    }
}

fn run_rows(audited: &Audited, run: &RunOutcome) -> Vec<Markup> {
    let row = |channel: &crate::outcome::ChannelOutcome| {
        let e = channel.errors.as_ref();
        html! {
            tr {
                th scope="row" { (outside(&run.file)) }
                td { (run.role.word()) }
                td class="number" { (step_text(run)) }
                td class="number" { (run.rows) }
                td { (outside(&channel.name)) }
                td { (channel.verdict.word()) }
                @if let Some(e) = e {
                    td class="number" { (measured(e.worst, e.resolution)) " " (outside(&channel.unit)) }
                    td class="number" { (plain(e.at)) " " (outside(&audited.time_unit)) }
                    td class="number" { (share_text(audited, channel).unwrap_or_default()) }
                    td class="number" { (short(e.rms)) }
                    td class="number" { (short(e.resolution)) }
                } @else {
                    td class="number" colspan="5" { "no row has a value" }
                }
            }
        }
    };
    run.channels.iter().map(row).collect()
}

fn findings(audited: &Audited) -> Markup {
    let found: Vec<(&str, &crate::trajectory::Finding)> = audited
        .runs
        .iter()
        .flat_map(|run| {
            run.findings
                .iter()
                .map(|finding| (run.file.as_str(), finding))
        })
        .collect();
    html! {
        @if !found.is_empty() {
            h3 { "Faults of the files" }
            ul {
                @for (file, finding) in found.iter().take(MOST) {
                    li {
                        (outside(file))
                        @if let Some(line) = finding.line { ", line " (line) }
                        ": " (outside(&finding.text))
                    }
                }
                (more(found.len(), MOST))
            }
        }
    }
}

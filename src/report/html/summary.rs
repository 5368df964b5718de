//! What is wrong and where, before anything else, and the table of all submissions.

use maud::{Markup, html};

use super::{anchor, more, outside};
use crate::judge::{Support, Verdict};
use crate::number::{counted, measured};
use crate::outcome::{Audited, Outcome, Required, RunOutcome};
use crate::report::table::{decisive, order_text, share_text};
use crate::submission::Expect;

/// Submissions named on top.
const MOST_TROUBLES: usize = 12;
/// Requirements shown.
const MOST_REQUIRED: usize = 100;
/// Files of one of them.
const MOST_FILES: usize = 6;

/// The whole in a sentence.
pub(super) fn headline(outcome: &Outcome) -> String {
    match &outcome.part {
        Some(part) => format!("{}: {}", part.name(), found(outcome)),
        None => found(outcome),
    }
}

fn found(outcome: &Outcome) -> String {
    let all = outcome.submissions.len() + outcome.not_audited.len();
    let wrong = troubled(outcome).count() + outcome.not_audited.len();
    if outcome.left > 0 {
        let left = counted(outcome.left as u64, "submission");
        return format!("interrupted: {wrong} of {all} not in order, {left} left");
    }
    let missing = outcome.missing().count() as u64;
    if missing > 0 {
        let things = counted(missing, "requirement");
        return format!("{things} not met, {wrong} of {all} not in order");
    }
    let worse = outcome
        .changes
        .as_ref()
        .map_or(0, |changes| changes.worse.len());
    if worse > 0 {
        let things = counted(worse as u64, "thing");
        return format!("{things} became worse, {wrong} of {all} not in order");
    }
    match (all, wrong) {
        (0, _) => "nothing was audited".to_owned(),
        (1, 0) => "the submission is in order".to_owned(),
        (1, _) => "the submission is not in order".to_owned(),
        (_, 0) => format!("all {all} submissions are in order"),
        (_, 1) => format!("1 of {all} submissions is not in order"),
        _ => format!("{wrong} of {all} submissions are not in order"),
    }
}

/// In the order of the report, with their numbers.
fn troubled(outcome: &Outcome) -> impl Iterator<Item = (usize, &Audited)> {
    let numbered = outcome.submissions.iter().enumerate();
    numbered.filter(|(_, audited)| !audited.in_order())
}

/// Every submission that is not in order with what is wrong and the likely cause.
pub(super) fn troubles(outcome: &Outcome) -> Markup {
    let count = troubled(outcome).count();
    html! {
        @if count > 0 || !outcome.not_audited.is_empty() {
            ul class="troubles" {
                @for (number, audited) in troubled(outcome).take(MOST_TROUBLES) {
                    li {
                        (badge(audited)) " "
                        a href={ "#" (anchor(number)) } { (outside(&audited.name)) }
                        @for reason in first_reasons(audited) { "; " (reason) }
                        @if let Some(cause) = audited.causes.first() {
                            span class="cause" { " Likely cause: " (outside(&cause.text)) "." }
                        }
                    }
                }
                @for (number, audited) in troubled(outcome).skip(MOST_TROUBLES) {
                    li class="brief" { (badge(audited)) " " a href={ "#" (anchor(number)) } { (outside(&audited.name)) } }
                }
                @for missing in outcome.not_audited.iter().take(MOST_TROUBLES) {
                    li {
                        span class="badge fail" { "not audited" } " " strong { (outside(&missing.name)) }
                        @for fault in missing.faults.iter().take(3) { " " (outside(&fault.to_string())) }
                    }
                }
                @if outcome.not_audited.len() > MOST_TROUBLES {
                    li { (outcome.not_audited.len() - MOST_TROUBLES) " more were not audited; the JSON report has all" }
                }
            }
        }
        (controls(outcome))
    }
}

/// What a reviewer requires, what is missing first; nothing where nothing is required.
pub(super) fn required(outcome: &Outcome) -> Markup {
    let mut required: Vec<&Required> = outcome
        .review
        .iter()
        .flat_map(|one| &one.required)
        .collect();
    required.sort_by_key(|one| one.is_met());
    let name = outcome
        .review
        .as_ref()
        .and_then(|one| one.require.as_deref());
    html! {
        @if !required.is_empty() {
            section aria-labelledby="required" {
                h2 id="required" { "Required by " (outside(name.unwrap_or_default())) }
                ul class="troubles" {
                    @for one in required.iter().take(MOST_REQUIRED) {
                        li {
                            @if one.is_met() { span class="badge pass" { "✓ there" } }
                            @else { span class="badge fail" { "✗ missing" } }
                            " " (outside(&one.text))
                        }
                    }
                    (more(required.len(), MOST_REQUIRED))
                }
            }
        }
    }
}

/// Those that are wrong on purpose, and why they are.
fn controls(outcome: &Outcome) -> Markup {
    let numbered = outcome.submissions.iter().enumerate();
    let controls: Vec<(usize, &Audited)> = numbered
        .filter(|(_, audited)| audited.in_order() && audited.expect != Expect::Pass)
        .collect();
    html! {
        @if !controls.is_empty() {
            details open[controls.len() <= MOST_TROUBLES] {
                summary { (counted(controls.len() as u64, "control")) ", as expected" }
                ul class="troubles controls" {
                    @for (number, audited) in controls {
                        li {
                            (badge(audited)) " "
                            a href={ "#" (anchor(number)) } { (outside(&audited.name)) }
                            @if let Some(reason) = audited.reasons.first() { ": " (outside(reason)) }
                        }
                    }
                }
            }
        }
    }
}

/// What is wrong in each file, else the first reason.
fn first_reasons(audited: &Audited) -> Vec<String> {
    if let Some(missed) = audited.expect.missed() {
        return vec![missed.to_owned()];
    }
    let of_file = |run: &RunOutcome| {
        let mut reasons = audited.reasons.iter();
        reasons.find(|reason| reason.starts_with(&format!("{}:", run.file)))
    };
    let files = audited.runs.iter().filter_map(of_file).take(MOST_FILES);
    let reasons: Vec<String> = files.map(|reason| outside(reason)).collect();
    if reasons.is_empty() {
        let first = audited.reasons.first();
        return first.map(|reason| outside(reason)).into_iter().collect();
    }
    reasons
}

/// The verdict in a word, with a shape of its own for those who see no colour.
pub(super) fn badge(audited: &Audited) -> Markup {
    let word = audited.verdict.word();
    let expected = audited.expect != Expect::Pass && audited.in_order();
    html! {
        span class={ "badge " (if expected { "control" } else { word }) } {
            (match audited.verdict { Verdict::Pass => "✓ ", Verdict::Fail => "✗ ", Verdict::Undecided => "? " })
            (word)
            @if expected { ", as expected" }
        }
    }
}

/// All submissions, a row each; those that are not in order first.
pub(super) fn table(outcome: &Outcome) -> Markup {
    let mut rows: Vec<(usize, &Audited)> = outcome.submissions.iter().enumerate().collect();
    rows.sort_by_key(|(_, audited)| audited.in_order());
    html! {
        section aria-labelledby="all" {
            h2 id="all" { "All submissions" }
            div class="wide" tabindex="0" role="region" aria-labelledby="all" {
                table {
                    thead {
                        tr {
                            th scope="col" { "verdict" }
                            th scope="col" { "submission" }
                            th scope="col" { "channel" }
                            th scope="col" class="number" { "worst error" }
                            th scope="col" class="number" { "limit used" }
                            th scope="col" { "order" }
                            th scope="col" { "claims" }
                            th scope="col" { "case" }
                            th scope="col" { "producer" }
                        }
                    }
                    tbody { @for (number, audited) in rows { (row(number, audited)) } }
                }
            }
        }
    }
}

fn row(number: usize, audited: &Audited) -> Markup {
    let (_, worst) = decisive(audited);
    let errors = worst.and_then(|channel| Some((channel, channel.errors.as_ref()?)));
    html! {
        tr {
            td { (badge(audited)) }
            th scope="row" { a href={ "#" (anchor(number)) } { (outside(&audited.name)) } }
            td { @if let Some(channel) = worst { (outside(&channel.name)) } }
            td class="number" {
                @if let Some((channel, e)) = errors { (measured(e.worst, e.resolution)) " " (outside(&channel.unit)) }
            }
            td class="number" {
                @if let Some((channel, _)) = errors { (share_text(audited, channel).unwrap_or_default()) }
            }
            td class="brief" { (order_text(audited)) }
            td { (claims(audited)) }
            td { (outside(audited.case.as_deref().unwrap_or("none"))) }
            td { (outside(audited.producer.as_deref().unwrap_or(""))) }
        }
    }
}

/// What the rows say of all claims together.
fn claims(audited: &Audited) -> &'static str {
    let support = audited
        .evidence
        .as_ref()
        .and_then(|evidence| evidence.support);
    support.map_or("", Support::word)
}

//! What the rows say of claimed methods and steps, and which methods fit where none is
//! claimed, on the terminal. A contradicted claim stands among what is not in order.

use super::growth_text::FEW;
use super::style::Screen;
use super::table::line;
use crate::judge::Support;
use crate::number::short;
use crate::outcome::{Audited, ClaimOutcome, EvidenceOutcome, Outcome, RunEvidence};

/// Runs and families shown for one submission.
const MOST_RUNS: usize = 8;
const MOST_FAMILIES: usize = 3;

/// The section, where few submissions are audited; else nothing.
pub(super) fn claims_text(outcome: &Outcome, screen: Screen) -> String {
    if outcome.submissions.len() > FEW {
        return String::new();
    }
    let of_one = |submission: &Audited| {
        let evidence = submission.evidence.as_ref()?;
        let lines = lines(evidence, &submission.time_unit);
        let lines = lines
            .iter()
            .map(|text| line(screen, &submission.name, text));
        Some(lines.collect::<String>())
    };
    let text: String = outcome.submissions.iter().filter_map(of_one).collect();
    if text.is_empty() {
        return text;
    }
    format!("\nMethod and step:\n{text}")
}

fn lines(evidence: &EvidenceOutcome, time_unit: &str) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    // Method and step of one run have one answer.
    let mut told: Vec<&str> = Vec::new();
    let mut steps: Vec<&str> = Vec::new();
    let open = |claim: &&ClaimOutcome| claim.support != Support::Contradicts;
    for claim in evidence.claims.iter().filter(open) {
        if told.contains(&claim.text.as_str()) {
            continue;
        }
        told.push(&claim.text);
        if claim.what == "step" && claim.support == Support::Agrees {
            steps.push(&claim.stated);
            continue;
        }
        let ClaimOutcome { what, stated, .. } = claim;
        let word = claim.support.word();
        lines.push(format!("{what} {stated}: {word}; {}", claim.text));
    }
    if !steps.is_empty() {
        let verb = if steps.len() == 1 { "agrees" } else { "agree" };
        lines.push(format!("step {}: {verb}", steps.join(", ")));
    }
    if evidence.claims.iter().all(|claim| claim.what != "method") {
        let runs = evidence.runs.iter().take(MOST_RUNS);
        lines.extend(runs.filter_map(|run| fitting(run, &evidence.families, time_unit)));
    }
    lines
}

/// The methods that fit a run, out of those that can be told from the exact solution.
fn fitting(run: &RunEvidence, families: &[String], time_unit: &str) -> Option<String> {
    let told = run.consistent.iter().filter(|one| {
        let mut names = one.family.split(" / ");
        names.any(|name| families.iter().any(|told| told == name))
    });
    let list: Vec<String> = told
        .map(|one| match one.step {
            Some(step) => format!("{} at step {} {time_unit}", one.family, short(step)),
            None => format!("{}, a step from row to row", one.family),
        })
        .collect();
    if list.is_empty() {
        return None;
    }
    let mut text = list[..list.len().min(MOST_FAMILIES)].join("; or ");
    if list.len() > MOST_FAMILIES {
        text += &format!("; or {} more", list.len() - MOST_FAMILIES);
    }
    Some(format!("{}: the rows fit {text}", run.file))
}

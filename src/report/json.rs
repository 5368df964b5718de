//! The JSON report of an audit.

use super::SCOPE;
use super::wire::{
    AuditReport, ChannelReport, FindingReport, NotAuditedReport, OrderReport, RunReport, SCHEMA,
    SubmissionReport, Summary,
};
use crate::judge::Verdict;
use crate::outcome::{Audited, ChannelOutcome, LimitsFrom, Outcome, RunOutcome};
use crate::submission::{Expect, Role, Setting};

/// The report as text, ending with a line end.
pub fn audit_json(outcome: &Outcome) -> String {
    let report = AuditReport {
        stepgauge: env!("CARGO_PKG_VERSION").to_owned(),
        schema: SCHEMA,
        summary: Summary {
            pass: outcome.count(Verdict::Pass),
            fail: outcome.count(Verdict::Fail),
            undecided: outcome.count(Verdict::Undecided),
            in_order: outcome.in_order(),
        },
        submissions: outcome.submissions.iter().map(submission).collect(),
        not_audited: outcome
            .not_audited
            .iter()
            .map(|missing| NotAuditedReport {
                name: missing.name.clone(),
                faults: missing.faults.iter().map(ToString::to_string).collect(),
            })
            .collect(),
        scope: SCOPE.to_owned(),
    };
    text(&report)
}

/// JSON text of anything of `wire`: such types hold nothing that cannot be written.
pub(super) fn text(report: &impl serde::Serialize) -> String {
    let mut text = serde_json::to_string_pretty(report).unwrap_or_default();
    text.push('\n');
    text
}

/// Numbers are numbers: what is not finite is absent, which is said elsewhere.
fn finite(value: f64) -> Option<f64> {
    value.is_finite().then_some(value)
}

fn submission(audited: &Audited) -> SubmissionReport {
    SubmissionReport {
        name: audited.name.clone(),
        case: audited.case.clone(),
        producer: audited.producer.clone(),
        expect: match audited.expect {
            Expect::Pass => "pass",
            Expect::Fail => "fail",
            Expect::Undecided => "undecided",
        }
        .to_owned(),
        verdict: audited.verdict.word().to_owned(),
        in_order: audited.in_order(),
        reasons: audited.reasons.clone(),
        notes: audited.notes.clone(),
        parameters: audited.parameters.iter().cloned().collect(),
        limits_from: match audited.limits_from {
            LimitsFrom::Case => "case",
            LimitsFrom::Submission => "submission",
            LimitsFrom::CommandLine => "command-line",
        }
        .to_owned(),
        runs: audited.runs.iter().map(run).collect(),
        orders: audited
            .orders
            .iter()
            .map(|order| OrderReport {
                channel: order.channel.clone(),
                claimed: order.claimed,
                observed: order.observed.and_then(|(value, _, _)| finite(value)),
                low: order.observed.and_then(|(_, low, _)| finite(low)),
                high: order.observed.and_then(|(_, _, high)| finite(high)),
                rungs_used: order.rungs_used,
                verdict: order.verdict.map(|verdict| verdict.word().to_owned()),
                note: order.note.clone(),
            })
            .collect(),
        evidence: None,
        causes: Vec::new(),
        advice: None,
    }
}

fn run(run: &RunOutcome) -> RunReport {
    RunReport {
        file: run.file.clone(),
        role: match run.role {
            Role::Result => "result",
            Role::Rung => "rung",
        }
        .to_owned(),
        step: run.step,
        tolerance: match run.setting {
            Setting::Tolerance(tolerance) => Some(tolerance),
            Setting::Step(_) | Setting::Unstated => None,
        },
        rows: run.rows,
        layout: run.layout.clone(),
        findings: run
            .findings
            .iter()
            .map(|finding| FindingReport {
                kind: finding.kind.word().to_owned(),
                line: finding.line,
                text: finding.text.clone(),
            })
            .collect(),
        channels: run.channels.iter().map(channel).collect(),
    }
}

fn channel(channel: &ChannelOutcome) -> ChannelReport {
    let errors = channel.errors.as_ref();
    let number = |read: fn(&crate::outcome::ErrorOutcome) -> f64| errors.map(read).and_then(finite);
    ChannelReport {
        name: channel.name.clone(),
        unit: channel.unit.clone(),
        worst_error: number(|e| e.worst),
        at: number(|e| e.at),
        rms_error: number(|e| e.rms),
        end_error: number(|e| e.end),
        peak: number(|e| e.peak),
        resolution: number(|e| e.resolution),
        digits: errors.map(|e| e.digits.clone()),
        limit: number(|e| e.limit),
        limit_used: number(|e| e.limit_used),
        limit_used_at: number(|e| e.decisive.at),
        verdict: channel.verdict.word().to_owned(),
    }
}

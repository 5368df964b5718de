//! The JSON report of an audit.

use super::SCOPE;
use super::wire::{
    AdviceReport, AuditReport, CauseReport, ChangeReport, ChangesReport, ChannelReport,
    ClaimReport, ConsistentReport, DampingReport, EvidenceReport, FindingReport, GrowthReport,
    GrowthSummaryReport, NotAuditedReport, OrderReport, PairReport, PartReport, RequiredReport,
    ReviewReport, RunEvidenceReport, RunReport, SCHEMA, SettingRungReport, SettingsReport,
    SubmissionReport, Summary, WholeReport,
};
use crate::judge::Verdict;
use crate::outcome::{
    AdviceOutcome, Audited, CauseOutcome, Change, Changes, ChannelOutcome, ClaimOutcome,
    Consistent, Damping, EvidenceOutcome, GrowthOutcome, GrowthSummary, Outcome, Part, Required,
    Review, Rule, RunEvidence, RunOutcome, SettingRung, SettingsOutcome,
};
use crate::submission::Setting;

/// The report as text, ending with a line end.
pub fn audit_json(outcome: &Outcome) -> String {
    text(&audit_report(outcome))
}

/// A report that was read or joined, as text.
pub fn report_json(report: &AuditReport) -> String {
    text(report)
}

/// The report as data, as it is read back.
pub fn audit_report(outcome: &Outcome) -> AuditReport {
    AuditReport {
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
        left: outcome.left,
        scope: SCOPE.to_owned(),
        changes: outcome.changes.as_ref().map(changes_report),
        part: outcome.part.as_ref().map(part),
        review: outcome.review.as_ref().map(review_report),
    }
}

/// The rules of a reviewer, as a report holds them.
pub fn review_report(review: &Review) -> ReviewReport {
    let word = |refuses: bool| if refuses { "refuse" } else { "allow" }.to_owned();
    let required = |one: &Required| RequiredReport {
        case: one.case.clone(),
        runs: one.runs,
        rows: one.rows,
        methods: one.methods.clone(),
        method_shown: one.method_shown,
        met_by: one.met_by.clone(),
        text: one.text.clone(),
    };
    ReviewReport {
        limits: review.limits.clone(),
        require: review.require.clone(),
        own_parameters: word(review.refuses_own_parameters),
        own_cases: word(review.refuses_own_cases),
        controls: word(review.refuses_controls),
        required: review.required.iter().map(required).collect(),
    }
}

fn part(part: &Part) -> PartReport {
    let whole = &part.whole;
    PartReport {
        number: part.number,
        of: part.of,
        whole: WholeReport {
            paths: whole.paths.clone(),
            options: whole.options.clone(),
            submissions: whole.submissions,
            unreadable: whole.unreadable,
            bytes: whole.bytes,
            names: whole.names.clone(),
            sizes: whole.sizes.clone(),
            texts: whole.texts.clone(),
            cases: whole.cases.clone(),
            terms: whole.terms.clone(),
        },
        places: part.places.clone(),
        places_not_audited: part.places_not_audited.clone(),
    }
}

/// What changed since an earlier audit, as a report holds it.
pub fn changes_report(changes: &Changes) -> ChangesReport {
    let one = |change: &Change| ChangeReport {
        kind: change.kind.word().to_owned(),
        submission: change.submission.clone(),
        file: change.file.clone(),
        channel: change.channel.clone(),
        earlier: change.earlier.and_then(finite),
        now: change.now.and_then(finite),
        text: change.text.clone(),
    };
    ChangesReport {
        earlier: changes.earlier.clone(),
        worse_by: changes.worse_by,
        compared: changes.compared,
        worse: changes.worse.iter().map(one).collect(),
        better: changes.better.iter().map(one).collect(),
        other: changes.other.iter().map(one).collect(),
        new_submissions: changes.new_submissions.clone(),
    }
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
        expect: audited.expect.word().to_owned(),
        verdict: audited.verdict.word().to_owned(),
        in_order: audited.in_order(),
        reasons: audited.reasons.clone(),
        notes: audited.notes.clone(),
        parameters: audited.parameters.iter().cloned().collect(),
        limits_from: audited.limits_from.word().to_owned(),
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
        evidence: audited.evidence.as_ref().map(evidence),
        causes: audited.causes.iter().map(cause).collect(),
        settings: audited.settings.iter().map(settings).collect(),
        advice: audited.advice.as_ref().map(advice),
    }
}

fn advice(advice: &AdviceOutcome) -> AdviceReport {
    let word = |rule: Rule| match rule {
        Rule::Accuracy => Some("accuracy".to_owned()),
        Rule::Stability => Some("stability".to_owned()),
        Rule::Neither => None,
    };
    AdviceReport {
        largest_step: advice.largest_step.and_then(finite),
        ruled_by: advice.ruled_by.and_then(word),
        text: advice.text.clone(),
    }
}

fn settings(settings: &SettingsOutcome) -> SettingsReport {
    let rung = |rung: &SettingRung| SettingRungReport {
        file: rung.file.clone(),
        setting: rung.setting,
        error: finite(rung.error),
        error_over_setting: finite(rung.ratio),
        counts: rung.counts,
    };
    SettingsReport {
        channel: settings.channel.clone(),
        rungs: settings.rungs.iter().map(rung).collect(),
        slope: settings.slope.and_then(|(slope, _, _)| finite(slope)),
        low: settings.slope.and_then(|(_, low, _)| finite(low)),
        high: settings.slope.and_then(|(_, _, high)| finite(high)),
        spread: settings.spread.and_then(finite),
        proportional: settings.proportional,
        needed: settings.needed,
        text: settings.text.clone(),
    }
}

fn run(run: &RunOutcome) -> RunReport {
    RunReport {
        file: run.file.clone(),
        role: run.role.word().to_owned(),
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

fn cause(cause: &CauseOutcome) -> CauseReport {
    CauseReport {
        kind: cause.kind.to_owned(),
        file: cause.file.clone(),
        text: cause.text.clone(),
        number: cause.number.and_then(finite),
        left_over: finite(cause.left_over),
    }
}

fn evidence(evidence: &EvidenceOutcome) -> EvidenceReport {
    let claim = |claim: &ClaimOutcome| ClaimReport {
        what: claim.what.to_owned(),
        stated: claim.stated.clone(),
        verdict: claim.support.word().to_owned(),
        text: claim.text.clone(),
    };
    EvidenceReport {
        verdict: evidence.support.map(|support| support.word().to_owned()),
        claims: evidence.claims.iter().map(claim).collect(),
        families: evidence.families.clone(),
        runs: evidence.runs.iter().map(run_evidence).collect(),
        growth: evidence.growth.as_ref().map(growth_summary),
    }
}

fn growth_summary(growth: &GrowthSummary) -> GrowthSummaryReport {
    let damping = |damping: Damping| DampingReport {
        z: [damping.z.0, damping.z.1],
        factor: damping.factor,
        doubt: damping.doubt,
        exact: damping.exact,
    };
    GrowthSummaryReport {
        coefficients: growth.coefficients,
        order: growth.coefficients.map(|count| count.saturating_sub(1)),
        exact: growth.exact,
        damping: growth.damping.map(damping),
        missing: growth.missing.map(str::to_owned),
    }
}

fn run_evidence(run: &RunEvidence) -> RunEvidenceReport {
    let consistent = |one: &Consistent| ConsistentReport {
        family: one.family.clone(),
        step: one.step,
        steps_per_row: one.steps_per_row,
        largest_residual: finite(one.largest_residual),
        inputs: one.inputs.to_owned(),
    };
    let pair = |(re, im): (f64, f64)| [re, im];
    let growth = |growth: &GrowthOutcome| GrowthReport {
        eigenvalue: pair(growth.eigenvalue),
        z: pair(growth.z),
        factor: pair(growth.factor),
        doubt: growth.doubt,
        exact: pair(growth.exact),
        steps_per_row: growth.steps_per_row,
        per_step: growth.per_step.map(|(factor, _)| factor),
        per_step_doubt: growth.per_step.map(|(_, doubt)| doubt),
    };
    RunEvidenceReport {
        file: run.file.clone(),
        claim: PairReport {
            method: run.method.clone(),
            step: run.step,
        },
        verdict: run.support.map(|support| support.word().to_owned()),
        consistent: run.consistent.iter().map(consistent).collect(),
        exact: run.exact,
        growth: run.growth.iter().map(growth).collect(),
        note: run.note.clone(),
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

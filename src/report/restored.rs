//! A report that was read, back to an outcome: as much of it as the lines below the table of
//! the terminal need, and whoever holds it against requirements. What the JSON report does not
//! hold stays empty, so this is for joined parts alone.

use super::wire::{
    AuditReport, ChannelReport, ClaimReport, EvidenceReport, RequiredReport, ReviewReport,
    RunReport, SubmissionReport,
};
use crate::fault::Fault;
use crate::judge::{Support, Verdict};
use crate::outcome::{
    AdviceOutcome, Audited, CauseOutcome, ChannelOutcome, ClaimOutcome, ErrorOutcome,
    EvidenceOutcome, LimitsFrom, NotAudited, Outcome, Required, Review, RowOutcome, RunOutcome,
    SettingsOutcome,
};
use crate::submission::{Expect, Role, Setting, Submission};

/// As far as it goes.
///
/// # Errors
/// A report with words that no report has.
pub fn restored(report: &AuditReport) -> Result<Outcome, Fault> {
    outcome(report).ok_or_else(|| {
        let fault = Fault::new("a verdict, an expectation or a role is none that reports have");
        fault.help("a part is damaged: audit it again")
    })
}

fn outcome(report: &AuditReport) -> Option<Outcome> {
    let submissions = report.submissions.iter().map(submission);
    let not_audited = report.not_audited.iter().map(|missing| NotAudited {
        name: missing.name.clone(),
        faults: missing.faults.iter().map(Fault::new).collect(),
    });
    Some(Outcome {
        submissions: submissions.collect::<Option<_>>()?,
        not_audited: not_audited.collect(),
        review: report.review.as_ref().map(review),
        ..Outcome::default()
    })
}

fn review(report: &ReviewReport) -> Review {
    Review {
        limits: report.limits.clone(),
        require: report.require.clone(),
        refuses_own_parameters: report.own_parameters == "refuse",
        refuses_own_cases: report.own_cases == "refuse",
        refuses_controls: report.controls == "refuse",
        required: report.required.iter().map(required).collect(),
    }
}

fn required(report: &RequiredReport) -> Required {
    Required {
        case: report.case.clone(),
        runs: report.runs,
        rows: report.rows,
        methods: report.methods.clone(),
        method_shown: report.method_shown,
        met_by: report.met_by.clone(),
        text: report.text.clone(),
    }
}

fn verdict(word: &str) -> Option<Verdict> {
    let all = [Verdict::Pass, Verdict::Undecided, Verdict::Fail];
    all.into_iter().find(|verdict| verdict.word() == word)
}

fn submission(report: &SubmissionReport) -> Option<Audited> {
    let expectations = [Expect::Pass, Expect::Fail, Expect::Undecided];
    let expect = expectations
        .into_iter()
        .find(|expect| expect.word() == report.expect)?;
    let mut known = LimitsFrom::ALL.into_iter();
    let limits_from = known.find(|from| from.word() == report.limits_from)?;
    let stated = Submission {
        producer: report.producer.clone(),
        expect,
        parameters: report.parameters.clone(),
        ..Submission::default()
    };
    let (name, case) = (report.name.clone(), report.case.clone());
    Some(Audited {
        verdict: verdict(&report.verdict)?,
        reasons: report.reasons.clone(),
        notes: report.notes.clone(),
        runs: report.runs.iter().map(run).collect::<Option<_>>()?,
        // Every run holds what the submission claims.
        claimed_method: (report.evidence.iter())
            .find_map(|evidence| evidence.runs.first()?.claim.method.clone()),
        evidence: match &report.evidence {
            Some(report) => Some(evidence(report)?),
            None => None,
        },
        causes: report
            .causes
            .iter()
            .map(|cause| CauseOutcome {
                file: cause.file.clone(),
                kind: "",
                text: cause.text.clone(),
                number: cause.number,
                left_over: cause.left_over.unwrap_or(f64::NAN),
            })
            .collect(),
        settings: report
            .settings
            .iter()
            .map(|settings| SettingsOutcome {
                channel: settings.channel.clone(),
                rungs: Vec::new(),
                slope: None,
                spread: settings.spread,
                proportional: settings.proportional,
                needed: settings.needed,
                text: settings.text.clone(),
            })
            .collect(),
        advice: report.advice.as_ref().map(|advice| AdviceOutcome {
            largest_step: advice.largest_step,
            ruled_by: None,
            text: advice.text.clone(),
        }),
        ..Audited::new(name, case, String::new(), &stated, limits_from)
    })
}

/// The claims and what the rows say of them.
fn evidence(report: &EvidenceReport) -> Option<EvidenceOutcome> {
    Some(EvidenceOutcome {
        support: None,
        claims: report.claims.iter().map(claim).collect::<Option<_>>()?,
        families: Vec::new(),
        runs: Vec::new(),
        growth: None,
    })
}

fn claim(report: &ClaimReport) -> Option<ClaimOutcome> {
    let supports = [Support::Agrees, Support::Contradicts, Support::CannotTell];
    let mut supports = supports.into_iter();
    Some(ClaimOutcome {
        what: (["method", "order", "step"].into_iter()).find(|what| *what == report.what)?,
        stated: report.stated.clone(),
        support: supports.find(|support| support.word() == report.verdict)?,
        text: report.text.clone(),
    })
}

fn run(report: &RunReport) -> Option<RunOutcome> {
    let mut roles = [Role::Result, Role::Rung].into_iter();
    Some(RunOutcome {
        file: report.file.clone(),
        role: roles.find(|role| role.word() == report.role)?,
        setting: report
            .tolerance
            .map_or(Setting::Unstated, Setting::Tolerance),
        step: report.step,
        cost: None,
        rows: report.rows,
        layout: report.layout.clone(),
        stamps: String::new(),
        findings: Vec::new(),
        channels: report.channels.iter().map(channel).collect::<Option<_>>()?,
    })
}

fn channel(report: &ChannelReport) -> Option<ChannelOutcome> {
    // Absent: not finite.
    let number = |value: Option<f64>| value.unwrap_or(f64::INFINITY);
    let unknown = RowOutcome {
        at: f64::NAN,
        error: f64::NAN,
        resolution: f64::NAN,
        limit: f64::NAN,
    };
    let errors = report.digits.as_ref().map(|digits| ErrorOutcome {
        worst: number(report.worst_error),
        at: number(report.at),
        rms: number(report.rms_error),
        end: number(report.end_error),
        peak: number(report.peak),
        resolution: number(report.resolution),
        digits: digits.clone(),
        limit: number(report.limit),
        limit_used: number(report.limit_used),
        decisive: unknown,
        doubtful: unknown,
        broken: false,
    });
    Some(ChannelOutcome {
        name: report.name.clone(),
        unit: report.unit.clone(),
        errors,
        verdict: verdict(&report.verdict)?,
        trace: Vec::new(),
    })
}

//! The JUnit XML report: what fails an audit fails a test case, and nothing else does.
//!
//! A suite for each submission has a case for the rows of every run, for every channel of
//! a result, every order and every claim, then one for all that these do not tell. In a
//! control, what is wrong is skipped, and its expectation is the case that counts. No time,
//! host or duration is written: the same audit gives the same bytes.

use std::collections::BTreeMap;

use quick_junit::{NonSuccessKind, Report, TestCase, TestCaseStatus, TestSuite};

use super::review_text::own_parameters;
use super::text::xml_text;
use crate::fault::{Fault, Result};
use crate::judge::{Support, Verdict};
use crate::number::plain;
use crate::outcome::{
    Audited, Changes, ClaimOutcome, NotAudited, OrderOutcome, Outcome, Required, RunOutcome,
};
use crate::submission::{Expect, Role};

/// The report as bytes.
///
/// # Errors
/// None that text in memory can have; the writer may say otherwise.
pub fn audit_junit(outcome: &Outcome) -> Result<Vec<u8>> {
    let mut report = Report::new(match &outcome.part {
        Some(part) => format!("stepgauge, {}", part.name()),
        None => "stepgauge".to_owned(),
    });
    for submission in &outcome.submissions {
        report.add_test_suite(suite(submission));
    }
    if let Some(review) = outcome
        .review
        .as_ref()
        .filter(|one| !one.required.is_empty())
    {
        report.add_test_suite(required(&review.required));
    }
    for missing in &outcome.not_audited {
        report.add_test_suite(not_audited(missing));
    }
    if outcome.left > 0 {
        report.add_test_suite(interrupted(outcome.left));
    }
    if let Some(changes) = &outcome.changes {
        report.add_test_suite(changes_suite(changes));
    }
    let mut bytes = Vec::new();
    report
        .serialize(&mut bytes)
        .map_err(|error| Fault::new(format!("the report cannot be made: {error}")))?;
    Ok(bytes)
}

/// How a case ended.
enum Ended {
    Passed,
    /// Neither passed nor failed, and why.
    Open(String),
    /// By a verdict, with its sentences.
    Failed(&'static str, Vec<String>),
}

/// The cases of one suite.
struct Cases<'a> {
    suite: TestSuite,
    class: String,
    /// Reasons of the submission, and whether a case tells them.
    reasons: Vec<(&'a str, bool)>,
    is_control: bool,
    failed: bool,
    names: BTreeMap<String, usize>,
}

fn suite(submission: &Audited) -> TestSuite {
    let mut cases = Cases {
        suite: TestSuite::new(xml_text(&submission.name)),
        class: xml_text(&submission.name),
        reasons: submission
            .reasons
            .iter()
            .map(|r| (r.as_str(), false))
            .collect(),
        is_control: submission.expect != Expect::Pass,
        failed: false,
        names: BTreeMap::new(),
    };
    for run in &submission.runs {
        cases.run(run);
    }
    for order in &submission.orders {
        cases.order(order, submission.order_verdict);
    }
    let claims = submission.evidence.iter().flat_map(|found| &found.claims);
    for claim in claims {
        cases.claim(claim);
    }
    cases.whole(submission);
    let limits = submission.limits_from.word();
    cases.suite.add_property(("limits", limits));
    if let Some(parameters) = own_parameters(submission) {
        let parameters = xml_text(&parameters);
        (cases.suite).add_property(("parameters", parameters.as_str()));
    }
    if !submission.in_order() {
        let causes = submission.causes.iter();
        let causes = causes.map(|cause| format!("likely cause: {}", cause.text));
        let step = submission.advice.iter();
        let step = step.map(|advice| format!("step: {}", advice.text));
        let lines: Vec<String> = causes.chain(step).map(|line| xml_text(&line)).collect();
        if !lines.is_empty() {
            cases.suite.set_system_out(lines.join("\n"));
        }
    }
    cases.suite
}

impl Cases<'_> {
    /// Of no submission.
    fn of(class: String) -> Cases<'static> {
        Cases {
            suite: TestSuite::new(class.clone()),
            class,
            reasons: Vec::new(),
            is_control: false,
            failed: false,
            names: BTreeMap::new(),
        }
    }

    /// The reasons that one case tells.
    fn told(&mut self, is: impl Fn(&str) -> bool) -> Vec<String> {
        let mut told = Vec::new();
        for (reason, known) in &mut self.reasons {
            if is(reason) {
                *known = true;
                told.push((*reason).to_owned());
            }
        }
        told
    }

    fn add(&mut self, name: String, ended: Ended) {
        let ended = match ended {
            Ended::Failed(_, texts) if self.is_control => {
                Ended::Open(format!("part of a control: {}", texts.join("; ")))
            }
            other => other,
        };
        self.push(name, ended);
    }

    fn push(&mut self, name: String, ended: Ended) {
        self.failed |= matches!(ended, Ended::Failed(..));
        let status = match ended {
            Ended::Passed => TestCaseStatus::success(),
            Ended::Open(text) => {
                let mut status = TestCaseStatus::skipped();
                status.set_message(xml_text(&text));
                status
            }
            Ended::Failed(kind, texts) => not_passed(NonSuccessKind::Failure, kind, &texts),
        };
        // Two runs may state the same step; some readers keep one case of a name.
        let count = self.names.entry(name.clone()).or_default();
        *count += 1;
        let name = match *count {
            1 => name,
            more => format!("{name} ({more})"),
        };
        let mut case = TestCase::new(xml_text(&name), status);
        case.set_classname(self.class.clone());
        self.suite.add_test_case(case);
    }

    /// The rows of a file, and the channels of one that limits apply to.
    fn run(&mut self, run: &RunOutcome) {
        let file = &run.file;
        let fatal = run.findings.iter().filter(|finding| finding.fatal);
        let fatal: Vec<&str> = fatal.map(|finding| finding.text.as_str()).collect();
        let of_file = format!("{file}:");
        let mut texts = self.told(|reason| {
            reason.starts_with(&of_file) && fatal.iter().any(|text| reason.ends_with(text))
        });
        if texts.is_empty() {
            texts.extend(fatal.iter().map(|text| format!("{file}: {text}")));
        }
        let ended = match texts.is_empty() {
            true => Ended::Passed,
            false => Ended::Failed(Verdict::Fail.word(), texts),
        };
        self.add(format!("{file}: rows"), ended);
        for channel in run.channels.iter().filter(|_| run.role == Role::Result) {
            let start = format!("{file}: `{}`", channel.name);
            let mut texts = self.told(|reason| reason.starts_with(&start));
            if texts.is_empty() {
                texts.push(format!("{start} has no value in some rows"));
            }
            let ended = match channel.verdict {
                Verdict::Pass => Ended::Passed,
                verdict => Ended::Failed(verdict.word(), texts),
            };
            self.add(format!("{file}: channel {}", channel.name), ended);
        }
    }

    /// A channel that shows no order does not speak against others that do.
    fn order(&mut self, order: &OrderOutcome, all: Option<Verdict>) {
        let channel = &order.channel;
        let starts = [
            format!("`{channel}` shows order"),
            format!("`{channel}`: the claimed order"),
        ];
        let mut texts = self.told(|reason| starts.iter().any(|start| reason.starts_with(start)));
        let note = || {
            order
                .note
                .clone()
                .unwrap_or_else(|| "it cannot be told".to_owned())
        };
        if texts.is_empty() {
            texts.push(format!("`{channel}`: {}", note()));
        }
        let ended = match order.verdict {
            Some(Verdict::Pass) => Ended::Passed,
            None => Ended::Open("no order is claimed".to_owned()),
            Some(Verdict::Undecided) if all == Some(Verdict::Pass) => Ended::Open(note()),
            Some(verdict) => Ended::Failed(verdict.word(), texts),
        };
        self.add(format!("order of {channel}"), ended);
    }

    fn claim(&mut self, claim: &ClaimOutcome) {
        let ended = match claim.support {
            Support::Agrees => Ended::Passed,
            Support::CannotTell => Ended::Open(claim.text.clone()),
            Support::Contradicts => {
                let mut texts = self.told(|reason| reason.ends_with(&claim.text));
                if texts.is_empty() {
                    texts.push(claim.text.clone());
                }
                Ended::Failed(claim.support.word(), texts)
            }
        };
        self.add(format!("claimed {} {}", claim.what, claim.stated), ended);
    }

    /// The expectation of a control; else what no other case tells.
    fn whole(&mut self, submission: &Audited) {
        let is = submission.verdict.word();
        let expected = submission.expect.word();
        let in_order = submission.in_order();
        if self.is_control {
            let ended = match in_order {
                true => Ended::Passed,
                false => {
                    let text = format!("was expected to be {expected}, the verdict is {is}");
                    Ended::Failed("not expected", vec![text])
                }
            };
            self.push(format!("control: {expected} is expected"), ended);
            return;
        }
        let rest = self.reasons.iter().filter(|(_, told)| !told);
        let mut rest: Vec<String> = rest.map(|(reason, _)| (*reason).to_owned()).collect();
        if rest.is_empty() && !self.failed {
            rest.push(format!("the verdict is {is}"));
        }
        let ended = match in_order || rest.is_empty() {
            true => Ended::Passed,
            false => Ended::Failed(is, rest),
        };
        self.push("all else".to_owned(), ended);
    }
}

fn not_passed(how: NonSuccessKind, kind: &str, texts: &[String]) -> TestCaseStatus {
    let lines: Vec<String> = texts.iter().map(|text| xml_text(text)).collect();
    let mut status = TestCaseStatus::non_success(how);
    if let Some(first) = lines.first() {
        status.set_message(first.clone());
    }
    status.set_type(kind).set_description(lines.join("\n"));
    status
}

fn not_audited(missing: &NotAudited) -> TestSuite {
    let name = xml_text(&missing.name);
    let texts: Vec<String> = missing.faults.iter().map(Fault::in_one_line).collect();
    let status = not_passed(NonSuccessKind::Error, "not audited", &texts);
    let mut case = TestCase::new("audit", status);
    case.set_classname(name.clone());
    let mut suite = TestSuite::new(name);
    suite.add_test_case(case);
    suite
}

/// An audit that was interrupted is none that passed.
fn interrupted(left: usize) -> TestSuite {
    let text = format!("the audit was interrupted: {left} submissions were not looked at");
    let status = not_passed(NonSuccessKind::Error, "interrupted", &[text]);
    let mut case = TestCase::new("audit", status);
    case.set_classname("interrupted");
    let mut suite = TestSuite::new("interrupted");
    suite.add_test_case(case);
    suite
}

/// What a reviewer requires, a case each.
fn required(required: &[Required]) -> TestSuite {
    let mut cases = Cases::of("required".to_owned());
    for one in required {
        let ended = match one.is_met() {
            true => Ended::Passed,
            false => Ended::Failed("missing", vec![one.text.clone()]),
        };
        cases.add(format!("case {}", one.case), ended);
    }
    cases.suite
}

/// What became worse since an earlier audit, a case each.
fn changes_suite(changes: &Changes) -> TestSuite {
    let mut cases = Cases::of(xml_text(&format!("changes since {}", changes.earlier)));
    for change in &changes.worse {
        let parts = [change.file.as_deref(), change.channel.as_deref()];
        let mut name = format!("{}: {}", change.submission, change.kind.word());
        for part in parts.into_iter().flatten() {
            name += &format!(" {part}");
        }
        let text = format!("{}: {}", change.submission, change.text);
        cases.add(name, Ended::Failed("worse", vec![text]));
    }
    if changes.worse.is_empty() {
        let share = plain(100.0 * changes.worse_by);
        let name = format!("no worst error grew by more than {share} %, nothing else became worse");
        cases.add(name, Ended::Passed);
    }
    cases.suite
}

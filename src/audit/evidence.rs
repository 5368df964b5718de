//! Evidence for a submission: which methods fit its runs, and what that says of its claims.

use super::Model;
use super::run::RunCompared;
use crate::judge::{self, Answer, Claimed, Support, Verdict};
use crate::method::{Evidence, Method, Reading, find_all};
use crate::number::plain;
use crate::outcome::{Audited, ClaimOutcome, Consistent, EvidenceOutcome, RunEvidence};
use crate::submission::{Setting, Submission};

/// What was found for one run.
pub(super) struct RunFound {
    pub evidence: Evidence,
    pub answer: Option<Answer>,
}

/// Claimed steps and rows agree to this part of the step.
const FITS: f64 = 1e-6;

/// How steps lie among rows.
pub(super) enum Among {
    /// A whole number of steps from row to row.
    StepsPerRow(u64),
    /// So many rows to a step: all but one of them are interpolated.
    RowsPerStep(u64),
}

/// `None` where neither is a whole number of the other.
pub(super) fn steps_among_rows(spacing: f64, step: f64) -> Option<Among> {
    let whole = |ratio: f64| {
        let count = ratio.round();
        (count >= 1.0 && (ratio - count).abs() <= FITS * ratio).then_some(count as u64)
    };
    let per_row = whole(spacing / step).map(Among::StepsPerRow);
    per_row.or_else(|| whole(step / spacing).map(Among::RowsPerStep))
}

/// Asks every run which method wrote it.
pub(super) fn ask(model: &Model, submission: &Submission, runs: &[RunCompared]) -> Vec<RunFound> {
    let methods = claimed_methods(submission);
    let ask_one = |run: &RunCompared| ask_one(model, submission, &methods, run);
    runs.iter().map(ask_one).collect()
}

/// The methods that go by the claimed name.
pub(super) fn claimed_methods(submission: &Submission) -> Vec<&'static Method> {
    submission
        .claims
        .method
        .as_deref()
        .map_or(Vec::new(), find_all)
}

fn ask_one(
    model: &Model,
    submission: &Submission,
    methods: &[&'static Method],
    run: &RunCompared,
) -> RunFound {
    let step = run.outcome.setting.step();
    let spacing = run.record.spacing.map(|(spacing, _)| spacing);
    let among = spacing
        .zip(step)
        .and_then(|(spacing, step)| steps_among_rows(spacing, step));
    let (steps, thinned) = match among {
        Some(Among::StepsPerRow(count)) => (Some(count), None),
        // Those at the steps tell.
        Some(Among::RowsPerStep(count)) => (Some(1), Some(count)),
        None => (None, None),
    };
    let thinner = thinned.map(|count| run.record.every(count));
    let claimed = claimed(model, submission, methods, run, (step, steps));
    let record = thinner.as_ref().unwrap_or(&run.record);
    let (found, mut answer) = judge::ask(&model.linear, record, &claimed);
    if let (Some(answer), Some(count)) = (&mut answer, thinned) {
        answer.text += &rows_between(count);
    }
    RunFound {
        evidence: found,
        answer,
    }
}

fn rows_between(count: u64) -> String {
    format!("; {} of {count} rows lie between the steps", count - 1)
}

fn claimed<'a>(
    model: &'a Model,
    submission: &'a Submission,
    methods: &'a [&'static Method],
    run: &RunCompared,
    (step, steps): (Option<f64>, Option<u64>),
) -> Claimed<'a> {
    Claimed {
        name: submission.claims.method.as_deref(),
        methods,
        step,
        steps,
        adaptive: matches!(run.outcome.setting, Setting::Tolerance(_)),
        unit: run.record.unit,
        time_unit: &model.case.time.unit,
    }
}

/// Asks only every `count`-th row of a run whose other rows were found to be interpolated:
/// an answer where the method claimed wrote these.
pub(super) fn ask_at_steps(
    model: &Model,
    submission: &Submission,
    methods: &[&'static Method],
    run: &RunCompared,
    count: u64,
) -> Option<Answer> {
    let (spacing, _) = run.record.spacing?;
    let apart = spacing * count as f64;
    let step = run.outcome.setting.step().unwrap_or(apart);
    let Some(Among::StepsPerRow(steps)) = steps_among_rows(apart, step) else {
        return None;
    };
    let claimed = claimed(model, submission, methods, run, (Some(step), Some(steps)));
    let (_, answer) = judge::ask(&model.linear, &run.record.every(count), &claimed);
    let mut answer = answer.filter(|answer| answer.method == Some(Support::Agrees))?;
    answer.text += &rows_between(count);
    Some(answer)
}

/// Fills in the evidence and lets a contradicted claim fail the submission.
pub(super) fn conclude(
    submission: &Submission,
    runs: &[RunCompared],
    found: &[RunFound],
    audited: &mut Audited,
) {
    let pairs = || runs.iter().zip(found);
    let methods = claimed_methods(submission);
    let run_evidence = pairs().map(|(run, found)| RunEvidence {
        file: run.outcome.file.clone(),
        method: submission.claims.method.clone(),
        step: run.outcome.setting.step(),
        support: found.answer.as_ref().map(|answer| answer.support),
        consistent: shown(found, &methods).map(consistent).collect(),
        exact: found.evidence.is_exact(),
        note: found.answer.as_ref().map(|answer| answer.text.clone()),
        growth: Vec::new(),
    });
    let run_evidence: Vec<RunEvidence> = run_evidence.collect();
    let mut claims = Vec::new();
    if let Some(name) = &submission.claims.method {
        claims.extend(together("method", name, pairs(), |answer| answer.method));
    }
    if let Some(order) = submission.claims.order {
        claims.push(of_order(order, found, audited));
    }
    for (run, found) in pairs() {
        if let Setting::Step(step) = run.outcome.setting {
            let stated = format!("{} {}", plain(step), audited.time_unit);
            let one = std::iter::once((run, found));
            claims.extend(together("step", &stated, one, |answer| answer.step));
        }
    }
    // A contradicted order has its own reasons.
    let contradicted = claims
        .iter()
        .filter(|claim| claim.support == Support::Contradicts && claim.what != "order");
    // Where the method itself is contradicted, no step of it needs a word.
    let method = claims
        .iter()
        .any(|claim| claim.what == "method" && claim.support == Support::Contradicts);
    let contradicted = contradicted.filter(|claim| !method || claim.what == "method");
    let mut told: Vec<&str> = Vec::new();
    for claim in contradicted {
        audited.verdict = Verdict::Fail;
        if !told.contains(&claim.text.as_str()) {
            told.push(&claim.text);
            let reason = format!(
                "the {} claimed, {}, is contradicted: {}",
                claim.what, claim.stated, claim.text
            );
            audited.reasons.push(reason);
        }
    }
    if let Some(order) = claims.iter().find(|claim| claim.what == "order")
        && order.support == Support::Contradicts
        && audited.order_verdict != Some(Verdict::Fail)
    {
        audited.verdict = Verdict::Fail;
        let reason = format!(
            "the order claimed, {}, is contradicted: {}",
            order.stated, order.text
        );
        audited.reasons.push(reason);
    }
    audited.evidence = Some(EvidenceOutcome {
        support: overall(&claims),
        claims,
        families: common(found),
        runs: run_evidence,
        growth: None,
    });
}

/// The consistent families; of a run that cannot be told from the exact solution, which any
/// method comes to in the end, those of the claim.
fn shown<'a>(
    found: &'a RunFound,
    claimed: &'a [&'static Method],
) -> impl Iterator<Item = &'a crate::method::Family> {
    let families = found.evidence.consistent.iter();
    let of_claim = |m: &&Method| claimed.iter().any(|c| c.name == m.name);
    families.filter(move |family| !found.evidence.is_exact() || family.methods.iter().any(of_claim))
}

fn consistent(family: &crate::method::Family) -> Consistent {
    Consistent {
        family: judge::family_name(family),
        step: family.step,
        steps_per_row: family.steps,
        largest_residual: family.fit.ratio,
        inputs: judge::reading(family.reading),
    }
}

/// One claim over several runs: any contradiction decides, else any agreement.
fn together<'a>(
    what: &'static str,
    stated: &str,
    runs: impl Iterator<Item = (&'a RunCompared, &'a RunFound)>,
    part: impl Fn(&Answer) -> Option<Support>,
) -> Option<ClaimOutcome> {
    let mut best: Option<ClaimOutcome> = None;
    for (run, found) in runs {
        let Some(answer) = &found.answer else {
            continue;
        };
        let Some(support) = part(answer) else {
            continue;
        };
        let claim = ClaimOutcome {
            what,
            stated: stated.to_owned(),
            support,
            text: format!("{}: {}", run.outcome.file, answer.text),
        };
        let rank = |support: Support| match support {
            Support::Contradicts => 2,
            Support::Agrees => 1,
            Support::CannotTell => 0,
        };
        if best
            .as_ref()
            .is_none_or(|best| rank(support) > rank(best.support))
        {
            best = Some(claim);
        }
    }
    best
}

fn overall(claims: &[ClaimOutcome]) -> Option<Support> {
    let has = |support: Support| claims.iter().any(|claim| claim.support == support);
    match claims {
        [] => None,
        _ if has(Support::Contradicts) => Some(Support::Contradicts),
        _ if has(Support::Agrees) => Some(Support::Agrees),
        _ => Some(Support::CannotTell),
    }
}

/// The order claimed, from the ladder or else from the methods that fit.
fn of_order(order: f64, found: &[RunFound], audited: &Audited) -> ClaimOutcome {
    let stated = plain(order);
    let claim = |support: Support, text: String| ClaimOutcome {
        what: "order",
        stated: stated.clone(),
        support,
        text,
    };
    match audited.order_verdict {
        Some(Verdict::Pass) => {
            return claim(Support::Agrees, "the ladder of runs shows it".to_owned());
        }
        Some(Verdict::Fail) => {
            return claim(
                Support::Contradicts,
                "the ladder of runs shows less".to_owned(),
            );
        }
        _ => {}
    }
    let (orders, beyond_chance) = orders_of_methods(found);
    let more = if found.len() < 3 {
        "runs at three or more steps would show it"
    } else {
        "the ladder of runs leaves it open"
    };
    if orders.is_empty() {
        return claim(Support::CannotTell, more.to_owned());
    }
    let mut texts: Vec<String> = orders.iter().map(|order| plain(*order)).collect();
    texts.sort();
    texts.dedup();
    let fitting = format!(
        "the methods that fit the rows are of order {}",
        texts.join(", ")
    );
    if beyond_chance && orders.iter().all(|&of| of < order - judge::LOWER) {
        claim(Support::Contradicts, fitting)
    } else if orders.iter().all(|&of| of >= order) {
        claim(Support::Agrees, fitting)
    } else {
        claim(Support::CannotTell, format!("{fitting}; {more}"))
    }
}

/// The orders of all methods that the rows of some run name, and whether one of them fits beyond
/// chance.
pub(super) fn orders_of_methods(found: &[RunFound]) -> (Vec<f64>, bool) {
    let telling = found.iter().filter(|found| !found.evidence.is_exact());
    let families = telling
        .flat_map(|found| found.evidence.told())
        .filter(|family| family.reading == Reading::AtNodes);
    let (mut orders, mut beyond_chance) = (Vec::new(), false);
    for family in families {
        beyond_chance |= family.is_beyond_chance();
        orders.extend(family.methods.iter().map(|method| f64::from(method.order)));
    }
    (orders, beyond_chance)
}

/// Methods that fit every run which rules anything out.
fn common(found: &[RunFound]) -> Vec<String> {
    let telling: Vec<&RunFound> = found
        .iter()
        .filter(|found| {
            let evidence = &found.evidence;
            let open = !evidence.consistent.is_empty() && evidence.told().next().is_none();
            evidence.is_any() && !evidence.is_exact() && !open
        })
        .collect();
    let Some((first, others)) = telling.split_first() else {
        return Vec::new();
    };
    let names = |found: &RunFound| -> Vec<&'static str> {
        let families = found.evidence.told();
        families
            .flat_map(|family| family.methods.iter().map(|method| method.name))
            .collect()
    };
    let mut common: Vec<&str> = names(first);
    common.dedup();
    common.retain(|name| others.iter().all(|other| names(other).contains(name)));
    let mut seen = Vec::new();
    common.retain(|name| {
        let new = !seen.contains(name);
        seen.push(*name);
        new
    });
    common.into_iter().map(str::to_owned).collect()
}

//! Advice on the step of a submission: from its own ladder, and from the recurrence of the
//! method that it names or that its rows show.

use super::Model;
use super::evidence::{RunFound, claimed_methods};
use super::run::{RunCompared, limit};
use crate::compare::Limit;
use crate::explain::{self, Computed, Question};
use crate::judge::{Support, Verdict};
use crate::method::{Method, Reading};
use crate::number::Double;
use crate::outcome::{Audited, RunOutcome};
use crate::submission::{Role, Setting, Submission};

/// Most steps that the run at the step of the result may have for its method to be run
/// again: searching for the largest step costs some forty such runs.
const MOST_STEPS: f64 = 50_000.0;

/// Fills in the advice; `few` where the submission is one of a few, so that there is time to
/// run its method even though it passes.
pub(super) fn advise(
    model: &Model,
    submission: &Submission,
    runs: &[RunCompared],
    found: &[RunFound],
    few: bool,
    audited: &mut Audited,
) {
    let adapts = |run: &RunCompared| matches!(run.outcome.setting, Setting::Tolerance(_));
    if runs.iter().any(adapts) {
        return;
    }
    let measured = measured(audited);
    let asked = few || audited.verdict != Verdict::Pass;
    let method = if asked {
        method(submission, runs, found, audited)
    } else {
        None
    };
    let steps = method.and_then(|method| computed(model, submission, runs, method));
    let computed = steps.as_ref().and_then(|steps| {
        let method = steps.methods.first()?;
        Some(Computed {
            method,
            jumps: &steps.jumps,
        })
    });
    // A file that is cut short or has faults of its own does not fail by its step.
    let breaks = |run: &&RunOutcome| {
        let errors = run.channels.iter().filter_map(|c| c.errors.as_ref());
        run.role == Role::Result && errors.into_iter().any(|errors| errors.broken)
    };
    let broken = audited.runs.iter().filter(breaks);
    // A step that was not taken is no matter.
    let believed = audited.evidence.as_ref().is_none_or(|evidence| {
        let mut claims = evidence.claims.iter();
        claims.all(|claim| claim.what == "order" || claim.support != Support::Contradicts)
    });
    let failing = broken.filter_map(|run| run.step).reduce(f64::max);
    let failing = failing.filter(|_| believed);
    let asked = explain::Asked {
        measured,
        jumps: model
            .exact
            .jump_after(model.exact.from(), f64::INFINITY)
            .is_some(),
        failing,
        explained: audited
            .causes
            .iter()
            .any(|cause| !cause.kind.starts_with("jump")),
        time_unit: &audited.time_unit,
    };
    audited.advice = explain::advice(&asked, computed);
}

/// The order and the step of the channel that needs the shortest one; `None` where a
/// channel of a result has no order to go by. Beyond the coarsest run no order was seen.
fn measured(audited: &Audited) -> Option<(f64, f64)> {
    if audited.order_verdict == Some(Verdict::Fail) {
        return None;
    }
    let steps = audited.runs.iter().filter_map(|run| run.step);
    let coarsest = steps.fold(0.0, f64::max);
    let mut least: Option<(f64, f64)> = None;
    for run in audited.runs.iter().filter(|run| run.role == Role::Result) {
        for channel in &run.channels {
            let errors = channel.errors.as_ref()?;
            let order = audited.orders.iter().find(|o| o.channel == channel.name);
            let order = order.and_then(|order| order.observed);
            let step = order.zip(run.step).and_then(|((order, ..), step)| {
                let needed = explain::measured_step(step, errors.limit_used, order)?;
                Some((order, needed.min(coarsest)))
            });
            match step {
                Some(step) if least.is_none_or(|least| step.1 < least.1) => least = Some(step),
                Some(_) => {}
                // A channel far within its limit does not decide.
                None if errors.limit_used < 0.1 => {}
                None => return None,
            }
        }
    }
    least
}

/// The method that the rows show or that is claimed.
fn method(
    submission: &Submission,
    runs: &[RunCompared],
    found: &[RunFound],
    audited: &Audited,
) -> Option<&'static Method> {
    let contradicted = audited.evidence.as_ref().is_some_and(|evidence| {
        let claims = evidence.claims.iter();
        claims
            .filter(|claim| claim.what == "method")
            .any(|claim| claim.support == Support::Contradicts)
    });
    if let [claimed] = claimed_methods(submission)[..]
        && !contradicted
    {
        return Some(claimed);
    }
    let results = runs.iter().zip(found);
    let result = results.filter(|(run, _)| run.outcome.role == Role::Result);
    let telling = |evidence: &crate::method::Evidence| evidence.is_any() && !evidence.is_exact();
    let mut only = None;
    for (_, found) in result.filter(|(_, found)| telling(&found.evidence)) {
        let told: Vec<_> = found.evidence.told().collect();
        let [family] = told[..] else {
            return None;
        };
        if family.reading != Reading::AtNodes {
            return None;
        }
        only = family.methods.first().copied();
    }
    only
}

/// The method run over the case with the limits of the submission.
fn computed(
    model: &Model,
    submission: &Submission,
    runs: &[RunCompared],
    method: &'static Method,
) -> Option<crate::outcome::StepsOutcome> {
    let span = (model.exact.to() - model.exact.from()).to_f64();
    let results = runs.iter().filter(|run| run.outcome.role == Role::Result);
    let step = results
        .filter_map(|run| run.outcome.step)
        .reduce(f64::min)?;
    if step <= 0.0 || span / step > MOST_STEPS {
        return None;
    }
    let is_judged = |channel: usize| {
        let mut columns = runs.iter().flat_map(|run| &run.deviations);
        columns.any(|(index, _)| *index == channel)
    };
    let channels = model.case.channels();
    let limits: Vec<Option<Limit>> = channels
        .iter()
        .enumerate()
        .map(|(index, channel)| {
            is_judged(index).then(|| limit(&model.case, &submission.limits, channel.name))
        })
        .collect();
    let question = Question::new(&model.case, &model.exact, &limits);
    Some(explain::steps(&question, &[method], &[Double::from(step)]))
}

//! The runs of a submission together: which are results, what order they show, what
//! the whole comes to.

use super::evidence::{RunFound, claimed_methods, orders_of_methods};
use super::run::RunCompared;
use crate::case::Case;
use crate::compare::{Rung, Sight, observe};
use crate::explain::{self, Place};
use crate::judge::{self, OrderVerdict, Support, Verdict};
use crate::method;
use crate::number::{plain, short};
use crate::outcome::{Audited, ChannelOutcome, OrderOutcome, RunOutcome};
use crate::submission::{Role, Setting, Submission};

/// The finest run is the result unless the submission says otherwise; where steps are
/// not known, all runs are.
pub(super) fn assign_roles(runs: &mut [RunCompared]) {
    if runs.iter().any(|run| run.role_stated == Some(Role::Result)) {
        for run in runs.iter_mut() {
            run.outcome.role = run.role_stated.unwrap_or(Role::Rung);
        }
        return;
    }
    let finest = runs
        .iter()
        .enumerate()
        .filter(|(_, run)| run.role_stated != Some(Role::Rung))
        .filter_map(|(index, run)| Some((index, rung_setting(&run.outcome)?)))
        .min_by(|a, b| a.1.total_cmp(&b.1));
    let known = runs.iter().all(|run| rung_setting(&run.outcome).is_some());
    if let Some((finest, _)) = finest.filter(|_| known) {
        for (index, run) in runs.iter_mut().enumerate() {
            run.outcome.role = if index == finest {
                Role::Result
            } else {
                Role::Rung
            };
        }
    } else if runs.iter().all(|run| run.role_stated == Some(Role::Rung)) {
        // A submission of rungs alone would have nothing that a limit applies to.
        runs.iter_mut()
            .for_each(|run| run.outcome.role = Role::Result);
    }
}

/// Runs that are finer than every result: limits do not apply to them, which has to be
/// said.
pub(super) fn note_hidden_rungs(runs: &[RunCompared], notes: &mut Vec<String>) {
    let settings = |role: Role| {
        let of_role = runs.iter().filter(move |run| run.outcome.role == role);
        of_role.filter_map(|run| Some((rung_setting(&run.outcome)?, &run.outcome.file)))
    };
    let finest = settings(Role::Result)
        .map(|(setting, _)| setting)
        .fold(f64::INFINITY, f64::min);
    for (setting, file) in settings(Role::Rung) {
        if setting < finest {
            notes.push(format!(
                "{file}: finer than the result, but limits do not apply to it"
            ));
        }
    }
}

/// What places a run on its ladder.
pub(super) fn rung_setting(run: &RunOutcome) -> Option<f64> {
    match run.setting {
        Setting::Tolerance(tolerance) => Some(tolerance),
        Setting::Step(step) => Some(step),
        Setting::Unstated => run.step,
    }
}

/// True where the rows are those of a method of two steps: a first step at one order less
/// leaves the order as it is, yet counts as much as all others at moderate steps.
fn starts_low(submission: &Submission, found: &[RunFound]) -> bool {
    let methods = claimed_methods(submission);
    let two = |m: &&crate::method::Method| m.schemes.iter().all(|scheme| scheme.steps_back() == 2);
    let agrees = |one: &RunFound| {
        let answer = one.answer.as_ref();
        answer.is_some_and(|answer| answer.method == Some(Support::Agrees))
    };
    !methods.is_empty() && methods.iter().all(two) && found.iter().all(agrees)
}

pub(super) fn judge_orders(
    case: &Case,
    submission: &Submission,
    runs: &[RunCompared],
    found: &[RunFound],
    time_constant: Option<f64>,
    audited: &mut Audited,
) {
    let of_method = submission
        .claims
        .method
        .as_deref()
        .map(|name| (name, method::find(name)));
    if let Some((name, None)) = of_method
        && submission.claims.order.is_none()
    {
        audited.notes.push(format!(
            "method `{name}` is not in the catalogue: no order follows"
        ));
    }
    let from_method = of_method.and_then(|(_, found)| Some(f64::from(found?.order)));
    let tolerances = runs
        .iter()
        .any(|run| matches!(run.outcome.setting, Setting::Tolerance(_)));
    let mixed = tolerances
        && runs
            .iter()
            .any(|run| !matches!(run.outcome.setting, Setting::Tolerance(_)));
    if tolerances && !mixed && submission.claims.order.is_some() {
        let note = "an order is claimed, but runs with error settings cannot show it";
        audited.notes.push(note.to_owned());
    }
    // An error setting has no order to be held to: the slope is reported.
    let claimed = submission
        .claims
        .order
        .or(from_method)
        .filter(|_| !tolerances || mixed);
    if runs.len() < 2 {
        if let Some(order) = submission.claims.order {
            let text = format!(
                "the claimed order {order} cannot be told from one run; add runs of other steps"
            );
            audited.notes.push(text);
        }
        return;
    }
    let slack = submission.limits.order_slack.unwrap_or(judge::ORDER_SLACK);
    let misfit = runs
        .iter()
        .find_map(|run| step_misfit(&run.outcome, run.spacing?));
    if let Some(misfit) = &misfit {
        audited.notes.push(misfit.clone());
    }
    let finest = runs
        .iter()
        .filter_map(|run| rung_setting(&run.outcome))
        .fold(f64::INFINITY, f64::min);
    let fast = time_constant.is_some_and(|constant| finest > constant) && !tolerances;
    let unsettled = if fast {
        Some("the steps do not resolve the fastest mode")
    } else if starts_low(submission, found) {
        Some("the first steps, made at a lower order, still count")
    } else {
        None
    };
    let (orders, _) = orders_of_methods(found);
    let highest = orders.into_iter().reduce(f64::max);
    for (index, channel) in case.channels().iter().enumerate() {
        let rungs: Option<Vec<Rung>> = runs.iter().map(|run| rung(run, index)).collect();
        let sight = match rungs {
            _ if mixed => Sight::TooFew("some runs state steps, others error settings".to_owned()),
            _ if misfit.is_some() => {
                Sight::TooFew("a stated step contradicts the time stamps".to_owned())
            }
            Some(rungs) => observe(&rungs),
            None if runs
                .iter()
                .all(|run| run.deviations.iter().all(|(c, _)| *c != index)) =>
            {
                continue;
            }
            None => Sight::TooFew("not every run has a step and values".to_owned()),
        };
        let mut order = judge::of_order(&sight, claimed, slack, unsettled);
        if let Some(claimed) = claimed {
            doubt_single_pair(claimed, highest, &mut order);
            let reason = explain::order_reason(channel.name, claimed, &order);
            audited.reasons.extend(reason);
        }
        if tolerances && !mixed && order.finest.is_some() {
            order.note = Some("slope of the error over the error setting".to_owned());
        }
        audited.orders.push(OrderOutcome {
            channel: channel.name.to_owned(),
            claimed,
            observed: order.finest.map(|pair| (pair.order, pair.low, pair.high)),
            rungs_used: order.rungs_used,
            verdict: order.verdict,
            note: order.note,
        });
    }
    audited.order_verdict = judge::of_orders(audited.orders.iter().filter_map(|o| o.verdict));
    if audited.order_verdict == Some(Verdict::Pass) {
        // Channels that show nothing do not speak against one that shows the order.
        audited.reasons.clear();
    }
}

/// A single pair of runs at long steps can show more than the order of its method: where all
/// methods that the rows name are of a lower one, it passes nothing.
fn doubt_single_pair(claimed: f64, highest: Option<f64>, order: &mut OrderVerdict) {
    if order.verdict == Some(Verdict::Pass)
        && order.rungs_used == 2
        && let Some(highest) = highest.filter(|&highest| highest < claimed - judge::LOWER)
    {
        order.verdict = Some(Verdict::Undecided);
        order.note = Some(format!(
            "one pair of runs shows it, yet the methods that fit the rows are of order {} at most",
            plain(highest)
        ));
    }
}

/// A stated step that the rows contradict: rows lie a whole number of steps apart, or,
/// where they were interpolated, divide the step.
fn step_misfit(run: &RunOutcome, spacing: f64) -> Option<String> {
    let Setting::Step(step) = run.setting else {
        return None;
    };
    let ratio = if spacing >= step {
        spacing / step
    } else {
        step / spacing
    };
    let fits = (ratio - ratio.round()).abs() <= 2e-3 * ratio;
    (!fits).then(|| {
        format!(
            "{}: the stated step {} does not fit rows that are {} apart",
            run.file,
            plain(step),
            short(spacing)
        )
    })
}

/// A run as a rung of its ladder, for one channel.
pub(super) fn rung(run: &RunCompared, channel: usize) -> Option<Rung> {
    let (_, deviation) = run.deviations.iter().find(|(index, _)| *index == channel)?;
    (deviation.rows > 0).then_some(Rung {
        setting: rung_setting(&run.outcome)?,
        error: deviation.worst,
        resolution: deviation.worst_resolution,
        peak: deviation.peak,
        rows: deviation.rows,
        clock: f64::EPSILON * run.latest.abs() * deviation.steepest,
    })
}

/// Faults of every file count; limits apply to results alone.
pub(super) fn judge_runs(audited: &mut Audited) {
    let mut verdict = audited.order_verdict.unwrap_or(Verdict::Pass);
    // What is wrong with the files comes first, then the order, then the limits.
    let (mut faults, mut limits) = (Vec::new(), Vec::new());
    for run in &audited.runs {
        for finding in run.findings.iter().filter(|finding| finding.fatal) {
            verdict = Verdict::Fail;
            faults.push(explain::fatal_finding(&run.file, finding));
        }
        if run.role == Role::Rung {
            continue;
        }
        if run.channels.is_empty() {
            verdict = Verdict::Fail;
        }
        for channel in &run.channels {
            verdict = verdict.and(channel.verdict);
            limits.extend(limit_reason(audited, run, channel));
        }
    }
    audited.verdict = verdict;
    faults.append(&mut audited.reasons);
    faults.append(&mut limits);
    audited.reasons = faults;
}

/// Why a channel of a result does not pass.
fn limit_reason(audited: &Audited, run: &RunOutcome, channel: &ChannelOutcome) -> Option<String> {
    let place = Place {
        file: &run.file,
        channel: &channel.name,
        unit: &channel.unit,
        time_unit: &audited.time_unit,
    };
    match (&channel.errors, channel.verdict) {
        (None, _) => Some(explain::without_values(&place)),
        (Some(errors), Verdict::Fail) if errors.broken => {
            // An order that is not the claimed one has another cause than the step.
            let trusted = audited.order_verdict != Some(Verdict::Fail);
            let observed = order_at(audited, &channel.name).filter(|_| trusted);
            Some(explain::limit_broken(
                &place,
                errors,
                observed.zip(run.step),
            ))
        }
        (Some(errors), Verdict::Undecided) => {
            Some(explain::limit_hidden(&place, errors, &run.stamps))
        }
        // Missing values are a fault of the file, which is told already.
        (Some(_), Verdict::Fail | Verdict::Pass) => None,
    }
}
fn order_at(audited: &Audited, channel: &str) -> Option<f64> {
    let order = audited
        .orders
        .iter()
        .find(|order| order.channel == channel)?;
    order.observed.map(|(order, _, _)| order)
}

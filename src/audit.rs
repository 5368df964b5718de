//! The whole pipeline: a plan of submissions to an outcome.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Arc, Mutex};

use crate::case::{Case, Library};
use crate::compare::{Compared, Comparison, Deviation, Limit, Rung, Sight, observe};
use crate::exact::Exact;
use crate::explain;
use crate::fault::Fault;
use crate::judge::{self, Verdict};
use crate::method;
use crate::outcome::{
    Audited, ChannelOutcome, ErrorOutcome, LimitsFrom, NotAudited, OrderOutcome, Outcome,
    RunOutcome,
};
use crate::submission::match_columns;
use crate::submission::{LimitStated, LimitsStated, Matched, Role, Run, Setting, Submission};
use crate::trajectory::{Findings, Kind, Survey, open};

/// What is to be audited.
#[derive(Debug)]
pub struct Plan {
    /// The cases at hand.
    pub library: Library,
    /// Submissions in the order of the report.
    pub submissions: Vec<Planned>,
    /// Submissions that could not even be read.
    pub unreadable: Vec<NotAudited>,
    /// Threads to work with.
    pub threads: usize,
}

/// One submission of a plan.
#[derive(Clone, Debug)]
pub struct Planned {
    /// Its name in reports.
    pub name: String,
    /// What was handed in.
    pub submission: Submission,
    /// True where the limits come from the command line.
    pub limits_from_command_line: bool,
}

/// A case with its solution, shared by the submissions that name it.
struct Model {
    case: Case,
    exact: Exact,
}

type Models = Mutex<BTreeMap<String, Arc<Model>>>;

/// Audits everything in the plan. The outcome does not depend on the threads.
pub fn audit(plan: &Plan) -> Outcome {
    let models = Models::default();
    let next = AtomicUsize::new(0);
    let done = Mutex::new(BTreeMap::new());
    std::thread::scope(|scope| {
        for _ in 0..plan.threads.clamp(1, plan.submissions.len().max(1)) {
            scope.spawn(|| {
                loop {
                    let index = next.fetch_add(1, Ordering::Relaxed);
                    let Some(planned) = plan.submissions.get(index) else {
                        break;
                    };
                    let result = audit_one(planned, &plan.library, &models);
                    lock(&done).insert(index, result);
                }
            });
        }
    });
    let mut outcome = Outcome {
        submissions: Vec::new(),
        not_audited: plan.unreadable.clone(),
    };
    for (index, result) in std::mem::take(&mut *lock(&done)) {
        match result {
            Ok(audited) => outcome.submissions.push(audited),
            Err(faults) => {
                let name = plan.submissions[index].name.clone();
                outcome.not_audited.push(NotAudited { name, faults });
            }
        }
    }
    outcome
}

/// A lock whose data is whole even if another thread has panicked.
fn lock<T>(mutex: &Mutex<T>) -> std::sync::MutexGuard<'_, T> {
    mutex
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
}

fn model(
    name: &str,
    submission: &Submission,
    library: &Library,
    models: &Models,
) -> Result<Arc<Model>, Vec<Fault>> {
    let key = format!("{name} {:?}", submission.parameters);
    if let Some(model) = lock(models).get(&key) {
        return Ok(Arc::clone(model));
    }
    // The lock is not held meanwhile: two threads may do the same work once.
    let case = library.load(name, &submission.parameters)?;
    let exact = case.exact().map_err(|fault| vec![fault])?;
    let model = Arc::new(Model { case, exact });
    lock(models).insert(key, Arc::clone(&model));
    Ok(model)
}

fn audit_one(planned: &Planned, library: &Library, models: &Models) -> Result<Audited, Vec<Fault>> {
    let submission = &planned.submission;
    let name = submission.case.as_deref().ok_or_else(|| {
        let fault = Fault::new("the submission names no case");
        vec![fault.help("write `case = \"FIELD/NAME\"`; `stepgauge cases` lists them")]
    })?;
    let model = model(name, submission, library, models)?;
    check_limited_channels(&model.case, &submission.limits)?;
    let mut compared = Vec::new();
    let mut notes = Vec::new();
    for run in &submission.runs {
        let one = compare(run, submission, &model, &mut notes);
        compared.push(one.map_err(|fault| vec![fault.in_file(&run.path)])?);
    }
    assign_roles(&mut compared);
    let mut audited = Audited {
        name: planned.name.clone(),
        case: model.case.name.clone(),
        time_unit: model.case.time.unit.clone(),
        producer: submission.producer.clone(),
        expect: submission.expect,
        verdict: Verdict::Pass,
        parameters: submission
            .parameters
            .iter()
            .map(|(n, v)| (n.clone(), *v))
            .collect(),
        limits_from: limits_from(planned),
        reasons: Vec::new(),
        notes,
        runs: Vec::new(),
        claimed_method: submission.claims.method.clone(),
        orders: Vec::new(),
        order_verdict: None,
    };
    judge_orders(&model.case, submission, &compared, &mut audited);
    audited.runs = compared.into_iter().map(|one| one.outcome).collect();
    judge_runs(&mut audited);
    Ok(audited)
}

fn limits_from(planned: &Planned) -> LimitsFrom {
    let limits = &planned.submission.limits;
    let states = |limit: &LimitStated| limit.absolute.is_some() || limit.relative.is_some();
    if planned.limits_from_command_line {
        LimitsFrom::CommandLine
    } else if states(&limits.general) || limits.channels.values().any(states) {
        LimitsFrom::Submission
    } else {
        LimitsFrom::Case
    }
}

fn check_limited_channels(case: &Case, limits: &LimitsStated) -> Result<(), Vec<Fault>> {
    let channels = case.channels();
    let unknown = |name: &&String| channels.iter().all(|channel| channel.name != name.as_str());
    let complain = |name: &String| {
        let names: Vec<&str> = channels.iter().map(|channel| channel.name).collect();
        Fault::new(format!(
            "case `{}` has no channel `{name}` to limit",
            case.name
        ))
        .help(format!("its channels are {}", names.join(", ")))
    };
    let faults: Vec<Fault> = limits
        .channels
        .keys()
        .filter(unknown)
        .map(complain)
        .collect();
    if faults.is_empty() {
        Ok(())
    } else {
        Err(faults)
    }
}

/// One run with what the ladder needs of it.
struct RunCompared {
    outcome: RunOutcome,
    role_stated: Option<Role>,
    /// Channel of the case and its errors.
    deviations: Vec<(usize, Deviation)>,
}

/// The limit of one channel: what the submission states, else what the case has. A
/// submission that states one part of a limit has stated all of it.
fn limit(case: &Case, stated: &LimitsStated, channel: &str) -> Limit {
    let own = stated.channels.get(channel).copied().unwrap_or_default();
    let general = stated.general;
    let own_states = own.absolute.is_some() || own.relative.is_some();
    let general_states = general.absolute.is_some() || general.relative.is_some();
    let of_peak = own.of_peak.or(general.of_peak).unwrap_or(false);
    let part = |own: Option<f64>, general: Option<f64>, case: f64| {
        if own_states || general_states {
            own.or(general).unwrap_or(0.0)
        } else {
            case
        }
    };
    Limit {
        absolute: part(own.absolute, general.absolute, case.limits.absolute),
        relative: part(own.relative, general.relative, case.limits.relative),
        of_peak,
    }
}

fn compare(
    run: &Run,
    submission: &Submission,
    model: &Model,
    notes: &mut Vec<String>,
) -> Result<RunCompared, Fault> {
    let source = open(&run.path)?;
    let step = match run.setting {
        Setting::Step(step) => Some(step),
        Setting::Tolerance(_) | Setting::Unstated => None,
    };
    let mut outcome = RunOutcome {
        file: run.file.clone(),
        role: run.role.unwrap_or(Role::Result),
        setting: run.setting,
        step,
        rows: 0,
        layout: "no rows".to_owned(),
        findings: Vec::new(),
        channels: Vec::new(),
    };
    let mut findings = Findings::default();
    let Some(layout) = source.layout(&submission.layout)? else {
        findings.fatal(Kind::EmptyFile, None, "the file has no rows of numbers");
        outcome.findings = findings.into_list();
        return Ok(RunCompared {
            outcome,
            role_stated: run.role,
            deviations: Vec::new(),
        });
    };
    let matched = match_columns(&model.case, &layout, &submission.columns)?;
    for (channel, reason) in &matched.missing {
        findings.fatal(
            Kind::ColumnMissing,
            None,
            format!("`{channel}` is missing: {reason}"),
        );
    }
    for note in &matched.notes {
        if !notes.contains(note) {
            notes.push(note.clone());
        }
    }
    outcome.layout = layout.describe();
    let names: Vec<_> = model.case.channels();
    let channels: Vec<_> = matched
        .channels
        .iter()
        .map(|c| {
            (
                c.channel,
                c.conversion,
                limit(&model.case, &submission.limits, names[c.channel].name),
            )
        })
        .collect();
    let survey = Survey::new(&source, layout, matched.selection(), &submission.layout)?;
    let comparison = Comparison {
        exact: &model.exact,
        source: &source,
        survey: &survey,
        time: matched.time_conversion,
        channels: &channels,
        step,
        least_rows: model.case.time.least_rows,
    };
    let compared = comparison.run(&mut findings)?;
    if channels.is_empty() {
        let text = "no column of the file is a channel of the case";
        findings.fatal(Kind::ColumnMissing, None, text);
    }
    if compared.outside > 0 {
        notes.push(format!(
            "{}: {} row(s) outside the window are not compared",
            run.file, compared.outside
        ));
    }
    outcome.step = step.or(compared
        .spacing
        .filter(|_| run.setting == Setting::Unstated));
    outcome.rows = compared.rows;
    outcome.findings = findings.into_list();
    outcome.channels = channel_outcomes(model, &matched, &compared);
    let deviations = matched
        .channels
        .iter()
        .map(|c| c.channel)
        .zip(compared.channels)
        .collect();
    Ok(RunCompared {
        outcome,
        role_stated: run.role,
        deviations,
    })
}

fn channel_outcomes(model: &Model, matched: &Matched, compared: &Compared) -> Vec<ChannelOutcome> {
    let channels = model.case.channels();
    let outcome = |(column, deviation): (&crate::submission::Column, &Deviation)| {
        let digits = deviation.resolution.describe();
        let errors = (deviation.rows > 0).then_some(ErrorOutcome {
            worst: deviation.worst,
            at: deviation.worst_at,
            rms: deviation.rms,
            end: deviation.end,
            peak: deviation.peak,
            resolution: deviation.worst_resolution,
            digits,
            limit: deviation.worst_limit,
            limit_used: deviation.margin.used,
        });
        let channel = &channels[column.channel];
        ChannelOutcome {
            name: channel.name.to_owned(),
            unit: channel.unit.to_owned(),
            errors,
            verdict: judge::of_deviation(deviation, compared.rows),
        }
    };
    matched
        .channels
        .iter()
        .zip(&compared.channels)
        .map(outcome)
        .collect()
}

/// The finest run is the result unless the submission says otherwise; where steps are
/// not known, all runs are.
fn assign_roles(runs: &mut [RunCompared]) {
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

/// What places a run on its ladder.
fn rung_setting(run: &RunOutcome) -> Option<f64> {
    match run.setting {
        Setting::Tolerance(tolerance) => Some(tolerance),
        Setting::Step(step) => Some(step),
        Setting::Unstated => run.step,
    }
}

fn judge_orders(case: &Case, submission: &Submission, runs: &[RunCompared], audited: &mut Audited) {
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
    // An error setting has no order to be held to: the slope is reported.
    let claimed = submission
        .claims
        .order
        .or(from_method)
        .filter(|_| !tolerances);
    if runs.len() < 2 {
        if let Some(order) = submission.claims.order {
            let text =
                format!("the claimed order {order} cannot be told from one run; add coarser runs");
            audited.notes.push(text);
        }
        return;
    }
    let slack = submission.limits.order_slack.unwrap_or(judge::ORDER_SLACK);
    for (index, channel) in case.channels().iter().enumerate() {
        let rungs: Option<Vec<Rung>> = runs.iter().map(|run| rung(run, index)).collect();
        let sight = match rungs {
            Some(rungs) => observe(&rungs),
            None if runs
                .iter()
                .all(|run| run.deviations.iter().all(|(c, _)| *c != index)) =>
            {
                continue;
            }
            None => Sight::TooFew("not every run has a step and values".to_owned()),
        };
        let mut order = judge::of_order(&sight, claimed, slack);
        if let Some(claimed) = claimed
            && let Some(reason) = explain::order_reason(channel.name, claimed, &order)
        {
            audited.reasons.push(reason);
        }
        if tolerances && order.finest.is_some() {
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

fn rung(run: &RunCompared, channel: usize) -> Option<Rung> {
    let (_, deviation) = run.deviations.iter().find(|(index, _)| *index == channel)?;
    (deviation.rows > 0).then_some(Rung {
        setting: rung_setting(&run.outcome)?,
        error: deviation.worst,
        resolution: deviation.worst_resolution,
        peak: deviation.peak,
        rows: deviation.rows,
    })
}

/// Faults of every file count; limits apply to results alone.
fn judge_runs(audited: &mut Audited) {
    let mut verdict = audited.order_verdict.unwrap_or(Verdict::Pass);
    let mut reasons = Vec::new();
    for run in &audited.runs {
        for finding in run.findings.iter().filter(|finding| finding.fatal) {
            verdict = Verdict::Fail;
            reasons.push(explain::fatal_finding(&run.file, finding));
        }
        if run.role == Role::Rung {
            continue;
        }
        if run.channels.is_empty() {
            verdict = Verdict::Fail;
        }
        for channel in &run.channels {
            verdict = verdict.and(channel.verdict);
            let (name, unit) = (channel.name.as_str(), channel.unit.as_str());
            match (&channel.errors, channel.verdict) {
                (None, _) => reasons.push(explain::without_values(&run.file, name)),
                (Some(errors), Verdict::Fail) => {
                    let observed = order_at(audited, name).zip(run.step);
                    let time_unit = &audited.time_unit;
                    let text =
                        explain::limit_broken(&run.file, name, unit, time_unit, errors, observed);
                    reasons.push(text);
                }
                (Some(errors), Verdict::Undecided) => {
                    reasons.push(explain::limit_hidden(&run.file, name, unit, errors));
                }
                (Some(_), Verdict::Pass) => {}
            }
        }
    }
    audited.verdict = verdict;
    reasons.append(&mut audited.reasons);
    audited.reasons = reasons;
}

fn order_at(audited: &Audited, channel: &str) -> Option<f64> {
    let order = audited
        .orders
        .iter()
        .find(|order| order.channel == channel)?;
    order.observed.map(|(order, _, _)| order)
}

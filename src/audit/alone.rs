//! A submission without a case: three or more runs are compared with each other.
//! Nothing exact stands behind it, so such a submission can fail but never pass.

use super::Planned;
use super::verdict::rung_setting;
use crate::compare::{Pair, Sight, agreeing, grid_convergence, order_of_three};
use crate::explain;
use crate::fault::Fault;
use crate::judge::{self, Verdict};
use crate::method;
use crate::outcome::{Audited, LimitsFrom, OrderOutcome, RunOutcome};
use crate::submission::{ColumnName, Role, Run, Setting, Submission};
use crate::trajectory::{Findings, Grid, Kind, Selection, Source, Survey, is_time_name};

/// Stamps at which the runs are compared, at most.
const MOST_STAMPS: u64 = 2000;
/// Stamps of two runs that differ by this fraction of the time covered are the same.
const SAME_STAMP: f64 = 1e-9;

/// One run in memory, thinned to the stamps of the coarsest.
struct Sampled {
    setting: f64,
    /// By stamp, then by channel.
    values: Vec<Vec<Option<f64>>>,
    resolutions: Vec<f64>,
}

pub(super) fn audit_alone(planned: &Planned) -> Result<Audited, Vec<Fault>> {
    let submission = &planned.submission;
    if submission.runs.len() < 3 {
        let fault = Fault::new("the submission names no case");
        let help = "write `case = \"FIELD/NAME\"` (`stepgauge cases` lists them); without one, \
                    three or more runs are needed";
        return Err(vec![fault.help(help)]);
    }
    let mut audited = Audited::new(
        planned.name.clone(),
        None,
        String::new(),
        submission,
        match planned.reviewed.limits_from {
            Some(LimitsFrom::Reviewer) => LimitsFrom::Reviewer,
            _ => LimitsFrom::Submission,
        },
    );
    let mut order: Vec<(f64, &Run)> = Vec::new();
    for run in &submission.runs {
        let (outcome, setting) =
            survey_alone(run, submission).map_err(|fault| vec![fault.in_file(&run.path)])?;
        order.extend(setting.map(|setting| (setting, run)));
        audited.runs.push(outcome);
    }
    order.sort_by(|a, b| b.0.total_cmp(&a.0));
    let note =
        "no case is named: the runs are compared with each other, nothing exact stands behind it";
    audited.notes.push(note.to_owned());
    let faults = audited.runs.iter().flat_map(|run| {
        let fatal = run.findings.iter().filter(|finding| finding.fatal);
        fatal.map(|finding| explain::fatal_finding(&run.file, finding))
    });
    audited.reasons = faults.collect();
    audited.verdict = if audited.reasons.is_empty() {
        Verdict::Undecided
    } else {
        Verdict::Fail
    };
    if order.len() < submission.runs.len() {
        audited
            .reasons
            .push("not every run has a step, so they form no ladder".to_owned());
        return Ok(audited);
    }
    let (channels, runs) = sample(&order, submission)?;
    judge_alone(&channels, &runs, submission, &mut audited);
    Ok(audited)
}

/// The columns of a file and its survey; without names they are numbered.
fn columns(
    source: &Source,
    submission: &Submission,
) -> Result<Option<(Vec<String>, Survey)>, Fault> {
    let Some(layout) = source.layout(&submission.layout)? else {
        return Ok(None);
    };
    let names: Vec<String> = match &layout.names {
        Some(names) => names.clone(),
        None => (1..=layout.columns)
            .map(|number| number.to_string())
            .collect(),
    };
    let stated = submission
        .columns
        .get("time")
        .and_then(|time| time.column.as_ref());
    let time = match stated {
        _ if layout.long.is_some() => 0,
        Some(ColumnName::Number(number)) => number - 1,
        Some(ColumnName::Name(name)) => names.iter().position(|n| n == name).unwrap_or(usize::MAX),
        None => names
            .iter()
            .position(|name| is_time_name(name))
            .unwrap_or(0),
    };
    if time >= layout.columns {
        let fault = Fault::new("the column of time stamps that is stated is not in the file");
        return Err(fault.help("correct `time` under `[columns]` in submission.toml"));
    }
    let columns: Vec<usize> = (0..layout.columns)
        .filter(|&column| column != time)
        .collect();
    let selection = Selection {
        time,
        channels: columns.clone(),
    };
    let survey = Survey::new(source, layout, selection, &submission.layout)?;
    let names = columns
        .iter()
        .map(|&column| names[column].clone())
        .collect();
    Ok(Some((names, survey)))
}

/// Faults and step of one run.
fn survey_alone(run: &Run, submission: &Submission) -> Result<(RunOutcome, Option<f64>), Fault> {
    let source = run.open()?;
    let mut findings = Findings::default();
    let mut outcome = RunOutcome {
        file: run.file.clone(),
        role: Role::Rung,
        setting: run.setting,
        step: None,
        cost: run.cost,
        rows: 0,
        layout: "no rows".to_owned(),
        stamps: String::new(),
        findings: Vec::new(),
        channels: Vec::new(),
    };
    if let Some((_, survey)) = columns(&source, submission)? {
        survey.rows(&source, &mut findings, &|_| false, &mut |_| {
            outcome.rows += 1;
            Ok(())
        })?;
        outcome.layout = survey.layout.describe();
        outcome.step = match (run.setting, survey.grid) {
            (Setting::Step(step), _) => Some(step),
            (Setting::Unstated, Grid::Uniform { spacing, .. }) => Some(spacing),
            _ => None,
        };
    } else {
        findings.fatal(Kind::EmptyFile, None, "the file has no rows of numbers");
    }
    source.is_unchanged()?;
    outcome.findings = findings.into_list();
    let setting = rung_setting(&outcome);
    Ok((outcome, setting))
}

/// All runs at the stamps of the coarsest, thinned.
fn sample(
    order: &[(f64, &Run)],
    submission: &Submission,
) -> Result<(Vec<String>, Vec<Sampled>), Vec<Fault>> {
    let mut stamps: Vec<f64> = Vec::new();
    let mut names: Vec<String> = Vec::new();
    let mut runs = Vec::new();
    for &(setting, run) in order {
        let placed = |fault: Fault| vec![fault.in_file(&run.path)];
        let source = run.open().map_err(placed)?;
        let Some((channels, survey)) = columns(&source, submission).map_err(placed)? else {
            continue;
        };
        if stamps.is_empty() {
            let stride = survey.rows / MOST_STAMPS + 1;
            let mut row_number = 0;
            let mut keep = |row: &crate::trajectory::Row| {
                if row_number % stride == 0 {
                    stamps.push(row.time.to_f64());
                }
                row_number += 1;
                Ok(())
            };
            let mut unheeded = Findings::default();
            survey
                .rows(&source, &mut unheeded, &|_| true, &mut keep)
                .map_err(placed)?;
            names.clone_from(&channels);
        }
        let known: Vec<Option<usize>> = names
            .iter()
            .map(|name| channels.iter().position(|other| other == name))
            .collect();
        let span = stamps
            .last()
            .zip(stamps.first())
            .map_or(0.0, |(last, first)| last - first);
        let mut values = vec![vec![None; names.len()]; stamps.len()];
        let mut resolutions = vec![0.0f64; names.len()];
        let mut pick = |row: &crate::trajectory::Row| {
            let time = row.time.to_f64();
            let near = stamps.partition_point(|&stamp| stamp < time - SAME_STAMP * span);
            if stamps
                .get(near)
                .is_some_and(|&stamp| (stamp - time).abs() <= SAME_STAMP * span)
            {
                for (channel, place) in known.iter().enumerate() {
                    let Some(place) = *place else { continue };
                    values[near][channel] = row.value(place);
                    if let Some(value) = row.value(place) {
                        let resolution = survey.channels[place].at(value);
                        resolutions[channel] = resolutions[channel].max(resolution);
                    }
                }
            }
            Ok(())
        };
        let mut unheeded = Findings::default();
        survey
            .rows(&source, &mut unheeded, &|_| true, &mut pick)
            .map_err(placed)?;
        source.is_unchanged().map_err(placed)?;
        runs.push(Sampled {
            setting,
            values,
            resolutions,
        });
    }
    Ok((names, runs))
}

fn judge_alone(names: &[String], runs: &[Sampled], submission: &Submission, audited: &mut Audited) {
    let from_method = submission.claims.method.as_deref().and_then(method::find);
    let tolerances = submission
        .runs
        .iter()
        .any(|run| matches!(run.setting, Setting::Tolerance(_)));
    let claimed = submission
        .claims
        .order
        .or(from_method.map(|method| f64::from(method.order)));
    let claimed = claimed.filter(|_| !tolerances);
    let slack = submission.limits.order_slack.unwrap_or(judge::ORDER_SLACK);
    let mut reasons = Vec::new();
    for (channel, name) in names.iter().enumerate() {
        let (pairs, share) = orders(runs, channel);
        let sight = if pairs.is_empty() {
            Sight::TooFew("no three runs differ enough from each other".to_owned())
        } else {
            let usable = pairs.len() + 2;
            Sight::Pairs {
                agreeing: agreeing(&pairs),
                pairs,
                usable,
                large: false,
            }
        };
        let order = judge::of_order(&sight, claimed, slack, None);
        if let Some(share) = share {
            audited.notes.push(format!(
                "`{name}`: the finest run lies within {:.2} % of the peak (grid convergence index)",
                100.0 * share
            ));
        }
        reasons.extend(claimed.and_then(|claimed| explain::order_reason(name, claimed, &order)));
        audited.orders.push(OrderOutcome {
            channel: name.clone(),
            claimed,
            observed: order.finest.map(|pair| (pair.order, pair.low, pair.high)),
            rungs_used: order.rungs_used,
            verdict: order.verdict,
            note: order.note,
        });
    }
    audited.order_verdict =
        judge::of_orders(audited.orders.iter().filter_map(|order| order.verdict));
    if audited.order_verdict != Some(Verdict::Pass) {
        audited.reasons.append(&mut reasons);
    }
    if audited.order_verdict == Some(Verdict::Fail) {
        audited.verdict = Verdict::Fail;
    }
    if audited.verdict == Verdict::Undecided {
        audited.reasons.push(
            "without a case there is no verdict but a failed order; name the case".to_owned(),
        );
    }
}

/// Orders of neighbouring threes, and the convergence index of the finest.
fn orders(runs: &[Sampled], channel: usize) -> (Vec<Pair>, Option<f64>) {
    let largest = |a: &Sampled, b: &Sampled| {
        let rows = a.values.iter().zip(&b.values);
        let gaps = rows.filter_map(|(x, y)| Some((x[channel]? - y[channel]?).abs()));
        gaps.fold(0.0, f64::max)
    };
    let mut pairs = Vec::new();
    let mut share = None;
    for three in runs.windows(3) {
        let [coarse, middle, fine] = three else {
            continue;
        };
        let peak = fine
            .values
            .iter()
            .filter_map(|row| row[channel])
            .map(f64::abs)
            .fold(0.0, f64::max);
        let steps = [fine.setting, middle.setting, coarse.setting];
        let differences = [largest(middle, fine), largest(coarse, middle)];
        let rounding = 100.0 * f64::EPSILON * peak;
        let doubt = fine.resolutions[channel] + coarse.resolutions[channel] + rounding;
        let pair = order_of_three(steps, differences, doubt, peak);
        pairs.extend(pair);
        let values = [
            peak,
            peak + differences[0],
            peak + differences[0] + differences[1],
        ];
        share = pair
            .and_then(|_| grid_convergence(steps, values))
            .map(|found| found.index);
    }
    (pairs, share)
}

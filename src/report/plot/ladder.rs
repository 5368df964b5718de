//! Over runs: worst error against step with the order seen and claimed, and error against
//! what a run has cost.

use std::collections::BTreeMap;

use super::axis::Axis;
use super::draw::{ACROSS, Look, Plot, Series, UP};
use super::trajectory::label;
use crate::judge::Verdict;
use crate::number::{plain, short};
use crate::outcome::{Audited, ChannelOutcome, ErrorOutcome, Outcome, RunOutcome};

/// Submissions in a plot of costs.
const MOST_COSTS: usize = 4;

/// A submission with its costs and shares of the limit.
type Costed<'a> = (&'a Audited, Vec<Costs>);

/// What one run has cost, and what it was worth.
struct Costs {
    cost: f64,
    used: f64,
    keeps: bool,
}

/// Errors so many times what their digits resolve stand clear of it, as for the order.
const CLEAR: f64 = 10.0;

/// Worst error against step, with the lines of the order seen and of the order claimed, and
/// the band of what digits resolve.
pub(super) fn orders(audited: &Audited, channel: &ChannelOutcome) -> Option<Plot> {
    let rung = |run: &RunOutcome| Some((run.step?, of_channel(run, &channel.name)?.clone()));
    let mut rungs: Vec<(f64, ErrorOutcome)> = audited.runs.iter().filter_map(rung).collect();
    rungs.sort_by(|a, b| a.0.total_cmp(&b.0));
    let (first, last) = (rungs.first()?.0, rungs.last()?.0);
    if last <= first {
        return None;
    }
    let of = |read: fn(&ErrorOutcome) -> f64| -> Vec<(f64, f64)> {
        rungs.iter().map(|(step, e)| (*step, read(e))).collect()
    };
    let resolution = Series::line(Look::Resolution, "resolution", of(|e| e.resolution));
    let mut series = vec![Series {
        area: true,
        ..resolution
    }];
    // Both lines go through the finest rung that stands clear of its digits: there the order
    // is seen.
    let clear = rungs.iter().find(|(_, e)| e.worst > CLEAR * e.resolution);
    let line = |order: f64| match clear {
        Some((step, e)) => [first, last]
            .map(|at| (at, e.worst * (at / step).powf(order)))
            .to_vec(),
        None => Vec::new(),
    };
    let found = audited.orders.iter().find(|o| o.channel == channel.name);
    let claimed = found.and_then(|order| order.claimed);
    let observed = found.and_then(|order| order.observed);
    let mut finding = match observed {
        Some((order, low, high)) => {
            format!("Order {order:.2} ({low:.2} to {high:.2}) is seen at the finest steps.")
        }
        None => "No order can be told.".to_owned(),
    };
    if let Some(claimed) = claimed {
        let name = format!("order {} claimed", plain(claimed));
        series.push(Series::line(Look::Limit, name, line(claimed)));
        finding += &format!(" {} is claimed.", plain(claimed));
    }
    if let Some((order, ..)) = observed {
        let name = format!("order {order:.2} seen");
        series.push(Series::line(Look::Fit, name, line(order)));
    }
    let worst = of(|e| e.worst);
    if worst.iter().any(|(_, error)| *error == 0.0) {
        finding += " Runs without any error have no place on this axis.";
    }
    // Lines are cut off where they would squeeze the errors.
    let errors: Vec<f64> = worst.iter().map(|p| p.1).filter(|&e| e > 0.0).collect();
    let least = 1e-2 * errors.iter().copied().fold(f64::INFINITY, f64::min);
    let near = of(|e| e.resolution).into_iter().map(|p| p.1);
    let shown: Vec<f64> = errors
        .into_iter()
        .chain(near.filter(|&d| d >= least))
        .collect();
    series.push(Series::dots(Look::Written, "worst error", worst));
    let unit = &channel.unit;
    Some(Plot {
        title: format!("Errors of {} over steps.", channel.name),
        finding,
        across: Axis::log(
            label("step", &audited.time_unit),
            [first, last].into_iter(),
            ACROSS,
        ),
        up: Axis::log(
            label(&format!("worst |error| of {}", channel.name), unit),
            shown.into_iter(),
            UP,
        ),
        series,
    })
}

fn of_channel<'a>(run: &'a RunOutcome, name: &str) -> Option<&'a ErrorOutcome> {
    let channel = run.channels.iter().find(|channel| channel.name == name);
    channel?.errors.as_ref()
}

/// For every case with stated costs: worst share of the limit against cost, a series for
/// each submission.
pub(super) fn costs(outcome: &Outcome) -> Vec<Plot> {
    let mut cases: BTreeMap<&str, Vec<Costed>> = BTreeMap::new();
    for audited in &outcome.submissions {
        let Some(case) = audited.case.as_deref() else {
            continue;
        };
        let mut points: Vec<Costs> = audited.runs.iter().filter_map(cost).collect();
        points.sort_by(|a, b| a.cost.total_cmp(&b.cost));
        if points.len() > 1 {
            cases.entry(case).or_default().push((audited, points));
        }
    }
    cases
        .into_iter()
        .map(|(case, submissions)| of_case(case, &submissions))
        .collect()
}

/// Cost and the largest share of the limit over all channels, and whether the run keeps all
/// of its limits beyond doubt.
fn cost(run: &RunOutcome) -> Option<Costs> {
    let errors = run.channels.iter().filter_map(|c| c.errors.as_ref());
    let used = errors.map(|e| e.limit_used).fold(0.0, f64::max);
    let passes = run.channels.iter().all(|c| c.verdict == Verdict::Pass);
    let whole = !run.channels.is_empty() && run.findings.iter().all(|finding| !finding.fatal);
    Some(Costs {
        cost: run.cost?,
        used,
        keeps: passes && whole,
    })
}

fn of_case(case: &str, submissions: &[Costed]) -> Plot {
    // Within the limit at least cost.
    let enough = submissions.iter().flat_map(|(audited, points)| {
        let keeps = points.iter().filter(|point| point.keeps);
        keeps.map(move |point| (point.cost, audited.name.as_str()))
    });
    let mut finding = match enough.min_by(|a, b| a.0.total_cmp(&b.0)) {
        Some((cost, name)) => {
            let cost = short(cost);
            format!("The limit is kept at the least cost, {cost}, by {name}.")
        }
        None => "No run with a stated cost keeps the limit.".to_owned(),
    };
    if submissions.len() > MOST_COSTS {
        let more = submissions.len() - MOST_COSTS;
        finding += &format!(" {more} more submissions are not drawn.");
    }
    let shown = || submissions.iter().take(MOST_COSTS);
    let all = || shown().flat_map(|(_, points)| points.iter());
    if all().any(|point| point.used == 0.0) {
        finding += " Runs without any error have no place on this axis.";
    }
    let (low, high) = all().fold((f64::INFINITY, 0.0f64), |(low, high), point| {
        (low.min(point.cost), high.max(point.cost))
    });
    let limit = vec![(low, 1.0), (high, 1.0)];
    let mut series = vec![Series::line(Look::Limit, "limit", limit)];
    series.extend(shown().enumerate().map(|(number, (audited, points))| {
        let points = points.iter().map(|point| (point.cost, point.used));
        Series::line(Look::Other(number), &audited.name, points.collect())
    }));
    Plot {
        title: format!("Work against precision: {case}."),
        finding,
        across: Axis::log("cost as stated".to_owned(), [low, high].into_iter(), ACROSS),
        up: Axis::log(
            "largest share of the limit".to_owned(),
            all().map(|point| point.used).chain([1.0]),
            UP,
        ),
        series,
    }
}

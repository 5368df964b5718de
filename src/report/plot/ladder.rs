//! Over runs: worst error against step with the order seen and claimed, and error against
//! what a run has cost.

use std::collections::BTreeMap;

use super::axis::Axis;
use super::draw::{ACROSS, Look, Plot, Series, UP};
use super::trajectory::label;
use crate::number::{plain, short};
use crate::outcome::{Audited, ChannelOutcome, ErrorOutcome, Outcome, RunOutcome};

/// Submissions in a plot of costs.
const MOST_COSTS: usize = 6;

/// A submission with its costs and shares of the limit.
type Costed<'a> = (&'a Audited, Vec<(f64, f64)>);

/// Worst error against step, with the line of the order seen, that of the order claimed and
/// what digits resolve.
pub(super) fn orders(audited: &Audited, channel: &ChannelOutcome) -> Option<Plot> {
    let rung = |run: &RunOutcome| Some((run.step?, of_channel(run, &channel.name)?.clone()));
    let mut rungs: Vec<(f64, ErrorOutcome)> = audited.runs.iter().filter_map(rung).collect();
    rungs.sort_by(|a, b| a.0.total_cmp(&b.0));
    let (first, last) = (rungs.first()?, rungs.last()?);
    if last.0 <= first.0 {
        return None;
    }
    let found = audited.orders.iter().find(|o| o.channel == channel.name);
    let points: Vec<(f64, f64)> = rungs.iter().map(|(step, e)| (*step, e.worst)).collect();
    let mut series = vec![Series {
        look: Look::Resolution,
        name: "resolution".to_owned(),
        points: rungs
            .iter()
            .map(|(step, e)| (*step, e.resolution))
            .collect(),
        dots: false,
    }];
    // Both lines go through the same rung: the coarsest that stands clear of its digits.
    let clear = rungs
        .iter()
        .rev()
        .find(|(_, e)| e.worst > 3.0 * e.resolution);
    let line = |order: f64| -> Vec<(f64, f64)> {
        let Some((step, e)) = clear else {
            return Vec::new();
        };
        [first.0, last.0]
            .map(|at| (at, e.worst * (at / step).powf(order)))
            .to_vec()
    };
    let mut finding = String::new();
    if let Some(claimed) = found.and_then(|order| order.claimed) {
        series.push(Series {
            look: Look::Limit,
            name: format!("order {} claimed", plain(claimed)),
            points: line(claimed),
            dots: false,
        });
        finding += &format!(" {} is claimed.", plain(claimed));
    }
    if let Some((order, low, high)) = found.and_then(|order| order.observed) {
        series.push(Series {
            look: Look::Fit,
            name: format!("order {order:.2} seen"),
            points: line(order),
            dots: false,
        });
        let seen = format!("Order {order:.2} ({low:.2} to {high:.2}) is seen.");
        finding = seen + &finding;
    } else {
        finding = format!("No order can be told.{finding}");
    }
    series.push(Series {
        look: Look::Written,
        name: "worst error".to_owned(),
        points,
        dots: true,
    });
    let shown = series.iter().flat_map(|s| s.points.iter().map(|p| p.1));
    // A claimed line far below what is seen would squeeze the rest.
    let least = rungs.iter().map(|(_, e)| e.worst).filter(|&e| e > 0.0);
    let least = 1e-3 * least.fold(f64::INFINITY, f64::min);
    let shown: Vec<f64> = shown
        .filter(|&x| x >= least || !least.is_finite())
        .collect();
    Some(Plot {
        title: format!("Errors of {} over steps.", channel.name),
        finding,
        across: Axis::log(
            label("step", &audited.time_unit),
            rungs.iter().map(|(step, _)| *step),
            ACROSS,
        ),
        up: Axis::log(
            label(&format!("worst |error| of {}", channel.name), &channel.unit),
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
        let mut points: Vec<(f64, f64)> = audited.runs.iter().filter_map(cost).collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        if points.len() > 1 {
            cases.entry(case).or_default().push((audited, points));
        }
    }
    cases
        .into_iter()
        .map(|(case, submissions)| of_case(case, &submissions))
        .collect()
}

/// Cost and the largest share of the limit over all channels.
fn cost(run: &RunOutcome) -> Option<(f64, f64)> {
    let used = run.channels.iter().filter_map(|c| c.errors.as_ref());
    let used = used.map(|e| e.limit_used).fold(0.0, f64::max);
    (used > 0.0).then_some((run.cost?, used))
}

fn of_case(case: &str, submissions: &[Costed]) -> Plot {
    // Within the limit at least cost.
    let enough = submissions.iter().flat_map(|(audited, points)| {
        let keeps = points.iter().filter(|(_, used)| *used <= 1.0);
        keeps.map(move |(cost, _)| (*cost, audited.name.as_str()))
    });
    let least = enough.min_by(|a, b| a.0.total_cmp(&b.0));
    let finding = match least {
        Some((cost, name)) => {
            format!(
                "The limit is kept at the least cost, {}, by {name}.",
                short(cost)
            )
        }
        None => "No run with a stated cost keeps the limit.".to_owned(),
    };
    let shown = || submissions.iter().take(MOST_COSTS);
    let all = || shown().flat_map(|(_, points)| points.iter());
    let costs: Vec<f64> = all().map(|p| p.0).collect();
    let ends = costs
        .iter()
        .fold((f64::INFINITY, 0.0f64), |(low, high), &c| {
            (low.min(c), high.max(c))
        });
    let mut series = vec![Series {
        look: Look::Limit,
        name: "limit".to_owned(),
        points: vec![(ends.0, 1.0), (ends.1, 1.0)],
        dots: false,
    }];
    series.extend(
        shown()
            .enumerate()
            .map(|(number, (audited, points))| Series {
                look: Look::Other(number),
                name: audited.name.clone(),
                points: points.clone(),
                dots: false,
            }),
    );
    Plot {
        title: format!("Work against precision: {case}."),
        finding,
        across: Axis::log("cost as stated".to_owned(), costs.iter().copied(), ACROSS),
        up: Axis::log(
            "largest share of the limit".to_owned(),
            all().map(|p| p.1).chain([1.0]),
            UP,
        ),
        series,
    }
}

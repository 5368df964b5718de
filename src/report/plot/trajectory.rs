//! Over time: the exact curve with the written points on it, and the errors beside limit
//! and resolution.

use super::axis::Axis;
use super::draw::{ACROSS, Look, Plot, Series, UP};
use crate::judge::Verdict;
use crate::number::{measured, plain};
use crate::outcome::{Audited, ChannelOutcome, PlotPoint, RunOutcome};
use crate::report::table::used_text;

/// Runs beside the one that is judged.
const MOST_OTHERS: usize = 4;
/// Written values so many times beyond the range of the exact ones are drawn at the edge.
const BEYOND: f64 = 3.0;

/// Exact curve and written points of one channel.
pub(super) fn values(
    audited: &Audited,
    run: &RunOutcome,
    channel: &ChannelOutcome,
) -> Option<Plot> {
    let errors = channel.errors.as_ref()?;
    let curve = audited.curves.iter().find(|c| c.channel == channel.name)?;
    let written = || channel.trace.iter().map(|point| point.written);
    let exact = || curve.points.iter().map(|(_, x)| *x);
    let (low, high) = exact().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), x| {
        (low.min(x), high.max(x))
    });
    let room = BEYOND * (high - low).max(1e-3 * high.abs());
    let seen = written().filter(|x| (low - room..=high + room).contains(x));
    let beyond = written().any(|x| !(low - room..=high + room).contains(&x));
    let mut finding = format!(
        "{}: the largest error is {} {} at t = {} {}.",
        run.file,
        measured(errors.worst, errors.resolution),
        channel.unit,
        plain(errors.at),
        audited.time_unit
    );
    if beyond {
        finding += " Values far beyond the exact ones are drawn at the edge.";
    }
    Some(Plot {
        title: format!("{} over time.", channel.name),
        finding,
        across: time_axis(audited, curve.points.iter().map(|(t, _)| *t)),
        up: Axis::linear(label(&channel.name, &channel.unit), exact().chain(seen), UP),
        series: vec![
            Series::line(Look::Exact, "exact", curve.points.clone()),
            Series::dots(
                Look::Written,
                "written",
                channel.trace.iter().map(|p| (p.time, p.written)).collect(),
            ),
        ],
    })
}

/// Errors of one channel in all runs, with limit and resolution of the one that is judged.
pub(super) fn errors(
    audited: &Audited,
    run: &RunOutcome,
    channel: &ChannelOutcome,
) -> Option<Plot> {
    let errors = channel.errors.as_ref()?;
    if channel.trace.is_empty() {
        return None;
    }
    let of = |read: fn(&PlotPoint) -> f64| -> Vec<(f64, f64)> {
        channel.trace.iter().map(|p| (p.time, read(p))).collect()
    };
    let mut series = vec![
        Series::line(Look::Resolution, "resolution", steady(of(|p| p.resolution))),
        Series::line(Look::Limit, "limit", steady(of(|p| p.limit))),
    ];
    let others = audited
        .runs
        .iter()
        .filter(|other| !std::ptr::eq(*other, run));
    let more = others.clone().count().saturating_sub(MOST_OTHERS);
    for (number, other) in others.take(MOST_OTHERS).enumerate() {
        if let Some(same) = other.channels.iter().find(|c| c.name == channel.name) {
            let points = peaks(&same.trace);
            series.push(Series::line(Look::Other(number), &other.file, points));
        }
    }
    series.push(Series::line(
        Look::Written,
        &run.file,
        peaks(&channel.trace),
    ));
    let used = match used_text(errors.limit_used) {
        used if used.ends_with('%') => format!("{used} of the limit"),
        used => format!("{used} the limit"),
    };
    let at = format!("t = {} {}", plain(errors.decisive.at), audited.time_unit);
    let file = &run.file;
    let mut finding = match channel.verdict {
        Verdict::Pass => format!("{file} keeps its limit: {used} at {at}."),
        _ if errors.broken => format!("{file} breaks its limit: {used} at {at}."),
        Verdict::Undecided => {
            format!("{file}: somewhere the digits leave open whether the limit is kept.")
        }
        Verdict::Fail => format!("{file}: rows are missing; {used} at {at}."),
    };
    if channel.trace.iter().any(|point| point.error == 0.0) {
        finding += " Rows without any error have no place on this axis.";
    }
    if more > 0 {
        finding += &format!(" {more} more runs are not drawn.");
    }
    // What digits resolve of a zero would squeeze the rest.
    let errors = series
        .iter()
        .skip(1)
        .flat_map(|s| s.points.iter().map(|p| p.1));
    let mut shown: Vec<f64> = errors.filter(|&error| error > 0.0).collect();
    let least = 1e-3 * shown.iter().copied().fold(f64::INFINITY, f64::min);
    let resolutions = series[0].points.iter().map(|p| p.1);
    shown.extend(resolutions.filter(|&resolution| resolution >= least));
    Some(Plot {
        title: format!("Errors of {}.", channel.name),
        finding,
        across: time_axis(audited, channel.trace.iter().map(|p| p.time)),
        up: Axis::log(
            label(&format!("|error| of {}", channel.name), &channel.unit),
            shown.into_iter(),
            UP,
        ),
        series,
    })
}

fn time_axis(audited: &Audited, times: impl Iterator<Item = f64>) -> Axis {
    Axis::tight(label("t", &audited.time_unit), times, ACROSS)
}

/// Quantity and unit.
pub(super) fn label(name: &str, unit: &str) -> String {
    let name: String = name.chars().take(30).collect();
    match unit {
        "" | "1" => name,
        _ => format!("{name} in {unit}"),
    }
}

/// The rows that matter within every few units of the page: the largest error, and the
/// largest part of the limit.
fn peaks(trace: &[PlotPoint]) -> Vec<(f64, f64)> {
    let (Some(first), Some(last)) = (trace.first(), trace.last()) else {
        return Vec::new();
    };
    let width = (last.time - first.time) / 90.0;
    let cell = |point: &PlotPoint| ((point.time - first.time) / width).floor();
    let mut points = Vec::new();
    for cell in trace.chunk_by(|a, b| cell(a) == cell(b)) {
        let most = |size: &dyn Fn(&PlotPoint) -> f64| {
            (0..cell.len()).max_by(|&a, &b| size(&cell[a]).total_cmp(&size(&cell[b])))
        };
        let mut kept = [
            most(&|point| point.error.abs()),
            most(&|point| point.error.abs() / point.limit.max(f64::MIN_POSITIVE)),
        ];
        kept.sort();
        let mut kept: Vec<usize> = kept.into_iter().flatten().collect();
        kept.dedup();
        points.extend(
            kept.into_iter()
                .map(|at| (cell[at].time, cell[at].error.abs())),
        );
    }
    points
}

/// A line that never changes needs its ends only.
fn steady(points: Vec<(f64, f64)>) -> Vec<(f64, f64)> {
    let mut kept: Vec<(f64, f64)> = Vec::new();
    for (index, &point) in points.iter().enumerate() {
        let same = |other: Option<&(f64, f64)>| {
            other.is_some_and(|other| (other.1 / point.1 - 1.0).abs() < 0.02)
        };
        if same(kept.last()) && same(points.get(index + 1)) {
            continue;
        }
        kept.push(point);
    }
    kept
}

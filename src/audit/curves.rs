//! Exact curves and written points for plots.

use super::Model;
use crate::compare::{Deviation, Limit, Traced};
use crate::number::Double;
use crate::outcome::{ExactCurve, PlotPoint};
use crate::trajectory::Resolution;

/// Even times over the window at which a curve is drawn.
const EVEN: u32 = 240;

/// The exact solution of every channel: even times, and both sides of every jump.
pub(super) fn exact_curves(model: &Model) -> Vec<ExactCurve> {
    let (from, to) = (model.exact.from(), model.exact.to());
    let span = to - from;
    let mut times: Vec<Double> = (0..=EVEN)
        .map(|k| from + span * Double::from(f64::from(k) / f64::from(EVEN)))
        .collect();
    let before = span * Double::from(1e-9);
    for jump in model.exact.jumps().take(EVEN as usize).map(Double::from) {
        times.extend([jump - before, jump]);
    }
    times.retain(|&time| time >= from && time <= to);
    times.sort_by(|a, b| a.to_f64().total_cmp(&b.to_f64()));
    let channels = model.case.channels();
    let mut curves: Vec<ExactCurve> = channels
        .iter()
        .map(|channel| ExactCurve {
            channel: channel.name.to_owned(),
            points: Vec::with_capacity(times.len()),
        })
        .collect();
    let mut walk = model.exact.walk();
    for time in times {
        let values = walk.go(time);
        for (curve, value) in curves.iter_mut().zip(&values.value) {
            curve.points.push((time.to_f64(), value.to_f64()));
        }
    }
    curves
}

/// Points with the limit and the resolution that the verdict was found with.
pub(super) fn plot_points(
    traced: &[Traced],
    deviation: &Deviation,
    limit: &Limit,
) -> Vec<PlotPoint> {
    let full = deviation.resolution == Resolution::Full;
    let point = |row: &Traced| PlotPoint {
        time: row.time,
        written: row.written,
        error: row.error,
        resolution: row.doubts[usize::from(full)],
        limit: if limit.of_peak {
            limit.at(deviation.peak)
        } else {
            limit.at((row.written - row.error).abs())
        },
    };
    traced.iter().map(point).collect()
}

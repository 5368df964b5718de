//! The rows beside the exact solution, as one more thing that may have written them.

use super::record::{Record, Window};
use super::trial::Fit;

/// The rows beside the exact values.
pub(super) fn exact_fit(record: &Record) -> Fit {
    let peaks = record.peaks();
    let mut fit = Fit::NOTHING;
    for window in &record.windows {
        let rates = steepest(record, window);
        for row in 0..window.rows() {
            for (place, peak) in peaks.iter().enumerate() {
                let at = row * record.width() + place;
                let error = window.errors[at].abs();
                if !error.is_finite() {
                    continue;
                }
                // The roundings of a program that steps from row to row.
                let steps = (window.first as usize + row + 16) as f64;
                let allowed = window.doubts[at]
                    + 4.0 * steps * record.unit * peak
                    + rates[place]
                        * (window.time_doubts[row] + 2.0 * f64::EPSILON * window.times[row].abs());
                fit.add(error, allowed, *peak);
            }
        }
    }
    fit
}

fn steepest(record: &Record, window: &Window) -> Vec<f64> {
    let width = record.width();
    let mut rates = vec![0.0f64; width];
    for row in 1..window.rows() {
        let gap = window.times[row] - window.times[row - 1];
        for (place, rate) in rates.iter_mut().enumerate() {
            let step =
                window.values[row * width + place] - window.values[(row - 1) * width + place];
            if gap > 0.0 && step.is_finite() {
                *rate = rate.max(step.abs() / gap);
            }
        }
    }
    rates
}

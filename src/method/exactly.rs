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

#[cfg(test)]
mod tests {
    use super::*;

    /// One channel, with one error at the last row.
    fn ratio(first: u64, values: &[f64], doubt: f64, time_doubt: f64, from: f64) -> f64 {
        let rows = values.len();
        let mut errors = vec![0.0; rows];
        errors[rows - 1] = 1e-3;
        let record = Record {
            channels: vec![0],
            spacing: None,
            unit: 1e-6,
            windows: vec![Window {
                first,
                times: (0..rows).map(|k| from + 0.5 * k as f64).collect(),
                time_doubts: vec![time_doubt; rows],
                values: values.to_vec(),
                errors,
                doubts: vec![doubt; rows],
            }],
        };
        exact_fit(&record).ratio
    }

    #[test]
    fn digits_steps_and_stamps_allow_for_errors() {
        let near = |found: f64, allowed: f64| {
            let wanted = 1e-3 / allowed;
            assert!((found / wanted - 1.0).abs() < 1e-9, "{found}, not {wanted}");
        };
        // Four roundings of a millionth of the peak, 2, for each step: row 1 is the 18th, with
        // sixteen before the first; with 83 rows before the window it is the hundredth.
        near(ratio(0, &[2.0, 2.0], 0.0, 0.0, 0.0), 8e-6 * 17.0);
        near(ratio(83, &[2.0, 2.0], 0.0, 0.0, 0.0), 8e-6 * 100.0);
        near(ratio(0, &[2.0, 2.0], 0.25, 0.0, 0.0), 0.25 + 8e-6 * 17.0);
        // Two in half a unit of time is a rate of 4; stamps round twice in units of an ulp.
        near(ratio(0, &[0.0, 2.0], 0.0, 0.01, 0.0), 0.04 + 8e-6 * 17.0);
        let far = 2f64.powi(40);
        let rounding = 4.0 * 2.0 * f64::EPSILON * (far + 0.5);
        near(ratio(0, &[0.0, 2.0], 0.0, 0.0, far), rounding + 8e-6 * 17.0);
    }
}

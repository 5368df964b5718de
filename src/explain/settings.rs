//! Errors of codes that adapt their step, over the error setting that they were given.

use super::advice::rounded_down;
use crate::number::{plain, short};
use crate::outcome::SettingRung;

/// The error keeps to the setting where its slope is within this of one and error over
/// setting stays within [`SPREAD`] (common practice, no source).
pub const SLOPE: f64 = 0.25;
/// Largest error over setting by the smallest over a ladder.
pub const SPREAD: f64 = 4.0;
/// A slope below this is no ground to say which setting would do.
const LEAST_SLOPE: f64 = 0.3;

/// Whether the error keeps to the setting.
pub fn is_proportional(slope: f64, spread: f64) -> bool {
    (slope - 1.0).abs() <= SLOPE && spread <= SPREAD
}

/// The setting that keeps the limit: two digits, rounded down, a tenth left for errors that
/// are not as regular as their slope.
///
/// # Formula
/// `0.9 s u^(-1/p)`, `s` the setting that used the share `u` of the limit, `p` the slope.
pub fn needed_setting(setting: f64, limit_used: f64, slope: f64) -> Option<f64> {
    if slope < LEAST_SLOPE || limit_used <= 0.0 || !limit_used.is_finite() {
        return None;
    }
    rounded_down(0.9 * setting * limit_used.powf(-1.0 / slope))
}

/// What the ladder of one channel says.
pub fn settings_text(
    channel: &str,
    rungs: &[SettingRung],
    slope: Option<f64>,
    proportional: Option<bool>,
    needed: Option<f64>,
) -> String {
    let counted = rungs.iter().filter(|rung| rung.counts);
    let ratios: Vec<f64> = counted.map(|rung| rung.ratio).collect();
    let (least, most) = ratios
        .iter()
        .fold((f64::INFINITY, 0.0f64), |(a, b), &r| (a.min(r), b.max(r)));
    let mut text = match ratios.len() {
        0 => return format!("`{channel}`: no error stands clear of digits and rounding"),
        1 => format!("`{channel}`: error over setting {}", short(least)),
        count => format!(
            "`{channel}`: error over setting {} to {} in {count} runs",
            short(least),
            short(most)
        ),
    };
    if let Some(slope) = slope {
        text += &format!(", slope {slope:.2}");
    }
    match proportional {
        Some(true) => text += "; the error keeps to the setting",
        Some(false) => text += "; the error does not keep to the setting",
        None => {}
    }
    if let Some(needed) = needed {
        let needed = plain(needed);
        text += &match proportional {
            Some(false) => {
                format!("; should its slope hold, a setting of {needed} keeps the limit")
            }
            _ => format!("; a setting of {needed} keeps the limit by this slope"),
        };
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_setting_that_a_limit_needs() {
        // Twice the limit at slope one: half the setting, a tenth less.
        assert_eq!(needed_setting(1e-4, 2.0, 1.0), Some(4.5e-5));
        // Slope one half: a quarter.
        assert_eq!(needed_setting(1e-4, 2.0, 0.5), Some(2.2e-5));
        assert_eq!(needed_setting(1e-4, 0.01, 1.0), Some(9e-3));
        assert_eq!(needed_setting(1e-4, 2.0, 0.1), None);
        assert_eq!(needed_setting(1e-4, f64::INFINITY, 1.0), None);
    }

    #[test]
    fn proportional_is_slope_and_spread() {
        assert!(is_proportional(1.25, 4.0));
        assert!(!is_proportional(1.26, 1.0));
        assert!(!is_proportional(0.74, 1.0));
        assert!(!is_proportional(1.0, 4.1));
    }
}

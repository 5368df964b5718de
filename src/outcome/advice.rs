//! Which step or error setting a submission needs, as plain data.

use super::steps::Rule;

/// Advice on the step.
#[derive(Clone, Debug, PartialEq)]
pub struct AdviceOutcome {
    /// The largest step that keeps the limits, in the time unit of the case.
    pub largest_step: Option<f64>,
    /// What keeps it from being longer.
    pub ruled_by: Option<Rule>,
    /// In a sentence.
    pub text: String,
}

/// The errors of one channel over a ladder of error settings.
#[derive(Clone, Debug, PartialEq)]
pub struct SettingsOutcome {
    /// The channel.
    pub channel: String,
    /// Coarsest setting first.
    pub rungs: Vec<SettingRung>,
    /// Slope of the error over the setting, both as logarithms, and its interval.
    pub slope: Option<(f64, f64, f64)>,
    /// Largest error over setting by the smallest, among rungs that count.
    pub spread: Option<f64>,
    /// Whether the error keeps to the setting; `None` where it cannot be told.
    pub proportional: Option<bool>,
    /// The setting that the limit needs.
    pub needed: Option<f64>,
    /// In a sentence.
    pub text: String,
}

/// One rung of such a ladder.
#[derive(Clone, Debug, PartialEq)]
pub struct SettingRung {
    /// The file.
    pub file: String,
    /// Its error setting.
    pub setting: f64,
    /// Its worst error.
    pub error: f64,
    /// The error over the setting.
    pub ratio: f64,
    /// True where the error stands clear of digits and rounding.
    pub counts: bool,
}

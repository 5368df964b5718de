//! What a failing run has probably failed by.

/// One likely cause.
#[derive(Clone, Debug)]
pub struct CauseOutcome {
    /// The run that shows it.
    pub file: String,
    /// Its kind, as in reports.
    pub kind: &'static str,
    /// What, where, the number and what to change.
    pub text: String,
    /// The number alone.
    pub number: Option<f64>,
    /// The part of the error that it leaves.
    pub left_over: f64,
}

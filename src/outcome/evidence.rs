//! What the rows say of the method that wrote them.

use crate::judge::Support;

/// Evidence for a submission.
#[derive(Clone, Debug)]
pub struct EvidenceOutcome {
    /// On all claims together; `None` where nothing is claimed.
    pub support: Option<Support>,
    /// Method, order and step, as far as they are claimed.
    pub claims: Vec<ClaimOutcome>,
    /// Methods that fit every run that rules anything out.
    pub families: Vec<String>,
    /// In the order of the runs.
    pub runs: Vec<RunEvidence>,
    /// What the factors of the modes say of the order; `None` before they were measured.
    pub growth: Option<GrowthSummary>,
}

/// One claim.
#[derive(Clone, Debug)]
pub struct ClaimOutcome {
    /// `method`, `order` or `step`.
    pub what: &'static str,
    /// As stated.
    pub stated: String,
    /// What the rows say of it.
    pub support: Support,
    /// Why.
    pub text: String,
}

/// Evidence of one run.
#[derive(Clone, Debug)]
pub struct RunEvidence {
    /// The file.
    pub file: String,
    /// The method as claimed.
    pub method: Option<String>,
    /// The step as stated.
    pub step: Option<f64>,
    /// On the pair of both.
    pub support: Option<Support>,
    /// Methods and steps that nothing speaks against.
    pub consistent: Vec<Consistent>,
    /// True where the rows cannot be told from the exact solution.
    pub exact: bool,
    /// Why, or what would settle it.
    pub note: Option<String>,
    /// The factor of each mode from row to row.
    pub growth: Vec<GrowthOutcome>,
}

/// A method at a step that nothing speaks against.
#[derive(Clone, Debug)]
pub struct Consistent {
    /// Methods that these rows cannot tell apart.
    pub family: String,
    /// The step; `None` where it follows the rows.
    pub step: Option<f64>,
    /// Steps from row to row.
    pub steps_per_row: u64,
    /// Largest residual, as a part of what digits and rounding allow.
    pub largest_residual: f64,
    /// How inputs were read, in words.
    pub inputs: &'static str,
}

/// The factor by which one mode has grown from row to row, measured from the rows.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GrowthOutcome {
    /// The eigenvalue: real and imaginary part, per unit of time.
    pub eigenvalue: (f64, f64),
    /// Distance of the rows times eigenvalue.
    pub z: (f64, f64),
    /// The factor from row to row.
    pub factor: (f64, f64),
    /// How far it is known.
    pub doubt: f64,
    /// `exp(z)`.
    pub exact: (f64, f64),
    /// Steps from row to row, where the step is stated.
    pub steps_per_row: Option<u64>,
    /// The factor of one step and how far it is known, where rows are several steps apart
    /// and it can be told: it is real and positive.
    pub per_step: Option<(f64, f64)>,
}

/// What the factors of all runs together come to.
#[derive(Clone, Debug, PartialEq)]
pub struct GrowthSummary {
    /// Coefficients of the series of `exp` that the factors share with it, the constant one
    /// included; one more than the order on linear problems.
    pub coefficients: Option<u32>,
    /// True where the factors cannot be told from `exp` itself.
    pub exact: bool,
    /// At the largest step over a mode that decays.
    pub damping: Option<Damping>,
    /// Why there are no factors, where there are none.
    pub missing: Option<&'static str>,
}

/// What is left of a decaying mode after one row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Damping {
    /// Distance of the rows times eigenvalue.
    pub z: (f64, f64),
    /// Magnitude of the factor.
    pub factor: f64,
    /// How far it is known.
    pub doubt: f64,
    /// `|exp(z)|`.
    pub exact: f64,
}

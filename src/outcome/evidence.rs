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

/// The factor by which a step has multiplied one mode, measured from the rows.
#[derive(Clone, Copy, Debug)]
pub struct GrowthOutcome {
    /// The eigenvalue: real and imaginary part, per unit of time.
    pub eigenvalue: (f64, f64),
    /// Step times eigenvalue.
    pub z: (f64, f64),
    /// The factor.
    pub factor: (f64, f64),
    /// How far it is known.
    pub doubt: f64,
    /// `exp(z)`.
    pub exact: (f64, f64),
    /// Coefficients of the Taylor series of `exp` that it reproduces, the constant one
    /// included, as far as the runs tell.
    pub coefficients: Option<u32>,
}

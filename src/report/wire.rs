//! The versioned shape of the JSON reports, apart from the inner types: names here
//! stay when those inside change, and [`SCHEMA`] rises when one of these does.

use serde::{Deserialize, Deserializer, Serialize};

/// Version of the names in the JSON reports.
pub const SCHEMA: u32 = 1;

/// A number that stands as null where it is not finite, as JSON has it: a report that was
/// written must be readable.
fn number<'a, D: Deserializer<'a>>(reader: D) -> Result<f64, D::Error> {
    let value = Option::<f64>::deserialize(reader)?;
    Ok(value.unwrap_or(f64::NAN))
}

/// The same for real and imaginary part.
fn pair<'a, D: Deserializer<'a>>(reader: D) -> Result<[f64; 2], D::Error> {
    let parts = <[Option<f64>; 2]>::deserialize(reader)?;
    Ok(parts.map(|part| part.unwrap_or(f64::NAN)))
}

/// A whole audit, or a part of one.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct AuditReport {
    pub stepgauge: String,
    pub schema: u32,
    pub summary: Summary,
    pub submissions: Vec<SubmissionReport>,
    pub not_audited: Vec<NotAuditedReport>,
    /// Submissions that nobody looked at since the audit was interrupted: the report is
    /// partial.
    #[serde(default)]
    pub left: usize,
    pub scope: String,
    /// What `--against` has found; the field is absent where nothing was compared, so that
    /// such reports are those of before.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub changes: Option<ChangesReport>,
    /// Which part of a divided audit this is; absent in the report of a whole one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub part: Option<PartReport>,
    /// By what rules of a reviewer it was made; absent where none were laid down.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub review: Option<ReviewReport>,
}

/// The rules of a reviewer, and what came of them.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ReviewReport {
    /// The files of `--limits` and `--require`, as named.
    pub limits: Option<String>,
    pub require: Option<String>,
    /// `allow` or `refuse`, as the next two.
    pub own_parameters: String,
    pub own_cases: String,
    pub controls: String,
    pub required: Vec<RequiredReport>,
}

/// One thing that has to be there.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct RequiredReport {
    pub case: String,
    pub runs: u64,
    pub rows: u64,
    pub methods: Vec<String>,
    pub method_shown: bool,
    /// Empty where it is missing, which is never in order.
    pub met_by: Vec<String>,
    pub text: String,
}

/// One part of an audit that was divided. Places number the submissions of the whole audit
/// from zero, those that could not be read first.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct PartReport {
    /// Counted from one.
    pub number: u32,
    pub of: u32,
    pub whole: WholeReport,
    /// Of `submissions`, in their order.
    pub places: Vec<u64>,
    /// Of `not_audited`, in their order.
    pub places_not_audited: Vec<u64>,
}

/// What was divided: equal in all parts of one audit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct WholeReport {
    pub paths: Vec<String>,
    pub options: Vec<String>,
    pub submissions: u64,
    pub unreadable: u64,
    pub bytes: u64,
    /// Digests, in hexadecimal digits.
    pub names: String,
    pub sizes: String,
    pub texts: String,
    pub cases: String,
    /// Of what `--require` lays down for each submission; absent without it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub terms: Option<String>,
}

/// An audit beside an earlier one.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ChangesReport {
    /// The earlier report, as named.
    pub earlier: String,
    pub worse_by: f64,
    /// Submissions that both have.
    pub compared: usize,
    pub worse: Vec<ChangeReport>,
    pub better: Vec<ChangeReport>,
    /// What changed and is neither.
    pub other: Vec<ChangeReport>,
    pub new_submissions: Vec<String>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ChangeReport {
    /// `error`, `order`, `method`, `claim`, `verdict`, `case`, `limits`, `not-audited`,
    /// `submission-vanished`, `run-vanished`, `channel-vanished` or `run-added`.
    pub kind: String,
    pub submission: String,
    pub file: Option<String>,
    pub channel: Option<String>,
    /// The number then and now, where it is about one.
    pub earlier: Option<f64>,
    pub now: Option<f64>,
    pub text: String,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct Summary {
    pub pass: usize,
    pub fail: usize,
    pub undecided: usize,
    pub in_order: bool,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct NotAuditedReport {
    pub name: String,
    pub faults: Vec<String>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct SubmissionReport {
    pub name: String,
    pub case: Option<String>,
    pub producer: Option<String>,
    pub expect: String,
    pub verdict: String,
    pub in_order: bool,
    pub reasons: Vec<String>,
    pub notes: Vec<String>,
    pub parameters: std::collections::BTreeMap<String, f64>,
    pub limits_from: String,
    pub runs: Vec<RunReport>,
    pub orders: Vec<OrderReport>,
    /// What the rows say of the claimed method; null without a case.
    pub evidence: Option<EvidenceReport>,
    /// Likely causes of a failure.
    pub causes: Vec<CauseReport>,
    /// Errors of runs with error settings; empty without such.
    pub settings: Vec<SettingsReport>,
    /// Advice on the step; null where nothing can be told.
    pub advice: Option<AdviceReport>,
}

/// Which step keeps the limits.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct AdviceReport {
    pub largest_step: Option<f64>,
    /// `accuracy` or `stability`; null where neither does, or it cannot be told.
    pub ruled_by: Option<String>,
    pub text: String,
}

/// The errors of one channel over the error settings of a code that adapts its step.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct SettingsReport {
    pub channel: String,
    /// Coarsest setting first.
    pub rungs: Vec<SettingRungReport>,
    /// Of the error over the setting, both as logarithms.
    pub slope: Option<f64>,
    pub low: Option<f64>,
    pub high: Option<f64>,
    /// Largest error over setting by the smallest.
    pub spread: Option<f64>,
    pub proportional: Option<bool>,
    /// The setting that the limit needs.
    pub needed: Option<f64>,
    pub text: String,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct SettingRungReport {
    pub file: String,
    pub setting: f64,
    pub error: Option<f64>,
    pub error_over_setting: Option<f64>,
    /// False where the error is hidden by digits or rounding.
    pub counts: bool,
}

/// A likely cause of a failure.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct CauseReport {
    pub kind: String,
    pub file: String,
    pub text: String,
    /// A factor, an offset, a time, a count of rows: what the text names.
    pub number: Option<f64>,
    /// The part of the error that it leaves.
    pub left_over: Option<f64>,
}

/// Which methods fit the rows, and what that says of the claims.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct EvidenceReport {
    /// `agrees`, `contradicts` or `cannot tell`; null where nothing is claimed.
    pub verdict: Option<String>,
    pub claims: Vec<ClaimReport>,
    /// Methods that fit every run which rules anything out.
    pub families: Vec<String>,
    pub runs: Vec<RunEvidenceReport>,
    /// What the growth of the modes says of the order; null without a case.
    pub growth: Option<GrowthSummaryReport>,
}

/// What the factors of all modes and runs come to.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct GrowthSummaryReport {
    /// Coefficients of the Taylor series of exp that the factors reproduce.
    pub coefficients: Option<u32>,
    /// One less.
    pub order: Option<u32>,
    /// True where the factors cannot be told from exp.
    pub exact: bool,
    pub damping: Option<DampingReport>,
    /// Why no factor could be measured.
    pub missing: Option<String>,
}

/// The decaying mode with the largest z.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct DampingReport {
    #[serde(deserialize_with = "pair")]
    pub z: [f64; 2],
    /// Magnitude of the factor from row to row.
    #[serde(deserialize_with = "number")]
    pub factor: f64,
    #[serde(deserialize_with = "number")]
    pub doubt: f64,
    #[serde(deserialize_with = "number")]
    pub exact: f64,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ClaimReport {
    /// `method`, `order` or `step`.
    pub what: String,
    pub stated: String,
    pub verdict: String,
    pub text: String,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct RunEvidenceReport {
    pub file: String,
    pub claim: PairReport,
    pub verdict: Option<String>,
    pub consistent: Vec<ConsistentReport>,
    /// True where the rows cannot be told from the exact solution.
    pub exact: bool,
    pub growth: Vec<GrowthReport>,
    pub note: Option<String>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct PairReport {
    pub method: Option<String>,
    pub step: Option<f64>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ConsistentReport {
    pub family: String,
    pub step: Option<f64>,
    pub steps_per_row: u64,
    /// As a part of what digits and rounding allow.
    pub largest_residual: Option<f64>,
    /// How inputs were read.
    pub inputs: String,
}

/// The factor of one mode from row to row; complex numbers as real and imaginary part.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct GrowthReport {
    #[serde(deserialize_with = "pair")]
    pub eigenvalue: [f64; 2],
    #[serde(deserialize_with = "pair")]
    pub z: [f64; 2],
    #[serde(deserialize_with = "pair")]
    pub factor: [f64; 2],
    #[serde(deserialize_with = "number")]
    pub doubt: f64,
    #[serde(deserialize_with = "pair")]
    pub exact: [f64; 2],
    /// Null where no step is stated.
    pub steps_per_row: Option<u64>,
    /// The factor of one step where rows are several apart, if it can be told.
    pub per_step: Option<f64>,
    pub per_step_doubt: Option<f64>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct RunReport {
    pub file: String,
    pub role: String,
    pub step: Option<f64>,
    pub tolerance: Option<f64>,
    pub rows: u64,
    pub layout: String,
    pub findings: Vec<FindingReport>,
    pub channels: Vec<ChannelReport>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct FindingReport {
    pub kind: String,
    pub line: Option<u64>,
    pub text: String,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct ChannelReport {
    pub name: String,
    pub unit: String,
    pub worst_error: Option<f64>,
    pub at: Option<f64>,
    pub rms_error: Option<f64>,
    pub end_error: Option<f64>,
    pub peak: Option<f64>,
    pub resolution: Option<f64>,
    pub digits: Option<String>,
    pub limit: Option<f64>,
    pub limit_used: Option<f64>,
    pub limit_used_at: Option<f64>,
    pub verdict: String,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct OrderReport {
    pub channel: String,
    pub claimed: Option<f64>,
    pub observed: Option<f64>,
    pub low: Option<f64>,
    pub high: Option<f64>,
    pub rungs_used: usize,
    pub verdict: Option<String>,
    pub note: Option<String>,
}

/// A case, with which a simulator can be driven.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, non_snake_case)]
pub struct CaseReport {
    pub stepgauge: String,
    pub schema: u32,
    pub name: String,
    pub title: String,
    pub time: TimeReport,
    pub parameters: std::collections::BTreeMap<String, f64>,
    pub states: Vec<StateReport>,
    pub A: Vec<Vec<f64>>,
    pub B: Vec<Vec<f64>>,
    pub constant: Vec<f64>,
    pub inputs: Vec<serde_json::Map<String, serde_json::Value>>,
    pub outputs: Vec<OutputReport>,
    pub jumps: Vec<f64>,
    pub shortest_time_constant: Option<f64>,
    pub shortest_period: Option<f64>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct TimeReport {
    pub unit: String,
    pub from: f64,
    pub to: f64,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct StateReport {
    pub name: String,
    pub unit: String,
    pub start: f64,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs, non_snake_case)]
pub struct OutputReport {
    pub name: String,
    pub unit: String,
    pub C: Vec<f64>,
    pub D: Vec<f64>,
    pub constant: f64,
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What is not finite is null, and null again once it was read.
    #[test]
    fn a_factor_without_a_number_is_read_back() {
        let growth = GrowthReport {
            eigenvalue: [800.0, 0.0],
            z: [800.0, -0.0],
            factor: [f64::INFINITY, 0.1 + 0.2],
            doubt: f64::NAN,
            exact: [f64::INFINITY, f64::NAN],
            steps_per_row: None,
            per_step: None,
            per_step_doubt: None,
        };
        let text = serde_json::to_string(&growth).unwrap();
        assert!(text.contains("null,0.30000000000000004"), "{text}");
        let read: GrowthReport = serde_json::from_str(&text).unwrap();
        assert_eq!(serde_json::to_string(&read).unwrap(), text);
        // A missing number is a fault all the same.
        assert!(
            serde_json::from_str::<GrowthReport>(&text.replace("\"doubt\":null,", "")).is_err()
        );
    }
}

//! What the errors of one channel of one run come to, and how they lie to the limit.

use crate::trajectory::Resolution;

/// The error that is allowed: `absolute + relative * |exact|`, or relative to the
/// channel's peak.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limit {
    /// In the unit of the channel.
    pub absolute: f64,
    /// A fraction.
    pub relative: f64,
    /// True where the fraction is of the peak.
    pub of_peak: bool,
}

/// Errors of one channel of one run.
///
/// # Units
/// Those of the channel in the case; times in the unit of the case.
#[derive(Clone, Debug)]
pub struct Deviation {
    /// Rows that were compared.
    pub rows: u64,
    /// Largest `|written - exact|`.
    pub worst: f64,
    /// The time of it.
    pub worst_at: f64,
    /// What the digits resolve there.
    pub worst_resolution: f64,
    /// The limit there.
    pub worst_limit: f64,
    /// Root mean square of the errors.
    pub rms: f64,
    /// `written - exact` in the last row.
    pub end: f64,
    /// Largest `|exact|` at the rows.
    pub peak: f64,
    /// Steepest change of the exact value from row to row.
    pub steepest: f64,
    /// What was assumed of the digits in the end.
    pub resolution: Resolution,
    /// How the errors lie to the limit.
    pub margin: Margin,
    /// The row that uses most of its limit.
    pub decisive: Spot,
    /// The same with the resolution counted against it.
    pub doubtful: Spot,
}

/// One row of one channel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spot {
    /// Its time.
    pub at: f64,
    /// `|written - exact|`.
    pub error: f64,
    /// What its digits resolve.
    pub resolution: f64,
    /// The limit there.
    pub limit: f64,
}

/// How the errors of all rows lie to the limit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Margin {
    /// Largest `|error| + resolution - limit`: below zero, every row keeps the limit.
    pub certain: f64,
    /// Largest `|error| - resolution - limit`: above zero, some row breaks it.
    pub broken: f64,
    /// Largest `|error| / limit`.
    pub used: f64,
}

impl Limit {
    /// The limit where the exact value has this magnitude.
    pub fn at(&self, size: f64) -> f64 {
        self.absolute + self.relative * size
    }
}

impl Margin {
    pub(super) const NOTHING: Margin = Margin {
        certain: f64::NEG_INFINITY,
        broken: f64::NEG_INFINITY,
        used: 0.0,
    };
}

impl Spot {
    pub(super) const NOWHERE: Spot = Spot {
        at: f64::NAN,
        error: 0.0,
        resolution: 0.0,
        limit: f64::INFINITY,
    };

    pub(super) fn most(&self) -> f64 {
        self.error + self.resolution
    }
}

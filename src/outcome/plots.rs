//! What plots are drawn from, where they are wanted.

/// One row of one channel of one file, in the units of the case.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PlotPoint {
    /// Its time.
    pub time: f64,
    /// The value as written.
    pub written: f64,
    /// `written - exact`.
    pub error: f64,
    /// What its digits resolve.
    pub resolution: f64,
    /// The limit there.
    pub limit: f64,
}

/// The exact solution of one channel over the window.
#[derive(Clone, Debug, PartialEq)]
pub struct ExactCurve {
    /// The channel.
    pub channel: String,
    /// Times and values; at a jump of the value its time comes twice.
    pub points: Vec<(f64, f64)>,
}

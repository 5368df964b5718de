//! The exact solution of a case at any times of its window, with an error bound.
//!
//! `segments` turns a case into one constant matrix over states and input
//! generators, and a list of jumps; `propagate` carries the vector from jump to jump
//! and on to any time. Nothing here is integrated step by step: see
//! [`crate::number::Propagator`].

mod check;
mod near;
mod propagate;
mod scales;
mod segments;

use std::sync::OnceLock;

use crate::case::Case;
use crate::fault::Fault;
use crate::formula::Formula;
use crate::number::{Double, Flow, Propagator, Quad};

pub use check::{Gap, SecondRoute};
pub use near::{Near, Nodes};
pub use propagate::{Values, Walk};
pub use scales::{TimeScales, approx_time_scales};
use segments::{Jump, System};

/// Most jumps of all inputs together within the window.
pub const MOST_JUMPS: usize = 100_000;

/// The closed form of a case may differ from the propagator by this fraction of the
/// channel's largest value; the two usually agree to 1e-25, and what a slip in a
/// formula changes is far larger.
const CLOSED_FORM_AGREEMENT: f64 = 1e-13;
/// Operations of closed forms that are worked out on loading, about; longer ones are tried at fewer
/// times. All cases of the library stay far below.
const MOST_OPERATIONS: usize = 300_000;

/// The exact solution of one case.
///
/// # Formula
/// Between jumps `z' = M z` for states and input generators together (Van Loan's
/// augmented matrix), so `x(t) = C exp(M (t - t0)) z(t0)`.
///
/// # Shape
/// Values come in the order of [`Case::channels`]: states, then outputs.
///
/// # Units
/// Those of the case.
///
/// # Domain
/// Times within the window of the case; `|M| (to - from) <= 2^58`; at most
/// [`MOST_JUMPS`] jumps.
///
/// # Error bound
/// Comes with every value. It is below half a unit in the last place of the `f64`, or
/// below 1e-24 of the channel's peak, unless it says otherwise: where double-double
/// does not reach that, the value is computed again in quad-double. The coefficients
/// are taken as exact as they stand in double-double; what their own rounding does
/// (2^-106 of each, times the number of radians or time constants gone through) is
/// not part of the bound.
///
/// # Source
/// `[van-loan-1978]` in [`crate::references`].
#[derive(Debug)]
pub struct Exact {
    system: System,
    from: Double,
    to: Double,
    table: Propagator<Double>,
    anchors: Vec<Flow<Double>>,
    fine: OnceLock<Option<Fine>>,
    /// Largest magnitude of each channel at a few times: never above the true peak.
    peaks: Vec<f64>,
    /// Largest difference between closed form and propagator, relative to the peak.
    closed_form_gap: Option<f64>,
}

/// Table and anchors in the second precision.
type Fine = (Propagator<Quad>, Vec<Flow<Quad>>);

/// A walk along times that gives values rounded to `f64`.
#[derive(Debug)]
pub struct RoundedWalk<'a> {
    exact: &'a Exact,
    walk: Walk<'a>,
}

impl RoundedWalk<'_> {
    /// The value of every channel at one time.
    ///
    /// # Errors
    /// A time outside the window.
    pub fn at(&mut self, time: impl Into<Double>) -> Result<Vec<Value>, Fault> {
        Ok(self
            .exact
            .rounded(self.walk.go(self.exact.within(time.into())?)))
    }
}

/// One value of a channel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Value {
    /// The nearest `f64`.
    pub value: f64,
    /// What the true value may differ from it by, the rounding to `f64` included.
    pub bound: f64,
}

impl Case {
    /// The exact solution.
    ///
    /// # Errors
    /// Where the case is outside the domain of [`Exact`], or its closed form
    /// contradicts the propagator.
    ///
    /// # Example
    /// ```
    /// let library = stepgauge::Library::new();
    /// let case = library.load("thermal/cooling-body", &Default::default()).unwrap();
    /// let exact = case.exact().unwrap();
    /// let start = exact.at(0.0).unwrap();
    /// assert!(start[0].bound <= 1e-13);
    /// ```
    pub fn exact(&self) -> Result<Exact, Fault> {
        let mut exact = Exact::new(self)?;
        exact.check_closed_form(self)?;
        Ok(exact)
    }
}

impl Exact {
    fn new(case: &Case) -> Result<Exact, Fault> {
        let system = System::new(case)?;
        let (from, to) = (case.time.from, case.time.to);
        let span = (to - from).to_f64();
        let table = Propagator::new(&system.matrix, span).ok_or_else(|| {
            Fault::new(format!(
                "case `{}` is out of range: its rates are too fast for so long a window \
                 (|A| (to - from) above 2^58), or it grows beyond all numbers",
                case.name
            ))
        })?;
        let start = system.start.clone();
        let anchors = propagate::anchors(&table, start, from, &system.jumps);
        let fine = OnceLock::new();
        let (peaks, closed_form_gap) = (vec![0.0; system.channels.len()], None);
        let mut exact = Exact {
            system,
            from,
            to,
            table,
            anchors,
            fine,
            peaks,
            closed_form_gap,
        };
        for time in exact.probe_times() {
            let values = exact.direct(time);
            if !values.value.iter().all(|value| value.is_finite()) {
                let text = "the solution grows beyond all numbers within the window";
                return Err(Fault::new(format!("case `{}`: {text}", case.name)));
            }
            for (peak, value) in exact.peaks.iter_mut().zip(&values.value) {
                *peak = peak.max(value.to_f64().abs());
            }
        }
        Ok(exact)
    }

    /// The value of every channel at one time: an `f64`, a [`Double`] or a
    /// [`Decimal`](crate::number::Decimal), each taken exactly.
    ///
    /// # Errors
    /// A time outside the window.
    pub fn at(&self, time: impl Into<Double>) -> Result<Vec<Value>, Fault> {
        self.walk_rounded().at(time)
    }

    /// The values at many times, row by row; fastest where the times rise in equal
    /// steps.
    ///
    /// # Errors
    /// A time outside the window.
    pub fn over<'a, T: Into<Double>>(
        &'a self,
        times: impl IntoIterator<Item = T> + 'a,
    ) -> impl Iterator<Item = Result<Vec<Value>, Fault>> + 'a {
        let mut walk = self.walk_rounded();
        times.into_iter().map(move |time| walk.at(time))
    }

    /// As [`Exact::at`] many times, remembering where it was.
    pub fn walk_rounded(&self) -> RoundedWalk<'_> {
        RoundedWalk {
            exact: self,
            walk: self.walk(),
        }
    }

    /// A walk along times of any order, each given in double-double.
    pub fn walk(&self) -> Walk<'_> {
        Walk::new(self)
    }

    fn within(&self, time: Double) -> Result<Double, Fault> {
        let slack = 4.0 * f64::EPSILON * time.to_f64().abs();
        let (early, late) = ((self.from - time).to_f64(), (time - self.to).to_f64());
        if early <= slack && late <= slack {
            return Ok(time);
        }
        let (from, to) = (self.from.to_f64(), self.to.to_f64());
        let text = format!(
            "time {} lies outside the window from {from} to {to}",
            time.to_f64()
        );
        Err(Fault::new(text))
    }

    fn rounded(&self, values: &Values) -> Vec<Value> {
        let pairs = values.value.iter().zip(&values.bound);
        pairs
            .map(|(&value, &bound)| {
                let nearest = value.to_f64();
                Value {
                    value: nearest,
                    bound: bound + value.low().abs(),
                }
            })
            .collect()
    }

    /// Start of the window.
    pub fn from(&self) -> Double {
        self.from
    }

    /// End of the window.
    pub fn to(&self) -> Double {
        self.to
    }

    /// Times within the window at which an input jumps or changes slope.
    pub fn jumps(&self) -> impl Iterator<Item = f64> {
        self.system.jumps.iter().map(|jump| jump.time.to_f64())
    }

    /// The first jump after a time, if it lies within a distance of it.
    pub fn jump_after(&self, time: Double, within: f64) -> Option<Double> {
        let jumps = &self.system.jumps;
        let next = jumps.get(jumps.partition_point(|jump| jump.time <= time))?;
        ((next.time - time).to_f64() <= within).then_some(next.time)
    }

    /// True where an input jumps within a distance of a time, on either side.
    pub fn jumps_near(&self, time: Double, within: f64) -> bool {
        self.jump_after(time - Double::from(within), 2.0 * within)
            .is_some()
    }

    /// True where an output jumps together with an input.
    pub fn has_feed_through(&self) -> bool {
        self.system.has_feed_through
    }

    /// Largest magnitude of each channel at a few times of the window.
    pub fn peaks(&self) -> &[f64] {
        &self.peaks
    }

    /// A bound of the fastest rate of the case: the row-sum norm of its matrix.
    pub fn fastest_rate(&self) -> f64 {
        self.table.norm()
    }

    /// Largest difference between the closed form and the propagator at the times
    /// that are tried on loading, relative to each channel's peak.
    pub fn closed_form_gap(&self) -> Option<f64> {
        self.closed_form_gap
    }

    /// Where the closed form is tried and peaks are looked for: evenly, and closer
    /// and closer to the start.
    fn probe_times(&self) -> Vec<Double> {
        let span = self.to - self.from;
        let even = (0..=32).map(|k| span * Double::from(f64::from(k) / 32.0));
        let early = (6..36).map(|k| span.scale(2f64.powi(-k)));
        even.chain(early).map(|time| self.from + time).collect()
    }

    fn check_closed_form(&mut self, case: &Case) -> Result<(), Fault> {
        let Some(formulas) = &case.closed_form else {
            return Ok(());
        };
        let mut variables: Vec<Double> = case.parameters.iter().map(|p| p.value).collect();
        variables.push(Double::ZERO);
        let mut worst = 0.0f64;
        let times = self.probe_times();
        let operations: usize = formulas.iter().map(Formula::operations).sum();
        let stride = (operations * times.len()).div_ceil(MOST_OPERATIONS);
        // Three times at least: at the start alone many a wrong form is right.
        let stride = stride.clamp(1, times.len() / 3);
        for time in times.into_iter().step_by(stride) {
            if let Some(last) = variables.last_mut() {
                *last = time;
            }
            let values = self.direct(time);
            for (index, formula) in formulas.iter().enumerate() {
                // No obstacle exists for plain numbers.
                let Ok(closed) = formula.evaluate(&variables) else {
                    continue;
                };
                let name = &case.states[index].name;
                let gap = (closed - values.value[index]).abs().to_f64() - values.bound[index];
                let peak = self.peaks[index].max(f64::MIN_POSITIVE);
                if gap.is_nan() || gap > CLOSED_FORM_AGREEMENT * peak {
                    if !case.replaced.is_empty() {
                        // A form that was written for other numbers (unequal rates,
                        // say) may not apply any more; the propagator does.
                        return Ok(());
                    }
                    let text = format!(
                        "case `{}` contradicts itself: at t = {} the closed form of `{name}` is {}, \
                         its rates lead to {}",
                        case.name,
                        time.to_f64(),
                        closed.to_f64(),
                        values.value[index].to_f64()
                    );
                    return Err(Fault::new(text).help("correct `exact` or `rate`"));
                }
                worst = worst.max(gap / peak);
            }
        }
        self.closed_form_gap = Some(worst.max(0.0));
        Ok(())
    }
}

#[cfg(test)]
mod tests;

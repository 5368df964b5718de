//! The exact solution held against a second route to it: the same equations in quad-double at
//! every time that is tried, and the closed form where the case has one.

use super::propagate::PEAK_PROMISE;
use super::{Exact, Value};
use crate::case::Case;
use crate::fault::Fault;
use crate::number::Double;

/// Steps of the even times that are tried.
const STEPS: u32 = 480;
/// Jumps around which times are tried.
const MOST_JUMPS: usize = 100;

/// What the second route shows of one case.
#[derive(Clone, Debug, PartialEq)]
pub struct SecondRoute {
    /// Times that were tried.
    pub times: usize,
    /// In the order of [`Case::channels`].
    pub channels: Vec<Gap>,
}

/// The largest difference of one channel.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Gap {
    /// In units in the last place of the value, or in `1e-24` of the channel's peak where that is
    /// more: half a unit is what rounding to `f64` makes of the exact solution.
    pub units: f64,
    /// When.
    pub at: f64,
    /// The largest part of its own bound that a difference makes up: above one, and the bound is
    /// wrong.
    pub of_bound: f64,
    /// The same as `units` against the closed form, where there is one.
    pub closed_form: Option<f64>,
}

impl SecondRoute {
    /// True where both routes agree to one unit in the last place, within the stated bounds.
    pub fn agrees(&self) -> bool {
        let near = |units: f64| units <= 1.0;
        let mut channels = self.channels.iter();
        channels
            .all(|gap| near(gap.units) && gap.of_bound <= 1.0 && gap.closed_form.is_none_or(near))
    }
}

impl Exact {
    /// Computes the solution of the case once more by the second route.
    ///
    /// # Units
    /// Those of the case for times; differences as said at [`Gap`].
    ///
    /// # Errors
    /// A case that quad-double cannot take either.
    pub fn check(&self, case: &Case) -> Result<SecondRoute, Fault> {
        let times = self.times_to_check();
        let mut channels = vec![Gap::default(); self.system.channels.len()];
        let mut walk = self.walk_rounded();
        // A form that was written for other numbers need not apply any more.
        let formulas = case
            .closed_form
            .as_ref()
            .filter(|_| self.closed_form_gap.is_some());
        let mut variables: Vec<Double> = case.parameters.iter().map(|p| p.value).collect();
        variables.push(Double::ZERO);
        for &time in &times {
            let values = walk.at(time)?;
            let Some(better) = self.in_quad(self.segment(time), time) else {
                let text = format!("case `{}` is out of range in quad-double", case.name);
                return Err(Fault::new(text));
            };
            let both = better.value.iter().zip(&better.bound).zip(&values);
            for (index, ((&truth, &truth_bound), value)) in both.enumerate() {
                let (gap, peak) = (&mut channels[index], self.peaks[index]);
                let (units, difference) = units(value, truth, peak);
                if units > gap.units {
                    (gap.units, gap.at) = (units, time.to_f64());
                }
                // A difference of nothing is within every bound.
                let of_bound = match difference == 0.0 {
                    true => 0.0,
                    false => difference / (value.bound + truth_bound),
                };
                gap.of_bound = gap.of_bound.max(of_bound);
            }
            if let Some(last) = variables.last_mut() {
                *last = time;
            }
            for (index, formula) in formulas.into_iter().flatten().enumerate() {
                if let Ok(closed) = formula.evaluate(&variables) {
                    let (units, _) = units(&values[index], closed, self.peaks[index]);
                    let known = &mut channels[index].closed_form;
                    *known = Some(known.unwrap_or(0.0).max(units));
                }
            }
        }
        Ok(SecondRoute {
            times: times.len(),
            channels,
        })
    }

    /// Even times, times that come closer and closer to the start, and both sides of jumps; in
    /// order.
    fn times_to_check(&self) -> Vec<Double> {
        let span = self.to - self.from;
        let even = (0..=STEPS).map(|k| Double::from(f64::from(k)) / Double::from(f64::from(STEPS)));
        let mut times: Vec<Double> = even.map(|part| self.from + span * part).collect();
        times.extend(self.probe_times());
        let close = span * Double::from(1e-9);
        for jump in self.system.jumps.iter().take(MOST_JUMPS) {
            times.extend([jump.time - close, jump.time, jump.time + close]);
        }
        times.retain(|&time| time >= self.from && time <= self.to);
        times.sort_by(|a, b| a.partial_cmp(b).unwrap_or(std::cmp::Ordering::Equal));
        times.dedup_by(|a, b| a == b);
        times
    }
}

/// How far a value is from the truth, in units and at all.
fn units(value: &Value, truth: Double, peak: f64) -> (f64, f64) {
    let size = truth.to_f64().abs();
    let unit = (size.next_up() - size).max(PEAK_PROMISE * peak);
    let difference = (Double::from(value.value) - truth).abs().to_f64();
    (difference / unit.max(f64::MIN_POSITIVE), difference)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Library, Replacements};

    fn checked(name: &str) -> (SecondRoute, bool) {
        let case = Library::new().load(name, &Replacements::new()).unwrap();
        let route = case.exact().unwrap().check(&case).unwrap();
        (route, case.closed_form.is_some())
    }

    #[test]
    fn both_routes_agree_on_cases_of_every_kind() {
        for name in [
            "electrical/rc-constant",
            "thermal/cold-room-defrost",
            "kinetics/bolus",
            "thermal/cooling-body",
        ] {
            let (route, has_closed_form) = checked(name);
            assert!(route.agrees(), "{name}: {route:?}");
            assert!(route.times > 400, "{name}");
            let gap = route.channels[0];
            // The nearest number is half a unit away at some time.
            assert!((0.4..0.51).contains(&gap.units), "{name}: {gap:?}");
            assert_eq!(gap.closed_form.is_some(), has_closed_form, "{name}");
            // The bound is mostly the rounding to the nearest number, and no looser than twice it.
            assert!((0.5..=1.0).contains(&gap.of_bound), "{name}: {gap:?}");
        }
    }

    #[test]
    fn a_difference_is_told_in_units_of_the_value_or_of_the_peak() {
        let off = |value: f64, truth: f64, peak: f64| {
            let value = Value { value, bound: 0.0 };
            units(&value, Double::from(truth), peak).0
        };
        assert_eq!(off(1.0 + 3.0 * f64::EPSILON, 1.0, 1.0), 3.0);
        assert!((off(1e-30, 0.0, 1.0) - 1e-6).abs() < 1e-20);
        assert_eq!(off(0.0, 0.0, 0.0), 0.0);
        let (mut route, _) = checked("electrical/rc-constant");
        for spoil in [
            |gap: &mut Gap| gap.units = 1.5,
            |gap: &mut Gap| gap.of_bound = 1.5,
            |gap: &mut Gap| gap.closed_form = Some(1.5),
        ] {
            let mut spoiled = route.clone();
            spoil(&mut spoiled.channels[0]);
            assert!(!spoiled.agrees());
        }
        route.channels[0].units = f64::NAN;
        assert!(!route.agrees());
    }

    #[test]
    fn both_sides_of_jumps_are_looked_at() {
        let case = Library::new().load("thermal/cold-room-defrost", &Replacements::new());
        let exact = case.unwrap().exact().unwrap();
        let times: Vec<f64> = exact
            .times_to_check()
            .iter()
            .map(|time| time.to_f64())
            .collect();
        assert!(times.windows(2).all(|two| two[0] < two[1]));
        let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
        assert_eq!((times[0], times[times.len() - 1]), (from, to));
        let close = 1e-9 * (to - from);
        let is_there = |wanted: f64| {
            times
                .iter()
                .any(|time| (time - wanted).abs() < 0.01 * close)
        };
        let jump = exact
            .jumps()
            .find(|&jump| jump > from && jump < to)
            .unwrap();
        assert!(
            is_there(jump - close) && is_there(jump) && is_there(jump + close),
            "{jump}"
        );
        assert!(exact.jumps_near(Double::from(jump - 0.9 * close), close));
        assert!(exact.jumps_near(Double::from(jump + 0.9 * close), close));
        assert!(!exact.jumps_near(Double::from(jump - 1.1 * close), close));
        assert!(!exact.jumps_near(Double::from(jump + 1.1 * close), close));
    }
}

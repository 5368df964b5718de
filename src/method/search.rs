//! The search through the catalogue: every method at the steps that are worth a look.

use std::sync::Arc;

use super::catalogue::Method;
use super::estimate::{Estimate, Targets};
use super::evidence::{Skipped, Tried};
use super::laid::Laid;
use super::leg::Leg;
use super::linear::Linear;
use super::march::Sides;
use super::record::Piece;
use super::recurrence::{Ranks, Reading};
use super::scheme::Coefficients;
use super::sheet::Sheet;
use super::starts::{FEW_LEFT, MOST_ROWS, with_hidden_start};
use super::trial::{Fit, GLANCE, Trial, larger};
use super::variant::{Variant, forms_of};

/// Steps from row to row that are tried whatever the errors say.
const ALWAYS: [u64; 4] = [1, 2, 4, 10];
/// Those that a method with a memory is tried at where nothing else explains the rows.
const SWEPT: [u64; 19] = [
    3, 5, 6, 7, 8, 9, 10, 12, 15, 16, 20, 24, 25, 30, 32, 40, 50, 64, 100,
];
/// States and earlier states that such a search is worth.
const MOST_SWEPT: usize = 24;
/// Most steps from row to row.
pub const MOST_STEPS: u64 = 200_000;

pub(super) struct Search<'a> {
    pub(super) linear: &'a Linear,
    pub(super) sheet: Sheet,
    /// The same rows with the exact values in them.
    pub(super) solution: Sheet,
    pub(super) complete: bool,
    pub(super) pieces: Vec<Piece>,
    pub(super) targets: Targets,
    pub(super) orders: Vec<Ranks>,
    /// The method for starts.
    pub(super) reference: Option<&'static Method>,
    /// The exact solution in place of a method.
    pub(super) exact: Fit,
    pub(super) claimed: &'a [&'static Method],
    pub(super) claimed_steps: &'a [u64],
}

/// What came of methods.
#[derive(Default)]
pub(super) struct Found {
    pub(super) tried: Vec<Tried>,
    pub(super) skipped: Vec<Skipped>,
}

impl Found {
    pub(super) fn add(&mut self, other: Found) {
        self.tried.extend(other.tried);
        self.skipped.extend(other.skipped);
    }
}

impl Search<'_> {
    /// A step of high order, for starts.
    pub(super) fn reference(&self, step: f64) -> Option<Arc<Leg>> {
        let (method, none) = (self.reference?, Ranks::new());
        let form = (Some(0), forms_of(method).first()?);
        Variant::new(method, form, Reading::AtNodes, (0, &none)).leg(self.linear, step, 1)
    }

    pub(super) fn method(&self, method: &'static Method, reading: Reading) -> Found {
        let mut found = Found::default();
        for (place, coefficients) in forms_of(method).iter().enumerate() {
            found.add(self.form(method, (Some(place), coefficients), reading));
        }
        found
    }

    /// One form of a method, with its place among those of the catalogue; semi-implicit ones
    /// in every order.
    pub(super) fn form(
        &self,
        method: &'static Method,
        (form, coefficients): (Option<usize>, &Coefficients),
        reading: Reading,
    ) -> Found {
        let mut found = Found::default();
        let orders = match coefficients {
            Coefficients::SemiImplicit => self.orders.clone(),
            _ => vec![Ranks::new()],
        };
        for (order, ranks) in orders.iter().enumerate() {
            let form = (form, coefficients);
            let variant = Variant::new(method, form, reading, (order, ranks));
            match self.sheet.record.spacing {
                Some((spacing, _)) => self.even(&variant, spacing, &mut found),
                None => self.uneven(&variant, &mut found),
            }
        }
        found
    }

    /// True where an input jumps or has a kink within a window of the record.
    pub(super) fn jumps_within_rows(&self) -> bool {
        self.sheet.record.windows.iter().any(|window| {
            let ends = window.times.first().zip(window.times.last());
            ends.is_some_and(|(from, to)| self.linear.jumps_within(from.next_up(), *to))
        })
    }

    fn is_claimed(&self, variant: &Variant) -> bool {
        let mut claimed = self.claimed.iter();
        claimed.any(|method| method.name == variant.method.name)
    }

    /// Rows at one spacing.
    fn even(&self, variant: &Variant, spacing: f64, found: &mut Found) {
        let claimed = self.is_claimed(variant);
        let mut counts: Vec<u64> = ALWAYS.to_vec();
        counts.extend(self.claimed_steps.iter().filter(|&&m| claimed || m <= 64));
        let estimate = self.estimate(variant, spacing);
        counts.extend(estimate.iter().flat_map(Estimate::counts));
        counts.retain(|&count| count > 0 && count <= MOST_STEPS);
        // Plain numbers before others, those nearest to the estimate first.
        let plain = |count: &u64| ALWAYS.contains(count) || self.claimed_steps.contains(count);
        let guess = estimate.map_or(0, |estimate| estimate.steps);
        counts.sort_unstable_by_key(|count| (!plain(count), count.abs_diff(guess), *count));
        counts.dedup();
        self.at_counts(variant, spacing, counts, estimate, found);
    }

    /// A method with a memory whose start has made larger errors than its steps: they do not
    /// tell how many there are, and beside the right number no start fits.
    pub(super) fn sweep(&self, method: &'static Method) -> Found {
        let mut found = Found::default();
        let Some((spacing, _)) = self.sheet.record.spacing else {
            return found;
        };
        for (place, scheme) in method.schemes.iter().enumerate() {
            let back = scheme.steps_back();
            if back < 2 || back * self.linear.size() > MOST_SWEPT {
                continue;
            }
            let (form, none) = ((Some(place), &forms_of(method)[place]), Ranks::new());
            let variant = Variant::new(method, form, Reading::AtNodes, (0, &none));
            self.at_counts(&variant, spacing, SWEPT.to_vec(), None, &mut found);
        }
        found
    }

    fn at_counts(
        &self,
        variant: &Variant,
        spacing: f64,
        counts: Vec<u64>,
        estimate: Option<Estimate>,
        found: &mut Found,
    ) {
        let first = found.tried.len();
        let near = |count: u64| estimate.is_some_and(|estimate| estimate.admits(count));
        for count in counts {
            // Few digits leave a range of steps open.
            let mut holding = found.tried[first..]
                .iter()
                .filter(|tried| tried.fit.holds());
            let known = holding.any(|tried| {
                (tried.range.0..=tried.range.1).contains(&count)
                    || (!self.wants_ranges() && near(tried.steps) && near(count))
            });
            if known && !self.claimed_steps.contains(&count) {
                continue;
            }
            // What cannot be solved, or reads its inputs no other way, has not run.
            let Some(trial) = self.trial(variant, spacing / count as f64, count) else {
                continue;
            };
            let free = self.is_free(&trial);
            let claimed = self.is_claimed(variant) && self.claimed_steps.contains(&count);
            let mut fit = self.fit(&trial, &self.sheet, variant.reading, claimed);
            if claimed && !free && !fit.holds() {
                fit.astray = larger(
                    fit.astray,
                    trial.astray(&self.sheet.laid, &self.sheet.peaks),
                );
            }
            if fit.compared == 0 || (free && fit.compared < FEW_LEFT && fit.holds()) {
                found.skipped.push(Skipped {
                    method: variant.method,
                    steps: count,
                    fit,
                });
                continue;
            }
            let range = if fit.holds() && near(count) && !self.exact.holds() && self.wants_ranges()
            {
                self.range(variant, spacing, count)
            } else {
                (count, count)
            };
            let mut tried = Tried {
                method: variant.method,
                reading: variant.reading,
                steps: count,
                range,
                step: Some(spacing / count as f64),
                fit,
                apart: f64::NAN,
                at_jumps: Fit::NOTHING,
                free,
                print: Vec::new(),
                coarse: self.coarse(spacing / count as f64),
            };
            if fit.holds() {
                tried.print = self.print(&trial);
            }
            if fit.holds() && self.exact.holds() {
                tried.apart = fit.ratio;
            } else if fit.holds() {
                tried.apart = self
                    .fit(&trial, &self.solution, variant.reading, true)
                    .ratio;
                tried.at_jumps = trial.across_jumps(&self.sheet);
            }
            found.tried.push(tried);
        }
    }

    /// True where no method is claimed: else the numbers of steps that matter are tried.
    fn wants_ranges(&self) -> bool {
        self.claimed.is_empty()
    }

    /// A method at a step; `None` where that cannot be worked out, or would cost too much
    /// and is not claimed.
    pub(super) fn trial(&self, variant: &Variant, step: f64, steps: u64) -> Option<Trial<'_>> {
        let claimed = self.is_claimed(variant)
            && (self.claimed_steps.is_empty() || self.claimed_steps.contains(&steps));
        if !(variant.affords(self.linear, steps, self.complete) || claimed) {
            return None;
        }
        Some(Trial {
            linear: self.linear,
            leg: variant.leg(self.linear, step, steps)?,
            unit: self.sheet.record.unit,
        })
    }

    /// What the matrix of a step is rounded by: elimination with `I - h A` in it.
    fn coarse(&self, step: f64) -> f64 {
        16.0 * f64::EPSILON * step * self.linear.matrix.row_sum_norm()
    }

    /// True where earlier states that a step needs are not all among the rows.
    fn is_free(&self, trial: &Trial) -> bool {
        trial.leg.recurrence.back() > 1 && (trial.leg.steps > 1 || !self.complete)
    }

    /// True where a number of steps agrees, at first sight where every state is there.
    fn may_hold(&self, variant: &Variant, spacing: f64, steps: u64) -> bool {
        let trial = self.trial(variant, spacing / steps as f64, steps);
        trial.is_some_and(|trial| {
            if !self.complete || self.is_free(&trial) {
                return self
                    .fit(&trial, &self.sheet, variant.reading, false)
                    .holds();
            }
            let Sheet { laid, peaks, .. } = &self.sheet;
            trial.is_finite() && trial.against_rows(laid, peaks, true).holds()
        })
    }

    /// How far numbers of steps about one that agrees agree too.
    fn range(&self, variant: &Variant, spacing: f64, steps: u64) -> (u64, u64) {
        let holds = |count: u64| self.may_hold(variant, spacing, count);
        let far = |towards: &dyn Fn(u64) -> u64| {
            let (mut inside, mut stride) = (steps, 1);
            while inside.abs_diff(steps) < 3 * steps {
                let next = towards(stride).clamp(1, MOST_STEPS);
                if next == inside || !holds(next) {
                    // Halve the way back to what is known to agree.
                    let mut outside = next;
                    while inside.abs_diff(outside) > 1 {
                        let middle = inside.midpoint(outside);
                        if holds(middle) {
                            inside = middle;
                        } else {
                            outside = middle;
                        }
                    }
                    return inside;
                }
                inside = next;
                stride *= 2;
            }
            inside
        };
        let down = far(&|stride| steps.saturating_sub(stride));
        let up = far(&|stride| steps + stride);
        (down, up)
    }

    /// Nothing is compared where a matrix has overflowed. `whole` asks how far rows are that
    /// few of them rule out already.
    fn fit(&self, trial: &Trial, sheet: &Sheet, reading: Reading, whole: bool) -> Fit {
        if !trial.is_finite() {
            return Fit::NOTHING;
        }
        let either = reading == Reading::EitherSide;
        if self.is_free(trial) {
            return match self.reference(trial.leg.recurrence.step) {
                Some(reference) => {
                    let reference = &reference.recurrence;
                    let over = |rows| {
                        with_hidden_start(trial, reference, sheet, &self.pieces, either, rows)
                    };
                    // A few rows more than there are unknowns rule most methods out.
                    let few = trial.leg.recurrence.back() + FEW_LEFT / 2;
                    let glances = if whole { &[][..] } else { &[few, GLANCE] };
                    let mut glances = glances.iter().map(|&rows| over(rows));
                    let ruled_out = glances.find(|glance| glance.ratio > 1.0);
                    ruled_out.unwrap_or_else(|| over(MOST_ROWS))
                }
                None => Fit::NOTHING,
            };
        }
        if self.complete {
            let glance = trial.against_rows(&sheet.laid, &sheet.peaks, true);
            if glance.holds() {
                return trial.against_rows(&sheet.laid, &sheet.peaks, false);
            }
            return glance;
        }
        let mut best = trial.run_from_start(sheet, Sides::After, either);
        let (from, to) = self.linear.window;
        if !best.holds() && !either && self.linear.jumps_within(from, to) {
            for sides in [Sides::Own, Sides::Before] {
                let other = trial.run_from_start(sheet, sides, either);
                if other.ratio < best.ratio {
                    best = other;
                }
            }
        }
        best
    }

    /// Rows at many spacings: each of them is one step or two.
    fn uneven(&self, variant: &Variant, found: &mut Found) {
        if !self.complete
            || matches!(
                variant.coefficients,
                Coefficients::Multistep { .. }
                    | Coefficients::Predicted { .. }
                    | Coefficients::Iterated(_)
            )
        {
            return;
        }
        for steps in [1, 2] {
            let fit = self.uneven_fit(variant, &self.sheet, steps);
            let (apart, print) = if fit.holds() {
                (
                    self.uneven_fit(variant, &self.solution, steps).ratio,
                    self.uneven_print(variant, steps),
                )
            } else {
                (f64::NAN, Vec::new())
            };
            if fit.compared > 0 {
                found.tried.push(Tried {
                    method: variant.method,
                    reading: variant.reading,
                    steps,
                    range: (steps, steps),
                    step: None,
                    fit,
                    apart,
                    at_jumps: Fit::NOTHING,
                    free: false,
                    coarse: 0.0,
                    print,
                });
            }
        }
    }

    /// A step from a row to the next, whatever that is.
    fn over_pair(&self, variant: &Variant, pair: &Laid, steps: u64) -> Option<Trial<'_>> {
        let step = (pair.times[1] - pair.times[0]) / steps as f64;
        self.trial(variant, step, steps)
    }

    fn uneven_fit(&self, variant: &Variant, sheet: &Sheet, steps: u64) -> Fit {
        let mut fit = Fit::NOTHING;
        for pair in &sheet.laid {
            let Some(trial) = self.over_pair(variant, pair, steps) else {
                return Fit::NOTHING;
            };
            fit = fit.and(trial.against_rows(std::slice::from_ref(pair), &sheet.peaks, true));
            if fit.ratio > 1.0 && fit.compared > GLANCE * self.linear.size() {
                break;
            }
        }
        fit
    }

    /// Numbers that are the same for methods which these rows cannot tell apart: the
    /// matrix from row to row and what the forcing does in a few places.
    fn print(&self, trial: &Trial) -> Vec<f64> {
        let mut print = vec![trial.leg.recurrence.back() as f64];
        print.extend(trial.across().rows().flatten());
        let places = self.pieces.iter().take(4).map(|piece| {
            let window = &self.sheet.record.windows[piece.window];
            window.times[piece.start + piece.rows / 2]
        });
        for time in places {
            let forced = trial.forced(time);
            print.extend(forced);
        }
        if self.pieces.is_empty() {
            print.extend(trial.forced(self.linear.window.0));
        }
        print
    }

    fn uneven_print(&self, variant: &Variant, steps: u64) -> Vec<f64> {
        let laid = &self.sheet.laid;
        let trial = laid.get(laid.len() / 2).and_then(|pair| {
            let trial = self.over_pair(variant, pair, steps)?;
            Some((trial, pair.times[0]))
        });
        trial.map_or(Vec::new(), |(trial, time)| {
            let mut print: Vec<f64> = trial.across().rows().flatten().copied().collect();
            print.extend(trial.forced(time));
            print
        })
    }
}

//! The grid of the time stamps: how far they are apart, whether as exact decimals,
//! and where rows are missing.

use super::batch::Exactly;
use super::number::Printed;
use super::resolution::{Resolution, decade, is_single, power_of_ten};
use crate::number::Decimal;

/// What the stamps of a file have in common.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Grid {
    /// Equal steps, but for a few.
    Uniform {
        /// The step, in the unit of the file.
        spacing: f64,
        /// The step where all stamps are exact decimal multiples of it.
        exact: Option<Decimal>,
        /// A larger step is a hole, where rows are missing, but for these two sizes: they
        /// come in long runs, as phases of coarser output. Zero stands for none.
        phases: [f64; 2],
    },
    /// Steps of many sizes.
    Varied,
}

/// Steps that count as equal.
#[derive(Clone, Debug)]
struct Cluster {
    spacing: f64,
    tolerance: f64,
    exact: Option<Decimal>,
    /// All steps of the cluster are the same decimal.
    identical: bool,
    sum: f64,
    count: u64,
    runs: u64,
    run: u64,
    longest_run: u64,
}

/// Sizes of steps that are told apart; more make the grid a varied one.
const MOST_CLUSTERS: usize = 24;
/// Share of steps that must be equal for a grid to be uniform.
const UNIFORM_SHARE: f64 = 0.75;
/// The same where the steps are exact decimals.
const EXACT_SHARE: f64 = 0.5;
/// So many larger steps in a row are a phase of coarser output and no hole.
const PHASE: u64 = 3;

/// Steps of a phase that are longer than this many of the others must make up at least this share
/// of all steps: a few rows across a long stretch do not stand for the rows that are missing.
pub(crate) const LONG_PHASE: f64 = 20.0;
pub(crate) const LEAST_SHARE: f64 = 0.02;
/// Steps of so many units or fewer are told apart where they differ by one.
const MOST_UNITS: f64 = 8.0;
/// Where stamps are rounded to units of about the step, steps are of one of two sizes, but for so
/// many: those are holes.
const ROUNDED_SHARE: f64 = 0.95;

/// So many stamps of seven digits and more show by themselves what they were stored in.
const LONG_STAMPS: u64 = 8;
/// Steps of so many sizes or fewer, so many of them in a row, were chosen.
const MOST_CHOSEN: usize = 4;
const LONG_RUN: u64 = 10;

/// Gathers the steps between stamps.
#[derive(Clone, Debug, Default)]
pub(super) struct GridFinder {
    last: Option<(f64, Exactly, f64)>,
    most_significant: u8,
    most_decimals: u8,
    /// Stamps with more digits than single precision needs to tell them apart, and whether one of
    /// all stamps is no number in single precision.
    long: u64,
    not_single: bool,
    steps: u64,
    /// Stamps that equal the one before.
    repeats: u64,
    sum: f64,
    overflowed: bool,
    clusters: Vec<Cluster>,
    latest: usize,
}

impl GridFinder {
    /// True for stamps that were numbers in single precision, however they were printed.
    pub(super) fn is_single(&self) -> bool {
        self.long >= LONG_STAMPS && !self.not_single
    }

    /// True for stamps in a few phases of steps that are all the same decimal: these were chosen.
    /// Rounding would put other steps among them.
    pub(super) fn is_chosen(&self) -> bool {
        let chosen = |cluster: &Cluster| {
            cluster.identical && cluster.exact.is_some() && cluster.count >= LONG_RUN * cluster.runs
        };
        let few = self.clusters.len() <= MOST_CHOSEN && !self.overflowed;
        few && self.repeats == 0 && !self.clusters.is_empty() && self.clusters.iter().all(chosen)
    }

    /// The average step.
    pub(super) fn mean_step(&self) -> f64 {
        self.sum / self.steps.max(1) as f64
    }

    /// The stamp that comes next does not follow the last one.
    pub(super) fn interrupt(&mut self) {
        self.last = None;
    }

    pub(super) fn add(&mut self, time: f64, exact: Exactly, printed: Printed) {
        self.most_significant = self.most_significant.max(printed.significant);
        let unit = self.unit(time, printed);
        if let Some((last, last_exact, last_unit)) = self.last {
            let step = time - last;
            self.repeats += u64::from(step == 0.0);
            if step > 0.0 {
                let exact = || exact.decimal()?.minus(last_exact.decimal()?);
                // Two rounded stamps each: a step is off by half their units together,
                // and two steps are compared.
                let rounding = 4.0 * f64::EPSILON * time.abs();
                let tolerance = 1.05 * (unit + last_unit) + 1e-9 * step + rounding;
                self.count(step, exact, tolerance);
            }
        }
        self.last = Some((time, exact, unit));
    }

    /// One unit in the last place that the stamp was printed or stored to, as far as it shows.
    fn unit(&mut self, time: f64, printed: Printed) -> f64 {
        let own = |decimals: i32| power_of_ten(-decimals);
        let exponent = if printed.scientific { decade(time) } else { 0 };
        let decimals = i32::from(printed.decimals) - exponent;
        if !printed.scientific {
            self.most_decimals = self.most_decimals.max(printed.decimals);
        }
        self.long += u64::from(printed.significant > 6);
        self.not_single = self.not_single || !is_single(time, printed.significant);
        let stored = match self.is_single() {
            true => 2.0 * Resolution::Single.at(time),
            false => 0.0,
        };
        let written = if time == 0.0 && printed.decimals == 0 {
            0.0
        } else if printed.scientific || printed.significant == self.most_significant && time != 0.0
        {
            own(decimals)
        } else {
            // Short text of a number that was printed to more digits elsewhere.
            own(i32::from(self.most_decimals))
        };
        written.max(stored)
    }

    fn count(&mut self, step: f64, exact: impl Fn() -> Option<Decimal>, tolerance: f64) {
        self.steps += 1;
        self.sum += step;
        // Where stamps are printed to few digits for their step, equal decimals tell
        // more than a tolerance as wide as the step itself.
        let coarse = tolerance > 0.3 * step;
        // Whichever of the two was printed more coarsely.
        let near = |cluster: &Cluster| {
            (cluster.spacing - step).abs() <= tolerance.max(cluster.tolerance) && !coarse
        };
        // Nearly always the step is that of the first rows; whether as a decimal as well matters
        // only as long as all of them were.
        let first = self.clusters.first();
        let exact = match first.is_some_and(|first| near(first) && !first.identical) {
            true => None,
            false => exact(),
        };
        let same = |cluster: &Cluster| near(cluster) || exact.is_some() && exact == cluster.exact;
        let known = self.clusters.iter().position(same);
        let place = match known {
            Some(place) => place,
            None if self.clusters.len() < MOST_CLUSTERS => {
                self.clusters.push(Cluster {
                    spacing: step,
                    tolerance: if coarse { 0.0 } else { tolerance },
                    exact,
                    identical: true,
                    sum: 0.0,
                    count: 0,
                    runs: 0,
                    run: 0,
                    longest_run: 0,
                });
                self.clusters.len() - 1
            }
            None => {
                self.overflowed = true;
                self.latest = usize::MAX;
                return;
            }
        };
        let follows = self.latest == place;
        let cluster = &mut self.clusters[place];
        cluster.tolerance = cluster.tolerance.max(if coarse { 0.0 } else { tolerance });
        cluster.identical &= exact.is_some() && exact == cluster.exact;
        cluster.sum += step;
        cluster.count += 1;
        cluster.runs += u64::from(!follows);
        cluster.run = if follows { cluster.run + 1 } else { 1 };
        cluster.longest_run = cluster.longest_run.max(cluster.run);
        self.latest = place;
    }

    /// The step of stamps that were rounded to units not much shorter than it: steps of one number
    /// of units, with others of a unit more or less among them as evenly as rounding puts them
    /// there. Steps that were chosen come in longer runs, or in more sizes.
    fn rounded_to(&self, unit: f64, most: &Cluster) -> Option<f64> {
        let usual = (most.spacing / unit).round();
        let of_size = |units: f64| {
            let near = move |cluster: &&Cluster| (cluster.spacing / unit - units).abs() < 0.1;
            self.clusters.iter().find(near)
        };
        let (less, more) = (of_size(usual - 1.0), of_size(usual + 1.0));
        // Steps of no unit are stamps that repeat.
        let repeats = if usual == 1.0 { self.repeats } else { 0 };
        let beside = [less, more].into_iter().flatten();
        let others = repeats + beside.clone().map(|cluster| cluster.count).sum::<u64>();
        let steps = most.count + others;
        let all = self.steps + repeats;
        if 20 * others <= self.steps || (steps as f64) < ROUNDED_SHARE * all as f64 {
            return None;
        }
        let sum = most.sum + beside.map(|cluster| cluster.sum).sum::<f64>();
        let step = sum / steps as f64;
        // Of steps in a row, rounding makes one a unit longer or shorter at the latest after the
        // reciprocal of what they are beyond a whole unit; and no sooner than that.
        let share = step / unit - usual;
        let is_even = |cluster: Option<&Cluster>, of_others: f64| {
            let longest = 2.0 * (1.0 / of_others.max(1e-9) + 2.0);
            cluster.is_none_or(|cluster| cluster.longest_run as f64 <= longest)
        };
        // Steps of none do not end a run.
        let counts = usual > 1.0 || share > 0.0;
        let even = !counts || is_even(Some(most), share.abs());
        let beside_even =
            is_even(more, (1.0 - share).min(1.0)) && is_even(less, (1.0 + share).min(1.0));
        (even && beside_even).then_some(step)
    }

    /// True where the last stamps are no multiples of a step of so many units.
    fn has_moved(&self, unit: f64, units: f64) -> bool {
        let off = |cluster: &Cluster| {
            let size = cluster.spacing / unit;
            cluster.count as f64 * (size - (size / units).round() * units)
        };
        self.clusters.iter().map(off).sum::<f64>().abs() > 0.5
    }

    /// The grid, with how finely the stamps turned out to be printed.
    pub(super) fn conclude(&self, printed: Resolution) -> Grid {
        let Some(most) = self.clusters.iter().max_by_key(|cluster| cluster.count) else {
            return Grid::Varied;
        };
        // A step of a few units of the last decimal, with steps of one more or less among them:
        // the true step lies between, and its stamps were rounded.
        let last = self.last.map_or(0.0, |(time, ..)| time);
        let unit = 2.0 * printed.at(last);
        let units = most.spacing / unit;
        let few_units = printed != Resolution::Full
            && (0.5..=MOST_UNITS).contains(&units)
            && (units - units.round()).abs() < 1e-6 * units;
        let mean = self.sum / (self.steps + self.repeats) as f64;
        // So many rows share a stamp that the step is less than a unit of the last digits: whatever
        // steps the stamps show are those of their rounding.
        let shared = printed != Resolution::Full && mean <= unit && 20 * self.repeats > self.steps;
        let rounded = few_units.then(|| self.rounded_to(unit, most)).flatten();
        if let Some(spacing) = rounded.or(shared.then_some(mean)) {
            return Grid::Uniform {
                spacing,
                exact: None,
                phases: [0.0; 2],
            };
        }
        // Exact decimals that are all multiples of one step leave little doubt.
        let exact_grid = most.identical && most.exact.is_some();
        // Of a schedule that goes over to longer steps for good, the short ones are no grid.
        let returns = self
            .clusters
            .first()
            .is_some_and(|first| most.runs > u64::from(!std::ptr::eq(first, most)));
        let share = match exact_grid && returns {
            true => EXACT_SHARE,
            false => UNIFORM_SHARE,
        };
        if (most.count as f64) < share * self.steps as f64 {
            let mean = self.sum / self.steps as f64;
            // Rounding that doubles a step would leave out others: see above.
            let near = |c: &Cluster| {
                (c.spacing - mean).abs() <= 2.1 * printed.at(last) && c.spacing <= 2.0 * mean
            };
            let rounded = !self.overflowed && self.clusters.iter().all(near);
            // Steps that differ by no more than the rounding of their stamps.
            return if rounded {
                Grid::Uniform {
                    spacing: mean,
                    exact: None,
                    phases: [0.0; 2],
                }
            } else {
                Grid::Varied
            };
        }
        let exact = most.exact.filter(|_| most.identical);
        // A single step of a unit more moves all stamps after it off the multiples: the true step
        // is a little longer, and they were rounded.
        let exact = exact.filter(|_| !few_units || !self.has_moved(unit, units));
        let spacing = exact.map_or(most.sum / most.count as f64, |e| e.to_double().to_f64());
        let mut phases = [0.0; 2];
        let coarser = self
            .clusters
            .iter()
            // Rows lost here and there do not stand together.
            .filter(|cluster| {
                let together = cluster.count >= PHASE * cluster.runs;
                let long = cluster.longest_run >= PHASE;
                let short = cluster.spacing <= LONG_PHASE * spacing;
                let enough = cluster.count as f64 >= LEAST_SHARE * self.steps as f64;
                cluster.spacing > 1.5 * spacing && long && together && (short || enough)
            });
        for (phase, cluster) in phases.iter_mut().zip(coarser) {
            *phase = cluster.spacing;
        }
        Grid::Uniform {
            spacing,
            exact,
            phases,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::number::Field;
    use super::super::resolution::Pattern;
    use super::*;

    fn grid(stamps: impl IntoIterator<Item = String>) -> Grid {
        let mut finder = GridFinder::default();
        let mut pattern = Pattern::new();
        for text in stamps {
            let Field::Number(time, printed) = Field::read(text.as_bytes(), false) else {
                panic!("{text}")
            };
            finder.add(time, Exactly::Decimal(Decimal::parse(&text)), printed);
            pattern.add(time, printed);
        }
        let mut whole = Pattern::new();
        whole.join(&pattern);
        finder.conclude(whole.conclude(None))
    }

    fn spacing(grid: Grid) -> (f64, bool) {
        match grid {
            Grid::Uniform { spacing, exact, .. } => (spacing, exact.is_some()),
            Grid::Varied => (0.0, false),
        }
    }

    #[test]
    fn exact_decimal_grids() {
        let shortest = |k: i32| format!("{}", f64::from(k) / 10.0);
        assert_eq!(spacing(grid((0..50).map(shortest))), (0.1, true));
        assert_eq!(
            spacing(grid((0..50).map(|k| format!("{:.3}", 0.25 * f64::from(k))))),
            (0.25, true)
        );
        assert_eq!(
            spacing(grid(
                (0..50).map(|k| format!("{:.4e}", f64::from(k) * 20.0))
            )),
            (20.0, true)
        );
    }

    #[test]
    fn rounded_and_summed_stamps_are_uniform_but_not_exact() {
        let (found, exact) = spacing(grid(
            (0..300).map(|k| format!("{:.2}", f64::from(k) / 75.0)),
        ));
        assert!((found - 1.0 / 75.0).abs() < 1e-4 && !exact, "{found}");
        let mut time = 0.0;
        let summed = (0..1000).map(|_| {
            time += 0.1;
            format!("{time}")
        });
        let (found, exact) = spacing(grid(summed));
        assert!((found - 0.1).abs() < 1e-9 && !exact);
        let six = (1..900).map(|k| format!("{:.5e}", f64::from(k) * 0.123_456_7));
        assert!((spacing(grid(six)).0 - 0.123_456_7).abs() < 1e-3);
    }

    #[test]
    fn holes_are_told_from_coarser_phases_and_varied_steps() {
        let hole = (0..100)
            .filter(|k| ![40, 41, 70].contains(k))
            .map(|k| k.to_string());
        assert!(matches!(
            grid(hole),
            Grid::Uniform {
                phases: [0.0, 0.0],
                ..
            }
        ));
        let phases = (0..400)
            .chain((400..=1000).step_by(10))
            .map(|k| k.to_string());
        assert!(matches!(
            grid(phases),
            Grid::Uniform {
                phases: [10.0, 0.0],
                ..
            }
        ));
        let varied = (0..100).map(|k| format!("{}", f64::from(k).powf(1.5)));
        assert_eq!(grid(varied), Grid::Varied);
        assert_eq!(grid(["0".to_owned()]), Grid::Varied);
    }
}

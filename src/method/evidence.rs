//! Which methods of the catalogue, at which steps, could have written a file.
//!
//! Every method is tried at the steps that its own error points to: on a linear model the
//! error that a method would have made falls with its step, so the error in the file says
//! how many internal steps lie between two rows, if that method wrote them. What is left is
//! the set of consistent pairs, methods that these rows cannot tell apart under one name.

use super::catalogue::{METHODS, Method};
use super::linear::{Linear, Side};
use super::march::{March, Sides};
use super::record::{Piece, Record};
use super::recurrence::{Ranks, Reading, Recurrence};
use super::scheme::{Coefficients, Scheme};
use super::starts::with_hidden_start;
use super::trial::{Fit, GLANCE, Trial};

/// One method at one step, compared with the rows.
#[derive(Clone, Debug)]
pub struct Tried {
    /// The method.
    pub method: &'static Method,
    /// How the inputs were read.
    pub reading: Reading,
    /// Steps from row to row; zero where every spacing of the rows was one or two steps.
    pub steps: u64,
    /// Where more numbers of steps agree: the least and the most of them.
    pub range: (u64, u64),
    /// The step; `None` where it follows the rows.
    pub step: Option<f64>,
    /// How well it agrees.
    pub fit: Fit,
    /// What tells it apart from other methods on these rows.
    print: Vec<f64>,
}

/// Methods that these rows cannot tell apart, at one step.
#[derive(Clone, Debug)]
pub struct Family {
    /// In the order of the catalogue.
    pub methods: Vec<&'static Method>,
    /// How the inputs were read.
    pub reading: Reading,
    /// Steps from row to row.
    pub steps: u64,
    /// Where more numbers of steps agree: the least and the most of them.
    pub range: (u64, u64),
    /// The step; `None` where it follows the rows.
    pub step: Option<f64>,
    /// The better of the fits.
    pub fit: Fit,
}

/// What the rows of one file say of all methods.
#[derive(Clone, Debug)]
pub struct Evidence {
    /// Every pair that was compared.
    pub tried: Vec<Tried>,
    /// Those that nothing speaks against.
    pub consistent: Vec<Family>,
    /// The exact solution itself.
    pub exact: Fit,
}

/// Steps from row to row that are tried whatever the errors say.
const ALWAYS: [u64; 3] = [1, 2, 4];
/// Most steps from row to row.
pub const MOST_STEPS: u64 = 200_000;
/// Steps that a search may take one by one where inputs jump.
const MOST_MARCHED: u64 = 20_000;
/// Pieces that are compared at most, the first one among them.
const MOST_PIECES: usize = 16;
/// Pairs of rows that are compared where the spacing varies.
const MOST_PAIRS: usize = 120;
/// Entries of the matrices of two methods that differ by less than this part of them are
/// the same: they are computed along different ways.
const SAME: f64 = 1e-11;

impl Evidence {
    /// True where the rows are no further from the exact solution than digits and rounding
    /// allow.
    pub fn is_exact(&self) -> bool {
        self.exact.holds()
    }

    /// True where anything could be compared.
    pub fn is_any(&self) -> bool {
        self.tried.iter().any(|tried| tried.fit.compared > 0)
    }

    /// The best fit of a set of methods at so many steps from row to row; at any number of
    /// them where none is given.
    pub fn best(&self, methods: &[&Method], steps: Option<u64>) -> Option<&Tried> {
        let wanted = self.tried.iter().filter(|tried| {
            tried.fit.compared > 0
                && methods.iter().any(|m| m.name == tried.method.name)
                && steps.is_none_or(|steps| {
                    tried.steps == steps
                        || tried.fit.holds() && (tried.range.0..=tried.range.1).contains(&steps)
                })
        });
        wanted.min_by(|a, b| a.fit.ratio.total_cmp(&b.fit.ratio))
    }
}

/// Compares the rows with every method. `claimed` are the methods and the numbers of steps
/// from row to row that are tried in any case.
///
/// # Cost
/// Bounded by the windows of the record, see [`super::windows`].
pub fn evidence(
    linear: &Linear,
    record: &Record,
    claimed: &[&'static Method],
    claimed_steps: &[u64],
) -> Evidence {
    let mut pieces = record.pieces(linear);
    thin(&mut pieces);
    let exact = exact_fit(record);
    let mut search = Search {
        linear,
        record,
        complete: record.states(linear.size()).is_some(),
        pieces,
        targets: targets(record),
        orders: rank_orders(linear),
        gauss: super::find("Gauss 6").map(|method| method.schemes[0].coefficients()),
        exact: exact.holds(),
        claimed,
        claimed_steps,
        tried: Vec::new(),
    };
    for method in METHODS {
        search.method(method, Reading::AtNodes);
    }
    // Other ways to read the inputs are looked at where the plain one explains nothing, or
    // not the claim.
    let explained = |search: &Search| {
        let holds = |tried: &Tried| {
            let wanted = claimed.is_empty() || claimed.iter().any(|m| m.name == tried.method.name);
            let step = claimed_steps.is_empty() || claimed_steps.contains(&tried.steps);
            tried.fit.holds() && wanted && step
        };
        search.tried.iter().any(holds)
    };
    if !linear.is_steady() && !explained(&search) && !exact.holds() {
        for reading in [Reading::Held, Reading::FromEnd, Reading::Mean] {
            for method in METHODS {
                search.method(method, reading);
            }
        }
    }
    let consistent = families(&search.tried);
    Evidence {
        tried: search.tried,
        consistent,
        exact,
    }
}

/// Keeps the first piece and others spread over the file.
fn thin(pieces: &mut Vec<Piece>) {
    if pieces.len() <= MOST_PIECES {
        return;
    }
    let count = pieces.len();
    let mut kept: Vec<Piece> = (0..MOST_PIECES)
        .map(|k| pieces[k * (count - 1) / (MOST_PIECES - 1)])
        .collect();
    kept.dedup();
    *pieces = kept;
}

/// The rows beside the exact values.
fn exact_fit(record: &Record) -> Fit {
    let peaks = record.peaks();
    let mut fit = Fit::NOTHING;
    for window in &record.windows {
        let rates = steepest(record, window);
        for row in 0..window.rows() {
            for (place, peak) in peaks.iter().enumerate() {
                let at = row * record.width() + place;
                let error = window.errors[at].abs();
                if !error.is_finite() {
                    continue;
                }
                // The roundings of a program that steps from row to row.
                let steps = (window.first as usize + row + 16) as f64;
                let allowed = window.doubts[at]
                    + 4.0 * steps * record.unit * peak
                    + rates[place]
                        * (window.time_doubts[row] + 2.0 * f64::EPSILON * window.times[row].abs());
                fit.add(error, allowed, *peak);
            }
        }
    }
    fit
}

fn steepest(record: &Record, window: &super::record::Window) -> Vec<f64> {
    let width = record.width();
    let mut rates = vec![0.0f64; width];
    for row in 1..window.rows() {
        let gap = window.times[row] - window.times[row - 1];
        for (place, rate) in rates.iter_mut().enumerate() {
            let step =
                window.values[row * width + place] - window.values[(row - 1) * width + place];
            if gap > 0.0 && step.is_finite() {
                *rate = rate.max(step.abs() / gap);
            }
        }
    }
    rates
}

/// An error in the file that stands clear of its digits: which row and channel, and how
/// large.
#[derive(Clone, Copy, Debug)]
struct Target {
    row: usize,
    place: usize,
    error: f64,
    peak: f64,
}

/// Errors near the start of the file that say how long the steps were.
fn targets(record: &Record) -> Vec<Target> {
    let Some(window) = record.windows.first() else {
        return Vec::new();
    };
    let peaks = record.peaks();
    let mut targets = Vec::new();
    let mut rows = 0;
    for row in 1..window.rows() {
        if !record.follows(window, row) || rows >= GLANCE {
            break;
        }
        let before = targets.len();
        for (place, &peak) in peaks.iter().enumerate() {
            let at = row * record.width() + place;
            let error = window.errors[at];
            let noise = window.doubts[at] + 32.0 * record.unit * peak;
            if error.is_finite() && error.abs() > noise && peak > 0.0 {
                targets.push(Target {
                    row,
                    place,
                    error,
                    peak,
                });
            }
        }
        rows += usize::from(targets.len() > before);
    }
    targets
}

/// The orders in which a semi-implicit step may move the states: positions after the rates
/// that they follow or before them where there are such, else one by one.
pub(crate) fn rank_orders(linear: &Linear) -> Vec<Ranks> {
    let size = linear.size();
    let is_position = |i: usize| {
        let row = linear.matrix.row(i);
        let others = row.iter().enumerate().filter(|(_, x)| **x != 0.0);
        let others: Vec<usize> = others.map(|(j, _)| j).collect();
        others.len() == 1
            && others[0] != i
            && linear.constant[i] == 0.0
            && linear.drive[i].iter().all(|d| *d == 0.0)
    };
    let positions: Vec<bool> = (0..size).map(is_position).collect();
    let mut orders: Vec<Ranks> = Vec::new();
    if positions.contains(&true) && positions.contains(&false) {
        orders.push(positions.iter().map(|p| usize::from(*p)).collect());
        orders.push(positions.iter().map(|p| usize::from(!*p)).collect());
    }
    orders.push((0..size).collect());
    orders.push((0..size).rev().collect());
    orders.dedup();
    orders
}

struct Search<'a> {
    linear: &'a Linear,
    record: &'a Record,
    complete: bool,
    pieces: Vec<Piece>,
    targets: Vec<Target>,
    orders: Vec<Ranks>,
    gauss: Option<Coefficients>,
    /// The file cannot be told from the exact solution.
    exact: bool,
    claimed: &'a [&'static Method],
    claimed_steps: &'a [u64],
    tried: Vec<Tried>,
}

impl Search<'_> {
    /// A step of high order, for starts.
    fn reference(&self, step: f64) -> Option<Recurrence> {
        Recurrence::new(self.gauss.as_ref()?, self.linear, step, &Ranks::new())
    }

    fn method(&mut self, method: &'static Method, reading: Reading) {
        for scheme in method.schemes {
            let coefficients = scheme.coefficients();
            let orders = match scheme {
                Scheme::SemiImplicit => self.orders.clone(),
                _ => vec![Ranks::new()],
            };
            for ranks in orders {
                let variant = Variant {
                    method,
                    coefficients: &coefficients,
                    reading,
                    ranks: &ranks,
                };
                match self.record.spacing {
                    Some((spacing, _)) => self.even(&variant, spacing),
                    None => self.uneven(&variant),
                }
            }
        }
    }

    /// Rows at one spacing.
    fn even(&mut self, variant: &Variant, spacing: f64) {
        let claimed = self.claimed.iter().any(|m| m.name == variant.method.name);
        let mut counts: Vec<u64> = ALWAYS.to_vec();
        counts.extend(self.claimed_steps.iter().filter(|&&m| claimed || m <= 64));
        let estimate = self.estimate(variant, spacing);
        if let Some(estimate) = estimate {
            counts.extend([estimate.saturating_sub(1), estimate, estimate + 1]);
        }
        counts.retain(|&count| count > 0 && count <= MOST_STEPS);
        counts.sort_unstable();
        counts.dedup();
        for count in counts {
            let Some((fit, print)) = self.at(variant, spacing, count) else {
                continue;
            };
            let known = self.tried.last().is_some_and(|last| {
                last.method.name == variant.method.name
                    && last.fit.holds()
                    && (last.range.0..=last.range.1).contains(&count)
            });
            if known {
                continue;
            }
            // Few digits leave a range of steps open.
            let near_estimate = estimate.is_some_and(|estimate| count.abs_diff(estimate) <= 1);
            let range = if fit.holds() && near_estimate && !self.exact {
                self.range(variant, spacing, count)
            } else {
                (count, count)
            };
            self.tried.push(Tried {
                method: variant.method,
                reading: variant.reading,
                steps: count,
                range,
                step: Some(spacing / count as f64),
                fit,
                print,
            });
        }
    }

    fn at(&self, variant: &Variant, spacing: f64, steps: u64) -> Option<(Fit, Vec<f64>)> {
        let step = spacing / steps as f64;
        let recurrence = variant.recurrence(self.linear, step)?;
        let trial = Trial::new(self.linear, recurrence, steps, self.record.unit);
        if !trial.is_finite() {
            return None;
        }
        let fit = self.fit(&trial, spacing);
        let print = if fit.holds() {
            self.print(&trial)
        } else {
            Vec::new()
        };
        (fit.compared > 0).then_some((fit, print))
    }

    /// How far numbers of steps about one that agrees agree too.
    fn range(&self, variant: &Variant, spacing: f64, steps: u64) -> (u64, u64) {
        let holds = |count: u64| {
            let found = self.at(variant, spacing, count);
            found.is_some_and(|(fit, _)| fit.holds())
        };
        let far = |towards: &dyn Fn(u64) -> u64, end: u64| {
            let (mut inside, mut stride) = (steps, 1);
            while stride > 0 && inside.abs_diff(steps) < 3 * steps {
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
            if stride > 0 { inside } else { end }
        };
        let down = far(&|stride| steps.saturating_sub(stride), 1);
        let up = far(&|stride| steps + stride, MOST_STEPS);
        (down, up)
    }

    fn fit(&self, trial: &Trial, spacing: f64) -> Fit {
        let memory = trial.recurrence.back() > 1;
        if memory && (trial.steps > 1 || !self.complete) {
            let step = spacing / trial.steps as f64;
            return match self.reference(step) {
                Some(reference) => with_hidden_start(trial, &reference, self.record, &self.pieces),
                None => Fit::NOTHING,
            };
        }
        if self.complete {
            let glance = trial.against_rows(self.record, &self.pieces, true);
            if glance.holds() {
                return trial.against_rows(self.record, &self.pieces, false);
            }
            return glance;
        }
        let rows = usize::MAX;
        let mut best = trial.from_start(self.record, Sides::After, rows);
        let (from, to) = self.linear.window;
        if !best.holds() && self.linear.jumps_within(from, to) {
            for sides in [Sides::Own, Sides::Before] {
                let other = trial.from_start(self.record, sides, rows);
                if other.ratio < best.ratio {
                    best = other;
                }
            }
        }
        best
    }

    /// Rows at many spacings: each of them is one step or two.
    fn uneven(&mut self, variant: &Variant) {
        if !self.complete
            || matches!(
                variant.coefficients,
                Coefficients::Multistep { .. } | Coefficients::Predicted { .. }
            )
        {
            return;
        }
        let pairs: Vec<(usize, usize)> = self
            .pieces
            .iter()
            .flat_map(|piece| {
                (piece.start..piece.start + piece.rows - 1).map(|row| (piece.window, row))
            })
            .collect();
        let stride = pairs.len() / MOST_PAIRS + 1;
        for steps in [1, 2] {
            let mut fit = Fit::NOTHING;
            for &(window, row) in pairs.iter().step_by(stride) {
                let times = &self.record.windows[window].times;
                let step = (times[row + 1] - times[row]) / steps as f64;
                let Some(recurrence) = variant.recurrence(self.linear, step) else {
                    fit = Fit::NOTHING;
                    break;
                };
                let trial = Trial::new(self.linear, recurrence, steps, self.record.unit);
                let piece = Piece {
                    window,
                    start: row,
                    rows: 2,
                };
                fit = fit.and(trial.against_rows(self.record, &[piece], true));
                if fit.ratio > 1.0 && fit.compared > GLANCE * self.linear.size() {
                    break;
                }
            }
            if fit.compared > 0 {
                self.tried.push(Tried {
                    method: variant.method,
                    reading: variant.reading,
                    steps,
                    range: (steps, steps),
                    step: None,
                    fit,
                    print: if fit.holds() {
                        self.uneven_print(variant, &pairs, steps)
                    } else {
                        Vec::new()
                    },
                });
            }
        }
    }

    /// Steps from row to row that would have made the errors in the file.
    fn estimate(&self, variant: &Variant, spacing: f64) -> Option<u64> {
        let order = f64::from(variant.method.order);
        // A first number of steps at which the method stays near the solution.
        let mut steps = 1u64;
        let mut seen = loop {
            match self.projected(variant, spacing, steps) {
                Some(seen) if seen.size < 0.5 => break seen,
                _ if steps > 1000 => return None,
                _ => steps *= 4,
            }
        };
        for _ in 0..6 {
            if seen.along <= 0.0 {
                return None;
            }
            let wanted = steps as f64 * seen.along.powf(1.0 / order);
            let next = (wanted.round().max(1.0) as u64).min(MOST_STEPS);
            if next == steps {
                break;
            }
            match self.projected(variant, spacing, next) {
                Some(better) => (seen, steps) = (better, next),
                None => break,
            }
        }
        Some(steps)
    }

    /// The errors of the method at the rows of the targets, laid along those in the file.
    fn projected(&self, variant: &Variant, spacing: f64, steps: u64) -> Option<Projected> {
        let step = spacing / steps as f64;
        let recurrence = variant.recurrence(self.linear, step)?;
        let window = self.record.windows.first()?;
        let last = self.targets.last()?.row;
        if !self
            .linear
            .is_smooth(self.linear.window.0, window.times[last])
            && last as u64 * steps > MOST_MARCHED
        {
            return None;
        }
        let origin = window.times[0];
        let memory = recurrence.back() as u64 - 1;
        let start = self.linear.start.clone();
        let mut known = vec![start.clone()];
        if memory > 0 {
            let reference = self.reference(step)?;
            let mut first = March::new(&reference, self.linear, Sides::After, [start], origin, 0);
            for _ in 0..memory {
                known.push(first.step().to_vec());
            }
        }
        let size = self.linear.size();
        let trial = Trial::new(self.linear, recurrence, steps, self.record.unit);
        let mut stack: Vec<f64> = known.iter().flatten().copied().collect();
        let mut done = memory;
        let (mut own, mut both, mut largest) = (0.0, 0.0, 0.0f64);
        let mut targets = self.targets.iter().peekable();
        for row in 1..=last {
            let wanted = row as u64 * steps;
            if wanted > done {
                let time = origin + done as f64 * step;
                stack = trial.advance(&stack, time, wanted - done, Sides::After);
                done = wanted;
            }
            let state = match known.get(wanted as usize) {
                Some(known) if wanted < done => &known[..],
                _ => &stack[stack.len() - size..],
            };
            while let Some(target) = targets.next_if(|target| target.row == row) {
                let channel = self.record.channels[target.place];
                let at = row * self.record.width() + target.place;
                let exact = window.values[at] - window.errors[at];
                let time = window.times[row];
                let value = self.linear.observe(channel, state, time, Side::After, 0.0);
                let error = (value - exact) / target.peak;
                if !error.is_finite() {
                    return None;
                }
                own += error * error;
                both += error * target.error / target.peak;
                largest = largest.max(error.abs());
            }
        }
        (both != 0.0).then(|| Projected {
            along: own / both,
            size: largest,
        })
    }

    /// Numbers that are the same for methods which these rows cannot tell apart: the
    /// matrix from row to row and what the forcing does in a few places.
    fn print(&self, trial: &Trial) -> Vec<f64> {
        let mut print = vec![trial.recurrence.back() as f64];
        print.extend(trial.across().rows().flatten());
        let places = self.pieces.iter().take(4).map(|piece| {
            let window = &self.record.windows[piece.window];
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

    fn uneven_print(&self, variant: &Variant, pairs: &[(usize, usize)], steps: u64) -> Vec<f64> {
        let Some(&(window, row)) = pairs.get(pairs.len() / 2) else {
            return Vec::new();
        };
        let times = &self.record.windows[window].times;
        let step = (times[row + 1] - times[row]) / steps as f64;
        variant
            .recurrence(self.linear, step)
            .map_or(Vec::new(), |recurrence| {
                let trial = Trial::new(self.linear, recurrence, steps, self.record.unit);
                let mut print: Vec<f64> = trial.across().rows().flatten().copied().collect();
                print.extend(trial.forced(times[row]));
                print
            })
    }
}

/// The errors of a method beside those of the file.
struct Projected {
    /// Its error in units of the file's, along the file's.
    along: f64,
    /// Its largest error relative to the peak.
    size: f64,
}

struct Variant<'a> {
    method: &'static Method,
    coefficients: &'a Coefficients,
    reading: Reading,
    ranks: &'a Ranks,
}

impl Variant<'_> {
    /// `None` where the step cannot be solved, or where another way to read the inputs
    /// changes nothing.
    fn recurrence(&self, linear: &Linear, step: f64) -> Option<Recurrence> {
        let plain = Recurrence::new(self.coefficients, linear, step, self.ranks)?;
        match self.reading {
            Reading::AtNodes => Some(plain),
            Reading::Held if !plain.looks_ahead() => None,
            reading => Some(plain.with_reading(reading)),
        }
    }
}

/// Consistent pairs, those of one effect together.
fn families(tried: &[Tried]) -> Vec<Family> {
    let mut families: Vec<(Family, &Vec<f64>)> = Vec::new();
    for one in tried.iter().filter(|tried| tried.fit.holds()) {
        let same = |(family, print): &&mut (Family, &Vec<f64>)| {
            family.steps == one.steps && alike(print, &one.print)
        };
        match families.iter_mut().find(same) {
            Some((family, _)) => {
                if family.methods.iter().all(|m| m.name != one.method.name) {
                    family.methods.push(one.method);
                }
                if one.fit.ratio < family.fit.ratio {
                    family.fit = one.fit;
                }
            }
            None => {
                let family = Family {
                    methods: vec![one.method],
                    reading: one.reading,
                    steps: one.steps,
                    range: one.range,
                    step: one.step,
                    fit: one.fit,
                };
                families.push((family, &one.print));
            }
        }
    }
    families.into_iter().map(|(family, _)| family).collect()
}

fn alike(a: &[f64], b: &[f64]) -> bool {
    let largest = a
        .iter()
        .chain(b)
        .fold(0.0f64, |largest, x| largest.max(x.abs()));
    let same =
        |x: &f64, y: &f64| (x - y).abs() <= SAME * x.abs().max(y.abs()) + f64::EPSILON * largest;
    a.len() == b.len() && a.iter().zip(b).all(|(x, y)| same(x, y))
}

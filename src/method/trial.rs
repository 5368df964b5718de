//! One method at one step laid beside the rows of a file.
//!
//! Two tests. Local: consecutive rows are put into the method's own difference equation.
//! Global: the method runs from the first row of a piece and is compared with every later
//! one. A residual is measured against what the printed digits and rounding allow there,
//! which is a bound and not a fitted threshold:
//!
//! # Formula
//! With `Phi` the matrix from row to row, `d` the resolution of a row and `eps` the roundings
//! of all steps between two rows: local `d_(k+1) + |Phi| d_k + eps`, global
//! `d_k + |Phi^k| d_0 + sum_(j<k) |Phi^j| eps`, each with what moving the time by its own
//! rounding does to inputs and states.

use std::sync::Arc;

use super::against::absolute_dot;
use super::jumps::Doubts;
use super::leg::Leg;
use super::linear::{Linear, Side};
use super::march::{March, NEAR, Sides};
use super::powers::{corner, gathered, identity, to_the_power};
use super::recurrence::Recurrence;
use super::scale::Scale;
use super::sheet::Sheet;
use crate::number::{Matrix, dot};

/// How well rows agree with a prediction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fit {
    /// Largest residual over what is allowed for it: consistent up to one.
    pub ratio: f64,
    /// Largest residual relative to the peak of its channel: from row to row where every
    /// state is there, else from the start of the file.
    pub residual: f64,
    /// The largest relative to the peak when the method has run on from the first row of a
    /// stretch, where that was looked at.
    pub astray: f64,
    /// What the comparison itself may have made of both of them.
    pub blur: f64,
    /// Comparisons made, less what was free to choose.
    pub compared: usize,
}

/// A method at a step, ready to be compared.
#[derive(Clone, Debug)]
pub struct Trial<'a> {
    /// The model.
    pub linear: &'a Linear,
    /// The steps from row to row.
    pub leg: Arc<Leg>,
    /// Unit roundoff of the program's arithmetic.
    pub unit: f64,
}

/// What steps at once leave behind for those after them: the matrix of a number of steps, and
/// room for numbers.
#[derive(Clone, Debug, Default)]
pub struct Room {
    leap: Option<(u64, Arc<Matrix<f64>>)>,
    all: Vec<f64>,
}

/// Work in multiplications that one global comparison may cost.
pub(super) const GLOBAL_WORK: usize = 4_000_000;
/// Rows compared where only a first impression is wanted.
pub const GLANCE: usize = 24;

impl Fit {
    /// Before anything was compared.
    pub const NOTHING: Fit = Fit {
        ratio: 0.0,
        residual: 0.0,
        astray: 0.0,
        blur: 0.0,
        compared: 0,
    };

    /// Takes in one comparison.
    pub fn add(&mut self, residual: f64, allowed: f64, peak: f64) {
        self.compared += 1;
        let ratio = if residual == 0.0 {
            0.0
        } else {
            residual / allowed
        };
        self.ratio = larger(self.ratio, ratio);
        if peak > 0.0 {
            self.residual = larger(self.residual, residual / peak);
        }
    }

    /// Both together.
    pub fn and(self, other: Fit) -> Fit {
        Fit {
            ratio: larger(self.ratio, other.ratio),
            residual: larger(self.residual, other.residual),
            astray: larger(self.astray, other.astray),
            blur: larger(self.blur, other.blur),
            compared: self.compared + other.compared,
        }
    }

    /// True where no residual exceeds what is allowed for it.
    pub fn holds(&self) -> bool {
        self.compared > 0 && self.ratio <= 1.0
    }
}

/// Not `f64::max`, which would pass over a NaN.
pub(super) fn larger(a: f64, b: f64) -> f64 {
    if b <= a { a } else { b }
}

impl<'a> Trial<'a> {
    /// A step that is taken so many times from row to row.
    pub fn new(linear: &'a Linear, recurrence: Recurrence, steps: u64, unit: f64) -> Trial<'a> {
        let leg = Arc::new(Leg::new(linear, recurrence, steps));
        Trial { linear, leg, unit }
    }

    /// States and earlier states together.
    pub fn stacked(&self) -> usize {
        self.leg.stacked()
    }

    /// True where no entry has overflowed.
    pub fn is_finite(&self) -> bool {
        let finite = |matrix: &Matrix<f64>| matrix.rows().flatten().all(|x| x.is_finite());
        finite(&self.leg.across) && finite(self.leg.gathered())
    }

    /// The matrix from row to row.
    pub fn across(&self) -> &Matrix<f64> {
        &self.leg.across
    }

    /// The stack one row on, where no input jumps in between.
    pub fn row_on(&self, stack: &[f64], time: f64) -> Vec<f64> {
        let mut stack = stack.to_vec();
        self.steps_on(&self.leg.joined, &mut stack, &mut Vec::new(), time);
        stack
    }

    fn steps_on(&self, joined: &Matrix<f64>, stack: &mut [f64], all: &mut Vec<f64>, time: f64) {
        let near = NEAR * self.leg.recurrence.step;
        all.clear();
        all.extend_from_slice(stack);
        self.leg
            .drive
            .extend(self.linear, time, Side::After, near, all);
        for (x, row) in stack.iter_mut().zip(joined.rows()) {
            *x = dot(row, all);
        }
    }

    /// The stack so many steps on, through jumps. A room is for one trial.
    pub fn advance(
        &self,
        room: &mut Room,
        stack: &mut Vec<f64>,
        time: f64,
        steps: u64,
        sides: Sides,
    ) {
        let step = self.leg.recurrence.step;
        let (near, size) = (NEAR * step, self.linear.size());
        let behind = (self.leg.recurrence.back() - 1) as f64 * step;
        let end = time + steps as f64 * step + self.reach();
        // A jump at the very start is behind, unless a program still sees the value before it.
        let first = match sides {
            Sides::Before => time - behind - near,
            Sides::After | Sides::Own => time - behind + near,
        };
        if !self.linear.jumps_within(first, end + near) {
            let Room { leap, all } = room;
            if steps == self.leg.steps {
                return self.steps_on(&self.leg.joined, stack, all, time);
            }
            let leap = match leap.take() {
                Some((known, matrix)) if known == steps => leap.insert((known, matrix)),
                _ => leap.insert((steps, self.leg.over(steps))),
            };
            return self.steps_on(&leap.1, stack, all, time);
        }
        let states = stack.chunks_exact(size).map(<[f64]>::to_vec);
        let mut march = March::new(&self.leg.recurrence, self.linear, sides, states, time, 0);
        for _ in 0..steps {
            march.step();
        }
        stack.clear();
        stack.extend(march.history().flatten());
    }

    /// How far beyond its end a step reads the inputs: the first stage of one SDIRK method
    /// lies there.
    pub(super) fn reach(&self) -> f64 {
        let furthest = self.leg.recurrence.nodes.iter().map(|node| node.at);
        (furthest.fold(1.0, f64::max) - 1.0) * self.leg.recurrence.step
    }

    /// The matrix over so many rows, and how roundings of single rows add up over them.
    pub(super) fn over_rows(&self, rows: u64) -> (Matrix<f64>, Matrix<f64>) {
        (
            to_the_power(&self.leg.across, rows),
            gathered(&self.leg.across, rows),
        )
    }

    /// The matrix over so many steps.
    pub(super) fn power(&self, steps: u64) -> Matrix<f64> {
        corner(&to_the_power(&self.leg.single, steps), self.stacked())
    }

    /// What the forcing has done from a row to the next, over all states of the stack.
    pub fn forced(&self, time: f64) -> Vec<f64> {
        self.row_on(&vec![0.0; self.stacked()], time)
    }

    /// Compares a file that does not hold every state: the method runs from the start of
    /// the window, through jumps, and meets the rows of the first window. `either` allows
    /// for nodes on jumps that see the other side than the one given.
    pub(super) fn run_from_start(&self, sheet: &Sheet, sides: Sides, either: bool) -> Fit {
        let (linear, record, peaks) = (self.linear, &sheet.record, &sheet.all_peaks);
        let Some(window) = record.windows.first() else {
            return Fit::NOTHING;
        };
        let stacked = self.stacked();
        if self.leg.recurrence.back() > 1 || window.rows() < 2 {
            return Fit::NOTHING;
        }
        let width = record.width();
        let most = (GLOBAL_WORK / stacked.pow(3).max(1)).max(4);
        let last = (window.rows() - 1).min(most);
        let start = linear.start.clone();
        let origin = window.times[0];
        let mut state = start.clone();
        // Largest states so far: the roundings are relative to them.
        let mut scale = Scale::of_start(linear, &start, record);
        let mut power = identity(stacked);
        let mut gathered = vec![0.0; stacked];
        let mut noise = Vec::new();
        let mut steepest = vec![0.0f64; width];
        let mut forcing = vec![0.0; linear.size()];
        let mut fit = Fit::NOTHING;
        let mut doubts = either.then(|| Doubts::new(self));
        let mut room = Room::default();
        for row in 0..=last {
            let time = window.times[row];
            if row > 0 {
                if !record.follows(window, row) {
                    break;
                }
                let before =
                    origin + ((row - 1) as f64) * self.leg.steps as f64 * self.leg.recurrence.step;
                self.advance(&mut room, &mut state, before, self.leg.steps, sides);
                if let Some(doubts) = &mut doubts {
                    doubts.next_row(self, before, self.leg.steps);
                }
                scale.see(&state);
                linear.forcing(time, Side::After, 0.0, &mut forcing);
                scale.see_forcing(&forcing);
                linear.forcing_slope(time, Side::After, 0.0, &mut forcing);
                scale.see_slopes(&forcing);
                noise.clear();
                noise.extend(self.rounding(&scale, time, row as u64));
                for (sum, line) in gathered.iter_mut().zip(power.rows()) {
                    *sum += absolute_dot(line, &noise);
                }
                power = self.leg.across.product(&power);
            }
            let near = (NEAR * self.leg.recurrence.step).max(window.time_doubts[row]);
            if linear.jumps_within(time - near, time + near) {
                // An output may jump with the input: either value could stand here.
                continue;
            }
            let mut unsure = gathered.clone();
            if let Some(doubts) = &doubts {
                let other = doubts.now();
                unsure.iter_mut().zip(other).for_each(|(sum, x)| *sum += x);
            }
            for (place, &channel) in record.channels.iter().enumerate() {
                let at = row * width + place;
                let written = window.values[at];
                if !written.is_finite() {
                    continue;
                }
                if row > 0 {
                    let gap = time - window.times[row - 1];
                    let before = window.values[at - width];
                    if before.is_finite() && gap > 0.0 {
                        steepest[place] = steepest[place].max((written - before).abs() / gap);
                    }
                }
                let predicted = linear.observe(channel, &state, time, Side::After, near);
                let noise = linear.observe_noise(channel, &unsure, self.unit, &scale.states);
                let stamp = (row as f64 * self.leg.steps as f64 + 2.0) * f64::EPSILON * time.abs()
                    + row as f64 * scale.spacing_doubt
                    + window.time_doubts[row];
                let allowed = window.doubts[at] + noise + steepest[place] * stamp;
                fit.add((written - predicted).abs(), allowed, peaks[place]);
            }
            if fit.ratio.is_nan() || (fit.ratio > 1.0 && row >= GLANCE) {
                break;
            }
        }
        fit.astray = fit.residual;
        fit
    }
}

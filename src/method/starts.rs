//! Methods with a memory whose first steps are not in the file: does any start explain the
//! rows?
//!
//! The start that a program made for a multistep method (by another method, at a lower
//! order, exactly) is hidden where rows are written less often than steps are made, or
//! where states are missing. The rows depend on it linearly, so the start that fits best is
//! a least-squares problem. If any start keeps every residual within what is allowed, the
//! sum of their weighted squares at the best one is at most their number: the test can
//! rule out, but never the method that wrote the file.

use nalgebra::{DMatrix, DVector};

use super::against::absolute_dot;
use super::jumps::Doubts;
use super::linear::{Linear, Side};
use super::march::{March, NEAR, Sides};
use super::powers::{corner, identity};
use super::record::{Piece, Record, Window};
use super::recurrence::Recurrence;
use super::scale::Scale;
use super::sheet::Sheet;
use super::trial::{Fit, Room, Trial};
use crate::number::Matrix;

/// Rows compared at most.
pub(super) const MOST_ROWS: usize = 120;
/// Rows whose allowance exceeds this part of the peak are no comparison.
const TELLING: f64 = 1e-2;
/// Comparisons beyond the unknowns that rule a method out at least.
const LEAST_LEFT: usize = 2;
/// Fewer of them are met by too many starts to say that it fits.
pub(super) const FEW_LEFT: usize = 8;
/// Multiplications at most.
const MOST_WORK: usize = 1_500_000;

/// Multiplications for one row.
fn work_of_row(size: usize, back: usize) -> usize {
    (size * back).pow(2) * (size * back + size * (back - 1))
}

/// Multiplications that a hidden start costs at most where every state is written.
pub(super) fn work_of_start(size: usize, back: usize) -> f64 {
    let (row, fewest) = (work_of_row(size, back), 2 * back + 8);
    (MOST_ROWS * row).min(MOST_WORK.max(fewest * row)) as f64
}

/// Lays a method with a memory beside the rows from the start of the file. `reference` is a
/// one-step recurrence of high order at the same step, which gives a start to correct.
/// Nothing is compared where the rows are too few for the unknowns. `either` allows for
/// nodes on jumps that see either side of them; `rows` are compared at most.
pub(super) fn with_hidden_start(
    trial: &Trial,
    reference: &Recurrence,
    sheet: &Sheet,
    pieces: &[Piece],
    either: bool,
    rows: usize,
) -> Fit {
    let record = &sheet.record;
    let linear = trial.linear;
    let (size, back) = (linear.size(), trial.leg.recurrence.back());
    let unknowns = size * (back - 1);
    let complete = record.states(size).is_some();
    let Some(first_window) = record.windows.first() else {
        return Fit::NOTHING;
    };
    let per_row = work_of_row(size, back);
    let fewest = 2 * unknowns.div_ceil(record.width().max(1)) + 8;
    let most = rows.min((MOST_WORK / per_row.max(1)).max(fewest));
    // An input that jumps at the very start leaves the first row out of every piece.
    let (from, at_start) = (linear.window.0, NEAR * trial.leg.recurrence.step);
    let jumps_at_start = linear.jumps_within(from - at_start, from + at_start);
    let begins = |piece: &Piece| {
        first_window.first == 0 && piece.window == 0 && piece.start <= usize::from(jumps_at_start)
    };
    let stretch = |window: usize, begin: usize, rows: usize, from_start: bool| Stretch {
        window: &record.windows[window],
        begin,
        rows: rows.min(most),
        from_start,
        complete,
    };
    let enough = |stretch: &Stretch| {
        let unknowns = unknowns + if stretch.from_start { 0 } else { size };
        stretch.rows.saturating_sub(1) * record.width() >= unknowns + LEAST_LEFT
    };
    // Through jumps where there is no choice; with all states only up to the first, or,
    // where that comes too soon, from any row between two jumps.
    let start = match pieces.first() {
        _ if !complete => Some(stretch(0, 0, first_window.rows(), true)),
        Some(piece) if begins(piece) => Some(stretch(0, 0, piece.start + piece.rows, true)),
        _ => None,
    };
    let fit = |stretch: &Stretch, sides: Sides| {
        let system = System::new(trial, reference, sheet, stretch, sides, either);
        system.map_or(Fit::NOTHING, |system| system.solve(&sheet.all_peaks))
    };
    let mut found = Fit::NOTHING;
    if let Some(start) = start.filter(enough) {
        found = fit(&start, Sides::After);
        if !found.holds() && (!complete || jumps_at_start) {
            for sides in [Sides::Before, Sides::Own] {
                let other = fit(&start, sides);
                if other.compared > 0 && other.ratio < found.ratio {
                    found = other;
                }
            }
        }
        if found.ratio > 1.0 || !complete {
            return found;
        }
    }
    // A program may have begun anew after the jump: so many rows are of its start.
    let skip = (back as u64 - 1).div_ceil(trial.leg.steps) as usize;
    let later = pieces
        .iter()
        .filter(|piece| !begins(piece) && piece.rows > skip);
    let later = later.max_by(|a, b| record.movement(a).total_cmp(&record.movement(b)));
    let later =
        later.map(|piece| stretch(piece.window, piece.start + skip, piece.rows - skip, false));
    match later.filter(|later| complete && enough(later)) {
        Some(later) => found.and(fit(&later, Sides::After)),
        None => found,
    }
}

/// The rows that are compared.
struct Stretch<'a> {
    window: &'a Window,
    begin: usize,
    rows: usize,
    /// The first of them is the known start of the case, else it is as unknown as the
    /// hidden states after it.
    from_start: bool,
    complete: bool,
}

/// Weighted equations for the correction of the hidden states.
struct System {
    matrix: DMatrix<f64>,
    right: DVector<f64>,
    /// How far an honest start can be from the guess.
    reach: Vec<f64>,
    /// Channel and allowance of each equation.
    of_row: Vec<(usize, f64)>,
    /// Equations of rows that move: where they rest, every method would.
    telling: usize,
}

impl System {
    fn new(
        trial: &Trial,
        reference: &Recurrence,
        sheet: &Sheet,
        stretch: &Stretch,
        sides: Sides,
        either: bool,
    ) -> Option<System> {
        let (record, peaks) = (&sheet.record, &sheet.all_peaks);
        let linear = trial.linear;
        let (size, stacked) = (linear.size(), trial.stacked());
        let (window, begin) = (stretch.window, stretch.begin);
        let offset = if stretch.from_start { size } else { 0 };
        let unknowns = stacked - offset;
        let memory = trial.leg.recurrence.back() as u64 - 1;
        let origin = window.times[begin];
        let at = |count: u64| origin + count as f64 * trial.leg.recurrence.step;
        let start = if stretch.from_start {
            linear.start.clone()
        } else {
            let places = record.states(size)?;
            let row = &window.values[begin * record.width()..];
            places.iter().map(|&place| row[place]).collect()
        };
        // States 0 to memory, a first guess that is corrected.
        let mut first = March::new(reference, linear, sides, [start.clone()], origin, 0);
        let mut known = vec![start];
        for _ in 0..memory {
            known.push(first.step().to_vec());
        }
        let mut stack: Vec<f64> = known.iter().flatten().copied().collect();
        let reach = reach(&known, linear, trial.leg.recurrence.step);
        let reach = reach[offset..].to_vec();
        // How the unknown states act on the stack.
        let unit = |i: usize, u: usize| if i == u + offset { 1.0 } else { 0.0 };
        let mut effect = DMatrix::from_fn(stacked, unknowns, unit);
        let across = trial.across().dense();
        let mut allowance = Allowance::new(trial, either);
        let mut step = memory;
        let mut room = Room::default();
        let (mut lines, mut right, mut of_row) = (Vec::new(), Vec::new(), Vec::new());
        let mut telling = 0;
        for count in usize::from(stretch.from_start)..stretch.rows {
            let row = begin + count;
            if count > 0 && !record.follows(window, row) {
                break;
            }
            let wanted = count as u64 * trial.leg.steps;
            if wanted > step {
                let count = wanted - step;
                if let Some(doubts) = &mut allowance.doubts {
                    doubts.next_row(trial, at(step), count);
                }
                trial.advance(&mut room, &mut stack, at(step), count, sides);
                effect = if count == trial.leg.steps {
                    &across * &effect
                } else {
                    corner(&trial.leg.over(count), stacked).dense() * &effect
                };
                step = wanted;
            }
            // A row before the first step of the method is a hidden state itself.
            let place = if wanted < step {
                wanted as usize * size
            } else {
                stacked - size
            };
            let hidden_row = wanted < step;
            let state = if hidden_row {
                &known[wanted as usize][..]
            } else {
                &stack[stacked - size..]
            };
            let number = window.first + row as u64;
            allowance.next_row(state, record.states_at(window, row, size), number);
            let time = window.times[row];
            let near = NEAR * trial.leg.recurrence.step;
            if !stretch.complete && linear.jumps_within(time - near, time + near) {
                continue;
            }
            for (column, &channel) in record.channels.iter().enumerate() {
                if stretch.complete && channel >= size {
                    continue;
                }
                let at = row * record.width() + column;
                let written = window.values[at];
                if !written.is_finite() {
                    continue;
                }
                let predicted = linear.observe(channel, state, time, Side::After, near);
                let allowed = window.doubts[at]
                    + allowance.of(linear, channel)
                    + 8.0 * f64::EPSILON * peaks[column]
                    + window.time_doubts[row] * rate(window, record, row, column);
                // Where the method runs away with roundings, a row says nothing of it.
                if allowed.is_nan() || allowed > TELLING * peaks[column] {
                    continue;
                }
                let effect_on = |u: usize| {
                    let of_state = |i: usize| {
                        if hidden_row {
                            unit(place + i, u)
                        } else {
                            effect[(place + i, u)]
                        }
                    };
                    linear.observe_change(channel, &of_state)
                };
                lines.extend((0..unknowns).map(|u| effect_on(u) / allowed));
                let rests =
                    row > 0 && (written - window.values[at - record.width()]).abs() <= allowed;
                telling += usize::from(!rests);
                right.push((written - predicted) / allowed);
                of_row.push((column, allowed));
            }
        }
        let finite = lines.iter().chain(&right).all(|x| x.is_finite());
        if !finite || of_row.len() < unknowns + LEAST_LEFT {
            return None;
        }
        Some(System {
            matrix: DMatrix::from_row_slice(of_row.len(), unknowns, &lines),
            right: DVector::from_vec(right),
            reach,
            of_row,
            telling,
        })
    }

    /// The least sum of squares, as what is left of the right side across the columns.
    ///
    /// # Error bound
    /// With the columns scaled to one length and `b = A x + r` for the true start, what is
    /// left of `b` is that of `r`, which is to be bounded, and of `E x`, `E` the backward
    /// error of the transformation, `c eps` at most. Any `x` that leaves as little will do for
    /// the bound. That of the `k` largest singular values leaves `s_(k+1) |x|` more than the
    /// true one, whose size is at most that of the states: the best `k` is taken. (The plain
    /// solution, all of them, grows without bound where columns are parallel, as those of
    /// parasitic modes that have died out are.)
    fn solve(self, peaks: &[f64]) -> Fit {
        let (equations, unknowns) = self.matrix.shape();
        let mut matrix = self.matrix;
        let mut furthest = 0.0f64;
        for (mut column, reach) in matrix.column_iter_mut().zip(&self.reach) {
            let length = column.norm();
            if length > 0.0 {
                column /= length;
                furthest = furthest.hypot(length * reach);
            }
        }
        let mut right = self.right;
        let length = right.norm();
        let factors = matrix.qr();
        factors.q_tr_mul(&mut right);
        let Some(split) = factors.r().try_svd(true, false, f64::EPSILON, 10_000) else {
            return Fit::NOTHING;
        };
        let Some(directions) = split.u else {
            return Fit::NOTHING;
        };
        let along = directions.tr_mul(&right.rows(0, unknowns));
        let rounding = 8.0 * (unknowns + 2) as f64 * f64::EPSILON;
        let mut order: Vec<usize> = (0..unknowns).collect();
        let values = &split.singular_values;
        order.sort_by(|&i, &j| values[j].total_cmp(&values[i]));
        let (mut start, mut noise) = (0.0f64, f64::INFINITY);
        for next in 0..=unknowns {
            let rest = order.get(next).map_or(0.0, |&i| values[i]);
            noise = noise.min(rounding * (length + start) + rest * furthest);
            if let Some(&i) = order.get(next) {
                start = start.hypot(along[i] / values[i]);
            }
        }
        let rest = right.rows(unknowns, equations - unknowns).norm();
        let ratio = (rest - noise).max(0.0) / (equations as f64).sqrt();
        // What is left over beyond the noise speaks, however large that is; what is not may
        // be hidden in it.
        let hidden = noise > 0.5 * (equations as f64).sqrt();
        if noise.is_nan() || (hidden && ratio <= 1.0) {
            return Fit::NOTHING;
        }
        let shares = self
            .of_row
            .iter()
            .filter(|(column, _)| peaks[*column] > 0.0);
        let share = shares.fold(0.0f64, |sum, &(column, allowed)| {
            sum + allowed / peaks[column]
        });
        let scale = share / equations as f64 / (equations as f64).sqrt();
        Fit {
            ratio,
            residual: rest * scale,
            astray: rest * scale,
            blur: noise.min(rest) * scale,
            compared: self.telling.saturating_sub(unknowns),
        }
    }
}

/// How large the states of an honest start may be: a low step of an explicit program, at
/// most `sum_(k<=4) |hA|^k / k!` times the states before it, can overshoot where the method
/// itself would not.
fn reach(known: &[Vec<f64>], linear: &Linear, step: f64) -> Vec<f64> {
    let mut largest = vec![0.0f64; linear.size()];
    for state in known {
        let pairs = largest.iter_mut().zip(state);
        pairs.for_each(|(largest, x)| *largest = largest.max(x.abs()));
    }
    let size = linear.matrix.map(f64::abs);
    let mut reach = Vec::new();
    for _ in known {
        reach.extend_from_slice(&largest);
        let mut term = largest.clone();
        for k in 1..=4 {
            term = size.apply(&term);
            term.iter_mut().for_each(|x| *x *= step / f64::from(k));
            largest.iter_mut().zip(&term).for_each(|(sum, x)| *sum += x);
        }
    }
    reach
}

/// Roundings from the start up to a row.
struct Allowance<'t, 'a> {
    trial: &'t Trial<'a>,
    power: Matrix<f64>,
    room: Matrix<f64>,
    gathered: Vec<f64>,
    /// The largest states so far, and the forcing at the row.
    scale: Scale,
    noise: Vec<f64>,
    doubts: Option<Doubts>,
}

impl<'t, 'a> Allowance<'t, 'a> {
    fn new(trial: &'t Trial<'a>, either: bool) -> Allowance<'t, 'a> {
        let (linear, stacked) = (trial.linear, trial.stacked());
        Allowance {
            trial,
            power: identity(stacked),
            room: Matrix::zero(stacked),
            gathered: vec![0.0; stacked],
            scale: Scale {
                states: linear.start.iter().map(|x| x.abs()).collect(),
                forcing: vec![0.0; linear.size()],
                slopes: vec![0.0; linear.size()],
                time_doubt: 0.0,
                spacing_doubt: 0.0,
            },
            noise: Vec::new(),
            doubts: either.then(|| Doubts::new(trial)),
        }
    }

    /// The state of the first guess there, and those that were written: a start that
    /// overshoots makes larger roundings.
    fn next_row(&mut self, state: &[f64], written: impl Iterator<Item = (usize, f64)>, row: u64) {
        let (trial, linear, scale) = (self.trial, self.trial.linear, &mut self.scale);
        let guessed = state.iter().copied().enumerate();
        for (place, x) in guessed.chain(written) {
            scale.states[place] = scale.states[place].max(x.abs());
        }
        let (from, to) = linear.window;
        let leg = &trial.leg;
        let time = from + (row + 1) as f64 * leg.steps as f64 * leg.recurrence.step;
        linear.forcing(time.min(to), Side::After, 0.0, &mut scale.forcing);
        linear.forcing_slope(time.min(to), Side::After, 0.0, &mut scale.slopes);
        let moving = scale.forcing.iter_mut().chain(&mut scale.slopes);
        moving.for_each(|x| *x = x.abs());
        self.noise.clear();
        self.noise.extend(trial.rounding(scale, time, row));
        for (sum, line) in self.gathered.iter_mut().zip(self.power.rows()) {
            *sum += absolute_dot(line, &self.noise);
        }
        trial.across().product_into(&self.power, &mut self.room);
        std::mem::swap(&mut self.power, &mut self.room);
    }

    fn of(&self, linear: &Linear, channel: usize) -> f64 {
        let newest = self.trial.stacked() - linear.size();
        let (unit, states) = (self.trial.unit, &self.scale.states);
        let Some(doubts) = &self.doubts else {
            return linear.observe_noise(channel, &self.gathered[newest..], unit, states);
        };
        let pairs = self.gathered.iter().zip(doubts.now());
        let noise: Vec<f64> = pairs.skip(newest).map(|(a, b)| a + b).collect();
        linear.observe_noise(channel, &noise, unit, states)
    }
}

fn rate(window: &Window, record: &Record, row: usize, column: usize) -> f64 {
    let at = |row: usize| window.values[row * record.width() + column];
    let rate = (at(row) - at(row - 1)).abs() / (window.times[row] - window.times[row - 1]);
    if rate.is_finite() { rate } else { 0.0 }
}

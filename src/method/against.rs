//! A method beside a file that holds every state: the local and the global test.

use super::laid::Laid;
use super::leg::Rounded;
use super::march::NEAR;
use super::powers::identity;
use super::scale::Scale;
use super::trial::{Fit, GLANCE, GLOBAL_WORK, Trial, larger};
use crate::number::dot;

/// What roundings of the steps between two rows can come to: a part of its own, and one
/// that grows with how far times have drifted.
struct Noise {
    fixed: Vec<f64>,
    swept: Vec<f64>,
}

impl Trial<'_> {
    /// How far the times of the steps after a row can have drifted: times that are summed
    /// step by step drift by half a unit in the last place each.
    fn drift(&self, scale: &Scale, time: f64, row: u64) -> f64 {
        let count = (row + 1) as f64 * self.leg.steps as f64;
        (count + 4.0) * 0.5 * f64::EPSILON * time.abs() + scale.time_doubt
    }

    fn noise(&self, scale: &Scale) -> Noise {
        let Rounded { spread, pull } = self.leg.rounded();
        let unit = self.unit * self.leg.recurrence.roundings;
        let pairs = apply(spread, &scale.states).zip(apply(pull, &scale.forcing));
        Noise {
            fixed: pairs.map(|(spread, pull)| unit * (spread + pull)).collect(),
            swept: apply(pull, &scale.slopes).collect(),
        }
    }

    /// What roundings of the steps between two rows can come to, given the largest states
    /// and the largest forcing with its rate, the time and the number of the row.
    pub(super) fn rounding<'s>(
        &'s self,
        scale: &'s Scale,
        time: f64,
        row: u64,
    ) -> impl Iterator<Item = f64> + 's {
        let Rounded { spread, pull } = self.leg.rounded();
        let unit = self.unit * self.leg.recurrence.roundings;
        let drift = self.drift(scale, time, row);
        let fixed = apply(spread, &scale.states).zip(apply(pull, &scale.forcing));
        let pairs = fixed.zip(apply(pull, &scale.slopes));
        pairs.map(move |((spread, pull), swept)| unit * (spread + pull) + swept * drift)
    }

    /// Compares a file that holds every state, piece by piece. `glance` looks at few rows
    /// only.
    pub(super) fn against_rows(&self, pieces: &[Laid], peaks: &[f64], glance: bool) -> Fit {
        let mut fit = Fit::NOTHING;
        for laid in pieces {
            let Some((start, mut end)) = self.compared(laid) else {
                continue;
            };
            if glance {
                end = end.min(start + GLANCE);
            }
            let noise = self.noise(&laid.scale);
            fit = fit.and(self.local(laid, &noise, start, end, peaks));
            if !glance && fit.ratio <= 1.0 {
                let global = self.global(laid, &noise, start, end, peaks, false);
                fit = fit.and(Fit {
                    residual: 0.0,
                    astray: global.residual,
                    ..global
                });
            }
            if fit.ratio > 1.0 && !glance {
                break;
            }
        }
        fit
    }

    /// The first row that a step is started from with all that came before it, and the end of
    /// the rows; `None` where too few are left.
    fn compared(&self, laid: &Laid) -> Option<(usize, usize)> {
        // A method with a memory may have begun anew after a jump.
        let memory = self.leg.recurrence.back() - 1;
        let skip = if laid.first == 0 { 0 } else { memory };
        let mut rows = laid.rows();
        let end = laid.times[rows - 1];
        let reach = self.reach();
        if reach > 0.0 && self.linear.jumps_within(end, end + reach * (1.0 + NEAR)) {
            rows -= 1;
        }
        (rows >= skip + memory + 2).then_some((skip, rows))
    }

    /// How far the method goes astray from the rows, relative to the peak, when it runs on
    /// from the first row of each piece; for a method that does not fit them.
    pub(super) fn astray(&self, pieces: &[Laid], peaks: &[f64]) -> f64 {
        let long = pieces
            .iter()
            .filter(|laid| laid.rows() > self.leg.recurrence.back());
        long.fold(0.0, |most, laid| {
            let noise = self.noise(&laid.scale);
            let global = self.global(laid, &noise, 0, laid.rows(), peaks, true);
            larger(most, global.residual)
        })
    }

    /// Consecutive rows put into the difference equation of the method.
    fn local(&self, laid: &Laid, noise: &Noise, start: usize, end: usize, peaks: &[f64]) -> Fit {
        let (size, stacked) = (self.linear.size(), self.stacked());
        let (newest, driven) = (stacked - size, self.leg.drive.size);
        let mut fit = Fit::NOTHING;
        for row in start + self.leg.recurrence.back() - 1..end - 1 {
            let time = laid.times[row];
            let stack = (row + 1) * size - stacked..(row + 1) * size;
            let drive = &laid.drive[row * driven..][..driven];
            let drift = self.drift(&laid.scale, time, laid.first + row as u64);
            let stamp = 2.0 * f64::EPSILON * laid.times[row + 1].abs() + laid.scale.spacing_doubt;
            for (i, peak) in peaks.iter().enumerate() {
                let line = self.leg.joined.row(newest + i);
                let values = &laid.values[stack.clone()];
                let predicted = dot(&line[..stacked], values) + dot(&line[stacked..], drive);
                let doubts = laid.doubts[stack.clone()].iter();
                let carried = line.iter().zip(doubts);
                let carried: f64 = carried.map(|(m, d)| m.abs() * d).sum();
                let next = (row + 1) * size + i;
                let rounding = noise.fixed[newest + i] + noise.swept[newest + i] * drift;
                let allowed =
                    laid.doubts[next] + rounding + laid.rates[row * size + i] * stamp + carried;
                fit.add((laid.values[next] - predicted).abs(), allowed, *peak);
            }
        }
        fit
    }

    /// The start of the case in place of the first row of the file, where that is it to its
    /// digits.
    fn known_start(&self, laid: &Laid, row: usize) -> Option<Vec<f64>> {
        if laid.first + row as u64 > 0 || self.leg.recurrence.back() > 1 {
            return None;
        }
        let start = &self.linear.start;
        let near = |i: usize| (laid.values[i] - start[i]).abs() <= laid.doubts[i];
        (0..start.len()).all(near).then(|| start.clone())
    }

    /// The method run on to the end, or only up to the first row that it does not meet.
    fn global(
        &self,
        laid: &Laid,
        noise: &Noise,
        start: usize,
        end: usize,
        peaks: &[f64],
        to_the_end: bool,
    ) -> Fit {
        let (size, stacked) = (self.linear.size(), self.stacked());
        let (newest, driven) = (stacked - size, self.leg.drive.size);
        let first = start + self.leg.recurrence.back() - 1;
        let most = GLOBAL_WORK / stacked.pow(3).max(1);
        let last = (end - 1).min(first + most.max(4));
        let stack = (first + 1) * size - stacked..(first + 1) * size;
        let (mut states, start_doubts) = match self.known_start(laid, first) {
            Some(start) => (start, vec![0.0; stacked]),
            None => (
                laid.values[stack.clone()].to_vec(),
                laid.doubts[stack].to_vec(),
            ),
        };
        let mut power = identity(stacked);
        let mut gathered = vec![0.0; stacked];
        let mut fit = Fit::NOTHING;
        // From a long stretch on, few rows are compared: what is drifting shows in these.
        let leap = (last > first + DENSE).then(|| self.over_rows(SPARSE as u64));
        let (mut next_states, mut drift) = (states.clone(), 0.0f64);
        for row in first..last {
            let time = laid.times[row];
            let drive = &laid.drive[row * driven..][..driven];
            for (next, line) in next_states.iter_mut().zip(self.leg.joined.rows()) {
                *next = dot(&line[..stacked], &states) + dot(&line[stacked..], drive);
            }
            std::mem::swap(&mut states, &mut next_states);
            let count = row + 1 - first;
            let (over, sum) = match &leap {
                Some(leap) if count > DENSE && count.is_multiple_of(SPARSE) => {
                    (&leap.0, Some(&leap.1))
                }
                _ if count > DENSE => continue,
                _ => (self.across(), None),
            };
            // It is largest at one of the ends of what was passed over.
            let before = std::mem::replace(
                &mut drift,
                self.drift(&laid.scale, time, laid.first + row as u64),
            );
            let made = noise.fixed.iter().zip(&noise.swept);
            let made = made.map(|(fixed, swept)| fixed + swept * drift.max(before));
            let mut made: Vec<f64> = made.collect();
            if let Some(sum) = sum {
                made = sum.apply(&made);
            }
            for (sum, line) in gathered.iter_mut().zip(power.rows()) {
                *sum += absolute_dot(line, &made);
            }
            power = over.product(&power);
            let since = count as f64;
            let stamp = (since * self.leg.steps as f64 + 2.0) * f64::EPSILON * time.abs()
                + since * laid.scale.spacing_doubt;
            for (i, peak) in peaks.iter().enumerate() {
                let at = newest + i;
                let next = (row + 1) * size + i;
                let from_start = absolute_dot(power.row(at), &start_doubts);
                let allowed =
                    laid.doubts[next] + from_start + gathered[at] + laid.steepest[i] * stamp;
                fit.add((laid.values[next] - states[at]).abs(), allowed, *peak);
            }
            if fit.ratio > 1.0 && !to_the_end {
                break;
            }
        }
        fit
    }
}

/// Rows that a method runs on over with every one compared, and how many it goes on by from
/// then on.
const DENSE: usize = 16;
const SPARSE: usize = 8;

fn apply<'m>(lines: &'m [f64], values: &'m [f64]) -> impl Iterator<Item = f64> + 'm {
    lines
        .chunks_exact(values.len().max(1))
        .map(|line| dot(line, values))
}

pub(super) fn absolute_dot(line: &[f64], values: &[f64]) -> f64 {
    line.iter().zip(values).map(|(m, x)| m.abs() * x).sum()
}

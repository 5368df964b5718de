//! Nodes that fall on a jump of an input, where a program may see either side of it: the
//! time that it has summed or multiplied misses the jump by a rounding, one way or the other.

use super::linear::Side;
use super::march::NEAR;
use super::powers::identity;
use super::trial::Trial;
use crate::number::Matrix;

/// What the other side of every jump so far can have done to the states.
///
/// # Formula
/// `sum_r |Phi^(k-r)| v_r`, with `v_r` the sum over the nodes on a jump before row `r` of
/// `|C^j| |W| |g_after - g_before|`, `j` steps before that row.
pub(super) struct Doubts {
    /// Powers of the matrix from row to row.
    powers: Vec<Matrix<f64>>,
    /// Rows with jumps before them.
    jumps: Vec<(usize, Vec<f64>)>,
}

impl Doubts {
    pub(super) fn new(trial: &Trial) -> Doubts {
        Doubts {
            powers: vec![identity(trial.stacked())],
            jumps: Vec::new(),
        }
    }

    /// One row on, over so many steps from a time.
    pub(super) fn next_row(&mut self, trial: &Trial, time: f64, steps: u64) {
        if let Some(last) = self.powers.last() {
            self.powers.push(trial.across().product(last));
        }
        if let Some(noise) = of_steps(trial, time, steps) {
            self.jumps.push((self.powers.len() - 1, noise));
        }
    }

    /// Over all states of the stack.
    pub(super) fn now(&self) -> Vec<f64> {
        let row = self.powers.len() - 1;
        let mut sum = vec![0.0; self.powers[0].size()];
        for (since, noise) in &self.jumps {
            let carried = self.powers[row - since].map(f64::abs).apply(noise);
            sum.iter_mut().zip(carried).for_each(|(sum, x)| *sum += x);
        }
        sum
    }
}

fn of_steps(trial: &Trial, time: f64, steps: u64) -> Option<Vec<f64>> {
    let (recurrence, linear) = (&trial.leg.recurrence, trial.linear);
    let (size, stacked, step) = (linear.size(), trial.stacked(), recurrence.step);
    let near = NEAR * step;
    let behind = (recurrence.back() - 1) as f64 * step;
    let end = time + steps as f64 * step + trial.reach();
    if !linear.jumps_within(time - behind - near, end + near) {
        return None;
    }
    let mut noise = vec![0.0; stacked];
    let (mut before, mut after) = (vec![0.0; size], vec![0.0; size]);
    for count in 0..steps {
        let mut one = vec![0.0; stacked];
        for node in &recurrence.nodes {
            let at = time + (count as f64 + node.at) * step;
            if !linear.jumps_within(at - near, at + near) {
                continue;
            }
            if node.slope {
                linear.forcing_slope(at, Side::Before, near, &mut before);
                linear.forcing_slope(at, Side::After, near, &mut after);
            } else {
                linear.forcing(at, Side::Before, near, &mut before);
                linear.forcing(at, Side::After, near, &mut after);
            }
            let gaps = before.iter().zip(&after).map(|(b, a)| (a - b).abs());
            let gaps: Vec<f64> = gaps.collect();
            let moved = node.weight.map(f64::abs).apply(&gaps);
            let newest = one[stacked - size..].iter_mut();
            newest.zip(moved).for_each(|(sum, x)| *sum += x);
        }
        if one.iter().any(|x| *x != 0.0) {
            let carried = trial.power(steps - count - 1).map(f64::abs).apply(&one);
            noise.iter_mut().zip(carried).for_each(|(sum, x)| *sum += x);
        }
    }
    Some(noise)
}

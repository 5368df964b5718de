//! The steps of a method from one row to the next as matrices, and where they lead to.

use std::sync::{Arc, OnceLock, PoisonError, RwLock};

use super::drive::Drive;
use super::linear::Linear;
use super::powers::{corner, gathered, to_the_power};
use super::recurrence::Recurrence;
use crate::number::Matrix;

/// Numbers of steps whose matrices a leg keeps.
const MOST_LEAPS: usize = 3;

/// Steps of one length from a row to the next.
#[derive(Debug)]
pub struct Leg {
    /// One step.
    pub recurrence: Recurrence,
    /// Steps from row to row.
    pub steps: u64,
    pub(super) drive: Drive,
    /// One step, over all earlier states that the method needs and the inputs.
    pub(super) single: Matrix<f64>,
    /// The same from row to row.
    pub(super) joined: Matrix<f64>,
    /// Its part for the states.
    pub(super) across: Matrix<f64>,
    gathered: OnceLock<Matrix<f64>>,
    rounded: OnceLock<Rounded>,
    /// Other numbers of steps that were asked for.
    leaps: RwLock<Vec<(u64, Arc<Matrix<f64>>)>>,
    /// Where it came to from a start.
    course: RwLock<Option<Course>>,
}

/// The states after so many rows from a start.
#[derive(Debug)]
struct Course {
    start: Vec<f64>,
    origin: f64,
    rows: Vec<usize>,
    states: Arc<Vec<f64>>,
}

/// What a rounding of size one in every step comes to from a row to the next: a line for each
/// entry of the stack, over the states.
#[derive(Debug)]
pub(super) struct Rounded {
    /// Per unit of the states.
    pub(super) spread: Vec<f64>,
    /// Per unit of the forcing.
    pub(super) pull: Vec<f64>,
}

impl Leg {
    pub(super) fn new(linear: &Linear, recurrence: Recurrence, steps: u64) -> Leg {
        let drive = Drive::new(linear);
        let single = drive.joined(linear, &recurrence);
        let joined = to_the_power(&single, steps);
        Leg {
            across: corner(&joined, recurrence.size() * recurrence.back()),
            recurrence,
            steps,
            drive,
            single,
            joined,
            gathered: OnceLock::new(),
            rounded: OnceLock::new(),
            leaps: RwLock::default(),
            course: RwLock::default(),
        }
    }

    /// States and earlier states together.
    pub(super) fn stacked(&self) -> usize {
        self.recurrence.size() * self.recurrence.back()
    }

    /// `sum |C^j|` over the steps of one row: how roundings of single steps add up.
    pub(super) fn gathered(&self) -> &Matrix<f64> {
        let of = || gathered(&corner(&self.single, self.stacked()), self.steps);
        self.gathered.get_or_init(of)
    }

    /// What the roundings of each step come to from a row to the next.
    pub(super) fn rounded(&self) -> &Rounded {
        self.rounded.get_or_init(|| {
            let newest = self.stacked() - self.recurrence.size();
            let lines = |of: &Matrix<f64>| {
                let line = |row: &[f64]| {
                    let sum = |column: usize| {
                        let terms = row[newest..].iter().zip(of.rows());
                        terms.map(|(g, line)| g * line[column]).sum::<f64>()
                    };
                    (0..of.size()).map(sum).collect::<Vec<f64>>()
                };
                self.gathered().rows().flat_map(line).collect()
            };
            Rounded {
                spread: lines(&self.recurrence.spread),
                pull: lines(&self.recurrence.pull),
            }
        })
    }

    /// As many steps at once as are asked for.
    pub(super) fn over(&self, steps: u64) -> Arc<Matrix<f64>> {
        let leaps = self.leaps.read().unwrap_or_else(PoisonError::into_inner);
        if let Some((_, matrix)) = leaps.iter().find(|(known, _)| *known == steps) {
            return Arc::clone(matrix);
        }
        drop(leaps);
        let matrix = Arc::new(to_the_power(&self.single, steps));
        let mut leaps = self.leaps.write().unwrap_or_else(PoisonError::into_inner);
        if leaps.len() == MOST_LEAPS {
            leaps.remove(0);
        }
        leaps.push((steps, Arc::clone(&matrix)));
        matrix
    }

    /// The states after so many rows from a start at a time, `find` where it is not the last
    /// one asked for; `None` where there are none.
    pub(super) fn course(
        &self,
        start: &[f64],
        origin: f64,
        rows: &[usize],
        find: impl FnOnce() -> Option<Vec<f64>>,
    ) -> Option<Arc<Vec<f64>>> {
        let last = self.course.read().unwrap_or_else(PoisonError::into_inner);
        if let Some(last) = &*last
            && last.start == start
            && last.origin.to_bits() == origin.to_bits()
            && last.rows == rows
        {
            return Some(Arc::clone(&last.states));
        }
        drop(last);
        let states = Arc::new(find()?);
        let mut last = self.course.write().unwrap_or_else(PoisonError::into_inner);
        *last = Some(Course {
            start: start.to_vec(),
            origin,
            rows: rows.to_vec(),
            states: Arc::clone(&states),
        });
        Some(states)
    }

    /// About how many numbers it holds.
    pub(super) fn numbers(&self) -> usize {
        let (size, stacked) = (self.recurrence.size(), self.stacked());
        let recurrence = self.recurrence.past.len() + self.recurrence.nodes.len() + 2;
        let (single, across) = (self.single.size().pow(2), stacked * stacked);
        let rounded = 2 * stacked * size;
        let course = 64 * (size + 1);
        recurrence * size * size + rounded + course + (2 + MOST_LEAPS) * single + 2 * across
    }
}

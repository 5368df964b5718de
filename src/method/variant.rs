//! One form of a method as it is tried: with its way to read inputs, and with what the search
//! may spend on it.

use std::cell::Cell;
use std::sync::{Arc, LazyLock};

use super::catalogue::{METHODS, Method};
use super::drive::Drive;
use super::leg::Leg;
use super::linear::Linear;
use super::recurrence::{Ranks, Reading, Recurrence};
use super::scheme::{Coefficients, Scheme};
use super::shelf::Title;
use super::starts::work_of_start;

/// Multiplications that a form is worth where it is not claimed: with many states and a long
/// memory a single number of steps can cost a second. More where each number of steps is
/// cheap, since a range of them may be searched.
const MOST_WORK: f64 = 5e7;
const MOST_CHEAP_WORK: f64 = 2.5e8;
const CHEAP: f64 = 1e7;

/// The coefficients of every form of a method of the catalogue.
pub(super) fn forms_of(method: &'static Method) -> &'static [Coefficients] {
    static READ: LazyLock<Vec<Vec<Coefficients>>> = LazyLock::new(|| {
        let of = |method: &Method| method.schemes.iter().map(Scheme::coefficients).collect();
        METHODS.iter().map(of).collect()
    });
    let place = METHODS.iter().position(|known| std::ptr::eq(known, method));
    place.map_or(&[], |place| &READ[place])
}

pub(super) struct Variant<'a> {
    pub(super) method: &'static Method,
    /// The place among the forms of the method, where it is one of the catalogue.
    form: Option<usize>,
    pub(super) coefficients: &'a Coefficients,
    pub(super) reading: Reading,
    /// The ranks of the states, and which of their orders that is.
    ranks: &'a Ranks,
    order: usize,
    /// Multiplications so far.
    spent: Cell<f64>,
}

impl<'a> Variant<'a> {
    pub(super) fn new(
        method: &'static Method,
        (form, coefficients): (Option<usize>, &'a Coefficients),
        reading: Reading,
        (order, ranks): (usize, &'a Ranks),
    ) -> Variant<'a> {
        Variant {
            method,
            form,
            coefficients,
            reading,
            ranks,
            order,
            spent: Cell::new(0.0),
        }
    }

    /// Takes note of what a number of steps costs, worked out before or not; false where that
    /// is more than the form is worth.
    pub(super) fn affords(&self, linear: &Linear, steps: u64, complete: bool) -> bool {
        let size = linear.size() as f64;
        let (back, stages) = match self.coefficients {
            Coefficients::Stages(stages) => (1, stages.weights.len() as f64),
            Coefficients::Multistep { beta: weights, .. }
            | Coefficients::Predicted {
                predictor: weights, ..
            } => (weights.len() - 1, 2.0),
            Coefficients::Iterated(_) => (4, 2.0),
            Coefficients::SemiImplicit | Coefficients::Exponential { .. } => (1, 4.0),
        };
        let triangular = !matches!(self.coefficients, Coefficients::Stages(stages)
            if !stages.is_lower_triangular());
        let of_step = match triangular {
            true => size.powi(3) * stages * (stages + 8.0),
            false => 6.0 * (size * stages).powi(3),
        };
        let (steps, width) = (
            steps as f64,
            back as f64 * size + Drive::width(linear) as f64,
        );
        // Powers by squaring, and the sum of all of them in blocks.
        let of_leg = width.powi(3) * (3.0 + 2.0 * steps.log2() + 2.0 * steps.sqrt());
        let free = back > 1 && (steps > 1.0 || !complete);
        let of_start = if free {
            work_of_start(linear.size(), back)
        } else {
            0.0
        };
        let cost = of_step + of_leg + of_start;
        self.spent.set(self.spent.get() + cost);
        let most = if cost <= CHEAP {
            MOST_CHEAP_WORK
        } else {
            MOST_WORK
        };
        self.spent.get() <= most
    }

    /// `None` where the step cannot be solved, or where another way to read the inputs
    /// changes nothing.
    pub(super) fn leg(&self, linear: &Linear, step: f64, steps: u64) -> Option<Arc<Leg>> {
        let new = || {
            let plain = Recurrence::new(self.coefficients, linear, step, self.ranks)?;
            let recurrence = match self.reading {
                Reading::AtNodes | Reading::EitherSide => plain,
                Reading::Held if !plain.looks_ahead() => return None,
                reading => plain.with_reading(reading),
            };
            Some(Leg::new(linear, recurrence, steps))
        };
        let Some(form) = self.form else {
            return new().map(Arc::new);
        };
        let title = || Title {
            form: (std::ptr::from_ref(self.method).addr(), form),
            reading: self.reading,
            order: self.order,
            step: step.to_bits(),
            steps,
        };
        linear.legs.leg(title, new)
    }
}

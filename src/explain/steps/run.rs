//! One run of a method over a case, compared with the exact solution at its nodes.

use crate::case::Case;
use crate::compare::Limit;
use crate::exact::Exact;
use crate::method::{Coefficients, Linear, March, Method, NEAR, Ranks, Recurrence, Side, Sides};
use crate::number::Double;
use crate::outcome::ChannelError;

/// Most steps of one run.
pub const MOST_STEPS: u64 = 200_000;
/// Most products of one run: what keeps large systems below [`MOST_STEPS`].
pub const MOST_PRODUCTS: f64 = 5e7;
/// Runs up to this many steps are compared at every node, longer ones at about as many.
pub const MOST_COMPARED: u64 = 4_000;

/// What is asked of a case: which error each channel may have.
#[derive(Debug)]
pub struct Question<'a> {
    /// The case.
    pub case: &'a Case,
    /// Its exact solution.
    pub exact: &'a Exact,
    /// The case in `f64`, as a program sees it.
    pub linear: Linear,
    /// In the order of [`Case::channels`]; a channel without a limit is not judged.
    pub limits: Vec<Option<Limit>>,
}

/// A method as a program runs it.
#[derive(Clone, Debug)]
pub struct Stepper {
    /// Of the method.
    pub coefficients: Coefficients,
    /// The order in which a semi-implicit step moves the states; empty for theirs in the
    /// case.
    pub ranks: Ranks,
    /// Which value of an input counts at a jump.
    pub sides: Sides,
}

/// Equal steps from the start of the window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Grid {
    /// In the time unit of the case.
    pub step: Double,
    /// How many.
    pub count: u64,
}

impl<'a> Question<'a> {
    /// Limits come in the order of [`Case::channels`]; those missing at the end are none.
    pub fn new(case: &'a Case, exact: &'a Exact, limits: &[Option<Limit>]) -> Question<'a> {
        let mut limits = limits.to_vec();
        limits.resize(exact.peaks().len(), None);
        Question {
            case,
            exact,
            linear: Linear::new(case),
            limits,
        }
    }

    /// Length of the window.
    pub fn span(&self) -> Double {
        self.exact.to() - self.exact.from()
    }

    /// The window in this many steps.
    pub fn divided(&self, count: u64) -> Grid {
        Grid {
            step: self.span() / Double::from(count as f64),
            count,
        }
    }

    /// As many steps of a length as the window holds.
    pub fn filled(&self, step: Double) -> Grid {
        // A step that divides the window up to rounding reaches its end.
        let count = (self.span() / step + Double::from(1e-9)).floor().to_f64();
        Grid {
            step,
            count: count.clamp(0.0, 1e18) as u64,
        }
    }
}

impl Stepper {
    /// The usual form of a method, states in the order of the case.
    pub fn new(method: &Method, sides: Sides) -> Option<Stepper> {
        Some(Stepper {
            coefficients: method.schemes.first()?.coefficients(),
            ranks: Ranks::new(),
            sides,
        })
    }

    fn recurrence(&self, linear: &Linear, step: f64) -> Option<Recurrence> {
        Recurrence::new(&self.coefficients, linear, step, &self.ranks)
    }

    /// Most steps that one run of this method may have: [`MOST_STEPS`], fewer where each
    /// costs much.
    pub fn most_steps(&self, question: &Question) -> u64 {
        let probe = self.recurrence(&question.linear, question.divided(1000).step.to_f64());
        let Some(recurrence) = probe else {
            return MOST_STEPS;
        };
        let matrices = (recurrence.past.len() + recurrence.nodes.len()) as f64;
        let products = matrices * (question.linear.size() as f64).powi(2);
        MOST_STEPS.min((MOST_PRODUCTS / products).max(1000.0) as u64)
    }

    /// True where a program that reads `t >= at` and one whose steps each see the value
    /// that holds within them differ.
    pub fn sees_the_end_of_a_step(&self, question: &Question) -> bool {
        let probe = self.recurrence(&question.linear, question.divided(1000).step.to_f64());
        probe.is_none_or(|recurrence| recurrence.looks_ahead())
    }
}

/// Errors of one run, channel by channel, in the order of [`Case::channels`].
///
/// `None` where the method cannot be run so: fewer steps than it needs start values, or
/// a step that cannot be solved. The caller keeps to [`Stepper::most_steps`]. With `brief`
/// the run ends at the first node that breaks a limit: then the errors tell no more than
/// that it does.
///
/// # Formula
/// The method's recurrence, step by step in `f64` (`crate::method::March`); a method that
/// needs several values starts from exact ones. Errors are those at the nodes.
///
/// # Error bound
/// None on the largest error over all nodes where there are more than [`MOST_COMPARED`]:
/// then it is that of nodes spread unevenly over the window, of those close after the
/// start and after each jump (of a part of the jumps where there are many), of those
/// beside the jumps, and of the last. At the nodes compared, errors are those of the
/// computed values to the rounding of the times, `ulp(t)` times the rate of change.
///
/// # Cost
/// `steps * (size^2 * matrices of the recurrence)`, and at most about [`MOST_COMPARED`]
/// values of the exact solution.
pub fn run(
    question: &Question,
    stepper: &Stepper,
    grid: Grid,
    brief: bool,
) -> Option<Vec<ChannelError>> {
    let (exact, linear) = (question.exact, &question.linear);
    let step = grid.step.to_f64();
    let near = NEAR * step;
    let recurrence = stepper.recurrence(linear, step)?;
    let back = recurrence.back() as u64;
    if grid.count < back || back == 0 {
        return None;
    }
    let time = |node: u64| {
        let time = exact.from() + grid.step * Double::from(node as f64);
        // A node that misses a jump by its rounding is at it, as in the run itself.
        let early = time - Double::from(near);
        exact.jump_after(early, 2.0 * near).unwrap_or(time)
    };
    let mut walk = exact.walk();
    let mut start = |node: u64| -> Vec<f64> {
        let values = walk.go(time(node)).value.iter();
        values.take(linear.size()).map(|x| x.to_f64()).collect()
    };
    let states: Vec<Vec<f64>> = (0..back).map(&mut start).collect();
    let origin = exact.from().to_f64();
    let mut march = March::new(&recurrence, linear, stepper.sides, states, origin, back - 1);
    let mut at = back - 1;
    let nothing = ChannelError {
        worst: 0.0,
        limit_used: 0.0,
    };
    let mut errors = vec![nothing; question.limits.len()];
    for node in compared(exact, grid, back) {
        while at < node {
            march.step();
            at += 1;
        }
        let values = walk.go(time(node));
        for (channel, sum) in errors.iter_mut().enumerate() {
            let computed = linear.observe(channel, march.state(), march.time(), Side::After, near);
            let value = values.value.get(channel).map_or(f64::NAN, |v| v.to_f64());
            let error = (computed - value).abs();
            let error = if error.is_nan() { f64::INFINITY } else { error };
            sum.worst = sum.worst.max(error);
            if let Some(limit) = question.limits[channel] {
                let size = if limit.of_peak {
                    exact.peaks()[channel]
                } else {
                    value.abs()
                };
                sum.limit_used = sum.limit_used.max(share(error, limit.at(size)));
            }
        }
        if brief && errors.iter().any(|error| error.limit_used > 1.0) {
            break;
        }
    }
    Some(errors)
}

/// `error / limit`, with no error using nothing of any limit.
fn share(error: f64, limit: f64) -> f64 {
    if error == 0.0 { 0.0 } else { error / limit }
}

/// The nodes that are compared, in order.
fn compared(exact: &Exact, grid: Grid, first: u64) -> Vec<u64> {
    let Grid { step, count } = grid;
    if count - first < MOST_COMPARED {
        return (first..=count).collect();
    }
    // Most of them spread over the window. Evenly they could always meet an oscillation
    // at one phase; the golden section keeps them from it.
    let spread = 3 * MOST_COMPARED / 4;
    let stride = (count - first) as f64 / spread as f64;
    let uneven = |k: u64| k as f64 + (k as f64 * 0.618_033_988_749_894_9).fract();
    let mut nodes: Vec<u64> = (0..spread)
        .map(|k| first + (stride * uneven(k)) as u64)
        .collect();
    // The rest where fast modes live: close after the start and after jumps.
    let places: Vec<f64> = std::iter::once(exact.from().to_f64())
        .chain(exact.jumps())
        .map(|time| ((Double::from(time) - exact.from()) / step).to_f64())
        .collect();
    let budget = (MOST_COMPARED - spread) as usize;
    let thinned = places.len().div_ceil(budget / 4);
    let each = budget / places.len().div_ceil(thinned);
    let farther = |&distance: &u64| Some((distance + 1).max(distance + distance / 7));
    let distances = std::iter::successors(Some(0), farther);
    let distances: Vec<u64> = distances
        .take_while(|&distance| distance <= count)
        .take(each)
        .collect();
    for place in places.iter().step_by(thinned) {
        let base = (place + NEAR).floor() as u64;
        nodes.extend(distances.iter().map(|distance| base + distance));
    }
    nodes.push(count);
    nodes.retain(|node| (first..=count).contains(node));
    nodes.sort_unstable();
    nodes.dedup();
    nodes
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Library, Replacements};

    #[test]
    fn nodes_compared_are_all_or_include_the_telling_ones() {
        let case = Library::new().load("electrical/rc-pulse", &Replacements::new());
        let case = case.unwrap();
        let exact = case.exact().unwrap();
        let question = Question::new(&case, &exact, &[]);
        let few = compared(&exact, question.divided(100), 2);
        assert_eq!(few, (2..=100).collect::<Vec<u64>>());
        let many = compared(&exact, question.divided(120_000), 1);
        assert!(many.len() as u64 <= MOST_COMPARED + 1 && many.len() > 3000);
        // Jumps at 1 and 3 of 12.
        for node in [1, 2, 3, 10_000, 10_001, 30_000, 30_001, 120_000] {
            assert!(many.contains(&node), "{node}");
        }
        assert!(many.windows(2).all(|pair| pair[0] < pair[1]));
        // No stretch of the window is passed over.
        assert!(many.windows(2).all(|pair| pair[1] - pair[0] < 120));
    }
}

//! One run of a method over a case, compared with the exact solution at its nodes.

use super::nodes::{WALKS, compared};
use crate::case::Case;
use crate::compare::Limit;
use crate::exact::{Exact, Values, Walk};
use crate::method::{Coefficients, Linear, March, Method, NEAR, Ranks, Recurrence, Side, Sides};
use crate::number::Double;
use crate::outcome::ChannelError;

/// Most steps of one run.
pub const MOST_STEPS: u64 = 200_000;
/// Most products of one run: what keeps large systems below [`MOST_STEPS`].
pub const MOST_PRODUCTS: f64 = 5e7;
/// Runs up to this many steps are compared at every node, longer ones at about as many.
pub const MOST_COMPARED: u64 = 3_000;

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

    /// The limit of a channel where its exact value is this; `None` without one.
    fn limit(&self, channel: usize, value: f64) -> Option<f64> {
        let limit = self.limits.get(channel).copied().flatten()?;
        let size = if limit.of_peak {
            self.exact.peaks()[channel]
        } else {
            value.abs()
        };
        Some(limit.at(size))
    }

    /// True where the limit of a channel follows its value.
    fn varies(&self, channel: usize) -> bool {
        let limit = self.limits.get(channel).copied().flatten();
        limit.is_some_and(|limit| limit.relative > 0.0 && !limit.of_peak)
    }

    /// True where exact values are known far better than their limits.
    fn tells(&self, values: &Values) -> bool {
        let mut pairs = values.value.iter().zip(&values.bound).enumerate();
        pairs.all(|(channel, (value, &bound))| {
            let peak = self.exact.peaks()[channel];
            let limit = self.limit(channel, value.to_f64());
            let limit = limit.filter(|&limit| limit > 0.0);
            bound <= limit.map_or(1e-13 * peak, |limit| 1e-6 * limit)
        })
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
/// The method's recurrence, step by step in `f64` ([`March`]); a method that needs
/// several values starts from exact ones. Errors are those at the nodes.
///
/// # Error bound
/// Up to [`MOST_COMPARED`] steps every node is compared, and errors are those of the
/// computed values to the rounding of the times, `ulp(t)` times the rate of change. In
/// longer runs there is no bound on what the nodes left out may add: compared are nodes
/// spread over the window, those close after the start and after each jump (of a part of
/// the jumps where there are many), those beside the jumps, the last, and between them
/// those where a channel comes so near to zero that its limit may be used up there. Errors
/// that come and go within a thousandth of the window can be missed.
///
/// # Cost
/// `steps * (size^2 * matrices of the recurrence)`, and some thousands of values of the
/// exact solution.
pub fn run(
    question: &Question,
    stepper: &Stepper,
    grid: Grid,
    brief: bool,
) -> Option<Vec<ChannelError>> {
    run_compared(question, stepper, grid, brief, MOST_COMPARED)
}

fn run_compared(
    question: &Question,
    stepper: &Stepper,
    grid: Grid,
    brief: bool,
    most: u64,
) -> Option<Vec<ChannelError>> {
    let linear = &question.linear;
    let recurrence = stepper.recurrence(linear, grid.step.to_f64())?;
    let back = recurrence.back() as u64;
    if grid.count < back || back == 0 {
        return None;
    }
    let mut comparison = Comparison::new(question, grid);
    let states: Vec<Vec<f64>> = (0..back)
        .map(|node| comparison.exact_states(node))
        .collect();
    let (sides, origin) = (stepper.sides, question.exact.from().to_f64());
    let mut march = March::new(&recurrence, linear, sides, states, origin, back - 1);
    let mut at = back - 1;
    for (node, walk) in compared(question.exact, grid, back, most) {
        while at < node {
            march.step();
            at += 1;
            if at < node {
                comparison.pass(at, &march);
            }
        }
        comparison.compare(node, walk, &march);
        if brief && comparison.is_broken() {
            break;
        }
    }
    Some(comparison.errors)
}

/// Errors of a run while it goes on.
struct Comparison<'a> {
    question: &'a Question<'a>,
    grid: Grid,
    near: f64,
    walks: [Walk<'a>; WALKS],
    errors: Vec<ChannelError>,
    between: Vec<Between>,
}

/// One channel since the node compared last.
#[derive(Clone, Copy)]
struct Between {
    /// Error at that node.
    error: f64,
    /// Computed value at that node.
    computed: f64,
    /// The node passed since at which the computed value was smallest, and that value.
    smallest: Option<(u64, f64)>,
}

impl<'a> Comparison<'a> {
    fn new(question: &'a Question, grid: Grid) -> Comparison<'a> {
        let channels = question.limits.len();
        let nothing = ChannelError {
            worst: 0.0,
            limit_used: 0.0,
        };
        let start = Between {
            error: 0.0,
            computed: f64::INFINITY,
            smallest: None,
        };
        Comparison {
            question,
            grid,
            near: NEAR * grid.step.to_f64(),
            walks: std::array::from_fn(|_| question.exact.walk()),
            errors: vec![nothing; channels],
            between: vec![start; channels],
        }
    }

    /// A node that misses a jump by its rounding is at it, as in the run itself.
    fn time(&self, node: u64) -> Double {
        let exact = self.question.exact;
        let time = exact.from() + self.grid.step * Double::from(node as f64);
        let early = time - Double::from(self.near);
        exact.jump_after(early, 2.0 * self.near).unwrap_or(time)
    }

    fn exact_at(&mut self, node: u64, walk: usize) -> &Values {
        let time = self.time(node);
        let walk = &mut self.walks[walk];
        if !self.question.tells(walk.go_in_double(time)) {
            walk.go(time);
        }
        walk.values()
    }

    fn exact_states(&mut self, node: u64) -> Vec<f64> {
        let size = self.question.linear.size();
        let values = self.exact_at(node, 0).value.iter();
        values.take(size).map(|x| x.to_f64()).collect()
    }

    fn computed(&self, channel: usize, march: &March) -> f64 {
        let linear = &self.question.linear;
        linear.observe(channel, march.state(), march.time(), Side::After, self.near)
    }

    /// Compares every channel.
    fn compare(&mut self, node: u64, walk: usize, march: &March) {
        let values = self.exact_at(node, walk).value.clone();
        for (channel, value) in values.iter().enumerate() {
            let computed = self.computed(channel, march);
            let error = self.count(channel, computed, value.to_f64());
            let before = self.between[channel];
            self.between[channel] = Between {
                error,
                computed,
                smallest: None,
            };
            self.look_back(channel, before, self.between[channel]);
        }
    }

    /// Takes in one error of one channel, and gives it.
    fn count(&mut self, channel: usize, computed: f64, value: f64) -> f64 {
        let error = (computed - value).abs();
        let error = if error.is_nan() { f64::INFINITY } else { error };
        let limit = self.question.limit(channel, value);
        let sum = &mut self.errors[channel];
        sum.worst = sum.worst.max(error);
        sum.limit_used = sum
            .limit_used
            .max(limit.map_or(0.0, |limit| share(error, limit)));
        error
    }

    /// A node that is not compared.
    fn pass(&mut self, node: u64, march: &March) {
        for channel in 0..self.between.len() {
            if self.question.varies(channel) {
                let computed = self.computed(channel, march);
                let smallest = &mut self.between[channel].smallest;
                if smallest.is_none_or(|(_, least)| computed.abs() < f64::abs(least)) {
                    *smallest = Some((node, computed));
                }
            }
        }
    }

    /// Compares a node passed where a channel came nearer to zero than at the nodes
    /// compared: its limit is small there, yet its error is about theirs.
    fn look_back(&mut self, channel: usize, before: Between, after: Between) {
        let Some((node, computed)) = before.smallest else {
            return;
        };
        if computed.abs() >= before.computed.abs().min(after.computed.abs()) {
            return;
        }
        let Some(limit) = self.question.limit(channel, computed) else {
            return;
        };
        if share(before.error.max(after.error), limit) > self.errors[channel].limit_used {
            let value = self.exact_at(node, WALKS - 1).value[channel].to_f64();
            self.count(channel, computed, value);
        }
    }

    fn is_broken(&self) -> bool {
        self.errors.iter().any(|error| error.limit_used > 1.0)
    }
}

/// `error / limit`, with no error using nothing of any limit.
fn share(error: f64, limit: f64) -> f64 {
    if error == 0.0 { 0.0 } else { error / limit }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{Library, Replacements};
    use crate::method::find;

    fn used(case: &str, method: &str, steps: u64, most: u64) -> f64 {
        let case = Library::new().load(case, &Replacements::new()).unwrap();
        let exact = case.exact().unwrap();
        let limit = Limit {
            absolute: case.limits.absolute,
            relative: case.limits.relative,
            of_peak: false,
        };
        let question = Question::new(&case, &exact, &vec![Some(limit); exact.peaks().len()]);
        let stepper = Stepper::new(find(method).unwrap(), Sides::After).unwrap();
        let grid = question.divided(steps);
        let errors = run_compared(&question, &stepper, grid, false, most).unwrap();
        errors
            .iter()
            .map(|error| error.limit_used)
            .fold(0.0, f64::max)
    }

    /// A channel uses most of a relative limit where it goes through zero: a comb of nodes
    /// alone misses that by some per cent.
    #[test]
    fn some_nodes_tell_what_all_of_them_tell() {
        for (case, method, steps) in [
            ("mechanical/base-excitation", "Heun", 41_000),
            ("stress/transient-growth-7", "Heun", 31_000),
            ("mechanical/resonance", "classical RK4", 12_000),
            ("electrical/rc-ladder-5", "trapezoidal", 20_000),
            ("electrical/rl-sine", "classical RK4", 12_000),
            ("kinetics/oral", "forward Euler", 50_000),
        ] {
            let (all, some) = (
                used(case, method, steps, steps + 1),
                used(case, method, steps, MOST_COMPARED),
            );
            let gap = 1.0 - some / all;
            assert!((0.0..1e-3).contains(&gap), "{case}: {all} {some} {gap:e}");
        }
    }
}

//! Which step a case needs: error against step from really running a method over it,
//! the largest step that keeps the limits, the largest that is stable, and steps that
//! hit every jump of the inputs.
//!
//! `run` is one run at one step, `nodes` where it is compared, `stable` what the eigenvalues say, `jumps` the arithmetic
//! of the times of jumps; here is the search and the table.

mod jumps;
mod nodes;
mod run;
mod stable;

use jumps::{jump_grid, jump_times, missed};
pub use run::{Grid, MOST_COMPARED, MOST_PRODUCTS, MOST_STEPS, Question, Stepper, run};
pub use stable::approx_stable_step;

use crate::exact::approx_time_scales;
use crate::method::{Method, Sides};
use crate::number::Double;
use crate::outcome::{
    ChannelLimit, JumpGrid, LargestStep, MethodSteps, OnJumps, Rule, StepRun, StepsOutcome,
};

/// A largest step of this fraction of the stability limit or more is ruled by it.
const RULED_BY_STABILITY: f64 = 0.95;
/// The number of steps is found to this fraction.
const FOUND_TO: u64 = 2000;
/// Fewest steps in the ladder that is shown.
const FIRST_RUNG: u64 = 5;

/// The largest step that keeps the limits of the question, the stability limit, and which
/// of the two rules.
///
/// The step divides the window, and the run has as many rows as the case asks for. Its
/// own run has kept the limits. Error against step need not be monotone (a step that hits
/// a jump is better than a slightly shorter one that does not), so a longer step may keep
/// them by luck and a shorter one may break them; the step found is the last that keeps
/// them before one that does not, counted from the first of a sequence of halved steps
/// that does.
///
/// # Units
/// The time unit of the case.
///
/// # Error bound
/// The next longer step tried, at most one part in 2,000 (or one step over the window)
/// longer, breaks a limit; for nodes compared see [`run`].
///
/// # Cost
/// About twenty runs, each bounded as in [`run`].
pub fn largest_step(question: &Question, stepper: &Stepper) -> LargestStep {
    let approx_stable = approx_stable_step(&question.linear, stepper);
    let most_steps = stepper.most_steps(question);
    let kept = search(question, stepper, approx_stable, 1);
    LargestStep {
        ruled_by: rule(question, kept.as_ref(), most_steps, approx_stable),
        kept,
        most_steps,
        approx_stable,
    }
}

/// The same for every method, errors at a ladder of steps, and steps that hit the jumps.
///
/// Without steps of the caller's own the ladder has windows in 5, 10, 20, 50, ... steps
/// until every method keeps the limits, or as far as its bound goes. Inputs are read as
/// most programs do, the new value from the instant of a jump on ([`Sides::After`]).
pub fn steps(question: &Question, methods: &[&Method], stated: &[Double]) -> StepsOutcome {
    let times = jump_times(question.exact);
    let jumps = jump_grid(question.exact, &times);
    let steppers = methods
        .iter()
        .filter_map(|method| Some((*method, Stepper::new(method, Sides::After)?)));
    let answers: Vec<(&Method, Stepper, LargestStep)> = steppers
        .map(|(method, stepper)| {
            let largest = largest_step(question, &stepper);
            (method, stepper, largest)
        })
        .collect();
    let grids = if stated.is_empty() {
        let largest: Vec<&LargestStep> = answers.iter().map(|(_, _, l)| l).collect();
        ladder(question, &largest)
    } else {
        let mut grids: Vec<Grid> = stated.iter().map(|&h| question.filled(h)).collect();
        grids.sort_by(|a, b| b.step.to_f64().total_cmp(&a.step.to_f64()));
        grids.dedup();
        grids
    };
    let methods = answers.into_iter().map(|(method, stepper, largest)| {
        let rungs = grids.iter();
        let rungs = rungs.map(|&grid| rung(question, &stepper, &largest, grid));
        let kept = largest.kept.as_ref();
        MethodSteps {
            name: method.name.to_owned(),
            order: method.order,
            start_values: method.schemes.first().map_or(1, |s| s.steps_back()),
            ladder: rungs.collect(),
            jumps_missed: kept.map_or(0, |kept| {
                missed(question.exact, &times, question.divided(kept.steps))
            }),
            on_jumps: on_jumps(question, &stepper, &jumps, largest.approx_stable),
            largest,
        }
    });
    let methods = methods.collect();
    let scales = approx_time_scales(question.case);
    StepsOutcome {
        limits: limits(question),
        grids: grids.iter().map(|g| (g.step.to_f64(), g.count)).collect(),
        methods,
        jumps,
        fewest_steps: fewest_steps(question),
        shortest_time_constant: scales.time_constant,
        shortest_period: scales.period,
    }
}

/// A run has as many rows as the case asks for.
fn fewest_steps(question: &Question) -> u64 {
    question.case.time.least_rows.saturating_sub(1).max(1)
}

/// The fewest steps, a multiple of `unit`, that keep the limits.
fn search(
    question: &Question,
    stepper: &Stepper,
    approx_stable: Option<f64>,
    unit: u64,
) -> Option<StepRun> {
    let keeps = |multiple: u64| {
        let grid = question.divided(multiple * unit);
        let channels = run(question, stepper, grid, true)?;
        let step = grid.step.to_f64();
        let run = StepRun {
            step,
            steps: grid.count,
            stable: is_stable(step, approx_stable),
            channels,
        };
        run.keeps().then_some(run)
    };
    let most = stepper.most_steps(question) / unit;
    let mut bad = fewest_steps(question).div_ceil(unit) - 1;
    let mut multiple = bad + 1;
    let mut kept = loop {
        if multiple > most {
            return None;
        }
        if let Some(run) = keeps(multiple) {
            break run;
        }
        bad = multiple;
        // The bound itself is tried too.
        multiple = if multiple < most {
            (2 * multiple).min(most)
        } else {
            most + 1
        };
    };
    let mut good = multiple;
    while good - bad > (good / FOUND_TO).max(1) {
        let middle = bad + (good - bad) / 2;
        match keeps(middle) {
            Some(run) => (good, kept) = (middle, run),
            None => bad = middle,
        }
    }
    Some(kept)
}

fn is_stable(step: f64, approx_stable: Option<f64>) -> bool {
    approx_stable.is_none_or(|stable| step <= stable * (1.0 + 1e-9))
}

fn rule(
    question: &Question,
    kept: Option<&StepRun>,
    most_steps: u64,
    approx_stable: Option<f64>,
) -> Option<Rule> {
    let Some(kept) = kept else {
        let finest = question.divided(most_steps).step.to_f64();
        return is_stable(finest, approx_stable).then_some(Rule::Accuracy);
    };
    // Where no step is stable, growth is just one more error.
    let limit = approx_stable.filter(|&stable| stable > 0.0);
    Some(
        if limit.is_some_and(|stable| kept.step >= RULED_BY_STABILITY * stable) {
            Rule::Stability
        } else if kept.steps <= fewest_steps(question) {
            Rule::Neither
        } else {
            Rule::Accuracy
        },
    )
}

/// Windows in 5, 10, 20, 50, ... steps, until every method keeps the limits.
fn ladder(question: &Question, largest: &[&LargestStep]) -> Vec<Grid> {
    let needed = |l: &&LargestStep| l.kept.as_ref().map_or(l.most_steps, |kept| kept.steps);
    let needed = largest.iter().map(needed).max().unwrap_or(0);
    let most = largest.iter().map(|l| l.most_steps).max().unwrap_or(0);
    let mut grids = Vec::new();
    let mut decade = 1;
    loop {
        for count in [decade, 2 * decade, 5 * decade] {
            if count < FIRST_RUNG {
                continue;
            }
            if count > most {
                return grids;
            }
            grids.push(question.divided(count));
            if count >= needed {
                return grids;
            }
        }
        decade *= 10;
    }
}

fn rung(
    question: &Question,
    stepper: &Stepper,
    largest: &LargestStep,
    grid: Grid,
) -> Option<StepRun> {
    if grid.count > largest.most_steps {
        return None;
    }
    let step = grid.step.to_f64();
    Some(StepRun {
        step,
        steps: grid.count,
        stable: is_stable(step, largest.approx_stable),
        channels: run(question, stepper, grid, false)?,
    })
}

fn on_jumps(
    question: &Question,
    stepper: &Stepper,
    jumps: &JumpGrid,
    approx_stable: Option<f64>,
) -> Option<OnJumps> {
    let unit = (question.span().to_f64() / jumps.common_with_end?).round() as u64;
    let after = search(question, stepper, approx_stable, unit);
    let own = if stepper.sees_the_end_of_a_step(question) {
        let own = Stepper {
            sides: Sides::Own,
            ..stepper.clone()
        };
        search(question, &own, approx_stable, unit)
    } else {
        after.clone()
    };
    Some(OnJumps { after, own })
}

fn limits(question: &Question) -> Vec<ChannelLimit> {
    let channels = question.case.channels();
    let pairs = channels.iter().zip(&question.limits);
    pairs
        .filter_map(|(channel, limit)| {
            limit.map(|limit| ChannelLimit {
                channel: channel.name.to_owned(),
                absolute: limit.absolute,
                relative: limit.relative,
            })
        })
        .collect()
}

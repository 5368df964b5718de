//! Which steps a case is run at: as written, or as fractions of its own time scale.

use crate::case::Case;
use crate::fault::{Fault, quoted};
use crate::number::plain;
use crate::outcome::CaseFacts;

/// Most steps of one run where a plan leaves their length to the case.
const MOST_STEPS: f64 = 1e7;
/// Most numbers of steps that are tried for one run.
const MOST_TRIED: u64 = 20_000;
/// Most jumps that are asked whether they lie on a grid.
const MOST_JUMPS: usize = 200;
/// A step of at most so many digits is a round one.
const ROUND: usize = 3;

/// What a plan says of steps.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Steps {
    /// In the time unit of each case.
    Stated(Vec<f64>),
    /// Of the shortest time constant of each case.
    Fractions(Vec<f64>),
}

impl Steps {
    /// How many runs a case has.
    pub fn count(&self) -> usize {
        match self {
            Steps::Stated(numbers) | Steps::Fractions(numbers) => numbers.len(),
        }
    }

    /// The steps of one case, in the order of the plan.
    ///
    /// # Errors
    /// Steps longer than the window, cases without a time scale.
    pub fn of(&self, case: &Case, facts: &CaseFacts) -> Result<Vec<f64>, Fault> {
        let window = (case.time.to - case.time.from).to_f64();
        let (name, unit) = (quoted(&case.name), &case.time.unit);
        let fractions = match self {
            Steps::Stated(steps) => {
                return match steps.iter().find(|&&step| step > window) {
                    None => Ok(steps.clone()),
                    Some(&step) => Err(Fault::new(format!(
                        "a step of {} is longer than the window of case {name}, which has {} {unit}",
                        plain(step),
                        plain(window)
                    ))
                    .help("write `steps = { of_time_constant = [0.1, 0.05] }` to suit each case")),
                };
            }
            Steps::Fractions(fractions) => fractions,
        };
        let scale = facts.shortest_time_constant.or(facts.shortest_period);
        let scale = scale.ok_or_else(|| {
            let text = format!("case {name} has neither a time constant nor a period");
            Fault::new(text)
                .help("write its steps as numbers, `steps = [10, 20]`, in a plan of its own")
        })?;
        let mut steps = Vec::new();
        for &fraction in fractions {
            let least = (case.time.least_rows.saturating_sub(1)).max(1) as f64;
            let count = (window / (fraction * scale) * (1.0 - 1e-12))
                .ceil()
                .max(least);
            if count > MOST_STEPS {
                let text = format!(
                    "{} of the shortest time scale of case {name} makes {count:.1e} steps over its window",
                    plain(fraction)
                );
                let help = "take a larger fraction, or leave the case out of `cases`";
                return Err(Fault::new(text).help(help));
            }
            let step = on_grid(
                case.time.from.to_f64(),
                window,
                count as u64,
                &facts.jumps,
                &steps,
            );
            steps.push(step);
        }
        Ok(steps)
    }
}

/// The longest step of at least `count` to the window that puts its end on the grid, with
/// the jumps of the inputs and in round numbers where half as many steps again allow it:
/// a jump within a step would spoil the order of any method.
fn on_grid(from: f64, window: f64, count: u64, jumps: &[f64], taken: &[f64]) -> f64 {
    let jumps = &jumps[..jumps.len().min(MOST_JUMPS)];
    let step = |count: u64| window / count as f64;
    let jumps_off = |step: f64| {
        let off = |jump: &f64| {
            let place = (jump - from) / step;
            (place - place.round()).abs() > 1e-6
        };
        jumps.iter().any(off)
    };
    let most = count + (count / 2).clamp(1, MOST_TRIED);
    let free = (count..=most).filter(|&count| !taken.contains(&step(count)));
    let best = free.min_by_key(|&count| {
        let step = step(count);
        (jumps_off(step), !is_round(step), count)
    });
    step(best.unwrap_or(most + 1))
}

fn is_round(step: f64) -> bool {
    let text = format!("{step:e}");
    let digits = text.split('e').next().unwrap_or_default();
    digits.chars().filter(char::is_ascii_digit).count() <= ROUND
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_step_meets_the_end_and_the_jumps() {
        // 14400 in at least 49 steps with jumps at 600 and 1500: 300 is the longest step
        // that meets both, at 48 steps; 150 would be too many, so 49 to 73 steps have none.
        assert_eq!(on_grid(0.0, 14400.0, 48, &[600.0, 1500.0], &[]), 300.0);
        // 240 meets 600 not; nothing does between, and round numbers are taken.
        let step = on_grid(0.0, 14400.0, 49, &[600.0, 1500.0], &[]);
        assert!(step < 300.0 && is_round(step), "{step}");
        // Round numbers before longer steps.
        assert_eq!(on_grid(0.0, 1.0, 7, &[], &[]), 0.125);
        assert_eq!(on_grid(0.0, 1.0, 7, &[], &[0.125]), 0.1);
    }
}

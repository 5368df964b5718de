//! Which step to take: from the errors of the runs themselves, and from the recurrence of
//! their method.

use crate::number::plain;
use crate::outcome::{AdviceOutcome, JumpGrid, LargestStep, MethodSteps, Rule, StepRun};

/// An order below this is no ground to say which step would do.
const LEAST_ORDER: f64 = 0.3;

/// What the recurrence of a method says of the step.
#[derive(Clone, Copy, Debug)]
pub struct Computed<'a> {
    /// The method at its largest step.
    pub method: &'a MethodSteps,
    /// Jumps of the inputs.
    pub jumps: &'a JumpGrid,
}

/// The step that keeps the limit, from a run at a step and the order seen: two digits,
/// rounded down, a tenth left for the error to be not quite as regular as its order.
///
/// # Formula
/// `0.9 h u^(-1/p)`, `h` the step that used the share `u` of the limit, `p` the order.
///
/// # Units
/// That of the step.
pub fn measured_step(step: f64, limit_used: f64, order: f64) -> Option<f64> {
    if order <= LEAST_ORDER || limit_used <= 0.0 || !limit_used.is_finite() {
        return None;
    }
    rounded_down(0.9 * step * limit_used.powf(-1.0 / order))
}

/// Two digits, rounded down.
pub(super) fn rounded_down(value: f64) -> Option<f64> {
    to_digits(value, 2)
}

fn to_digits(value: f64, count: i32) -> Option<f64> {
    if value <= 0.0 || !value.is_finite() {
        return None;
    }
    let last = value.log10().floor() - f64::from(count - 1);
    // What is a whole number of units up to rounding is that number.
    let digits = (value / 10f64.powf(last) * (1.0 + 1e-12)).floor();
    format!("{digits}e{last}").parse().ok()
}

/// What is known without the method.
#[derive(Clone, Copy, Debug)]
pub struct Asked<'a> {
    /// The order seen, and the step that follows from it.
    pub measured: Option<(f64, f64)>,
    /// True where inputs jump within the window.
    pub jumps: bool,
    /// The step of the result, where it breaks its limit.
    pub failing: Option<f64>,
    /// True where something else than jumps is likely to be the cause.
    pub explained: bool,
    /// The unit of time of the case.
    pub time_unit: &'a str,
}

/// Advice from both, the measured step first; `None` where nothing can be told.
pub fn advice(asked: &Asked, computed: Option<Computed>) -> Option<AdviceOutcome> {
    let Asked {
        measured,
        failing,
        explained,
        time_unit,
        ..
    } = *asked;
    let mut parts = Vec::new();
    if let Some((order, step)) = measured {
        let jumps = if asked.jumps {
            " where steps meet the jumps"
        } else {
            ""
        };
        parts.push(format!(
            "at the order {order:.1} seen, a step of {} {time_unit} would keep the limit{jumps}",
            plain(step)
        ));
    }
    let mut largest_step = measured.map(|(_, step)| step);
    let mut ruled_by = measured.map(|_| Rule::Accuracy);
    if let Some(computed) = computed {
        parts.push(of_method(computed.method, time_unit));
        parts.extend(of_jumps(&computed, time_unit));
        let largest = &computed.method.largest;
        parts.extend(failing.and_then(|taken| not_the_step(&computed, taken, explained)));
        let stable = largest.approx_stable.filter(|&stable| stable > 0.0);
        if largest_step.is_none() {
            let on_jumps = computed.method.on_jumps.as_ref();
            let hits = on_jumps.and_then(|on| on.after.as_ref());
            let kept = largest.kept.as_ref().or(hits);
            largest_step = kept.map(|run| run.step);
            ruled_by = largest.ruled_by.filter(|_| kept.is_some());
        }
        if let (Some(stable), Some(step)) = (stable, largest_step)
            && step > stable
        {
            largest_step = rounded_down(stable);
            ruled_by = Some(Rule::Stability);
        }
    }
    if parts.is_empty() {
        return None;
    }
    Some(AdviceOutcome {
        largest_step,
        ruled_by,
        text: parts.join("; "),
    })
}

fn of_method(method: &MethodSteps, time_unit: &str) -> String {
    let LargestStep {
        kept,
        most_steps,
        approx_stable,
        ruled_by,
    } = &method.largest;
    let name = &method.name;
    let stable = match approx_stable {
        None => "stable at any step".to_owned(),
        Some(0.0) => "stable at no step".to_owned(),
        Some(stable) => format!("stable up to {} {time_unit}", few(*stable)),
    };
    // It keeps the limit only because the window ends before it has run away.
    let too_long = |stable: &f64| kept.as_ref().is_some_and(|kept| kept.step > *stable);
    if let Some(stable) = approx_stable.filter(|stable| *stable > 0.0 && too_long(stable)) {
        let few = few(stable);
        return format!("{name} by itself: up to {few} {time_unit} (stability rules)");
    }
    match kept {
        Some(kept) => {
            let rule = match ruled_by {
                Some(Rule::Accuracy) => "accuracy rules, ",
                Some(Rule::Stability) => "stability rules, ",
                Some(Rule::Neither) => "as few steps as a run may have, ",
                None => "",
            };
            let few = few(kept.step);
            format!("{name} by itself: up to {few} {time_unit} ({rule}{stable})")
        }
        None => {
            format!("{name} by itself: not even in {most_steps} steps over the window ({stable})")
        }
    }
}

/// Jumps between the steps, and steps that would hit them.
fn of_jumps(computed: &Computed, time_unit: &str) -> Option<String> {
    let (method, jumps) = (computed.method, computed.jumps);
    let missed = method.jumps_missed > 0 || method.largest.kept.is_none();
    if jumps.times.is_empty() || !missed {
        return None;
    }
    let some: Vec<String> = jumps.times.iter().take(3).map(|&t| plain(t)).collect();
    let more = if jumps.times.len() > 3 { ", ..." } else { "" };
    let times = format!("the jumps at t = {}{more} {time_unit}", some.join(", "));
    let Some(common) = jumps.common_with_end.or(jumps.common) else {
        return Some(format!("no one step meets {times}"));
    };
    let steps = format!(
        "with steps of {} {time_unit} / n, which meet {times}",
        few(common)
    );
    let on_jumps = method.on_jumps.as_ref();
    let step = |run: Option<&StepRun>| run.map(|run| run.step);
    let after = step(on_jumps.and_then(|on| on.after.as_ref()));
    let own = step(on_jumps.and_then(|on| on.own.as_ref()));
    let within = "if each step sees the input within it";
    Some(match (after, own) {
        (Some(after), Some(own)) if own > 1.05 * after => format!(
            "{steps}: up to {} {time_unit}, or {} {time_unit} {within}",
            few(after),
            few(own)
        ),
        (Some(after), _) => format!("{steps}: up to {} {time_unit}", few(after)),
        (None, Some(own)) => format!("{steps}: up to {} {time_unit} {within}", few(own)),
        (None, None) => format!("{steps}: none either"),
    })
}

/// Where a run fails at a step with which its method would keep the limit.
fn not_the_step(computed: &Computed, taken: f64, explained: bool) -> Option<String> {
    let kept = computed.method.largest.kept.as_ref();
    let stable = computed.method.largest.approx_stable;
    if stable.is_some_and(|stable| taken > stable) {
        return None;
    }
    if kept.is_some_and(|kept| taken <= kept.step) {
        return Some("the step is not what fails here".to_owned());
    }
    let own = computed.method.on_jumps.as_ref()?.own.as_ref();
    let own = own.filter(|_| !explained)?;
    let count = computed.jumps.common_with_end? / taken;
    let meets = (count - count.round()).abs() <= 1e-6 * count && count >= 0.5;
    (meets && taken <= own.step).then(|| {
        "the step would do if each step saw the input within it: look at how jumps are read"
            .to_owned()
    })
}

/// A step in a sentence: as it is where that is short, else three digits, rounded down.
fn few(value: f64) -> String {
    let full = plain(value);
    if full.len() <= 8 {
        return full;
    }
    to_digits(value, 3).map_or(full, plain)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::outcome::OnJumps;

    #[test]
    fn two_digits_down() {
        assert_eq!(rounded_down(0.1299), Some(0.12));
        assert_eq!(rounded_down(0.9 * 50.0), Some(45.0));
        assert_eq!(rounded_down(3e-7), Some(3e-7));
        assert_eq!(rounded_down(0.0), None);
        // A quarter of the step for sixteen times the limit at the second order.
        assert_eq!(measured_step(1.0, 16.0, 2.0), Some(0.22));
        assert_eq!(measured_step(1.0, 0.25, 2.0), Some(1.8));
        assert_eq!(measured_step(1.0, 2.0, 0.2), None);
    }

    #[test]
    fn stability_rules_where_it_is_shorter() {
        let method = MethodSteps {
            name: "forward Euler".to_owned(),
            order: 1,
            start_values: 1,
            largest: LargestStep {
                kept: None,
                most_steps: 1000,
                approx_stable: Some(0.5),
                ruled_by: Some(Rule::Accuracy),
            },
            ladder: Vec::new(),
            jumps_missed: 0,
            on_jumps: None,
        };
        let computed = Computed {
            method: &method,
            jumps: &JumpGrid::default(),
        };
        let asked = Asked {
            measured: Some((1.0, 2.0)),
            jumps: false,
            failing: None,
            explained: false,
            time_unit: "s",
        };
        let advice = advice(&asked, Some(computed)).unwrap();
        assert_eq!(advice.largest_step, Some(0.5));
        assert_eq!(advice.ruled_by, Some(Rule::Stability));
        assert_eq!(
            advice.text,
            "at the order 1.0 seen, a step of 2 s would keep the limit; forward Euler by itself: not \
             even in 1000 steps over the window (stable up to 0.5 s)"
        );
    }

    /// A run at steps that meet the jumps fails, although the method would keep the limit
    /// there if its last stage did not see the new value too early.
    #[test]
    fn jumps_that_are_read_too_early() {
        let run = |step: f64| {
            Some(StepRun {
                step,
                steps: 1,
                stable: true,
                channels: Vec::new(),
            })
        };
        let method = MethodSteps {
            name: "Heun".to_owned(),
            order: 2,
            start_values: 1,
            largest: LargestStep {
                kept: run(0.001),
                most_steps: 1000,
                approx_stable: None,
                ruled_by: Some(Rule::Accuracy),
            },
            ladder: Vec::new(),
            jumps_missed: 1,
            on_jumps: Some(OnJumps {
                after: run(0.002),
                own: run(0.25),
            }),
        };
        let jumps = JumpGrid {
            times: vec![1.0, 3.0],
            common: Some(1.0),
            common_with_end: Some(1.0),
        };
        let computed = Computed {
            method: &method,
            jumps: &jumps,
        };
        let text = |failing: Option<f64>| {
            let asked = Asked {
                measured: None,
                jumps: true,
                failing,
                explained: false,
                time_unit: "s",
            };
            advice(&asked, Some(computed)).unwrap().text
        };
        let all = "Heun by itself: up to 0.001 s (accuracy rules, stable at any step); with steps of \
                   1 s / n, which meet the jumps at t = 1, 3 s: up to 0.002 s, or 0.25 s if each \
                   step sees the input within it";
        assert_eq!(text(None), all);
        assert_eq!(text(Some(0.3)), all);
        assert_eq!(
            text(Some(0.1)),
            format!(
                "{all}; the step would do if each step saw the input within it: look at how jumps \
                 are read"
            )
        );
        assert_eq!(
            text(Some(0.001)),
            format!("{all}; the step is not what fails here")
        );
    }
}

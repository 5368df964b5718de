//! The factor of a step as it is measured from rows, against the published stability
//! function of the method that wrote them, and the order that it shows.

use crate::writer::{Run, Start, record};
use nalgebra::Complex;
use stepgauge::Library;
use stepgauge::exact::approx_time_scales;
use stepgauge::method::{
    Coefficients, Growth, Likeness, Linear, METHODS, Method, Unmeasured, find, growth, likeness,
    roots,
};

/// A lone state that decays, and two states with two real modes.
const SCALAR: &str = "thermal/cooling-body";
const PAIR: &str = "control/dc-motor";
/// Two states that turn about each other while they decay.
const TURNING: &str = "electrical/rlc-underdamped";

struct Measured {
    growth: Vec<Growth>,
    steps: u64,
}

/// Runs a method with rows at `z_max` over the fastest mode and measures.
fn measure(
    case: &str,
    method: &Method,
    z_max: f64,
    steps: u64,
    digits: usize,
) -> Result<Measured, Unmeasured> {
    let case = Library::new().load(case, &Default::default()).unwrap();
    let linear = Linear::new(&case);
    let scales = approx_time_scales(&case);
    let turn = scales
        .period
        .map(|period| period / (2.0 * std::f64::consts::PI));
    let fast = scales
        .time_constant
        .unwrap_or(f64::INFINITY)
        .min(turn.unwrap_or(f64::INFINITY));
    let spacing = fast * z_max * steps as f64;
    let run = Run {
        start: Start::Exact,
        ..Run::new(&case, method, spacing, steps, 40)
    };
    let (times, states) = run.states().unwrap();
    let record = record(&case, &times, &states, spacing, digits);
    growth(&linear, &record, steps).map(|growth| Measured { growth, steps })
}

/// The factor as the coefficients have it: the root that follows the solution.
fn published(coefficients: &Coefficients, z: Complex<f64>, steps: u64) -> Complex<f64> {
    let step = z / steps as f64;
    let near = |root: &Complex<f64>| (root - step.exp()).norm();
    let all = roots(coefficients, step).into_iter();
    let best = all.min_by(|a, b| near(a).total_cmp(&near(b))).unwrap();
    best.powu(steps as u32)
}

fn one_step() -> impl Iterator<Item = (&'static Method, Coefficients)> {
    let all = METHODS.iter().map(|m| (m, m.schemes[0].coefficients()));
    all.filter(|(_, c)| {
        matches!(
            c,
            Coefficients::Stages(_) | Coefficients::Exponential { by_state: false }
        )
    })
}

#[test]
fn the_factor_is_the_stability_function_of_the_method() {
    let mut count = 0;
    for (method, coefficients) in one_step() {
        for case in [SCALAR, PAIR, TURNING] {
            for (z, steps) in [(0.5, 1), (0.1, 1), (0.1, 5), (1.5, 1)] {
                for digits in [17, 6] {
                    let what = format!("{} {case} {z} x{steps} {digits}", method.name);
                    let Ok(found) = measure(case, method, z, steps, digits) else {
                        panic!("{what}: nothing");
                    };
                    for one in &found.growth {
                        let wanted = published(&coefficients, one.z, steps);
                        let aside = Complex::new(one.z_doubt, 0.0);
                        let moved = published(&coefficients, one.z + aside, steps) - wanted;
                        let off = (one.factor - wanted).norm();
                        let allowed = one.doubt + 2.0 * moved.norm() + 1e-15;
                        assert!(off <= allowed, "{what}: {off:e} {allowed:e} {one:?}");
                        // A bound that would hold for anything says nothing.
                        let most = match (digits, case == SCALAR) {
                            (17, _) => 1e-9,
                            (_, true) => 1e-4,
                            // A mode that hardly stands clear is known to a fifth.
                            (_, false) => 0.25,
                        };
                        assert!(one.doubt <= most, "{what}: {one:?}");
                        count += 1;
                    }
                }
            }
        }
    }
    assert!(count > 600, "{count}");
}

/// The differences from `exp` are seen down to the digits, no further.
#[test]
fn the_count_of_coefficients_is_one_more_than_the_order() {
    for (method, coefficients) in one_step() {
        for case in [SCALAR, PAIR, TURNING] {
            for steps in [1, 4] {
                let mut factors = Vec::new();
                for z in [0.8, 0.4, 0.2, 0.1] {
                    let found = measure(case, method, z, steps, 17).unwrap();
                    factors.extend(found.growth.iter().map(|&one| (one, found.steps)));
                }
                let wanted = match coefficients {
                    Coefficients::Exponential { .. } => Likeness::Exact,
                    _ => Likeness::Coefficients(linear_order(&coefficients) + 1),
                };
                let found = likeness(&factors);
                assert_eq!(found, wanted, "{} {case} x{steps}", method.name);
            }
        }
    }
}

/// The order on linear problems: coefficients that the series of the factor shares.
fn linear_order(coefficients: &Coefficients) -> u32 {
    let Coefficients::Stages(stages) = coefficients else {
        panic!()
    };
    let series = stepgauge::method::Rational::new(stages).series(12);
    let mut term = 1.0;
    for (k, coefficient) in series.iter().enumerate() {
        if k > 0 {
            term /= k as f64;
        }
        if (coefficient.to_f64() - term).abs() > 1e-12 {
            return k as u32 - 1;
        }
    }
    panic!("a whole series")
}

/// Several steps back: once the start has died away there is one factor.
#[test]
fn several_steps_show_their_order_too() {
    for (name, order) in [("BDF 2", 2), ("Adams-Bashforth 2", 2), ("BDF 3", 3)] {
        let method = find(name).unwrap();
        let mut factors = Vec::new();
        for z in [0.2, 0.1, 0.05] {
            if let Ok(found) = measure(SCALAR, method, z, 1, 17) {
                let coefficients = method.schemes[0].coefficients();
                for one in &found.growth {
                    let off = (one.factor - published(&coefficients, one.z, 1)).norm();
                    assert!(off <= one.doubt + 1e-15, "{name} {z}: {off:e} {one:?}");
                }
                factors.extend(found.growth.iter().map(|&one| (one, 1)));
            }
        }
        assert_eq!(
            likeness(&factors),
            Likeness::Coefficients(order + 1),
            "{name}"
        );
    }
}

/// Few digits hide the order, and nothing is made up in its place.
#[test]
fn few_digits_are_no_order() {
    for (name, digits) in [("Gauss 6", 5), ("classical RK4", 4), ("Radau IIA 5", 4)] {
        let method = find(name).unwrap();
        let mut factors = Vec::new();
        for z in [0.2, 0.1, 0.05] {
            let found = measure(SCALAR, method, z, 1, digits).unwrap();
            factors.extend(found.growth.iter().map(|&one| (one, 1)));
        }
        assert_eq!(likeness(&factors), Likeness::Unseen, "{name}");
    }
}

#[test]
fn what_has_no_factor_has_none() {
    let euler = find("forward Euler").unwrap();
    // One Jordan block; an input that moves.
    assert_eq!(
        measure("stress/jordan-4", euler, 0.1, 1, 17).err(),
        Some(Unmeasured::Modes)
    );
    let driven = measure("electrical/rc-sine", euler, 0.1, 1, 17);
    assert_eq!(driven.err(), Some(Unmeasured::Inputs));
    // States moved one after the other are not moved mode by mode.
    let semi = find("semi-implicit Euler").unwrap();
    let found = measure(TURNING, semi, 0.3, 1, 17);
    assert_eq!(found.err(), Some(Unmeasured::Rows));
}

//! Faults planted into trajectories, alone and on top of honest Heun and RK4 runs: the right
//! kind is named with the right number, and nothing is named where nothing is wrong.
//!
//! The trajectories come from `writer.rs`, which steps the rates of a model that a fault was
//! put into; no expected text comes from the library.

use nalgebra::DVector;
use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::case::{Case, Library};
use stepgauge::method::{Linear, Signal, find};
use stepgauge::outcome::Audited;
use stepgauge::submission::{Claims, LimitStated, LimitsStated, Role, Run, Setting, Submission};

use crate::writer::one_step;

/// What the trajectory is, beside its fault.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Base {
    Exact,
    Method(&'static str),
}

const BASES: [Base; 3] = [
    Base::Exact,
    Base::Method("Heun"),
    Base::Method("classical RK4"),
];
const ROWS: usize = 241;

/// A trajectory before it is written.
#[derive(Clone)]
pub struct Track {
    pub times: Vec<f64>,
    pub rows: Vec<Vec<f64>>,
    pub spacing: f64,
}

fn load(name: &str) -> Case {
    Library::new().load(name, &Default::default()).unwrap()
}

/// Runs a model, which may hold a fault, in one of the ways.
pub fn track(linear: &Linear, base: Base, spacing: f64, rows: usize) -> Track {
    let (method, steps) = match base {
        Base::Exact => ("Gauss 6", 24),
        Base::Method(name) => (name, 1),
    };
    let coefficients = find(method).unwrap().schemes[0].coefficients();
    let h = spacing / steps as f64;
    let from = linear.window.0;
    let mut x = DVector::from_vec(linear.start.clone());
    let mut track = Track {
        times: vec![from],
        rows: vec![linear.start.clone()],
        spacing,
    };
    for row in 1..rows {
        for step in 0..steps {
            let t = from + ((row - 1) * steps + step) as f64 * h;
            x = one_step(linear, &coefficients, t, h, &x);
        }
        track.times.push(from + row as f64 * spacing);
        track.rows.push(x.iter().copied().collect());
    }
    track
}

/// Writes the track and audits it with a limit that nothing but the truth keeps.
pub fn judge(
    case: &Case,
    track: &Track,
    base: Base,
    step: Option<f64>,
    print: &dyn Fn(f64) -> String,
) -> Audited {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("run.csv");
    let names: Vec<&str> = case
        .states
        .iter()
        .map(|state| state.name.as_str())
        .collect();
    let mut text = format!("t,{}\n", names.join(","));
    for (time, row) in track.times.iter().zip(&track.rows) {
        let row: Vec<String> = row.iter().map(|x| print(*x)).collect();
        text += &format!("{time:?},{}\n", row.join(","));
    }
    std::fs::write(&path, text).unwrap();
    let limit = LimitStated {
        absolute: Some(0.0),
        relative: Some(1e-13),
        of_peak: Some(true),
    };
    let submission = Submission {
        case: Some(case.name.clone()),
        claims: Claims {
            method: match base {
                Base::Exact => None,
                Base::Method(name) => Some(name.to_owned()),
            },
            order: None,
        },
        limits: LimitsStated {
            general: limit,
            ..LimitsStated::default()
        },
        runs: vec![Run {
            file: "run.csv".to_owned(),
            path,
            setting: step.map_or(Setting::Unstated, Setting::Step),
            role: Some(Role::Result),
            cost: None,
            text: None,
        }],
        ..Submission::default()
    };
    let plan = Plan {
        library: Library::new(),
        submissions: vec![Planned {
            name: "planted".to_owned(),
            submission,
            file: None,
            reviewed: Default::default(),
        }],
        unreadable: Vec::new(),
        threads: 1,
        traced: false,
        part: None,
    };
    let outcome = audit(&plan);
    assert!(outcome.not_audited.is_empty(), "{:?}", outcome.not_audited);
    outcome.submissions.into_iter().next().unwrap()
}

fn in_full(x: f64) -> String {
    format!("{x:?}")
}

/// A planted fault with what should be said of it.
struct Plant {
    kind: &'static str,
    case: &'static str,
    base: Base,
    number: Option<f64>,
    audited: Audited,
}

fn spacing_of(linear: &Linear) -> f64 {
    (linear.window.1 - linear.window.0) / (ROWS - 1) as f64
}

fn later(signal: &Signal, by: f64) -> Signal {
    match signal {
        Signal::Held(before, edges) => {
            Signal::Held(*before, edges.iter().map(|(t, v)| (t + by, *v)).collect())
        }
        Signal::Pulses(a, first, c, d, e) => Signal::Pulses(*a, first + by, *c, *d, *e),
        Signal::Lines(knots) => Signal::Lines(knots.iter().map(|(t, v)| (t + by, *v)).collect()),
        Signal::Ramp(slope, from) => Signal::Ramp(*slope, from + by),
        Signal::Sine(a, w, phase) => Signal::Sine(*a, *w, phase - w * by),
        Signal::Exponential(a, r) => Signal::Exponential(a * (-r * by).exp(), *r),
        Signal::Polynomial(_) => panic!("not planted"),
    }
}

const SMOOTH: [&str; 4] = [
    "electrical/rc-sine",
    "mechanical/base-excitation",
    "kinetics/two-compartments",
    "electrical/rlc-underdamped",
];
const DRIVEN: [&str; 4] = [
    "electrical/rc-sine",
    "mechanical/base-excitation",
    "thermal/cold-room-defrost",
    "membrane/leaky-sine",
];

/// Faults of the model: a change of the linear system, with its number.
fn model_faults() -> Vec<Plant> {
    let mut plants = Vec::new();
    let mut plant = |kind: &'static str,
                     name: &'static str,
                     change: &dyn Fn(&mut Linear, f64) -> Option<f64>| {
        for base in BASES {
            let case = load(name);
            let mut linear = Linear::new(&case);
            let spacing = spacing_of(&linear);
            let number = change(&mut linear, spacing);
            let track = track(&linear, base, spacing, ROWS);
            let audited = judge(&case, &track, base, Some(spacing), &in_full);
            plants.push(Plant {
                kind,
                case: name,
                base,
                number,
                audited,
            });
        }
    };
    for name in DRIVEN {
        plant("input-late", name, &|linear, h| {
            linear.signals[0] = later(&linear.signals[0], h);
            Some(h)
        });
        plant("input-early", name, &|linear, h| {
            linear.signals[0] = later(&linear.signals[0], -2.0 * h);
            Some(2.0 * h)
        });
        plant("input-missing", name, &|linear, _| {
            linear.signals[0] = Signal::Held(0.0, Vec::new());
            None
        });
    }
    for name in SMOOTH {
        plant("start-value", name, &|linear, _| {
            linear.start[0] += 0.37 + 0.1 * linear.start[0].abs();
            Some(linear.start[0])
        });
        plant("rate-scaled", name, &|linear, _| {
            scale(linear, 1.1);
            Some(1.1)
        });
        plant("rate-scaled", name, &|linear, _| {
            scale(linear, 1.0 / 60.0);
            Some(1.0 / 60.0)
        });
    }
    plants
}

fn scale(linear: &mut Linear, factor: f64) {
    for i in 0..linear.size() {
        for j in 0..linear.size() {
            linear.matrix[(i, j)] *= factor;
        }
        linear.drive[i].iter_mut().for_each(|d| *d *= factor);
        linear.constant[i] *= factor;
    }
}

/// Faults of what is written: a change of the track.
fn written_faults() -> Vec<Plant> {
    type Change<'c> = &'c dyn Fn(&mut Track) -> Option<f64>;
    let mut plants = Vec::new();
    let mut plant = |kind: &'static str, name: &'static str, change: Change| {
        for base in BASES {
            let case = load(name);
            let linear = Linear::new(&case);
            let mut track = track(&linear, base, spacing_of(&linear), ROWS);
            let step = track.spacing;
            let number = change(&mut track);
            let audited = judge(&case, &track, base, Some(step), &in_full);
            plants.push(Plant {
                kind,
                case: name,
                base,
                number,
                audited,
            });
        }
    };
    let each = |track: &mut Track, change: &dyn Fn(usize, &mut Vec<f64>)| {
        track
            .rows
            .iter_mut()
            .enumerate()
            .for_each(|(k, row)| change(k, row));
    };
    for name in SMOOTH {
        plant("gain", name, &|track| {
            each(track, &|_, row| row[0] *= 1.05);
            Some(1.05)
        });
        plant("unit", name, &|track| {
            each(track, &|_, row| row[0] *= 1000.0);
            Some(1000.0)
        });
        plant("sign", name, &|track| {
            each(track, &|_, row| row[0] = -row[0]);
            Some(-1.0)
        });
        plant("offset", name, &|track| {
            each(track, &|_, row| row[0] += 273.15);
            Some(273.15)
        });
        plant("rows-shifted", name, &|track| {
            let first = track.rows[0].clone();
            track.rows.insert(0, first);
            track.rows.pop();
            Some(-1.0)
        });
        plant("clipped", name, &|track| {
            let largest = track.rows.iter().map(|row| row[0]).fold(f64::MIN, f64::max);
            let smallest = track.rows.iter().map(|row| row[0]).fold(f64::MAX, f64::min);
            let limit = smallest + 0.7 * (largest - smallest);
            each(track, &|_, row| row[0] = row[0].min(limit));
            Some(limit)
        });
        plant("frozen", name, &|track| {
            let (from, held) = (track.times[60], track.rows[60].clone());
            each(track, &|k, row| {
                if k > 60 {
                    row.clone_from(&held);
                }
            });
            Some(from)
        });
        plant("noise", name, &|track| {
            let peak = track
                .rows
                .iter()
                .flatten()
                .fold(0.0f64, |m, x| m.max(x.abs()));
            let mut state = 0x9e37_79b9_u64;
            let mut normal = || {
                let sum: f64 = (0..12)
                    .map(|_| {
                        state = state
                            .wrapping_mul(6_364_136_223_846_793_005)
                            .wrapping_add(1_442_695_040_888_963_407);
                        (state >> 11) as f64 / (1u64 << 53) as f64
                    })
                    .sum();
                sum - 6.0
            };
            let size = 0.05 * peak;
            for row in &mut track.rows {
                row[0] += size * normal();
            }
            Some(size)
        });
        plant("interpolated-rows", name, &|track| {
            let rows = track.rows.clone();
            for k in 0..rows.len() {
                let (before, share) = (k / 4 * 4, (k % 4) as f64 / 4.0);
                let after = (before + 4).min(rows.len() - 1);
                track.rows[k] = rows[before]
                    .iter()
                    .zip(&rows[after])
                    .map(|(a, b)| a + share * (b - a))
                    .collect();
            }
            Some(4.0 * track.spacing)
        });
        plant("single-precision", name, &|track| {
            each(track, &|_, row| {
                row.iter_mut().for_each(|x| *x = f64::from(*x as f32))
            });
            None
        });
        plant("coarse-print", name, &|track| {
            let peak = track
                .rows
                .iter()
                .flatten()
                .fold(0.0f64, |m, x| m.max(x.abs()));
            let unit = 10f64.powf((peak * 1e-4).log10().floor());
            each(track, &|_, row| {
                row.iter_mut().for_each(|x| *x = (*x / unit).round() * unit)
            });
            Some(unit)
        });
    }
    for name in [
        "kinetics/two-compartments",
        "thermal/cold-room-defrost",
        "mechanical/base-excitation",
    ] {
        plant("channels-swapped", name, &|track| {
            each(track, &|_, row| row.swap(0, 1));
            None
        });
    }
    plants
}

/// Steps of a method whose model changes from step to step: inputs held.
fn held_track(linear: &Linear, method: &str, spacing: f64, rows: usize) -> Track {
    let coefficients = find(method).unwrap().schemes[0].coefficients();
    let from = linear.window.0;
    let mut x = DVector::from_vec(linear.start.clone());
    let mut track = Track {
        times: vec![from],
        rows: vec![linear.start.clone()],
        spacing,
    };
    for row in 1..rows {
        let t = from + (row - 1) as f64 * spacing;
        let mut held = linear.clone();
        for signal in &mut held.signals {
            let value = signal.at(t, stepgauge::method::Side::After, 0.0);
            *signal = Signal::Held(value, Vec::new());
        }
        x = one_step(&held, &coefficients, t, spacing, &x);
        track.times.push(from + row as f64 * spacing);
        track.rows.push(x.iter().copied().collect());
    }
    track
}

/// Faults of the method and its step.
fn method_faults() -> Vec<Plant> {
    let mut plants = Vec::new();
    let mut add =
        |kind, name: &'static str, claim: &'static str, step: f64, number, track: &Track| {
            let base = Base::Method(claim);
            let audited = judge(&load(name), track, base, Some(step), &in_full);
            plants.push(Plant {
                kind,
                case: name,
                base,
                number,
                audited,
            });
        };
    let linear = |name: &str| Linear::new(&load(name));
    for name in [
        "electrical/rc-sine",
        "mechanical/base-excitation",
        "membrane/leaky-sine",
    ] {
        for method in ["Heun", "classical RK4"] {
            let model = linear(name);
            let h = spacing_of(&model);
            add(
                "input-held",
                name,
                method,
                h,
                Some(h),
                &held_track(&model, method, h, ROWS),
            );
        }
    }
    // Steps that do not divide the times of the jumps, and steps that do.
    for name in [
        "thermal/cold-room-defrost",
        "kinetics/infusion",
        "electrical/rc-pulse",
    ] {
        for method in ["Heun", "classical RK4"] {
            let model = linear(name);
            let span = model.window.1 - model.window.0;
            let jump = model.next_jump(model.window.0 + 1e-9 * span).unwrap();
            let first = jump - model.window.0;
            let rows = (200..400).find(|&n| {
                let count = first / (span / n as f64);
                (count - count.round()).abs() > 0.2
            });
            let h = span / rows.unwrap() as f64;
            let coarse = track(&model, Base::Method(method), h, rows.unwrap() + 1);
            add("jump-off-grid", name, method, h, Some(jump), &coarse);
            let rows = (200..4000).find(|&n| {
                let mut next = model.next_jump(model.window.0 + 1e-9 * span);
                let mut all = true;
                while let Some(jump) = next.filter(|&j| j < model.window.1) {
                    let count = (jump - model.window.0) / (span / n as f64);
                    all &= (count - count.round()).abs() < 1e-9;
                    next = model.next_jump(jump + 1e-9 * span);
                }
                all
            });
            let h = span / rows.unwrap() as f64;
            let on_grid = track(&model, Base::Method(method), h, rows.unwrap() + 1);
            add("jump-at-stage", name, method, h, Some(jump), &on_grid);
        }
    }
    for (name, method) in [
        ("kinetics/two-compartments", "classical RK4"),
        ("electrical/rlc-overdamped", "Heun"),
        ("thermal/wall-3-node", "forward Euler"),
    ] {
        let model = linear(name);
        let fast = stepgauge::exact::approx_time_scales(&load(name))
            .time_constant
            .unwrap();
        let limit = if method == "classical RK4" {
            2.785
        } else {
            2.0
        };
        let span = model.window.1 - model.window.0;
        let rows = (span / (1.1 * limit * fast)).floor().max(8.0);
        let h = span / rows;
        add(
            "unstable-step",
            name,
            method,
            h,
            None,
            &track(&model, Base::Method(method), h, rows as usize + 1),
        );
    }
    for (name, method) in [
        ("stress/stiff-1e4", "trapezoidal"),
        ("stress/stiff-1e6", "implicit midpoint"),
        ("electrical/rlc-overdamped", "trapezoidal"),
    ] {
        let model = linear(name);
        let fast = stepgauge::exact::approx_time_scales(&load(name))
            .time_constant
            .unwrap();
        let span = model.window.1 - model.window.0;
        let h = (span / 30.0).min(40.0 * fast);
        let rows = (span / h).ceil().min(400.0);
        let h = if rows < 400.0 { span / rows } else { h };
        if (span / h).round() > 5000.0 {
            continue;
        }
        let rows = (span / h).round() as usize + 1;
        add(
            "ringing",
            name,
            method,
            h,
            None,
            &track(&model, Base::Method(method), h, rows),
        );
    }
    for (name, method) in [
        ("electrical/rc-sine", "Heun"),
        ("mechanical/base-excitation", "classical RK4"),
        ("kinetics/two-compartments", "backward Euler"),
    ] {
        let model = linear(name);
        let h = spacing_of(&model);
        let coarse = track(&model, Base::Method(method), h, ROWS);
        add("coarser-step", name, method, 0.5 * h, Some(h), &coarse);
        add("coarser-step", name, method, 0.25 * h, Some(h), &coarse);
        add("other-method", name, "trapezoidal", h, Some(h), &coarse);
    }
    for (name, method) in [
        ("electrical/rc-sine", "Adams-Bashforth 4"),
        ("mechanical/base-excitation", "BDF 3"),
        ("electrical/rlc-underdamped", "Adams-Bashforth 3"),
    ] {
        let case = load(name);
        let model = linear(name);
        let h = spacing_of(&model);
        let run = crate::writer::Run {
            start: crate::writer::Start::Euler,
            ..crate::writer::Run::new(&case, find(method).unwrap(), h, 1, ROWS)
        };
        let (times, rows) = run.states().unwrap();
        add(
            "low-order-start",
            name,
            method,
            h,
            None,
            &Track {
                times,
                rows,
                spacing: h,
            },
        );
    }
    for name in [
        "electrical/rc-sine",
        "mechanical/base-excitation",
        "kinetics/oral",
    ] {
        let model = linear(name);
        let h = spacing_of(&model);
        for method in ["Heun", "classical RK4"] {
            let mut drifted = track(&model, Base::Method(method), h, ROWS);
            let mut time = model.window.0 as f32;
            for stamp in &mut drifted.times {
                *stamp = f64::from(time);
                time += h as f32;
            }
            let even = |k: usize| model.window.0 + k as f64 * h;
            let worst = (0..ROWS)
                .map(|k| (drifted.times[k] - even(k)).abs())
                .fold(0.0, f64::max);
            *drifted.times.last_mut().unwrap() = drifted.times[ROWS - 1].max(0.0);
            add(
                "single-precision-time",
                name,
                method,
                h,
                Some(worst),
                &drifted,
            );
        }
    }
    plants
}

fn nearly_all_are_named(plants: &[Plant]) {
    let (named, all) = check(plants);
    println!("{named} of {all} named");
    assert!(named as f64 >= 0.95 * all as f64, "{named} of {all}");
}

#[test]
fn faults_of_the_method_are_named() {
    nearly_all_are_named(&method_faults());
}

fn check(plants: &[Plant]) -> (usize, usize) {
    let mut named = 0;
    for plant in plants {
        let causes = &plant.audited.causes;
        let right = causes.iter().find(|cause| cause.kind == plant.kind);
        let number = right.is_some_and(|cause| match (plant.number, cause.number) {
            (Some(wanted), Some(found)) => (found / wanted - 1.0).abs() <= 0.05,
            (Some(_), None) => false,
            (None, _) => true,
        });
        if number {
            named += 1;
        } else {
            let list: Vec<String> = causes
                .iter()
                .map(|c| format!("{} {:?} {}", c.kind, c.number, c.text))
                .collect();
            println!(
                "{} {} {:?} {:?}: {list:?}",
                plant.kind, plant.case, plant.base, plant.number
            );
        }
    }
    (named, plants.len())
}

#[test]
fn faults_of_the_model_are_named() {
    nearly_all_are_named(&model_faults());
}

#[test]
fn faults_of_what_is_written_are_named() {
    nearly_all_are_named(&written_faults());
}

#[test]
fn nothing_is_named_where_nothing_is_wrong() {
    let mut count = 0;
    let mut bad = Vec::new();
    for name in Library::new().names() {
        let case = load(name);
        let linear = Linear::new(&case);
        if linear.size() > 6 {
            continue;
        }
        let span = linear.window.1 - linear.window.0;
        let scales = stepgauge::exact::approx_time_scales(&case);
        let fast = scales
            .time_constant
            .unwrap_or(span)
            .min(scales.period.unwrap_or(span) / 6.0);
        let count_rows = ((span / (0.3 * fast)).ceil() as usize).clamp(40, 600);
        let spacing = span / count_rows as f64;
        for (method, claimed) in [
            ("Heun", true),
            ("classical RK4", true),
            ("forward Euler", true),
            ("trapezoidal", false),
            ("SDIRK 2", false),
            ("Dormand-Prince 5", false),
            ("backward Euler", true),
        ] {
            let base = Base::Method(method);
            let track = track(&linear, base, spacing, count_rows + 1);
            if track
                .rows
                .iter()
                .flatten()
                .any(|x| !x.is_finite() || x.abs() > 1e12)
            {
                continue;
            }
            let claim = if claimed { base } else { Base::Exact };
            let audited = judge(&case, &track, claim, Some(spacing), &in_full);
            count += 1;
            let wrong: Vec<&str> = audited
                .causes
                .iter()
                .map(|cause| cause.kind)
                // These are faults of the step and the method that a coarse run really has.
                .filter(|kind| {
                    !["unstable-step", "ringing", "jump-off-grid", "jump-at-stage"].contains(kind)
                })
                .collect();
            if !wrong.is_empty() {
                bad.push(format!(
                    "{name} {method}: {wrong:?} {}",
                    audited.causes[0].text
                ));
            }
        }
    }
    println!("{count} healthy runs");
    assert!(count >= 60 && bad.is_empty(), "{bad:#?}");
}

#[test]
fn wrong_parameters_are_named() {
    let (mut named, mut all) = (0, 0);
    for (name, parameter) in [
        ("mechanical/two-masses", "k"),
        ("electrical/rlc-underdamped", "R"),
        ("kinetics/two-compartments", "k_12"),
        ("process/tanks-interacting", "R_2"),
    ] {
        let case = load(name);
        let Some(given) = case.parameters.iter().find(|p| p.name == parameter) else {
            let known: Vec<&str> = case.parameters.iter().map(|p| p.name.as_str()).collect();
            panic!("{name} has {known:?}");
        };
        for factor in [1.07, 0.5] {
            let value = given.value.to_f64() * factor;
            let replaced = [(parameter.to_owned(), value)].into();
            let wrong = Linear::new(&Library::new().load(name, &replaced).unwrap());
            for base in BASES {
                let spacing = spacing_of(&Linear::new(&case));
                let track = track(&wrong, base, spacing, ROWS);
                let audited = judge(&case, &track, base, Some(spacing), &in_full);
                // `k` too large and `m` too small are one fault: both are named.
                let right = audited.causes.iter().any(|cause| {
                    let number = cause.number.unwrap_or(f64::NAN);
                    cause.kind == "rate-scaled" && (number / factor - 1.0).abs() <= 0.05
                });
                all += 1;
                named += usize::from(right);
                if !right {
                    let texts: Vec<&str> = audited.causes.iter().map(|c| &c.text[..]).collect();
                    println!("{name} {parameter} {factor} {base:?}: {texts:?}");
                }
            }
        }
    }
    assert!(named as f64 >= 0.95 * all as f64, "{named} of {all}");
}

use super::*;
use crate::case::{Case, Library, Replacements};

/// A one-state lag `x' = k (u - x)`, started at `start`, under one input.
fn lag(input: &str, k: f64, start: f64) -> Exact {
    trial(input, k, start).exact().unwrap()
}

fn trial(input: &str, k: f64, start: f64) -> Case {
    let text = format!(
        "title = 'lag'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
         [time]\nunit = 's'\nfrom = 1\nto = 11\n\
         [[states]]\nname = 'x'\nunit = 'V'\nstart = {start}\nrate = '{k:e}*(u - x)'\n\
         [[inputs]]\nname = 'u'\nunit = 'V'\n{input}\n\
         [[outputs]]\nname = 'y'\nunit = 'V'\nvalue = 'x - u'\n\
         [limits]\nabsolute = 1\nrelative = 0\n"
    );
    Case::parse("lag", &text, &Replacements::new()).unwrap()
}

fn close(exact: &Exact, time: f64, expected: f64) {
    let value = exact.at(time).unwrap()[0];
    let tolerance = 4.0 * f64::EPSILON * expected.abs().max(1e-3);
    assert!(
        (value.value - expected).abs() <= tolerance,
        "t = {time}: {value:?}, not {expected}"
    );
}

#[test]
fn every_input_shape_against_its_formula() {
    // With k = 2: x(t) of x' = 2 (u - x), x(1) = 0.5, by the usual integrals.
    let e = |t: f64| (-2.0 * (t - 1.0)).exp();
    close(
        &lag("shape = 'constant'\nvalue = 3", 2.0, 0.5),
        2.5,
        3.0 - 2.5 * e(2.5),
    );
    let step = lag("shape = 'step'\nheight = 3\nat = 2", 2.0, 0.5);
    close(&step, 1.5, 0.5 * e(1.5));
    close(&step, 4.0, 0.5 * e(4.0) + 3.0 * (1.0 - (-4.0f64).exp()));
    let early = lag("shape = 'step'\nheight = 3\nat = -5", 2.0, 0.5);
    close(&early, 2.5, 3.0 - 2.5 * e(2.5));
    let ramp = lag("shape = 'ramp'\nslope = 4\nfrom = 2", 2.0, 0.5);
    close(
        &ramp,
        5.0,
        0.5 * e(5.0) + 4.0 * (3.0 - 0.5 * (1.0 - (-6.0f64).exp())),
    );
    let earlier = lag("shape = 'ramp'\nslope = 4\nfrom = 0", 2.0, 0.5);
    close(&earlier, 3.0, (0.5 - 4.0 + 2.0) * e(3.0) + 4.0 * 3.0 - 2.0);
    let pulse = lag(
        "shape = 'pulse'\nheight = 3\nfrom = 2\nwidth = 0.5",
        2.0,
        0.0,
    );
    close(&pulse, 4.0, 3.0 * (1.0 - (-1.0f64).exp()) * (-3.0f64).exp());
    let train = lag(
        "shape = 'pulse-train'\nheight = 3\nfrom = 2\nwidth = 0.5\nperiod = 1.5\ncount = 2",
        2.0,
        0.0,
    );
    close(
        &train,
        5.0,
        3.0 * (1.0 - (-1.0f64).exp()) * ((-5.0f64).exp() + (-2.0f64).exp()),
    );
    // Steady part of a sine: k/sqrt(k^2+w^2) sin(wt + phase - atan(w/k)).
    let sine = lag(
        "shape = 'sine'\namplitude = 2\nangular_frequency = 2\nphase = 0.25",
        2.0,
        0.0,
    );
    let steady = |t: f64| 2f64.sqrt() * (2.0 * t + 0.25 - std::f64::consts::FRAC_PI_4).sin();
    close(&sine, 3.0, steady(3.0) - steady(1.0) * e(3.0));
    let growth = lag("shape = 'exponential'\nscale = 3\nrate = -2", 2.0, 0.5);
    close(
        &growth,
        3.0,
        e(3.0) * (0.5 + 2.0 * 3.0 * (-2.0f64).exp() * 2.0),
    );
    // u = t^2: a particular solution is t^2 - t + 1/2.
    let square = lag("shape = 'polynomial'\ncoefficients = [0, 0, 1]", 2.0, 0.5);
    let particular = |t: f64| t * t - t + 0.5;
    close(
        &square,
        4.0,
        particular(4.0) + (0.5 - particular(1.0)) * e(4.0),
    );
    let held = lag(
        "shape = 'held-samples'\ntimes = [0, 2, 3]\nvalues = [1, 4, 2]",
        2.0,
        1.0,
    );
    close(&held, 2.0, 1.0);
    close(&held, 3.0, 4.0 - 3.0 * (-2.0f64).exp());
    let line = lag(
        "shape = 'linear-samples'\ntimes = [2, 4]\nvalues = [1, 5]",
        2.0,
        1.0,
    );
    close(&line, 2.0, 1.0);
    close(
        &line,
        4.0,
        1.0 + 2.0 * (2.0 - 0.5 * (1.0 - (-4.0f64).exp())),
    );
}

#[test]
fn at_a_jump_an_output_has_the_value_after_it() {
    let step = lag("shape = 'step'\nheight = 3\nat = 2.1", 2.0, 0.0);
    assert_eq!(step.at(2.1).unwrap()[1].value, -3.0);
    assert_eq!(step.at(2.0999).unwrap()[1].value, 0.0);
    assert_eq!(step.jumps().collect::<Vec<_>>(), [2.1]);
    assert!(step.has_feed_through());
}

#[test]
fn later_times_follow_from_earlier_values() {
    let library = Library::new();
    for name in library.names() {
        let case = library.load(name, &Replacements::new()).unwrap();
        let exact = case.exact().unwrap_or_else(|fault| panic!("{fault}"));
        let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
        // A case of its own that starts in the middle, where the first one is then.
        let middle = from + 0.375 * (to - from);
        let mut moved = case.clone();
        moved.time.from = Double::from(middle);
        moved.closed_form = None;
        let values = exact.direct(Double::from(middle)).value;
        for (state, &value) in moved.states.iter_mut().zip(&values) {
            state.start = value;
        }
        let second = moved.exact().unwrap();
        for part in [0.41, 0.777, 1.0] {
            let time = from + part * (to - from);
            let (a, b) = (exact.at(time).unwrap(), second.at(time).unwrap());
            for (i, (a, b)) in a.iter().zip(&b).enumerate() {
                // The start value was rounded to double-double: 1e-31 of the peak,
                // grown by no more than these systems grow anything.
                let tolerance = f64::EPSILON * a.value.abs() + 1e-22 * exact.peaks[i];
                assert!(
                    (a.value - b.value).abs() <= tolerance,
                    "{name} {time} {i}: {a:?} {b:?}"
                );
            }
        }
    }
}

#[test]
fn a_uniform_walk_gives_what_direct_evaluation_gives() {
    for name in [
        "mechanical/oscillator-light",
        "electrical/lc-bus-filter",
        "thermal/rod-30-node",
    ] {
        let case = Library::new().load(name, &Replacements::new()).unwrap();
        let exact = case.exact().unwrap();
        let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
        let rows = 3000;
        let mut walk = exact.walk();
        for k in 0..=rows {
            let time = Double::from(from + (to - from) * f64::from(k) / f64::from(rows));
            let values = walk.go(time).clone();
            if k % 37 != 0 {
                continue;
            }
            let direct = exact.direct(time);
            for i in 0..values.value.len() {
                let gap = (values.value[i] - direct.value[i]).abs().to_f64();
                assert!(
                    gap <= values.bound[i] + direct.bound[i],
                    "{name} row {k}: {gap:e}"
                );
                assert!(gap <= 1e-27 * exact.peaks[i], "{name} row {k}: {gap:e}");
            }
        }
    }
}

#[test]
fn a_million_rows_do_not_drift() {
    let text = "title = 'turn'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
        [time]\nunit = 's'\nfrom = 0\nto = 1000000\n\
        [[states]]\nname = 'x'\nunit = 'm'\nstart = 1\nrate = 'v'\n\
        [[states]]\nname = 'v'\nunit = 'm/s'\nstart = 0\nrate = '-x'\n\
        [limits]\nabsolute = 1\nrelative = 0\n";
    let exact = Case::parse("turn", text, &Replacements::new())
        .unwrap()
        .exact()
        .unwrap();
    let mut walk = exact.walk();
    for k in 0..=1_000_000 {
        let values = walk.go(Double::from(f64::from(k)));
        if k % 99_991 == 0 {
            let (sine, cosine) = Double::from(f64::from(k)).sin_cos();
            assert!((values.value[0] - cosine).abs().to_f64() < 1e-24, "row {k}");
            assert!((values.value[1] + sine).abs().to_f64() < 1e-24, "row {k}");
        }
    }
}

#[test]
fn superposition_of_inputs() {
    let both = |a: &str, b: &str| {
        let text = format!(
            "title = 'two'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 20\n\
             [[states]]\nname = 'x'\nunit = '1'\nstart = 0\nrate = 'v'\n\
             [[states]]\nname = 'v'\nunit = '1'\nstart = 0\nrate = '-4*x - 0.1*v + p + 2*q'\n\
             [[inputs]]\nname = 'p'\nunit = '1'\nshape = 'sine'\namplitude = {a}\nfrequency = 0.3\n\
             [[inputs]]\nname = 'q'\nunit = '1'\nshape = 'pulse-train'\nheight = {b}\nfrom = 1\nwidth = 0.4\nperiod = 1.1\n\
             [limits]\nabsolute = 1\nrelative = 0\n"
        );
        Case::parse("two", &text, &Replacements::new())
            .unwrap()
            .exact()
            .unwrap()
    };
    let (one, other, sum) = (both("3", "0"), both("0", "-5"), both("3", "-5"));
    for k in 0..200 {
        let time = Double::from(f64::from(k) * 0.097);
        let (a, b, c) = (one.direct(time), other.direct(time), sum.direct(time));
        for i in 0..2 {
            let gap = (a.value[i] + b.value[i] - c.value[i]).abs().to_f64();
            assert!(gap <= 1e-29, "{k}: {gap:e}");
        }
    }
}

#[test]
fn a_contradicting_closed_form_is_refused() {
    let text = "title = 'lag'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
        [time]\nunit = 's'\nfrom = 0\nto = 5\n\
        [[states]]\nname = 'x'\nunit = 'V'\nstart = 1\nrate = '-x'\nexact = 'exp(-1.0000001*t)'\n\
        [limits]\nabsolute = 1\nrelative = 0\n";
    let fault = Case::parse("lag", text, &Replacements::new())
        .unwrap()
        .exact()
        .unwrap_err();
    assert!(
        fault
            .text
            .contains("case `trial/lag` contradicts itself: at t = "),
        "{fault}"
    );
    let text = text.replace("1.0000001*", "");
    let exact = Case::parse("lag", &text, &Replacements::new())
        .unwrap()
        .exact()
        .unwrap();
    assert!((0.0..1e-28).contains(&exact.closed_form_gap().unwrap()));
}

/// Such a form is tried at few times, and not at the start alone.
#[test]
fn a_contradiction_is_seen_at_the_end_of_a_very_long_form() {
    let form = |more: &str| format!("exp(-t){}{more}", "+t-t".repeat(16_000));
    let text = |more: &str| {
        let state = |name: &str, form: &str| {
            format!(
                "[[states]]\nname = '{name}'\nunit = 'V'\nstart = 1\nrate = '-{name}'\nexact = '{form}'\n"
            )
        };
        let states = ["a", "b", "c"].map(|name| state(name, &form("")));
        format!(
            "title = 'lag'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 5\n{}{}[limits]\nabsolute = 1\nrelative = 0\n",
            states.concat(),
            state("d", &form(more))
        )
    };
    let exact = |more: &str| {
        let case = Case::parse("lag", &text(more), &Replacements::new()).unwrap();
        case.exact().map(|_| ()).map_err(|fault| fault.text)
    };
    assert_eq!(exact(""), Ok(()));
    let refused = exact("+1e-9*t^3").unwrap_err();
    assert!(refused.contains("the closed form of `d`"), "{refused}");
}

#[test]
fn what_is_too_much_is_refused_with_a_reason() {
    let run = |input: &str, rate: &str| {
        let text = format!(
            "title = 'lag'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 1e6\n\
             [[states]]\nname = 'x'\nunit = 'V'\nstart = 1\nrate = '{rate}'\n{input}\
             [limits]\nabsolute = 1\nrelative = 0\n"
        );
        let case = Case::parse("lag", &text, &Replacements::new()).unwrap();
        case.exact().unwrap_err().text
    };
    let train = "[[inputs]]\nname = 'u'\nunit = 'V'\nshape = 'pulse-train'\nheight = 1\nfrom = 0\nwidth = 1e-7\nperiod = 1e-6\n";
    assert!(run(train, "u - x").contains("jumps more than 100000 times"));
    assert!(run("", "-1e15*x").contains("too fast"));
    assert!(run("", "x").contains("grows beyond all numbers"));
}

#[test]
fn times_outside_the_window_are_refused() {
    let exact = lag("shape = 'constant'\nvalue = 3", 2.0, 0.5);
    assert!(
        exact
            .at(0.999)
            .unwrap_err()
            .text
            .contains("outside the window from 1 to 11")
    );
    assert!(exact.over([1.0, 12.0]).last().unwrap().is_err());
}

#[test]
fn the_second_route_looks_at_both_sides_of_a_jump() {
    // Off the even times, and off those near the start: the jump and a time on either side.
    let jumps = lag("shape = 'step'\nheight = 3\nat = 4.3210123", 2.0, 0.5);
    let steady = lag("shape = 'constant'\nvalue = 3", 2.0, 0.5);
    let times = |exact: &Exact, input: &str| exact.check(&trial(input, 2.0, 0.5)).unwrap().times;
    let with = times(&jumps, "shape = 'step'\nheight = 3\nat = 4.3210123");
    let without = times(&steady, "shape = 'constant'\nvalue = 3");
    assert_eq!(with, without + 3);
    // 481 even times, and 27 of those near the start (2^-9 to 2^-35 of the window) before the second.
    assert!(without >= 481 + 27, "{without}");
}

#[test]
fn rows_far_apart_have_no_nodes() {
    let exact = lag("shape = 'constant'\nvalue = 3", 2.0, 0.5);
    for step in [0.0, -1e-3, f64::NAN, f64::INFINITY, 1e3] {
        assert!(exact.nodes(step).is_none(), "{step}");
    }
    assert!(exact.nodes(1e-4).is_some());
}

#[test]
fn rows_that_go_back_by_a_node_have_the_values_there() {
    let exact = lag("shape = 'constant'\nvalue = 3", 2.0, 0.5);
    let nodes = exact.nodes(1e-4).unwrap();
    let mut near = exact.near(&nodes);
    let mut moved = Vec::new();
    let times = (0..2000).map(|k| 5.0 + 1e-3 * f64::from(k));
    for time in times.clone().chain(times.rev()) {
        let offset = near.place(Double::from(time), 0.0).unwrap();
        let channel = &near.channels()[0];
        channel.moved(&[offset], &mut moved);
        let found = channel.value.to_f64() + moved[0];
        // x' = 2 (3 - x) from 0.5 at 1.
        let expected = 3.0 - 2.5 * (-2.0 * (time - 1.0)).exp();
        assert!(
            (found - expected).abs() < 8.0 * f64::EPSILON,
            "{time}: {found}, not {expected}"
        );
    }
}

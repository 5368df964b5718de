//! Right files that once failed, and claims that were once believed on too little: found with
//! integrators of an attack, made here by plain loops.

use std::fmt::Write;

use crate::folder::{Folder, Ran, state, trial};

/// The jump of the input of [`of_lag`] is at this time, in steps of this length.
#[derive(Clone, Copy)]
struct Jump {
    at: f64,
    step: f64,
}

/// An audit of a lag behind a step of its input, with an output that jumps with it.
fn of_lag(jump: Jump, rows: &str, more: &[&str]) -> Ran {
    let folder = Folder::new();
    let input = format!(
        "[[inputs]]\nname = 'u'\nunit = 'm'\nshape = 'step'\nheight = 1\nat = {}\n",
        jump.at
    );
    let output = "[[outputs]]\nname = 'gap'\nunit = 'm'\nvalue = 'u - x'\n";
    let lag = trial("0", "2", &(input + &state("x", 0.0, "u - x") + output));
    folder.write("cases/lag.toml", lag);
    folder.write("run.csv", format!("t,x,gap\n{rows}"));
    let case = ["run.csv", "--case", "trial/lag", "--cases", "cases"];
    folder.audit(&[&case[..], &["--absolute", "1e-6"], more].concat())
}

/// The closed form by hand, so long after the jump.
fn lag(since: f64) -> (f64, f64) {
    if since < 0.0 {
        return (0.0, 0.0);
    }
    let gap = (-since).exp();
    (1.0 - gap, gap)
}

/// Rows of times that are summed up; the input may act late, or show itself at the jump though
/// the sum fell short of it.
fn summed(jump: Jump, late: f64, shown_after: bool) -> String {
    let (mut rows, mut time) = (String::new(), 0.0f64);
    while time < 2.0 + 0.5 * jump.step {
        let at_jump = shown_after && (time - jump.at).abs() < 1e-9;
        let (x, gap) = lag(if at_jump { 0.0 } else { time - jump.at - late });
        let _ = writeln!(rows, "{time},{x},{gap}");
        time += jump.step;
    }
    rows
}

#[test]
fn a_stamp_summed_up_short_of_a_jump_may_be_on_either_side_of_it() {
    // The sums fall short of the jumps in their last place.
    for (at, step, short) in [
        (0.5, 0.05, "0.49999999999999994"),
        (0.8, 0.1, "0.7999999999999999"),
        (1.1, 0.1, "1.0999999999999999"),
    ] {
        let jump = Jump { at, step };
        let stated = step.to_string();
        let steps = [&["--step", &stated][..], &[]];
        assert!(summed(jump, 0.0, false).contains(&format!("\n{short},0,0\n")));
        for shown_after in [false, true] {
            for more in steps {
                let ran = of_lag(jump, &summed(jump, 0.0, shown_after), more);
                assert_eq!(ran.verdict(), "pass", "{at} {more:?}: {}", ran.seen());
            }
        }
        // An input that acts a step late is seen all the same.
        for more in steps {
            let ran = of_lag(jump, &summed(jump, step, false), more);
            assert_eq!(ran.verdict(), "fail", "{at} {more:?}: {}", ran.seen());
        }
    }
    // What stands at the jump exactly is after it.
    let jump = Jump {
        at: 0.5,
        step: 0.05,
    };
    let exact = |late: f64| {
        let row = |k: u32| {
            let time = f64::from(k) / 20.0;
            let (x, gap) = lag(time - jump.at - late);
            format!("{time},{x},{gap}\n")
        };
        of_lag(jump, &(0..=40).map(row).collect::<String>(), &[])
    };
    assert_eq!(exact(0.0).verdict(), "pass");
    assert_eq!(exact(1e-9).verdict(), "fail");
}

/// Runs of `x' = -x` from one up to some time, each with the factor of a step.
fn decay(claim: &str, end: f64, runs: &[(u32, &dyn Fn(f64) -> f64)], digits: usize) -> Ran {
    let folder = Folder::new();
    let case = trial("0", &end.to_string(), &state("x", 1.0, "-x"));
    folder.write("cases/decay.toml", case);
    let mut submission = format!("case = 'trial/decay'\n[claims]\n{claim}\n");
    for (number, (steps, factor)) in runs.iter().enumerate() {
        let step = end / f64::from(*steps);
        let mut rows = "t,x\n".to_owned();
        let mut x = 1.0;
        for row in 0..=*steps {
            let _ = writeln!(rows, "{},{:.*e}", f64::from(row) * step, digits - 1, x);
            x *= factor(step);
        }
        folder.write(&format!("s/{number}.csv"), rows);
        let _ = write!(
            submission,
            "[[runs]]\nfile = '{number}.csv'\nstep = {step}\n"
        );
    }
    folder.write("s/submission.toml", submission);
    folder.audit(&["s", "--cases", "cases"])
}

/// What Fehlberg's method of fourth order does in a step: its fifth power is 1/104 in place of
/// 1/120 (the stability polynomial of its tableau, from memory).
fn fehlberg(h: f64) -> f64 {
    1.0 - h + h * h / 2.0 - h.powi(3) / 6.0 + h.powi(4) / 24.0 - h.powi(5) / 104.0
}

#[test]
fn one_pair_of_runs_far_below_a_claim_leaves_it_open() {
    // Of second order, with an error that changes its sign about the coarser step: no longer steps
    // of such a method tell its order.
    let factor = |h: f64| (-h).exp() + 0.05 * h.powi(3) * (1.0 - 1.8 * h);
    let ran = decay("order = 2", 2.0, &[(4, &factor), (8, &factor)], 15);
    let order = &ran.report["submissions"][0]["orders"][0];
    assert_eq!(order["verdict"], "undecided", "{}", ran.seen());
    assert!(order["observed"].as_f64().unwrap() < 1.0, "{order}");
    assert_eq!(ran.verdict(), "undecided", "{}", ran.seen());
    // With more runs it is the claimed one, or fails where it is not.
    let runs: Vec<(u32, &dyn Fn(f64) -> f64)> = [16, 32, 64, 128]
        .map(|steps| (steps, &factor as _))
        .to_vec();
    assert_eq!(decay("order = 2", 2.0, &runs, 15).verdict(), "pass");
    assert_eq!(decay("order = 3", 2.0, &runs, 15).verdict(), "fail");
}

#[test]
fn a_pair_above_the_order_of_the_method_in_the_rows_passes_no_claim() {
    // At long steps the sixth power still counts, and errs the other way; the finest run is hidden
    // by its digits.
    let runs: Vec<(u32, &dyn Fn(f64) -> f64)> =
        [8, 16, 1000].map(|steps| (steps, &fehlberg as _)).to_vec();
    let ran = decay("order = 5", 10.0, &runs, 6);
    let observed = ran.report["submissions"][0]["orders"][0]["observed"].as_f64();
    assert!(observed.unwrap() > 5.0, "{}", ran.seen());
    assert_ne!(ran.verdict(), "pass", "{}", ran.seen());
    assert_eq!(decay("order = 4", 10.0, &runs, 6).verdict(), "pass");
}

/// Chains of integrators have no growth to tell steps by: of a theta method with two thirds every
/// step is three of backward Euler.
#[test]
fn a_true_step_is_not_contradicted_where_no_mode_moves() {
    let folder = Folder::new();
    let states = state("p", 0.0, "v") + &state("v", 0.0, "1");
    folder.write("cases/push.toml", trial("0", "2", &states));
    let (h, theta) = (0.02, 2.0 / 3.0);
    let (mut rows, mut p, mut v) = ("t,p,v\n".to_owned(), 0.0, 0.0);
    for row in 0..=100u32 {
        let _ = writeln!(rows, "{},{p:e},{v:e}", f64::from(row) / 50.0);
        p += h * v + theta * h * h;
        v += h;
    }
    folder.write("run.csv", rows);
    let arguments = ["run.csv", "--case", "trial/push", "--cases", "cases"];
    let stated = |step: &str| folder.audit(&[&arguments[..], &["--step", step]].concat());
    let ran = stated("0.02");
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}

/// Single precision keeps a quarter of a microsecond after some seconds: less than its shortest
/// text seems to say.
#[test]
fn stamps_of_single_precision_are_no_finer_than_that_in_small_units() {
    let folder = Folder::new();
    let mut submission = "case = 'trial/single'\n[claims]\norder = 4\n[limits]\nabsolute = 1\n\
                          [columns]\ntime = { column = 1, unit = 'us' }\n"
        .to_owned();
    let case = trial("0", "8", &state("x", 1.0, "-0.1*x"));
    folder.write("cases/single.toml", case);
    for (number, steps) in [600u32, 300, 150].into_iter().enumerate() {
        let step = 8.0 / f64::from(steps);
        let mut rows = "t,x\n".to_owned();
        for row in 0..=steps {
            let x = (-0.1 * step * f64::from(row)).exp();
            let stamp = (1e6 * step * f64::from(row)) as f32;
            // Of two shortest texts that are equally near programs write the even one.
            let text = match stamp < 1e6 {
                true => format!("{stamp}"),
                false => format!("{:.1}", f64::from(stamp)),
            };
            let _ = writeln!(rows, "{text},{x:e}");
        }
        folder.write(&format!("s/{number}.csv"), rows);
        let _ = write!(
            submission,
            "[[runs]]\nfile = '{number}.csv'\nstep = {step}\n"
        );
    }
    folder.write("s/submission.toml", submission);
    let ran = folder.audit(&["s", "--cases", "cases"]);
    assert_ne!(ran.verdict(), "fail", "{}", ran.seen());
}

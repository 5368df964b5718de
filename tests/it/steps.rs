use stepgauge::compare::Limit;
use stepgauge::exact::Exact;
use stepgauge::explain::{MOST_COMPARED, MOST_STEPS, Question, Stepper, largest_step, run, steps};
use stepgauge::method::{Sides, find};
use stepgauge::outcome::Rule;
use stepgauge::{Case, Library};

use crate::command::stepgauge;

type State = [f64; 2];

/// A case as somebody would type it into a simulator: nothing here comes from the case
/// file but the name.
struct Plain {
    name: &'static str,
    start: State,
    window: (f64, f64),
    rate: fn(f64, State) -> State,
    channels: fn(f64, State) -> Vec<f64>,
    jumps: &'static [f64],
}

fn pulse(t: f64) -> f64 {
    // Sums of steps may miss the jump by their rounding.
    if (1.0 - 1e-9..3.0 - 1e-9).contains(&t) {
        5.0
    } else {
        0.0
    }
}

fn mains(t: f64) -> f64 {
    325.0 * (2.0 * std::f64::consts::PI * 50.0 * t).sin()
}

const TAU_BEAD: f64 = 8500.0 * 320.0 * 1e-3 / (6.0 * 210.0);

/// One state leaves the second at zero.
const PLAIN: [Plain; 8] = [
    Plain {
        name: "electrical/rc-constant",
        start: [0.0, 0.0],
        window: (0.0, 10.0),
        rate: |_, [v, _]| [(5.0 - v) / (1.5 * 0.68), 0.0],
        channels: |_, [v, _]| vec![v, (5.0 - v) / 1.5],
        jumps: &[],
    },
    Plain {
        name: "electrical/rc-pulse",
        start: [0.0, 0.0],
        window: (0.0, 12.0),
        rate: |t, [v, _]| [(pulse(t) - v) / (2.2 * 0.47), 0.0],
        channels: |t, [v, _]| vec![v, (pulse(t) - v) / 2.2],
        jumps: &[1.0, 3.0],
    },
    Plain {
        name: "electrical/rl-sine",
        start: [0.0, 0.0],
        window: (0.0, 0.2),
        rate: |t, [i, _]| [(mains(t) - 8.0 * i) / 0.2, 0.0],
        channels: |_, [i, _]| vec![i, 8.0 * i],
        jumps: &[],
    },
    Plain {
        name: "stress/stiff-1e4",
        start: [1.0, 3.0],
        window: (0.0, 10.0),
        rate: |_, [slow, fast]| [-slow, 1e4 * (slow - fast)],
        channels: |_, [slow, fast]| vec![slow, fast, slow - fast],
        jumps: &[],
    },
    Plain {
        name: "mechanical/oscillator-undamped",
        start: [0.1, 0.25],
        window: (0.0, 20.0),
        rate: |_, [x, v]| [v, -50.0 * x / 2.0],
        channels: |_, [x, v]| vec![x, v, -50.0 * x],
        jumps: &[],
    },
    Plain {
        name: "kinetics/oral",
        start: [360.0, 0.0],
        window: (0.0, 48.0),
        rate: |_, [depot, amount]| [-0.6 * depot, 0.6 * depot - 0.2 * amount],
        channels: |_, [depot, amount]| vec![depot, amount, amount / 15.0],
        jumps: &[],
    },
    Plain {
        name: "control/dc-motor",
        start: [0.0, 0.0],
        window: (0.0, 5.0),
        rate: |_, [i, w]| {
            [
                (1.0 - 1.0 * i - 0.01 * w) / 0.5,
                (0.01 * i - 0.1 * w) / 0.01,
            ]
        },
        channels: |_, [i, w]| vec![i, w, 0.01 * i],
        jumps: &[],
    },
    Plain {
        name: "thermal/cooling-body",
        start: [200.0, 0.0],
        window: (0.0, 24.0),
        rate: |_, [body, _]| [(20.0 - body) / TAU_BEAD, 0.0],
        channels: |_, [body, _]| vec![body, 210.0 * (body - 20.0) / 1000.0],
        jumps: &[],
    },
];

const METHODS: [&str; 4] = ["forward Euler", "backward Euler", "Heun", "classical RK4"];

fn add(x: State, h: f64, k: State) -> State {
    [x[0] + h * k[0], x[1] + h * k[1]]
}

/// One step, written out by hand.
fn step(method: &str, rate: &dyn Fn(f64, State) -> State, t: f64, h: f64, x: State) -> State {
    match method {
        "forward Euler" => add(x, h, rate(t, x)),
        "backward Euler" => {
            // x' = rate is linear: its columns are differences, the rest Cramer's rule.
            let rest = rate(t + h, [0.0, 0.0]);
            let [one, two] =
                [[1.0, 0.0], [0.0, 1.0]].map(|unit| add(rate(t + h, unit), -1.0, rest));
            let (a, b, c, d) = (1.0 - h * one[0], -h * two[0], -h * one[1], 1.0 - h * two[1]);
            let right = add(x, h, rest);
            let determinant = a * d - b * c;
            [
                (right[0] * d - b * right[1]) / determinant,
                (a * right[1] - c * right[0]) / determinant,
            ]
        }
        "Heun" => {
            let k1 = rate(t, x);
            let k2 = rate(t + h, add(x, h, k1));
            add(add(x, h / 2.0, k1), h / 2.0, k2)
        }
        "classical RK4" => {
            let k1 = rate(t, x);
            let k2 = rate(t + h / 2.0, add(x, h / 2.0, k1));
            let k3 = rate(t + h / 2.0, add(x, h / 2.0, k2));
            let k4 = rate(t + h, add(x, h, k3));
            let sum = add(add(add(k1, 2.0, k2), 2.0, k3), 1.0, k4);
            add(x, h / 6.0, sum)
        }
        _ => unreachable!(),
    }
}

/// Worst error of each channel, and the largest share of the limit.
fn plain_loop(
    plain: &Plain,
    rate: &dyn Fn(f64, State) -> State,
    method: &str,
    steps: u64,
    exact: &Exact,
    limit: Limit,
) -> (Vec<f64>, f64) {
    let (from, to) = plain.window;
    let h = (to - from) / steps as f64;
    let mut x = plain.start;
    let mut worst = vec![0.0f64; (plain.channels)(from, x).len()];
    let mut used = 0.0f64;
    let mut walk = exact.walk_rounded();
    for n in 0..steps {
        x = step(method, rate, from + n as f64 * h, h, x);
        let t = from + (n + 1) as f64 * h;
        let at_jump = plain.jumps.iter().find(|&&jump| (t - jump).abs() < 1e-9);
        let values = walk.at(at_jump.copied().unwrap_or(t)).unwrap();
        for ((worst, found), value) in worst.iter_mut().zip((plain.channels)(t, x)).zip(values) {
            let error = (found - value.value).abs();
            *worst = worst.max(error);
            used = used.max(error / limit.at(value.value.abs()));
        }
    }
    (worst, used)
}

fn load(name: &str) -> (Case, Exact) {
    let case = Library::new().load(name, &Default::default()).unwrap();
    let exact = case.exact().unwrap();
    (case, exact)
}

fn of_case(case: &Case) -> Limit {
    Limit {
        absolute: case.limits.absolute,
        relative: case.limits.relative,
        of_peak: false,
    }
}

fn question<'a>(case: &'a Case, exact: &'a Exact, limit: Limit) -> Question<'a> {
    Question::new(case, exact, &vec![Some(limit); case.channels().len()])
}

fn stepper(method: &str, sides: Sides) -> Stepper {
    Stepper::new(find(method).unwrap(), sides).unwrap()
}

fn near(found: f64, wanted: f64, relative: f64) -> bool {
    (found - wanted).abs() <= relative * wanted.abs()
}

#[test]
fn worst_errors_are_those_of_plain_loops() {
    for plain in &PLAIN {
        let (case, exact) = load(plain.name);
        let limit = of_case(&case);
        let question = question(&case, &exact, limit);
        for method in METHODS {
            // The second hits the jumps of the pulse, the third does not.
            for steps in [40, 120, 1711] {
                let (worst, used) = plain_loop(plain, &plain.rate, method, steps, &exact, limit);
                if worst.iter().any(|worst| *worst > 1e20) {
                    continue;
                }
                let grid = question.divided(steps);
                let found = run(&question, &stepper(method, Sides::After), grid, false).unwrap();
                let label = format!("{} {method} {steps}", plain.name);
                assert_eq!(found.len(), worst.len(), "{label}");
                let most = found.iter().map(|f| f.limit_used).fold(0.0, f64::max);
                // Errors at rounding level need not agree.
                assert!(
                    near(most, used, 1e-4) || used < 1e-6,
                    "{label}: {most} {used}"
                );
                for (found, (worst, peak)) in found.iter().zip(worst.iter().zip(exact.peaks())) {
                    let close = near(found.worst, *worst, 1e-4) || *worst < 1e-9 * peak;
                    assert!(close, "{label}: {found:?} {worst}");
                }
            }
        }
    }
}

#[test]
fn the_largest_step_keeps_the_limit_and_a_longer_one_does_not() {
    let mut checked = 0;
    for plain in PLAIN.iter().filter(|plain| plain.jumps.is_empty()) {
        let (case, exact) = load(plain.name);
        let limit = of_case(&case);
        let question = question(&case, &exact, limit);
        for method in METHODS {
            let answer = largest_step(&question, &stepper(method, Sides::After));
            let label = format!("{} {method}", plain.name);
            let Some(kept) = answer.kept else {
                assert!(
                    plain.name.contains("stiff") || plain.name.contains("undamped"),
                    "{label}"
                );
                continue;
            };
            if kept.steps > 60_000 {
                continue;
            }
            let (from, to) = plain.window;
            assert!(
                near(kept.step, (to - from) / kept.steps as f64, 1e-14),
                "{label}"
            );
            let used = |steps| plain_loop(plain, &plain.rate, method, steps, &exact, limit).1;
            // Of long runs some nodes are compared, so their last digit may differ.
            let own = used(kept.steps);
            let slack = if kept.steps <= 3000 { 1e-6 } else { 1e-3 };
            assert!(own <= 1.0 + slack, "{label}: {own}");
            assert!(
                near(kept.limit_used(), own, slack.max(1e-4)),
                "{label}: {own}"
            );
            // Three digits: the next step but a thousandth longer breaks the limit.
            let longer = used(kept.steps - (kept.steps / 700).max(1));
            assert!(longer > 1.0, "{label}: {longer} at {}", kept.steps);
            checked += 1;
        }
    }
    assert!(checked >= 18, "{checked}");
}

#[test]
fn jumps_are_read_late_or_hit() {
    let plain = PLAIN.iter().find(|plain| !plain.jumps.is_empty()).unwrap();
    let (case, exact) = load(plain.name);
    let limit = Limit {
        absolute: 0.05,
        relative: 0.0,
        of_peak: false,
    };
    let question = question(&case, &exact, limit);
    let methods: Vec<_> = METHODS.iter().map(|name| find(name).unwrap()).collect();
    let outcome = steps(&question, &methods, &[]);
    assert_eq!(outcome.jumps.times, [1.0, 3.0]);
    assert_eq!(outcome.jumps.common, Some(1.0));
    assert_eq!(outcome.jumps.common_with_end, Some(1.0));
    for found in &outcome.methods {
        let name = found.name.as_str();
        let kept = found.largest.kept.as_ref().unwrap();
        let (_, used) = plain_loop(plain, &plain.rate, name, kept.steps, &exact, limit);
        assert!(used <= 1.0 + 1e-6, "{name}: {used}");
        let off = plain.jumps.iter().filter(|&&jump| {
            let steps = jump * kept.steps as f64 / 12.0;
            (steps - steps.round()).abs() > 1e-6
        });
        assert_eq!(found.jumps_missed, off.count(), "{name}");
        let jumps = found.on_jumps.as_ref().unwrap();
        let after = jumps.after.as_ref().unwrap();
        assert_eq!(after.steps % 12, 0, "{name}");
        let (_, used) = plain_loop(plain, &plain.rate, name, after.steps, &exact, limit);
        assert!(used <= 1.0 + 1e-6, "{name}: {used}");
        // The value that holds within a step is that of its middle.
        let own = jumps.own.as_ref().unwrap();
        assert_eq!(own.steps % 12, 0, "{name}");
        let within = |steps: u64| {
            let h = 12.0 / steps as f64;
            let mut x = plain.start;
            let mut worst = 0.0f64;
            for n in 0..steps {
                let source = pulse((n as f64 + 0.5) * h);
                let rate = move |_: f64, [v, _]: State| [(source - v) / (2.2 * 0.47), 0.0];
                x = step(name, &rate, 0.0, h, x);
                let value = exact.at((n + 1) as f64 * h).unwrap()[0].value;
                worst = worst.max((x[0] - value).abs());
            }
            worst
        };
        assert!(within(own.steps) <= 0.05, "{name}");
        assert!(
            own.steps == 12 || within(own.steps - 12) > 0.05,
            "{name}: {}",
            own.steps
        );
        if name == "classical RK4" {
            assert!(
                own.steps * 10 < after.steps,
                "{} {}",
                own.steps,
                after.steps
            );
        }
    }
}

#[test]
fn stability_rules_where_every_stable_step_keeps_the_limit() {
    let plain = PLAIN.iter().find(|p| p.name == "stress/stiff-1e4").unwrap();
    let (case, exact) = load(plain.name);
    let limit = Limit {
        absolute: 10.0,
        relative: 0.0,
        of_peak: false,
    };
    let question = question(&case, &exact, limit);
    for (method, length) in [
        ("forward Euler", 2.0),
        ("classical RK4", 2.785_293_563_405_282),
    ] {
        let answer = largest_step(&question, &stepper(method, Sides::After));
        assert_eq!(answer.ruled_by, Some(Rule::Stability), "{method}");
        assert!(
            near(answer.approx_stable.unwrap(), length * 1e-4, 1e-7),
            "{method}"
        );
        let kept = answer.kept.unwrap();
        assert!(
            near(kept.step, length * 1e-4, 1e-3),
            "{method}: {}",
            kept.step
        );
        let used = |steps| plain_loop(plain, &plain.rate, method, steps, &exact, limit).1;
        assert!(used(kept.steps) <= 1.0, "{method}");
        let longer = used(kept.steps * 100 / 101);
        assert!(longer.is_nan() || longer > 1.0, "{method}: {longer}");
    }
    // The second limit is that of accuracy: backward Euler is stable at any step.
    let answer = largest_step(&question, &stepper("backward Euler", Sides::After));
    assert_eq!(
        (answer.ruled_by, answer.approx_stable),
        (Some(Rule::Neither), None)
    );
}

#[test]
fn channels_without_a_limit_are_not_judged() {
    let (case, exact) = load("electrical/rc-constant");
    let strict = Limit {
        absolute: 1e-6,
        relative: 0.0,
        of_peak: false,
    };
    let first = Question::new(&case, &exact, &[Some(strict)]);
    let both = question(&case, &exact, strict);
    let rk4 = stepper("RK4", Sides::After);
    let [first, both] = [first, both].map(|q| largest_step(&q, &rk4).kept.unwrap());
    // The current is the voltage over 1.5: its error is smaller.
    assert_eq!(first.steps, both.steps);
    assert!(first.channels[1].limit_used == 0.0 && both.channels[1].limit_used > 0.0);
}

#[test]
fn multistep_methods_start_from_exact_values() {
    let plain = &PLAIN[0];
    let (case, exact) = load(plain.name);
    let question = question(&case, &exact, of_case(&case));
    let steps = 500;
    let h = 10.0 / steps as f64;
    let value = |n: u64| exact.at(n as f64 * h).unwrap()[0].value;
    // x_(n+2) = 4/3 x_(n+1) - 1/3 x_n + 2/3 h f(x_(n+2)), solved by hand.
    let (mut old, mut new, mut worst) = (value(0), value(1), 0.0f64);
    let tau = 1.5 * 0.68;
    for n in 2..=steps {
        let right = 4.0 / 3.0 * new - old / 3.0 + 2.0 / 3.0 * h * 5.0 / tau;
        (old, new) = (new, right / (1.0 + 2.0 / 3.0 * h / tau));
        worst = worst.max((new - value(n)).abs());
    }
    let grid = question.divided(steps);
    let found = run(&question, &stepper("BDF 2", Sides::After), grid, false).unwrap();
    assert!(near(found[0].worst, worst, 1e-6), "{found:?} {worst}");
    assert!(
        run(
            &question,
            &stepper("BDF 2", Sides::After),
            question.divided(1),
            false
        )
        .is_none()
    );
}

#[test]
fn the_command_in_text_and_csv() {
    let name = "control/dc-motor";
    let (status, text, complaints) =
        stepgauge(&["steps", name, "--method", "rk2", "--method", "BDF-2"]);
    assert_eq!((status, complaints.as_str()), (0, ""));
    for part in [
        "explicit midpoint",
        "BDF 2: started from exact values",
        "0.2 ",
        "any step",
    ] {
        assert!(text.contains(part), "{part}: {text}");
    }
    assert!(
        text.is_ascii() && text.lines().all(|line| line.len() <= 100),
        "{text}"
    );
    let (status, csv, _) = stepgauge(&["steps", name, "--csv", "--step", "0.3", "--step", "0.1"]);
    assert_eq!(status, 0);
    let mut reader = csv::Reader::from_reader(csv.as_bytes());
    let header = "method,step,steps,channel,worst_error,limit_used,stable";
    assert_eq!(csv.lines().next(), Some(header));
    let rows: Vec<csv::StringRecord> = reader.records().map(Result::unwrap).collect();
    // Two steps and the largest that keeps the limit; three channels; five methods.
    assert_eq!(rows.len(), 45);
    let plain = PLAIN.iter().find(|plain| plain.name == name).unwrap();
    let (case, exact) = load(name);
    let (worst, _) = plain_loop(plain, &plain.rate, "Heun", 50, &exact, of_case(&case));
    let heun: Vec<_> = rows.iter().filter(|row| &row[0] == "Heun").collect();
    let at = |step: &str, channel: &str| {
        heun.iter()
            .find(|row| &row[1] == step && &row[3] == channel)
            .unwrap()
    };
    let row = at("0.1", "speed");
    assert_eq!((&row[2], &row[6]), ("50", "true"));
    assert!(near(row[4].parse().unwrap(), worst[1], 1e-9), "{row:?}");
    // 0.3 does not divide the window, and lies beyond 2/9.9975.
    assert_eq!(
        (&at("0.3", "speed")[2], &at("0.3", "speed")[6]),
        ("16", "false")
    );
    let last = heun.last().unwrap();
    assert!(last[5].parse::<f64>().unwrap() <= 1.0, "{last:?}");
    // A wider limit lets the step grow, tenfold for the first order.
    let (_, csv, _) = stepgauge(&["steps", name, "--csv", "--method", "euler"]);
    let (_, wide, _) = stepgauge(&[
        "steps",
        name,
        "--csv",
        "--method",
        "euler",
        "--absolute",
        "1e-4",
        "--relative",
        "1e-2",
    ]);
    let largest = |csv: &str| {
        let mut reader = csv::Reader::from_reader(csv.as_bytes());
        let rows = reader.records().map(Result::unwrap).collect::<Vec<_>>();
        let steps = rows
            .chunks(3)
            .filter(|rows| rows.iter().all(|row| row[5].parse::<f64>().unwrap() <= 1.0));
        let steps = steps.map(|rows| rows[0][1].parse::<f64>().unwrap());
        steps.fold(0.0, f64::max)
    };
    let ratio = largest(&wide) / largest(&csv);
    assert!((9.0..11.0).contains(&ratio), "{ratio}");
}

#[test]
fn the_bounds_in_the_help_are_true() {
    let (_, help, _) = stepgauge(&["steps", "--help"]);
    assert!(help.contains(&format!("At most {MOST_STEPS} steps are run")));
    assert!(help.contains(&format!("than {MOST_COMPARED} steps are compared")));
}

#[test]
fn complaints_of_the_command() {
    let name = "control/dc-motor";
    for (arguments, complaint) in [
        (
            vec!["--method", "Huen", "--method", "BFD 3"],
            "--method: there is no method `Huen`\n  help: did you mean `Heun`? \
             `stepgauge methods` lists all\n--method: there is no method `BFD 3`\n  help: did you \
             mean `BDF 3`? `stepgauge methods` lists all\n",
        ),
        (
            vec!["--method", "leapfrog of my own"],
            "--method: there is no method `leapfrog of my own`\n  help: `stepgauge methods` lists \
             all\n",
        ),
        (
            vec!["--step", "6"],
            "--step 6 is longer than the window\n  help: the window has 5 s\n",
        ),
        (
            vec!["--step", "1e-5"],
            "--step 1e-5 is 500000 steps over the window\n  help: at most 200000 are run: \
             2.5e-5 s or longer\n",
        ),
    ] {
        let all: Vec<&str> = ["steps", name].into_iter().chain(arguments).collect();
        let (status, out, text) = stepgauge(&all);
        assert_eq!((status, out.as_str(), text.as_str()), (2, "", complaint));
    }
    for step in ["0", "-1", "nan", "x"] {
        let (status, _, text) = stepgauge(&["steps", name, "--step", step]);
        assert!(status == 2 && text.contains("--step"), "{step}: {text}");
    }
}

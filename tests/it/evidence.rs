//! Which method wrote a file: over a matrix of methods, cases, steps, digits and internal
//! steps the true pair is always found consistent and an honest claim never contradicted.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

use stepgauge::Library;
use stepgauge::case::Case;
use stepgauge::judge::{self, Claimed, Support};
use stepgauge::method::{
    Coefficients, Evidence, Linear, METHODS, Method, Record, Scheme, evidence, forms,
};
use stepgauge::number::Double;

use crate::writer::{Kept, Run, Seen, Solver, Start, resolution, truth};

/// Cases with the spacings of the rows; jumps of inputs fall on rows.
pub const CASES: &[(&str, [f64; 3])] = &[
    ("kinetics/bolus", [0.25, 1.0, 4.0]),
    ("electrical/rc-constant", [0.05, 0.2, 1.0]),
    ("mechanical/oscillator-undamped", [0.02, 0.1, 0.4]),
    ("electrical/rlc-underdamped", [0.0005, 0.002, 0.005]),
    ("stress/stiff-1e4", [2e-5, 1e-4, 0.01]),
    ("stress/jordan-4", [0.1, 0.5, 2.0]),
    ("membrane/leaky-sine", [0.5, 2.0, 5.0]),
    ("mechanical/base-excitation", [0.01, 0.04, 0.1]),
    ("stress/quadratic-input", [0.01, 0.05, 0.1]),
    ("stress/exponential-input", [0.02, 0.1, 0.25]),
    ("process/tank-leak-ramp", [0.5, 2.0, 5.0]),
    ("thermal/cold-room-defrost", [20.0, 60.0, 100.0]),
    ("kinetics/repeated-infusions", [0.125, 0.25, 0.5]),
    ("control/servo-integrator", [0.01, 0.05, 0.1]),
    ("thermal/wall-3-node", [0.25, 1.0, 2.0]),
    ("control/lag-linear-samples", [0.125, 0.25, 0.5]),
    ("thermal/battery-room", [0.05, 0.125, 0.25]),
];

/// Every method of the catalogue with each of its schemes.
pub fn variants() -> Vec<(&'static Method, usize)> {
    let all = METHODS.iter();
    all.flat_map(|method| (0..method.schemes.len()).map(move |scheme| (method, scheme)))
        .collect()
}

pub fn rows(linear: &Linear, spacing: f64) -> usize {
    let span = linear.window.1 - linear.window.0;
    ((span / spacing) as usize).min(60) + 1
}

pub fn claim<'a>(
    methods: &'a [&'static Method],
    step: f64,
    steps: Option<u64>,
    unit: f64,
) -> Claimed<'a> {
    Claimed {
        name: Some(methods[0].name),
        methods,
        step: Some(step),
        steps,
        adaptive: false,
        unit,
        time_unit: "s",
    }
}

/// Does work on both cores; what it returns is in no order.
pub fn shared<T: Sync, R: Send>(work: &[T], job: impl Fn(&T) -> Vec<R> + Sync) -> Vec<R> {
    let next = AtomicUsize::new(0);
    let results = Mutex::new(Vec::new());
    std::thread::scope(|scope| {
        for _ in 0..2 {
            scope.spawn(|| {
                while let Some(item) = work.get(next.fetch_add(1, Ordering::Relaxed)) {
                    let mut found = job(item);
                    results.lock().unwrap().append(&mut found);
                }
            });
        }
    });
    results.into_inner().unwrap()
}

pub fn load(name: &str) -> Case {
    Library::new().load(name, &Default::default()).unwrap()
}

/// The cases with their numbers.
fn cases() -> Vec<(usize, Case)> {
    let cases = CASES.iter().map(|(name, _)| load(name));
    cases.enumerate().collect()
}

/// What became of one entry of a matrix.
#[derive(Debug, Default)]
pub struct Tally {
    pub entries: usize,
    pub nothing: Vec<String>,
    pub missed: Vec<String>,
    pub contradicted: Vec<String>,
}

#[derive(Debug)]
pub enum Said {
    Fine,
    Nothing(String),
    Missed(String),
    Contradicted(String),
}

impl Tally {
    pub fn of(said: Vec<Said>) -> Tally {
        let mut tally = Tally::default();
        for one in said {
            tally.entries += 1;
            match one {
                Said::Fine => {}
                Said::Nothing(text) => tally.nothing.push(text),
                Said::Missed(text) => tally.missed.push(text),
                Said::Contradicted(text) => tally.contradicted.push(text),
            }
        }
        tally.nothing.sort();
        tally.missed.sort();
        tally.contradicted.sort();
        tally
    }

    /// Shows what was found and wants no failure, and few entries without an answer.
    pub fn check(&self, what: &str, nothing_at_most: f64) {
        println!(
            "{what}: {} entries, {} missed, {} contradicted, {} with nothing to compare",
            self.entries,
            self.missed.len(),
            self.contradicted.len(),
            self.nothing.len()
        );
        let first = |list: &[String]| {
            let most = std::env::var("SHOW").map_or(20, |s| s.parse().unwrap());
            list.iter()
                .take(most)
                .cloned()
                .collect::<Vec<_>>()
                .join("\n")
        };
        let mut text = String::new();
        for (kind, list) in [
            ("missed", &self.missed),
            ("contradicted", &self.contradicted),
        ] {
            if !list.is_empty() {
                text += &format!("{what}, {kind}:\n{}\n", first(list));
            }
        }
        if self.nothing.len() as f64 > nothing_at_most * self.entries as f64 {
            text += &format!("{what}, nothing compared:\n{}\n", first(&self.nothing));
        }
        assert!(text.is_empty(), "{text}");
    }
}

/// Asks for an honest claim. `strict`: the pair itself has to be consistent.
pub fn ask(linear: &Linear, record: &Record, run: &Run, digits: usize, strict: bool) -> Said {
    let method = METHODS.iter().find(|m| m.name == run.method.name).unwrap();
    let label = format!(
        "{} {}#{} rows {} x{} {digits} digits {:?} {:?} {} {:?}{}",
        run.case.name,
        method.name,
        run.scheme,
        run.spacing,
        run.steps,
        run.start,
        run.seen,
        if run.summed { "summed" } else { "multiples" },
        run.solver,
        if run.single { " single" } else { "" },
    );
    if record.windows[0].rows() < 3 {
        return Said::Nothing(format!("{label}: out of range after two rows"));
    }
    let claimed = [method];
    let step = run.spacing / run.steps as f64;
    let (found, answer) = judge::ask(
        linear,
        record,
        &claim(&claimed, step, Some(run.steps), record.unit),
    );
    let best = found.best(&[method], Some(run.steps));
    let answer = answer.unwrap();
    match best {
        _ if answer.support == Support::Contradicts => {
            Said::Contradicted(format!("{label}: {}", answer.text))
        }
        Some(best) if strict && !best.fit.holds() => {
            // Some form of the method needs more rows than there are.
            if found.is_skipped(&[method], Some(run.steps)) {
                return Said::Nothing(label);
            }
            Said::Missed(format!("{label}: {:?}; {}", best.fit, answer.text))
        }
        None => Said::Nothing(label),
        _ => Said::Fine,
    }
}

const SEEN: [Seen; 3] = [Seen::From, Seen::Beyond, Seen::Own];
const STARTS: [Start; 3] = [Start::Runge, Start::Exact, Start::Euler];

/// The matrix: every variant on every case at three spacings, three numbers of steps
/// from row to row and three numbers of digits; of those only each `every`-th run.
/// Starts, sums of time and sides of jumps take turns.
fn matrix(every: usize, channels: impl Fn(&Linear) -> Option<Vec<usize>> + Sync) -> Tally {
    let cases = cases();
    let said = shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let mut said = Vec::new();
        let Some(channels) = channels(&linear) else {
            return said;
        };
        let mut number = 7 * index;
        for spacing in CASES[*index].1 {
            let count = rows(&linear, spacing);
            let times: Vec<f64> = (0..count)
                .map(|k| linear.window.0 + k as f64 * spacing)
                .collect();
            let truth = truth(case, &times);
            for (method, scheme) in variants() {
                for steps in [1, 4, 10] {
                    number += 1;
                    if number % every != 0 {
                        continue;
                    }
                    let run = Run {
                        scheme,
                        start: STARTS[number / every % 3],
                        summed: number / every / 3 % 2 == 1,
                        seen: SEEN[number / every / 6 % 3],
                        ..Run::new(case, method, spacing, steps, count)
                    };
                    let (times, states) = run.states().unwrap();
                    let written = (&times[..], &states[..], &truth[..]);
                    said.extend(asked(&run, &linear, &channels, written, &DIGITS, true));
                }
            }
        }
        said
    });
    Tally::of(said)
}

fn all_states(linear: &Linear) -> Option<Vec<usize>> {
    Some((0..linear.size()).collect())
}

#[test]
fn the_true_pair_is_consistent() {
    // A thin sample: of the whole matrix 498 of 25,704 entries are without an answer.
    matrix(31, all_states).check("true pairs", 0.03);
}

#[test]
#[ignore = "the whole matrix takes minutes; run it with --release"]
fn the_true_pair_is_consistent_everywhere() {
    matrix(1, all_states).check("all true pairs", 0.025);
}

#[test]
fn the_true_pair_is_consistent_with_one_state_only() {
    let last = |linear: &Linear| (linear.size() > 1).then(|| vec![linear.size() - 1]);
    matrix(53, last).check("one state", 0.05);
}

#[test]
fn the_true_pair_is_consistent_with_outputs_only() {
    let outputs = |linear: &Linear| {
        let outputs = linear.outputs.len();
        (outputs > 0).then(|| (linear.size()..linear.size() + outputs).collect())
    };
    matrix(53, outputs).check("outputs", 0.05);
}

#[test]
#[ignore = "the whole matrix takes minutes; run it with --release"]
fn the_true_pair_is_consistent_with_parts_of_the_states() {
    let last = |linear: &Linear| (linear.size() > 1).then(|| vec![linear.size() - 1]);
    matrix(2, last).check("one state", 0.05);
    let outputs = |linear: &Linear| {
        let outputs = linear.outputs.len();
        (outputs > 0).then(|| (linear.size()..linear.size() + outputs).collect())
    };
    matrix(2, outputs).check("outputs", 0.05);
}

const DIGITS: [usize; 3] = [6, 9, 17];

/// Asks for the honest claim of a run, printed with each of these numbers of digits.
fn asked(
    run: &Run,
    linear: &Linear,
    channels: &[usize],
    written: (&[f64], &[Vec<f64>], &[Vec<Double>]),
    digits: &[usize],
    strict: bool,
) -> Vec<Said> {
    let one = |&digits: &usize| {
        let record = printed(run, linear, channels, written, digits);
        ask(linear, &record, run, digits, strict)
    };
    digits.iter().map(one).collect()
}

/// What is kept of a run whose program prints so many digits.
fn printed(
    run: &Run,
    linear: &Linear,
    channels: &[usize],
    (times, states, truth): (&[f64], &[Vec<f64>], &[Vec<Double>]),
    digits: usize,
) -> Record {
    let kept = Kept {
        times,
        states,
        truth,
        digits,
        channels,
        spacing: run.varied.is_none().then_some(run.spacing),
        single: run.single,
    };
    kept.record(linear, run.seen)
}

/// Single precision and loose iterations: an honest program all the same.
fn honest(every: usize) -> Tally {
    let cases = cases();
    let said = shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let channels: Vec<usize> = (0..linear.size()).collect();
        let mut said = Vec::new();
        let mut number = *index;
        for (method, scheme) in variants() {
            for spacing in CASES[*index].1 {
                number += 1;
                let implicit = method.schemes[scheme].is_implicit();
                if number % every != 0 && !(implicit && number % (every / 2) == 0) {
                    continue;
                }
                let count = rows(&linear, spacing);
                let plain = Run {
                    scheme,
                    start: STARTS[number % 3],
                    ..Run::new(case, method, spacing, [1, 4][number % 2], count)
                };
                let mut runs = vec![Run {
                    single: true,
                    ..plain.clone()
                }];
                if implicit {
                    let tolerance = [1e-12, 1e-9, 1e-6][number / 3 % 3];
                    for solver in [Solver::Fixed(tolerance), Solver::Loose(tolerance)] {
                        runs.push(Run {
                            solver,
                            ..plain.clone()
                        });
                    }
                }
                for run in runs {
                    let Some((times, states)) = run.states() else {
                        continue;
                    };
                    let truth = truth(case, &times);
                    let written = (&times[..], &states[..], &truth[..]);
                    said.extend(asked(&run, &linear, &channels, written, &DIGITS, false));
                }
            }
        }
        said
    });
    Tally::of(said)
}

/// True where a method that the answer names multiplies every mode by the same factor as the
/// iteration that was given up: between jumps the rows are those of both, to the last digit.
fn is_another(run: &Run, text: &str) -> bool {
    let Some(named) = text.split("the rows fit ").nth(1) else {
        return false;
    };
    let named = named.split(" at step ").next().unwrap();
    let Solver::Rounds(rounds) = run.solver else {
        return false;
    };
    let given_up = format!("with {rounds} fixed-point iterations a step");
    let own = forms(run.method).into_iter();
    let own: Vec<Vec<f64>> = own
        .filter(|form| form.text == given_up)
        .filter_map(|form| factor(&form.coefficients))
        .collect();
    let others = variants().into_iter();
    let mut others = others
        .filter(|(method, _)| named.contains(method.name))
        .filter_map(|(method, scheme)| factor(&method.schemes[scheme].coefficients()));
    others.any(|other| own.iter().any(|own| same_factor(own, &other)))
}

/// The factor of an explicit step as a polynomial in z: `1 + z b (1 + z A + z^2 A^2 + ...) 1`.
fn factor(coefficients: &Coefficients) -> Option<Vec<f64>> {
    let Coefficients::Stages(stages) = coefficients else {
        return None;
    };
    let size = stages.weights.len();
    let mut powers = vec![1.0; size];
    let mut factor = vec![1.0];
    for _ in 0..=size {
        let weighted = stages.weights.iter().zip(&powers);
        factor.push(weighted.map(|(b, x)| b.to_f64() * x).sum());
        powers = stages
            .matrix
            .iter()
            .map(|row| row.iter().zip(&powers).map(|(a, x)| a.to_f64() * x).sum())
            .collect();
    }
    // An implicit step is no polynomial.
    (factor.pop()?.abs() < 1e-14).then_some(factor)
}

fn same_factor(a: &[f64], b: &[f64]) -> bool {
    let at = |list: &[f64], k: usize| list.get(k).copied().unwrap_or(0.0);
    (0..a.len().max(b.len())).all(|k| (at(a, k) - at(b, k)).abs() < 1e-13)
}

/// Programs that iterate so many times a step and no more, and predictor-corrector pairs in
/// the modes that the catalogue does not hold (`[hairer-norsett-wanner-1993]` III.1: PEC, P(EC)^k,
/// P(EC)^kE).
fn unfinished(every: usize) -> Tally {
    let cases = cases();
    let said = shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let channels: Vec<usize> = (0..linear.size()).collect();
        let mut said = Vec::new();
        let mut number = *index;
        for (method, scheme) in variants() {
            let form = &method.schemes[scheme];
            let rosenbrock = matches!(form, Scheme::Rosenbrock { .. });
            let solvers: Vec<Solver> = if form.is_predicted() {
                let modes = [(1, false), (2, true), (2, false), (3, true)];
                modes.map(|(k, e)| Solver::Corrections(k, e)).to_vec()
            } else if form.is_implicit() && !rosenbrock {
                [2, 3, 4, 6].map(Solver::Rounds).to_vec()
            } else {
                continue;
            };
            for spacing in CASES[*index].1 {
                number += 1;
                if number % every != 0 {
                    continue;
                }
                for &solver in &solvers {
                    let run = Run {
                        scheme,
                        solver,
                        start: STARTS[number % 3],
                        ..Run::new(
                            case,
                            method,
                            spacing,
                            [1, 4][number % 2],
                            rows(&linear, spacing),
                        )
                    };
                    let Some((times, states)) = run.states() else {
                        continue;
                    };
                    let truth = truth(case, &times);
                    let largest = |all: &mut dyn Iterator<Item = f64>| {
                        all.fold(
                            0.0f64,
                            |most, x| if most >= x.abs() { most } else { x.abs() },
                        )
                    };
                    let own = largest(&mut states.iter().flatten().copied());
                    let true_one = largest(&mut truth.iter().flatten().map(|x| x.to_f64()));
                    // Iterations that run away are no solution.
                    if own.is_nan() || own > 3.0 * true_one {
                        continue;
                    }
                    let written = (&times[..], &states[..], &truth[..]);
                    let all = asked(&run, &linear, &channels, written, &DIGITS, false);
                    said.extend(all.into_iter().map(|said| match said {
                        Said::Contradicted(text) if is_another(&run, &text) => Said::Fine,
                        said => said,
                    }));
                }
            }
        }
        said
    });
    Tally::of(said)
}

#[test]
fn programs_that_iterate_a_fixed_number_of_times_are_not_contradicted() {
    unfinished(29).check("fixed numbers of iterations", 0.05);
}

#[test]
#[ignore = "many runs; run it with --release"]
fn programs_that_iterate_a_fixed_number_of_times_are_not_contradicted_anywhere() {
    unfinished(3).check("all fixed numbers of iterations", 0.05);
}

#[test]
fn honest_programs_are_never_contradicted() {
    honest(58).check("honest programs", 0.03);
}

#[test]
#[ignore = "many runs; run it with --release"]
fn honest_programs_are_never_contradicted_anywhere() {
    honest(6).check("all honest programs", 0.03);
}

/// Rows that a method has written at a step of their spacing were not written at one that
/// does not divide it.
#[test]
fn a_step_that_does_not_divide_the_rows_is_contradicted() {
    let case = load("electrical/rc-constant");
    let linear = Linear::new(&case);
    let (method, scheme) = variants()
        .into_iter()
        .find(|(m, _)| m.name == "Heun")
        .unwrap();
    let run = Run {
        scheme,
        ..Run::new(&case, method, 0.05, 1, 61)
    };
    let (times, states) = run.states().unwrap();
    let truth = truth(&case, &times);
    let record = printed(&run, &linear, &[0], (&times, &states, &truth), 17);
    for (stated, support, of_method) in [
        (0.03, Support::Contradicts, Support::Agrees),
        (0.04, Support::Contradicts, Support::Agrees),
        // Perhaps one that was stated to a few digits.
        (0.0501, Support::CannotTell, Support::CannotTell),
    ] {
        let claimed = [method];
        let (_, answer) = judge::ask(
            &linear,
            &record,
            &claim(&claimed, stated, None, record.unit),
        );
        let answer = answer.unwrap();
        assert_eq!(
            (answer.support, answer.method),
            (support, Some(of_method)),
            "{stated}: {}",
            answer.text
        );
    }
}

/// Steps as an adaptive code accepts them, every state written.
#[test]
fn one_step_methods_are_found_at_varying_steps() {
    let cases = cases();
    let said = shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let channels: Vec<usize> = (0..linear.size()).collect();
        let mut said = Vec::new();
        let mut number = 5 * *index as u64;
        for (method, scheme) in variants() {
            number += 1;
            if method.schemes[scheme].steps_back() > 1 || number.is_multiple_of(2) {
                continue;
            }
            let spacing = CASES[*index].1[number as usize % 3];
            let count = rows(&linear, spacing) - 1;
            let mut seed = number;
            let mut random = || {
                seed = seed
                    .wrapping_mul(6364136223846793005)
                    .wrapping_add(1442695040888963407);
                (seed >> 11) as f64 / (1u64 << 53) as f64
            };
            let steps = (0..count)
                .map(|_| spacing * (0.4 + 0.6 * random()))
                .collect();
            let run = Run {
                scheme,
                varied: Some(steps),
                ..Run::new(case, method, spacing, 1, count)
            };
            let (times, states) = run.states().unwrap();
            let truth = truth(case, &times);
            let written = (&times[..], &states[..], &truth[..]);
            said.extend(asked(&run, &linear, &channels, written, &DIGITS, true));
        }
        said
    });
    Tally::of(said).check("varying steps", 0.03);
}

/// Steps of up to half a million times the fast time constant: what a step of the catalogue is computed by
/// rounds like the one that a program made.
#[test]
fn stiff_steps_are_not_contradicted() {
    let case = load("stress/stiff-1e6");
    let linear = Linear::new(&case);
    let channels = all_states(&linear).unwrap();
    let mut said = Vec::new();
    for (spacing, count) in [(0.05, 100), (0.5, 20)] {
        let implicit = |(method, scheme): &(&'static Method, usize)| {
            method.schemes[*scheme].is_implicit() && method.schemes[*scheme].steps_back() == 1
        };
        for (method, scheme) in variants().into_iter().filter(implicit) {
            for steps in [1, 4] {
                let run = Run {
                    scheme,
                    ..Run::new(&case, method, spacing, steps, count)
                };
                let (times, states) = run.states().unwrap();
                let truth = truth(&case, &times);
                let written = (&times[..], &states[..], &truth[..]);
                said.extend(asked(&run, &linear, &channels, written, &[9, 17], true));
            }
        }
    }
    Tally::of(said).check("stiff steps", 0.0);
}

/// No claim at all: what wrote the rows is found, or nothing can be told from the solution.
#[test]
fn the_true_pair_is_found_without_a_claim() {
    let cases = cases();
    let said = shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let channels: Vec<usize> = (0..linear.size()).collect();
        let mut said = Vec::new();
        let mut number = 11 * index;
        for spacing in CASES[*index].1 {
            let count = rows(&linear, spacing);
            for (method, scheme) in variants() {
                for steps in [1, 2, 4, 10, 25] {
                    number += 1;
                    if number % 211 != 0 {
                        continue;
                    }
                    let run = Run {
                        scheme,
                        start: STARTS[number / 211 % 3],
                        ..Run::new(case, method, spacing, steps, count)
                    };
                    let (times, states) = run.states().unwrap();
                    let truth = truth(case, &times);
                    for digits in [6, 9, 17] {
                        let record =
                            printed(&run, &linear, &channels, (&times, &states, &truth), digits);
                        let label = format!(
                            "{} {}#{scheme} {spacing} x{steps} {digits} digits {:?}",
                            case.name, method.name, run.start
                        );
                        let found = evidence(&linear, &record, &[], &[]);
                        let own = found.tried.iter().filter(|t| t.method.name == method.name);
                        let mut own = own.filter(|tried| tried.fit.holds());
                        let true_steps = own.any(|t| (t.range.0..=t.range.1).contains(&steps));
                        said.push(
                            if true_steps || found.is_exact() || found.exact_between_jumps {
                                Said::Fine
                            } else if found.is_skipped(&[method], None)
                                || record.windows[0].rows() < 4
                            {
                                Said::Nothing(label)
                            } else {
                                let best = found.best_of(method.name).map(|t| (t.steps, t.fit));
                                Said::Missed(format!("{label}: {best:?}"))
                            },
                        );
                    }
                }
            }
        }
        said
    });
    Tally::of(said).check("without a claim", 0.05);
}

struct Power {
    digits: usize,
    alone: Option<bool>,
    false_claims: usize,
    seen_through: usize,
    /// False claims of methods that explain the rows with some start.
    open_starts: usize,
    texts: Vec<String>,
}

/// Do two runs differ by more than four times what the print resolves?
fn differ(a: &[Vec<f64>], b: &[Vec<f64>], digits: usize) -> bool {
    let size = a[0].len();
    let rows = || {
        a.iter()
            .zip(b)
            .take_while(|(a, _)| a.iter().all(|x| x.abs() < 1e30))
    };
    (0..size).any(|i| {
        let peak = rows().map(|(a, _)| a[i].abs()).fold(0.0, f64::max);
        rows().any(|(a, b)| {
            let resolved = resolution(digits).at(a[i]) + 64.0 * f64::EPSILON * peak;
            // Not a plain comparison: what has overflowed differs, too.
            {
                let gap = (a[i] - b[i]).abs();
                gap.is_nan() || gap > 4.0 * resolved
            }
        })
    })
}

/// Does a method leave more than four times what the print resolves, whatever its start?
/// Not where the rows are too few to say.
fn leaves(sharp: &Evidence, method: &Method, steps: u64, digits: usize) -> bool {
    let own = sharp.tried.iter();
    let own = own.filter(|tried| tried.method.name == method.name && tried.steps == steps);
    let least = own.map(|tried| tried.fit.residual).reduce(f64::min);
    let resolved = 0.5 * 0.1f64.powi(digits as i32 - 1) + 64.0 * f64::EPSILON;
    least.is_some_and(|least| least > 4.0 * resolved)
}

/// Are earlier states hidden that a step of the scheme needs?
fn is_free(method: &Method, scheme: usize, steps: u64) -> bool {
    method.schemes[scheme].steps_back() > 1 && steps > 1
}

fn power(every: usize) -> Vec<Power> {
    let cases = cases();
    let all = variants();
    shared(&cases, |(index, case)| {
        let linear = Linear::new(case);
        let channels: Vec<usize> = (0..linear.size()).collect();
        let mut results = Vec::new();
        let mut number = 3 * index;
        for spacing in CASES[*index].1 {
            let count = rows(&linear, spacing);
            for (place, &(method, scheme)) in all.iter().enumerate() {
                for steps in [1, 4, 10] {
                    number += 1;
                    if number % every != 0 {
                        continue;
                    }
                    let run = Run {
                        scheme,
                        ..Run::new(case, method, spacing, steps, count)
                    };
                    let (times, states) = run.states().unwrap();
                    let truth = truth(case, &times);
                    let other = &all[(place + 1 + number % (all.len() - 1)) % all.len()];
                    let mut claims = vec![(*other, steps)];
                    for factor in [2, 4, 10] {
                        claims.push(((method, scheme), steps * factor));
                        if steps % factor == 0 {
                            claims.push(((method, scheme), steps / factor));
                        }
                    }
                    let of = |(method, scheme): (&'static Method, usize), steps: u64| {
                        let run = Run {
                            scheme,
                            ..Run::new(case, method, spacing, steps, count)
                        };
                        run.states().unwrap().1
                    };
                    for digits in [9, 17] {
                        let record =
                            printed(&run, &linear, &channels, (&times, &states, &truth), digits);
                        if record.windows[0].rows() < 3 {
                            continue;
                        }
                        let mut power = Power {
                            digits,
                            alone: None,
                            false_claims: 0,
                            seen_through: 0,
                            open_starts: 0,
                            texts: Vec::new(),
                        };
                        let label = format!(
                            "{} {}#{scheme} {spacing} x{steps} {digits}",
                            case.name, method.name
                        );
                        let found = evidence(&linear, &record, &[], &[]);
                        let free = found.consistent.iter().filter(|family| family.free);
                        let free = free.flat_map(|f| f.methods.iter().map(|m| (*m, f.steps)));
                        let claims_free = claims.iter().filter(|((m, s), n)| is_free(m, *s, *n));
                        let claims_free = claims_free.map(|&((m, _), n)| (m, n));
                        let (named, counts): (Vec<_>, Vec<u64>) = free.chain(claims_free).unzip();
                        let sharp = (!named.is_empty()).then(|| {
                            let all = (&times[..], &states[..], &truth[..]);
                            let record = printed(&run, &linear, &channels, all, 17);
                            evidence(&linear, &record, &named, &counts)
                        });
                        let leaves = |method: &Method, steps| {
                            let mut sharp = sharp.iter();
                            sharp.any(|sharp| leaves(sharp, method, steps, digits))
                        };
                        if !found.is_exact() {
                            let own = |m: &&Method| m.name == method.name;
                            let others: Vec<_> = found
                                .consistent
                                .iter()
                                .filter(|family| !family.methods.iter().any(&own))
                                .filter(|family| family.steps <= 64)
                                .filter(|family| {
                                    let m = METHODS.iter();
                                    let mut m = m.filter(|m| {
                                        family.methods.iter().any(|f| f.name == m.name)
                                    });
                                    m.all(|m| {
                                        if family.free {
                                            return leaves(m, family.steps);
                                        }
                                        (0..m.schemes.len()).all(|scheme| {
                                            let other = of((m, scheme), family.steps);
                                            differ(&states, &other, digits)
                                        })
                                    })
                                })
                                .map(|f| (f.methods[0].name, f.steps, f.fit.ratio, f.apart, f.free))
                                .collect();
                            power.alone = Some(others.is_empty());
                            if !others.is_empty() {
                                let most = others.len().min(5);
                                power
                                    .texts
                                    .push(format!("{label} also {:?}", &others[..most]));
                            }
                        }
                        for &((other, scheme), n) in &claims {
                            let same = other.name == method.name && n == steps;
                            if same || !differ(&states, &of((other, scheme), n), digits) {
                                continue;
                            }
                            // Another scheme of one method may be what was run.
                            let twin = |scheme| differ(&states, &of((other, scheme), n), digits);
                            if !(0..other.schemes.len()).all(twin) {
                                continue;
                            }
                            if is_free(other, scheme, n) && !leaves(other, n) {
                                power.open_starts += 1;
                                continue;
                            }
                            let claimed = [other];
                            let claim = claim(&claimed, spacing / n as f64, Some(n), record.unit);
                            let answer = judge::ask(&linear, &record, &claim).1.unwrap();
                            power.false_claims += 1;
                            if answer.support == Support::Contradicts {
                                power.seen_through += 1;
                            } else {
                                power.texts.push(format!(
                                    "{label} claimed {} x{n}: {}",
                                    other.name, answer.text
                                ));
                            }
                        }
                        results.push(power);
                    }
                }
            }
        }
        results
    })
}

/// Digits, and the shares wanted of sets with one family and of false claims.
fn check_power(every: usize, wanted: [(usize, f64, f64); 2]) {
    let results = power(every);
    let mut missed = Vec::new();
    for (digits, alone_wanted, claims_wanted) in wanted {
        let of = || results.iter().filter(|power| power.digits == digits);
        let entries = of().filter(|power| power.alone.is_some()).count();
        let alone = of().filter(|power| power.alone == Some(true)).count();
        let claims: usize = of().map(|power| power.false_claims).sum();
        let seen: usize = of().map(|power| power.seen_through).sum();
        let open: usize = of().map(|power| power.open_starts).sum();
        let share = |a: usize, b: usize| a as f64 / b.max(1) as f64;
        println!(
            "{digits} digits: alone in {alone} of {entries} ({:.1} %), {seen} of {claims} false \
             claims contradicted ({:.1} %), {open} more explain the rows with some start",
            100.0 * share(alone, entries),
            100.0 * share(seen, claims)
        );
        if std::env::var("SHOW").is_ok() {
            let texts: Vec<&str> = of().flat_map(|p| &p.texts).map(String::as_str).collect();
            println!("{}", texts.join("\n"));
        }
        if share(alone, entries) < alone_wanted || share(seen, claims) < claims_wanted {
            missed.push(format!(
                "{digits} digits: {alone} of {entries}, {seen} of {claims}"
            ));
        }
    }
    assert!(missed.is_empty(), "{}", missed.join("\n"));
}

/// A thin sample; the shares wanted are those of the larger ones (see DEVELOPERS.md): at nine
/// digits the line of nine in ten is not met everywhere yet.
#[test]
fn false_claims_are_contradicted() {
    check_power(457, [(17, 0.95, 0.9), (9, 0.75, 0.85)]);
}

#[test]
#[ignore = "many runs; run it with --release"]
fn false_claims_are_contradicted_everywhere() {
    let every = std::env::var("EVERY").map_or(7, |every| every.parse().unwrap());
    check_power(every, [(17, 0.95, 1.0), (9, 0.9, 1.0)]);
}

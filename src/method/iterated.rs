//! What an implicit method becomes in a program that repeats `y <- known + h beta f(y)` so many
//! times a step and no more: on a linear model an explicit step again, that can be laid beside
//! the rows as any other.

use nalgebra::DMatrix;

use super::catalogue::{Method, find};
use super::recurrence::{Node, Recurrence, identity, sparse};
use super::scheme::{Coefficients, Scheme, Stages};
use crate::number::Double;

/// A method as a program may have it that does not solve its steps to the end.
#[derive(Clone, Debug, PartialEq)]
pub struct Form {
    /// How it differs, for a sentence: "with 3 evaluations a step".
    pub text: String,
    /// What it does.
    pub coefficients: Coefficients,
}

/// A multistep formula whose result is put into its own right side.
///
/// # Formula
/// `y_0 = sum past_j x_j + h sum rates_j f_j`, `y_(i+1) = h beta_n f(y_i) - sum alpha_j x_j +
/// h sum beta_j f_j` and `x_n = y_times`, oldest first; `f_n` is `f(y_times)` where the result
/// is evaluated, else `f(y_(times-1))`.
#[derive(Clone, Debug, PartialEq)]
pub struct Iterated {
    /// Of the states, in the formula that is put into itself; the last is one.
    pub alpha: Vec<Double>,
    /// Of the rates; as many.
    pub beta: Vec<Double>,
    /// Of earlier states, in what predicts; one less.
    pub past: Vec<Double>,
    /// Of earlier rates, there; as many.
    pub rates: Vec<Double>,
    /// How often.
    pub times: usize,
    /// True where the result is evaluated again.
    pub evaluates: bool,
}

/// Most evaluations of a right side in one step.
const MOST_TIMES: usize = 12;

/// Most corrections where none is evaluated after the last: nobody evaluates often and then
/// leaves the result (common practice, no source).
const MOST_OPEN: usize = 3;

/// The forms of a method that stop after a fixed number of fixed-point iterations; for pairs
/// of a predictor and a corrector the usual modes, and the corrector solved to the end.
pub fn forms(method: &Method) -> Vec<Form> {
    let mut forms = Vec::new();
    for scheme in method.schemes.iter().filter(|scheme| {
        (scheme.is_implicit() || scheme.is_predicted())
            && !matches!(scheme, Scheme::Rosenbrock { .. })
    }) {
        match scheme.coefficients() {
            Coefficients::Stages(stages) => {
                for times in 1..=MOST_TIMES {
                    let starts = [Start::State, Start::Euler, Start::Known];
                    let unfinished = starts.map(|start| unfinished(&stages, times, start));
                    forms.extend(unfinished.map(|stages| Form {
                        text: rounds(times),
                        coefficients: Coefficients::Stages(stages),
                    }));
                }
            }
            Coefficients::Multistep { alpha, beta } => {
                for guess in guesses(alpha.len() - 1) {
                    forms.extend((1..=MOST_TIMES).map(|times| Form {
                        text: rounds(times),
                        coefficients: Coefficients::Iterated(Iterated {
                            alpha: alpha.clone(),
                            beta: beta.clone(),
                            past: guess.0.clone(),
                            rates: guess.1.clone(),
                            times,
                            evaluates: true,
                        }),
                    }));
                }
            }
            Coefficients::Predicted {
                predictor,
                corrector,
            } => forms.extend(modes(&predictor, &corrector)),
            _ => {}
        }
    }
    forms
}

fn rounds(times: usize) -> String {
    match times {
        1 => "with one fixed-point iteration a step".to_owned(),
        more => format!("with {more} fixed-point iterations a step"),
    }
}

/// What the iterations of a stage begin with.
#[derive(Clone, Copy, PartialEq)]
enum Start {
    /// The state at the start of the step.
    State,
    /// An explicit Euler step to the node.
    Euler,
    /// What the stages before it make of the state.
    Known,
}

/// An explicit tableau: every stage is put into its own right side, those before it as they
/// came out; stages that look at each other all together.
fn unfinished(stages: &Stages, times: usize, start: Start) -> Stages {
    let count = stages.weights.len();
    // Rows grow to the size of the whole tableau at the end.
    let mut rows: Vec<Vec<Double>> = Vec::new();
    let mut nodes: Vec<Double> = Vec::new();
    if start == Start::Euler {
        rows.push(Vec::new());
        nodes.push(Double::ZERO);
    }
    // Where the newest value of each stage is.
    let mut newest: Vec<Option<usize>> = vec![None; count];
    let combined = |stage: usize, known: &[Option<usize>]| {
        let end = known.iter().flatten().max().map_or(0, |last| last + 1);
        let mut row = vec![Double::ZERO; end];
        for (place, &link) in known.iter().zip(&stages.matrix[stage]) {
            if let Some(place) = place {
                row[*place] += link;
            }
        }
        row
    };
    let first = |stage: usize, known: &[Option<usize>]| match start {
        Start::State => Vec::new(),
        Start::Euler => vec![stages.nodes[stage]],
        Start::Known => combined(stage, known),
    };
    if stages.is_lower_triangular() {
        for stage in 0..count {
            let solved = stages.matrix[stage][stage].to_f64() != 0.0;
            for time in 0..if solved { times } else { 1 } {
                rows.push(match solved && time == 0 {
                    true => first(stage, &newest),
                    false => combined(stage, &newest),
                });
                nodes.push(stages.nodes[stage]);
                newest[stage] = Some(rows.len() - 1);
            }
        }
    } else {
        for time in 0..times {
            let known = newest.clone();
            for (stage, place) in newest.iter_mut().enumerate() {
                rows.push(match time {
                    0 => first(stage, &[]),
                    _ => combined(stage, &known),
                });
                nodes.push(stages.nodes[stage]);
                *place = Some(rows.len() - 1);
            }
        }
    }
    let size = rows.len();
    let mut weights = vec![Double::ZERO; size];
    for (place, &weight) in newest.iter().flatten().zip(&stages.weights) {
        weights[*place] += weight;
    }
    for row in &mut rows {
        row.resize(size, Double::ZERO);
    }
    Stages {
        matrix: rows,
        weights,
        nodes,
        slopes: vec![Double::ZERO; size],
        ahead: Double::ZERO,
    }
}

/// Weights of earlier states and of their rates.
type Guess = (Vec<Double>, Vec<Double>);

/// What iterations start from: nothing, the newest state, an explicit Euler step, the polynomial through
/// earlier states, an explicit Adams formula of as many of them.
fn guesses(back: usize) -> Vec<Guess> {
    let none = vec![Double::ZERO; back];
    let mut newest = none.clone();
    newest[back - 1] = Double::ONE;
    // From nothing at all, one round later, it is what the formula knows already.
    let mut guesses = vec![
        (none.clone(), none.clone()),
        (newest.clone(), none.clone()),
        (newest.clone(), newest.clone()),
    ];
    if back > 1 {
        // x_n = sum (-1)^(i+1) binomial(back, i) x_(n-i)
        let mut binomial = Double::ONE;
        let mut through = none.clone();
        for i in 1..=back {
            binomial = binomial * Double::from((back + 1 - i) as f64) / Double::from(i as f64);
            through[back - i] = if i % 2 == 1 { binomial } else { -binomial };
        }
        guesses.push((through, none));
        let adams = find(&format!("Adams-Bashforth {back}")).map(|m| m.schemes[0].coefficients());
        if let Some(Coefficients::Multistep { beta, .. }) = adams {
            guesses.push((newest, beta[..back].to_vec()));
        }
    }
    guesses
}

/// The modes of a pair: corrected up to so many times, with or without a last evaluation, and
/// the corrector solved to the end.
fn modes(predictor: &[Double], corrector: &[Double]) -> Vec<Form> {
    let newest = corrector.len() - 1;
    let mut stay = vec![Double::ZERO; newest];
    stay[newest - 1] = Double::ONE;
    let mut alpha: Vec<Double> = stay.iter().map(|&x| -x).collect();
    alpha.push(Double::ONE);
    // Corrected once and evaluated again is the pair itself.
    let modes = [(2..=MOST_TIMES, true), (1..=MOST_OPEN, false)];
    let modes = modes
        .into_iter()
        .flat_map(|(times, evaluates)| times.map(move |times| (times, evaluates)));
    let mut forms: Vec<Form> = modes
        .map(|(times, evaluates)| Form {
            text: format!(
                "with {} a step and {} evaluation after {}",
                match times {
                    1 => "one correction".to_owned(),
                    more => format!("{more} corrections"),
                },
                if evaluates { "an" } else { "no" },
                if times == 1 { "it" } else { "the last" }
            ),
            coefficients: Coefficients::Iterated(Iterated {
                alpha: alpha.clone(),
                beta: corrector.to_vec(),
                past: stay.clone(),
                rates: predictor[..newest].to_vec(),
                times,
                evaluates,
            }),
        })
        .collect();
    forms.push(Form {
        text: "with its corrector solved to the end".to_owned(),
        coefficients: Coefficients::Multistep {
            alpha,
            beta: corrector.to_vec(),
        },
    });
    forms
}

/// Sums of powers of the shift by one step, newest first: `sum_j m_j x_(n-j)`.
type Shifts = Vec<DMatrix<f64>>;

fn times(a: &Shifts, b: &Shifts) -> Shifts {
    let size = a[0].nrows();
    let mut product = vec![DMatrix::zeros(size, size); a.len() + b.len() - 1];
    for (i, x) in a.iter().enumerate() {
        for (j, y) in b.iter().enumerate() {
            product[i + j] += x * y;
        }
    }
    product
}

fn plus(a: &Shifts, b: &Shifts, factor: f64) -> Shifts {
    let size = a[0].nrows();
    let length = a.len().max(b.len());
    let at = |shifts: &Shifts, j: usize| {
        let known = shifts.get(j).cloned();
        known.unwrap_or_else(|| DMatrix::zeros(size, size))
    };
    (0..length).map(|j| at(a, j) + at(b, j) * factor).collect()
}

/// The matrices of one step.
///
/// # Formula
/// With `E x_n = x_(n-1)`, `Z = h beta_n A` and `S = I + Z + ... + Z^(times-2)`, the value that is
/// evaluated last is `y = U(E) x + V(E) f + h beta_n S g`, and `f = A y + g` there. All these
/// matrices are polynomials in `A` and commute, so that `f` can be eliminated from
/// `f = A U x + A V f + (I + h beta_n A S) g` and `alpha(E) x = h beta(E) f`.
pub(super) fn iterated(form: &Iterated, matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let newest = form.alpha.len() - 1;
    let one = identity(size);
    // Newest first, of x_(n-1), x_(n-2), ... or with x_n before them.
    let shifts = |weights: &[Double], factor: f64| -> Shifts {
        let weights = weights.iter().rev();
        weights.map(|w| &one * (factor * w.to_f64())).collect()
    };
    let late = |weights: &[Double], factor: f64| -> Shifts {
        let mut all = vec![DMatrix::zeros(size, size)];
        all.extend(shifts(weights, factor));
        all
    };
    let pull = step * form.beta[newest].to_f64();
    let known = late(&form.alpha[..newest], -1.0);
    let known_rates = late(&form.beta[..newest], step);
    let z = matrix * pull;
    // What `rounds` rounds make of the guess.
    let after = |rounds: usize| {
        let (mut of_states, mut of_rates) = (late(&form.past, 1.0), late(&form.rates, step));
        let mut of_forcing = DMatrix::zeros(size, size);
        let through = vec![z.clone()];
        for _ in 0..rounds {
            of_states = plus(&times(&of_states, &through), &known, 1.0);
            of_rates = plus(&times(&of_rates, &through), &known_rates, 1.0);
            of_forcing = &z * of_forcing + &one * pull;
        }
        (of_states, of_rates, of_forcing)
    };
    let a = vec![matrix.clone()];
    let (states, forcing) = if form.evaluates {
        // Rates of earlier steps are those of their states.
        let (of_states, of_rates, of_forcing) = after(form.times);
        let states = plus(&of_states, &times(&of_rates, &a), 1.0);
        (states, plus(&of_rates, &vec![of_forcing], 1.0))
    } else {
        let (of_states, of_rates, of_forcing) = after(form.times - 1);
        let rates = plus(&vec![one.clone()], &times(&of_rates, &a), -1.0);
        let alpha = shifts(&form.alpha, 1.0);
        let beta = shifts(&form.beta, step);
        let own = times(&of_states, &a);
        // rates(E) alpha(E) x = beta(E) (own(E) x + (I + A of_forcing) g)
        let all = plus(&times(&beta, &own), &times(&rates, &alpha), -1.0);
        let states = plus(&all, &vec![one.clone()], 1.0);
        let inner = vec![&one + matrix * of_forcing];
        (states, times(&beta, &inner))
    };
    let mut states = states;
    if !form.evaluates {
        // The rates before the first step are those of its start: the difference equation
        // holds from the first state on whose rates are all of later ones.
        states.resize(2 * newest + 1, DMatrix::zeros(size, size));
    }
    let back = states.len() - 1;
    let past = states[1..].iter().rev().map(sparse).collect();
    let node = |(j, weight): (usize, &DMatrix<f64>)| Node {
        at: 1.0 - j as f64,
        slope: false,
        weight: sparse(weight),
    };
    let reads = |(_, weight): &(usize, &DMatrix<f64>)| weight.iter().any(|w| *w != 0.0);
    let nodes = forcing.iter().enumerate().filter(reads).map(node).collect();
    // Sizes of what is added up: without signs nothing cancels.
    let sizes = |all: &Shifts| all.iter().fold(one.clone(), |sum, m| sum + m.abs());
    let (spread, pulled) = (sizes(&states), sizes(&forcing));
    Some(Recurrence {
        step,
        past,
        nodes,
        spread: sparse(&(&spread * (1.0 + back as f64))),
        pull: sparse(&pulled),
        roundings: 8.0 + 3.0 * (newest + form.times) as f64 + size.min(8) as f64,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::Library;
    use crate::method::Linear;

    const STEP: f64 = 0.1;

    fn matrix() -> DMatrix<f64> {
        DMatrix::from_row_slice(2, 2, &[-1.0, 2.0, -3.0, -0.5])
    }

    fn forcing(time: f64) -> [f64; 2] {
        [time.sin(), 1.0 + time * time]
    }

    fn rate(x: &[f64; 2], time: f64) -> [f64; 2] {
        let (a, g) = (matrix(), forcing(time));
        [0, 1].map(|i| a[(i, 0)] * x[0] + a[(i, 1)] * x[1] + g[i])
    }

    /// `x + sum of factor times rate`.
    fn add(x: [f64; 2], parts: &[(f64, [f64; 2])]) -> [f64; 2] {
        let sum = |i: usize| parts.iter().map(|(factor, f)| factor * f[i]).sum::<f64>();
        [x[0] + sum(0), x[1] + sum(1)]
    }

    /// The residual of the difference equation over rows that a program has written.
    fn residual(coefficients: &Coefficients, rows: &[[f64; 2]]) -> f64 {
        let a = matrix();
        let step = match coefficients {
            Coefficients::Iterated(form) => iterated(form, &a, STEP).unwrap(),
            other => {
                let library = Library::new();
                let case = library.load("mechanical/oscillator-light", &Default::default());
                let mut linear = Linear::new(&case.unwrap());
                linear.matrix = sparse(&a);
                Recurrence::new(other, &linear, STEP, &Vec::new()).unwrap()
            }
        };
        let back = step.past.len();
        let mut worst: f64 = 0.0;
        for n in back..rows.len() {
            let newest = (n - 1) as f64 * STEP;
            for i in 0..2 {
                let mut value = 0.0;
                for (j, past) in step.past.iter().enumerate() {
                    value += past[(i, 0)] * rows[n - back + j][0];
                    value += past[(i, 1)] * rows[n - back + j][1];
                }
                for node in &step.nodes {
                    let g = forcing(newest + node.at * STEP);
                    value += node.weight[(i, 0)] * g[0] + node.weight[(i, 1)] * g[1];
                }
                worst = worst.max((value - rows[n][i]).abs());
            }
        }
        worst
    }

    fn fitting(method: &str, rows: &[[f64; 2]]) -> Vec<String> {
        let fits = |form: &Form| residual(&form.coefficients, rows) < 1e-13;
        let forms = forms(find(method).unwrap());
        let mut texts: Vec<String> = forms.into_iter().filter(fits).map(|f| f.text).collect();
        texts.dedup();
        texts
    }

    #[test]
    fn backward_euler_and_trapezoidal_stop_early() {
        let (mut euler, mut trapezoidal) = (vec![[1.0, -1.0]], vec![[1.0, -1.0]]);
        for n in 0..30 {
            let (now, then) = (n as f64 * STEP, (n + 1) as f64 * STEP);
            let old = euler[n];
            let mut new = old;
            for _ in 0..3 {
                new = add(old, &[(STEP, rate(&new, then))]);
            }
            euler.push(new);
            let old = trapezoidal[n];
            let first = rate(&old, now);
            let mut new = add(old, &[(STEP, first)]);
            for _ in 0..2 {
                let half = STEP / 2.0;
                new = add(old, &[(half, first), (half, rate(&new, then))]);
            }
            trapezoidal.push(new);
        }
        let of = |times: usize| vec![format!("with {times} fixed-point iterations a step")];
        assert_eq!(fitting("backward Euler", &euler), of(3));
        assert_eq!(fitting("trapezoidal", &trapezoidal), of(2));
    }

    #[test]
    fn stages_that_look_at_each_other_stop_early() {
        // Gauss 4, from `[hairer-wanner-1996]` IV.5.
        let root = 3f64.sqrt() / 6.0;
        let a = [[0.25, 0.25 - root], [0.25 + root, 0.25]];
        let c = [0.5 - root, 0.5 + root];
        let mut rows = vec![[1.0, -1.0]];
        for n in 0..30 {
            let old = rows[n];
            let at = |i: usize| (n as f64 + c[i]) * STEP;
            let mut f = [0, 1].map(|i| rate(&old, at(i)));
            for _ in 0..3 {
                f = [0, 1].map(|i| {
                    let y = add(old, &[(STEP * a[i][0], f[0]), (STEP * a[i][1], f[1])]);
                    rate(&y, at(i))
                });
            }
            rows.push(add(old, &[(STEP / 2.0, f[0]), (STEP / 2.0, f[1])]));
        }
        assert_eq!(
            fitting("Gauss 4", &rows),
            ["with 4 fixed-point iterations a step"]
        );
    }

    #[test]
    fn a_pair_corrects_without_a_last_evaluation() {
        // Adams-Bashforth 3 and Adams-Moulton 3, from `[hairer-norsett-wanner-1993]` III.1.
        let foresee = [5.0, -16.0, 23.0].map(|b| b * STEP / 12.0);
        let correct = [-1.0, 8.0, 5.0].map(|b| b * STEP / 12.0);
        for (times, evaluates) in [(1, false), (2, false), (2, true), (3, true)] {
            let mut rows = vec![[1.0, -1.0], [0.8, -1.2], [0.5, -1.1]];
            let mut rates: Vec<[f64; 2]> = Vec::new();
            rates.extend(
                rows.iter()
                    .enumerate()
                    .map(|(n, x)| rate(x, n as f64 * STEP)),
            );
            for n in 3..40 {
                let time = n as f64 * STEP;
                let (old, f) = (rows[n - 1], &rates[n - 3..n]);
                let three = [0, 1, 2].map(|j| (foresee[j], f[j]));
                let mut new = add(old, &three);
                let mut newest = rate(&new, time);
                for round in 0..times {
                    new = add(
                        old,
                        &[(correct[0], f[1]), (correct[1], f[2]), (correct[2], newest)],
                    );
                    if evaluates || round + 1 < times {
                        newest = rate(&new, time);
                    }
                }
                rows.push(new);
                rates.push(newest);
            }
            let last = if evaluates { "an" } else { "no" };
            let (count, after) = match times {
                1 => ("one correction".to_owned(), "it"),
                more => (format!("{more} corrections"), "the last"),
            };
            let text = format!("with {count} a step and {last} evaluation after {after}");
            let found = fitting("Adams-Bashforth-Moulton 3", &rows);
            assert!(found.contains(&text), "{text}: {found:?}");
            assert!(found.len() <= 2, "{found:?}");
        }
    }
}

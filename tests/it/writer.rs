//! A time-stepping program for the tests, written as such a program usually is: it
//! evaluates the rate `f(t, x)` stage by stage and solves implicit stages by elimination
//! or by iteration, in double or in single precision. It shares the coefficients of the
//! catalogue with the library and nothing else.

use nalgebra::{DMatrix, DVector, RealField};
use stepgauge::case::Case;
use stepgauge::method::{Coefficients, Linear, Method, Record, Side, Window, find};
use stepgauge::number::Double;
use stepgauge::trajectory::Resolution;

/// How a multistep method gets its first steps.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Start {
    Exact,
    Runge,
    Euler,
}

/// Which value of an input the program sees at a jump.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Seen {
    /// `if t >= at`.
    From,
    /// `if t > at`.
    Beyond,
    /// Integrated edge by edge: the value before it at the end of a step, that after it at
    /// the start.
    Own,
}

/// How implicit equations are solved.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Solver {
    Direct,
    /// Fixed-point iteration until a change is below this part of the value.
    Fixed(f64),
    /// Newton's method with the matrix of a step a tenth shorter, likewise.
    Loose(f64),
    /// So many rounds of fixed-point iteration and no more.
    Rounds(u32),
    /// A predictor, corrected so many times, with or without an evaluation after the last.
    Corrections(u32, bool),
}

/// Numbers that the program computes with.
pub trait Number: RealField + Copy {
    fn of(x: f64) -> Self;
    fn wide(self) -> f64;
}

impl Number for f64 {
    fn of(x: f64) -> f64 {
        x
    }
    fn wide(self) -> f64 {
        self
    }
}

impl Number for f32 {
    fn of(x: f64) -> f32 {
        x as f32
    }
    fn wide(self) -> f64 {
        f64::from(self)
    }
}

/// What is run.
#[derive(Clone, Debug)]
pub struct Run<'a> {
    pub case: &'a Case,
    pub method: &'a Method,
    pub scheme: usize,
    /// Distance of the rows.
    pub spacing: f64,
    /// Steps from row to row.
    pub steps: u64,
    pub rows: usize,
    pub start: Start,
    /// Time summed step by step, as many programs do.
    pub summed: bool,
    pub seen: Seen,
    pub solver: Solver,
    /// In single precision, time and all.
    pub single: bool,
    /// Lengths of the steps in place of `spacing`, one row after each.
    pub varied: Option<Vec<f64>>,
}

impl<'a> Run<'a> {
    pub fn new(case: &'a Case, method: &'a Method, spacing: f64, steps: u64, rows: usize) -> Self {
        Run {
            case,
            method,
            scheme: 0,
            spacing,
            steps,
            rows,
            start: Start::Runge,
            summed: false,
            seen: Seen::From,
            solver: Solver::Direct,
            single: false,
            varied: None,
        }
    }
}

pub struct Program<'a, T: Number = f64> {
    linear: &'a Linear,
    matrix: DMatrix<T>,
    seen: Seen,
    solver: Solver,
}

impl<'a, T: Number> Program<'a, T> {
    pub fn new(linear: &'a Linear) -> Self {
        let n = linear.size();
        Program {
            linear,
            matrix: DMatrix::from_fn(n, n, |i, j| T::of(linear.matrix[(i, j)])),
            seen: Seen::From,
            solver: Solver::Direct,
        }
    }

    /// Coupling of the inputs at a time that is a share of a step after its start.
    fn forcing(&self, t: T, share: f64) -> DVector<T> {
        let mut g = vec![0.0; self.linear.size()];
        let (side, near) = match self.seen {
            Seen::From => (Side::After, 0.0),
            Seen::Beyond => (Side::Before, 0.0),
            Seen::Own if share > 0.999_999 => (Side::Before, 1e-9 * t.wide().abs()),
            Seen::Own => (Side::After, 1e-9 * t.wide().abs()),
        };
        self.linear.forcing(t.wide(), side, near, &mut g);
        DVector::from_iterator(g.len(), g.into_iter().map(T::of))
    }

    fn rate(&self, t: T, share: f64, x: &DVector<T>) -> DVector<T> {
        &self.matrix * x + self.forcing(t, share)
    }

    /// `guess` is where a fixed number of rounds begins.
    fn solve(&self, m: DMatrix<T>, right: &DVector<T>, guess: &DVector<T>) -> Option<DVector<T>> {
        let (inverse, tolerance) = match self.solver {
            Solver::Direct | Solver::Corrections(..) => return m.lu().solve(right),
            Solver::Rounds(rounds) => {
                let mut x = guess.clone();
                for _ in 0..rounds {
                    x = right + &x - &m * &x;
                }
                return Some(x);
            }
            Solver::Fixed(tolerance) => (DMatrix::identity(m.nrows(), m.ncols()), tolerance),
            Solver::Loose(tolerance) => {
                let unit = DMatrix::identity(m.nrows(), m.ncols());
                let stale = &m * T::of(0.9) + unit * T::of(0.1);
                (stale.try_inverse()?, tolerance)
            }
        };
        let mut x = right.clone();
        for _ in 0..200 {
            let change = &inverse * (right - &m * &x);
            x += &change;
            if change.amax() <= x.amax() * T::of(tolerance) {
                return Some(x);
            }
        }
        None
    }

    /// One step of a one-step method.
    pub fn step(&self, method: &Coefficients, t: T, h: T, x: &DVector<T>) -> Option<DVector<T>> {
        let n = x.len();
        let c = |v: Double| T::of(v.to_f64());
        match method {
            Coefficients::Stages(stages) => {
                let s = stages.weights.len();
                let ahead = stages.ahead.to_f64();
                let slope = if ahead != 0.0 {
                    let there = t + c(stages.ahead) * h;
                    (self.forcing(there, ahead) - self.forcing(t, 0.0)) / (c(stages.ahead) * h)
                } else if stages.slopes.iter().any(|g| g.to_f64() != 0.0) {
                    let mut g = vec![0.0; n];
                    self.linear
                        .forcing_slope(t.wide(), Side::After, 0.0, &mut g);
                    DVector::from_iterator(n, g.into_iter().map(T::of))
                } else {
                    DVector::zeros(n)
                };
                let share = |i: usize| stages.nodes[i].to_f64();
                let mut k: Vec<DVector<T>> = Vec::new();
                if stages.is_lower_triangular() {
                    for i in 0..s {
                        let mut y = x.clone();
                        for (j, kj) in k.iter().enumerate() {
                            y += kj * (h * c(stages.matrix[i][j]));
                        }
                        let f = self.rate(t + c(stages.nodes[i]) * h, share(i), &y)
                            + &slope * (h * c(stages.slopes[i]));
                        let own = h * c(stages.matrix[i][i]);
                        k.push(if own.wide() == 0.0 {
                            f
                        } else {
                            let m = DMatrix::identity(n, n) - &self.matrix * own;
                            self.solve(m, &f, &f)?
                        });
                    }
                } else {
                    let m = DMatrix::from_fn(s * n, s * n, |r, q| {
                        let a = h * c(stages.matrix[r / n][q / n]) * self.matrix[(r % n, q % n)];
                        if r == q { T::one() - a } else { -a }
                    });
                    let mut right = DVector::zeros(s * n);
                    for i in 0..s {
                        let f = self.rate(t + c(stages.nodes[i]) * h, share(i), x);
                        right.rows_mut(i * n, n).copy_from(&f);
                    }
                    let all = self.solve(m, &right, &right)?;
                    k.extend((0..s).map(|i| all.rows(i * n, n).into_owned()));
                }
                let mut next = x.clone();
                for (ki, w) in k.iter().zip(&stages.weights) {
                    next += ki * (h * c(*w));
                }
                Some(next)
            }
            Coefficients::Exponential { by_state: false } => {
                let mut both = DMatrix::zeros(n + 1, n + 1);
                both.view_mut((0, 0), (n, n)).copy_from(&(&self.matrix * h));
                both.view_mut((0, n), (n, 1))
                    .copy_from(&(self.forcing(t, 0.0) * h));
                let e = both.exp();
                Some(e.view((0, 0), (n, n)) * x + e.view((0, n), (n, 1)))
            }
            Coefficients::Exponential { by_state: true } => {
                // Each state towards where the others, as they stand, pull it.
                let rate = self.rate(t, 0.0, x);
                let mut next = x.clone();
                for i in 0..n {
                    let own = self.matrix[(i, i)];
                    next[i] += if own.wide() == 0.0 {
                        h * rate[i]
                    } else {
                        (h * own).exp_m1() / own * rate[i]
                    };
                }
                Some(next)
            }
            Coefficients::SemiImplicit => {
                // State after state, each with the newest of the others.
                let mut next = x.clone();
                for i in 0..n {
                    let rate = self.rate(t, 0.0, &next)[i];
                    next[i] += h * rate;
                }
                Some(next)
            }
            other => panic!("{other:?} is no one-step method"),
        }
    }

    /// One step of a multistep method from the states so far and their rates; with the new
    /// rate where the method has one of its own.
    fn multistep(
        &self,
        method: &Coefficients,
        t: T,
        h: T,
        past: &[DVector<T>],
        rates: &[DVector<T>],
    ) -> Option<(DVector<T>, Option<DVector<T>>)> {
        let n = self.linear.size();
        let c = |v: &Double| T::of(v.to_f64());
        match method {
            Coefficients::Multistep { alpha, beta } => {
                let k = alpha.len() - 1;
                let mut right = DVector::zeros(n);
                for j in 0..k {
                    right += &rates[j] * (h * c(&beta[j])) - &past[j] * c(&alpha[j]);
                }
                if beta[k].to_f64() == 0.0 {
                    return Some((right, None));
                }
                right += self.forcing(t + h, 1.0) * (h * c(&beta[k]));
                let m = DMatrix::identity(n, n) - &self.matrix * (h * c(&beta[k]));
                self.solve(m, &right, &past[k - 1]).map(|x| (x, None))
            }
            Coefficients::Predicted {
                predictor,
                corrector,
            } => {
                let k = corrector.len() - 1;
                let mut foreseen = past[k - 1].clone();
                let mut next = past[k - 1].clone();
                for j in 0..k {
                    foreseen += &rates[j] * (h * c(&predictor[j]));
                    next += &rates[j] * (h * c(&corrector[j]));
                }
                let (times, evaluates) = match self.solver {
                    Solver::Corrections(times, evaluates) => (times, evaluates),
                    _ => (1, true),
                };
                let known = next;
                let (mut next, mut newest) = (foreseen, DVector::zeros(n));
                for _ in 0..times {
                    newest = self.rate(t + h, 1.0, &next);
                    next = &known + &newest * (h * c(&corrector[k]));
                }
                Some((next, (!evaluates).then_some(newest)))
            }
            other => panic!("{other:?} is no multistep method"),
        }
    }
}

impl Run<'_> {
    /// Stamps and states at every row; `None` where an iteration does not converge.
    pub fn states(&self) -> Option<(Vec<f64>, Vec<Vec<f64>>)> {
        if self.single {
            self.states_in::<f32>()
        } else {
            self.states_in::<f64>()
        }
    }

    fn states_in<T: Number>(&self) -> Option<(Vec<f64>, Vec<Vec<f64>>)> {
        let linear = Linear::new(self.case);
        let n = linear.size();
        let program: Program<T> = Program {
            seen: self.seen,
            solver: self.solver,
            ..Program::new(&linear)
        };
        let scheme = self.method.schemes[self.scheme];
        let coefficients = scheme.coefficients();
        let back = scheme.steps_back();
        let from = linear.window.0;
        let x0 = DVector::from_iterator(n, linear.start.iter().map(|&x| T::of(x)));
        let mut past = vec![x0.clone()];
        let mut rates = vec![program.rate(T::of(from), 0.0, &x0)];
        let exact = (self.start == Start::Exact && back > 1).then(|| self.case.exact().unwrap());
        let (mut times, mut rows) = (vec![from], vec![x0.iter().map(|x| x.wide()).collect()]);
        let mut t = T::of(from);
        for count in 0..(self.rows as u64 - 1) * self.steps {
            let h = match &self.varied {
                Some(steps) => T::of(steps[count as usize]),
                None => T::of(self.spacing / self.steps as f64),
            };
            let after = if self.summed || self.varied.is_some() {
                t + h
            } else {
                T::of(from) + T::of((count + 1) as f64) * h
            };
            let newest = past.last().unwrap().clone();
            let mut own_rate = None;
            let next = if back == 1 {
                program.step(&coefficients, t, h, &newest)?
            } else if past.len() < back {
                match self.start {
                    Start::Exact => {
                        let values = exact.as_ref().unwrap().at(after.wide()).unwrap();
                        DVector::from_iterator(n, values[..n].iter().map(|v| T::of(v.value)))
                    }
                    Start::Runge => program.step(&of("classical RK4"), t, h, &newest)?,
                    Start::Euler => program.step(&of("forward Euler"), t, h, &newest)?,
                }
            } else {
                let (next, rate) = program.multistep(&coefficients, t, h, &past, &rates)?;
                own_rate = rate;
                next
            };
            t = after;
            rates.push(own_rate.unwrap_or_else(|| program.rate(t, 0.0, &next)));
            past.push(next.clone());
            if past.len() > back {
                past.remove(0);
                rates.remove(0);
            }
            if (count + 1) % self.steps == 0 {
                rows.push(next.iter().map(|x| x.wide()).collect());
                let row = (count + 1) / self.steps;
                times.push(match &self.varied {
                    Some(_) => t.wide(),
                    None => from + row as f64 * self.spacing,
                });
            }
        }
        Some((times, rows))
    }
}

fn of(name: &str) -> Coefficients {
    find(name).unwrap().schemes[0].coefficients()
}

/// Rounded as a program prints it.
pub fn printed(value: f64, digits: usize) -> f64 {
    if digits >= 17 {
        value
    } else {
        format!("{:.*e}", digits - 1, value).parse().unwrap()
    }
}

/// The resolution of a column printed with so many significant digits.
pub fn resolution(digits: usize) -> Resolution {
    match digits {
        17.. => Resolution::Full,
        _ => Resolution::Significant(digits as u8),
    }
}

/// Exact values of all channels at stamps.
pub fn truth(case: &Case, times: &[f64]) -> Vec<Vec<Double>> {
    let exact = case.exact().unwrap();
    let mut walk = exact.walk();
    let row = |time: &f64| walk.go(Double::from(*time)).value.clone();
    times.iter().map(row).collect()
}

/// What the library would keep of a file with these rows.
#[derive(Clone)]
pub struct Kept<'a> {
    pub times: &'a [f64],
    pub states: &'a [Vec<f64>],
    pub truth: &'a [Vec<Double>],
    pub digits: usize,
    pub channels: &'a [usize],
    pub spacing: Option<f64>,
    /// Numbers of single precision, printed so that they read back.
    pub single: bool,
}

impl Kept<'_> {
    pub fn record(&self, linear: &Linear, seen: Seen) -> Record {
        let resolution = match self.single && self.digits >= 17 {
            true => Resolution::Single,
            false => resolution(self.digits),
        };
        let side = match seen {
            Seen::Beyond => Side::Before,
            Seen::From | Seen::Own => Side::After,
        };
        let mut window = Window::default();
        for ((time, row), truth) in self.times.iter().zip(self.states).zip(self.truth) {
            if row.iter().any(|x| !x.is_finite() || x.abs() > 1e30) {
                break;
            }
            window.times.push(*time);
            window.time_doubts.push(if self.spacing.is_some() {
                0.0
            } else {
                0.5 * (time.next_up() - time)
            });
            for &channel in self.channels {
                let mut value = linear.observe(channel, row, *time, side, 0.0);
                if self.single {
                    value = f64::from(value as f32);
                }
                let value = printed(value, self.digits);
                window.values.push(value);
                let error = Double::from(value) - truth[channel];
                window.errors.push(error.to_f64());
                window.doubts.push(resolution.at(value));
            }
        }
        let unit = if self.single && self.digits >= 9 {
            f64::from(f32::EPSILON)
        } else {
            f64::EPSILON
        };
        Record {
            channels: self.channels.to_vec(),
            spacing: self
                .spacing
                .map(|spacing| (spacing, f64::EPSILON * spacing)),
            unit: unit / 2.0,
            windows: vec![window],
        }
    }
}

/// One step of a one-step method over a model that a fault may have been put into.
pub fn one_step(
    linear: &Linear,
    method: &Coefficients,
    t: f64,
    h: f64,
    x: &DVector<f64>,
) -> DVector<f64> {
    let n = linear.size();
    let program = Program {
        linear,
        matrix: DMatrix::from_fn(n, n, |i, j| linear.matrix[(i, j)]),
        seen: Seen::From,
        solver: Solver::Direct,
    };
    program.step(method, t, h, x).unwrap()
}

/// What the library would keep of a file with all states of a run.
pub fn record(
    case: &Case,
    times: &[f64],
    states: &[Vec<f64>],
    spacing: f64,
    digits: usize,
) -> Record {
    let linear = Linear::new(case);
    let channels: Vec<usize> = (0..linear.size()).collect();
    let kept = Kept {
        times,
        states,
        truth: &truth(case, times),
        digits,
        channels: &channels,
        spacing: Some(spacing),
        single: false,
    };
    kept.record(&linear, Seen::From)
}

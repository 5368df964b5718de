//! A time-stepping program for the tests, written as such a program usually is: it
//! evaluates the rate `f(t, x)` stage by stage and solves implicit stages by elimination.
//! It shares the coefficients of the catalogue with the library and nothing else.

use nalgebra::{DMatrix, DVector};
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

/// What is run, and how it is printed.
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
}

pub struct Program<'a> {
    linear: &'a Linear,
    matrix: DMatrix<f64>,
}

impl<'a> Program<'a> {
    pub fn new(linear: &'a Linear) -> Program<'a> {
        let n = linear.size();
        let matrix = DMatrix::from_fn(n, n, |i, j| linear.matrix[(i, j)]);
        Program { linear, matrix }
    }

    fn forcing(&self, t: f64) -> DVector<f64> {
        let mut g = vec![0.0; self.linear.size()];
        self.linear.forcing(t, Side::After, 0.0, &mut g);
        DVector::from_vec(g)
    }

    fn rate(&self, t: f64, x: &DVector<f64>) -> DVector<f64> {
        &self.matrix * x + self.forcing(t)
    }

    /// One step of a one-step method.
    pub fn step(&self, method: &Coefficients, t: f64, h: f64, x: &DVector<f64>) -> DVector<f64> {
        let n = x.len();
        match method {
            Coefficients::Stages(stages) => {
                let s = stages.weights.len();
                let c = |v: Double| v.to_f64();
                let slope = if stages.slopes.iter().any(|g| c(*g) != 0.0) {
                    let mut g = vec![0.0; n];
                    self.linear.forcing_slope(t, Side::After, 0.0, &mut g);
                    DVector::from_vec(g)
                } else {
                    DVector::zeros(n)
                };
                let mut k: Vec<DVector<f64>> = Vec::new();
                if stages.is_lower_triangular() {
                    for i in 0..s {
                        let mut y = x.clone();
                        for (j, kj) in k.iter().enumerate() {
                            y += kj * (h * c(stages.matrix[i][j]));
                        }
                        let f = self.rate(t + c(stages.nodes[i]) * h, &y)
                            + &slope * (h * c(stages.slopes[i]));
                        let own = h * c(stages.matrix[i][i]);
                        k.push(if own == 0.0 {
                            f
                        } else {
                            let m = DMatrix::identity(n, n) - &self.matrix * own;
                            m.lu().solve(&f).unwrap()
                        });
                    }
                } else {
                    let m = DMatrix::from_fn(s * n, s * n, |r, q| {
                        let a = h * c(stages.matrix[r / n][q / n]) * self.matrix[(r % n, q % n)];
                        if r == q { 1.0 - a } else { -a }
                    });
                    let mut right = DVector::zeros(s * n);
                    for i in 0..s {
                        let f = self.rate(t + c(stages.nodes[i]) * h, x);
                        right.rows_mut(i * n, n).copy_from(&f);
                    }
                    let all = m.lu().solve(&right).unwrap();
                    k.extend((0..s).map(|i| all.rows(i * n, n).into_owned()));
                }
                let mut next = x.clone();
                for (ki, w) in k.iter().zip(&stages.weights) {
                    next += ki * (h * c(*w));
                }
                next
            }
            Coefficients::Exponential { .. } => {
                let mut both = DMatrix::zeros(n + 1, n + 1);
                both.view_mut((0, 0), (n, n)).copy_from(&(&self.matrix * h));
                both.view_mut((0, n), (n, 1))
                    .copy_from(&(self.forcing(t) * h));
                let e = both.exp();
                e.view((0, 0), (n, n)) * x + e.view((0, n), (n, 1))
            }
            Coefficients::SemiImplicit => {
                // State after state, each with the newest of the others.
                let mut next = x.clone();
                for i in 0..n {
                    let rate = self.rate(t, &next)[i];
                    next[i] += h * rate;
                }
                next
            }
            other => panic!("{other:?} is no one-step method"),
        }
    }

    /// One step of a multistep method from the states so far and their rates.
    fn multistep(
        &self,
        method: &Coefficients,
        t: f64,
        h: f64,
        past: &[DVector<f64>],
        rates: &[DVector<f64>],
    ) -> DVector<f64> {
        let n = self.linear.size();
        let c = |v: &Double| v.to_f64();
        match method {
            Coefficients::Multistep { alpha, beta } => {
                let k = alpha.len() - 1;
                let mut right = DVector::zeros(n);
                for j in 0..k {
                    right += &rates[j] * (h * c(&beta[j])) - &past[j] * c(&alpha[j]);
                }
                if c(&beta[k]) == 0.0 {
                    return right;
                }
                right += self.forcing(t + h) * (h * c(&beta[k]));
                let m = DMatrix::identity(n, n) - &self.matrix * (h * c(&beta[k]));
                m.lu().solve(&right).unwrap()
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
                next + self.rate(t + h, &foreseen) * (h * c(&corrector[k]))
            }
            other => panic!("{other:?} is no multistep method"),
        }
    }
}

impl Run<'_> {
    /// States at every row, with the stamps.
    pub fn states(&self) -> (Vec<f64>, Vec<Vec<f64>>) {
        let linear = Linear::new(self.case);
        let program = Program::new(&linear);
        let scheme = self.method.schemes[self.scheme];
        let coefficients = scheme.coefficients();
        let back = scheme.steps_back();
        let h = self.spacing / self.steps as f64;
        let from = linear.window.0;
        let x0 = DVector::from_vec(linear.start.clone());
        let mut past = vec![x0.clone()];
        let mut rates = vec![program.rate(from, &x0)];
        let exact = (self.start == Start::Exact && back > 1).then(|| self.case.exact().unwrap());
        let (mut times, mut rows) = (vec![from], vec![linear.start.clone()]);
        let mut summed = from;
        for count in 0..(self.rows as u64 - 1) * self.steps {
            let t = if self.summed {
                summed
            } else {
                from + count as f64 * h
            };
            let newest = past.last().unwrap().clone();
            let next = if back == 1 {
                program.step(&coefficients, t, h, &newest)
            } else if past.len() < back {
                match self.start {
                    Start::Exact => {
                        let n = linear.size();
                        let values = exact.as_ref().unwrap().at(t + h).unwrap();
                        DVector::from_iterator(n, values[..n].iter().map(|v| v.value))
                    }
                    Start::Runge => program.step(&of("classical RK4"), t, h, &newest),
                    Start::Euler => program.step(&of("forward Euler"), t, h, &newest),
                }
            } else {
                program.multistep(&coefficients, t, h, &past, &rates)
            };
            summed = t + h;
            rates.push(program.rate(
                if self.summed {
                    summed
                } else {
                    from + (count + 1) as f64 * h
                },
                &next,
            ));
            past.push(next.clone());
            if past.len() > back {
                past.remove(0);
                rates.remove(0);
            }
            if (count + 1) % self.steps == 0 {
                rows.push(next.iter().copied().collect());
                let row = (count + 1) / self.steps;
                times.push(from + row as f64 * self.spacing);
            }
        }
        (times, rows)
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

/// What the library would keep of a file with these states.
pub fn record(
    case: &Case,
    times: &[f64],
    rows: &[Vec<f64>],
    spacing: f64,
    digits: usize,
) -> Record {
    let exact = case.exact().unwrap();
    let mut walk = exact.walk();
    let resolution = match digits {
        17.. => Resolution::Full,
        _ => Resolution::Significant(digits as u8),
    };
    let mut window = Window::default();
    for (time, row) in times.iter().zip(rows) {
        if row.iter().any(|x| !x.is_finite() || x.abs() > 1e30) {
            break;
        }
        window.times.push(*time);
        window.time_doubts.push(0.0);
        let truth = walk.go(Double::from(*time)).value.clone();
        for (value, truth) in row.iter().zip(&truth) {
            let value = printed(*value, digits);
            window.values.push(value);
            window.errors.push((Double::from(value) - *truth).to_f64());
            window.doubts.push(resolution.at(value));
        }
    }
    Record {
        channels: (0..case.states.len()).collect(),
        spacing: Some((spacing, 0.0)),
        unit: f64::EPSILON / 2.0,
        windows: vec![window],
    }
}

//! What a method at one step does to a linear model, as matrices: the new state is a sum
//! of earlier states and of input values at the method's nodes.

use nalgebra::DMatrix;

use super::linear::Linear;
use super::scheme::{Coefficients, Stages};
use crate::number::{Double, Matrix};

/// How a program looks at its inputs within a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Reading {
    /// At the method's own nodes.
    AtNodes,
    /// Held from the start of the step.
    Held,
    /// Held from the end of the step.
    FromEnd,
    /// The mean of the values at start and end.
    Mean,
}

/// The matrices of one step.
///
/// # Formula
/// `x_(n+1) = sum_j past_j x_(n+1-k+j) + sum_l weight_l g(t_n + at_l h)`, `g` the forcing
/// of [`Linear::forcing`].
#[derive(Clone, Debug)]
pub struct Recurrence {
    /// The step.
    pub step: f64,
    /// One matrix for each earlier state, oldest first.
    pub past: Vec<Matrix<f64>>,
    /// Where the forcing is read, and what it does.
    pub nodes: Vec<Node>,
    /// Bounds of the magnitudes that are added up in one step, per unit of the largest
    /// state: what one rounding is relative to.
    pub spread: Matrix<f64>,
    /// The same per unit of the forcing.
    pub pull: Matrix<f64>,
    /// Roundings of one step, one after the other.
    pub roundings: f64,
}

/// One reading of the forcing.
#[derive(Clone, Debug)]
pub struct Node {
    /// In steps from the newest known state.
    pub at: f64,
    /// True where the rate of change of the forcing is meant.
    pub slope: bool,
    /// With the step in it.
    pub weight: Matrix<f64>,
}

/// The order in which [`super::Scheme::SemiImplicit`] moves states: a rank for each; those
/// of a higher rank see the new values of those of a lower one.
pub type Ranks = Vec<usize>;

impl Recurrence {
    /// The matrices of a step of length `h`; `None` where the step cannot be solved.
    ///
    /// `ranks` orders the states of a semi-implicit step.
    pub fn new(
        coefficients: &Coefficients,
        linear: &Linear,
        step: f64,
        ranks: &Ranks,
    ) -> Option<Recurrence> {
        let matrix = dense(&linear.matrix);
        match coefficients {
            Coefficients::Stages(stages) if stages.is_lower_triangular() => {
                one_by_one(stages, &matrix, step)
            }
            Coefficients::Stages(stages) => together(stages, &matrix, step),
            Coefficients::Multistep { alpha, beta } => multistep(alpha, beta, &matrix, step),
            Coefficients::Predicted {
                predictor,
                corrector,
            } => predicted(predictor, corrector, &matrix, step),
            Coefficients::SemiImplicit => semi_implicit(ranks, &matrix, step),
            Coefficients::Exponential { by_state: false } => exponential(&matrix, step),
            Coefficients::Exponential { by_state: true } => by_state(&matrix, step),
        }
        .filter(Recurrence::is_finite)
    }

    /// Number of states.
    pub fn size(&self) -> usize {
        self.spread.size()
    }

    /// How many earlier states a step needs.
    pub fn back(&self) -> usize {
        self.past.len()
    }

    /// True where the step reads the forcing elsewhere than at its start.
    pub fn looks_ahead(&self) -> bool {
        self.nodes.iter().any(|node| node.at > 0.0 || node.slope)
    }

    /// The same step in a program that looks at its inputs in another way.
    pub fn with_reading(mut self, reading: Reading) -> Recurrence {
        let size = self.size();
        let within = |node: &Node| node.at >= 0.0;
        let mut sum: Matrix<f64> = Matrix::zero(size);
        for node in self.nodes.iter().filter(|node| within(node) && !node.slope) {
            sum = sum.zip(&node.weight, |a, b| a + b);
        }
        let moved: Vec<(f64, f64)> = match reading {
            Reading::AtNodes => return self,
            Reading::Held => vec![(0.0, 1.0)],
            Reading::FromEnd => vec![(1.0, 1.0)],
            Reading::Mean => vec![(0.0, 0.5), (1.0, 0.5)],
        };
        self.nodes.retain(|node| !within(node));
        self.nodes.extend(moved.into_iter().map(|(at, share)| Node {
            at,
            slope: false,
            weight: sum.map(|w| share * w),
        }));
        self
    }

    fn is_finite(&self) -> bool {
        let finite = |matrix: &Matrix<f64>| matrix.rows().flatten().all(|x| x.is_finite());
        self.past.iter().all(finite)
            && finite(&self.spread)
            && self.nodes.iter().all(|node| finite(&node.weight))
    }
}

fn dense(matrix: &Matrix<f64>) -> DMatrix<f64> {
    DMatrix::from_fn(matrix.size(), matrix.size(), |i, j| matrix[(i, j)])
}

fn sparse(matrix: &DMatrix<f64>) -> Matrix<f64> {
    let mut result = Matrix::zero(matrix.nrows());
    for i in 0..matrix.nrows() {
        for j in 0..matrix.ncols() {
            result[(i, j)] = matrix[(i, j)];
        }
    }
    result
}

fn identity(size: usize) -> DMatrix<f64> {
    DMatrix::identity(size, size)
}

/// `| M^-1 | | M |` as one number: how far the solution of a system amplifies its rounding
/// (Skeel). At least one.
fn skeel(matrix: &DMatrix<f64>, inverse: &DMatrix<f64>) -> f64 {
    let product = inverse.abs() * matrix.abs();
    let rows = product.row_iter().map(|row| row.iter().sum::<f64>());
    rows.fold(1.0, f64::max)
}

/// Gathers the weights of the stages into a step.
fn of_weights(
    stages: &Stages,
    weights: &[DMatrix<f64>],
    sizes: &[DMatrix<f64>],
    matrix: &DMatrix<f64>,
    step: f64,
    amplified: f64,
) -> Recurrence {
    let size = matrix.nrows();
    let mut stay = identity(size);
    let mut spread = identity(size);
    let mut pull = DMatrix::zeros(size, size);
    let mut nodes = Vec::new();
    for (stage, weight) in weights.iter().enumerate() {
        let moved = weight * matrix;
        spread += &sizes[stage] * matrix.abs();
        pull += &sizes[stage];
        stay += moved;
        let node = |at: f64, slope: bool, weight: DMatrix<f64>| Node {
            at,
            slope,
            weight: sparse(&weight),
        };
        if weight.iter().any(|w| *w != 0.0) {
            nodes.push(node(stages.nodes[stage].to_f64(), false, weight.clone()));
            let slope = stages.slopes[stage].to_f64();
            if slope != 0.0 {
                nodes.push(node(0.0, true, weight * (slope * step)));
            }
        }
    }
    Recurrence {
        step,
        past: vec![sparse(&stay)],
        nodes: merged(nodes),
        spread: sparse(&(spread * amplified)),
        pull: sparse(&(pull * amplified)),
        roundings: 4.0 + 2.0 * weights.len() as f64 + size.min(8) as f64,
    }
}

/// Readings at one place together.
fn merged(nodes: Vec<Node>) -> Vec<Node> {
    let mut merged: Vec<Node> = Vec::new();
    for node in nodes {
        let same =
            |other: &&mut Node| (other.at - node.at).abs() < 1e-14 && other.slope == node.slope;
        match merged.iter_mut().find(same) {
            Some(other) => other.weight = other.weight.zip(&node.weight, |a, b| a + b),
            None => merged.push(node),
        }
    }
    merged
}

/// Stages that follow from each other: weights from the last stage to the first.
fn one_by_one(stages: &Stages, matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let (size, count) = (matrix.nrows(), stages.weights.len());
    let mut weights = vec![DMatrix::zeros(size, size); count];
    // What is added up for each, in magnitude: at large steps the terms cancel, their
    // roundings do not.
    let mut sizes = weights.clone();
    let mut amplified = 1.0f64;
    for i in (0..count).rev() {
        let mut right = identity(size) * (step * stages.weights[i].to_f64());
        let mut added = right.abs();
        for (j, later) in weights.iter().enumerate().skip(i + 1) {
            let link = step * stages.matrix[j][i].to_f64();
            if link != 0.0 {
                right += later * matrix * link;
                added += &sizes[j] * matrix.abs() * link.abs();
            }
        }
        let own = step * stages.matrix[i][i].to_f64();
        if own == 0.0 {
            (weights[i], sizes[i]) = (right, added);
        } else {
            let system = identity(size) - matrix * own;
            let inverse = system.clone().try_inverse()?;
            amplified = amplified.max(skeel(&system, &inverse));
            sizes[i] = inverse.abs() * added;
            // The right side commutes with it: both are made of the one matrix.
            weights[i] = system.lu().solve(&right)?;
        }
    }
    Some(of_weights(
        stages, &weights, &sizes, matrix, step, amplified,
    ))
}

/// Stages that have to be solved for together.
fn together(stages: &Stages, matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let (size, count) = (matrix.nrows(), stages.weights.len());
    let system = DMatrix::from_fn(size * count, size * count, |row, column| {
        let (i, j) = (row / size, column / size);
        let link = step * stages.matrix[i][j].to_f64() * matrix[(row % size, column % size)];
        if row == column { 1.0 - link } else { -link }
    });
    let right = DMatrix::from_fn(size * count, size, |row, column| {
        let same = row % size == column;
        if same {
            step * stages.weights[row / size].to_f64()
        } else {
            0.0
        }
    });
    let inverse = system.clone().try_inverse()?;
    let amplified = skeel(&system, &inverse);
    let solved = system.transpose().lu().solve(&right)?;
    let weights: Vec<DMatrix<f64>> = (0..count)
        .map(|i| solved.rows(i * size, size).transpose())
        .collect();
    let sizes: Vec<DMatrix<f64>> = weights.iter().map(DMatrix::abs).collect();
    Some(of_weights(
        stages, &weights, &sizes, matrix, step, amplified,
    ))
}

fn multistep(
    alpha: &[Double],
    beta: &[Double],
    matrix: &DMatrix<f64>,
    step: f64,
) -> Option<Recurrence> {
    let size = matrix.nrows();
    let newest = alpha.len() - 1;
    let own = step * beta[newest].to_f64();
    let (inverse, amplified) = if own == 0.0 {
        (identity(size), 1.0)
    } else {
        let system = identity(size) - matrix * own;
        let inverse = system.clone().try_inverse()?;
        let amplified = skeel(&system, &inverse);
        (inverse, amplified)
    };
    let mut spread = DMatrix::zeros(size, size);
    let mut pull = DMatrix::zeros(size, size);
    let (mut past, mut nodes) = (Vec::new(), Vec::new());
    for j in 0..=newest {
        let (a, b) = (alpha[j].to_f64(), step * beta[j].to_f64());
        if j < newest {
            past.push(sparse(&(&inverse * (matrix * b - identity(size) * a))));
            spread += inverse.abs() * (matrix.abs() * b.abs() + identity(size) * a.abs());
        } else {
            spread += identity(size);
        }
        if b != 0.0 {
            let weight = &inverse * b;
            pull += weight.abs();
            nodes.push(Node {
                at: j as f64 - (newest as f64 - 1.0),
                slope: false,
                weight: sparse(&weight),
            });
        }
    }
    Some(Recurrence {
        step,
        past,
        nodes,
        spread: sparse(&(spread * amplified)),
        pull: sparse(&(pull * amplified)),
        roundings: 6.0 + 2.0 * alpha.len() as f64 + size.min(8) as f64,
    })
}

/// Predict, evaluate, correct, evaluate.
fn predicted(
    predictor: &[Double],
    corrector: &[Double],
    matrix: &DMatrix<f64>,
    step: f64,
) -> Option<Recurrence> {
    let size = matrix.nrows();
    let newest = corrector.len() - 1;
    let pull_newest = step * corrector[newest].to_f64();
    let mut spread = identity(size);
    let mut pull = DMatrix::zeros(size, size);
    let (mut past, mut nodes) = (Vec::new(), Vec::new());
    for j in 0..=newest {
        let stay = identity(size) * if j + 1 == newest { 1.0 } else { 0.0 };
        let (foreseen, own) = (step * predictor[j].to_f64(), step * corrector[j].to_f64());
        let mut weight = identity(size) * own;
        if j < newest {
            weight += matrix * (pull_newest * foreseen);
            let inner = matrix * foreseen + &stay;
            past.push(sparse(
                &(&stay + matrix * own + matrix * pull_newest * &inner),
            ));
            let inner = matrix.abs() * foreseen.abs() + &stay;
            spread += matrix.abs() * own.abs() + matrix.abs() * pull_newest.abs() * inner + stay;
        }
        if weight.iter().any(|w| *w != 0.0) {
            pull += weight.abs();
            nodes.push(Node {
                at: j as f64 - (newest as f64 - 1.0),
                slope: false,
                weight: sparse(&weight),
            });
        }
    }
    Some(Recurrence {
        step,
        past,
        nodes,
        spread: sparse(&spread),
        pull: sparse(&pull),
        roundings: 8.0 + 3.0 * predictor.len() as f64 + size.min(8) as f64,
    })
}

/// `(I - hL) x_(n+1) = (I + hU) x_n + h g(t_n)`, where `L` holds what a state sees of those
/// moved before it.
fn semi_implicit(ranks: &Ranks, matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let rank = |i: usize| ranks.get(i).copied().unwrap_or(i);
    let seen = DMatrix::from_fn(size, size, |i, j| {
        if rank(j) < rank(i) {
            step * matrix[(i, j)]
        } else {
            0.0
        }
    });
    let system = identity(size) - &seen;
    let inverse = system.try_inverse()?;
    let stay = &inverse * (identity(size) + matrix * step - &seen);
    let spread = inverse.abs() * (identity(size) + matrix.abs() * step);
    Some(Recurrence {
        step,
        past: vec![sparse(&stay)],
        nodes: vec![Node {
            at: 0.0,
            slope: false,
            weight: sparse(&(&inverse * step)),
        }],
        spread: sparse(&spread),
        pull: sparse(&(inverse.abs() * step)),
        roundings: 6.0 + 2.0 * size as f64,
    })
}

/// `exp(hA)` and `h phi(hA)` as blocks of one exponential (Van Loan).
fn exponential(matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let both = DMatrix::from_fn(2 * size, 2 * size, |i, j| {
        if i < size && j < size {
            step * matrix[(i, j)]
        } else if i < size && j == i + size {
            step
        } else {
            0.0
        }
    });
    // Programs compute it in several ways, all of which lose digits with the norm.
    let norm = both
        .row_iter()
        .map(|r| r.iter().map(|x| x.abs()).sum::<f64>());
    let amplified = 8.0 * (1.0 + norm.fold(0.0, f64::max));
    let exponential = both.exp();
    let stay = exponential.view((0, 0), (size, size)).into_owned();
    let weight = exponential.view((0, size), (size, size)).into_owned();
    let spread = (stay.abs() + identity(size)) * amplified;
    let pull = weight.abs() * amplified;
    Some(Recurrence {
        step,
        past: vec![sparse(&stay)],
        nodes: vec![Node {
            at: 0.0,
            slope: false,
            weight: sparse(&weight),
        }],
        spread: sparse(&spread),
        pull: sparse(&pull),
        roundings: 8.0,
    })
}

/// Each state by itself: `exp(h a_ii)` for its own rate, everything else held.
fn by_state(matrix: &DMatrix<f64>, step: f64) -> Option<Recurrence> {
    let size = matrix.nrows();
    let own = |i: usize| step * matrix[(i, i)];
    // (exp(z) - 1) / z without its cancellation.
    let phi = |z: f64| if z == 0.0 { 1.0 } else { z.exp_m1() / z };
    let diagonal = |of: &dyn Fn(usize) -> f64| {
        DMatrix::from_fn(size, size, |i, j| if i == j { of(i) } else { 0.0 })
    };
    let weight = diagonal(&|i| step * phi(own(i)));
    let others = DMatrix::from_fn(size, size, |i, j| if i == j { 0.0 } else { matrix[(i, j)] });
    let stay = diagonal(&|i| own(i).exp()) + &weight * &others;
    let amplified = 8.0 * (0..size).map(|i| 1.0 + own(i).abs()).fold(1.0, f64::max);
    let spread = (stay.abs() + identity(size)) * amplified;
    Some(Recurrence {
        step,
        past: vec![sparse(&stay)],
        nodes: vec![Node {
            at: 0.0,
            slope: false,
            weight: sparse(&weight),
        }],
        spread: sparse(&spread),
        pull: sparse(&(weight.abs() * amplified)),
        roundings: 8.0,
    })
}

//! What a method at one step does to a linear model, as matrices: the new state is a sum
//! of earlier states and of input values at the method's nodes.

use nalgebra::DMatrix;

use super::exponential::{by_state, exponential};
use super::iterated::iterated;
use super::linear::Linear;
use super::precise::Whole;
use super::scheme::{Coefficients, Stages};
use crate::number::{Double, Matrix};

/// How a program looks at its inputs within a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Reading {
    /// At the method's own nodes.
    AtNodes,
    /// Held from the start of the step.
    Held,
    /// Held from the end of the step.
    FromEnd,
    /// The mean of the values at start and end.
    Mean,
    /// On the line from the value at the start to that at the end.
    Linear,
    /// At the method's own nodes, where a node on a jump sees either side of it.
    EitherSide,
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
        let matrix = linear.matrix.dense();
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
            Coefficients::Iterated(form) => iterated(form, &matrix, step),
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
        if reading == Reading::Linear {
            return self.on_lines();
        }
        let mut sum: Matrix<f64> = Matrix::zero(size);
        for node in self.nodes.iter().filter(|node| within(node) && !node.slope) {
            sum = sum.zip(&node.weight, |a, b| a + b);
        }
        let moved: Vec<(f64, f64)> = match reading {
            Reading::AtNodes | Reading::EitherSide | Reading::Linear => return self,
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

    /// The same step where the inputs are known at its start and end only.
    fn on_lines(mut self) -> Recurrence {
        let step = self.step;
        let known = |node: &Node| node.at < 0.0 || !node.slope && [0.0, 1.0].contains(&node.at);
        let (mut nodes, others): (Vec<Node>, Vec<Node>) = self.nodes.drain(..).partition(known);
        for node in others {
            let (start, end) = if node.slope {
                (-1.0 / step, 1.0 / step)
            } else {
                (1.0 - node.at, node.at)
            };
            nodes.extend([(0.0, start), (1.0, end)].map(|(at, share)| Node {
                at,
                slope: false,
                weight: node.weight.map(|w| share * w),
            }));
        }
        self.nodes = merged(nodes);
        self
    }

    /// A one-step method that holds the forcing from the start of its step.
    pub(super) fn held(
        step: f64,
        stay: &DMatrix<f64>,
        weight: &DMatrix<f64>,
        (spread, pull): (&DMatrix<f64>, &DMatrix<f64>),
        roundings: f64,
    ) -> Recurrence {
        Recurrence {
            step,
            past: vec![sparse(stay)],
            nodes: vec![Node {
                at: 0.0,
                slope: false,
                weight: sparse(weight),
            }],
            spread: sparse(spread),
            pull: sparse(pull),
            roundings,
        }
    }

    fn is_finite(&self) -> bool {
        let finite = |matrix: &Matrix<f64>| matrix.rows().flatten().all(|x| x.is_finite());
        self.past.iter().all(finite)
            && finite(&self.spread)
            && self.nodes.iter().all(|node| finite(&node.weight))
    }
}

pub(super) fn sparse(matrix: &DMatrix<f64>) -> Matrix<f64> {
    let mut result = Matrix::zero(matrix.nrows());
    for i in 0..matrix.nrows() {
        for j in 0..matrix.ncols() {
            result[(i, j)] = matrix[(i, j)];
        }
    }
    result
}

pub(super) fn identity(size: usize) -> DMatrix<f64> {
    DMatrix::identity(size, size)
}

/// `|M|` or `|L| |U|` with the rows as they were, whichever is larger: what the backward
/// error of elimination with row exchanges is relative to. The exchanges mix rows, so that
/// a slow state takes part in the roundings of a fast one.
fn eliminated(system: &DMatrix<f64>) -> DMatrix<f64> {
    let factors = system.clone().lu();
    let mut product = factors.l().abs() * factors.u().abs();
    factors.p().inv_permute_rows(&mut product);
    product.zip_map(&system.abs(), f64::max)
}

/// Gathers the weights of the stages into a step.
fn of_weights(
    stages: &Stages,
    weights: Vec<DMatrix<f64>>,
    matrix: &DMatrix<f64>,
    step: f64,
    mut magnitudes: Magnitudes,
) -> Recurrence {
    let size = matrix.nrows();
    let Whole { weights, stay } = Whole::new(stages, weights, matrix, step);
    let mut nodes = Vec::new();
    for (stage, weight) in weights.iter().enumerate() {
        let node = |at: f64, slope: bool, weight: DMatrix<f64>| Node {
            at,
            slope,
            weight: sparse(&weight),
        };
        if weight.iter().any(|w| *w != 0.0) {
            nodes.push(node(stages.nodes[stage].to_f64(), false, weight.clone()));
            let slope = stages.slopes[stage].to_f64();
            let ahead = stages.ahead.to_f64();
            if slope != 0.0 && ahead == 0.0 {
                nodes.push(node(0.0, true, weight * (slope * step)));
            } else if slope != 0.0 {
                let share = weight * (slope / ahead);
                magnitudes.pull += share.abs() * 2.0;
                nodes.push(node(ahead, false, share.clone()));
                nodes.push(node(0.0, false, -share));
            }
        }
    }
    Recurrence {
        step,
        past: vec![sparse(&stay)],
        nodes: merged(nodes),
        spread: sparse(&magnitudes.spread),
        pull: sparse(&magnitudes.pull),
        roundings: 4.0 + 2.0 * weights.len() as f64 + size.min(8) as f64,
    }
}

/// What the roundings of the stages of one step are relative to.
///
/// # Formula
/// With `W_i` what the right side `f_i = A y_i + g_i` of stage `i` does to the new state and
/// `M_i k_i = f_i`: a rounding of `f_i` is relative to `|A| |y_i| + |g_i|`, the solution
/// has a backward error of `|L_i| |U_i| |k_i|`, and `x + h sum w_i k_i` adds up
/// `|x| + h sum |w_i| |k_i|`. Bounds of `y_i` and `k_i` follow stage by stage without the
/// cancellation that a stiff step rests on.
struct Magnitudes {
    spread: DMatrix<f64>,
    pull: DMatrix<f64>,
}

impl Magnitudes {
    fn new(size: usize) -> Magnitudes {
        Magnitudes {
            spread: identity(size),
            pull: DMatrix::zeros(size, size),
        }
    }

    /// Adds a stage: `W`, the share `h |w|` of its slope, then bounds of `f`, `|M| k` and
    /// `k`, each per unit of the states and of the forcing.
    fn add(
        &mut self,
        weight: &DMatrix<f64>,
        share: f64,
        right: &[DMatrix<f64>; 2],
        solved: &[DMatrix<f64>; 2],
        slope: &[DMatrix<f64>; 2],
    ) {
        let weight = weight.abs();
        let of =
            |which: usize| &weight * (&right[which] + &solved[which]) + &slope[which] * share.abs();
        self.spread += of(0);
        self.pull += of(1);
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
    let mut solvers = vec![None; count];
    for i in (0..count).rev() {
        let mut right = identity(size) * (step * stages.weights[i].to_f64());
        for (j, later) in weights.iter().enumerate().skip(i + 1) {
            let link = step * stages.matrix[j][i].to_f64();
            if link != 0.0 {
                right += later * matrix * link;
            }
        }
        let own = step * stages.matrix[i][i].to_f64();
        weights[i] = if own == 0.0 {
            right
        } else {
            let system = identity(size) - matrix * own;
            let inverse = system.clone().try_inverse()?;
            solvers[i] = Some((eliminated(&system), inverse.abs()));
            // The right side commutes with it: both are made of the one matrix.
            system.lu().solve(&right)?
        };
    }
    let mut magnitudes = Magnitudes::new(size);
    let mut slopes: Vec<[DMatrix<f64>; 2]> = Vec::new();
    for i in 0..count {
        let mut there = [identity(size), DMatrix::zeros(size, size)];
        for (j, slope) in slopes.iter().enumerate() {
            let link = step * stages.matrix[i][j].to_f64().abs();
            for (sum, slope) in there.iter_mut().zip(slope) {
                *sum += slope * link;
            }
        }
        let mut right = there.map(|there| matrix.abs() * there);
        right[1] += identity(size);
        let (solved, slope) = match &solvers[i] {
            None => ([right[0].clone(), right[1].clone()], right.clone()),
            Some((system, inverse)) => {
                let slope = [inverse * &right[0], inverse * &right[1]];
                ([system * &slope[0], system * &slope[1]], slope)
            }
        };
        let share = step * stages.weights[i].to_f64();
        magnitudes.add(&weights[i], share, &right, &solved, &slope);
        slopes.push(slope);
    }
    Some(of_weights(stages, weights, matrix, step, magnitudes))
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
    let (systems, inverse) = (eliminated(&system), inverse.abs());
    let solved = system.transpose().lu().solve(&right)?;
    let weights: Vec<DMatrix<f64>> = (0..count)
        .map(|i| solved.rows(i * size, size).transpose())
        .collect();
    let mut magnitudes = Magnitudes::new(size);
    let right = [matrix.abs(), identity(size)];
    let all = |part: &DMatrix<f64>| {
        DMatrix::from_fn(size * count, size, |row, column| part[(row % size, column)])
    };
    let slopes = [&inverse * all(&right[0]), &inverse * all(&right[1])];
    let sums = [&systems * &slopes[0], &systems * &slopes[1]];
    for (i, weight) in weights.iter().enumerate() {
        let part = |of: &DMatrix<f64>| of.rows(i * size, size).into_owned();
        let share = step * stages.weights[i].to_f64();
        let (sum, slope) = (sums.each_ref().map(part), slopes.each_ref().map(part));
        magnitudes.add(weight, share, &right, &sum, &slope);
    }
    Some(of_weights(stages, weights, matrix, step, magnitudes))
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
    let (inverse, backward) = if own == 0.0 {
        (identity(size), DMatrix::zeros(size, size))
    } else {
        let system = identity(size) - matrix * own;
        (system.clone().try_inverse()?, eliminated(&system))
    };
    // What is added up on the right side, per unit of the states and of the forcing.
    let mut right = [DMatrix::zeros(size, size), DMatrix::zeros(size, size)];
    let (mut past, mut nodes) = (Vec::new(), Vec::new());
    for j in 0..=newest {
        let (a, b) = (alpha[j].to_f64(), step * beta[j].to_f64());
        if j < newest {
            past.push(sparse(&(&inverse * (matrix * b - identity(size) * a))));
            right[0] += matrix.abs() * b.abs() + identity(size) * a.abs();
        }
        if b != 0.0 {
            let weight = &inverse * b;
            right[1] += identity(size) * b.abs();
            nodes.push(Node {
                at: j as f64 - (newest as f64 - 1.0),
                slope: false,
                weight: sparse(&weight),
            });
        }
    }
    let solved = right.map(|right| {
        let next = inverse.abs() * &right;
        inverse.abs() * (right + &backward * &next) + next
    });
    Some(Recurrence {
        step,
        past,
        nodes,
        spread: sparse(&solved[0]),
        pull: sparse(&solved[1]),
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
    let pull = inverse.abs() * step;
    let roundings = 6.0 + 2.0 * size as f64;
    let weight = &inverse * step;
    Some(Recurrence::held(
        step,
        &stay,
        &weight,
        (&spread, &pull),
        roundings,
    ))
}

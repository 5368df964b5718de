//! The coefficients of methods: written as rationals and surds, read as numbers.

use std::sync::LazyLock;

use super::catalogue::METHODS;
use super::iterated::Iterated;
use crate::formula::Formula;
use crate::number::{Decimal, Double};

/// What a method does in one step, as text of exact coefficients: entries are separated
/// by blanks, rows by semicolons; missing entries at the end of a row are zero.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Scheme {
    /// A Butcher tableau; the nodes are the sums of its rows.
    RungeKutta {
        /// Coefficients of the stages.
        matrix: &'static str,
        /// Weights of the stages.
        weights: &'static str,
    },
    /// Linearly implicit stages (`[hairer-wanner-1996]` IV.7): `k_i = h f(x + sum alpha_ij
    /// k_j, t + alpha_i h) + h J sum gamma_ij k_j + gamma_i h^2 f_t`.
    Rosenbrock {
        /// The diagonal of `gamma_ij`.
        gamma: &'static str,
        /// Where the stages look.
        alpha: &'static str,
        /// `gamma_ij` below its diagonal.
        shift: &'static str,
        /// Weights of the stages.
        weights: &'static str,
        /// What a code takes for the rate of the inputs.
        slopes: Slopes,
    },
    /// `sum alpha_j x_j = h sum beta_j f_j`, oldest first; the last `alpha` is one.
    Multistep {
        /// Of the states.
        alpha: &'static str,
        /// Of the rates.
        beta: &'static str,
    },
    /// An explicit Adams formula whose result is corrected once by an implicit one, after
    /// which the rate is evaluated again.
    Predicted {
        /// Of the explicit formula.
        predictor: &'static str,
        /// Of the implicit formula.
        corrector: &'static str,
    },
    /// States are moved one after the other, each with the newest of the others.
    SemiImplicit,
    /// `exp(hA)` for the states, inputs held from the start of the step.
    Exponential {
        /// True where only the diagonal of `A` goes into the exponential and every state
        /// holds the others from the start of the step, too, as membrane programs do.
        by_state: bool,
    },
}

/// Where linearly implicit stages have the rate `f_t` of the inputs from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Slopes {
    /// It is known.
    Known,
    /// A difference ahead, over a part of the step.
    Ahead(&'static str),
    /// It is left out.
    Left,
}

/// Coefficients as numbers.
#[derive(Clone, Debug, PartialEq)]
pub enum Coefficients {
    /// Stages of one step, implicit or not.
    Stages(Stages),
    /// `sum alpha_j x_j = h sum beta_j f_j`, oldest first.
    Multistep {
        /// Of the states; the last is one.
        alpha: Vec<Double>,
        /// Of the rates; as many.
        beta: Vec<Double>,
    },
    /// Predictor and corrector, oldest first, the newest last; equally many.
    Predicted {
        /// Of the explicit formula.
        predictor: Vec<Double>,
        /// Of the implicit formula.
        corrector: Vec<Double>,
    },
    /// A multistep formula that is not solved to the end; no scheme of the catalogue.
    Iterated(Iterated),
    /// See [`Scheme::SemiImplicit`].
    SemiImplicit,
    /// See [`Scheme::Exponential`].
    Exponential {
        /// Each state by itself.
        by_state: bool,
    },
}

/// Stages on a linear model: `k_i = A (x + h sum matrix_ij k_j) + g(t + nodes_i h) +
/// slopes_i h g'(t)`, then `x + h sum weights_i k_i`.
#[derive(Clone, Debug, PartialEq)]
pub struct Stages {
    /// Square, row by row.
    pub matrix: Vec<Vec<Double>>,
    /// One for each stage.
    pub weights: Vec<Double>,
    /// Where the inputs are read, in steps.
    pub nodes: Vec<Double>,
    /// How far their slope at the start counts.
    pub slopes: Vec<Double>,
    /// Part of the step over which that slope is a difference; zero where it is known.
    pub ahead: Double,
}

impl Stages {
    /// True where no stage looks at a later one.
    pub fn is_lower_triangular(&self) -> bool {
        self.rows_vanish_from(1)
    }

    /// True where every stage follows from those before it.
    pub fn is_explicit(&self) -> bool {
        self.rows_vanish_from(0)
    }

    fn rows_vanish_from(&self, beyond: usize) -> bool {
        let mut rows = self.matrix.iter().enumerate();
        rows.all(|(i, row)| row[i + beyond..].iter().all(|x| x.to_f64() == 0.0))
    }
}

/// The texts of the catalogue, read once: evidence asks for them at every step it tries.
static READ: LazyLock<Vec<(Scheme, Coefficients)>> = LazyLock::new(|| {
    let schemes = METHODS.iter().flat_map(|method| method.schemes);
    schemes.map(|scheme| (*scheme, scheme.read())).collect()
});

impl Scheme {
    /// The coefficients as numbers, to double-double where they are rationals or surds.
    pub fn coefficients(&self) -> Coefficients {
        let known = READ.iter().find(|(scheme, _)| scheme == self);
        known.map_or_else(|| self.read(), |(_, coefficients)| coefficients.clone())
    }

    fn read(&self) -> Coefficients {
        match *self {
            Scheme::RungeKutta { matrix, weights } => {
                let weights = list(weights);
                let matrix = square(matrix, weights.len());
                Coefficients::Stages(Stages {
                    nodes: matrix.iter().map(|row| sum(row)).collect(),
                    slopes: vec![Double::ZERO; weights.len()],
                    ahead: Double::ZERO,
                    matrix,
                    weights,
                })
            }
            Scheme::Rosenbrock {
                gamma,
                alpha,
                shift,
                weights,
                slopes,
            } => {
                let weights = list(weights);
                let diagonal = list(gamma)[0];
                let alpha = square(alpha, weights.len());
                let mut shift = square(shift, weights.len());
                for (i, row) in shift.iter_mut().enumerate() {
                    row[i] = diagonal;
                }
                let join = |(a, b): (&Vec<Double>, &Vec<Double>)| -> Vec<Double> {
                    a.iter().zip(b).map(|(&a, &b)| a + b).collect()
                };
                let slope = |row: &Vec<Double>| match slopes {
                    Slopes::Left => Double::ZERO,
                    Slopes::Known | Slopes::Ahead(_) => sum(row),
                };
                let ahead = match slopes {
                    Slopes::Ahead(part) => list(part)[0],
                    Slopes::Known | Slopes::Left => Double::ZERO,
                };
                Coefficients::Stages(Stages {
                    matrix: alpha.iter().zip(&shift).map(join).collect(),
                    nodes: alpha.iter().map(|row| sum(row)).collect(),
                    slopes: shift.iter().map(slope).collect(),
                    ahead,
                    weights,
                })
            }
            Scheme::Multistep { alpha, beta } => Coefficients::Multistep {
                alpha: list(alpha),
                beta: list(beta),
            },
            Scheme::Predicted {
                predictor,
                corrector,
            } => {
                let (mut predictor, mut corrector) = (list(predictor), list(corrector));
                let size = predictor.len().max(corrector.len());
                for formula in [&mut predictor, &mut corrector] {
                    let missing = size - formula.len();
                    formula.splice(0..0, std::iter::repeat_n(Double::ZERO, missing));
                }
                Coefficients::Predicted {
                    predictor,
                    corrector,
                }
            }
            Scheme::SemiImplicit => Coefficients::SemiImplicit,
            Scheme::Exponential { by_state } => Coefficients::Exponential { by_state },
        }
    }

    /// True where one formula predicts and another corrects.
    pub fn is_predicted(&self) -> bool {
        matches!(self, Scheme::Predicted { .. })
    }

    /// True where a step has to be solved for.
    pub fn is_implicit(&self) -> bool {
        match self.coefficients() {
            Coefficients::Stages(stages) => !stages.is_explicit(),
            Coefficients::Multistep { beta, .. } => {
                beta.last().is_some_and(|newest| newest.to_f64() != 0.0)
            }
            _ => false,
        }
    }

    /// How many earlier values a step needs.
    pub fn steps_back(&self) -> usize {
        match self.coefficients() {
            Coefficients::Multistep { alpha, .. } => alpha.len() - 1,
            Coefficients::Predicted { predictor, .. } => predictor.len() - 1,
            _ => 1,
        }
    }
}

fn sum(row: &[Double]) -> Double {
    row.iter().fold(Double::ZERO, |sum, &x| sum + x)
}

/// The entries of one row. The texts are ours and every one of them is read by a test, so
/// one that is no formula counts as not a number instead of ending the program.
fn list(text: &str) -> Vec<Double> {
    let number = |entry: &str| {
        // A formula takes its numbers as f64, as a case does.
        if let Some(decimal) = Decimal::parse(entry) {
            return decimal.to_double();
        }
        let formula = Formula::parse(entry, &|_| None).ok();
        let value = formula.and_then(|formula| formula.evaluate::<Double>(&[]).ok());
        value.unwrap_or(Double::from(f64::NAN))
    };
    text.split_whitespace().map(number).collect()
}

fn square(text: &str, size: usize) -> Vec<Vec<Double>> {
    let row = |text: &str| {
        let mut row = list(text);
        row.resize(size, Double::ZERO);
        row
    };
    text.split(';').map(row).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::method::METHODS;

    #[test]
    fn every_text_of_the_catalogue_is_a_number_and_consistent() {
        for method in METHODS {
            for scheme in method.schemes {
                let near = |value: Double, wanted: f64| {
                    let gap = (value - Double::from(wanted)).abs().to_f64();
                    assert!(gap < 1e-15, "{} {gap:e}", method.name);
                };
                match scheme.coefficients() {
                    Coefficients::Stages(stages) => {
                        near(sum(&stages.weights), 1.0);
                        assert_eq!(stages.matrix.len(), stages.weights.len());
                        for row in &stages.matrix {
                            assert!(row.iter().all(|x| x.is_finite()), "{}", method.name);
                            assert_eq!(row.len(), stages.weights.len());
                        }
                    }
                    Coefficients::Multistep { alpha, beta } => {
                        assert_eq!(alpha.len(), beta.len());
                        near(sum(&alpha), 0.0);
                        near(alpha[alpha.len() - 1], 1.0);
                        let moved = alpha.iter().enumerate();
                        let moved =
                            moved.fold(Double::ZERO, |s, (j, &a)| s + a * Double::from(j as f64));
                        near(moved - sum(&beta), 0.0);
                    }
                    Coefficients::Predicted {
                        predictor,
                        corrector,
                    } => {
                        near(sum(&predictor), 1.0);
                        near(sum(&corrector), 1.0);
                    }
                    Coefficients::Iterated(_)
                    | Coefficients::SemiImplicit
                    | Coefficients::Exponential { .. } => {}
                }
            }
        }
    }
}

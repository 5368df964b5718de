//! What is known of a method, as plain data.

use crate::number::Double;

/// One method.
#[derive(Clone, Debug)]
pub struct MethodFacts {
    /// Its name.
    pub name: &'static str,
    /// Other names.
    pub aliases: Vec<AliasFacts>,
    /// Its order on smooth problems.
    pub order: u8,
    /// Where it is published.
    pub sources: Vec<SourceFacts>,
    /// The usual form first; others are what some codes do under the same name.
    pub forms: Vec<FormFacts>,
}

/// Another name of a method.
#[derive(Clone, Debug)]
pub struct AliasFacts {
    /// The name.
    pub name: &'static str,
    /// Other methods that go by it.
    pub shared_with: Vec<&'static str>,
}

/// A published source.
#[derive(Clone, Debug)]
pub struct SourceFacts {
    /// Its tag.
    pub tag: &'static str,
    /// The section; empty where none is named.
    pub place: &'static str,
    /// Authors, title, journal or publisher, year.
    pub text: &'static str,
}

/// One form of a method.
#[derive(Clone, Debug)]
pub struct FormFacts {
    /// Its coefficients as the catalogue has them.
    pub written: Written,
    /// True where a step has to be solved for.
    pub implicit: bool,
    /// What one step does to a mode.
    pub factor: Factor,
    /// Stable on the negative real axis as far as this; `None` without end.
    pub real: Option<f64>,
    /// Stable on the imaginary axis as far as this; `None` without end.
    pub imaginary: Option<f64>,
    /// Stable wherever modes decay.
    pub a_stable: bool,
    /// A-stable, and infinitely fast modes are gone after one step.
    pub l_stable: bool,
    /// Degrees either side of the negative real axis that are stable without end.
    pub angle: f64,
    /// The factor of one step less `exp(z)`, divided by the first power of `z` with which
    /// they differ; `None` where the factor has no such series.
    pub error_constant: Option<Double>,
}

/// Coefficients as text, entry by entry; what is missing at the end of a row is zero.
#[derive(Clone, Debug)]
pub enum Written {
    /// A Butcher tableau.
    Tableau {
        /// Where the stages look.
        nodes: Vec<Double>,
        /// Coefficients of the stages.
        matrix: Vec<Vec<&'static str>>,
        /// Weights of the stages.
        weights: Vec<&'static str>,
    },
    /// Linearly implicit stages.
    LinearlyImplicit {
        /// Where the stages look.
        nodes: Vec<Double>,
        /// The diagonal of the linear part.
        gamma: &'static str,
        /// Coefficients of the stages.
        alpha: Vec<Vec<&'static str>>,
        /// The linear part below its diagonal.
        shift: Vec<Vec<&'static str>>,
        /// Weights of the stages.
        weights: Vec<&'static str>,
        /// The rate of the inputs: known, or a difference over a part of the step; absent
        /// where it is left out.
        slopes: Option<Option<&'static str>>,
    },
    /// A linear combination of several steps, oldest first.
    Multistep {
        /// Of the states.
        alpha: Vec<&'static str>,
        /// Of the rates.
        beta: Vec<&'static str>,
    },
    /// An explicit formula and an implicit one that corrects it once; oldest first, the
    /// rate at the new time last.
    Predicted {
        /// Of the explicit formula.
        predictor: Vec<&'static str>,
        /// Of the implicit formula.
        corrector: Vec<&'static str>,
    },
    /// States are moved one after the other.
    SemiImplicit,
    /// The matrix exponential.
    Exponential {
        /// Of the diagonal alone.
        by_state: bool,
    },
}

/// The factor by which one step multiplies a mode `x' = lambda x`, in `z = h lambda`;
/// polynomials have their lowest power first.
#[derive(Clone, Debug)]
pub enum Factor {
    /// A quotient of two polynomials.
    Quotient {
        /// Its value at 0 is one.
        numerator: Vec<Double>,
        /// Its value at 0 is one.
        denominator: Vec<Double>,
    },
    /// A zero of a polynomial whose coefficients, lowest power first, are polynomials.
    Equation(Vec<Vec<Double>>),
    /// The two factors of an oscillator.
    Oscillator,
    /// `exp(z)`.
    Exponential,
}

//! Affine numbers: a constant plus a coefficient for every state and input. A rate
//! that is evaluated over them yields its row of the matrix, or is refused at the
//! operation that is not affine.

use super::eval::{Obstacle, Scalar};
use super::parse::Function;
use crate::number::Double;

/// `constant + sum of coefficients[i] * quantity[i]`.
///
/// # Shape
/// Coefficients are as many as states and inputs together, or none for a plain
/// number.
#[derive(Clone, Debug, PartialEq)]
pub struct Affine {
    /// The part that depends on nothing.
    pub constant: Double,
    /// One for each quantity; empty where all are zero.
    pub coefficients: Vec<Double>,
}

impl Affine {
    /// The quantity with this number, of `count`.
    pub fn quantity(index: usize, count: usize) -> Affine {
        let mut coefficients = vec![Double::ZERO; count];
        coefficients[index] = Double::ONE;
        Affine {
            constant: Double::ZERO,
            coefficients,
        }
    }

    fn is_plain(&self) -> bool {
        self.coefficients.iter().all(|c| c.to_f64() == 0.0)
    }

    fn map(mut self, change: impl Fn(Double) -> Double) -> Affine {
        self.constant = change(self.constant);
        for coefficient in &mut self.coefficients {
            *coefficient = change(*coefficient);
        }
        self
    }
}

impl Scalar for Affine {
    fn number(value: Double) -> Affine {
        Affine {
            constant: value,
            coefficients: Vec::new(),
        }
    }

    fn negate(self) -> Affine {
        self.map(|x| -x)
    }

    fn add(self, other: Affine) -> Affine {
        let (mut sum, rest) = if self.coefficients.len() >= other.coefficients.len() {
            (self, other)
        } else {
            (other, self)
        };
        sum.constant += rest.constant;
        for (x, y) in sum.coefficients.iter_mut().zip(rest.coefficients) {
            *x += y;
        }
        sum
    }

    fn multiply(self, other: Affine) -> Result<Affine, Obstacle> {
        let (factor, rest) = match (self.is_plain(), other.is_plain()) {
            (true, _) => (self.constant, other),
            (false, true) => (other.constant, self),
            (false, false) => return Err(Obstacle::NotAffine),
        };
        Ok(rest.map(|x| factor * x))
    }

    fn divide(self, other: Affine) -> Result<Affine, Obstacle> {
        if !other.is_plain() {
            return Err(Obstacle::NotAffine);
        }
        Ok(self.map(|x| x / other.constant))
    }

    fn power(self, exponent: Affine) -> Result<Affine, Obstacle> {
        match (self.is_plain(), exponent.is_plain()) {
            (true, true) => Ok(Affine::number(self.constant.pow(exponent.constant))),
            (false, true) if exponent.constant == Double::ONE => Ok(self),
            _ => Err(Obstacle::NotAffine),
        }
    }

    fn call(function: Function, x: Affine, y: Option<Affine>) -> Result<Affine, Obstacle> {
        if !x.is_plain() || y.as_ref().is_some_and(|y| !y.is_plain()) {
            return Err(Obstacle::NotAffine);
        }
        Double::call(function, x.constant, y.map(|y| y.constant)).map(Affine::number)
    }
}

#[cfg(test)]
mod tests {
    use super::super::Formula;
    use super::*;

    type Evaluated = Result<(f64, Vec<f64>), (Obstacle, (usize, usize))>;

    fn evaluate(text: &str) -> Evaluated {
        // x and u are quantities, k = 4 a parameter.
        let names = ["x", "u", "k"];
        let formula = Formula::parse(text, &|name| names.iter().position(|n| *n == name)).unwrap();
        let values = [
            Affine::quantity(0, 2),
            Affine::quantity(1, 2),
            Affine::number(Double::from(4.0)),
        ];
        let result = formula.evaluate(&values)?;
        let coefficients = result.coefficients.iter().map(|c| c.to_f64()).collect();
        Ok((result.constant.to_f64(), coefficients))
    }

    #[test]
    fn affine_rates_yield_their_coefficients() {
        assert_eq!(evaluate("(u - x)/k + 3"), Ok((3.0, vec![-0.25, 0.25])));
        assert_eq!(evaluate("-(2*x - 1)*k^2"), Ok((16.0, vec![-32.0, 0.0])));
        assert_eq!(
            evaluate("sqrt(k)*x^1 + (x - x)*x"),
            Ok((0.0, vec![2.0, 0.0]))
        );
    }

    #[test]
    fn anything_else_is_refused_where_it_stands() {
        for (text, span) in [
            ("1 + x*u", (5, 1)),
            ("k/x", (1, 1)),
            ("x^2", (1, 1)),
            ("2^x", (1, 1)),
            ("k*sin(x)", (2, 3)),
            ("max(1, u)", (0, 3)),
        ] {
            assert_eq!(evaluate(text), Err((Obstacle::NotAffine, span)), "{text}");
        }
    }
}

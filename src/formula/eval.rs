//! Runs the postfix code of a [`Formula`] over any number.

use super::parse::{Formula, Function, Operation, Span};
use crate::number::Double;

/// Why a number cannot take part in an operation.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Obstacle {
    /// The result would not be affine in states and inputs.
    NotAffine,
}

/// What a formula computes with.
pub trait Scalar: Clone {
    /// From a number of the text.
    fn number(value: Double) -> Self;
    /// Sign changed.
    fn negate(self) -> Self;
    /// Sum.
    fn add(self, other: Self) -> Self;
    /// Product.
    ///
    /// # Errors
    /// Where the kind of number does not allow it; likewise below.
    fn multiply(self, other: Self) -> Result<Self, Obstacle>;
    /// Quotient.
    ///
    /// # Errors
    /// See [`Scalar::multiply`].
    fn divide(self, other: Self) -> Result<Self, Obstacle>;
    /// Power.
    ///
    /// # Errors
    /// See [`Scalar::multiply`].
    fn power(self, exponent: Self) -> Result<Self, Obstacle>;
    /// A function of one argument, or of two.
    ///
    /// # Errors
    /// See [`Scalar::multiply`].
    fn call(function: Function, first: Self, second: Option<Self>) -> Result<Self, Obstacle>;
}

impl Formula {
    /// The value for these values of the variables.
    ///
    /// # Errors
    /// The obstacle and the byte span of the operation that met it. Undefined
    /// arithmetic (`ln(-1)`, `1/0`) is no error here: it gives NaN or infinity.
    pub fn evaluate<S: Scalar>(&self, variables: &[S]) -> Result<S, (Obstacle, Span)> {
        let mut stack: Vec<S> = Vec::with_capacity(16);
        for &(operation, span) in &self.code {
            let result = match operation {
                Operation::Number(value) => S::number(Double::from(value)),
                Operation::Pi => S::number(Double::PI),
                Operation::Variable(index) => variables[index].clone(),
                _ => {
                    let last = pop(&mut stack);
                    operate(operation, last, &mut stack).map_err(|obstacle| (obstacle, span))?
                }
            };
            stack.push(result);
        }
        Ok(pop(&mut stack))
    }
}

/// The parser never lets code through that takes more than it has put.
fn pop<S>(stack: &mut Vec<S>) -> S {
    stack
        .pop()
        .expect("postfix code from the parser is balanced")
}

fn operate<S: Scalar>(operation: Operation, last: S, stack: &mut Vec<S>) -> Result<S, Obstacle> {
    match operation {
        Operation::Negate => Ok(last.negate()),
        Operation::Add => Ok(pop(stack).add(last)),
        Operation::Subtract => Ok(pop(stack).add(last.negate())),
        Operation::Multiply => pop(stack).multiply(last),
        Operation::Divide => pop(stack).divide(last),
        Operation::Power => pop(stack).power(last),
        Operation::Call(function @ (Function::Min | Function::Max)) => {
            S::call(function, pop(stack), Some(last))
        }
        Operation::Call(function) => S::call(function, last, None),
        Operation::Number(_) | Operation::Pi | Operation::Variable(_) => Ok(last),
    }
}

impl Scalar for Double {
    fn number(value: Double) -> Double {
        value
    }
    fn negate(self) -> Double {
        -self
    }
    fn add(self, other: Double) -> Double {
        self + other
    }
    fn multiply(self, other: Double) -> Result<Double, Obstacle> {
        Ok(self * other)
    }
    fn divide(self, other: Double) -> Result<Double, Obstacle> {
        Ok(self / other)
    }
    fn power(self, exponent: Double) -> Result<Double, Obstacle> {
        Ok(self.pow(exponent))
    }
    fn call(function: Function, x: Double, y: Option<Double>) -> Result<Double, Obstacle> {
        let y = y.unwrap_or_default();
        let either_nan = x.to_f64().is_nan() || y.to_f64().is_nan();
        Ok(match function {
            Function::Exp => x.exp(),
            Function::Ln => x.ln(),
            Function::Sqrt => x.sqrt(),
            Function::Sin => x.sin(),
            Function::Cos => x.cos(),
            Function::Tan => x.tan(),
            Function::Sinh => x.sinh(),
            Function::Cosh => x.cosh(),
            Function::Tanh => x.tanh(),
            Function::Abs => x.abs(),
            Function::Min | Function::Max if either_nan => Double::from(f64::NAN),
            Function::Min => {
                if x <= y {
                    x
                } else {
                    y
                }
            }
            Function::Max => {
                if x >= y {
                    x
                } else {
                    y
                }
            }
            Function::Heaviside if either_nan => x,
            Function::Heaviside => {
                if x >= Double::ZERO {
                    Double::ONE
                } else {
                    Double::ZERO
                }
            }
        })
    }
}

impl Scalar for f64 {
    fn number(value: Double) -> f64 {
        value.to_f64()
    }
    fn negate(self) -> f64 {
        -self
    }
    fn add(self, other: f64) -> f64 {
        self + other
    }
    fn multiply(self, other: f64) -> Result<f64, Obstacle> {
        Ok(self * other)
    }
    fn divide(self, other: f64) -> Result<f64, Obstacle> {
        Ok(self / other)
    }
    fn power(self, exponent: f64) -> Result<f64, Obstacle> {
        Ok(self.powf(exponent))
    }
    fn call(function: Function, x: f64, y: Option<f64>) -> Result<f64, Obstacle> {
        let y = y.unwrap_or_default();
        let either_nan = x.is_nan() || y.is_nan();
        Ok(match function {
            Function::Exp => x.exp(),
            Function::Ln => x.ln(),
            Function::Sqrt => x.sqrt(),
            Function::Sin => x.sin(),
            Function::Cos => x.cos(),
            Function::Tan => x.tan(),
            Function::Sinh => x.sinh(),
            Function::Cosh => x.cosh(),
            Function::Tanh => x.tanh(),
            Function::Abs => x.abs(),
            Function::Min | Function::Max if either_nan => f64::NAN,
            Function::Min => x.min(y),
            Function::Max => x.max(y),
            Function::Heaviside if either_nan => x,
            Function::Heaviside => {
                if x >= 0.0 {
                    1.0
                } else {
                    0.0
                }
            }
        })
    }
}

#[cfg(test)]
mod tests;

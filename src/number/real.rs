//! What the linear algebra asks of a number: the four operations, a unit
//! roundoff, and conversion from and to `f64`.

use std::fmt::Debug;
use std::ops::{Add, Mul, Neg, Sub};

use super::{Double, Quad};

/// A floating-point number with a known unit roundoff.
///
/// Implemented by [`Double`] and [`Quad`]; the matrix exponential is written
/// once over it, so that the same code can be run in two precisions.
pub trait Real:
    Copy
    + Debug
    + Default
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Neg<Output = Self>
{
    /// Largest relative error of one product, and of one sum relative to the
    /// sum of the magnitudes of its terms.
    const UNIT: f64;
    /// Significant bits, for choosing how many terms a series needs.
    const BITS: f64;

    /// The number nearest to a double-double; exact.
    fn from_double(value: Double) -> Self;
    /// Rounded to double-double.
    fn to_double(self) -> Double;
    /// Times a power of two, exact but for overflow and underflow.
    fn scale(self, power_of_two: f64) -> Self;
    /// Divided by a small whole number.
    fn divide(self, divisor: u32) -> Self;

    /// From an `f64`; exact.
    fn from_f64(value: f64) -> Self {
        Self::from_double(Double::from(value))
    }
    /// Rounded to the nearest `f64`.
    fn to_f64(self) -> f64 {
        self.to_double().to_f64()
    }
    /// True for zero of either sign.
    fn is_zero(self) -> bool {
        self.to_f64() == 0.0
    }
}

impl Real for Double {
    // Joldes, Muller, Popescu 2017: 3u^2 + 13u^3 for the sum (here relative to
    // the magnitudes, where it is smaller) and 5u^2 for the product used here.
    const UNIT: f64 = 5.0 * 1.232_595_164_407_831e-32; // 5 * 2^-106
    const BITS: f64 = 106.0;

    fn from_double(value: Double) -> Self {
        value
    }
    fn to_double(self) -> Double {
        self
    }
    fn scale(self, power_of_two: f64) -> Self {
        Double::scale(self, power_of_two)
    }
    fn divide(self, divisor: u32) -> Self {
        self / Double::from(f64::from(divisor))
    }
}

impl Real for Quad {
    // Hida, Li, Bailey 2001 give about 2^-211 for the fast variants used here;
    // taken 2^-200 to leave room for their heuristic constants.
    const UNIT: f64 = 6.223_015_277_861_142e-61; // 2^-200
    const BITS: f64 = 200.0;

    fn from_double(value: Double) -> Self {
        Quad::from(value)
    }
    fn to_double(self) -> Double {
        Quad::to_double(self)
    }
    fn scale(self, power_of_two: f64) -> Self {
        Quad::scale(self, power_of_two)
    }
    fn divide(self, divisor: u32) -> Self {
        Quad::divide(self, f64::from(divisor))
    }
}

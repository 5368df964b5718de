//! Double-double arithmetic: a number as the unevaluated sum of two `f64`,
//! about 32 significant digits.
//!
//! Advice to whoever changes this: every error-free step relies on rounding to
//! nearest and on the order of operations as written. Products are split by
//! Dekker's method and not by a fused multiply-add, because one path gives the
//! same bits on every machine and needs no `unsafe`.

use std::cmp::Ordering;
use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// A number `high + low` with `|low| <= ulp(high)/2`.
///
/// # Domain
/// Magnitudes from about 1e-290 (below it the low word is lost to underflow) to
/// 1e300 (above it the split of a product overflows). Outside, results are less
/// precise or not finite; nothing panics.
///
/// # Error bound
/// Sum: `3 * 2^-106` relative. Product: `5 * 2^-106`. Quotient and square root:
/// `10 * 2^-106`.
///
/// # Source
/// `[dekker-1971]` for the split and the product; `[joldes-2017]` for the bounds.
#[derive(Clone, Copy, Debug, Default)]
pub struct Double {
    high: f64,
    low: f64,
}

/// `a + b` and its rounding error, for any `a` and `b` (Knuth).
pub(super) fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let part = sum - a;
    (sum, (a - (sum - part)) + (b - part))
}

/// `a + b` and its rounding error where `|a| >= |b|` or `a` is zero (Dekker).
pub(super) fn quick_two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    (sum, b - (sum - a))
}

fn split(a: f64) -> (f64, f64) {
    const SPLITTER: f64 = 134_217_729.0; // 2^27 + 1
    let scaled = SPLITTER * a;
    let high = scaled - (scaled - a);
    (high, a - high)
}

/// `a * b` and its rounding error (Dekker).
pub(super) fn two_product(a: f64, b: f64) -> (f64, f64) {
    let product = a * b;
    let (a_high, a_low) = split(a);
    let (b_high, b_low) = split(b);
    let error = ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low;
    // The split of a huge factor overflows; the plain product is still right.
    if error.is_finite() {
        (product, error)
    } else {
        (product, 0.0)
    }
}

impl Double {
    /// Zero.
    pub const ZERO: Double = Double {
        high: 0.0,
        low: 0.0,
    };
    /// One.
    pub const ONE: Double = Double {
        high: 1.0,
        low: 0.0,
    };
    /// The circle constant to 2^-107 relative: the two leading words of pi,
    /// checked in `elementary::tests` against dashu-float.
    pub const PI: Double = Double {
        high: std::f64::consts::PI,
        low: 1.224_646_799_147_353_2e-16,
    };

    /// The exact sum of two numbers of any size.
    pub fn from_sum(a: f64, b: f64) -> Double {
        let (high, low) = two_sum(a, b);
        Double { high, low }
    }

    /// The exact product of two `f64`.
    pub fn from_product(a: f64, b: f64) -> Double {
        let (high, low) = two_product(a, b);
        Double { high, low }
    }

    /// The leading word: the nearest `f64`.
    pub fn to_f64(self) -> f64 {
        self.high
    }

    /// The trailing word.
    pub fn low(self) -> f64 {
        self.low
    }

    /// True where the leading word is finite.
    pub fn is_finite(self) -> bool {
        self.high.is_finite()
    }

    /// Magnitude.
    pub fn abs(self) -> Double {
        if self.high < 0.0 { -self } else { self }
    }

    /// Times a power of two, exact but for overflow and underflow.
    pub fn scale(self, power_of_two: f64) -> Double {
        Double {
            high: self.high * power_of_two,
            low: self.low * power_of_two,
        }
    }

    /// A whole number below `2^62`, exactly.
    pub(crate) fn whole(number: i64) -> Double {
        let high = number as f64;
        // What is left is small, and exact.
        let low = (number - high as i64) as f64;
        Double { high, low }
    }

    /// Divided by an `f64`: one correction of the first quotient, which leaves `8 * 2^-106`.
    pub fn over(self, divisor: f64) -> Double {
        let first = self.high / divisor;
        let (product, error) = two_product(first, divisor);
        let rest = ((self.high - product) - error) + self.low;
        let (high, low) = quick_two_sum(first, rest / divisor);
        Double { high, low }
    }

    /// The largest whole number not above this one.
    pub fn floor(self) -> Double {
        let high = self.high.floor();
        if high == self.high {
            let (high, low) = quick_two_sum(high, self.low.floor());
            Double { high, low }
        } else {
            Double { high, low: 0.0 }
        }
    }

    /// Square root; NaN below zero.
    pub fn sqrt(self) -> Double {
        if self.high <= 0.0 {
            return if self.high == 0.0 {
                Double::ZERO
            } else {
                Double::from(f64::NAN)
            };
        }
        if !self.is_finite() {
            return self;
        }
        let root = self.high.sqrt();
        let rest = (self - Double::from_product(root, root)).high;
        Double::from_sum(root, rest / (2.0 * root))
    }

    /// Whole power by repeated squaring; negative powers through the reciprocal.
    pub fn powi(self, exponent: i32) -> Double {
        let mut result = Double::ONE;
        let mut square = self;
        let mut rest = exponent.unsigned_abs();
        while rest > 0 {
            if rest & 1 == 1 {
                result *= square;
            }
            square *= square;
            rest >>= 1;
        }
        if exponent < 0 {
            Double::ONE / result
        } else {
            result
        }
    }
}

impl From<f64> for Double {
    fn from(value: f64) -> Double {
        Double {
            high: value,
            low: 0.0,
        }
    }
}

impl Neg for Double {
    type Output = Double;
    fn neg(self) -> Double {
        Double {
            high: -self.high,
            low: -self.low,
        }
    }
}

impl Add for Double {
    type Output = Double;
    fn add(self, other: Double) -> Double {
        let (high, error) = two_sum(self.high, other.high);
        if !high.is_finite() {
            return Double::from(high);
        }
        let (low, low_error) = two_sum(self.low, other.low);
        let (high, error) = quick_two_sum(high, error + low);
        let (high, low) = quick_two_sum(high, error + low_error);
        Double { high, low }
    }
}

impl Sub for Double {
    type Output = Double;
    fn sub(self, other: Double) -> Double {
        self + -other
    }
}

impl Mul for Double {
    type Output = Double;
    fn mul(self, other: Double) -> Double {
        let (high, error) = two_product(self.high, other.high);
        if !high.is_finite() {
            return Double::from(high);
        }
        let cross = self.high * other.low + self.low * other.high;
        let (high, low) = quick_two_sum(high, error + cross);
        Double { high, low }
    }
}

impl Div for Double {
    type Output = Double;
    fn div(self, other: Double) -> Double {
        let first = self.high / other.high;
        if !first.is_finite() || !other.is_finite() {
            return Double::from(first);
        }
        // Long division: two corrections bring the quotient to full width.
        let rest = self - other * Double::from(first);
        let second = rest.high / other.high;
        let rest = rest - other * Double::from(second);
        let third = rest.high / other.high;
        let (high, low) = quick_two_sum(first, second);
        Double { high, low } + Double::from(third)
    }
}

impl AddAssign for Double {
    fn add_assign(&mut self, other: Double) {
        *self = *self + other;
    }
}

impl SubAssign for Double {
    fn sub_assign(&mut self, other: Double) {
        *self = *self - other;
    }
}

impl MulAssign for Double {
    fn mul_assign(&mut self, other: Double) {
        *self = *self * other;
    }
}

impl PartialEq for Double {
    fn eq(&self, other: &Double) -> bool {
        self.high == other.high && self.low == other.low
    }
}

impl PartialOrd for Double {
    fn partial_cmp(&self, other: &Double) -> Option<Ordering> {
        match self.high.partial_cmp(&other.high) {
            Some(Ordering::Equal) => self.low.partial_cmp(&other.low),
            order => order,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_third_times_three_is_one_to_the_last_words() {
        let third = Double::ONE / Double::from(3.0);
        let error = (third * Double::from(3.0) - Double::ONE).abs();
        assert!(error.to_f64() <= 10.0 * 2f64.powi(-106), "{error:?}");
        assert_ne!(third.low(), 0.0);
    }

    #[test]
    fn square_root_squares_back() {
        for value in [2.0, 1e-200, 3.5e150, 0.1] {
            let root = Double::from(value).sqrt();
            let error = (root * root - Double::from(value)).abs().to_f64() / value;
            assert!(error <= 20.0 * 2f64.powi(-106), "{value}: {error:e}");
        }
        assert!(Double::from(-1.0).sqrt().to_f64().is_nan());
    }

    #[test]
    fn floor_looks_at_both_words() {
        let just_below = Double::from_sum(5.0, -1e-20);
        assert_eq!(just_below.floor().to_f64(), 4.0);
        assert_eq!(Double::from_sum(1e20, 0.5).floor(), Double::from(1e20));
        assert_eq!(Double::from(-0.5).floor().to_f64(), -1.0);
    }

    #[test]
    fn infinities_do_not_turn_into_nan() {
        let huge = Double::from(1e308);
        assert_eq!((huge * huge).to_f64(), f64::INFINITY);
        assert_eq!((huge + huge).to_f64(), f64::INFINITY);
        assert_eq!((Double::ONE / Double::ZERO).to_f64(), f64::INFINITY);
    }
}

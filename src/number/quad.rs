//! Quad-double arithmetic: a number as the unevaluated sum of four `f64`, about
//! 62 significant digits; sums and products only, which is all that the matrix
//! exponential needs.

use std::ops::{Add, Mul, Neg, Sub};

use super::Double;
use super::double::{quick_two_sum, two_product, two_sum};

/// A number of four words in falling order of size, without overlap.
///
/// # Error bound
/// Product `2^-200` relative; sum `2^-200` relative to the sum of magnitudes.
///
/// # Source
/// `[hida-li-bailey-2001]`, sections 3 and 4 (the fast variants).
#[derive(Clone, Copy, Debug, Default)]
pub struct Quad([f64; 4]);

/// Three numbers to a sum and two errors in falling order.
fn three_sum(a: f64, b: f64, c: f64) -> (f64, f64, f64) {
    let (first, error) = two_sum(a, b);
    let (sum, second) = two_sum(c, first);
    let (middle, last) = two_sum(error, second);
    (sum, middle, last)
}

/// Brings five overlapping words into order and drops the last.
fn renormalise(words: [f64; 5]) -> Quad {
    let mut w = words;
    if !w[0].is_finite() {
        return Quad([w[0], 0.0, 0.0, 0.0]);
    }
    for _ in 0..2 {
        for i in (0..4).rev() {
            (w[i], w[i + 1]) = two_sum(w[i], w[i + 1]);
        }
    }
    // Squeeze zeros out from between the words, so that four of them carry the
    // full width.
    let mut out = [0.0; 4];
    let mut place = 0;
    let mut current = w[0];
    for &word in &w[1..] {
        let (sum, error) = quick_two_sum(current, word);
        current = sum;
        if error != 0.0 && place < 3 {
            out[place] = sum;
            place += 1;
            current = error;
        }
    }
    out[place] = current;
    Quad(out)
}

impl Quad {
    /// Rounded to double-double.
    pub fn to_double(self) -> Double {
        let [a, b, c, d] = self.0;
        Double::from_sum(a, b) + Double::from_sum(c, d)
    }

    /// Times a power of two, exact but for overflow and underflow.
    pub fn scale(self, power_of_two: f64) -> Quad {
        Quad(self.0.map(|word| word * power_of_two))
    }

    /// Divided by an `f64` that is a small whole number.
    pub fn divide(self, divisor: f64) -> Quad {
        // Long division, word by word.
        let mut rest = self;
        let mut quotient = [0.0; 5];
        for digit in &mut quotient {
            *digit = rest.0[0] / divisor;
            let (product, error) = two_product(*digit, divisor);
            rest = rest - Quad([product, error, 0.0, 0.0]);
        }
        renormalise(quotient)
    }
}

impl From<Double> for Quad {
    fn from(value: Double) -> Quad {
        Quad([value.to_f64(), value.low(), 0.0, 0.0])
    }
}

impl Neg for Quad {
    type Output = Quad;
    fn neg(self) -> Quad {
        Quad(self.0.map(|word| -word))
    }
}

impl Add for Quad {
    type Output = Quad;
    fn add(self, other: Quad) -> Quad {
        let (a, b) = (self.0, other.0);
        let (s0, t0) = two_sum(a[0], b[0]);
        let (s1, t1) = two_sum(a[1], b[1]);
        let (s2, t2) = two_sum(a[2], b[2]);
        let (s3, t3) = two_sum(a[3], b[3]);
        let (s1, t0) = two_sum(s1, t0);
        let (s2, t0, t1) = three_sum(s2, t0, t1);
        let (s3, t0b, t2b) = three_sum(s3, t0, t2);
        renormalise([s0, s1, s2, s3, t0b + t1 + t3 + t2b])
    }
}

impl Sub for Quad {
    type Output = Quad;
    fn sub(self, other: Quad) -> Quad {
        self + -other
    }
}

impl Mul for Quad {
    type Output = Quad;
    fn mul(self, other: Quad) -> Quad {
        let (a, b) = (self.0, other.0);
        let (p0, q0) = two_product(a[0], b[0]);
        let (p1, q1) = two_product(a[0], b[1]);
        let (p2, q2) = two_product(a[1], b[0]);
        let (p3, q3) = two_product(a[0], b[2]);
        let (p4, q4) = two_product(a[1], b[1]);
        let (p5, q5) = two_product(a[2], b[0]);
        let (p1, p2, q0) = three_sum(p1, p2, q0);
        let (p2, q1, q2) = three_sum(p2, q1, q2);
        let (p3, p4, p5) = three_sum(p3, p4, p5);
        let (s0, t0) = two_sum(p2, p3);
        let (s1, t1) = two_sum(q1, p4);
        let (s1, t0) = two_sum(s1, t0);
        let s2 = q2 + p5 + t0 + t1;
        let last = a[0] * b[3] + a[1] * b[2] + a[2] * b[1] + a[3] * b[0];
        renormalise([p0, p1, s0, s1 + (last + q0 + q3 + q4 + q5), s2])
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(a: Quad, b: Quad) -> bool {
        (a - b).0[0].abs() <= 2f64.powi(-200) * b.0[0].abs()
    }

    #[test]
    fn a_third_and_its_multiples() {
        let one = Quad::from(Double::ONE);
        let third = one.divide(3.0);
        assert!(close(third + third + third, one));
        let ninth = third * third;
        assert!(close(ninth.scale(8.0) + ninth, one));
        assert!(third.0.iter().all(|&word| word != 0.0));
    }

    #[test]
    fn binomial_identity() {
        let a = Quad::from(Double::PI).divide(7.0);
        let b = Quad::from(Double::from(0.1)).divide(3.0);
        let left = (a + b) * (a + b);
        let right = a * a + (a * b).scale(2.0) + b * b;
        assert!(close(left, right));
    }

    #[test]
    fn difference_of_squares_keeps_its_low_words() {
        let small = Quad::from(Double::from(2f64.powi(-90)));
        let one = Quad::from(Double::ONE);
        let product = (one + small) * (one - small);
        let rest = one - product;
        assert_eq!(rest.to_double().to_f64(), 2f64.powi(-180));
    }
}

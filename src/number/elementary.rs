//! Elementary functions of [`Double`], so that closed forms of case files can be
//! held against the propagator to some thirty digits.
//!
//! # Error bound
//! Relative, measured against dashu-float at 160 bits in the tests below: at most
//! `64 * 2^-106` for `exp`, `ln`, `sin`, `cos`, `sinh`, `cosh`, `tanh` (for `sin`
//! and `cos` relative to 1 once the argument exceeds 1, since its own rounding is
//! then magnified).

use super::Double;

/// ln 2 in three words; mpmath 1.3 at 400 bits, words of 33, 33 and 53 bits.
const LN_2: [f64; 4] = [
    0.6931471804855391,
    7.440617109802979e-11,
    2.094174429075368e-21,
    1.94704509238075e-31,
];
/// pi/2 in four words of 33 bits and a tail; mpmath 1.3 at 400 bits.
const HALF_PI: [f64; 5] = [
    1.5707963267341256,
    6.077100506303966e-11,
    2.0222662487111665e-21,
    8.478427660348229e-32,
    2.0670321098263988e-43,
];

/// `argument - count * (sum of words)`, each product exact.
fn reduce(argument: Double, count: f64, words: &[f64]) -> Double {
    words.iter().fold(argument, |rest, &word| {
        rest - Double::from_product(count, word)
    })
}

/// `sum of first * x^step^k / ((n+1)(n+2)...)`: a factorial series in steps of
/// one or two, stopped where a term no longer counts.
fn factorial_series(first: Double, factor: Double, mut n: f64, step: usize) -> Double {
    let mut term = first;
    let mut sum = first;
    for _ in 0..60 {
        let mut divisor = 1.0;
        for _ in 0..step {
            n += 1.0;
            divisor *= n;
        }
        term = term * factor / Double::from(divisor);
        sum += term;
        if term.abs().to_f64() <= sum.abs().to_f64() * 1e-34 {
            break;
        }
    }
    sum
}

impl Double {
    /// The exponential; zero below -745, infinite above 709.8.
    pub fn exp(self) -> Double {
        let x = self.to_f64();
        if x.is_nan() || x > 709.8 {
            return Double::from(if x.is_nan() { f64::NAN } else { f64::INFINITY });
        }
        if x < -745.2 {
            return Double::ZERO;
        }
        let count = (x / std::f64::consts::LN_2).round();
        const HALVINGS: i32 = 9;
        let small = reduce(self, count, &LN_2).scale(2f64.powi(-HALVINGS));
        // exp(r) - 1 doubled up: squaring exp(r) itself would lose nine bits.
        let mut minus_one = factorial_series(small, small, 1.0, 1);
        for _ in 0..HALVINGS {
            minus_one = minus_one.scale(2.0) + minus_one * minus_one;
        }
        let half = (count / 2.0).trunc() as i32;
        let result = minus_one + Double::ONE;
        result
            .scale(2f64.powi(half))
            .scale(2f64.powi(count as i32 - half))
    }

    /// The natural logarithm; NaN below zero, minus infinity at zero.
    pub fn ln(self) -> Double {
        let x = self.to_f64();
        if !(x > 0.0 && x.is_finite()) {
            return Double::from(x.ln());
        }
        let above_one = self - Double::ONE;
        if above_one.abs().to_f64() < 0.1 {
            // ln x = 2 artanh((x-1)/(x+1)), without the cancellation near one.
            let ratio = above_one / (self + Double::ONE);
            let square = ratio * ratio;
            let mut power = ratio;
            let mut sum = ratio;
            let mut n = 1.0;
            while power.abs().to_f64() > sum.abs().to_f64() * 1e-34 {
                power *= square;
                n += 2.0;
                sum += power / Double::from(n);
            }
            return sum.scale(2.0);
        }
        // One step of Halley's method from the f64 logarithm: error cubed.
        let guess = Double::from(x.ln());
        let ratio = self * (-guess).exp();
        guess + (ratio - Double::ONE).scale(2.0) / (ratio + Double::ONE)
    }

    /// Sine and cosine together; NaN for magnitudes above 2^50, where double-double
    /// no longer holds the phase.
    pub fn sin_cos(self) -> (Double, Double) {
        let x = self.to_f64();
        if x.is_nan() || x.abs() > 2f64.powi(50) {
            let nan = Double::from(f64::NAN);
            return (nan, nan);
        }
        let count = (x / std::f64::consts::FRAC_PI_2).round();
        let angle = reduce(self, count, &HALF_PI);
        let square = -(angle * angle);
        let sine = factorial_series(angle, square, 1.0, 2);
        let cosine = factorial_series(Double::ONE, square, 0.0, 2);
        match (count.rem_euclid(4.0)) as u8 {
            0 => (sine, cosine),
            1 => (cosine, -sine),
            2 => (-sine, -cosine),
            _ => (-cosine, sine),
        }
    }

    /// Sine; see [`Double::sin_cos`].
    pub fn sin(self) -> Double {
        self.sin_cos().0
    }

    /// Cosine; see [`Double::sin_cos`].
    pub fn cos(self) -> Double {
        self.sin_cos().1
    }

    /// Tangent; see [`Double::sin_cos`].
    pub fn tan(self) -> Double {
        let (sine, cosine) = self.sin_cos();
        sine / cosine
    }

    /// Hyperbolic sine, by its series where the exponentials would cancel.
    pub fn sinh(self) -> Double {
        if self.abs().to_f64() < 0.5 {
            return factorial_series(self, self * self, 1.0, 2);
        }
        let growing = self.exp();
        if !growing.is_finite() {
            return growing;
        }
        (growing - (-self).exp()).scale(0.5)
    }

    /// Hyperbolic cosine.
    pub fn cosh(self) -> Double {
        (self.exp() + (-self).exp()).scale(0.5)
    }

    /// Hyperbolic tangent.
    pub fn tanh(self) -> Double {
        if self.abs().to_f64() > 40.0 {
            return Double::from(self.to_f64().signum());
        }
        self.sinh() / self.cosh()
    }

    /// `self ^ exponent`: repeated multiplication for whole exponents up to 1024,
    /// otherwise `exp(exponent ln self)`, NaN for a negative base.
    pub fn pow(self, exponent: Double) -> Double {
        let whole = exponent.to_f64();
        if exponent.low() == 0.0 && whole.fract() == 0.0 && whole.abs() <= 1024.0 {
            return self.powi(whole as i32);
        }
        if self.to_f64() == 0.0 && whole > 0.0 {
            return Double::ZERO;
        }
        (exponent * self.ln()).exp()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use dashu_float::{Context, FBig, round::mode::HalfEven};

    type Wide = FBig<HalfEven, 2>;

    fn wide(value: Double) -> Wide {
        let word = |w: f64| Wide::try_from(w).unwrap().with_precision(400).value();
        word(value.to_f64()) + word(value.low())
    }

    /// Largest error of `ours` in units of 2^-106, relative to `scale` or the value.
    fn error(ours: Double, theirs: Wide, scale: f64) -> f64 {
        let difference = (wide(ours) - theirs.clone()).to_f64().value().abs();
        let size = theirs.to_f64().value().abs().max(scale);
        difference / size * 2f64.powi(106)
    }

    fn arguments(limit: f64) -> impl Iterator<Item = Double> {
        // A Weyl sequence, with a low word so that both words are tried.
        (1..400).map(move |k| {
            let part = (f64::from(k) * 0.618_033_988_749_894_9).fract() * 2.0 - 1.0;
            let x = part * limit;
            Double::from_sum(x, x * 3.1e-17)
        })
    }

    #[test]
    fn exponential_and_logarithm_against_dashu() {
        let context = Context::<HalfEven>::new(160);
        for x in arguments(40.0)
            .chain(arguments(600.0))
            .chain(arguments(1e-3))
        {
            let theirs = context.exp(wide(x).repr(), None).unwrap().value();
            assert!(error(x.exp(), theirs, 0.0) < 64.0, "exp({x:?})");
            let y = x.abs();
            let theirs = context.ln(wide(y).repr(), None).unwrap().value();
            assert!(error(y.ln(), theirs, 0.0) < 64.0, "ln({y:?})");
            let near = Double::ONE + x.scale(2f64.powi(-12));
            if near.to_f64() > 0.0 {
                let theirs = context.ln(wide(near).repr(), None).unwrap().value();
                assert!(error(near.ln(), theirs, 0.0) < 64.0, "ln({near:?})");
            }
        }
    }

    #[test]
    fn sine_and_cosine_against_dashu() {
        let context = Context::<HalfEven>::new(200);
        for limit in [1.5, 100.0, 1e6, 1e9] {
            for x in arguments(limit) {
                let (sine, cosine) = x.sin_cos();
                let scale = if limit > 2.0 { 1.0 } else { 0.0 };
                let theirs = context.sin(wide(x).repr(), None).unwrap().value();
                assert!(error(sine, theirs, scale) < 64.0, "sin({x:?})");
                let theirs = context.cos(wide(x).repr(), None).unwrap().value();
                assert!(error(cosine, theirs, scale) < 64.0, "cos({x:?})");
            }
        }
    }

    #[test]
    fn hyperbolic_functions_are_consistent_and_keep_small_arguments() {
        for x in arguments(3.0).chain(arguments(1e-6)) {
            let (sinh, cosh) = (x.sinh(), x.cosh());
            let one = cosh * cosh - sinh * sinh;
            let size = cosh.to_f64().powi(2);
            assert!((one - Double::ONE).abs().to_f64() < 1e-30 * size, "{x:?}");
            let doubled = (x.scale(2.0)).sinh();
            let by_formula = (sinh * cosh).scale(2.0);
            let gap = (doubled - by_formula).abs().to_f64();
            assert!(gap < 1e-30 * doubled.abs().to_f64(), "{x:?}");
        }
        assert_eq!(Double::from(50.0).tanh().to_f64(), 1.0);
    }

    #[test]
    fn the_circle_constant_has_two_right_words() {
        let (sine, cosine) = Double::PI.sin_cos();
        assert!(sine.abs().to_f64() < 1e-31);
        assert_eq!(cosine.to_f64(), -1.0);
    }

    #[test]
    fn powers() {
        assert_eq!(
            Double::from(3.0).pow(Double::from(-2.0)),
            Double::ONE / Double::from(9.0)
        );
        let root = Double::from(2.0).pow(Double::from(0.5));
        assert!((root - Double::from(2.0).sqrt()).abs().to_f64() < 1e-30);
        assert!(Double::from(-8.0).pow(Double::from(0.5)).to_f64().is_nan());
        assert_eq!(Double::ZERO.pow(Double::from(0.3)).to_f64(), 0.0);
    }
}

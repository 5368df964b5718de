//! The equation whose roots are the factors of one step, `sum_j terms_j(z) f^j = 0`: the
//! series of the root that follows the solution, and whether all roots lie in the unit
//! disk. Both are decided in double-double and without computing a root, so that a limit
//! is known to the last place of an `f64`.

use nalgebra::Complex;

use super::scheme::Coefficients;
use super::stability::Rational;
use crate::number::Double;

/// The characteristic equation of a method on `x' = lambda x`.
#[derive(Clone, Debug, PartialEq)]
pub struct Characteristic {
    /// A polynomial in `z = h lambda` for each power of the factor, lowest first in both.
    pub terms: Vec<Vec<Double>>,
}

/// Squares of magnitudes that differ by less than this are equal: what is left of the
/// rounding of coefficients (1e-31) after some reductions, and still far below the growth
/// that a method of order six shows at a hundredth of its limit.
const ROUNDING: f64 = 1e-24;

impl Characteristic {
    /// The equation of a method; `None` where it is no polynomial in `z` and the factor.
    pub fn new(coefficients: &Coefficients) -> Option<Characteristic> {
        let terms = match coefficients {
            Coefficients::Stages(stages) => {
                let quotient = Rational::new(stages);
                let below = quotient.numerator.iter().map(|&c| -c).collect();
                vec![below, quotient.denominator]
            }
            Coefficients::Multistep { alpha, beta } => {
                let term = |(&a, &b): (&Double, &Double)| vec![a, -b];
                alpha.iter().zip(beta).map(term).collect()
            }
            Coefficients::Predicted {
                predictor,
                corrector,
            } => {
                let newest = corrector.len() - 1;
                let pull = corrector[newest];
                let term = |j: usize| {
                    let stay = if j + 1 == newest {
                        Double::ONE
                    } else {
                        Double::ZERO
                    };
                    vec![-stay, -(pull * stay + corrector[j]), -(pull * predictor[j])]
                };
                let past = (0..newest).map(term);
                past.chain([vec![Double::ONE]]).collect()
            }
            Coefficients::Iterated(_)
            | Coefficients::SemiImplicit
            | Coefficients::Exponential { .. } => return None,
        };
        Some(Characteristic { terms })
    }

    /// Coefficients of the Taylor series of the root that is one at `z = 0`.
    ///
    /// # Formula
    /// With the terms below `z^k` right, the residual at `z^k` is a known number plus
    /// `sum_j j terms_j(0)` times the next coefficient.
    pub fn series(&self, count: usize) -> Vec<Double> {
        let slope = self.terms.iter().enumerate();
        let slope = slope.fold(Double::ZERO, |sum, (j, term)| {
            sum + Double::from(j as f64) * at_power(term, 0)
        });
        let mut series = vec![Double::ONE];
        while series.len() < count {
            let k = series.len();
            series.push(Double::ZERO);
            let mut power = vec![Double::ZERO; k + 1];
            power[0] = Double::ONE;
            let mut residual = Double::ZERO;
            for term in &self.terms {
                residual += product_at(term, &power, k);
                power = (0..=k).map(|n| product_at(&power, &series, n)).collect();
            }
            series[k] = -residual / slope;
        }
        series.truncate(count);
        series
    }

    /// True where all factors tend to zero as `|z|` grows: of the terms with the highest
    /// power of `z` only that of the highest power of the factor is left.
    pub fn vanishes_at_infinity(&self) -> bool {
        let size = |c: &Double| c.abs().to_f64();
        let all = self.terms.iter().flatten();
        let rounding = ROUNDING * all.map(size).fold(0.0, f64::max);
        let degree = |term: &Vec<Double>| term.iter().rposition(|c| size(c) > rounding);
        match self.terms.split_last() {
            Some((last, others)) => others.iter().all(|term| degree(term) < degree(last)),
            None => false,
        }
    }

    /// True where no factor is larger than one.
    ///
    /// # Formula
    /// A polynomial of degree `n` has all its zeros in the unit disk where `|a_0| < |a_n|`
    /// and the same holds of `(conj(a_n) p - a_0 p*) / f`, `p*` the polynomial with its
    /// coefficients conjugated and reversed.
    ///
    /// # Source
    /// Schur; Cohn; `[hairer-norsett-wanner-1993]` III.3 for the use.
    pub fn is_stable(&self, z: Complex<f64>) -> bool {
        let z = Pair {
            re: Double::from(z.re),
            im: Double::from(z.im),
        };
        let value = |term: &Vec<Double>| {
            let parts = term.iter().rev();
            parts.fold(Pair::ZERO, |sum, &c| sum.times(z).plus(Pair::real(c)))
        };
        let mut polynomial: Vec<Pair> = self.terms.iter().map(value).collect();
        while polynomial.len() > 1 {
            scale_down(&mut polynomial);
            let degree = polynomial.len() - 1;
            let (first, last) = (polynomial[0], polynomial[degree]);
            let (small, large) = (first.square(), last.square());
            // Not a number is not stable.
            let fits = small.to_f64() <= large.to_f64() * 2.0
                && (small - large).to_f64() <= ROUNDING * large.to_f64();
            if !fits || large.to_f64() == 0.0 {
                return false;
            }
            let reduced = (1..=degree).map(|j| {
                let (own, mirrored) = (polynomial[j], polynomial[degree - j].conjugate());
                last.conjugate()
                    .times(own)
                    .plus(first.times(mirrored).negative())
            });
            polynomial = reduced.collect();
        }
        true
    }
}

fn at_power(polynomial: &[Double], power: usize) -> Double {
    polynomial.get(power).copied().unwrap_or(Double::ZERO)
}

/// One coefficient of a product of polynomials.
fn product_at(a: &[Double], b: &[Double], power: usize) -> Double {
    (0..=power).fold(Double::ZERO, |sum, k| {
        sum + at_power(a, k) * at_power(b, power - k)
    })
}

/// Reductions square magnitudes: without this they would leave the range of numbers.
fn scale_down(polynomial: &mut [Pair]) {
    let largest = polynomial.iter().fold(0.0, |largest: f64, c| {
        largest.max(c.re.abs().to_f64()).max(c.im.abs().to_f64())
    });
    if largest > 0.0 && largest.is_finite() {
        let factor = (-largest.log2().floor()).exp2();
        for c in polynomial {
            c.re = c.re.scale(factor);
            c.im = c.im.scale(factor);
        }
    }
}

/// A complex number of two double-doubles.
#[derive(Clone, Copy, Debug)]
struct Pair {
    re: Double,
    im: Double,
}

impl Pair {
    const ZERO: Pair = Pair {
        re: Double::ZERO,
        im: Double::ZERO,
    };

    fn real(re: Double) -> Pair {
        Pair {
            re,
            im: Double::ZERO,
        }
    }

    fn plus(self, other: Pair) -> Pair {
        Pair {
            re: self.re + other.re,
            im: self.im + other.im,
        }
    }

    fn times(self, other: Pair) -> Pair {
        Pair {
            re: self.re * other.re - self.im * other.im,
            im: self.re * other.im + self.im * other.re,
        }
    }

    fn negative(self) -> Pair {
        Pair {
            re: -self.re,
            im: -self.im,
        }
    }

    fn conjugate(self) -> Pair {
        Pair {
            re: self.re,
            im: -self.im,
        }
    }

    fn square(self) -> Double {
        self.re * self.re + self.im * self.im
    }
}

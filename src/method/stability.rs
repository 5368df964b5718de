//! Stability of a method on `x' = lambda x`: its stability function, how far along an
//! axis or a ray it stays stable, whether it is A- or L-stable. All of it is computed from
//! the coefficients; published limits are what the tests compare it with.

use nalgebra::{Complex, DMatrix, DVector, Schur};

use super::characteristic::Characteristic;
use super::iterated::iterated;
use super::scheme::{Coefficients, Stages};
use crate::number::{Double, Matrix};

/// The stability function of a one-step method as a quotient of two polynomials in
/// `z = h lambda`, lowest power first.
#[derive(Clone, Debug, PartialEq)]
pub struct Rational {
    /// Its value at 0 is one.
    pub numerator: Vec<Double>,
    /// Its value at 0 is one.
    pub denominator: Vec<Double>,
}

/// How far a method is stable.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Stability {
    /// `-real <= z <= 0` is stable; `None` where the whole axis is.
    pub real: Option<f64>,
    /// `|z| <= imaginary` is stable on the imaginary axis; `None` where all of it is.
    pub imaginary: Option<f64>,
    /// Stable wherever `Re z <= 0`.
    pub a_stable: bool,
    /// A-stable, and infinitely fast modes are gone after one step.
    pub l_stable: bool,
    /// Degrees either side of the negative real axis that are stable for any `|z|`.
    pub angle: f64,
}

impl Rational {
    /// The stability function of stages: `det(I - zB + z 1 b') / det(I - zB)`
    /// (`[hairer-wanner-1996]` IV.3).
    pub fn new(stages: &Stages) -> Rational {
        let mut shifted = stages.matrix.clone();
        for row in &mut shifted {
            for (entry, &weight) in row.iter_mut().zip(&stages.weights) {
                *entry -= weight;
            }
        }
        Rational {
            numerator: one_minus(&shifted),
            denominator: one_minus(&stages.matrix),
        }
    }

    /// Coefficients of its Taylor series.
    pub fn series(&self, terms: usize) -> Vec<Double> {
        let at = |list: &[Double], k: usize| list.get(k).copied().unwrap_or(Double::ZERO);
        let mut series: Vec<Double> = Vec::with_capacity(terms);
        for k in 0..terms {
            let carried = (1..=k).fold(Double::ZERO, |sum, j| {
                sum + at(&self.denominator, j) * series[k - j]
            });
            series.push(at(&self.numerator, k) - carried);
        }
        series
    }
}

/// `det(I - zB)` by powers of `z` (Faddeev, LeVerrier).
fn one_minus(matrix: &[Vec<Double>]) -> Vec<Double> {
    let size = matrix.len();
    let mut product = vec![vec![Double::ZERO; size]; size];
    let mut coefficients = vec![Double::ONE];
    for k in 1..=size {
        // product <- B (product + c I)
        let last = coefficients[k - 1];
        for (i, row) in product.iter_mut().enumerate() {
            row[i] += last;
        }
        product = matrix
            .iter()
            .map(|row| {
                (0..size)
                    .map(|j| {
                        row.iter()
                            .zip(&product)
                            .fold(Double::ZERO, |sum, (&b, p)| sum + b * p[j])
                    })
                    .collect()
            })
            .collect();
        let trace = (0..size).fold(Double::ZERO, |sum, i| sum + product[i][i]);
        coefficients.push(-trace / Double::from(k as f64));
    }
    coefficients
}

/// The stability function of stages at one `z`.
///
/// # Error bound
/// None: rounding grows with `|z|`, as one is taken from what nearly equals it.
pub fn of_stages(stages: &Stages, z: Complex<f64>) -> Complex<f64> {
    let size = stages.weights.len();
    let entry = |x: &Double| z * x.to_f64();
    let matrix = DMatrix::from_fn(size, size, |i, j| {
        let one = if i == j { 1.0 } else { 0.0 };
        Complex::new(one, 0.0) - entry(&stages.matrix[i][j])
    });
    let ones = DVector::from_element(size, Complex::new(1.0, 0.0));
    match matrix.lu().solve(&ones) {
        Some(slopes) => {
            let sum = stages.weights.iter().zip(slopes.iter());
            sum.fold(Complex::new(1.0, 0.0), |sum, (weight, slope)| {
                sum + entry(weight) * slope
            })
        }
        None => Complex::new(f64::INFINITY, 0.0),
    }
}

/// All factors by which a step can multiply a mode: one for a one-step method, one of
/// which follows the solution for a multistep method.
pub fn roots(coefficients: &Coefficients, z: Complex<f64>) -> Vec<Complex<f64>> {
    match coefficients {
        Coefficients::Stages(stages) => vec![of_stages(stages, z)],
        Coefficients::Exponential { .. } => vec![z.exp()],
        // A complex number as a matrix: the entries of its first column.
        Coefficients::Iterated(form) => {
            let turn = DMatrix::from_row_slice(2, 2, &[z.re, -z.im, z.im, z.re]);
            let past = iterated(form, &turn, 1.0).map_or(Vec::new(), |step| step.past);
            let term = |m: &Matrix<f64>| -Complex::new(m[(0, 0)], m[(1, 0)]);
            let terms = past.iter().map(term).chain([Complex::new(1.0, 0.0)]);
            zeros(&terms.collect::<Vec<_>>())
        }
        // On an oscillator: a pair of states takes turns. A single state has none to wait
        // for.
        Coefficients::SemiImplicit if z.im == 0.0 => vec![1.0 + z],
        Coefficients::SemiImplicit => {
            let size = z.norm_sqr();
            zeros(&[
                Complex::new(1.0 + 2.0 * z.re, 0.0),
                Complex::new(size - 2.0 - 2.0 * z.re, 0.0),
                Complex::new(1.0, 0.0),
            ])
        }
        Coefficients::Multistep { alpha, beta } => {
            let terms = alpha.iter().zip(beta);
            let terms: Vec<Complex<f64>> =
                terms.map(|(a, b)| a.to_f64() - z * b.to_f64()).collect();
            zeros(&terms)
        }
        Coefficients::Predicted {
            predictor,
            corrector,
        } => {
            let newest = corrector.len() - 1;
            let pull = corrector[newest].to_f64();
            let term = |j: usize| {
                let stay = if j + 1 == newest { 1.0 } else { 0.0 };
                let foreseen = stay + z * predictor[j].to_f64();
                -(stay + z * (pull * foreseen + corrector[j].to_f64()))
            };
            let mut terms: Vec<Complex<f64>> = (0..newest).map(term).collect();
            terms.push(Complex::new(1.0, 0.0));
            zeros(&terms)
        }
    }
}

/// Zeros of a polynomial, lowest power first, as eigenvalues of its companion matrix.
fn zeros(polynomial: &[Complex<f64>]) -> Vec<Complex<f64>> {
    let degree = polynomial.len() - 1;
    let lead = polynomial[degree];
    let largest = polynomial.iter().map(|c| c.norm()).fold(0.0, f64::max);
    if lead.norm() <= 1e-300 * largest {
        return vec![Complex::new(f64::INFINITY, 0.0)];
    }
    if degree == 1 {
        return vec![-polynomial[0] / lead];
    }
    if degree == 2 {
        // Of the two the larger one first: nothing cancels.
        let (b, c) = (polynomial[1] / lead / 2.0, polynomial[0] / lead);
        let root = (b * b - c).sqrt();
        let large = if (b + root).norm() >= (b - root).norm() {
            -(b + root)
        } else {
            -(b - root)
        };
        let small = if large.norm() == 0.0 {
            large
        } else {
            c / large
        };
        return vec![large, small];
    }
    let companion = DMatrix::from_fn(degree, degree, |i, j| {
        if i == 0 {
            -polynomial[degree - 1 - j] / lead
        } else if i == j + 1 {
            Complex::new(1.0, 0.0)
        } else {
            Complex::new(0.0, 0.0)
        }
    });
    // Without a bound the iteration never ends where a factor is no number.
    let schur = Schur::try_new(companion, f64::EPSILON, 1000);
    match schur.and_then(|schur| schur.eigenvalues()) {
        Some(values) => values.iter().copied().collect(),
        None => vec![Complex::new(f64::INFINITY, 0.0)],
    }
}

/// The largest factor by which a step can multiply a mode.
pub fn amplification(coefficients: &Coefficients, z: Complex<f64>) -> f64 {
    let sizes = roots(coefficients, z).into_iter().map(Complex::norm);
    sizes.fold(
        0.0,
        |largest, size| if size <= largest { largest } else { size },
    )
}

/// So many degrees from the negative real axis.
fn ray(degrees: f64) -> Complex<f64> {
    let (sine, cosine) = degrees.to_radians().sin_cos();
    Complex::new(-cosine, sine)
}

/// Where a method is stable, decided without computing a root.
struct Region {
    characteristic: Option<Characteristic>,
    oscillator: bool,
}

impl Region {
    fn new(coefficients: &Coefficients) -> Region {
        Region {
            characteristic: Characteristic::new(coefficients),
            oscillator: *coefficients == Coefficients::SemiImplicit,
        }
    }

    fn holds(&self, z: Complex<f64>) -> bool {
        match &self.characteristic {
            Some(characteristic) => characteristic.is_stable(z),
            None if self.oscillator && z.im == 0.0 => (1.0 + z.re).abs() <= 1.0,
            // Sum and product of the two factors of `roots`.
            None if self.oscillator => {
                let product = 1.0 + 2.0 * z.re;
                let sum = 1.0 + product - z.norm_sqr();
                product.abs() <= 1.0 && sum.abs() <= 1.0 + product
            }
            None => z.re <= 0.0,
        }
    }

    fn holds_along(&self, direction: Complex<f64>) -> bool {
        self.holds_at(direction, 12)
    }

    fn holds_at(&self, direction: Complex<f64>, points_per_decade: u32) -> bool {
        let point = |k: u32| 10f64.powf(-2.0 + f64::from(k) / f64::from(points_per_decade));
        (0..=10 * points_per_decade).all(|k| self.holds(direction * point(k)))
    }

    /// The widest stable sector, in degrees, to about 1e-3: a ray that is unstable between
    /// two points only is taken for stable.
    fn angle(&self) -> f64 {
        let (mut stable, mut unstable) = (0.0, 90.0);
        for _ in 0..20 {
            let middle = 0.5 * (stable + unstable);
            if self.holds_at(ray(middle), 400) {
                stable = middle;
            } else {
                unstable = middle;
            }
        }
        stable
    }

    /// See [`approx_stable_length`].
    fn length(&self, direction: Complex<f64>) -> Option<f64> {
        let at = |r: f64| self.holds(direction * r);
        let mut stable = 0.0;
        let mut r = 0.02;
        while at(r) {
            stable = r;
            // Explicit methods end below 60; beyond, only the far end is looked at.
            r = if r < 60.0 { r + 0.01 } else { r * 1.5 };
            if r > 1e9 {
                return None;
            }
        }
        let mut unstable = r;
        // Beside the origin instability grows slowly, as up to the eighth power of the
        // distance: any nearer it would be lost in rounding.
        if stable == 0.0 && !at(5e-3) {
            return Some(0.0);
        }
        for _ in 0..200 {
            let middle = 0.5 * (stable + unstable);
            if middle <= stable || middle >= unstable {
                break;
            }
            if at(middle) {
                stable = middle;
            } else {
                unstable = middle;
            }
        }
        Some(stable)
    }
}

/// The largest `r` such that all of `r' direction`, `0 <= r' <= r`, is stable; `None` where
/// there is no end to it. The direction has length one.
///
/// # Error bound
/// None: a gap narrower than a hundredth is passed over, and a limit below 0.005 is taken
/// for none. The end itself is decided in double-double and known to one unit in the last
/// place.
pub fn approx_stable_length(coefficients: &Coefficients, direction: Complex<f64>) -> Option<f64> {
    Region::new(coefficients).length(direction)
}

/// Stability of a method as a whole.
///
/// # Error bound
/// None; see [`approx_stable_length`]. A-stability is read off a grid of the left half of
/// the plane.
pub fn approx_stability(coefficients: &Coefficients) -> Stability {
    let region = Region::new(coefficients);
    let imaginary_axis = Complex::new(0.0, 1.0);
    let whole = region.holds_along(ray(0.0));
    let upright = region.holds_along(imaginary_axis);
    let a_stable = whole && upright && (1..18).all(|k| region.holds_along(ray(5.0 * f64::from(k))));
    let vanishes = match &region.characteristic {
        Some(characteristic) => characteristic.vanishes_at_infinity(),
        None => !region.oscillator,
    };
    let angle = match (a_stable, whole) {
        (true, _) => 90.0,
        (false, true) => match coefficients {
            Coefficients::Multistep { alpha, beta } => angle_of_locus(alpha, beta),
            _ => region.angle(),
        },
        (false, false) => 0.0,
    };
    Stability {
        real: if whole { None } else { region.length(ray(0.0)) },
        imaginary: if upright {
            None
        } else {
            region.length(imaginary_axis)
        },
        a_stable,
        l_stable: a_stable && vanishes,
        angle,
    }
}

/// The widest sector about the negative real axis that the boundary locus
/// `rho(e^it) / sigma(e^it)` leaves free, in degrees.
fn angle_of_locus(alpha: &[Double], beta: &[Double]) -> f64 {
    let value = |list: &[Double], turn: Complex<f64>| {
        let terms = list.iter().rev();
        terms.fold(Complex::new(0.0, 0.0), |sum, c| sum * turn + c.to_f64())
    };
    let angle = |t: f64| {
        let turn = Complex::new(0.0, t).exp();
        let z = value(alpha, turn) / value(beta, turn);
        if z.re < 0.0 {
            z.im.abs().atan2(-z.re).to_degrees()
        } else {
            90.0
        }
    };
    let count = 20_000;
    let place = |k: usize| std::f64::consts::PI * k as f64 / count as f64;
    let coarse = (1..count).min_by(|&a, &b| angle(place(a)).total_cmp(&angle(place(b))));
    let Some(coarse) = coarse else { return 90.0 };
    // Thirds: the locus is smooth there.
    let (mut low, mut high) = (place(coarse - 1), place(coarse + 1));
    for _ in 0..100 {
        let third = (high - low) / 3.0;
        if angle(low + third) < angle(high - third) {
            high -= third;
        } else {
            low += third;
        }
    }
    angle(0.5 * (low + high))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The quotient `1 / (1 - z + z^2/2 - z^3/6)`: no method of the catalogue has stages
    /// and a sector. 88.23 degrees: Hairer, Wanner II, sec. IV.3~, from memory; a scan of
    /// rays in NumPy gives 88.23015.
    #[test]
    fn stages_that_are_stable_in_a_sector() {
        let number = |x: f64| Double::from(x);
        let weights = vec![1.0 / 6.0, 2.0 / 3.0, 1.0 / 6.0];
        // The stages of Kutta's third order backwards in time, and the weights added.
        let own = [[0.0, 0.0, 0.0], [-0.5, 0.0, 0.0], [1.0, -2.0, 0.0]];
        let row = |row: &[f64; 3]| {
            let entries = row.iter().zip(&weights);
            entries.map(|(a, b)| number(a + b)).collect()
        };
        let stages = Stages {
            matrix: own.iter().map(row).collect(),
            weights: weights.iter().map(|&b| number(b)).collect(),
            nodes: vec![Double::ZERO; 3],
            slopes: vec![Double::ZERO; 3],
            ahead: Double::ZERO,
        };
        let quotient = Rational::new(&stages);
        for (k, wanted) in [1.0, -1.0, 0.5, -1.0 / 6.0].into_iter().enumerate() {
            assert!((quotient.denominator[k].to_f64() - wanted).abs() < 1e-15);
        }
        let found = approx_stability(&Coefficients::Stages(stages));
        assert!(!found.a_stable && !found.l_stable && found.real.is_none());
        assert!((found.angle - 88.230_15).abs() < 2e-3, "{}", found.angle);
    }
}

//! Stability functions, limits and angles; order and error constants.

use nalgebra::{Complex, DMatrix, Matrix2};
use stepgauge::method::{
    Coefficients, Rational, Scheme, Stability, Stages, amplification, approx_stability,
    approx_stable_length, find, of_stages, roots,
};
use stepgauge::number::Double;

use super::{agree, agree_but_for, agree_in_time, half_unit};
use crate::digits::read;

pub const ENTRIES: &[&str] = &[
    "ST01", "ST02", "ST03", "ST04", "ST05", "ST06", "ST07", "ST08", "ST09", "ST10", "ST11", "ST12",
    "ST13", "ST14", "ST15", "ST16", "ST17", "ST18", "ST19", "ST20", "ST21", "ST22", "ST23", "ST24",
    "ST25", "ST26", "ST27",
];

fn coefficients(name: &str) -> Coefficients {
    let method = find(name).unwrap_or_else(|| panic!("no method {name}"));
    assert_eq!(method.name, name);
    method.schemes[0].coefficients()
}

fn stages(name: &str) -> Stages {
    match coefficients(name) {
        Coefficients::Stages(stages) => stages,
        other => panic!("{name}: {other:?}"),
    }
}

fn rational(name: &str) -> Rational {
    Rational::new(&stages(name))
}

fn limits(name: &str) -> Stability {
    approx_stability(&coefficients(name))
}

fn whole(number: i32) -> Double {
    Double::from(f64::from(number))
}

fn fraction(numerator: i32, denominator: i32) -> Double {
    whole(numerator) / whole(denominator)
}

/// Numbers as an entry has them: `1/2`, `-3`.
fn fractions(text: &str) -> Vec<Double> {
    let number = |entry: &str| {
        let (numerator, denominator) = entry.split_once('/').unwrap_or((entry, "1"));
        fraction(numerator.parse().unwrap(), denominator.parse().unwrap())
    };
    text.split_whitespace().map(number).collect()
}

/// Exact entries: some dozens of operations of double-double, 1e-32 each, on numbers up to
/// a hundred.
fn same(id: &str, value: Double, wanted: Double) {
    let gap = (value - wanted).abs().to_f64();
    let allowed = 1e-28 * wanted.abs().to_f64().max(1.0);
    assert!(gap <= allowed, "{id}: {value:?}, not {wanted:?}");
}

/// Coefficients of a polynomial; what one has more than the other is zero.
fn same_list(id: &str, list: &[Double], wanted: &str) {
    let wanted = fractions(wanted);
    for k in 0..list.len().max(wanted.len()) {
        let at = |list: &[Double]| list.get(k).copied().unwrap_or(Double::ZERO);
        same(id, at(list), at(&wanted));
    }
}

/// More digits than an `f64` has: half a unit of the last one, and double-double.
fn agree_wide(id: &str, value: Double, text: &str) {
    let gap = (value - read(text)).abs().to_f64();
    let allowed = half_unit(text) + 1e-28 * value.abs().to_f64();
    assert!(
        gap <= allowed,
        "{id}: {value:?}, not {text}: off by {gap:e}"
    );
}

fn value(polynomial: &[Double], z: Double) -> Double {
    let terms = polynomial.iter().rev();
    terms.fold(Double::ZERO, |sum, &c| sum * z + c)
}

fn at(rational: &Rational, z: Double) -> Double {
    value(&rational.numerator, z) / value(&rational.denominator, z)
}

/// Where `z` goes to infinity: the quotient of the highest coefficients.
fn at_infinity(rational: &Rational) -> Double {
    let degree = rational.denominator.len() - 1;
    rational.numerator[degree] / rational.denominator[degree]
}

/// Coefficients of `R - exp` up to a power.
fn beyond_exp(rational: &Rational, power: usize) -> Vec<Double> {
    let mut factorial = Double::ONE;
    let mut difference = rational.series(power + 1);
    for (k, term) in difference.iter_mut().enumerate() {
        if k > 0 {
            factorial *= whole(k as i32);
        }
        *term -= Double::ONE / factorial;
    }
    difference
}

/// `R - exp` begins with this coefficient at this power.
fn begins_with(id: &str, rational: &Rational, power: usize, wanted: Double) {
    let difference = beyond_exp(rational, power);
    for &term in &difference[..power] {
        same(id, term, Double::ZERO);
    }
    same(id, difference[power], wanted);
}

fn on_the_imaginary_axis(y: f64) -> Complex<f64> {
    Complex::new(0.0, y)
}

// ST01, ST02: Hairer, Wanner, Solving ODEs II, sec. IV.2~. M. Exact.
#[test]
fn st01_and_st02_euler_and_two_stages() {
    let euler = rational("forward Euler");
    same_list("ST01", &euler.numerator, "1 1");
    same_list("ST01", &euler.denominator, "1");
    assert_eq!(limits("forward Euler").real, Some(2.0), "ST01");
    assert_eq!(limits("forward Euler").imaginary, Some(0.0), "ST01");
    for name in ["explicit midpoint", "Heun", "Ralston"] {
        same_list("ST02", &rational(name).numerator, "1 1 1/2");
        same_list("ST02", &rational(name).denominator, "1");
        assert_eq!(limits(name).real, Some(2.0), "ST02, {name}");
        assert_eq!(limits(name).imaginary, Some(0.0), "ST02, {name}");
    }
}

// ST03: closed form R (source of a relativity code's third-order stepper, which states
// half of it); rest Hairer, Wanner II, sec. IV.2~, M.
#[test]
fn st03_three_stages() {
    let c = (whole(4) + whole(17).sqrt()).pow(fraction(1, 3));
    let closed = Double::ONE + c - Double::ONE / c;
    agree_wide("ST03", closed, "2.512745326618328624023735");
    for name in ["Kutta 3", "Heun 3", "SSP 3", "Bogacki-Shampine 3"] {
        same_list("ST03", &rational(name).numerator, "1 1 1/2 1/6");
        let limits = limits(name);
        let (real, imaginary) = (limits.real.unwrap(), limits.imaginary.unwrap());
        agree("ST03", real, "2.512745326618328624023735");
        agree("ST03", real, "2.51");
        agree("ST03", imaginary, "1.732050807568877293527");
        agree("ST03", imaginary, "1.73");
    }
}

// ST04: Hairer, Wanner II, sec. IV.2~ (2.785...). R (second-hand, several sources).
// ST05: C. Praveen, Numerical analysis notes, "ode-stability" (cpraveen.github.io/numa). R.
#[test]
fn st04_and_st05_classical_rk4() {
    for name in ["classical RK4", "3/8 rule"] {
        let quotient = rational(name);
        same_list("ST04", &quotient.numerator, "1 1 1/2 1/6 1/24");
        let limits = limits(name);
        agree("ST04", limits.real.unwrap(), "2.785293563405282");
        agree("ST04", limits.real.unwrap(), "2.785293563405281623529759");
        agree("ST05", limits.imaginary.unwrap(), "2.828");
        agree("ST05", limits.imaginary.unwrap(), "2.828427124746190097603");
        // The quartic whose zero the limit is.
        let z = -read("2.785293563405281623529759");
        let quartic = value(&fractions("1 1/2 1/6 1/24"), z).abs().to_f64();
        assert!(quartic < 1e-24, "ST04: {quartic:e}");
    }
}

// ST06: Chalmers course page mve080, "Regions of absolute stability". R.
// ST07: real limit R (second-hand); imaginary limit D.
#[test]
fn st06_and_st07_dormand_prince() {
    let quotient = rational("Dormand-Prince 5");
    same_list("ST06", &quotient.numerator, "1 1 1/2 1/6 1/24 1/120 1/600");
    same_list("ST06", &quotient.denominator, "1");
    let limits = limits("Dormand-Prince 5");
    agree("ST07", limits.real.unwrap(), "3.306567892634947");
    agree("ST07", limits.real.unwrap(), "3.306567892634946503721");
    let first_crossing = "0.99718900863252991552";
    agree("ST07", limits.imaginary.unwrap(), first_crossing);
}

// ST08: Chalmers page as ST06, R; the last term of the fifth-order row D.
#[test]
fn st08_fehlberg() {
    let fourth = rational("Runge-Kutta-Fehlberg 4");
    same_list("ST08", &fourth.numerator, "1 1 1/2 1/6 1/24 1/104");
    let fifth = rational("Runge-Kutta-Fehlberg 5");
    let row = "1 1 1/2 1/6 1/24 1/120 1/2080";
    same_list("ST08", &fifth.numerator, row);
}

// ST09: tableau from memory of Dormand, Prince 1980. M. The row is not in the catalogue:
// it serves an estimate of the error there, no result.
#[test]
fn st09_embedded_row_of_dormand_prince() {
    let Scheme::RungeKutta { matrix, weights } = find("Dormand-Prince 5").unwrap().schemes[0]
    else {
        panic!("ST09");
    };
    // The seventh stage looks where the step ends.
    let matrix = format!("{matrix}; {weights}");
    let embedded = Scheme::RungeKutta {
        matrix: Box::leak(matrix.into_boxed_str()),
        weights: "5179/57600 0 7571/16695 393/640 -92097/339200 187/2100 1/40",
    };
    let Coefficients::Stages(stages) = embedded.coefficients() else {
        panic!("ST09");
    };
    let row = "1 1 1/2 1/6 1/24 1097/120000 161/120000 1/24000";
    same_list("ST09", &Rational::new(&stages).numerator, row);
}

// ST10: Hairer, Wanner II, sec. IV.3~. M.
#[test]
fn st10_implicit_euler_and_trapezoidal_rule() {
    let euler = rational("backward Euler");
    same_list("ST10", &euler.numerator, "1");
    same_list("ST10", &euler.denominator, "1 -1");
    begins_with("ST10", &euler, 2, fraction(1, 2));
    same("ST10", at_infinity(&euler), Double::ZERO);
    for name in ["trapezoidal", "implicit midpoint"] {
        let quotient = rational(name);
        same_list("ST10", &quotient.numerator, "1 1/2");
        same_list("ST10", &quotient.denominator, "1 -1/2");
        begins_with("ST10", &quotient, 3, fraction(1, 12));
        // The trapezoidal rule has a stage that multiplies both sides by one.
        let size = quotient.denominator.len() - 1;
        let degree = if size == 2 { 1 } else { size };
        let far = quotient.numerator[degree] / quotient.denominator[degree];
        same("ST10", far, -Double::ONE);
        for y in [0.01, 0.7, 1.9, 3.0, 40.0, 1e6] {
            // Solving and dividing complex numbers: some units in the last place.
            let size = of_stages(&stages(name), on_the_imaginary_axis(y)).norm();
            assert!((size - 1.0).abs() < 8.0 * f64::EPSILON, "ST10: {y}: {size}");
        }
    }
}

// ST11: Hairer, Wanner II, sec. IV.5~. M. ST13: same, table IV.3~. M.
#[test]
fn st11_and_st13_radau_and_gauss_of_two_stages() {
    let radau = rational("Radau IIA 3");
    same_list("ST11", &radau.numerator, "1 1/3");
    same_list("ST11", &radau.denominator, "1 -2/3 1/6");
    begins_with("ST11", &radau, 4, fraction(-1, 72));
    same("ST11", at_infinity(&radau), Double::ZERO);
    let gauss = rational("Gauss 4");
    same_list("ST13", &gauss.numerator, "1 1/2 1/12");
    same_list("ST13", &gauss.denominator, "1 -1/2 1/12");
    begins_with("ST13", &gauss, 5, fraction(-1, 720));
}

// ST12: Hairer, Wanner II, sec. IV.8~ (code RADAU5). R (second-hand).
#[test]
fn st12_radau_of_three_stages() {
    // det(I - zA) is zero where z is an eigenvalue of the inverse of A.
    let denominator = rational("Radau IIA 5").denominator;
    let cubic: Vec<Double> = denominator.iter().map(|&c| c * whole(-60)).collect();
    same_list("ST12", &cubic, "-60 36 -9 1");
    let slope = fractions("36 -18 3");
    let newton = |x: Double, _| x - value(&cubic, x) / value(&slope, x);
    let root = (0..10).fold(whole(4), newton);
    agree_wide("ST12", root, "3.6378342527444957322");
    agree_wide("ST12", root, "3.637834252744495732208419");
    let ninth = whole(9).pow(fraction(1, 3));
    same(
        "ST12",
        root,
        whole(3) + ninth - whole(3).pow(fraction(1, 3)),
    );
    // The other two have the sum 9 - root and the product 60 / root.
    let real = (whole(9) - root) * fraction(1, 2);
    let imaginary = (whole(60) / root - real * real).sqrt();
    agree_wide("ST12", real, "2.6810828736277521339");
    agree_wide("ST12", real, "2.681082873627752133895791");
    agree_wide("ST12", imaginary, "3.0504301992474105694");
    agree_wide("ST12", imaginary, "3.050430199247410569426378");
    // The same from the matrix itself, in f64: eigenvalues good to some units in the last
    // place of its norm, 12.
    let matrix = stages("Radau IIA 5").matrix;
    let matrix = DMatrix::from_fn(3, 3, |i, j| matrix[i][j].to_f64());
    let eigenvalues = matrix.try_inverse().unwrap().complex_eigenvalues();
    let near = |real: f64, imaginary: f64| {
        let wanted = Complex::new(real, imaginary);
        eigenvalues.iter().any(|e| (e - wanted).norm() < 1e-13)
    };
    let (real, imaginary) = (real.to_f64(), imaginary.to_f64());
    let all = near(root.to_f64(), 0.0) && near(real, imaginary) && near(real, -imaginary);
    assert!(all, "ST12: {eigenvalues}");
}

// ST14: R. Alexander, SIAM J. Numer. Anal. 14 (1977) 1006. Third R (second-hand), others M.
#[test]
fn st14_diagonally_implicit_parameters() {
    let diagonal = |name: &str| stages(name).matrix[0][0];
    let two = diagonal("SDIRK 2");
    agree_wide("ST14", two, "0.29289321881345247560");
    same("ST14", two, Double::ONE - Double::ONE / whole(2).sqrt());
    begins_at("ST14", "SDIRK 2", 3);
    assert!(limits("SDIRK 2").l_stable, "ST14");
    let crouzeix = diagonal("SDIRK 3, two stages");
    agree_wide("ST14", crouzeix, "0.78867513459481288225");
    same("ST14", crouzeix, (whole(3) + whole(3).sqrt()) / whole(6));
    begins_at("ST14", "SDIRK 3, two stages", 4);
    let found = limits("SDIRK 3, two stages");
    assert!(found.a_stable && !found.l_stable, "ST14");
    let three = diagonal("SDIRK 3");
    agree_wide("ST14", three, "0.43586652150845899941601945119356");
    agree_wide("ST14", three, "0.4358665215084589994160195");
    let cubic = value(&fractions("-1/6 3/2 -3 1"), three).abs().to_f64();
    assert!(cubic < 1e-31, "ST14: {cubic:e}");
    begins_at("ST14", "SDIRK 3", 4);
    assert!(limits("SDIRK 3").l_stable, "ST14");
}

/// `R - exp` begins at this power.
fn begins_at(id: &str, name: &str, power: usize) {
    let quotient = rational(name);
    let first = beyond_exp(&quotient, power)[power];
    assert!(first.abs().to_f64() > 1e-3, "{id}: {name}: {first:?}");
    begins_with(id, &quotient, power, first);
}

// ST15: Bank et al. 1985; Hosea, Shampine 1996. M. The published constant is that of the
// defect, exp - R.
#[test]
fn st15_tr_bdf2() {
    let gamma = stages("TR-BDF2").nodes[1];
    agree_wide("ST15", gamma, "0.58578643762690495120");
    same("ST15", gamma, whole(2) - whole(2).sqrt());
    let quotient = rational("TR-BDF2");
    let first = beyond_exp(&quotient, 3)[3];
    agree_wide("ST15", -first, "-0.04044011451988085773");
    let above = whole(-3) * gamma * gamma + whole(4) * gamma - whole(2);
    let closed = above / (whole(12) * (whole(2) - gamma));
    begins_with("ST15", &quotient, 3, -closed);
    let limits = limits("TR-BDF2");
    assert!(limits.a_stable && limits.l_stable, "ST15");
}

/// Stages whose stability function is `T_s(1 + z/s^2)`: the recurrence of the Chebyshev
/// polynomials, written as a tableau.
fn chebyshev(count: usize) -> Stages {
    let first = Double::ONE / whole((count * count) as i32);
    let mut rows = vec![vec![Double::ZERO; count]];
    let mut row = vec![Double::ZERO; count];
    row[0] = first;
    rows.push(row);
    for j in 2..=count {
        let two = |x: Double| x.scale(2.0);
        let next = (0..count).map(|k| {
            let pull = if k + 1 == j { two(first) } else { Double::ZERO };
            two(rows[j - 1][k]) - rows[j - 2][k] + pull
        });
        rows.push(next.collect());
    }
    let weights = rows.pop().unwrap();
    let sum = |row: &Vec<Double>| row.iter().fold(Double::ZERO, |sum, &x| sum + x);
    Stages {
        nodes: rows.iter().map(sum).collect(),
        slopes: vec![Double::ZERO; count],
        ahead: Double::ZERO,
        matrix: rows,
        weights,
    }
}

// ST16: Hairer, Wanner II, sec. IV.2~. M.
#[test]
fn st16_chebyshev() {
    let quotient = Rational::new(&chebyshev(5));
    // T_5(1) = 1, and the slope there is s^2.
    same("ST16", quotient.numerator[1], Double::ONE);
    // Coefficients of double-double, 1e-32, times 50^5.
    let end = (at(&quotient, whole(-50)) + Double::ONE).abs().to_f64();
    assert!(end < 3e-24, "ST16: {end:e}");
    let beyond = at(&quotient, read("-50.01"));
    agree_wide("ST16", beyond, "-1.010016");
    let negative = Complex::new(-1.0, 0.0);
    for count in 2..=6 {
        let coefficients = Coefficients::Stages(chebyshev(count));
        let limit = approx_stable_length(&coefficients, negative).unwrap();
        assert_eq!(limit, (2 * count * count) as f64, "ST16, {count} stages");
    }
}

// ST17: 6/11 R (math.techqa.club "Problem in Adams Bashforth 3rd order method"); rest
// Hairer, Wanner II, sec. V.1~, M. ST21: same section. M.
#[test]
fn st17_and_st21_adams_on_the_real_axis() {
    for (id, name, limit) in [
        ("ST17", "Adams-Bashforth 2", fraction(1, 1)),
        ("ST17", "Adams-Bashforth 3", fraction(6, 11)),
        ("ST17", "Adams-Bashforth 4", fraction(3, 10)),
        ("ST17", "Adams-Bashforth 5", fraction(90, 551)),
        ("ST21", "Adams-Moulton 3", fraction(6, 1)),
        ("ST21", "Adams-Moulton 4", fraction(3, 1)),
        ("ST21", "Adams-Moulton 5", fraction(90, 49)),
    ] {
        let found = limits(name).real.unwrap();
        // The limit lies between two neighbouring f64.
        let gap = (Double::from(found) - limit).abs().to_f64();
        assert!(gap <= f64::EPSILON * found, "{id}: {name}: {found}");
        let root = roots(&coefficients(name), Complex::new(-found, 0.0));
        let nearest = root.iter().map(|root| (root + 1.0).norm());
        let nearest = nearest.fold(f64::INFINITY, f64::min);
        assert!(nearest < 1e-13, "{id}: {name}: -1 is no root: {root:?}");
    }
    agree_but_for("ST17", 90.0 / 551.0, "0.163", 0.0);
}

// ST18: D. Durran, Mon. Weather Rev. 119 (1991) 702. M.
#[test]
fn st18_adams_bashforth_on_the_imaginary_axis() {
    assert_eq!(limits("forward Euler").imaginary, Some(0.0), "ST18");
    assert_eq!(limits("Adams-Bashforth 2").imaginary, Some(0.0), "ST18");
    let third = limits("Adams-Bashforth 3").imaginary.unwrap();
    agree("ST18", third, "0.72");
    agree("ST18", third, "0.723627226986633");
    let fourth = limits("Adams-Bashforth 4").imaginary.unwrap();
    agree("ST18", fourth, "0.43");
    agree("ST18", fourth, "0.429987079909256");
}

// ST19: R (isolution.pro, question ma16471098). Newest first, as published.
#[test]
fn st19_adams_coefficients() {
    let newest_first = |list: &[Double]| list.iter().rev().copied().collect::<Vec<_>>();
    for (name, wanted) in [
        ("Adams-Bashforth 2", "0 3/2 -1/2"),
        ("Adams-Bashforth 3", "0 23/12 -16/12 5/12"),
        ("Adams-Bashforth 4", "0 55/24 -59/24 37/24 -9/24"),
        (
            "Adams-Bashforth 5",
            "0 1901/720 -2774/720 2616/720 -1274/720 251/720",
        ),
        ("Adams-Moulton 3", "5/12 8/12 -1/12"),
        ("Adams-Moulton 4", "9/24 19/24 -5/24 1/24"),
        (
            "Adams-Moulton 5",
            "251/720 646/720 -264/720 106/720 -19/720",
        ),
    ] {
        let Coefficients::Multistep { alpha, beta } = coefficients(name) else {
            panic!("ST19: {name}");
        };
        same_list("ST19", &newest_first(&beta), wanted);
        same_list("ST19", &newest_first(&alpha), "1 -1");
    }
    // One step: the trapezoidal rule, and the corrector of a pair.
    same_list("ST19", &stages("trapezoidal").weights, "1/2 1/2");
    for (name, explicit, implicit) in [
        ("2", "0 3/2 -1/2", "1/2 1/2"),
        ("3", "0 23/12 -16/12 5/12", "5/12 8/12 -1/12"),
        ("4", "0 55/24 -59/24 37/24 -9/24", "9/24 19/24 -5/24 1/24"),
        (
            "5",
            "0 1901/720 -2774/720 2616/720 -1274/720 251/720",
            "251/720 646/720 -264/720 106/720 -19/720",
        ),
    ] {
        let Coefficients::Predicted {
            predictor,
            corrector,
        } = coefficients(&format!("Adams-Bashforth-Moulton {name}"))
        else {
            panic!("ST19: {name}");
        };
        same_list("ST19", &newest_first(&predictor), explicit);
        same_list("ST19", &newest_first(&corrector), implicit);
    }
}

/// `C_q = sum alpha_j j^q / q! - sum beta_j j^(q-1) / (q-1)!` for `q = 0, 1, ...`.
pub fn order_conditions(alpha: &[Double], beta: &[Double], count: usize) -> Vec<Double> {
    let moment = |list: &[Double], power: usize| {
        let mut sum = Double::ZERO;
        for (j, &c) in list.iter().enumerate() {
            let mut term = c;
            for k in 1..=power {
                term *= fraction(j as i32, k as i32);
            }
            sum += term;
        }
        sum
    };
    let condition = |q: usize| match q {
        0 => moment(alpha, 0),
        _ => moment(alpha, q) - moment(beta, q - 1),
    };
    (0..count).map(condition).collect()
}

// ST20: J. Lambert, Numerical Methods for Ordinary Differential Systems, 1991. M.
#[test]
fn st20_adams_error_constants() {
    for (name, order, constant) in [
        ("Adams-Bashforth 2", 2, fraction(5, 12)),
        ("Adams-Bashforth 3", 3, fraction(3, 8)),
        ("Adams-Bashforth 4", 4, fraction(251, 720)),
        ("Adams-Bashforth 5", 5, fraction(95, 288)),
        ("Adams-Moulton 3", 3, fraction(-1, 24)),
        ("Adams-Moulton 4", 4, fraction(-19, 720)),
        ("Adams-Moulton 5", 5, fraction(-3, 160)),
    ] {
        let Coefficients::Multistep { alpha, beta } = coefficients(name) else {
            panic!("ST20: {name}");
        };
        let conditions = order_conditions(&alpha, &beta, order + 2);
        for &condition in &conditions[..=order] {
            same("ST20", condition, Double::ZERO);
        }
        same("ST20", conditions[order + 1], constant);
    }
    // One step; R - exp has the other sign.
    begins_with("ST20", &rational("trapezoidal"), 3, -fraction(-1, 12));
}

// ST22: Hairer, Norsett, Wanner, Solving ODEs I, sec. III.2~. M.
#[test]
fn st22_bdf_error_constants() {
    begins_with("ST22", &rational("backward Euler"), 2, -fraction(-1, 2));
    for order in 2..=6 {
        let Coefficients::Multistep { alpha, beta } = coefficients(&format!("BDF {order}")) else {
            panic!("ST22: {order}");
        };
        let own = beta[order];
        let conditions = order_conditions(&alpha, &beta, order + 2);
        for &condition in &conditions[..=order] {
            same("ST22", condition, Double::ZERO);
        }
        let constant = conditions[order + 1] / own;
        same("ST22", constant, -fraction(1, order as i32 + 1));
    }
}

// ST23: BIT Numer. Math., DOI 10.1007/s10543-019-00796-x (authors not visible in the
// copy). R. L. Loczi, Numer. Algorithms 2020 finds the same angles.
#[test]
fn st23_bdf_angles() {
    let closed = |above: i32, root: i32, below: i32| {
        (f64::from(above) * f64::from(root).sqrt() / f64::from(below))
            .atan()
            .to_degrees()
    };
    for (name, angle, tangent) in [
        (
            "BDF 3",
            "86.032366860211647332387423479",
            Some(closed(329, 35, 135)),
        ),
        (
            "BDF 4",
            "73.351670474578482110409536864",
            Some(closed(699, 6, 512)),
        ),
        ("BDF 5", "51.839755836049910391602721533", None),
        (
            "BDF 6",
            "17.839777792245700101632480553",
            Some(closed(45503, 195, 1_974_375)),
        ),
    ] {
        let found = limits(name);
        // Some units in the last place: the locus is a quotient of sums of six terms in
        // f64, the minimum itself is flat.
        agree_in_time("ST23", found.angle, angle);
        if let Some(tangent) = tangent {
            agree_in_time("ST23", tangent, angle);
        }
        assert!(!found.a_stable && found.real.is_none(), "ST23: {name}");
    }
}

// ST24: A. Chopra, Dynamics of Structures, sec. 5.3~; the limit as such R (Newmark-beta
// article, chaos.owiki.org). Leapfrog and central differences move the same positions.
#[test]
fn st24_leapfrog() {
    let leapfrog = Coefficients::SemiImplicit;
    let limit = approx_stable_length(&leapfrog, on_the_imaginary_axis(1.0)).unwrap();
    assert_eq!(limit, 2.0, "ST24");
    let over_period = limit / std::f64::consts::TAU;
    agree("ST24", over_period, "0.31830988618379067154");
    agree("ST24", over_period, "0.318");
    for y in [0.1, 1.0, 1.999, 2.0] {
        let size = amplification(&leapfrog, on_the_imaginary_axis(y));
        // Beside a double root the root of a rounded number is off by the root of it.
        assert!((size - 1.0).abs() < 1e-7, "ST24: {y}: {size}");
    }
    assert!(
        amplification(&leapfrog, on_the_imaginary_axis(2.001)) > 1.06,
        "ST24"
    );
}

/// Newmark's method with `gamma = 1/2` on `x'' = -w^2 x`, for position and `h` times
/// velocity, from its defining equations; `square` is `(h w)^2`.
fn newmark(beta: f64, square: f64) -> Matrix2<f64> {
    // (1 + beta W) x1 = (1 - (1/2 - beta) W) x + v;  v1 = v - W/2 (x + x1)
    let own = 1.0 + beta * square;
    let (xx, xv) = ((1.0 - (0.5 - beta) * square) / own, 1.0 / own);
    Matrix2::new(xx, xv, -0.5 * square * (1.0 + xx), 1.0 - 0.5 * square * xv)
}

/// The turn of a mode in one step.
fn turn(factors: &[Complex<f64>]) -> f64 {
    factors.iter().map(|f| f.arg().abs()).fold(0.0, f64::max)
}

// ST25: Chopra, sec. 5.5~. M. Not in the catalogue: its matrix is made here.
#[test]
fn st25_linear_acceleration() {
    // At the end a double root parts as the square root of the distance: 1e-7 of growth
    // is 1e-14 of that.
    let is_stable = |y: f64| {
        let factors = newmark(1.0 / 6.0, y * y).complex_eigenvalues();
        factors.iter().all(|f| f.norm() <= 1.0 + 1e-7)
    };
    let (mut low, mut high) = (1.0, 10.0);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        *(if is_stable(middle) {
            &mut low
        } else {
            &mut high
        }) = middle;
    }
    let over_period = low / std::f64::consts::TAU;
    agree("ST25", over_period, "0.551");
    agree_but_for("ST25", over_period, "0.5513288954217920495", 1e-14);
    // Average acceleration is the trapezoidal rule, without end.
    let factors = newmark(0.25, 1e4).complex_eigenvalues();
    let trapezoidal = amplification(&coefficients("trapezoidal"), on_the_imaginary_axis(100.0));
    assert!((factors[0].norm() - trapezoidal).abs() < 1e-13, "ST25");
}

// ST26: Chopra, fig. 5.5.2~; first M, others D.
#[test]
fn st26_period_errors() {
    let angle = 0.2 * std::f64::consts::PI;
    let percent = |turn: f64| 100.0 * (angle / turn - 1.0);
    let z = on_the_imaginary_axis(angle);
    let average = percent(turn(&roots(&coefficients("trapezoidal"), z)));
    assert_eq!(average.round(), 3.0, "ST26: about 3 %");
    let linear = newmark(1.0 / 6.0, angle * angle).complex_eigenvalues();
    let linear = percent(turn(linear.as_slice()));
    let central = percent(turn(&roots(&coefficients("semi-implicit Euler"), z)));
    // A hundred times a quotient near one: 1e-13.
    agree_but_for("ST26", average, "3.20749106", 1e-13);
    agree_but_for("ST26", linear, "1.60019218", 1e-13);
    agree_but_for("ST26", central, "-1.69342298", 1e-13);
    let newmark = newmark(0.25, angle * angle).complex_eigenvalues();
    let newmark = percent(turn(newmark.as_slice()));
    assert!((newmark - average).abs() < 1e-12, "ST26");
}

// ST27: O'Brien, Hyman, Kaplan 1950; G. Smith, Numerical Solution of PDEs. M.
#[test]
fn st27_explicit_euler_on_the_heat_equation() {
    let reach = limits("forward Euler").real.unwrap();
    let mut before = f64::INFINITY;
    for nodes in [10, 40, 160] {
        // Second differences of nodes between two cold ends.
        let matrix = DMatrix::from_fn(nodes, nodes, |i, j| match i.abs_diff(j) {
            0 => -2.0,
            1 => 1.0,
            _ => 0.0,
        });
        let fastest = matrix.symmetric_eigenvalues().min();
        let number = -reach / fastest;
        // The fastest mode is 4 cos^2(pi / (2 (nodes + 1))): its shortfall is of second
        // order in the spacing.
        let spacing = 1.0 / (nodes as f64 + 1.0);
        let excess: f64 = number - 0.5;
        assert!(excess > 0.0 && number < before, "ST27: {nodes}: {number}");
        let second: f64 = 0.5 * (0.5 * std::f64::consts::PI * spacing).powi(2);
        assert!(
            (excess / second - 1.0).abs() < 0.02,
            "ST27: {nodes}: {number}"
        );
        before = number;
    }
}

use nalgebra::Complex;
use stepgauge::method::{
    Characteristic, Coefficients, METHODS, Method, Rational, amplification, approx_stability,
    approx_stable_length, find, roots,
};
use stepgauge::number::Double;

use crate::published::order_conditions;

/// Every form of every method.
fn forms() -> impl Iterator<Item = (&'static Method, Coefficients)> {
    METHODS.iter().flat_map(|method| {
        let forms = method.schemes.iter();
        forms.map(move |scheme| (method, scheme.coefficients()))
    })
}

/// Taylor coefficients of a factor less those of `exp`.
fn beyond_exp(series: &[Double]) -> Vec<f64> {
    let mut wanted = Double::ONE;
    let mut difference = Vec::new();
    for (k, &term) in series.iter().enumerate() {
        if k > 0 {
            wanted = wanted / Double::from(k as f64);
        }
        difference.push((term - wanted).abs().to_f64());
    }
    difference
}

/// Some dozens of operations of double-double.
const ROUNDING: f64 = 1e-27;
/// The smallest constant of the catalogue, that of Gauss 6, is 1/100800.
const THERE: f64 = 9e-6;

/// The series of the factor is that of exp up to the order of the method, and differs in
/// the next term: no method of the catalogue is better on linear problems than on others,
/// but for the two below that have no series.
#[test]
fn every_factor_follows_exp_to_the_order_and_no_further() {
    let mut seen = 0;
    for (method, coefficients) in forms() {
        let Some(characteristic) = Characteristic::new(&coefficients) else {
            continue;
        };
        let order = usize::from(method.order);
        let gaps = beyond_exp(&characteristic.series(order + 2));
        for (power, &gap) in gaps[..=order].iter().enumerate() {
            assert!(gap < ROUNDING, "{}, power {power}: {gap:e}", method.name);
        }
        let next = gaps[order + 1];
        assert!(
            next > THERE,
            "{}, power {}: {next:e}",
            method.name,
            order + 1
        );
        if let Coefficients::Stages(stages) = &coefficients {
            // A quotient divided out, and a root followed term by term.
            let series = Rational::new(stages).series(order + 2);
            let other = characteristic.series(order + 2);
            let gap = |(a, b): (&Double, &Double)| (*a - *b).abs().to_f64();
            let gap = series.iter().zip(&other).map(gap).fold(0.0, f64::max);
            assert!(gap < ROUNDING, "{}: {gap:e}", method.name);
        }
        seen += 1;
    }
    assert!(seen > 40);
}

/// The semi-implicit step of an oscillator is that of central differences: of order two in
/// the turn, although of order one in the states. The exponential step is exact.
#[test]
fn methods_without_a_series() {
    let error = |name: &str, y: f64| {
        let z = Complex::new(0.0, y);
        let factors = roots(&find(name).unwrap().schemes[0].coefficients(), z);
        let gaps = factors.iter().map(|factor| (factor - z.exp()).norm());
        gaps.fold(f64::INFINITY, f64::min)
    };
    let slope = (error("semi-implicit Euler", 0.02) / error("semi-implicit Euler", 0.01)).log2();
    assert!((slope - 3.0).abs() < 0.01, "{slope}");
    // The turn is 2 asin(y/2) = y + y^3/24 + ...
    let constant = error("semi-implicit Euler", 0.01) / 0.01f64.powi(3);
    assert!((constant * 24.0 - 1.0).abs() < 0.01, "{constant}");
    assert_eq!(error("exponential Euler", 1.0), 0.0);
}

#[test]
fn multistep_methods_meet_the_conditions_of_their_order_and_not_the_next() {
    let mut seen = 0;
    for (method, coefficients) in forms() {
        let Coefficients::Multistep { alpha, beta } = &coefficients else {
            continue;
        };
        let order = usize::from(method.order);
        let conditions = order_conditions(alpha, beta, order + 2);
        let sizes: Vec<f64> = conditions.iter().map(|c| c.abs().to_f64()).collect();
        for (q, &size) in sizes[..=order].iter().enumerate() {
            assert!(size < ROUNDING, "{}, C_{q} = {size:e}", method.name);
        }
        assert!(sizes[order + 1] > 1e-3, "{}: {sizes:?}", method.name);
        // Per unit of the sum of beta the constant is the error of one step, of the
        // other sign.
        let characteristic = Characteristic::new(&coefficients).unwrap();
        let gap = beyond_exp(&characteristic.series(order + 2))[order + 1];
        let sum = beta.iter().fold(Double::ZERO, |sum, &b| sum + b).to_f64();
        let wanted = sizes[order + 1] / sum;
        assert!((gap / wanted - 1.0).abs() < 1e-14, "{}: {gap}", method.name);
        seen += 1;
    }
    assert_eq!(seen, 12);
}

/// The same without any series: by `roots`, in `f64`, at small `z` in several directions.
#[test]
fn the_principal_root_has_the_slope_of_the_order() {
    let error = |coefficients: &Coefficients, z: Complex<f64>| {
        let gaps = roots(coefficients, z).into_iter();
        let gaps = gaps.map(|root| (root - z.exp()).norm());
        gaps.fold(f64::INFINITY, f64::min)
    };
    let mut predicted = 0;
    for (method, coefficients) in forms() {
        if Characteristic::new(&coefficients).is_none() {
            continue;
        }
        predicted += usize::from(matches!(coefficients, Coefficients::Predicted { .. }));
        for degrees in [180.0f64, 135.0, 90.0, 60.0] {
            let direction = Complex::new(0.0, degrees.to_radians()).exp();
            // Rounding is 1e-15; at this size an error of order six is 1e-13 / 4.
            let size = if method.order < 6 { 0.04 } else { 0.3 };
            let ratio = error(&coefficients, direction * size)
                / error(&coefficients, direction * (0.5 * size));
            let slope = ratio.log2();
            let wanted = f64::from(method.order) + 1.0;
            // Higher terms count for about the size itself.
            assert!(
                (slope - wanted).abs() < 0.4,
                "{} at {degrees}: {slope}, not {wanted}",
                method.name
            );
        }
    }
    assert_eq!(predicted, 7);
}

/// What is published of the stability of each method: A, L.
///
/// E. Hairer, G. Wanner, Solving ODEs II: sec. IV.2~ (explicit stages have a bounded
/// region), IV.3~ (Euler, trapezoidal, midpoint), IV.5~ and IV.6~ (Gauss, Radau IIA,
/// Lobatto IIIC, diagonally implicit), IV.7~ (Rosenbrock), V.1~ and V.2~ (Adams; BDF;
/// Dahlquist's barrier: no multistep method beyond order two is A-stable). All M.
/// TR-BDF2: Hosea, Shampine 1996, M. Exponential: by its definition.
const PUBLISHED: [(&str, bool, bool); 46] = [
    ("forward Euler", false, false),
    ("backward Euler", true, true),
    ("semi-implicit Euler", false, false),
    ("exponential Euler", true, true),
    ("trapezoidal", true, false),
    ("implicit midpoint", true, false),
    ("explicit midpoint", false, false),
    ("Heun", false, false),
    ("Ralston", false, false),
    ("SDIRK 2", true, true),
    ("TR-BDF2", true, true),
    ("Lobatto IIIC 2", true, true),
    ("Rosenbrock 2", true, true),
    ("Kutta 3", false, false),
    ("Heun 3", false, false),
    ("SSP 3", false, false),
    ("Bogacki-Shampine 3", false, false),
    ("SDIRK 3", true, true),
    ("SDIRK 3, two stages", true, false),
    ("Radau IIA 3", true, true),
    ("classical RK4", false, false),
    ("3/8 rule", false, false),
    ("Runge-Kutta-Fehlberg 4", false, false),
    ("Gauss 4", true, false),
    ("Lobatto IIIC 4", true, true),
    ("Runge-Kutta-Fehlberg 5", false, false),
    ("Cash-Karp 5", false, false),
    ("Dormand-Prince 5", false, false),
    ("Radau IIA 5", true, true),
    ("Gauss 6", true, false),
    ("BDF 2", true, true),
    ("BDF 3", false, false),
    ("BDF 4", false, false),
    ("BDF 5", false, false),
    ("BDF 6", false, false),
    ("Adams-Bashforth 2", false, false),
    ("Adams-Bashforth 3", false, false),
    ("Adams-Bashforth 4", false, false),
    ("Adams-Bashforth 5", false, false),
    ("Adams-Moulton 3", false, false),
    ("Adams-Moulton 4", false, false),
    ("Adams-Moulton 5", false, false),
    ("Adams-Bashforth-Moulton 2", false, false),
    ("Adams-Bashforth-Moulton 3", false, false),
    ("Adams-Bashforth-Moulton 4", false, false),
    ("Adams-Bashforth-Moulton 5", false, false),
];

#[test]
fn every_method_is_as_stable_as_published() {
    let names: Vec<&str> = PUBLISHED.iter().map(|&(name, ..)| name).collect();
    let all: Vec<&str> = METHODS.iter().map(|method| method.name).collect();
    assert_eq!(names, all, "a row for each method, in the same order");
    for (name, a_stable, l_stable) in PUBLISHED {
        for scheme in find(name).unwrap().schemes {
            let found = approx_stability(&scheme.coefficients());
            let pair = (found.a_stable, found.l_stable);
            assert_eq!(pair, (a_stable, l_stable), "{name}: {found:?}");
            // No explicit method reaches to infinity, and BDF do on the real axis.
            let whole = found.real.is_none();
            assert_eq!(whole, a_stable || name.starts_with("BDF"), "{name}");
            assert!(!a_stable || (found.imaginary.is_none() && found.angle == 90.0));
            assert!(whole || found.angle == 0.0, "{name}");
        }
    }
}

/// Stable by reductions in double-double is stable by roots in `f64`, but for a margin.
#[test]
fn regions_agree_with_roots() {
    for (method, coefficients) in forms() {
        let Some(characteristic) = Characteristic::new(&coefficients) else {
            continue;
        };
        let mut state = 0x9e37_79b9_7f4a_7c15u64;
        let mut random = || {
            state ^= state << 13;
            state ^= state >> 7;
            state ^= state << 17;
            (state >> 11) as f64 / (1u64 << 53) as f64
        };
        let (mut inside, mut outside) = (0, 0);
        for _ in 0..400 {
            let z = Complex::new(8.0 * random() - 6.0, 8.0 * random() - 4.0);
            let size = amplification(&coefficients, z);
            if (size - 1.0).abs() > 1e-9 {
                let stable = characteristic.is_stable(z);
                assert_eq!(stable, size < 1.0, "{} at {z}: {size}", method.name);
                *(if stable { &mut inside } else { &mut outside }) += 1;
            }
        }
        assert!(inside > 0 && outside > 0, "{}", method.name);
    }
}

/// The whole axis is stable up to the limit, and no longer just behind it.
#[test]
fn limits_are_edges() {
    let mut seen = 0;
    for (method, coefficients) in forms() {
        for direction in [Complex::new(-1.0, 0.0), Complex::new(0.0, 1.0)] {
            let Some(limit) = approx_stable_length(&coefficients, direction) else {
                continue;
            };
            let at = |r: f64| amplification(&coefficients, direction * r);
            // Double roots are the root of a rounding off.
            for k in 0..50 {
                let size = at(limit * f64::from(k) / 50.0);
                assert!(size < 1.0 + 1e-7, "{}: {size}", method.name);
            }
            let beyond = at(limit + 0.02);
            assert!(beyond > 1.0 + 1e-15, "{}: {beyond}", method.name);
            seen += 1;
        }
    }
    assert!(seen > 40);
}

//! Transient growth, hold equivalents, elementary functions.

use stepgauge::exact::Exact;
use stepgauge::number::{Double, Matrix, dot};

use super::exponential::{columns, fraction};
use super::{agree, agree_but_for, at, half_unit, model, wide};
use crate::digits::read;

pub const ENTRIES: &[&str] = &["ME17", "ME18", "ME19", "SF02"];

/// Square of the 2-norm of `exp(tA)`: the largest eigenvalue of its Gram matrix. Squared
/// sixty times, that matrix is all eigenvector, however close the next eigenvalue is.
fn norm_squared(columns: &[Exact], time: f64) -> Double {
    let size = columns.len();
    let column = |column: &Exact| (0..size).map(|i| wide(column, i, time)).collect::<Vec<_>>();
    let columns: Vec<Vec<Double>> = columns.iter().map(column).collect();
    let mut gram = Matrix::zero(size);
    for i in 0..size {
        for j in 0..size {
            gram[(i, j)] = dot(&columns[i], &columns[j]);
        }
    }
    let mut power = gram.clone();
    for _ in 0..60 {
        let trace = (0..size).fold(Double::ZERO, |sum, i| sum + power[(i, i)]);
        power = power.map(|x| x / trace);
        power = power.product(&power);
    }
    let vector = power.apply(&vec![Double::ONE; size]);
    dot(&vector, &gram.apply(&vector)) / dot(&vector, &vector)
}

// ME17: L. N. Trefethen, Transient Growth (Chebfun example, July 2011), after
// J. Whidborne, N. Amar, BIT 2011. R (mathworks.com file exchange 23972 v21).
#[test]
fn me17_transient_growth() {
    let matrix = "-1 0 0 0 0 0 -625; 0 -1 -30 400 0 0 250; -2 0 -1 0 0 0 30; 5 -1 5 -1 0 0 200; \
                  11 1 25 -10 -1 1 -200; 200 0 0 -150 -100 -1 -1000; 1 0 0 0 0 0 -1";
    let rows: Vec<Vec<String>> = matrix
        .split(';')
        .map(|row| row.split_whitespace().map(fraction).collect())
        .collect();
    let columns = columns(&rows, "1");
    let largest = norm_squared(&columns, 0.593445038).to_f64();
    // The time is given to 5e-10; the maximum is flat, so that is about 1e-10 here.
    agree_but_for("ME17", largest, "358147.98785177116", 4e-10);
    // Published from double precision: the two last digits, 2e-8, differ.
    agree_but_for("ME17", largest, "358147.98785179", 2e-8);
    for time in [0.592445038, 0.593345038, 0.593545038, 0.594445038] {
        assert!(
            norm_squared(&columns, time).to_f64() < largest,
            "ME17: larger at {time}"
        );
    }
}

// ME18: L. Trefethen, M. Embree, Spectra and Pseudospectra, 2005, chap. 14~. M.
#[test]
fn me18_initial_growth_of_stable_matrices() {
    let rows = |rows: [[&'static str; 2]; 2]| rows.map(|row| row.to_vec()).to_vec();
    let calm = columns(&rows([["(-1)", "1"], ["0", "(-1)"]]), "4");
    let growing = columns(&rows([["(-1)", "5"], ["0", "(-2)"]]), "4");
    // The logarithm over 1e-8 is off by that times its second derivative, a few, and by
    // what the promise of 5e-17 for each value may add, 5e-9.
    let early = 1e-8;
    let growth = |columns: &[Exact]| {
        let norm = norm_squared(columns, early).ln().scale(0.5);
        (norm / Double::from(early)).to_f64()
    };
    agree_but_for("ME18", growth(&calm), "-0.5000000000000000", 1e-7);
    agree_but_for("ME18", growth(&growing), "1.0495097567963924", 1e-7);
    // Steps of 0.002 come within 1e-6 of a smooth maximum.
    let times = (1..1000).map(|k| 0.002 * f64::from(k));
    let largest = times
        .map(|time| norm_squared(&growing, time).sqrt().to_f64())
        .fold(0.0, f64::max);
    agree_but_for("ME18", largest, "1.38362", 1e-6);
}

// ME19: C. Van Loan, IEEE Trans. Autom. Control 23 (1978) 395; Franklin, Powell,
// Workman, Digital Control. M. T = 3 and q = 2: whole numbers, so exactly.
#[test]
fn me19_hold_equivalent_of_the_double_integrator() {
    let moved = |x: &str, v: &str, u: &str| {
        let exact = model("3", &[["x", x, "v"], ["v", v, u]], "");
        (at(&exact, 0, 3.0), at(&exact, 1, 3.0))
    };
    assert_eq!(moved("1", "0", "0"), (1.0, 0.0), "ME19, first column of Ad");
    assert_eq!(
        moved("0", "1", "0"),
        (3.0, 1.0),
        "ME19, second column of Ad"
    );
    assert_eq!(moved("0", "0", "1"), (4.5, 3.0), "ME19, Bd = [T^2/2; T]");
    let covariance = [["xx", "0", "2*xv"], ["xv", "0", "vv"], ["vv", "0", "2"]];
    let exact = model("3", &covariance, "");
    let noise = [0, 1, 2].map(|channel| at(&exact, channel, 3.0));
    assert_eq!(
        noise,
        [18.0, 9.0, 6.0],
        "ME19, noise q[T^3/3 T^2/2; T^2/2 T]"
    );
}

// SF02: Abramowitz, Stegun, tables 4.4 and 4.2~; NIST DLMF chap. 4. M. To half a unit of
// the thirtieth digit and the bound of double-double.
#[test]
fn sf02_exponential_and_logarithm() {
    for (value, short, long) in [
        (
            Double::from(-1.0).exp(),
            "0.3678794412",
            "0.367879441171442321595523770161",
        ),
        (
            Double::from(2.0).ln(),
            "0.6931471806",
            "0.693147180559945309417232121458",
        ),
    ] {
        agree("SF02", value.to_f64(), short);
        let gap = (value - read(long)).abs().to_f64();
        assert!(
            gap <= half_unit(long) + 1e-30,
            "SF02: {value:?}, not {long}"
        );
    }
}

//! Exponentials of matrices, column by column.

use stepgauge::exact::Exact;
use stepgauge::number::Double;

use super::{agree, at, model};
use crate::digits::read;

pub const ENTRIES: &[&str] = &[
    "ME01", "ME03", "ME04", "ME05", "ME06", "ME07", "ME08", "ME09", "ME10", "ME11", "ME12", "ME13",
    "ME14", "ME15",
];

/// A decimal as a fraction of whole numbers, so that no digit of it is rounded.
pub fn fraction(text: &str) -> String {
    match text.split_once('.') {
        Some((whole, decimals)) => format!("({whole}{decimals}/1e{})", decimals.len()),
        None => format!("({text})"),
    }
}

/// `x' = A x` for every column of the unit matrix as start.
pub fn columns<S: AsRef<str>>(rows: &[Vec<S>], to: &str) -> Vec<Exact> {
    let rate = |row: &Vec<S>| {
        let terms = row
            .iter()
            .enumerate()
            .map(|(j, a)| format!("{}*x{j}", a.as_ref()));
        terms.collect::<Vec<_>>().join(" + ")
    };
    let column = |column: usize| {
        let state = |(i, row): (usize, &Vec<S>)| {
            [
                format!("x{i}"),
                u8::from(i == column).to_string(),
                rate(row),
            ]
        };
        model(
            to,
            &rows.iter().enumerate().map(state).collect::<Vec<_>>(),
            "",
        )
    };
    (0..rows.len()).map(column).collect()
}

/// `exp(A)` row by row; the matrix as on the page, rows apart by `;`.
fn exponential(matrix: &str) -> Vec<Vec<f64>> {
    let rows: Vec<Vec<String>> = matrix
        .split(';')
        .map(|row| row.split_whitespace().map(fraction).collect())
        .collect();
    let columns = columns(&rows, "1");
    let row = |i: usize| columns.iter().map(|column| at(column, i, 1.0)).collect();
    (0..rows.len()).map(row).collect()
}

fn each(values: &[Vec<f64>], texts: &str, check: impl Fn(f64, &str)) {
    let texts: Vec<Vec<&str>> = texts
        .split(';')
        .map(|row| row.split_whitespace().collect())
        .collect();
    assert_eq!(texts.len(), values.len());
    for (values, texts) in values.iter().zip(texts) {
        assert_eq!(texts.len(), values.len());
        values
            .iter()
            .zip(texts)
            .for_each(|(&value, text)| check(value, text));
    }
}

/// Against digits that are right to half a unit.
fn all_agree(id: &str, values: &[Vec<f64>], texts: &str) {
    each(values, texts, |value, text| agree(id, value, text));
}

/// Against digits that came out of somebody's double precision.
fn all_near(id: &str, values: &[Vec<f64>], texts: &str, relative: f64) {
    each(values, texts, |value, text| {
        let truth = read(text).to_f64();
        let gap = (value - truth).abs();
        assert!(
            gap <= relative * truth.abs(),
            "{id}: {value:e}, not {text}: off by {gap:e}"
        );
    });
}

// ME01: C. Moler, C. Van Loan, SIAM Review 20 (1978) 801 and 45 (2003) 3, section 3.
// R second-hand.
#[test]
fn me01_eigenvalues_far_apart() {
    let e = exponential("-49 24; -64 31");
    all_agree("ME01", &e, "-0.735759 0.551819; -1.471518 1.103638");
    all_agree(
        "ME01",
        &e,
        "-0.735758758144753079636 0.551819099658097700616; \
         -1.47151759908826053498 1.10363824071557258908",
    );
}

// ME03: R. C. Ward, SIAM J. Numer. Anal. 14 (1977) 600, example 1. R second-hand; the
// page allows 2e-15 relative, the last digits printed being wrong.
#[test]
fn me03_defective() {
    let e = exponential("4 2 0; 1 4 1; 1 1 4");
    all_near(
        "ME03",
        &e,
        "147.8666224463699 183.7651386463682 71.79703239999647; \
         127.7810855231823 183.7651386463682 91.88256932318415; \
         127.7810855231824 163.6796017231806 111.9681062463718",
        2e-15,
    );
    all_agree(
        "ME03",
        &e,
        "147.8666224463701526967 183.7651386463684251017 71.79703239999654480993; \
         127.7810855231824849558 183.7651386463684251017 91.88256932318421255086; \
         127.7810855231824849558 163.6796017231807573608 111.9681062463718802918",
    );
}

// ME04: Ward 1977, example 2. R second-hand; the page allows 1e-14 relative.
#[test]
fn me04_symmetric() {
    let e = exponential(
        "29.87942128909879 0.7815750847907159 -2.289519314033932; \
         0.7815750847907159 25.72656945571064 8.680737820540137; \
         -2.289519314033932 8.680737820540137 34.39400925519054",
    );
    all_near(
        "ME04",
        &e,
        "5.496313853692378e15 -1.823188097200898e16 -3.047577080858001e16; \
         -1.823188097200898e16 6.060522870222108e16 1.012918429302482e17; \
         -3.047577080858001e16 1.012918429302482e17 1.692944112408493e17",
        1e-14,
    );
    all_agree(
        "ME04",
        &e,
        "5496313853692405.130 -18231880972009066.12 -30475770808580149.61; \
         -18231880972009066.12 60605228702221317.31 101291842930248673.3; \
         -30475770808580149.61 101291842930248673.3 169294411240850042.70",
    );
}

// ME05: Ward 1977, example 3. R second-hand; of the digits printed about eleven are
// right, the page allows 4e-12 relative.
#[test]
fn me05_badly_conditioned_eigenvectors() {
    let e = exponential("-131 19 18; -390 56 54; -387 57 52");
    all_near(
        "ME05",
        &e,
        "-1.509644158793135 0.3678794391096522 0.1353352811751005; \
         -5.632570799891469 1.471517758499875 0.4060058435250609; \
         -4.934938326088363 1.103638317328798 0.5413411267617766",
        4e-12,
    );
    all_agree(
        "ME05",
        &e,
        "-1.509644158796089683 0.3678794391102886992 0.1353352811754590695; \
         -5.632570799902596015 1.471517758502308419 0.4060058435263772084; \
         -4.934938326098107126 1.103638317330866097 0.5413411267629899003",
    );
}

// ME06: Ward 1977, example 4. D: the numbers are the recomputed ones.
#[test]
fn me06_near_a_jordan_block() {
    let row = |i: usize| {
        let entry = |j: usize| match (i, j) {
            (9, 0) => "1e-10",
            _ if j == i + 1 => "1",
            _ => "0",
        };
        (0..10).map(entry).collect::<Vec<_>>().join(" ")
    };
    // 1e-10 as a fraction too.
    let matrix = (0..10)
        .map(row)
        .collect::<Vec<_>>()
        .join(";")
        .replace("1e-10", "0.0000000001");
    let e = exponential(&matrix);
    for (j, text) in [
        (0, "1.0000000000000000276"),
        (1, "1.0000000000000000025"),
        (2, "0.50000000000000000021"),
        (3, "0.16666666666666666668"),
        (9, "2.7557319223985890653e-6"),
    ] {
        agree("ME06", e[0][j], text);
    }
    agree("ME06", e[9][0], "1.0000000000000000025e-10");
}

// ME07: A. Laub, SIAM Review 52 (2010) 779. R second-hand, closed form.
#[test]
fn me07_powers_blow_up() {
    all_agree(
        "ME07",
        &exponential("0 1; -39 -40"),
        "0.3775604790970065929126 0.009681037925564271317; \
         -0.3775604790970065813643 -0.009681037925564259769",
    );
}

// ME08: NAG Library manual, routine F01ECF example. R second-hand.
#[test]
fn me08_full() {
    let e = exponential("1 2 2 2; 3 1 1 2; 3 2 1 2; 3 3 3 1");
    all_agree(
        "ME08",
        &e,
        "740.7038 610.8500 542.2743 549.1753; 731.2510 603.5524 535.0884 542.2743; \
         823.7630 679.4257 603.5524 610.8500; 998.4355 823.7630 731.2510 740.7038",
    );
    agree("ME08", e[0][0], "740.7037761710753107");
    agree("ME08", e[3][0], "998.4354965027542977");
}

// ME09: C. Moler, "A balancing act for the matrix exponential", 23 July 2012.
// R second-hand; "agrees to all 15 digits".
#[test]
fn me09_badly_scaled() {
    let rows = [
        vec!["0", "(1/1e8)", "0"],
        vec!["(-60200000000/3)", "(-3)", "2e10"],
        vec!["(200/3)", "0", "(-200/3)"],
    ];
    let columns = columns(&rows, "1");
    let row = |i: usize| columns.iter().map(|column| at(column, i, 1.0)).collect();
    let e: Vec<Vec<f64>> = (0..3).map(row).collect();
    all_agree(
        "ME09",
        &e,
        "0.446849468283175 1.54044157383952e-09 0.462811453558774; \
         -5743067.77947947 -0.0152830038686819 -4526542.71278401; \
         0.447722977849494 1.54270484519591e-09 0.463480648837651",
    );
}

// ME10: encyclopedia example, closed form. R second-hand.
#[test]
fn me10_defective_with_large_eigenvalues() {
    let e = exponential("21 17 6; -5 -1 -6; 4 4 16");
    agree("ME10", e[0][0], "28879845.54211307778342");
    let large = Double::from(16.0).exp();
    let small = Double::from(4.0).exp();
    let weights = [
        [(13.0, -1.0), (13.0, -5.0), (2.0, -2.0)],
        [(-9.0, 1.0), (-9.0, 5.0), (-2.0, 2.0)],
        [(16.0, 0.0), (16.0, 0.0), (4.0, 0.0)],
    ];
    for (values, weights) in e.iter().zip(weights) {
        for (&value, (of_large, of_small)) in values.iter().zip(weights) {
            let truth = (large * of_large.into() + small * of_small.into()).scale(0.25);
            let gap = (Double::from(value) - truth).abs().to_f64();
            assert!(
                gap <= f64::EPSILON * truth.abs().to_f64(),
                "ME10: {value}, {truth:?}"
            );
        }
    }
}

// ME11: test collection quoted in the SciPy test file. R; the page allows 3.5e-15
// relative.
#[test]
fn me11_small_symmetric() {
    let e = exponential("1 3; 3 2");
    all_near(
        "ME11",
        &e,
        "39.322809708033859 46.166301438885753; 46.166301438885768 54.711576854329110",
        3.5e-15,
    );
    all_agree(
        "ME11",
        &e,
        "39.32280970803396515322 46.16630143888589025829; \
         46.16630143888589025829 54.71157685432926190598",
    );
}

// ME12: C. Moler, C. Van Loan 2003. R second-hand. Whole numbers, so exactly.
// ME15: SciPy test file. R. Binomial coefficients, exactly.
#[test]
fn me12_and_me15_whole_numbers() {
    let e = exponential("0 6 0 0; 0 0 6 0; 0 0 0 6; 0 0 0 0");
    let nilpotent = [
        [1.0, 6.0, 18.0, 36.0],
        [0.0, 1.0, 6.0, 18.0],
        [0.0, 0.0, 1.0, 6.0],
    ];
    for (values, expected) in e.iter().zip(nilpotent) {
        assert_eq!(values[..], expected, "ME12");
    }
    assert_eq!(e[3], [0.0, 0.0, 0.0, 1.0], "ME12");
    let row = |i: usize| {
        let entry = |j: usize| {
            if i == j + 1 {
                i.to_string()
            } else {
                "0".to_owned()
            }
        };
        (0..8).map(entry).collect::<Vec<_>>().join(" ")
    };
    let e = exponential(&(0..8).map(row).collect::<Vec<_>>().join(";"));
    let mut binomials = vec![1.0];
    for values in &e {
        binomials.resize(8, 0.0);
        assert_eq!(*values, binomials, "ME15");
        let above = |j: usize| if j == 0 { 0.0 } else { binomials[j - 1] };
        binomials = (0..8).map(|j| binomials[j] + above(j)).collect();
    }
}

// ME13: C. Moler, C. Van Loan 2003. R second-hand; the six-digit values belong to
// d = 1e-5.
#[test]
fn me13_almost_defective() {
    let e = "2.718281828459045235360";
    all_agree("ME13", &exponential("1 1; 0 1"), &format!("{e} {e}; 0 {e}"));
    let near = exponential("1.00001 1; 0 0.99999");
    all_agree("ME13", &near, "2.718309 2.718282; 0 2.718255");
    all_agree(
        "ME13",
        &near,
        "2.71830901141324 2.71828182850435; 0 2.71825464577667",
    );
}

// ME14: SciPy test file. R, closed form 15(e^2-2e) and 5(e^2-e).
#[test]
fn me14_triangular_with_a_double_eigenvalue() {
    let e = exponential("1 3 0; 0 1 5; 0 0 2");
    agree("ME14", e[0][2], "29.28738663018839634765");
    agree("ME14", e[1][2], "23.35387135235802495935");
}

//! First-order responses, threshold events, mean and variance of noise, tanks in a row.

use stepgauge::Library;
use stepgauge::case::Replacements;
use stepgauge::exact::Exact;
use stepgauge::number::{Decimal, Double};

use super::{agree, agree_but_for, agree_in_time, at, joined, model, parameters, passes};
use crate::digits::read;

pub const ENTRIES: &[&str] = &[
    "FO01", "FO02", "FO03", "FO04", "FO05", "FO06", "FO07", "FO08", "FO09", "FO10", "FO11", "FO12",
    "EV01", "EV02", "EV03", "OU01", "OU02", "OU03", "OU04", "OU05", "TK01", "TK02",
];

/// A unit step into a lag of one time constant.
fn lag() -> Exact {
    model("50", &[["x", "0", "1 - x"]], "")
}

fn lag_reaches(level: &str) -> f64 {
    passes(&lag(), 0, read(level), 0.0, 50.0)
}

// FO01: smkalami.github.io control simulators, first order; any handbook. R.
// FO02: handbooks. M.
#[test]
fn fo01_and_fo02_whole_time_constants() {
    let lag = lag();
    let gone = at(&lag, 0, 1.0);
    agree("FO01", 100.0 * gone, "63.2");
    agree("FO01", 100.0 * (1.0 - gone), "36.8");
    agree("FO01", gone, "0.632120558828557678");
    for (count, percent, digits) in [
        (2.0, "86.5", "0.864664716763"),
        (3.0, "95.0", "0.950212931632"),
        (4.0, "98.2", "0.981684361111"),
        (5.0, "99.3", "0.993262053001"),
    ] {
        let value = at(&lag, 0, count);
        agree("FO02", 100.0 * value, percent);
        agree("FO02", value, digits);
    }
}

// FO03: as FO01. R. FO04: mail-archive.com geda-user msg02711. R.
// FO05: R for "4 tau" (FO01 page). FO12: used with IEC 60751 and VDI/VDE 3522 figures. M.
#[test]
fn fo03_to_fo05_and_fo12_times_of_a_lag() {
    let rise = lag_reaches("0.9") - lag_reaches("0.1");
    agree_in_time("FO03", rise, "2.197");
    agree_in_time("FO03", rise, "2.19722457733621938");
    // The bandwidth of a lag is 1/(2 pi tau).
    let product = rise / (2.0 * std::f64::consts::PI);
    agree_in_time("FO04", product, "0.35");
    agree_in_time("FO04", product, "0.349699152566059778");
    for (level, about, digits) in [
        ("0.98", "4", "3.91202300542814606"),
        ("0.95", "3", "2.99573227355399099"),
    ] {
        agree_in_time("FO05", lag_reaches(level), about);
        agree_in_time("FO05", lag_reaches(level), digits);
    }
    let ratio = lag_reaches("0.9") / lag_reaches("0.5");
    agree_in_time("FO12", ratio, "3.32");
    agree_in_time("FO12", ratio, "3.32192809488736235");
}

// FO06: boomer.org/c/p1/Ch06/Ch0604.html (D. Bourne). R.
// FO07: stethoprep.com pharmacology 074. R.
#[test]
fn fo06_and_fo07_half_lives() {
    agree_in_time("FO06", lag_reaches("0.5"), "0.693");
    let exact = model("10", &[["gone", "0", "ln(2)*(1 - gone)"]], "");
    for (count, percent, digits) in [
        (1.0, "50", "0.5"),
        (2.0, "75", "0.75"),
        (3.0, "87.5", "0.875"),
        (4.0, "94", "0.9375"),
        (5.0, "97", "0.96875"),
    ] {
        let gone = at(&exact, 0, count);
        agree("FO06", 100.0 * gone, percent);
        assert_eq!(gone, read(digits).to_f64(), "FO06");
    }
    for (level, published, digits) in [
        ("0.9", "3.32", "3.32192809488736235"),
        ("0.95", "4.3", "4.3219280949"),
        ("0.99", "6.6", "6.6438561898"),
    ] {
        let time = passes(&exact, 0, read(level), 0.0, 10.0);
        agree_in_time("FO07", time, published);
        agree_in_time("FO07", time, digits);
    }
    let six_hours = model("50", &[["gone", "0", "ln(2)/6*(1 - gone)"]], "");
    let time = passes(&six_hours, 0, read("0.9"), 0.0, 50.0);
    agree_in_time("FO07", time, "20");
    agree_in_time("FO07", time, "19.93");
}

// FO08: as FO06. R; the time printed, 7.24 h, carries intermediate rounding and is held
// to 0.01 h, as the page asks.
#[test]
fn fo08_infusion_reaches_a_level() {
    let numbers = parameters(&[("k0", "60"), ("k", "17/100"), ("V", "25")]);
    let exact = model("300", &[["c", "0", "k0/V - k*c"]], &numbers);
    // 50 time constants on, what is missing from the plateau is 1e-21 of it.
    let plateau = at(&exact, 0, 300.0);
    agree("FO08", plateau, "14.1");
    agree("FO08", plateau, "14.1176470588");
    let time = passes(&exact, 0, Double::from(10.0), 0.0, 300.0);
    agree_but_for("FO08", time, "7.24", 0.005);
    agree_in_time("FO08", time, "7.2479040076");
    let fraction = at(&exact, 0, time) / plateau;
    agree_in_time("FO08", fraction, "0.708");
    agree_in_time("FO08", fraction, "0.7083333333");
}

// FO09: heat-transfer textbook by Y. Cengel (author M), example 4-1. R (FOSSEE
// Scilab-TBC-Uploads 587/CH4/EX4.1). FO10: Incropera, DeWitt, Fundamentals of Heat and
// Mass Transfer, example 5.1. M.
#[test]
fn fo09_and_fo10_thermocouple_beads() {
    let bead = parameters(&[("D", "1/1000"), ("b", "6*210/(8500*320*D)")]);
    let exact = model("40", &[["x", "0", "b*(1 - x)"]], &bead);
    let time = passes(&exact, 0, read("0.99"), 0.0, 40.0);
    agree_in_time("FO09", time, "10");
    agree_in_time("FO09", time, "9.94131976658");
    agree_in_time("FO09", -(1.0 - at(&exact, 0, 1.0)).ln(), "0.463235294118");

    let bead = parameters(&[("D", "6*400*1/(8500*400)"), ("b", "6*400/(8500*400*D)")]);
    let output = super::output("mm", "1000*D + 0*x");
    let exact = model("40", &[["x", "25", "b*(200 - x)"]], &(output + &bead));
    agree("FO10", at(&exact, 1, 0.0), "0.706");
    agree("FO10", at(&exact, 1, 0.0), "0.70588235");
    let time = passes(&exact, 0, Double::from(199.0), 0.0, 40.0);
    agree_in_time("FO10", time, "5.2");
    agree_in_time("FO10", time, "5.164785974");
}

// FO11: ctms.engin.umich.edu, CruiseControl, SystemAnalysis. R; its "rise time about
// 60 s" is the 95 % time.
#[test]
fn fo11_vehicle() {
    let exact = model("1000", &[["v", "0", "(500 - 50*v)/1000"]], "");
    assert_eq!(at(&exact, 0, 1000.0), 10.0, "FO11");
    let time = |level: &str| passes(&exact, 0, read(level), 0.0, 1000.0);
    agree_in_time("FO11", time("9") - time("1"), "43.94449");
    agree_in_time("FO11", time("9.5"), "60");
    agree_in_time("FO11", time("9.5"), "59.91465");
}

/// The leaky membrane of the library under a current from the start.
fn membrane(current: f64) -> Exact {
    let replace = [("i_0".to_owned(), current), ("t_on".to_owned(), 0.0)].into();
    Library::new()
        .load("membrane/leaky-step", &replace)
        .unwrap()
        .exact()
        .unwrap()
}

// EV01: course exercise, alex1412108-uwe/computational-neuroscience part2.m. R.
// EV02: W. Gerstner et al., Neuronal Dynamics, sec. 1.3; Dayan, Abbott, eq. 5.11~. D.
// EV03: HussainAther/neuroscience lif.m. D.
#[test]
fn ev01_to_ev03_threshold_events() {
    let threshold = Double::from(-40.0);
    let end = |current: f64| at(&membrane(current), 0, 100.0);
    assert!(end(3.0) < -40.0, "EV01: 3 nA never meets the threshold");
    // 3.0002 nA would: 10 ln(30.002/0.002) = 96.2 ms.
    assert!(end(3.0002) > -40.0, "EV01: more than 3.0000 nA does");
    let interval = passes(&membrane(3.1), 0, threshold, 0.0, 100.0);
    agree_in_time("EV02", interval, "34.339872044851");
    agree_in_time("EV02", 1000.0 / interval, "29.120667621996");
    let exact = model("100", &[["v", "0", "(12 - v)/10"]], "");
    let interval = passes(&exact, 0, Double::from(10.0), 0.0, 100.0);
    agree_in_time("EV03", interval, "17.917594692281");
}

// OU01: rdocumentation.org goffda r_ou; Uhlenbeck, Ornstein 1930. R.
// OU02, OU03: D. Gillespie, Phys. Rev. E 54 (1996) 2084: abstract R, formula M; M.
#[test]
fn ou01_to_ou03_mean_variance_and_integral() {
    let rest = parameters(&[("a", "1/4"), ("s", "3/2")]);
    let exact = model("200", &[["v", "0", "s^2 - 2*a*v"]], &rest);
    assert_eq!(at(&exact, 0, 200.0), 4.5, "OU01: s^2/(2a)");

    // Variance of x, covariance of x and its integral y, variance of y, mean of x.
    let moments = [
        ["xx", "0", "1 - 2*xx"],
        ["xy", "0", "xx - xy"],
        ["yy", "0", "2*xy"],
        ["m", "3", "2 - m"],
    ];
    let exact = model("1", &moments, "");
    agree("OU02", at(&exact, 0, 1.0), "0.43233235838169");
    // 2 + (3 - 2) e^-1, the digits of e^-1 being those of SF02.
    agree(
        "OU02",
        at(&exact, 3, 1.0),
        "2.367879441171442321595523770161",
    );
    agree("OU03", at(&exact, 1, 1.0), "0.19978820044686");
    agree("OU03", at(&exact, 2, 1.0), "0.16809124072458");
}

// OU04: A. Longtin, Scholarpedia 5 (2010) 1619. R second-hand. The noise intensity is
// the integral of the autocorrelation s^2 exp(-t/tau).
// OU05: Uhlenbeck, Ornstein, Phys. Rev. 36 (1930) 823. M.
#[test]
fn ou04_and_ou05_intensity_and_displacement() {
    for (tau, s, about, digits) in [
        ("1", "1/10", "0.01", "0.01"),
        ("1/10", "31622/1e5", "0.01", "0.0099995"),
    ] {
        let rest = parameters(&[("tau", tau), ("s", s)]);
        let states = [["c", "s^2", "-c/tau"], ["area", "0", "c"]];
        let area = at(&model("100", &states, &rest), 1, 100.0);
        agree("OU04", area, about);
        agree("OU04", area, digits);
    }
    // Speeds of variance one: half the mean-square displacement is the bracket.
    let exact = model("1", &[["xv", "0", "1 - xv"], ["half", "0", "xv"]], "");
    agree("OU05", at(&exact, 1, 1.0), "0.36787944117144");
}

/// A step of one into `n` equal tanks of mean residence time one; after the tanks, what
/// is still to come of the step, and the integral of that.
fn tanks(n: usize) -> Exact {
    let tank = |k: usize| {
        let before = if k == 1 {
            "1".to_owned()
        } else {
            format!("c{}", k - 1)
        };
        [
            format!("c{k}"),
            "0".to_owned(),
            format!("{n}*({before} - c{k})"),
        ]
    };
    let mut states: Vec<[String; 3]> = (1..=n).map(tank).collect();
    states.push(["area", "0", &format!("1 - c{n}")].map(str::to_owned));
    states.push(["moment", "0", "1 - area"].map(str::to_owned));
    model(
        "100",
        &states,
        &super::output("held", &format!("({})/{n}", joined(1..=n, "+", "c#"))),
    )
}

// TK01: MacMullin, Weber, Trans. AIChE 31 (1935) 409 (named at
// demonstrations.wolfram.com); formula M.
// TK02: O. Levenspiel, Chemical Reaction Engineering. M. The second moment of the pulse
// is twice the integral of what of the mean is still to come.
#[test]
fn tk01_and_tk02_equal_tanks() {
    for (n, digits) in [
        (1, "0.63212055882856"),
        (2, "0.59399415029016"),
        (3, "0.57680991887316"),
        (4, "0.56652987963329"),
        (5, "0.55950671493479"),
        (10, "0.54207028552815"),
    ] {
        let exact = tanks(n);
        let outlet = n - 1;
        agree("TK01", at(&exact, outlet, 1.0), digits);
        // 100 residence times on, nothing is left: e^-100.
        assert_eq!(at(&exact, n, 100.0), 1.0, "TK02: mean of {n} tanks");
        assert_eq!(
            at(&exact, n + 2, 100.0),
            1.0,
            "TK02: all {n} tanks are full"
        );
        let variance = 2.0 * at(&exact, n + 1, 100.0) - 1.0;
        let gap = (variance - 1.0 / n as f64).abs();
        // Twice a value below one, less one: a unit in the last place of two.
        assert!(gap <= 4.5e-16, "TK02: variance {variance} of {n} tanks");
    }
    let five = Library::new().load("process/tank-cascade", &Replacements::new());
    let five = five.unwrap().exact().unwrap();
    agree(
        "TK01",
        at(&five, 4, Decimal::parse("1").unwrap()),
        "0.55950671493479",
    );
}

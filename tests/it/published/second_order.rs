//! Second-order responses: oscillators, circuits, servos, a motor.

use stepgauge::Library;
use stepgauge::case::{Case, Replacements};
use stepgauge::exact::Exact;
use stepgauge::number::{Decimal, Double};

use super::{agree, agree_but_for, agree_in_time, at, model, parameters, passes, wide};
use crate::digits::read;

pub const ENTRIES: &[&str] = &[
    "SO01", "SO02", "SO03", "SO04", "SO05", "SO06", "SO07", "SO08", "SO09", "SO10", "SO11", "SO12",
    "SO13", "SO14", "SO15", "SO16", "SO17", "SO18",
];

/// The response of `gain w^2 / (s^2 + 2 z w s + w^2)` to a unit step.
struct Step {
    exact: Exact,
    /// About half a period: the velocity is zero near it, once.
    half_period: f64,
    end: Double,
}

impl Step {
    /// From `s^2 + a s + b` over `c`; formulas.
    fn new(a: &str, b: &str, c: &str) -> Step {
        let numbers = parameters(&[("a", a), ("b", b), ("c", c)]);
        let output = super::output("end", "c/b + 0*x");
        let states = [["x", "0", "v"], ["v", "0", "c - b*x - a*v"]];
        let exact = model("100", &states, &(output + &numbers));
        let case = model("1", &[["a", "0", a], ["b", "0", b]], "");
        let (a, b) = (at(&case, 0, 1.0), at(&case, 1, 1.0));
        let half_period = std::f64::consts::PI / (b - 0.25 * a * a).sqrt();
        let end = wide(&exact, 2, 0.0);
        Step {
            exact,
            half_period,
            end,
        }
    }

    /// Of damping ratio `z` and natural frequency one.
    fn damped(z: &str) -> Step {
        Step::new(&format!("2*({z})"), "1", "1")
    }

    fn peak_time(&self) -> f64 {
        passes(
            &self.exact,
            1,
            Double::ZERO,
            0.5 * self.half_period,
            1.5 * self.half_period,
        )
    }

    /// Beyond the end value, in percent of it.
    fn overshoot(&self) -> f64 {
        let peak = wide(&self.exact, 0, self.peak_time());
        (Double::from(100.0) * (peak / self.end - Double::ONE)).to_f64()
    }

    /// First passage of a fraction of the end value.
    fn reaches(&self, fraction: &str) -> f64 {
        passes(
            &self.exact,
            0,
            self.end * read(fraction),
            0.0,
            self.half_period,
        )
    }

    fn rise(&self) -> f64 {
        self.reaches("0.9") - self.reaches("0.1")
    }

    /// The time after which the response stays within 2 % of its end.
    fn settles(&self) -> f64 {
        let end = self.end.to_f64();
        let outside = |time: f64| (at(&self.exact, 0, time) / end - 1.0).abs() > 0.02;
        let step = 0.01 * self.half_period;
        let last = (0..2000)
            .rev()
            .map(|k| f64::from(k) * step)
            .find(|&time| outside(time));
        let last = last.unwrap();
        let above = at(&self.exact, 0, last) > end;
        let level = self.end * read(if above { "1.02" } else { "0.98" });
        passes(&self.exact, 0, level, last, last + step)
    }
}

// SO01: ecexplain.in time-response notes. R.
// SO02: K. Ogata, Modern Control Engineering; N. Nise, Control Systems Engineering. M.
#[test]
fn so01_and_so02_overshoot() {
    agree_in_time("SO01", Step::damped("1/2").overshoot(), "16.3");
    agree_in_time("SO01", Step::damped("1/2").overshoot(), "16.3033534822");
    for (z, percent, digits) in [
        ("1/10", "73", "72.9247614288"),
        ("2/10", "53", "52.6620599330"),
        ("3/10", "37", "37.2326104927"),
        ("4/10", "25", "25.3826721980"),
        ("6/10", "9.5", "9.47802248422"),
        ("7/10", "4.6", "4.59879102603"),
        ("8/10", "1.5", "1.51646198645"),
        ("1/sqrt(2)", "4.3", "4.32139182638"),
    ] {
        let overshoot = Step::damped(z).overshoot();
        agree_in_time("SO02", overshoot, percent);
        agree_in_time("SO02", overshoot, digits);
    }
}

// SO03: Nise, fig. 4.16~. R (public-class-notes.pages.dev FEECONS lesson 10).
#[test]
fn so03_rise_time() {
    for (z, published, digits) in [
        ("1/10", "1.104", "1.104199033"),
        ("2/10", "1.203", "1.203429901"),
        ("3/10", "1.321", "1.321339980"),
        ("4/10", "1.463", "1.463491203"),
        ("5/10", "1.638", "1.637572947"),
        ("6/10", "1.854", "1.854050350"),
        ("7/10", "2.126", "2.126201870"),
        ("8/10", "2.467", "2.467492633"),
        ("9/10", "2.883", "2.882955406"),
    ] {
        let rise = Step::damped(z).rise();
        agree_in_time("SO03", rise, published);
        agree_in_time("SO03", rise, digits);
    }
}

// SO04: as SO01. R. SO05: A. Nagoor Kani, Control Systems, example 3.6. D (FOSSEE
// xcos_on_cloud 3885/CH3/EX3.6).
#[test]
fn so04_and_so05_half_of_critical_damping() {
    let step = Step::new("10", "100", "100");
    agree_in_time("SO04", step.peak_time(), "0.36");
    agree_in_time("SO04", step.peak_time(), "0.362759872847");
    // After the time of the rule, 4/(z wn), the envelope is e^-4/sqrt(1-z^2) = 2.1 %.
    assert!((at(&step.exact, 0, 0.8) - 1.0).abs() < 0.0212, "SO04");
    let step = Step::new("4", "16", "16");
    agree_in_time("SO05", step.overshoot(), "16.3033534822");
    agree_in_time("SO05", step.peak_time(), "0.906899682117");
    agree_in_time("SO05", step.reaches("1"), "0.604599788078");
}

// SO06: Nise, example 4.5~. M; its settling time 0.533 s is the rule 4/(z wn), the true
// one is 0.574 s. SO07: Ogata, example 5-1~. M.
#[test]
fn so06_and_so07_worked_examples() {
    let step = Step::new("15", "100", "100");
    for (value, published, digits) in [
        (step.peak_time(), "0.475", "0.474964164689"),
        (step.overshoot(), "2.838", "2.83754417457"),
        (step.rise(), "0.23", "0.228754206"),
    ] {
        agree_in_time("SO06", value, published);
        agree_in_time("SO06", value, digits);
    }
    agree_in_time("SO06", step.settles(), "0.5742608449");
    let step = Step::new("6", "25", "25");
    for (value, published, digits) in [
        (step.reaches("1"), "0.55", "0.553574358897"),
        (step.peak_time(), "0.785", "0.785398163397"),
        (0.01 * step.overshoot(), "0.095", "0.0947802248422"),
    ] {
        agree_in_time("SO07", value, published);
        agree_in_time("SO07", value, digits);
    }
}

// SO08: D. The rule 4/(z wn) gives 8.00, 6.67 and 5.71.
#[test]
fn so08_true_settling_times() {
    for (z, digits) in [
        ("5/10", "8.076348974"),
        ("6/10", "5.942987879"),
        ("7/10", "5.978792367"),
    ] {
        agree_in_time("SO08", Step::damped(z).settles(), digits);
    }
}

fn motor(window: &str) -> (Case, Exact) {
    let (_, text) = stepgauge::case::built_in()
        .iter()
        .find(|(n, _)| *n == "control/dc-motor")
        .unwrap();
    assert!(text.contains("to   = 5"));
    let text = text.replace("to   = 5", &format!("to = {window}"));
    let case = Case::parse("dc-motor", &text, &Replacements::new()).unwrap();
    let exact = case.exact().unwrap();
    (case, exact)
}

// SO09: Control Tutorials (Univ. Michigan), "DC Motor Speed: System Analysis". R.
#[test]
fn so09_dc_motor() {
    let (case, exact) = motor("40");
    for (name, pole, digits) in [
        ("slow", "2", "2.00250078174"),
        ("fast", "10", "9.99749921826"),
    ] {
        let value = case
            .parameters
            .iter()
            .find(|p| p.name == name)
            .unwrap()
            .value;
        agree("SO09", value.to_f64(), pole);
        agree("SO09", value.to_f64(), digits);
    }
    // 80 time constants on, nothing is missing.
    let end = wide(&exact, 1, 40.0);
    agree("SO09", end.to_f64(), "0.1");
    agree("SO09", end.to_f64(), "0.0999000999001");
    let time = |fraction: &str| passes(&exact, 1, end * read(fraction), 0.0, 40.0);
    agree_in_time("SO09", time("0.98"), "2.07");
    agree_in_time("SO09", time("0.98"), "2.06518861937");
    agree_in_time("SO09", time("0.9") - time("0.1"), "1.13502913");
}

/// `b1, b2, s, q` of the hold equivalent `(b1 z + b2)/(z^2 - s z + q)` from the speed
/// at the first four multiples of the hold after a pulse of one hold.
fn hold_equivalent(hold: &str) -> [f64; 4] {
    let states = [["i", "0", "(u - i - K*w)/L"], ["w", "0", "(K*i - b*w)/J"]];
    let numbers = [("J", "1/100"), ("b", "1/10"), ("K", "1/100"), ("L", "1/2")];
    let pulse = format!(
        "[[inputs]]\nname = 'u'\nunit = 'V'\nshape = 'pulse'\nheight = 1\nfrom = 0\nwidth = '{hold}'\n"
    );
    let exact = model("1", &states, &(pulse + &parameters(&numbers)));
    let mut walk = exact.walk();
    let hold = hold
        .split_once('/')
        .map(|(a, b)| read(a) / read(b))
        .unwrap();
    let mut sample = |k: i32| walk.go(hold * Double::from(f64::from(k))).value[1];
    let [h1, h2, h3, h4] = [1, 2, 3, 4].map(&mut sample);
    // h3 = s h2 - q h1 and h4 = s h3 - q h2.
    let determinant = h1 * h3 - h2 * h2;
    let s = (h1 * h4 - h2 * h3) / determinant;
    let q = (h2 * h4 - h3 * h3) / determinant;
    [h1, h2 - s * h1, s, q].map(Double::to_f64)
}

// SO10: the same tutorials, digital control pages. M.
#[test]
fn so10_hold_equivalent_of_the_motor() {
    // Samples are good to 1e-16 at least; solving for s and q costs two digits.
    let check = |value: f64, text: &str| agree_but_for("SO10", value, text, 1e-14);
    let quick = [
        "0.00205858101277",
        "0.00168575930045",
        "1.51133078956",
        "0.548811636094",
    ];
    hold_equivalent("5/100")
        .into_iter()
        .zip(quick)
        .for_each(|(v, t)| check(v, t));
    let published = ["0.0092", "0.0057", "1.0877", "0.2369"];
    hold_equivalent("12/100")
        .into_iter()
        .zip(published)
        .for_each(|(v, t)| check(v, t));
    let slow = [
        "0.00920117409272",
        "0.00570904692183",
        "1.08767644633",
        "0.236927758682",
    ];
    hold_equivalent("12/100")
        .into_iter()
        .zip(slow)
        .for_each(|(v, t)| check(v, t));
}

// SO11: W. Trench, Elementary Differential Equations, sec. 6.3. R second-hand for Q; L,
// R, C M. SO12: en.wikibooks.org Electronics/RCL_time_domain2. D.
#[test]
fn so11_and_so12_circuits() {
    let discharge = parameters(&[("L", "2/10"), ("R", "40"), ("C", "1/1e4")]);
    let states = [["q", "1", "i"], ["i", "2", "-(R*i + q/C)/L"]];
    let exact = model("1", &states, &discharge);
    let charge = at(&exact, 0, Decimal::parse("0.01").unwrap());
    agree("SO11", charge, "0.017509167237797455437");
    let closed = (-1f64).exp() * (2f64.cos() + 0.51 * 2f64.sin());
    // The published form in f64: four operations on numbers below one.
    assert!((charge - closed).abs() <= 4.0 * f64::EPSILON, "SO11");

    // Over L = 0.5, R = 1000, C = 1e-7: s^2 + R/L s + 1/(L C).
    let circuit = Step::new("1000/(1/2)", "1/(1/2*(1/1e7))", "1/(1/2*(1/1e7))");
    let peak = circuit.peak_time();
    let damping = -(0.01 * circuit.overshoot()).ln() / peak;
    let frequency = std::f64::consts::PI / peak;
    agree_in_time("SO12", damping, "1000");
    agree_in_time("SO12", damping, "1000.0000000000");
    agree_in_time("SO12", frequency, "4358.89894354");
    agree_in_time("SO12", damping.hypot(frequency), "4472.13595500");
}

// SO13: Franklin, Powell, Emami-Naeini, Feedback Control, example 3.17. D (pyFPE6e
// fig3_05.py).
#[test]
fn so13_motor_with_two_lags() {
    let step = Step::new("101/10", "101", "100");
    agree("SO13", at(&step.exact, 0, 100.0), "0.990099009901");
    agree_in_time("SO13", step.overshoot(), "16.1073983628");
    // The overshoot is exp(-pi z/sqrt(1-z^2)).
    let decrement = -(0.01 * step.overshoot()).ln();
    let z = decrement / decrement.hypot(std::f64::consts::PI);
    agree_in_time("SO13", z, "0.502493781056");
}

// SO14: Chopra; S. Rao. M.
#[test]
fn so14_logarithmic_decrement() {
    let exact = model("10", &[["x", "1", "v"], ["v", "0", "-x - v/10"]], "");
    // Released at rest it is at rest again after each half period.
    let period = passes(&exact, 1, Double::ZERO, 5.0, 7.0);
    let decrement = -at(&exact, 0, period).ln();
    agree_in_time("SO14", decrement, "0.314552702289");
}

// SO15: Rao; Chopra. M. SO16: textbooks. M. Both on cases of the library.
#[test]
fn so15_and_so16_resonance_and_beat() {
    let load = |name: &str| {
        Library::new()
            .load(name, &Replacements::new())
            .unwrap()
            .exact()
            .unwrap()
    };
    let resonance = load("mechanical/resonance");
    for quarters in [1.0, 21.0, 73.0] {
        // At w t = quarters pi/2 the sine is one, so x = F t/(2 w); F = 1, w = 2.
        let time = Double::PI.scale(0.25) * Double::from(quarters);
        let x = at(&resonance, 0, time);
        let expected = time.to_f64() / 4.0;
        assert!(
            (x - expected).abs() <= f64::EPSILON * expected,
            "SO15: {x}, not {expected}"
        );
    }
    let beat = load("mechanical/beat");
    let size = |time: f64| at(&beat, 0, time).abs().max(at(&beat, 1, time).abs());
    // 440 and 442 Hz: at rest again every 500 ms, and not before.
    let swollen = (1..50)
        .map(|k| size(250.0 + f64::from(k)))
        .fold(0.0, f64::max);
    // The frequencies in f64 shift the phase by 1e-16 of 1382 radians.
    assert!(
        size(500.0) < 1e-12 * swollen,
        "SO16: {} of {swollen}",
        size(500.0)
    );
    for time in [50.0, 125.0, 200.0, 300.0, 375.0, 450.0] {
        let largest = (0..24)
            .map(|k| size(time + 0.1 * f64::from(k)))
            .fold(0.0, f64::max);
        assert!(largest > 0.2 * swollen, "SO16: nearly at rest at {time}");
    }
}

/// The angular frequency of a motion from rest, from its first passage of zero.
fn frequency(states: &[[&str; 3]], numbers: &str, about: f64) -> f64 {
    let exact = model("10", states, numbers);
    let quarter = passes(
        &exact,
        0,
        Double::ZERO,
        0.5 * 1.57 / about,
        1.5 * 1.57 / about,
    );
    std::f64::consts::FRAC_PI_2 / quarter
}

// SO17: textbooks. M: sqrt(k/m), sqrt(3k/m); with k = 12, m = 3 these are 2 and 2 sqrt 3.
#[test]
fn so17_two_masses() {
    let numbers = parameters(&[("k", "12"), ("m", "3")]);
    for (second, digits) in [
        ("1", "2.00000000000000000000"),
        ("-1", "3.46410161513775458706"),
    ] {
        let states = [
            ["x", "1", "v"],
            ["v", "0", "k*(y - 2*x)/m"],
            ["y", second, "w"],
            ["w", "0", "k*(x - 2*y)/m"],
        ];
        agree_in_time(
            "SO17",
            frequency(&states, &numbers, read(digits).to_f64()),
            digits,
        );
    }
}

// SO18: textbooks. M: (2 -+ sqrt 2) g/l, in the modes 1 : +-sqrt 2.
#[test]
fn so18_double_pendulum() {
    for (second, digits) in [
        ("sqrt(2)", "0.76536686473018"),
        ("-sqrt(2)", "1.84775906502257"),
    ] {
        let states = [
            ["x", "1", "v"],
            ["v", "0", "y - 2*x"],
            ["y", second, "w"],
            ["w", "0", "2*x - 2*y"],
        ];
        agree_in_time(
            "SO18",
            frequency(&states, "", read(digits).to_f64()),
            digits,
        );
    }
}

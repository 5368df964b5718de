//! Decay chains, drug kinetics, heat and cables.

use stepgauge::Library;
use stepgauge::case::{Case, Replacements};
use stepgauge::exact::Exact;
use stepgauge::number::{Decimal, Double};

use super::{
    agree, agree_but_for, agree_in_time, at, case_text, model, output, parameters, passes,
};

pub const ENTRIES: &[&str] = &[
    "DC01", "DC02", "DC03", "DC04", "DC05", "DC06", "PK01", "PK02", "PK03", "PK04", "PK05", "PK06",
    "HT05", "HT06", "HT07", "HT09",
];

// DC01: H. Bateman, Proc. Camb. Phil. Soc. 15 (1910) 423 (formula). R for the numbers:
// README of bjodah/batemaneq, printed from double precision, off by up to 3e-16.
#[test]
fn dc01_rates_over_fifteen_decades() {
    let half_lives = [
        "1.405e10",
        "575/100",
        "625/100/8760",
        "19116/1e4",
        "36319/1e4/365",
        "1064/100/8760",
        "6055/100/60/8760",
    ];
    let rates = half_lives.map(|years| format!("ln(2)/({years})"));
    let state = |k: usize| {
        let fed = if k == 0 {
            "0".to_owned()
        } else {
            format!("{}*n{}", rates[k - 1], k - 1)
        };
        [
            format!("n{k}"),
            u8::from(k == 0).to_string(),
            format!("{fed} - {}*n{k}", rates[k]),
        ]
    };
    let exact = model("100", &(0..7).map(state).collect::<Vec<_>>(), "");
    for (k, (published, digits)) in [
        ("0.9999999950665681", "0.99999999506656812206"),
        ("4.0925028658312447e-10", "4.0925028658312439857e-10"),
        ("5.078051001187696e-14", "5.0780510011876966224e-14"),
        ("1.3605575316895603e-10", "1.3605575316895606448e-10"),
        ("7.082081172329036e-13", "7.0820811723290371395e-13"),
        ("8.64484883194704e-14", "8.6448488319470420708e-14"),
        ("8.199335787638167e-15", "8.1993357876381694777e-15"),
    ]
    .into_iter()
    .enumerate()
    {
        let value = at(&exact, k, 100.0);
        agree_but_for("DC01", value, published, 4e-16 * value);
        agree("DC01", value, digits);
    }
}

/// A parent, a daughter it turns into with some probability, and all that it has
/// turned into.
fn generator(parent: &str, daughter: &str, branch: &str) -> Exact {
    let numbers = [
        ("l1", format!("ln(2)/({parent})")),
        ("l2", format!("ln(2)/({daughter})")),
    ];
    let numbers = numbers
        .each_ref()
        .map(|(name, value)| (*name, value.as_str()));
    let states = [
        ["mo".to_owned(), "1".to_owned(), "-l1*mo".to_owned()],
        [
            "tc".to_owned(),
            "0".to_owned(),
            format!("{branch}*l1*mo - l2*tc"),
        ],
        ["all".to_owned(), "0".to_owned(), "l1*mo".to_owned()],
    ];
    let rate = output("rate", "l1*mo - l2*tc");
    let parent_activity = output("parent", "l1*mo");
    let daughter_activity = output("daughter", "l2*tc");
    let rest = rate + &parent_activity + &daughter_activity + &parameters(&numbers);
    model("400", &states, &rest)
}

// DC02: summary of product characteristics of a Tc-99m generator (medicine agency text
// SPC154357). R. The table agrees within one unit of its last digit with older nuclear
// data (67 h, 6.00 h, branch 0.86).
#[test]
fn dc02_fraction_of_the_short_lived_isomer() {
    let fraction = |exact: &Exact, hours: f64| at(exact, 1, hours) / at(exact, 2, hours);
    let old = generator("67", "6", "86/100");
    for (hours, published) in [
        (3.0, "0.727"),
        (6.0, "0.619"),
        (12.0, "0.459"),
        (24.0, "0.277"),
        (48.0, "0.131"),
        (72.0, "0.076"),
        (96.0, "0.0498"),
        (120.0, "0.0344"),
        (144.0, "0.0246"),
    ] {
        agree_but_for(
            "DC02",
            fraction(&old, hours),
            published,
            super::half_unit(published),
        );
    }
    let new = generator("66", "601/100", "876/1000");
    for (hours, digits) in [(3.0, "0.739847"), (24.0, "0.281411"), (144.0, "0.0248104")] {
        agree_in_time("DC02", fraction(&new, hours), digits);
    }
}

// DC03: poletoparis.com secular equilibrium; textbooks print 22.8-23. R.
// DC04: ICRP Publication 107 data. R second-hand.
#[test]
fn dc03_and_dc04_daughter_activity() {
    let peak = |exact: &Exact| passes(exact, 3, Double::ZERO, 1.0, 100.0);
    let exact = generator("66", "601/100", "1");
    agree_in_time("DC03", peak(&exact), "23");
    agree_in_time("DC03", peak(&exact), "22.858229272877");
    agree_in_time("DC03", peak(&generator("66", "6", "1")), "22.832249");
    let exact = generator("12752/1000", "16781/1e4", "1");
    // At 200 d the transient is e^-71 of the rest.
    let ratio = at(&exact, 5, 200.0) / at(&exact, 4, 200.0);
    agree_in_time("DC04", ratio, "1.15153649572");
    agree_in_time("DC04", ratio, "1.1515364957242");
}

// DC05: CEA/LNE-LNHB 2005 data file. R; its specific activity is that of a molar mass
// of exactly 90. DC06: UAB 2007 list, half-life R. D.
#[test]
fn dc05_and_dc06_half_life_and_ingrowth() {
    // The year of 365.242198 d that the recomputation used.
    let rest = parameters(&[
        ("half_life", "(288/10)*(365242198/1e6)*86400"),
        ("l", "ln(2)/half_life"),
        ("N_A", "6.02214076e23"),
    ]);
    let text = case_text("3e9", &[["n", "1", "-l*n"]], &{
        output("for_90", "l*n*N_A/90") + &output("for_89_9", "l*n*N_A/(899077/1e4)") + &rest
    });
    let case = Case::parse("strontium", &text, &Replacements::new()).unwrap();
    let constant = case.parameters[1].value.to_f64();
    agree("DC05", constant, "762.7e-12");
    agree("DC05", constant, "7.6267284e-10");
    let exact = case.exact().unwrap();
    let half = passes(&exact, 0, Double::from(0.5), 0.0, 3e9);
    agree_in_time("DC05", half, "908.8e6");
    agree_in_time("DC05", half, "908839466");
    agree("DC05", at(&exact, 1, 0.0), "5.103e12");
    agree("DC05", at(&exact, 2, 0.0), "5.108e12");

    let radon = model("40", &[["x", "0", "ln(2)/(38235/1e4)*(1 - x)"]], "");
    for (days, digits) in [
        (1.0, "0.16580329"),
        (4.0, "0.51574525"),
        (7.0, "0.71888805"),
        (14.0, "0.92097607"),
        (30.0, "0.99565436"),
    ] {
        agree("DC06", at(&radon, 0, days), digits);
    }
}

/// Depot and body after one dose, with the rate of change of the body as an output.
fn oral(ka: &str, k: &str) -> Exact {
    let rest = output("rate", "ka*depot - k*body") + &parameters(&[("ka", ka), ("k", k)]);
    model(
        "60",
        &[
            ["depot", "1", "-ka*depot"],
            ["body", "0", "ka*depot - k*body"],
        ],
        &rest,
    )
}

/// The time of the largest amount, checked against its neighbours.
fn peak(id: &str, exact: &Exact) -> f64 {
    let time = passes(exact, 2, Double::ZERO, 0.1, 60.0);
    for near in [0.9, 0.999, 1.001, 1.1] {
        assert!(
            at(exact, 1, near * time) < at(exact, 1, time),
            "{id}: larger at {near} of {time}"
        );
    }
    time
}

// PK01: boomer.org/c/p1/Ch08/Ch0804.html. R, read from plots in quarter hours; k = 0.2
// is inferred. PK04: interactive-mathvision.com AM Exercise 1. D.
// PK06: M. Gibaldi, D. Perrier, Pharmacokinetics. M.
#[test]
fn pk01_pk04_and_pk06_time_of_peak() {
    for (ka, published, digits) in [
        ("3", 1.0, "0.96716078610793"),
        ("6/10", 2.75, "2.7465307216703"),
        ("1/8", 6.25, "6.2667150566098"),
    ] {
        let time = peak("PK01", &oral(ka, "2/10"));
        // Half of the quarter hour that the plots were read to.
        assert!(
            (time - published).abs() <= 0.125,
            "PK01: {time}, not {published}"
        );
        agree_in_time("PK01", time, digits);
    }
    let exact = oral("1/2", "1/4");
    let time = peak("PK04", &exact);
    agree_in_time("PK04", time, "2.7725887222398");
    agree("PK04", 100.0 * at(&exact, 1, time), "50.0000000000000");

    let exact = oral("1", "1");
    agree_in_time("PK06", peak("PK06", &exact), "1.0000000000000");
    agree("PK06", at(&exact, 1, 1.0), "0.36787944117144232160");
    let built_in = Library::new()
        .load("kinetics/oral-equal-rates", &Replacements::new())
        .unwrap();
    let number = |name: &str| {
        built_in
            .parameters
            .iter()
            .find(|p| p.name == name)
            .unwrap()
            .value
    };
    let (k, dose) = (number("k"), built_in.states[0].start);
    let amount = at(&built_in.exact().unwrap(), 1, Double::ONE / k);
    agree(
        "PK06",
        (Double::from(amount) / dose).to_f64(),
        "0.3678794411714423",
    );
}

// PK02: boomer.org/c/php/pk3001a.php. D. PK03: boomer.org/c/p1/Ch19/Ch1907.html. R.
#[test]
fn pk02_and_pk03_two_compartments_and_average_level() {
    let numbers = [
        ("k", "16/100"),
        ("k12", "207/100"),
        ("k21", "152/100"),
        ("V", "425/10"),
    ];
    let states = [
        ["central", "250/V", "k21*outer - (k + k12)*central"],
        ["outer", "0", "k12*central - k21*outer"],
    ];
    let exact = model("10", &states, &parameters(&numbers));
    agree("PK02", at(&exact, 0, 3.0), "1.9393135639025");
    // The same from the recomputed hybrid constants, as many digits as they have.
    let sum = |t: f64| {
        3.5183608712805 * (-3.6839845217691 * t).exp()
            + 2.363992069896 * (-0.06601547823095 * t).exp()
    };
    for time in [0.25, 1.0, 3.0, 8.0] {
        assert!(
            (at(&exact, 0, time) - sum(time)).abs() < 1e-12,
            "PK02 at {time}"
        );
    }

    // The area below the level after one dose, over 12 h, is the average of many.
    let numbers = parameters(&[("V", "15"), ("k", "15/100"), ("dose", "600"), ("F", "9/10")]);
    let states = [["level", "F*dose/V", "-k*level"], ["mean", "0", "level/12"]];
    // k t = 75: what is still to come is e^-75 of it.
    assert_eq!(at(&model("500", &states, &numbers), 1, 500.0), 20.0, "PK03");
}

// PK05: boomer.org/c/php/pk3003a.php. R. Data in print against the fitted curve.
#[test]
fn pk05_printed_data_follow_the_curve() {
    let states = [
        ["quick", "2.28149", "-3.28389*quick"],
        ["slow", "2.38395", "-0.116025*slow"],
    ];
    let exact = model("12", &states, &output("level", "quick + slow"));
    let data = [
        (0.25, 3.32),
        (0.5, 2.69),
        (0.75, 2.38),
        (1.0, 2.21),
        (1.25, 2.1),
        (1.5, 2.02),
        (2.0, 1.89),
        (4.0, 1.5),
        (6.0, 1.19),
        (9.0, 0.84),
        (12.0, 0.59),
    ];
    let residues = data.map(|(time, level): (f64, f64)| (at(&exact, 2, time) - level).abs());
    // The fit has six digits, each curve value thus an error of 2e-5 at most.
    agree_but_for(
        "PK05",
        residues.into_iter().fold(0.0, f64::max),
        "0.0035",
        2e-5,
    );
}

/// Thirty nodes between cold ends, started in one mode.
fn rod(mode: usize) -> Exact {
    let state = |k: usize| {
        let left = if k == 1 {
            "0".to_owned()
        } else {
            format!("n{}", k - 1)
        };
        let right = if k == 30 {
            "0".to_owned()
        } else {
            format!("n{}", k + 1)
        };
        let start = format!("sin({}*pi/31)", mode * k);
        [
            format!("n{k}"),
            start,
            format!("961*({left} - 2*n{k} + {right})"),
        ]
    };
    model("1", &(1..=30).map(state).collect::<Vec<_>>(), "")
}

// HT05: Carslaw, Jaeger. M. HT06: textbooks. M.
#[test]
fn ht05_and_ht06_modes_of_a_rod() {
    let mode = model("1", &[["x", "1", "-pi^2*x"]], "");
    let value = at(&mode, 0, Decimal::parse("0.1").unwrap());
    agree("HT05", value, "0.37270783885343791358");

    for (mode, time, digits) in [
        (1, 0.125, "9.8611604407775287704"),
        (2, 1.0 / 32.0, "39.343452912705582651"),
        (30, 1.0 / 4096.0, "3834.1388395592224712"),
    ] {
        let exact = rod(mode);
        // The rate of decay of each node; the node nearest the middle of the rod may
        // lie on a knot of the mode, the first does not.
        let rate = (at(&exact, 0, 0.0) / at(&exact, 0, time)).ln() / time;
        agree_in_time("HT06", rate, digits);
    }
    let built_in = Library::new()
        .load("thermal/rod-30-node", &Replacements::new())
        .unwrap();
    for (name, digits) in [
        ("r_1", "9.8611604407775287704"),
        ("r_30", "3834.1388395592224712"),
    ] {
        let rate = built_in
            .parameters
            .iter()
            .find(|p| p.name == name)
            .unwrap()
            .value;
        agree("HT06", rate.to_f64(), digits);
    }
}

// HT07: liquisearch.com cable theory. R. HT09: W. Rall. M. Steady cables: the place along
// the cable takes the part of time.
#[test]
fn ht07_and_ht09_steady_cables() {
    let long = model("1", &[["v", "1", "-v"]], "");
    agree("HT07", 100.0 * at(&long, 0, 1.0), "36.8");
    agree(
        "HT07",
        at(&long, 0, 1.0),
        "0.367879441171442321595523770161",
    );
    // From the sealed end, where the slope is zero, to the near one.
    let sealed = model("1", &[["v", "1", "slope"], ["slope", "0", "v"]], "");
    let ratio = 1.0 / at(&sealed, 0, 1.0);
    agree_in_time("HT09", ratio, "0.648");
    agree_in_time("HT09", ratio, "0.64805427366388539957");
}

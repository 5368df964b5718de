use super::*;
use crate::fault::Fault;

fn parse(text: &str) -> Result<Formula, Fault> {
    let names = ["a", "b", "tau"];
    Formula::parse_known(text, &|name| names.iter().position(|n| *n == name), &names)
}

fn value(text: &str) -> f64 {
    let formula = parse(text).unwrap();
    let single = formula.evaluate::<f64>(&[3.0, -2.0, 0.5]).unwrap();
    let wide = [3.0, -2.0, 0.5].map(Double::from);
    let double = formula.evaluate::<Double>(&wide).unwrap().to_f64();
    let same =
        single == double || (single - double).abs() <= 4.0 * f64::EPSILON * single.abs().max(1.0);
    assert!(
        same || single.is_nan() && double.is_nan(),
        "{text}: {single} {double}"
    );
    double
}

fn complaint(text: &str) -> String {
    parse(text).unwrap_err().to_string()
}

#[test]
fn arithmetic_as_it_is_written_on_paper() {
    for (text, expected) in [
        ("-2^2", -4.0),
        ("2^3^2", 512.0),
        ("2^-1", 0.5),
        ("-2^-2", -0.25),
        ("1-2-3", -4.0),
        ("24/4/3", 2.0),
        ("2*-a", -6.0),
        ("+a--b", 1.0),
        ("2e-3*a", 0.006),
        ("(a + b) * (a - b)", 5.0),
        ("max(a, b) + min(a, b)", 1.0),
        ("heaviside(0) + heaviside(-1e-300)", 1.0),
        ("abs(b)^0.5", 2f64.sqrt()),
        ("sqrt(sin(pi/6)^2 + cos(pi/6)^2)", 1.0),
        ("exp(ln(a))", 3.0),
        ("tanh(tau) - sinh(tau)/cosh(tau)", 0.0),
        ("tan(tau)*cos(tau)/sin(tau)", 1.0),
        ("1.e2 + .5", 100.5),
        ("b^3", -8.0),
    ] {
        assert!(
            (value(text) - expected).abs() <= 1e-15,
            "{text} gives {}",
            value(text)
        );
    }
    assert!(value("ln(b)").is_nan());
    assert_eq!(value("1/0"), f64::INFINITY);
}

#[test]
fn every_complaint_has_its_column() {
    for (text, expected) in [
        ("", "1:1: the formula ends where a value was expected"),
        ("a +", "1:4: the formula ends where a value was expected"),
        ("a + q2", "1:5: unknown name `q2`"),
        (
            "tua",
            "1:1: unknown name `tua`\n  help: did you mean `tau`?",
        ),
        (
            "2a",
            "1:2: found `a`, expected an operator\n  help: a product is written with `*`",
        ),
        (
            "a**2",
            "1:3: found `*`, expected a value\n  help: a power is written `^`",
        ),
        ("1e400", "1:1: `1e400` is not a finite number"),
        ("(a", "1:1: this bracket is not closed"),
        ("a)", "1:2: this bracket closes nothing"),
        ("sin a", "1:1: `sin` is a function: `(` must follow"),
        ("min(a)", "1:1: `min` takes 2 argument(s), got 1"),
        ("exp(a, b)", "1:1: `exp` takes 1 argument(s), got 2"),
        (
            "1,5",
            "1:2: a comma may only stand between the arguments of a function\n  help: the decimal sign is a point",
        ),
        (
            "a + ζ",
            "1:5: found `ζ`, expected a value\n  help: names are made of a-z, A-Z, 0-9 and _",
        ),
        ("a $ b", "1:3: found `$`, expected an operator"),
        ("()", "1:2: found `)`, expected a value"),
    ] {
        assert_eq!(complaint(text), expected, "{text}");
    }
}

#[test]
fn length_and_nesting_are_bounded() {
    let deep = "(".repeat(60_000) + "1";
    assert!(complaint(&deep).contains("nested more than 1000 deep"));
    assert!(complaint(&"sin(".repeat(10_000)).contains("nested"));
    assert!(complaint(&"-".repeat(60_000)).contains("nested"));
    assert!(complaint(&"1+".repeat(40_000)).contains("at most 65536 are read"));
    let long = "1".to_string() + &"+1".repeat(30_000);
    assert_eq!(value(&long), 30_001.0);
    let nested = "(".repeat(900) + "a" + &")".repeat(900);
    assert_eq!(value(&nested), 3.0);
}

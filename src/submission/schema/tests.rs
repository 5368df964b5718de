use super::super::ColumnName;
use super::*;

fn parse(text: &str) -> Result<Submission, Vec<Fault>> {
    Submission::parse(text, Path::new(env!("CARGO_MANIFEST_DIR")))
}

const RUN: &str = "\n[[runs]]\nfile = 'Cargo.toml'\n";

#[test]
fn a_full_submission_is_read() {
    let text = r#"
        case = "thermal/cold-room-defrost"
        producer = "alder 2.3"
        expect = "fail"
        [parameters]
        R_w = 0.03
        [claims]
        method = "forward Euler"
        order = 1
        [limits]
        absolute = 1e-3
        relative = 0
        relative_to = "peak"
        order_slack = 0.2
        air = { absolute = 5e-3 }
        [columns]
        time = { column = "t", unit = "min" }
        air = "T_air"
        wall = 3
        [layout]
        separator = ";"
        decimal = ","
        comment = "%"
        skip_lines = 2
        digits = 6
        [[runs]]
        file = "Cargo.toml"
        step = 10
        role = "rung"
        [[runs]]
        file = "./src/lib.rs"
        tolerance = 1e-6
    "#;
    let submission = parse(text).unwrap();
    assert_eq!(submission.expect, Expect::Fail);
    assert_eq!(submission.parameters["R_w"], 0.03);
    assert_eq!(submission.claims.order, Some(1.0));
    assert_eq!(submission.limits.general.of_peak, Some(true));
    assert_eq!(submission.limits.channels["air"].absolute, Some(5e-3));
    assert_eq!(
        submission.columns["wall"].column,
        Some(ColumnName::Number(3))
    );
    assert_eq!(submission.columns["time"].unit.as_deref(), Some("min"));
    assert_eq!(submission.layout.digits, Some(6));
    assert_eq!(submission.runs[0].setting, Setting::Step(10.0));
    assert_eq!(submission.runs[0].role, Some(Role::Rung));
    assert_eq!(submission.runs[1].setting, Setting::Tolerance(1e-6));
}

#[test]
fn complaints_have_their_place() {
    for (text, expected) in [
        ("cas = 'x'", "1:1: unknown field `cas`"),
        (
            "expect = 'maybe'",
            "1:10: `expect` is `maybe`, expected \"pass\" or \"fail\" or \"undecided\"",
        ),
        ("[limits]\nabsolut = 1", "2:1: `absolut` is no limit"),
        (
            "[limits]\nabsolute = -1",
            "2:12: a limit must be finite and not below zero",
        ),
        (
            "[limits]\nabsolute = inf",
            "2:12: a limit must be finite and not below zero",
        ),
        (
            "[limits]\nrelative_to = 'sum'",
            "2:15: `relative_to` is `sum`, expected",
        ),
        ("[limits]\nair = { abs = 1 }", "unknown field `abs`"),
        ("[claims]\norder = 0", "2:9: `order` must lie above 0"),
        (
            "[claims]\norder = 'two'",
            "2:9: invalid type: string \"two\"",
        ),
        ("[parameters]\nR = nan", "2:5: this is not a finite number"),
        (
            "[columns]\nair = 0",
            "2:7: invalid value: floating point `0.0`",
        ),
        (
            "[columns]\nair = 1.5",
            "2:7: invalid value: floating point `1.5`",
        ),
        (
            "[layout]\nseparator = '|'",
            "2:13: `separator` is `|`, expected",
        ),
        (
            "[layout]\ndigits = 40",
            "2:10: `digits` must lie between 1 and 17",
        ),
        (
            "[layout]\nseparator = ','\ndecimal = ','",
            "a comma cannot be both",
        ),
        (
            "[[runs]]\nfile = 'Cargo.toml'\nstep = 0",
            "must be finite and above zero",
        ),
        (
            "[[runs]]\nfile = 'Cargo.toml'\nstep = 1\ntolerance = 1",
            "either `step` or `tolerance`",
        ),
        (
            "[[runs]]\nfile = '../x.csv'",
            "2:8: file `../x.csv` does not lie in the submission's own folder",
        ),
        (
            "[[runs]]\nfile = '/etc/passwd'",
            "2:8: file `/etc/passwd` does not lie in",
        ),
        (
            "[[runs]]\nfile = 'none.csv'",
            "2:8: there is no file `none.csv`",
        ),
        (
            "[[runs]]\nfile = 'src'",
            "2:8: file `src` is not a plain file",
        ),
        ("[[runs]]\nstep = 1", "1:1: missing field `file`"),
        ("[[runs]\nfile = 1", "1:8: "),
    ] {
        let faults = parse(&format!("{text}{RUN}")).unwrap_err();
        let all: Vec<String> = faults.iter().map(ToString::to_string).collect();
        assert!(
            all.iter().any(|f| f.contains(expected)),
            "{text}:\n{}",
            all.join("\n")
        );
    }
    assert!(
        parse("case = 'a'").unwrap_err()[0]
            .text
            .contains("has no runs")
    );
}

//! `audit --against`: changes are planted in files, and have to be named.

use serde_json::Value;

use crate::folder::{Folder, Ran, printed, sound};

const CASE: &str = "decay/parent-daughter";

/// How the rows of a run are made.
#[derive(Clone, Copy)]
enum Made {
    /// A method at this step.
    Euler,
    Heun,
    /// Exact values and an error of this size and power of the step.
    Off(f64, i32),
}

/// Rows of the case from a plain loop: `x' = A x`, two states and their output.
fn rows(step: f64, made: Made) -> String {
    let (r_1, r_2) = (2.0_f64.ln() / 66.0, 2.0_f64.ln() / 6.01);
    let rate = |[p, d]: [f64; 2]| [-r_1 * p, 0.876 * r_1 * p - r_2 * d];
    let exact = |t: f64| {
        let (a, b) = ((-r_1 * t).exp(), (-r_2 * t).exp());
        [a, 0.876 * r_1 / (r_2 - r_1) * (a - b)]
    };
    let mut text = "t,parent,daughter,activity\n".to_owned();
    let mut x = [1.0, 0.0];
    let count = (480.0 / step).round() as u32;
    for k in 0..=count {
        let t = f64::from(k) * step;
        if let Made::Off(size, power) = made {
            let [p, d] = exact(t);
            let error = size * step.powi(power) * (t / 480.0);
            x = [p + error, d + error];
        }
        let [p, d] = x;
        text += &format!("{t},{p:.13},{d:.13},{:.13}\n", r_2 * d);
        let f = rate(x);
        let predicted = [p + step * f[0], d + step * f[1]];
        x = match made {
            Made::Heun => {
                let g = rate(predicted);
                [
                    p + 0.5 * step * (f[0] + g[0]),
                    d + 0.5 * step * (f[1] + g[1]),
                ]
            }
            _ => predicted,
        };
    }
    text
}

fn submission(folder: &Folder, name: &str, head: &str, runs: &[(&str, f64, Made)]) {
    let mut text = format!("case = \"{CASE}\"\n{head}\n[limits]\nabsolute = 0.05\nrelative = 0\n");
    for (file, step, made) in runs {
        folder.write(&format!("runs/{name}/{file}"), rows(*step, *made));
        text += &format!("[[runs]]\nfile = \"{file}\"\nstep = {step}\n");
    }
    folder.write(&format!("runs/{name}/submission.toml"), text);
}

fn ladder(made: Made) -> [(&'static str, f64, Made); 3] {
    [
        ("h4.csv", 4.0, made),
        ("h2.csv", 2.0, made),
        ("h1.csv", 1.0, made),
    ]
}

/// Everything in order, to begin with.
fn before() -> Folder {
    let folder = Folder::new();
    let one = |made| [("h1.csv", 1.0, made)];
    submission(&folder, "calm", "", &ladder(Made::Heun));
    submission(&folder, "grown", "", &one(Made::Off(1e-4, 0)));
    submission(&folder, "within", "", &one(Made::Off(1e-4, 0)));
    submission(&folder, "fallen", "", &ladder(Made::Off(1e-4, 2)));
    submission(&folder, "another", "", &one(Made::Euler));
    submission(&folder, "judged", "", &one(Made::Off(1e-4, 0)));
    submission(&folder, "lost", "", &one(Made::Heun));
    submission(&folder, "shorter", "", &ladder(Made::Heun));
    submission(&folder, "narrower", "", &one(Made::Heun));
    let claim = "[claims]\nmethod = \"Heun\"";
    submission(&folder, "claimed", claim, &one(Made::Heun));
    submission(&folder, "broken", "", &one(Made::Heun));
    submission(&folder, "shrunk", "", &one(Made::Off(1e-2, 0)));
    submission(&folder, "risen", "", &ladder(Made::Off(1e-4, 1)));
    let ran = folder.run(&["audit", "runs", "--write", "earlier.json"]);
    assert_eq!(ran.status, 0, "{}", ran.seen());
    folder
}

fn against(folder: &Folder, more: &[&str]) -> Ran {
    let arguments = [&["runs", "--against", "earlier.json"], more].concat();
    folder.audit(&arguments)
}

/// Kind, submission, file and channel of each change; empty where there is none.
fn told(ran: &Ran, list: &str) -> Vec<[String; 4]> {
    let text = |value: &Value| value.as_str().unwrap_or_default().to_owned();
    let changes = ran.report["changes"][list].as_array().unwrap();
    let read = |one: &Value| ["kind", "submission", "file", "channel"].map(|key| text(&one[key]));
    changes.iter().map(read).collect()
}

fn has(list: &[[String; 4]], change: [&str; 4]) -> bool {
    list.iter()
        .any(|one| one.iter().zip(change).all(|(a, b)| a == b))
}

#[test]
fn nothing_changed_on_the_same_data() {
    let folder = before();
    let ran = against(&folder, &["--worse-by", "0"]);
    assert_eq!(ran.status, 0, "{}", ran.seen());
    for list in ["worse", "better", "other"] {
        assert!(told(&ran, list).is_empty(), "{list}: {}", ran.seen());
    }
    assert_eq!(ran.report["changes"]["compared"], 13);
    assert!(
        ran.stdout
            .contains("Nothing became worse since earlier.json.")
    );
    // Names follow the paths: where none is known, that is said.
    let one = folder.audit(&["runs/calm", "--against", "earlier.json"]);
    assert_eq!(one.status, 1);
    assert_eq!(told(&one, "worse").len(), 12, "{}", one.stdout);
    let other = folder.audit(&[".", "--against", "earlier.json"]);
    assert!(
        other.stdout.contains("audit the same paths as then"),
        "{}",
        other.stdout
    );
    assert_eq!(against(&folder, &[]).status, 0);
    // A report with changes is as good an earlier one.
    std::fs::copy(folder.path("report.json"), folder.path("earlier.json")).unwrap();
    assert_eq!(against(&folder, &[]).status, 0);
}

#[test]
fn planted_changes_are_named() {
    let folder = before();
    let one = |made| [("h1.csv", 1.0, made)];
    submission(&folder, "grown", "", &one(Made::Off(3e-4, 0)));
    submission(&folder, "within", "", &one(Made::Off(1.1e-4, 0)));
    submission(&folder, "fallen", "", &ladder(Made::Off(1e-4, 1)));
    submission(&folder, "another", "", &one(Made::Heun));
    submission(&folder, "judged", "", &one(Made::Off(0.1, 0)));
    std::fs::remove_dir_all(folder.path("runs/lost")).unwrap();
    submission(&folder, "shorter", "", &ladder(Made::Heun)[1..]);
    let cut: String = rows(1.0, Made::Heun)
        .lines()
        .map(|line| line.rsplit_once(',').unwrap().0.to_owned() + "\n")
        .collect();
    folder.write("runs/narrower/h1.csv", cut);
    let claim = "[claims]\nmethod = \"Heun\"";
    submission(&folder, "claimed", claim, &one(Made::Euler));
    folder.write("runs/broken/submission.toml", "case = 3\n");
    submission(&folder, "shrunk", "", &one(Made::Off(1e-4, 0)));
    submission(&folder, "risen", "", &ladder(Made::Off(6e-6, 2)));
    submission(&folder, "fresh", "", &one(Made::Heun));
    let ran = against(&folder, &[]);
    let worse = told(&ran, "worse");
    for change in [
        ["error", "grown", "h1.csv", "parent"],
        ["order", "fallen", "", "daughter"],
        ["method", "another", "", ""],
        ["verdict", "judged", "", ""],
        ["verdict", "judged", "h1.csv", "parent"],
        ["submission-vanished", "lost", "", ""],
        ["run-vanished", "shorter", "h4.csv", ""],
        ["channel-vanished", "narrower", "h1.csv", "activity"],
        ["claim", "claimed", "", ""],
        ["not-audited", "broken", "", ""],
    ] {
        assert!(has(&worse, change), "{change:?} in {worse:#?}");
        let lines = ran
            .stdout
            .split("Worse than in earlier.json:\n")
            .nth(1)
            .unwrap();
        let start = format!("  {}: ", change[1]);
        assert!(lines.contains(&start), "{change:?}: {lines}");
    }
    for calm in ["calm", "within", "shrunk", "risen", "fresh"] {
        assert!(worse.iter().all(|one| one[1] != calm), "{calm}: {worse:#?}");
    }
    let better = told(&ran, "better");
    for change in [
        ["error", "shrunk", "h1.csv", "daughter"],
        ["order", "risen", "", "parent"],
    ] {
        assert!(has(&better, change), "{change:?} in {better:#?}");
    }
    assert_eq!(ran.report["changes"]["new_submissions"][0], "fresh");
    assert!(ran.stdout.contains("Not in earlier.json:\n  fresh\n"));
    // `broken` cannot be audited.
    assert_eq!(ran.status, 2);
}

/// What is in order and became worse ends with 1; what became better does not.
#[test]
fn exit_statuses() {
    let folder = before();
    let one = |made| [("h1.csv", 1.0, made)];
    submission(&folder, "grown", "", &one(Made::Off(1.3e-4, 0)));
    let ran = against(&folder, &[]);
    assert_eq!(
        (ran.status, &ran.report["summary"]["in_order"]),
        (1, &Value::Bool(true))
    );
    assert!(
        ran.stdout.contains("All in order. 3 things became worse."),
        "{}",
        ran.stdout
    );
    assert!(ran.stdout.contains("(1.30 times)"), "{}", ran.stdout);
    assert_eq!(against(&folder, &["--worse-by", "0.5"]).status, 0);
    submission(&folder, "grown", "", &one(Made::Off(0.0, 0)));
    let ran = against(&folder, &[]);
    assert_eq!(ran.status, 0, "{}", ran.stdout);
    assert!(has(
        &told(&ran, "better"),
        ["error", "grown", "h1.csv", "parent"]
    ));
    // From no error to one.
    assert_eq!(
        folder
            .run(&["audit", "runs", "--write", "earlier.json"])
            .status,
        0
    );
    submission(&folder, "grown", "", &one(Made::Off(1e-9, 0)));
    let ran = against(&folder, &[]);
    assert_eq!(ran.status, 1);
    assert!(has(
        &told(&ran, "worse"),
        ["error", "grown", "h1.csv", "parent"]
    ));
    // Without `--against` nothing of it is said.
    let ran = folder.audit(&["runs"]);
    assert_eq!((ran.status, ran.report.get("changes")), (0, None));
    assert!(!ran.stdout.contains("worse"));
}

/// A growth that the printed digits may have made is none.
#[test]
fn digits_are_no_growth() {
    let folder = Folder::new();
    folder.write("run.csv", sound());
    let arguments = ["run.csv", "--case", crate::folder::CASE, "--step", "60"];
    let limits = ["--absolute", "0.1", "--write", "earlier.json"];
    let ran = folder.run(&[&["audit"], &arguments[..], &limits].concat());
    assert_eq!(ran.status, 0, "{}", ran.seen());
    // The error is 2e-4; three decimals make it up to 7e-4.
    folder.write("run.csv", printed(|value| format!("{value:.3}")));
    let compare = [
        "--absolute",
        "0.1",
        "--against",
        "earlier.json",
        "--worse-by",
        "0",
    ];
    let ran = folder.audit(&[&arguments[..], &compare].concat());
    assert!(
        told(&ran, "worse").iter().all(|one| one[0] != "error"),
        "{}",
        ran.stdout
    );
}

#[test]
fn a_control_that_passes_is_worse() {
    let folder = Folder::new();
    let one = |made| [("h1.csv", 1.0, made)];
    submission(
        &folder,
        "kept",
        "expect = \"fail\"",
        &one(Made::Off(0.1, 0)),
    );
    assert_eq!(
        folder
            .run(&["audit", "runs", "--write", "earlier.json"])
            .status,
        0
    );
    submission(
        &folder,
        "kept",
        "expect = \"fail\"",
        &one(Made::Off(0.0, 0)),
    );
    let ran = against(&folder, &[]);
    assert!(
        has(&told(&ran, "worse"), ["verdict", "kept", "", ""]),
        "{}",
        ran.stdout
    );
    // Nor does it help to call a failure a control.
    let folder = Folder::new();
    submission(&folder, "kept", "", &one(Made::Off(0.0, 0)));
    assert_eq!(
        folder
            .run(&["audit", "runs", "--write", "earlier.json"])
            .status,
        0
    );
    submission(
        &folder,
        "kept",
        "expect = \"fail\"",
        &one(Made::Off(0.1, 0)),
    );
    let ran = against(&folder, &[]);
    assert_eq!(ran.status, 1);
    assert!(
        has(&told(&ran, "worse"), ["verdict", "kept", "", ""]),
        "{}",
        ran.stdout
    );
    // Nor to take another case.
    let text = "case = \"thermal/cooling-body\"\n[[runs]]\nfile = \"h1.csv\"\n";
    folder.write("runs/kept/submission.toml", text);
    let ran = against(&folder, &[]);
    assert!(
        has(&told(&ran, "worse"), ["case", "kept", "", ""]),
        "{}",
        ran.stdout
    );
}

#[test]
fn an_earlier_report_that_cannot_be_read() {
    let folder = Folder::new();
    submission(&folder, "calm", "", &[("h1.csv", 1.0, Made::Heun)]);
    assert_eq!(
        folder
            .run(&["audit", "runs", "--write", "good.json"])
            .status,
        0
    );
    let good = std::fs::read_to_string(folder.path("good.json")).unwrap();
    let cases = [
        ("no.json", None, "no.json: cannot be read"),
        (
            "a.json",
            Some("t,air\n0,1\n".to_owned()),
            "a.json:1:2: this is not JSON",
        ),
        (
            "b.json",
            Some(good[..good.len() / 2].to_owned()),
            "this is not JSON",
        ),
        (
            "c.json",
            Some(good.replacen("\"schema\": 1", "\"schema\": 2", 1)),
            "c.json:3:3: the report has schema `2`, this version reads 1\n  help: write",
        ),
        (
            "d.json",
            Some(good.replacen("\"schema\": 1,", "\"schema\": 1,\n  \"colour\": 2,", 1)),
            "unknown field `colour`",
        ),
        (
            "e.json",
            Some("{}".to_owned()),
            "e.json:1:1: this is no report of an audit",
        ),
        (
            "f.json",
            Some(format!("{good}{good}")),
            "trailing characters",
        ),
    ];
    for (name, text, complaint) in cases {
        if let Some(text) = text {
            folder.write(name, text);
        }
        let ran = folder.run(&["audit", "runs", "--against", name, "--write", "new.json"]);
        assert_eq!(ran.status, 2, "{name}");
        assert!(ran.stderr.contains(complaint), "{name}: {}", ran.stderr);
        assert!(ran.stderr.contains("\n  help: "), "{name}: {}", ran.stderr);
        assert!(!folder.path("new.json").exists(), "{name}");
    }
    folder.write("g.json", b"{\n\xff");
    let ran = folder.run(&["audit", "runs", "--against", "g.json"]);
    assert!(
        ran.stderr.contains("g.json:2:1: this is not UTF-8 text"),
        "{}",
        ran.stderr
    );
    // Alone it says nothing.
    let ran = folder.run(&["audit", "runs", "--worse-by", "0.1"]);
    assert!(
        ran.status == 2 && ran.stderr.contains("--against"),
        "{}",
        ran.stderr
    );
    let ran = folder.run(&[
        "audit",
        "runs",
        "--against",
        "good.json",
        "--worse-by",
        "-1",
    ]);
    assert!(
        ran.status == 2 && ran.stderr.contains("not below zero"),
        "{}",
        ran.stderr
    );
    // It is an input.
    let ran = folder.run(&[
        "audit",
        "runs",
        "--against",
        "good.json",
        "--write",
        "./good.json",
    ]);
    assert_eq!(ran.status, 2);
    assert!(
        ran.stderr.contains("`--against` compares with"),
        "{}",
        ran.stderr
    );
    assert_eq!(
        std::fs::read_to_string(folder.path("good.json")).unwrap(),
        good
    );
}

/// What fails is no better for being meant to, nor for a wider limit.
#[test]
fn an_expectation_or_a_wider_limit_is_no_progress() {
    let folder = Folder::new();
    let one = [("h1.csv", 1.0, Made::Off(1.0, 0))];
    submission(&folder, "meant", "", &one);
    submission(&folder, "wide", "", &one);
    let ran = folder.run(&["audit", "runs", "--write", "earlier.json"]);
    assert_eq!(ran.status, 1);
    submission(&folder, "meant", "expect = \"fail\"", &one);
    let path = folder.path("runs/wide/submission.toml");
    let text = std::fs::read_to_string(&path).unwrap();
    std::fs::write(&path, text.replace("absolute = 0.05", "absolute = 5")).unwrap();
    let ran = folder.audit(&["runs", "--against", "earlier.json"]);
    assert_eq!(ran.status, 1);
    let texts = |list: &str| ran.report["changes"][list].to_string();
    assert!(
        texts("worse").contains("fail is expected now, pass earlier"),
        "{}",
        texts("worse")
    );
    assert!(
        texts("other").contains("the limit is 5.00"),
        "{}",
        texts("other")
    );
    assert!(!texts("better").contains("`parent`"), "{}", texts("better"));
}

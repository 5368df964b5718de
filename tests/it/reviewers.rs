//! What a reviewer lays down, and what becomes of those who would like a pass all the same.

use serde_json::Value;
use stepgauge::case::{Library, Replacements};

use crate::folder::{Folder, Ran};

pub const CASE: &str = "electrical/rc-constant";
/// Of that case, in ms.
const TAU: f64 = 1.5 * 0.68;
const REPORTS: [&str; 5] = ["r.json", "r.xml", "r.md", "r.csv", "r.html"];

/// Classical RK4 on the case, printed in full.
pub fn rk4(step: f64) -> String {
    let rate = |v: f64| (5.0 - v) / TAU;
    let (mut v, mut text) = (0.0, "t,v_c\n".to_owned());
    for k in 0..=(10.0 / step).round() as u32 {
        text += &format!("{},{v:?}\n", (f64::from(k) * step * 1e6).round() / 1e6);
        let a = rate(v);
        let b = rate(v + 0.5 * step * a);
        let c = rate(v + 0.5 * step * b);
        let d = rate(v + step * c);
        v += step / 6.0 * (a + 2.0 * b + 2.0 * c + d);
    }
    text
}

/// Exact values with an error put in, at a spacing; `parameters` replace those of the case.
pub fn near(parameters: &[(&str, f64)], step: f64, error: impl Fn(f64) -> f64) -> String {
    let parameters: Replacements = parameters
        .iter()
        .map(|(n, v)| ((*n).to_owned(), *v))
        .collect();
    let case = Library::new().load(CASE, &parameters).unwrap();
    let exact = case.exact().unwrap();
    let mut text = "t,v_c\n".to_owned();
    for k in 0..=(10.0 / step).round() as u32 {
        let time = (f64::from(k) * step * 1e6).round() / 1e6;
        let value = exact.at(time).unwrap()[0].value + error(time);
        text += &format!("{time},{value:?}\n");
    }
    text
}

pub fn none(_: f64) -> f64 {
    0.0
}

pub fn submit(folder: &Folder, name: &str, head: &str, files: &[(Option<f64>, String)]) {
    let mut text = format!("case = \"{CASE}\"\n{head}\n");
    for (number, (step, content)) in files.iter().enumerate() {
        folder.write(&format!("{name}/{number}.csv"), content);
        text += &format!("[[runs]]\nfile = \"{number}.csv\"\n");
        text += &step.map_or(String::new(), |step| format!("step = {step}\n"));
    }
    folder.write(&format!("{name}/submission.toml"), text);
}

/// An honest ladder of RK4.
fn ladder() -> Vec<(Option<f64>, String)> {
    [0.2, 0.1, 0.05].map(|step| (Some(step), rk4(step))).into()
}

/// Audits `s` by the rules, with a report of each kind.
pub fn by_rules(folder: &Folder, rules: &str, more: &[&str]) -> Ran {
    folder.write("rules.toml", rules);
    let mut arguments = vec!["s", "--require", "rules.toml"];
    arguments.extend(more);
    folder.audit(&arguments)
}

pub fn read(folder: &Folder, name: &str) -> String {
    std::fs::read_to_string(folder.path(name)).unwrap()
}

/// Reasons, notes and the rest of the first submission.
pub fn first(ran: &Ran) -> &Value {
    &ran.report["submissions"][0]
}

fn required(ran: &Ran) -> &Value {
    &ran.report["review"]["required"][0]
}

/// Verdict, status, and a text that must be seen.
#[track_caller]
pub fn is(ran: &Ran, status: i32, verdict: &str, told: &str) {
    assert_eq!(
        (ran.status, ran.verdict()),
        (status, verdict),
        "{}",
        ran.seen()
    );
    assert!(ran.seen().contains(told), "{told}: {}", ran.seen());
}

/// Whose limits and parameters were used stands in every report.
#[track_caller]
fn every_report_tells(folder: &Folder, arguments: &[&str], told: [&str; 5]) {
    let writes = REPORTS.iter().flat_map(|name| ["--write", name]);
    let all: Vec<&str> = ["audit", "s"].into_iter().chain(writes).collect();
    let ran = folder.run(&[&all, arguments].concat());
    assert!(ran.status < 2, "{}", ran.seen());
    for (name, told) in REPORTS.iter().zip(told) {
        let text = read(folder, name);
        assert!(text.contains(told), "{name}: {told}: {text}");
    }
}

#[test]
fn limits_of_a_submission_give_way_to_those_of_a_reviewer() {
    let folder = Folder::new();
    let off = near(&[], 0.05, |t| 0.01 * t.sin());
    submit(&folder, "s", "[limits]\nabsolute = 1", &[(Some(0.05), off)]);
    let limits = |text: &str| {
        folder.write("limits.toml", text);
        folder.audit(&["s", "--limits", "limits.toml"])
    };
    let whose = |ran: &Ran| first(ran)["limits_from"].as_str().unwrap().to_owned();
    let own = folder.audit(&["s"]);
    is(
        &own,
        0,
        "pass",
        "s: judged by limits of the submission's own",
    );
    assert!(own.report.get("review").is_none());
    for (text, status, verdict, from, told) in [
        (
            "[limits]\nabsolute = 1e-3",
            1,
            "fail",
            "reviewer",
            "the reviewer's file",
        ),
        // For one channel; the others have those of the case, which are too tight.
        (
            "[limits]\nv_c = { absolute = 0.1 }",
            0,
            "pass",
            "reviewer",
            "the reviewer's file",
        ),
        // Those for the case stand alone.
        (
            "[limits]\nabsolute = 1\n[case_limits.\"electrical/rc-constant\"]\nrelative = 1e-6",
            1,
            "fail",
            "reviewer",
            "the reviewer's file",
        ),
        // Nothing of the submission is left where the file is about other cases.
        (
            "[case_limits.\"electrical/rl-pulse\"]\nabsolute = 1",
            1,
            "fail",
            "case",
            "judged by limits of the case",
        ),
    ] {
        let ran = limits(text);
        is(&ran, status, verdict, told);
        assert_eq!(whose(&ran), from, "{text}");
        assert!(
            ran.seen()
                .contains("states limits of its own, which do not count here")
        );
        assert_eq!(ran.report["review"]["limits"], "limits.toml");
    }
    // What was typed goes before the file.
    let typed = folder.audit(&["s", "--limits", "limits.toml", "--absolute", "1"]);
    is(&typed, 0, "pass", "judged by limits of the command line");
    every_report_tells(
        &folder,
        &["--limits", "limits.toml"],
        [
            "\"limits_from\": \"case\"",
            "<property name=\"limits\" value=\"case\"/>",
            "- s: judged by limits of the case\n",
            ",case,\n",
            "<dt>limits</dt><dd>those of the case</dd>",
        ],
    );
}

#[test]
fn the_allowance_for_the_order_is_a_limit_too() {
    let folder = Folder::new();
    let euler = |step: f64| {
        (
            Some(step),
            near(&[], step, |t| 0.02 * step * (1.0 + t.sin())),
        )
    };
    let head = "[claims]\norder = 2\n[limits]\nabsolute = 1\norder_slack = 1";
    submit(&folder, "s", head, &[euler(0.1), euler(0.05), euler(0.025)]);
    assert_eq!(folder.audit(&["s"]).verdict(), "pass");
    folder.write("limits.toml", "[limits]\nabsolute = 1\n");
    let ran = folder.audit(&["s", "--limits", "limits.toml"]);
    is(
        &ran,
        1,
        "fail",
        "shows order 1.00 from 3 runs, 2 is claimed",
    );
    let ran = folder.audit(&["s", "--absolute", "1"]);
    is(
        &ran,
        0,
        "pass",
        "`order_slack = 1` is the submission's own, the limits are not",
    );
}

#[test]
fn own_parameters_are_shown_or_refused() {
    let folder = Folder::new();
    let own = near(&[("R", 3.0)], 0.05, none);
    submit(
        &folder,
        "s",
        "[parameters]\nR = 3\nC = 0.68",
        &[(Some(0.05), own)],
    );
    is(
        &folder.audit(&["s"]),
        0,
        "pass",
        "parameters of the submission's own: C = 0.68, R = 3",
    );
    every_report_tells(
        &folder,
        &[],
        [
            "\"R\": 3.0",
            "<property name=\"parameters\" value=\"C = 0.68, R = 3\"/>",
            "- s: parameters of the submission&#39;s own: C &#61; 0.68, R &#61; 3\n",
            ",case,\"C = 0.68, R = 3\"\n",
            "<dd>C = 0.68 R = 3 </dd>",
        ]
        .map(|text| {
            if text.starts_with('-') {
                "parameters of the submission's own"
            } else {
                text
            }
        }),
    );
    let refused = "parameter `R` is 3 where the case has 1.5, and own parameters are refused";
    let ran = folder.audit(&["s", "--own-parameters", "refuse"]);
    is(&ran, 1, "fail", &format!("s: {refused}"));
    // One that is as the case has it changes nothing.
    assert_eq!(first(&ran)["reasons"], serde_json::json!([refused]));
    assert_eq!(ran.report["review"]["own_parameters"], "refuse");
    let rules = "own_parameters = \"refuse\"\n";
    assert_eq!(first(&by_rules(&folder, rules, &[]))["reasons"][0], refused);
    let typed = by_rules(&folder, rules, &["--own-parameters", "allow"]);
    assert_eq!(typed.verdict(), "pass");
    // Other numbers are another problem: they never meet a requirement.
    let rules = format!("[[require]]\ncase = \"{CASE}\"\n");
    let ran = by_rules(&folder, &rules, &[]);
    is(
        &ran,
        1,
        "pass",
        "no submission passes it: s has parameters of its own",
    );
}

#[test]
fn a_case_that_is_handed_in_is_shown_or_refused_and_shadows_none() {
    let folder = Folder::new();
    let library = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/reference-cases/electrical/rc-constant.toml"
    );
    let text = std::fs::read_to_string(library).unwrap();
    submit(&folder, "s", "", &[(Some(0.05), near(&[], 0.05, none))]);
    let cases = ["--cases", "s/own"];
    folder.write("s/own/rc-constant.toml", &text);
    let ran = folder.audit(&[&["s"][..], &cases].concat());
    assert!(ran.status == 2, "{}", ran.seen());
    assert!(
        ran.seen()
            .contains("there is already a case `electrical/rc-constant`")
    );
    std::fs::rename(
        folder.path("s/own/rc-constant.toml"),
        folder.path("s/own/easy.toml"),
    )
    .unwrap();
    let own = read(&folder, "s/submission.toml").replace("rc-constant", "easy");
    folder.write("s/submission.toml", own);
    let told = "case electrical/easy is its own: it was handed in as s/own/easy.toml";
    is(
        &folder.audit(&[&["s"][..], &cases].concat()),
        0,
        "pass",
        told,
    );
    let ran = by_rules(&folder, "own_cases = \"refuse\"\n", &cases);
    is(
        &ran,
        1,
        "fail",
        &format!("{told}, and own cases are refused"),
    );
    // The reviewer's own are not handed in.
    folder.write("mine/easy.toml", &text);
    std::fs::remove_dir_all(folder.path("s/own")).unwrap();
    let ran = by_rules(&folder, "own_cases = \"refuse\"\n", &["--cases", "mine"]);
    is(&ran, 0, "pass", "All in order");
}

#[test]
fn a_mark_as_control_is_no_way_around_a_failure() {
    let folder = Folder::new();
    let wrong = near(&[], 0.05, |t| 0.3 * t);
    submit(&folder, "s", "expect = \"fail\"", &[(Some(0.05), wrong)]);
    assert_eq!(folder.audit(&["s"]).status, 0);
    let rules = format!("[[require]]\ncase = \"{CASE}\"\n");
    let ran = by_rules(&folder, &rules, &[]);
    let told =
        "missing: case electrical/rc-constant: no submission passes it: s is marked as a control";
    is(&ran, 1, "fail", told);
    assert_eq!(first(&ran)["in_order"], true);
    let ran = by_rules(&folder, "controls = \"refuse\"\n", &[]);
    let told = "s: it marks itself as a control by `expect = \"fail\"`, and controls are refused";
    is(&ran, 1, "fail", told);
    assert_eq!(first(&ran)["in_order"], false);
}

#[test]
fn what_is_required_has_to_be_there() {
    let folder = Folder::new();
    let rules = format!(
        "[[require]]\ncase = \"{CASE}\"\nruns = 3\nmethods = [\"Heun\", \"RK4\"]\nmethod_shown = true\n"
    );
    let good = |claim: &str, files: &[(Option<f64>, String)]| {
        submit(&folder, "s", claim, files);
        by_rules(&folder, &rules, &[])
    };
    let claim = "[claims]\nmethod = \"classical RK4\"";
    let all = ladder();
    let ran = good(claim, &all);
    let told = "Required by rules.toml: there: case electrical/rc-constant with at least 3 runs at \
                different steps by Heun or RK4, which the rows show: met by s";
    is(&ran, 0, "pass", told);
    assert_eq!(required(&ran)["met_by"], serde_json::json!(["s"]));
    for (claim, files, verdict, told) in [
        (claim, &all[..2], "pass", "s has 2 runs at different steps"),
        ("", &all[..], "pass", "s claims no method"),
        // The rows fit RK4, whatever it is called: without rules that is a pass.
        (
            "[claims]\nmethod = \"alder's own\"",
            &all,
            "pass",
            "s claims `alder's own`, which is not in the catalogue",
        ),
        (
            "[claims]\nmethod = \"RK2\"",
            &all,
            "fail",
            "no submission passes it: s fails",
        ),
        (
            "[claims]\nmethod = \"BDF 2\"",
            &all,
            "fail",
            "no submission passes it: s fails",
        ),
        (
            "[limits]\nabsolute = 1\n[claims]\nmethod = \"RK4\"\norder = 5",
            &all,
            "fail",
            "s fails",
        ),
    ] {
        let ran = good(claim, files);
        is(
            &ran,
            1,
            verdict,
            "missing: case electrical/rc-constant with at least 3 runs",
        );
        assert!(ran.seen().contains(told), "{told}: {}", ran.seen());
        assert!(ran.seen().contains("One requirement is not met."));
        assert_eq!(required(&ran)["met_by"], serde_json::json!([]));
        assert_eq!(ran.report["summary"]["in_order"], false);
    }
    // Another case in place of the one that is wanted, and each kind of report.
    let rules = "[[require]]\ncase = \"electrical/rl-pulse\"\n";
    submit(&folder, "s", claim, &all);
    let told = "case electrical/rl-pulse: no submission is of this case";
    is(&by_rules(&folder, rules, &[]), 1, "pass", told);
    every_report_tells(
        &folder,
        &["--require", "rules.toml"],
        [
            told,
            "<failure message=\"case electrical/rl-pulse: no submission is of this case\" type=\"missing\">",
            "- missing: case electrical/rl-pulse: no submission is of this case\n",
            "\n,electrical/rl-pulse,,,,,,,,,,,,,,,\"required, missing\",,\n",
            "<span class=\"badge fail\">✗ missing</span> case electrical/rl-pulse: no submission",
        ],
    );
    let page = read(&folder, "r.html");
    assert!(
        page.contains("<h1>1 requirement not met, 0 of 1 not in order</h1>"),
        "{page}"
    );
}

// A name that stands for more than the one method that is wanted says too little.
#[test]
fn a_name_of_several_methods_is_no_claim_of_one() {
    let folder = Folder::new();
    let heun = |step: f64| {
        let rate = |v: f64| (5.0 - v) / TAU;
        let (mut v, mut text) = (0.0, "t,v_c\n".to_owned());
        for k in 0..=(10.0 / step).round() as u32 {
            text += &format!("{},{v:?}\n", (f64::from(k) * step * 1e6).round() / 1e6);
            v += 0.5 * step * (rate(v) + rate(v + step * rate(v)));
        }
        (Some(step), text)
    };
    let files = [heun(0.02), heun(0.01)];
    let rules = |methods: &str| {
        let limits = "[limits]\nabsolute = 1e-3\n";
        format!("{limits}[[require]]\ncase = \"{CASE}\"\nmethods = [\"{methods}\"]\n")
    };
    for (claimed, wanted, status, told) in [
        (
            "RK2",
            "Heun",
            1,
            "s claims `RK2`, which can be another method",
        ),
        ("Heun", "RK2", 0, "met by s"),
        ("Heun", "Heun", 0, "met by s"),
        ("Heun", "RK4", 1, "s claims `Heun`"),
    ] {
        submit(
            &folder,
            "s",
            &format!("[claims]\nmethod = \"{claimed}\""),
            &files,
        );
        is(
            &by_rules(&folder, &rules(wanted), &[]),
            status,
            "pass",
            told,
        );
    }
}

//! Files and submissions that look better than they are, and what an audit makes of them.

use crate::folder::Folder;
use crate::reviewers::{CASE, by_rules, first, is, near, none, read, submit};

#[test]
fn exact_values_contradict_every_method_that_has_errors() {
    let folder = Folder::new();
    let pasted = |step: f64| near(&[], step, none);
    for method in ["RK4", "Heun", "backward Euler", "BDF 2", "Dormand-Prince 5"] {
        let head = format!("[claims]\nmethod = \"{method}\"");
        let files = [0.2, 0.1].map(|step| (Some(step), pasted(step)));
        submit(&folder, "s", &head, &files);
        let ran = folder.audit(&["s"]);
        is(&ran, 1, "fail", "is contradicted");
        assert_eq!(
            first(&ran)["evidence"]["verdict"],
            "contradicts",
            "{method}"
        );
        // Without a step nobody can tell; whoever wants to be shown is not satisfied.
        submit(&folder, "s", &head, &files.map(|(_, text)| (None, text)));
        let rules = format!("[[require]]\ncase = \"{CASE}\"\nmethods = [\"{method}\"]\n");
        assert_eq!(by_rules(&folder, &rules, &[]).status, 0, "{method}");
        let ran = by_rules(&folder, &format!("{rules}method_shown = true\n"), &[]);
        is(
            &ran,
            1,
            "pass",
            &format!("s claims `{method}`, and its rows cannot tell"),
        );
    }
}

#[test]
fn many_trivial_rungs_are_no_ladder() {
    let folder = Folder::new();
    // First order throughout, at steps that hardly differ, stated further apart than they are.
    let euler = |step: f64| near(&[], step, |t| 0.02 * step * (1.0 + t.sin()));
    let alike: Vec<_> = (0..40)
        .map(|k| (Some(0.05 * (1.0 + 1e-4 * f64::from(k))), euler(0.05)))
        .collect();
    submit(
        &folder,
        "s",
        "[claims]\norder = 4\n[limits]\nabsolute = 1",
        &alike,
    );
    assert_ne!(folder.audit(&["s"]).verdict(), "pass");
    submit(&folder, "s", "", &alike);
    let rules = format!("[limits]\nabsolute = 1\n[[require]]\ncase = \"{CASE}\"\nruns = 3\n");
    let ran = by_rules(&folder, &rules, &[]);
    assert!(
        ran.seen().contains("s has 1 run at different steps"),
        "{}",
        ran.seen()
    );
    assert_eq!(ran.status, 1);
    submit(
        &folder,
        "s",
        "",
        &[0.2, 0.1, 0.05].map(|step| (Some(step), euler(step))),
    );
    is(&by_rules(&folder, &rules, &[]), 0, "pass", "met by s");
}

// An error that is zero wherever there is a row. What the rows say is true, so the limits hold;
// a method that is claimed is not believed, and a reviewer can ask for more rows.
#[test]
fn rows_where_the_error_happens_to_be_zero_show_little() {
    let folder = Folder::new();
    let swings = |t: f64| 0.3 * (2.0 * std::f64::consts::PI * t).sin();
    let text = near(&[], 0.5, swings);
    submit(&folder, "s", "", &[(Some(0.05), text.clone())]);
    assert_eq!(folder.audit(&["s"]).verdict(), "pass");
    let rules = |rows: u32| format!("[[require]]\ncase = \"{CASE}\"\nrows = {rows}\n");
    is(
        &by_rules(&folder, &rules(21), &[]),
        0,
        "pass",
        "with at least 21 rows in each result",
    );
    is(
        &by_rules(&folder, &rules(200), &[]),
        1,
        "pass",
        "s has a result with 21 rows",
    );
    let fine = [(Some(0.05), near(&[], 0.05, swings))];
    submit(&folder, "s", "", &fine);
    is(
        &by_rules(&folder, &rules(200), &[]),
        1,
        "fail",
        "no submission passes it: s fails",
    );
    for step in [0.5, 0.05] {
        submit(
            &folder,
            "s",
            "[claims]\nmethod = \"RK4\"",
            &[(Some(step), text.clone())],
        );
        is(
            &folder.audit(&["s"]),
            1,
            "fail",
            "closer to the exact solution than RK4",
        );
    }
}

#[test]
fn coarse_units_and_digits_give_no_pass() {
    let folder = Folder::new();
    let fine = near(&[], 0.05, none);
    let rows = fine.lines().skip(1).map(|line| {
        let (time, value) = line.split_once(',').unwrap();
        format!("{time},{:.4}\n", value.parse::<f64>().unwrap() / 1000.0)
    });
    let coarse: String = std::iter::once("t,v_c\n".to_owned()).chain(rows).collect();
    let head = "[columns]\nv_c = { column = \"v_c\", unit = \"kV\" }";
    submit(&folder, "s", head, &[(Some(0.05), coarse.clone())]);
    let ran = folder.audit(&["s"]);
    assert_ne!(ran.verdict(), "pass", "{}", ran.seen());
    assert_eq!(ran.status, 1);
    // Nor where the file is said to have been printed in few digits that it does not have.
    let head = "[layout]\ndigits = 2";
    let wrong = near(&[], 0.05, |t| 0.02 * t.sin());
    submit(&folder, "s", head, &[(Some(0.05), wrong)]);
    assert_ne!(folder.audit(&["s"]).verdict(), "pass");
}

#[cfg(unix)]
#[test]
fn a_submission_that_is_no_file_is_not_passed_over() {
    use std::os::unix::fs::symlink;
    let folder = Folder::new();
    submit(
        &folder,
        "s/good",
        "",
        &[(Some(0.05), near(&[], 0.05, none))],
    );
    submit(
        &folder,
        "outside",
        "",
        &[(Some(0.05), near(&[], 0.05, none))],
    );
    std::fs::create_dir(folder.path("s/bad")).unwrap();
    let bad = folder.path("s/bad/submission.toml");
    for kind in ["link", "device", "pipe"] {
        match kind {
            "link" => symlink("../../outside/submission.toml", &bad).unwrap(),
            "device" => symlink("/dev/zero", &bad).unwrap(),
            _ => {
                let made = std::process::Command::new("mkfifo").arg(&bad).status();
                assert!(made.unwrap().success());
            }
        }
        let ran = folder.audit(&["s"]);
        let told = "s/bad/submission.toml: this is a link or no plain file, so it was not opened";
        is(&ran, 2, "pass", told);
        assert_eq!(ran.report["not_audited"][0]["name"], "bad");
        std::fs::remove_file(&bad).unwrap();
    }
    // Nor are rules waited for that nobody writes.
    let made = std::process::Command::new("mkfifo")
        .arg(folder.path("pipe"))
        .status();
    assert!(made.unwrap().success());
    for option in ["--limits", "--require"] {
        let ran = folder.audit(&["s", option, "pipe"]);
        assert!(ran.status == 2 && ran.seen().contains("pipe: this is not a plain file"));
    }
}

/// What a link below the tree leads to is not audited: where that is a submission, nobody may
/// take the rest for all there is; where it is none, the audit stands.
#[cfg(unix)]
#[test]
fn links_to_folders_hide_no_submission() {
    use std::os::unix::fs::symlink;
    let sound = || [(Some(0.05), near(&[], 0.05, none))];
    let scene = |link: &str, target: &str| {
        let folder = Folder::new();
        submit(&folder, "s/good", "", &sound());
        submit(
            &folder,
            "outside/deep/bad",
            "",
            &[(Some(0.05), near(&[], 0.05, |t| t))],
        );
        folder.write("data/a/run.csv", "t,v_c\n");
        symlink(target, folder.path(link)).unwrap();
        folder
    };
    // The link, where it leads, and what a note says of it.
    for (link, target, told) in [
        ("s/latest", "good", "own place"),
        ("s/good/again", "../good", "own place"),
        ("s/round", ".", "own place"),
        ("s/up", "../s", "own place"),
        ("s/above", "..", "a folder above"),
        ("s/self", "self", "leads nowhere"),
        ("s/gone", "../gone", "leads nowhere"),
        ("s/data", "../data", "no submission lies there"),
    ] {
        let folder = scene(link, target);
        let plain = folder.audit(&["s/good"]);
        let ran = folder.audit(&["s"]);
        is(&ran, 0, "pass", "");
        assert_eq!(ran.stderr.matches("a link").count(), 1, "{}", ran.stderr);
        let start = format!("{link}: a link ");
        assert!(
            ran.stderr.starts_with(&start) && ran.stderr.contains(told),
            "{}",
            ran.stderr
        );
        assert_eq!(ran.report["submissions"], plain.report["submissions"]);
        assert_eq!(ran.report["not_audited"].as_array().unwrap().len(), 0);
        assert_eq!(folder.audit(&["s", "--quiet"]).seen().trim(), "");
    }
    // A file behind a link is none of the search.
    let folder = scene("s/good/copy.csv", "0.csv");
    assert_eq!(folder.audit(&["s"]).stderr, "");
    for (link, target, name) in [
        ("s/bad", "../outside/deep/bad", "bad"),
        ("s/bad", "../outside", "bad"),
        ("s/good/bad", "../../outside/deep", "good/bad"),
    ] {
        let folder = scene(link, target);
        let ran = folder.audit(&["s"]);
        let told = format!("{link}: this is a link to a folder with a submission, which was not");
        is(&ran, 2, "pass", &told);
        assert!(
            ran.seen()
                .contains("help: put the folder itself there, or name")
        );
        assert_eq!(ran.report["not_audited"][0]["name"], name);
        assert_eq!(ran.stderr, "");
        // Whoever names the other folder as well has it audited in its own place.
        let ran = folder.audit(&["s", "outside"]);
        assert_eq!(ran.status, 1, "{}", ran.seen());
        assert!(ran.stderr.contains("own place"), "{}", ran.stderr);
        // Parts tell of it once.
        for part in ["1/2", "2/2"] {
            let name = format!("{}.json", &part[..1]);
            folder.run(&["audit", "s", "--part", part, "--write", &name]);
        }
        folder.audit(&["s"]);
        let ran = folder.run(&["merge", "1.json", "2.json", "--write", "whole.json"]);
        assert_eq!(ran.status, 2, "{}", ran.seen());
        assert_eq!(read(&folder, "whole.json"), read(&folder, "report.json"));
    }
    // Nothing but a link: that no submission is found would be half of the truth.
    let folder = scene("only", "outside");
    std::fs::create_dir(folder.path("e")).unwrap();
    symlink("../outside", folder.path("e/link")).unwrap();
    let ran = folder.audit(&["e"]);
    let told = "e/link: this is a link to a folder with a submission";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
    // A link that is named is entered, as it always was.
    let ran = folder.audit(&["only"]);
    assert_eq!((ran.status, ran.stderr.as_str()), (1, ""), "{}", ran.seen());
    // Many are counted.
    let folder = scene("s/a", "good");
    for number in 0..11 {
        symlink("good", folder.path(&format!("s/l{number}"))).unwrap();
    }
    let ran = folder.audit(&["s"]);
    assert_eq!(
        ran.stderr.matches("own place").count(),
        10,
        "{}",
        ran.stderr
    );
    assert!(ran.stderr.ends_with("and 2 further links like these\n"));
}

use std::process::{Command, Stdio};

use crate::folder::{CASE, Folder, STEP, cell, program, sound};

const COMMANDS: [&str; 10] = [
    "audit",
    "cases",
    "case",
    "exact",
    "merge",
    "methods",
    "steps",
    "completions",
    "manual",
    "help",
];

fn submission(folder: &Folder, name: &str, bytes: Vec<u8>) {
    folder.write(&format!("{name}/run.csv"), bytes);
    let text = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"run.csv\"\nstep = {STEP}\n");
    folder.write(&format!("{name}/submission.toml"), text);
}

#[test]
fn a_quiet_audit_says_nothing_and_keeps_its_status() {
    let folder = Folder::new();
    submission(&folder, "good", sound());
    submission(&folder, "bad/one", cell(1, "100"));
    for (path, status) in [("good", 0), ("bad", 1)] {
        let ran = folder.run(&["audit", path, "--quiet", "--write", "r.json"]);
        assert_eq!(
            (ran.status, ran.stdout.as_str(), ran.stderr.as_str()),
            (status, "", "")
        );
        assert!(folder.path("r.json").exists());
    }
    // Complaints are no chatter.
    let ran = folder.run(&["audit", "none", "-q"]);
    assert_eq!(ran.status, 2);
    assert!(
        ran.stderr.contains("there is no such file or folder"),
        "{}",
        ran.stderr
    );
}

/// An audit of much that is stopped early ends with what it has.
#[cfg(unix)]
#[test]
fn an_interrupted_audit_reports_what_was_finished() {
    let folder = Folder::new();
    for number in 0..400 {
        submission(
            &folder,
            &format!("all/{number}"),
            cell(1, &format!("{number}")),
        );
    }
    let mut child = Command::new(program())
        .args([
            "audit",
            "all",
            "--threads",
            "1",
            "--write",
            "r.json",
            "--write",
            "r.xml",
        ])
        .current_dir(folder.path("."))
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    // Once a first submission can be done, long before all are.
    std::thread::sleep(std::time::Duration::from_millis(1500));
    assert!(
        child.try_wait().unwrap().is_none(),
        "too fast to be interrupted"
    );
    let sent = Command::new("kill")
        .args(["-INT", &child.id().to_string()])
        .status();
    assert!(sent.unwrap().success());
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(2));
    let shown = String::from_utf8(output.stdout).unwrap();
    assert!(
        shown.contains("left when interrupted. Not in order."),
        "{shown}"
    );
    let report = std::fs::read_to_string(folder.path("r.json")).unwrap();
    let report: serde_json::Value = serde_json::from_str(&report).unwrap();
    let done = report["submissions"].as_array().unwrap().len() as u64;
    let left = report["left"].as_u64().unwrap();
    assert!(left > 0 && done + left == 400, "{done} done, {left} left");
    assert_eq!(report["summary"]["in_order"], false);
    // A server that reads JUnit sees no green audit.
    let suites = std::fs::read_to_string(folder.path("r.xml")).unwrap();
    assert!(
        suites.contains("errors=\"1\"") && suites.contains("were not looked at"),
        "{suites}"
    );
}

#[test]
fn completions_know_every_command() {
    let folder = Folder::new();
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let ran = folder.run(&["completions", shell]);
        assert_eq!(ran.status, 0);
        for command in COMMANDS {
            assert!(ran.stdout.contains(command), "{shell}: {command}");
        }
        assert!(ran.stdout.contains("relative-to"), "{shell}");
    }
}

#[test]
fn every_command_has_a_manual_page() {
    let folder = Folder::new();
    let page = folder.run(&["manual"]).stdout;
    assert!(page.contains(".TH stepgauge 1"), "{page}");
    for command in COMMANDS {
        assert!(
            page.contains(&format!("stepgauge\\-{command}(1)")),
            "{command}"
        );
        let one = folder.run(&["manual", command]);
        assert_eq!(one.status, 0);
        assert!(
            one.stdout.contains(&format!(".TH stepgauge-{command} 1")),
            "{command}"
        );
    }
    let ran = folder.run(&["manual", "audti"]);
    assert_eq!(ran.status, 2);
    assert_eq!(
        ran.stderr,
        "`audti` is no command\n  help: did you mean `audit`?\n"
    );
}

#[test]
fn mistyped_words_get_a_suggestion() {
    let folder = Folder::new();
    folder.write("run.csv", sound());
    for (arguments, wanted) in [
        (&["audti", "x"][..], "audit"),
        (
            &["audit", "run.csv", "--case", CASE, "--absolut", "1"],
            "--absolute",
        ),
        (
            &["case", "thermal/cold-room-defrots"],
            "did you mean `thermal/cold-room-defrost`?",
        ),
        (
            &["audit", "run.csv", "--case", CASE, "--column", "air=wal"],
            "did you mean `wall`?",
        ),
        (
            &["audit", "run.csv", "--case", CASE, "--column", "aire=air"],
            "did you mean `air`?",
        ),
    ] {
        let ran = folder.run(arguments);
        assert!(ran.seen().contains(wanted), "{arguments:?}: {}", ran.seen());
    }
}

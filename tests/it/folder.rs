use std::path::{Path, PathBuf};
use std::process::Output;
use std::sync::OnceLock;
use std::time::Duration;

use assert_cmd::Command;
use serde_json::Value;
use stepgauge::case::{Library, Replacements};
use tempfile::TempDir;

/// The case that the files of these tests claim to solve.
pub const CASE: &str = "thermal/cold-room-defrost";
/// Time between rows: a pulse of that case begins and ends on one.
pub const STEP: f64 = 60.0;
/// Errors put into the channels: well within the limit of the case.
pub const PLANTED: [f64; 2] = [2e-4, 1e-4];

/// A folder that is gone after the test.
pub struct Folder {
    root: TempDir,
}

/// What a run of the program left behind.
pub struct Ran {
    pub status: i32,
    pub stdout: String,
    pub stderr: String,
    /// The report of `--write`; null where none was written.
    pub report: Value,
}

/// The program as it was just built.
pub fn program() -> &'static Path {
    assert_cmd::cargo::cargo_bin!("stepgauge")
}

impl Folder {
    pub fn new() -> Folder {
        Folder {
            root: tempfile::tempdir().unwrap(),
        }
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.root.path().join(name)
    }

    /// Writes a file, with the folders that lead to it.
    pub fn write(&self, name: &str, bytes: impl AsRef<[u8]>) {
        let path = self.path(name);
        std::fs::create_dir_all(path.parent().unwrap()).unwrap();
        std::fs::write(path, bytes).unwrap();
    }

    /// Runs the program in this folder, so that paths in its messages are short and
    /// the same in every test.
    pub fn run(&self, arguments: &[&str]) -> Ran {
        let mut command = Command::new(program());
        command.current_dir(self.root.path()).args(arguments);
        // Wide enough for a message not to be broken into lines; a pipe that is waited
        // on for ever would otherwise hold up the tests.
        command
            .env("COLUMNS", "1000")
            .timeout(Duration::from_secs(300));
        Ran::new(command.output().unwrap(), arguments)
    }

    /// The same for `audit`, with a report beside the folders that are audited.
    pub fn audit(&self, arguments: &[&str]) -> Ran {
        let name = "report.json";
        let report = self.path(name);
        let _ = std::fs::remove_file(&report);
        let mut ran = self.run(&[&["audit", "--write", name], arguments].concat());
        if let Ok(text) = std::fs::read_to_string(report) {
            ran.report = serde_json::from_str(&text).unwrap();
        }
        ran
    }
}

impl Ran {
    fn new(output: Output, arguments: &[&str]) -> Ran {
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).unwrap();
        let ran = Ran {
            status: output.status.code().unwrap_or(-1),
            stdout: text(output.stdout),
            stderr: text(output.stderr),
            report: Value::Null,
        };
        assert!(
            !ran.stderr.contains("panicked"),
            "{arguments:?}: {}",
            ran.stderr
        );
        assert!(
            (0..=2).contains(&ran.status),
            "{arguments:?}: status {}: {}",
            ran.status,
            ran.stderr
        );
        ran
    }

    /// All that a user sees, with white space evened out: the table aligns and wraps.
    pub fn seen(&self) -> String {
        let text = format!("{} {}", self.stdout, self.stderr);
        text.split_whitespace().collect::<Vec<_>>().join(" ")
    }

    /// The first run of the first submission.
    pub fn first_run(&self) -> &Value {
        &self.report["submissions"][0]["runs"][0]
    }

    /// Kinds and lines of the findings of the first run; line 0 where there is none.
    pub fn findings(&self) -> Vec<(String, u64)> {
        let list = self.first_run()["findings"].as_array();
        let read = |finding: &Value| {
            let kind = finding["kind"].as_str().unwrap().to_owned();
            (kind, finding["line"].as_u64().unwrap_or(0))
        };
        list.map(|list| list.iter().map(read).collect())
            .unwrap_or_default()
    }

    /// Verdict of the first submission; empty where none was audited.
    pub fn verdict(&self) -> &str {
        self.report["submissions"][0]["verdict"]
            .as_str()
            .unwrap_or("")
    }
}

/// The text of a case `trial/...` over a window, with an absolute limit of one; the states and what
/// else it has come as TOML.
pub fn trial(from: &str, to: &str, more: &str) -> String {
    format!(
        "title = 'o'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
         [time]\nunit = 's'\nfrom = {from}\nto = {to}\n[limits]\nabsolute = 1\nrelative = 0\n{more}"
    )
}

/// A state of a case; its unit is metres.
pub fn state(name: &str, start: f64, rate: &str) -> String {
    format!("[[states]]\nname = '{name}'\nunit = 'm'\nstart = {start}\nrate = '{rate}'\n")
}

/// Time, air and wall of the cold room: exact values and a small error.
pub fn rows() -> &'static [[f64; 3]] {
    static ROWS: OnceLock<Vec<[f64; 3]>> = OnceLock::new();
    ROWS.get_or_init(|| {
        let case = Library::new().load(CASE, &Replacements::new()).unwrap();
        let exact = case.exact().unwrap();
        let times = (0..=240).map(|k| STEP * f64::from(k));
        let planted = |k: usize| [(0.37 * k as f64).sin(), (0.23 * k as f64).cos()];
        let row = |(k, time): (usize, f64)| {
            let values = exact.at(time).unwrap();
            let [air, wall] = planted(k);
            [
                time,
                values[0].value + PLANTED[0] * air,
                values[1].value + PLANTED[1] * wall,
            ]
        };
        times.enumerate().map(row).collect()
    })
}

/// The row at t = 1080, where nothing jumps.
pub const LINE: usize = 20;

/// The plain file line by line: the header, then t = 60 (line - 2).
fn lines() -> Vec<String> {
    let row = |&[t, air, wall]: &[f64; 3]| format!("{t},{air},{wall}");
    std::iter::once("t,air,wall".to_owned())
        .chain(rows().iter().map(row))
        .collect()
}

pub fn edited(edit: impl FnOnce(&mut Vec<String>)) -> Vec<u8> {
    let mut lines = lines();
    edit(&mut lines);
    (lines.join("\n") + "\n").into_bytes()
}

/// The plain file as it is.
pub fn sound() -> Vec<u8> {
    edited(|_| {})
}

/// The file with the values of every row printed by this.
pub fn printed(print: impl Fn(f64) -> String) -> Vec<u8> {
    edited(|lines| {
        for (line, [t, air, wall]) in lines.iter_mut().skip(1).zip(rows()) {
            *line = format!("{t},{},{}", print(*air), print(*wall));
        }
    })
}

/// Another text in one field of line 20; columns from zero.
pub fn cell(column: usize, text: &str) -> Vec<u8> {
    edited(|lines| {
        let line = &mut lines[LINE - 1];
        let mut fields: Vec<&str> = line.split(',').collect();
        fields[column] = text;
        *line = fields.join(",");
    })
}

/// What is expected of a file; findings are written as kind and line (0: none) with
/// commas between them.
pub enum Expected {
    Passes,
    Undecided,
    /// These findings and no others.
    Fails(&'static str),
    /// These among others that follow from them.
    FailsAmong(&'static str),
    /// Not audited at all, with this in the complaint.
    Refused(&'static str),
}

/// What is not as expected, if anything.
pub fn disagreement(ran: &Ran, expected: &Expected) -> Option<String> {
    let found: Vec<String> = ran
        .findings()
        .iter()
        .map(|(kind, line)| format!("{kind} {line}"))
        .collect();
    let (found, is) = (found.join(", "), (ran.status, ran.verdict()));
    let (good, wanted) = match expected {
        Expected::Passes => (is == (0, "pass") && found.is_empty(), "a pass".to_owned()),
        Expected::Undecided => (
            is == (1, "undecided") && found.is_empty(),
            "undecided".to_owned(),
        ),
        Expected::Fails(all) => (
            is == (1, "fail") && found == *all,
            format!("fail with {all}"),
        ),
        Expected::FailsAmong(some) => {
            let told = some
                .split(", ")
                .all(|one| found.split(", ").any(|found| found == one));
            (
                is == (1, "fail") && told,
                format!("fail with {some} among others"),
            )
        }
        Expected::Refused(text) => {
            let faults = ran.report["not_audited"][0]["faults"].to_string();
            let told = faults.contains(text) && ran.seen().contains(text);
            (is == (2, "") && told, format!("status 2 and {text}"))
        }
    };
    let seen: String = ran.seen().chars().take(600).collect();
    (!good).then(|| format!("expected {wanted}; got {is:?} with {found}: {seen}"))
}

/// Fails with everything that was told.
pub fn report(told: Vec<String>, all: usize) {
    assert!(
        told.is_empty(),
        "{} of {all} disagree:\n{}",
        told.len(),
        told.join("\n")
    );
}

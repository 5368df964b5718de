//! One target for the whole way: a folder made of the bytes, its audit, every report.

use std::cell::RefCell;
use std::path::PathBuf;

use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::case::Library;
use stepgauge::report::{
    Screen, audit_csv, audit_html, audit_json, audit_junit, audit_markdown, audit_text,
};
use stepgauge::submission::Submission;

use crate::texts::own_folder;
use crate::told;

/// Between the `submission.toml` and each of the files `a`, `b` and `c`.
const BETWEEN: &[u8] = b"\n=====\n";
const SCREEN: Screen = Screen {
    width: 100,
    unicode: true,
};

thread_local! {
    static AT_HAND: RefCell<(PathBuf, Option<Library>)> =
        RefCell::new((own_folder("whole"), Some(Library::new())));
}

/// `submission.toml` and the files that it may name, one after the other.
pub fn whole(bytes: &[u8]) {
    let mut parts = split(bytes).into_iter();
    let Some(Ok(text)) = parts.next().map(std::str::from_utf8) else {
        return;
    };
    let (folder, library) = AT_HAND
        .with_borrow_mut(|(folder, library)| (folder.clone(), library.take().unwrap_or_default()));
    for name in ["a", "b", "c"] {
        std::fs::write(folder.join(name), parts.next().unwrap_or_default()).expect("a file");
    }
    let library = match Submission::parse(text, &folder) {
        Ok(submission) => audited(submission, library),
        Err(faults) => {
            told(&faults);
            library
        }
    };
    AT_HAND.with_borrow_mut(|(_, kept)| *kept = Some(library));
}

fn audited(submission: Submission, library: Library) -> Library {
    let plan = Plan {
        library,
        submissions: vec![Planned {
            name: "fuzz".to_owned(),
            file: None,
            submission,
            reviewed: Default::default(),
        }],
        unreadable: Vec::new(),
        threads: 1,
        traced: true,
        part: None,
    };
    let outcome = audit(&plan);
    assert_eq!(outcome.submissions.len() + outcome.not_audited.len(), 1);
    audit_text(&outcome, SCREEN);
    audit_json(&outcome);
    audit_junit(&outcome).expect("JUnit is written");
    audit_markdown(&outcome);
    audit_csv(&outcome).expect("a table is written");
    audit_html(&outcome);
    plan.library
}

fn split(bytes: &[u8]) -> Vec<&[u8]> {
    let mut parts = Vec::new();
    let mut rest = bytes;
    while let Some(at) = rest.windows(BETWEEN.len()).position(|part| part == BETWEEN) {
        parts.push(&rest[..at]);
        rest = &rest[at + BETWEEN.len()..];
    }
    parts.push(rest);
    parts
}

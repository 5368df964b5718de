//! Targets for what people write: formulas, and the four kinds of TOML.

use std::path::{Path, PathBuf};
use std::sync::OnceLock;

use clap::Parser;
use stepgauge::case::{Case, Replacements};
use stepgauge::cli::{Arguments, run};
use stepgauge::formula::{Affine, Formula};
use stepgauge::number::Double;
use stepgauge::submission::{Purpose, Rules, Submission};

use crate::told;

const NAMES: [&str; 4] = ["x", "y", "u", "t"];

/// The grammar, and every kind of number that a formula runs over.
pub fn formula(bytes: &[u8]) {
    let Ok(text) = std::str::from_utf8(bytes) else {
        return;
    };
    let resolve = |name: &str| NAMES.iter().position(|&known| known == name);
    match Formula::parse_known(text, &resolve, &NAMES) {
        Ok(formula) => {
            let values = [2.0, -0.5, 0.0, 1e3].map(Double::from);
            let _ = formula.evaluate(&values);
            let _ = formula.evaluate(&[0, 1, 2, 3].map(|index| Affine::quantity(index, 4)));
        }
        Err(fault) => told(&[fault]),
    }
}

/// A case file, its exact solution, and the values at some times.
pub fn case(bytes: &[u8]) {
    let Ok(text) = std::str::from_utf8(bytes) else {
        return;
    };
    match Case::parse("fuzz", text, &Replacements::new()) {
        Ok(case) => match case.exact() {
            Ok(exact) => {
                let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
                for part in [0.0, 0.3, 0.5, 1.0] {
                    let _ = exact.at(from + part * (to - from));
                }
                exact.jumps().take(100).count();
                exact.closed_form_gap();
            }
            Err(fault) => told(&[fault]),
        },
        Err(faults) => told(&faults),
    }
}

/// A `submission.toml` beside the one file that it may name: `run.csv`.
pub fn submission(bytes: &[u8]) {
    let Ok(text) = std::str::from_utf8(bytes) else {
        return;
    };
    static FOLDER: OnceLock<PathBuf> = OnceLock::new();
    let folder = FOLDER.get_or_init(|| {
        let folder = own_folder("submission");
        std::fs::write(folder.join("run.csv"), "t,v\n0,0\n1,1\n").expect("a file");
        folder
    });
    if let Err(faults) = Submission::parse(text, folder) {
        told(&faults);
    }
}

/// A reviewer's rules, read for either purpose.
pub fn rules(bytes: &[u8]) {
    let Ok(text) = std::str::from_utf8(bytes) else {
        return;
    };
    for purpose in [Purpose::Limits, Purpose::Everything] {
        match Rules::parse(text, purpose) {
            Ok(rules) => {
                rules.limits_of(Some("thermal/cooling-body"));
            }
            Err(faults) => told(&faults),
        }
    }
}

/// A plan of `drive` as the program reads it. Nothing is ever started: after the plan comes
/// a report of no known kind, and behind that a folder for the runs that is not empty.
pub fn plan(bytes: &[u8]) {
    static FOLDER: OnceLock<PathBuf> = OnceLock::new();
    let folder = FOLDER.get_or_init(|| own_folder("plan"));
    let file = folder.join("plan.toml");
    std::fs::write(&file, bytes).expect("a file");
    let words = ["stepgauge", "drive", "--write", "report.refused", "--into"];
    let words = words.map(Path::new).into_iter().chain([&**folder, &*file]);
    run(&Arguments::parse_from(words));
}

/// A folder of this process alone, in memory where there is such a place.
pub fn own_folder(name: &str) -> PathBuf {
    let memory = Path::new("/dev/shm");
    let root = if memory.is_dir() {
        memory.to_owned()
    } else {
        std::env::temp_dir()
    };
    let folder = root.join(format!("stepgauge-fuzz-{name}-{}", std::process::id()));
    std::fs::create_dir_all(&folder).expect("a folder");
    folder
}

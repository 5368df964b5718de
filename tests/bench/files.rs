//! Many short runs, from the search for submissions to the outcome, with one thread:
//! `cargo bench --bench files`; throughput is per run. `STEPGAUGE_BENCH_LARGE=1` adds ten
//! thousand runs.

mod chain;
mod chance;
mod ladders;

use std::fmt;
use std::path::Path;

use divan::Bencher;
use divan::counter::{BytesCount, ItemsCount};
use ladders::{RUNS_OF_ONE, Steps, Writer};
use stepgauge::Verdict;
use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::outcome::Audited;
use stepgauge::submission::{Submission, discover};

const RUNS: [usize; 4] = [1, 10, 100, 1000];
const LARGE: usize = 10_000;

fn main() {
    divan::main();
}

#[derive(Clone, Copy, Debug)]
struct Setting {
    runs: usize,
    steps: Steps,
}

impl fmt::Display for Setting {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        write!(f, "{}, runs {}", self.steps, self.runs)
    }
}

fn settings() -> Vec<Setting> {
    let large = std::env::var_os("STEPGAUGE_BENCH_LARGE").map(|_| LARGE);
    let runs = || RUNS.into_iter().chain(large);
    let of_steps = |steps| runs().map(move |runs| Setting { runs, steps });
    Steps::ALL.into_iter().flat_map(of_steps).collect()
}

#[divan::bench(args = settings(), sample_size = 1, sample_count = 10, max_time = 15)]
fn submissions(bencher: Bencher, setting: &Setting) {
    let folder = tempfile::tempdir().unwrap();
    let runs = folder.path().join("runs");
    std::fs::create_dir(&runs).unwrap();
    let bytes = Writer::new().write(&runs, setting.runs, setting.steps);
    bencher
        .counter(BytesCount::new(bytes))
        .counter(ItemsCount::new(setting.runs))
        .bench_local(|| {
            let outcome = audit(&plan(folder.path(), &runs));
            // What fails is asked for causes, which is work of another kind.
            let fails = |one: &&Audited| one.verdict == Verdict::Fail;
            if let Some(one) = outcome.submissions.iter().find(fails) {
                panic!("{} fails: {:?}", one.name, one.reasons);
            }
            assert_eq!(
                outcome.submissions.len(),
                setting.runs.div_ceil(RUNS_OF_ONE)
            );
        });
}

/// All submissions below a folder, as the command line plans them.
fn plan(folder: &Path, runs: &Path) -> Plan {
    let mut submissions = Vec::new();
    for place in discover(runs, false, &[]).unwrap().places {
        let text = std::fs::read_to_string(&place.file).unwrap();
        submissions.push(Planned {
            name: place.name,
            submission: Submission::parse(&text, &place.folder).unwrap(),
            file: Some(place.file),
            reviewed: Default::default(),
        });
    }
    Plan {
        library: chain::library(folder),
        submissions,
        unreadable: Vec::new(),
        threads: 1,
        traced: false,
        part: None,
    }
}

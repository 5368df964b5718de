//! The audit of one file with one thread, from the plan to the outcome:
//! `cargo bench --bench whole`. `STEPGAUGE_BENCH_LARGE=1` adds ten million rows.

mod chain;
mod chance;
mod stamps;
mod table;

use divan::Bencher;
use divan::counter::{BytesCount, ItemsCount};
use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::submission::{Run, Setting, Submission};
use table::Shape;

const STEPS: [usize; 3] = [10_000, 100_000, 1_000_000];
const LARGE: usize = 10_000_000;
/// More numbers would make a file of more than four gigabytes.
const MOST_NUMBERS: usize = 200_000_000;

fn main() {
    divan::main();
}

fn shapes() -> Vec<Shape> {
    let large = std::env::var_os("STEPGAUGE_BENCH_LARGE").map(|_| LARGE);
    let sizes = chain::LENGTHS.into_iter().flat_map(move |states| {
        let steps = STEPS.into_iter().chain(large);
        steps.map(move |steps| (steps, states))
    });
    Shape::all(sizes.filter(|(steps, states)| steps * (states + 1) <= MOST_NUMBERS))
}

#[divan::bench(args = shapes(), sample_size = 1, sample_count = 10, max_time = 10)]
fn one_file(bencher: Bencher, shape: &Shape) {
    audited(bencher, shape);
}

/// Files that are exact to the last digit: then exact values are needed in double-double, and
/// many methods and steps fit the rows.
#[divan::bench(args = shapes_without_error(), sample_size = 1, sample_count = 10, max_time = 10)]
fn one_file_without_error(bencher: Bencher, shape: &Shape) {
    audited(bencher, shape);
}

fn shapes_without_error() -> impl Iterator<Item = Shape> {
    let of_interest = |shape: &Shape| shape.digits == 17 && shape.steps == STEPS[1];
    let without = |shape| Shape {
        error: 0.0,
        ..shape
    };
    shapes().into_iter().filter(of_interest).map(without)
}

fn audited(bencher: Bencher, shape: &Shape) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("run.csv");
    let bytes = shape.write(&path);
    let plan = Plan {
        library: chain::library(folder.path()),
        submissions: vec![Planned {
            name: "run".to_owned(),
            file: None,
            submission: Submission {
                case: Some(chain::name(shape.states)),
                runs: vec![Run {
                    file: "run.csv".to_owned(),
                    path,
                    setting: Setting::Unstated,
                    cost: None,
                    role: None,
                    text: None,
                }],
                ..Submission::default()
            },
            reviewed: Default::default(),
        }],
        unreadable: Vec::new(),
        threads: 1,
        traced: false,
        part: None,
    };
    let rows = shape.steps as u64 + 1;
    bencher
        .counter(BytesCount::new(bytes))
        .counter(ItemsCount::new(rows))
        .bench_local(|| {
            let outcome = audit(&plan);
            assert_eq!(outcome.submissions[0].runs[0].rows, rows);
            outcome
        });
}

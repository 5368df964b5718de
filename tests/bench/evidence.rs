//! What evidence and causes cost beside reading: a file of 100,000 rows and four states,
//! honest and with an input that is missing, each as a ratio to reading it in the same
//! minute. `cargo bench --bench evidence`.

use std::path::Path;
use std::time::{Duration, Instant};

use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::case::Library;
use stepgauge::compare::{Comparison, Keeper, Limit};
use stepgauge::method::{Linear, March, Ranks, Recurrence, Sides, find};
use stepgauge::number::Conversion;
use stepgauge::submission::{Claims, Run, Setting, Submission, match_columns};
use stepgauge::trajectory::{Findings, Stated, Survey, open};

const CASE: &str = "mechanical/two-masses";
const ROWS: u64 = 100_000;
const ROUNDS: usize = 7;

fn main() {
    let library = Library::new();
    let case = library.load(CASE, &Default::default()).unwrap();
    let linear = Linear::new(&case);
    let (from, to) = linear.window;
    let step = (to - from) / (ROWS - 1) as f64;
    let folder = tempfile::tempdir().unwrap();
    for fault in [false, true] {
        let mut model = linear.clone();
        if fault {
            model.start[0] += 0.1 + model.start[0].abs();
        }
        let path = folder.path().join(format!("{fault}.csv"));
        write(
            &model,
            step,
            &path,
            case.states.iter().map(|s| s.name.as_str()),
        );
        let [reading, comparing, auditing] = shortest([
            &|| read(&case, &path, false),
            &|| read(&case, &path, true),
            &|| run(&path, step),
        ]);
        let more = auditing.saturating_sub(comparing);
        println!(
            "{}: reading {reading:.2?}, with errors {comparing:.2?}, whole audit {auditing:.2?}; \
             evidence and causes take {:.2} of reading",
            if fault { "wrong start" } else { "honest" },
            more.as_secs_f64() / reading.as_secs_f64()
        );
    }
}

/// The shortest time of each work; they take turns, so that a busy machine slows all.
fn shortest<const N: usize>(works: [&dyn Fn(); N]) -> [Duration; N] {
    let mut times = [Duration::MAX; N];
    for _ in 0..ROUNDS {
        for (time, work) in times.iter_mut().zip(works) {
            let start = Instant::now();
            work();
            *time = start.elapsed().min(*time);
        }
    }
    times
}

fn write<'a>(model: &Linear, step: f64, path: &Path, names: impl Iterator<Item = &'a str>) {
    let coefficients = find("classical RK4").unwrap().schemes[0].coefficients();
    let recurrence = Recurrence::new(&coefficients, model, step, &Ranks::new()).unwrap();
    let from = model.window.0;
    let mut march = March::new(
        &recurrence,
        model,
        Sides::After,
        [model.start.clone()],
        from,
        0,
    );
    let mut text = format!("t,{}\n", names.collect::<Vec<_>>().join(","));
    for row in 0..ROWS {
        let values: Vec<String> = march.state().iter().map(|x| format!("{x:?}")).collect();
        text += &format!("{:?},{}\n", from + row as f64 * step, values.join(","));
        march.step();
    }
    std::fs::write(path, text).unwrap();
}

fn read(case: &stepgauge::Case, path: &Path, errors: bool) {
    let source = open(path).unwrap();
    let stated = Stated::default();
    let layout = source.layout(&stated).unwrap().unwrap();
    let matched = match_columns(case, &layout, &Default::default()).unwrap();
    let survey = Survey::new(&source, layout, matched.selection(), &stated).unwrap();
    let mut findings = Findings::default();
    if !errors {
        let mut sum = 0.0;
        let mut add = |row: &stepgauge::trajectory::Row| {
            sum += row.values.iter().flatten().sum::<f64>();
            Ok(())
        };
        survey
            .rows(&source, &mut findings, &|_| false, &mut add)
            .unwrap();
        assert!(sum.is_finite());
        return;
    }
    let exact = case.exact().unwrap();
    let limit = Limit {
        absolute: 1e-3,
        relative: 0.0,
        of_peak: false,
    };
    let channels: Vec<(usize, Conversion, Limit)> = matched
        .channels
        .iter()
        .map(|column| (column.channel, column.conversion, limit))
        .collect();
    let comparison = Comparison {
        exact: &exact,
        source: &source,
        survey: &survey,
        time: matched.time_conversion,
        channels: &channels,
        step: None,
        least_rows: 5,
        time_unit: "s",
    };
    let mut keeper = Keeper {
        wanted: &|_| false,
        take: &mut |_| {},
    };
    comparison.run(&mut findings, &mut keeper).unwrap();
}

fn run(path: &Path, step: f64) {
    let submission = Submission {
        case: Some(CASE.to_owned()),
        claims: Claims {
            method: Some("classical RK4".to_owned()),
            order: None,
        },
        runs: vec![Run {
            file: "run.csv".to_owned(),
            path: path.to_owned(),
            setting: Setting::Step(step),
            role: None,
        }],
        ..Submission::default()
    };
    let planned = |name: &str| Planned {
        name: name.to_owned(),
        submission: submission.clone(),
        file: None,
        limits_from_command_line: false,
    };
    let outcome = audit(&Plan {
        library: Library::new(),
        submissions: vec![planned("one")],
        unreadable: Vec::new(),
        threads: 1,
    });
    assert_eq!(outcome.submissions.len(), 1);
}

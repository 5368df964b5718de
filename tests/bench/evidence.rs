//! What evidence and causes cost beside reading: a file of 100,000 rows and four states,
//! honest and with an input that is missing, each as a ratio to reading it in the same
//! minute. `cargo bench --bench evidence`.

use std::path::Path;
use std::time::{Duration, Instant};

use stepgauge::Case;
use stepgauge::case::Library;
use stepgauge::explain::{Parameters, Trouble, causes};
use stepgauge::judge::{Claimed, ask};
use stepgauge::method::{
    Linear, March, Method, Ranks, Record, Recurrence, Sides, Window, find, growth, windows,
};
use stepgauge::submission::match_columns;
use stepgauge::trajectory::{Findings, Row, Stated, Survey, open};

const CASE: &str = "mechanical/two-masses";
const CLAIM: &str = "classical RK4";
const ROWS: u64 = 100_000;
const ROUNDS: usize = 15;

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
        let names = case.states.iter().map(|s| s.name.as_str());
        write(&model, step, &path, names);
        let record = record(&case, &path, step);
        let [reading, telling] = shortest([
            &|| {
                read(&case, &path, &mut |_| {});
            },
            &|| tell(&case, &linear, &record, step, fault),
        ]);
        println!(
            "{}: reading {reading:.1?}, evidence and causes {telling:.1?}: {:.2} of reading",
            if fault { "wrong start" } else { "honest" },
            telling.as_secs_f64() / reading.as_secs_f64()
        );
    }
}

/// What an audit asks of one run: the method, the growth of a step, and the causes of a
/// failure.
fn tell(case: &Case, linear: &Linear, record: &Record, step: f64, fails: bool) {
    let methods: Vec<&'static Method> = find(CLAIM).into_iter().collect();
    let claimed = Claimed {
        name: Some(CLAIM),
        methods: &methods,
        step: Some(step),
        steps: Some(1),
        adaptive: false,
        unit: record.unit,
        time_unit: "s",
    };
    let (evidence, answer) = ask(linear, record, &claimed);
    assert!(growth(linear, record, 1).is_ok());
    let channels = case.channels();
    let channels = channels
        .iter()
        .map(|c| (c.name.to_owned(), c.unit.to_owned()));
    let channels: Vec<(String, String)> = channels.collect();
    let inputs: Vec<String> = case.inputs.iter().map(|i| i.name.clone()).collect();
    let trouble = Trouble {
        linear,
        record,
        evidence: &evidence,
        answer: answer.as_ref(),
        methods: &methods,
        step: Some(step),
        channels: &channels,
        inputs: &inputs,
        parameters: &Parameters {
            names: Vec::new(),
            scaled: &|_, _| None,
        },
        time_unit: "s",
    };
    if fails {
        assert!(!causes(&trouble).is_empty());
    }
}

/// The windows of a file, as an audit keeps them.
fn record(case: &Case, path: &Path, step: f64) -> Record {
    let exact = case.exact().unwrap();
    let mut walk = exact.walk_rounded();
    // A header comes first.
    let number = |row: &Row| row.line - 2;
    let mut record = Record {
        channels: (0..case.states.len()).collect(),
        spacing: Some((step, 0.0)),
        unit: f64::EPSILON / 2.0,
        windows: Vec::new(),
    };
    let kept = windows(ROWS);
    read(case, path, &mut |row: &Row| {
        let Some(place) = kept
            .iter()
            .position(|(first, rows)| (*first..first + rows).contains(&number(row)))
        else {
            return;
        };
        if record.windows.len() <= place {
            record.windows.push(Window {
                first: number(row),
                ..Window::default()
            });
        }
        let window = &mut record.windows[place];
        let time = row.time.to_f64();
        window.times.push(time);
        window.time_doubts.push(f64::EPSILON * time.abs());
        let truth = walk.at(row.time).unwrap();
        for (&value, exact) in row.values.iter().zip(truth) {
            window.values.push(value);
            window.errors.push(value - exact.value);
            window.doubts.push(0.5 * f64::EPSILON * value.abs());
        }
    });
    record
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

fn read(case: &Case, path: &Path, take: &mut dyn FnMut(&Row)) {
    let source = open(path).unwrap();
    let stated = Stated::default();
    let layout = source.layout(&stated).unwrap().unwrap();
    let matched = match_columns(case, &layout, &Default::default()).unwrap();
    let survey = Survey::new(&source, layout, matched.selection(), &stated).unwrap();
    let mut findings = Findings::default();
    let mut rows = 0;
    let mut add = |row: &Row| {
        rows += 1;
        take(row);
        Ok(())
    };
    survey
        .rows(&source, &mut findings, &|_| false, &mut add)
        .unwrap();
    assert_eq!(rows, ROWS);
}

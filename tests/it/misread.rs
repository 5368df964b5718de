//! Files that were once read as something else, each found by attacking the program: what they
//! are taken for stays right.

use std::fmt::Write;

use stepgauge::case::{Library, Replacements};
use stepgauge::number::Double;

use crate::folder::{Folder, Ran};

const CASE: &str = "electrical/rc-constant";
/// The window of the case, in milliseconds.
const END: f64 = 10.0;

/// Times with their exact values.
fn exact(times: impl IntoIterator<Item = f64>) -> Vec<(f64, f64)> {
    exact_from(5.0, times)
}

/// The same for another voltage of the source.
fn exact_from(volts: f64, times: impl IntoIterator<Item = f64>) -> Vec<(f64, f64)> {
    let changed = Replacements::from([("U_0".to_owned(), volts)]);
    let case = Library::new().load(CASE, &changed).unwrap();
    let exact = case.exact().unwrap();
    let mut walk = exact.walk_rounded();
    let value = |time: f64| {
        let values = walk.at(Double::from(time.min(END))).unwrap();
        (time, values[0].value)
    };
    times.into_iter().map(value).collect()
}

fn even(rows: u32) -> impl Iterator<Item = f64> {
    (0..=rows).map(move |row| END * f64::from(row) / f64::from(rows))
}

fn table(rows: &[(f64, f64)], print: impl Fn(usize, f64) -> String) -> String {
    let mut text = "t,v_c\n".to_owned();
    for (row, &(time, value)) in rows.iter().enumerate() {
        let _ = writeln!(text, "{time},{}", print(row, value));
    }
    text
}

fn audit(name: &str, bytes: impl AsRef<[u8]>, more: &[&str]) -> Ran {
    let folder = Folder::new();
    folder.write(name, bytes);
    folder.audit(&[&[name, "--case", CASE][..], more].concat())
}

fn kinds(ran: &Ran) -> Vec<String> {
    let findings = ran.report["submissions"][0]["runs"][0]["findings"].as_array();
    let kind = |finding: &serde_json::Value| finding["kind"].as_str().unwrap().to_owned();
    findings.unwrap().iter().map(kind).collect()
}

/// A pass without any finding.
fn assert_sound(ran: &Ran) {
    assert_eq!(
        (kinds(ran), ran.verdict()),
        (vec![], "pass"),
        "{}",
        ran.seen()
    );
}

#[test]
fn a_row_that_ends_in_a_blank_is_still_too_short() {
    let rows = exact(even(500));
    let line = |row: usize, (time, value): (f64, f64), short: usize, end: &str| match row == short {
        // The count is missing, so that what follows it slides.
        true => format!("{time} 999 {value:e}{end}\n"),
        false => format!("{time} {row} {value:e} 0\n"),
    };
    let text = |short: usize, end: &str| {
        let rows = rows.iter().enumerate();
        let rows: String = rows.map(|(k, &row)| line(k, row, short, end)).collect();
        "t count v_c flag\n".to_owned() + &rows
    };
    assert_eq!(audit("run.txt", text(usize::MAX, ""), &[]).status, 0);
    for end in ["", " ", "\t", " \r"] {
        let ran = audit("run.txt", text(300, end), &[]);
        assert_eq!(
            (ran.status, kinds(&ran)),
            (1, vec!["row-length".into()]),
            "{end:?}"
        );
    }
}

#[test]
fn all_rows_say_whether_the_last_one_is_cut_off() {
    // Long enough that only stretches of it are looked at first. Where they lie values are
    // printed in full, between them every fourth is short, and the last one as well.
    let rows = exact(even(150_000));
    let print = |row: usize, value: f64| {
        let place = (row * 16) as f64 / rows.len() as f64 % 1.0;
        match ((0.4..0.7).contains(&place) && row.is_multiple_of(4)) || row + 1 == rows.len() {
            true => format!("{value:.4}"),
            false => format!("{value:.16}"),
        }
    };
    let whole = table(&rows, print);
    assert!(whole.len() > 4 << 20);
    let limit = ["--absolute", "0.01"];
    assert_eq!(audit("run.csv", &whole, &limit).status, 0);
    let ran = audit("run.csv", whole.trim_end(), &limit);
    assert_eq!((ran.status, kinds(&ran)), (0, vec![]));
    // The other way round: in the stretches some are short, in the file next to none.
    let print = |row: usize, value: f64| {
        let place = (row * 16) as f64 / rows.len() as f64 % 1.0;
        match !(0.3..0.9).contains(&place) && (row + 20).is_multiple_of(40) {
            true => format!("{value:.4}"),
            false => format!("{value:.16}"),
        }
    };
    let whole = table(&rows, print);
    let cut = whole.trim_end();
    let ran = audit("run.csv", &cut[..cut.len() - 13], &limit);
    let found = kinds(&ran);
    assert_eq!(ran.status, 1);
    assert!(found.contains(&"cut-off-line".to_owned()), "{found:?}");
}

#[test]
fn a_few_rows_across_a_long_stretch_do_not_stand_for_it() {
    let audit = |keep: &dyn Fn(usize) -> bool, more: &[&str]| {
        let times: Vec<f64> = even(10_000)
            .enumerate()
            .filter(|(k, _)| keep(*k))
            .map(|(_, t)| t)
            .collect();
        let text = table(&exact(times), |_, value| format!("{value:e}"));
        let ran = audit("run.csv", text, more);
        (ran.status, kinds(&ran).first().cloned())
    };
    let missing = (1, Some("missing-rows".to_owned()));
    let apart = |from: usize, to: usize, stride: usize| {
        move |k: usize| !(from..to).contains(&k) || k.is_multiple_of(stride)
    };
    assert_eq!(audit(&apart(2000, 6000, 1000), &[]), missing);
    assert_eq!(
        audit(&apart(2000, 6000, 500), &["--step", "0.001"]),
        missing
    );
    // Coarser output of many rows, or not much coarser, is nothing but that.
    assert_eq!(audit(&apart(2000, 6000, 20), &[]), (0, None));
    assert_eq!(
        audit(&apart(2000, 6000, 20), &["--step", "0.001"]),
        (0, None)
    );
    assert_eq!(audit(&apart(2000, 10_000, 50), &[]), (0, None));
}

#[test]
fn a_schedule_of_whole_numbers_is_no_grid_with_holes() {
    for times in [
        "0 1 2 3 4 5 6 8 10 12 18 24 36 48 100",
        "0 1 2 3 4 5 6 7 8 9 10 12 14 16 20 24 36 48 72 100",
        "0 1 3 4 7 8 12 13 15 19 22 23 27 31 32 36 40 41 55 60 71 83 86 99 100",
    ] {
        let tenths = times
            .split(' ')
            .map(|tenths| tenths.parse::<f64>().unwrap() / 10.0);
        let times = tenths.collect::<Vec<f64>>();
        let text = table(&exact(times), |_, value| format!("{value:e}"));
        let ran = audit("run.csv", text, &["--absolute", "1"]);
        assert_eq!((ran.status, kinds(&ran)), (0, vec![]));
    }
}

#[test]
fn stamps_that_were_scattered_at_random_leave_no_holes() {
    for seed in 0..20u64 {
        let mut state = seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) + 1;
        let mut random = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 / (1u64 << 53) as f64
        };
        let mut times: Vec<f64> = (0..200)
            .map(|_| (END * random() * 1e6).round() / 1e6)
            .collect();
        times.extend([0.0, END]);
        times.sort_by(f64::total_cmp);
        times.dedup();
        let text = table(&exact(times), |_, value| format!("{value:e}"));
        let ran = audit("run.csv", text, &[]);
        assert_eq!((ran.status, kinds(&ran)), (0, vec![]), "{seed}");
    }
}

#[test]
fn values_rounded_to_decimals_are_not_of_single_precision() {
    // Below 16 every number of six decimals is the shortest text of one in single precision.
    let rows = exact_from(13.0, even(400));
    let zeros_dropped = |_: usize, value: f64| format!("{}", (value * 1e6).round() / 1e6);
    let printed = |_: usize, value: f64| format!("{value:.6}");
    for print in [&zeros_dropped as &dyn Fn(usize, f64) -> String, &printed] {
        let ran = audit(
            "run.csv",
            table(&rows, print),
            &["--set", "U_0=13", "--absolute", "1e-7"],
        );
        assert_eq!(ran.status, 1, "{}", ran.stdout);
        assert_eq!(ran.report["submissions"][0]["verdict"], "undecided");
    }
    let single = |_: usize, value: f64| format!("{}", value as f32);
    let ran = audit(
        "run.csv",
        table(&rows, single),
        &["--set", "U_0=13", "--absolute", "1e-5"],
    );
    let channel = &ran.report["submissions"][0]["runs"][0]["channels"][0];
    assert_eq!((ran.status, &channel["verdict"]), (0, &"pass".into()));
}

/// A NumPy array of one type, its numbers already as bytes; see the NumPy format, version 1.0.
fn npy(kind: &str, rows: usize, columns: usize, numbers: &[u8]) -> Vec<u8> {
    let head =
        format!("{{'descr': '{kind}', 'fortran_order': False, 'shape': ({rows}, {columns}), }}");
    let length = (10 + head.len()).div_ceil(64) * 64 - 10;
    let mut bytes = b"\x93NUMPY\x01\x00".to_vec();
    bytes.extend((length as u16).to_le_bytes());
    bytes.extend(format!("{head:<width$}\n", width = length - 1).bytes());
    bytes.extend(numbers);
    bytes
}

#[test]
fn whole_numbers_in_columns_are_as_coarse_as_their_text() {
    let rows = exact([0.0, 2.0, 4.0, 6.0, 8.0, 10.0]);
    let numbers = rows
        .iter()
        .flat_map(|&(time, value)| [time as i64, value.round() as i64]);
    let numbers: Vec<u8> = numbers.flat_map(i64::to_le_bytes).collect();
    let limits = [
        "--column",
        "time=1",
        "--column",
        "v_c=2",
        "--absolute",
        "0.3",
    ];
    let ran = audit("run.npy", npy("<i8", rows.len(), 2, &numbers), &limits);
    assert_eq!(
        ran.report["submissions"][0]["verdict"], "undecided",
        "{}",
        ran.stdout
    );
    let text = table(&rows, |_, value| format!("{value:.0}"));
    let twin = audit("run.csv", text, &limits);
    assert_eq!(twin.report["submissions"][0]["verdict"], "undecided");
}

/// Exact values at times, whose stamps are printed in some other way.
fn stamped(times: impl IntoIterator<Item = f64>, stamp: impl Fn(f64) -> String) -> String {
    let mut text = "t,v_c\n".to_owned();
    for (time, value) in exact(times) {
        let _ = writeln!(text, "{},{value:e}", stamp(time));
    }
    text
}

// Steps of 0.04 and 0.03, of 0.03 with a single one of 0.04, and of no unit at all for the first
// rows: none of these stamps is a multiple of a step, and the limit is finer than they are.
#[test]
fn stamps_that_were_rounded_to_few_units_are_not_exact() {
    let doubling = (0..9).map(|k| 1e-4 * 3f64.powi(k));
    let capped = (1..=23).map(|k| 0.656_1 + 0.4 * f64::from(k));
    let growing = [0.0].into_iter().chain(doubling.chain(capped));
    let growing: Vec<f64> = growing.chain([END]).collect();
    for (name, times) in [
        ("of four and three", even(278).collect()),
        ("of three and one of four", even(333).collect()),
        ("of none", growing),
    ] {
        let ran = audit("run.csv", stamped(times, |time| format!("{time:.2}")), &[]);
        assert_eq!(ran.verdict(), "undecided", "{name}: {}", ran.seen());
    }
    // Chosen steps of so few units stay exact.
    for rows in [250, 500] {
        let text = stamped(even(rows), |time| format!("{time:.2}"));
        assert_eq!(audit("run.csv", text, &[]).verdict(), "pass", "{rows}");
    }
}

// As programs write numbers that they have rounded: small ones with an exponent.
#[test]
fn decimals_are_counted_through_exponents() {
    let print = |value: f64| {
        let rounded = (value * 1e3).round() / 1e6;
        match rounded.abs() < 1e-4 && rounded != 0.0 {
            true => format!("{rounded:e}"),
            false => format!("{rounded}"),
        }
    };
    // 0.1 ms after the start there are 4e-4 kV and less.
    for end in [1.0, 0.1] {
        let times = even(400).map(|time| time * end / END).chain([END]);
        let mut text = "t,v_c [kV]\n".to_owned();
        for (time, value) in exact(times) {
            let _ = writeln!(text, "{time},{}", print(value));
        }
        let ran = audit("run.csv", text, &[]);
        let digits = ran.first_run()["channels"][0]["digits"].as_str().unwrap();
        assert!(digits.starts_with("6 decimals"), "{end}: {}", ran.seen());
    }
}

#[test]
fn a_phase_may_end_with_a_shorter_step() {
    let dense = (0..297).map(|k| f64::from(k) / 50.0);
    let coarse = (0..=67).map(|k| f64::from(594 + 6 * k) / 100.0);
    let times: Vec<f64> = dense.chain(coarse).chain([END]).collect();
    let whole = stamped(times.clone(), |time| format!("{time}"));
    let ran = audit("run.csv", whole, &[]);
    assert_eq!(kinds(&ran), [""; 0], "{}", ran.seen());
    // Before the phase it would be a hole.
    let holed = times.into_iter().enumerate();
    let holed = holed.filter(|&(row, _)| row != 40).map(|(_, time)| time);
    let ran = audit("run.csv", stamped(holed, |time| format!("{time}")), &[]);
    assert_eq!(kinds(&ran), ["missing-rows"], "{}", ran.seen());
}

#[test]
fn phases_are_seen_through_stamps_of_single_precision() {
    let step = END / 540.0;
    let number = (0..500).chain((500..=540).step_by(10));
    let times = number.map(|k| f64::from((f64::from(k) * step) as f32));
    let ran = audit(
        "run.csv",
        stamped(times, |time| format!("{}", time as f32)),
        &[],
    );
    assert_eq!(kinds(&ran), [""; 0], "{}", ran.seen());
}

#[test]
fn phases_of_chosen_steps_keep_their_stamps() {
    let dense = (0..100).map(|k| f64::from(k) / 50.0);
    let times = dense.chain((0..=160).map(|k| f64::from(200 + 5 * k) / 100.0));
    let text = stamped(times, |time| format!("{time}"));
    let ran = audit("run.csv", text, &[]);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}

// As programs write that keep their time in single precision, and print every number in full.
#[test]
fn rows_lost_between_stamps_of_single_precision_are_seen() {
    let step = (END / 300.0) as f32;
    let summed = || {
        let next = move |time: &f32| Some(time + step);
        std::iter::successors(Some(0.0f32), next).take(301)
    };
    let product = || (0..=300u16).map(|k| f32::from(k) * step);
    let times: [Vec<f64>; 2] = [
        summed().map(f64::from).collect(),
        product().map(f64::from).collect(),
    ];
    for times in times {
        for digits in [17, 12, 9] {
            let print = |time: f64| format!("{time:.*e}", digits - 1);
            let read = |times: Vec<f64>| audit("run.csv", stamped(times, print), &[]);
            let ran = read(times.clone());
            assert_sound(&ran);
            let mut one = times.clone();
            one.remove(200);
            let ran = read(one);
            assert_eq!(kinds(&ran), ["missing-rows"], "{digits}: {}", ran.seen());
            let mut twice = times.clone();
            twice.insert(200, twice[200]);
            let ran = read(twice);
            assert_eq!(
                (kinds(&ran), ran.status),
                (vec!["repeated-stamp".into()], 1)
            );
        }
    }
}

#[test]
fn a_stretch_lost_before_a_shortened_step_is_seen() {
    let step = END / 38.4;
    let times: Vec<f64> = (0..=38).map(|k| f64::from(k) * step).chain([END]).collect();
    let read = |times: Vec<f64>| audit("run.csv", stamped(times, |time| format!("{time}")), &[]);
    let ran = read(times.clone());
    assert_sound(&ran);
    for lost in [3, 11, 20] {
        let mut times = times.clone();
        times.drain(39 - lost..39);
        let ran = read(times);
        assert_eq!(kinds(&ran)[0], "missing-rows", "{lost}: {}", ran.seen());
    }
    // The last step of a code may reach a little farther than the others.
    let mut reaching = times;
    reaching.truncate(38);
    reaching.push(END);
    let ran = read(reaching);
    assert_sound(&ran);
}

#[test]
fn two_runs_in_one_file_are_seen() {
    let rows = exact(even(200));
    let mut text = "t,v_c\n".to_owned();
    for (time, value) in &rows {
        let _ = write!(text, "{time},{value:e}\n{time},{:e}\n", value + 2e-5);
    }
    let ran = audit("run.csv", text, &[]);
    assert_eq!(ran.status, 1, "{}", ran.seen());
    assert!(
        ran.seen().contains("is this more than one run?"),
        "{}",
        ran.seen()
    );
}

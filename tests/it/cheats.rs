//! Each was once a way to a pass, found by attacking the program: it stays closed.

use stepgauge::case::{Library, Replacements};

use crate::folder::{Folder, Ran};

const CASE: &str = "electrical/rc-constant";

/// Exact values at these times, in milliseconds, printed with `decimals`.
fn file(times: &[f64], decimals: usize, spoil: impl Fn(f64) -> f64) -> String {
    let case = Library::new().load(CASE, &Replacements::new()).unwrap();
    let exact = case.exact().unwrap();
    let mut text = "t,v_c\n".to_owned();
    for &time in times {
        let value = exact.at(time).unwrap()[0].value + spoil(time);
        text += &format!("{time},{value:.decimals$}\n");
    }
    text
}

/// Audits one file, or a ladder of files with stated steps.
fn audit(head: &str, files: &[(&str, Option<f64>, String)]) -> Ran {
    let folder = Folder::new();
    let mut text = format!("case = \"{CASE}\"\n{head}\n");
    for (name, step, content) in files {
        folder.write(&format!("s/{name}"), content);
        text += &format!("[[runs]]\nfile = \"{name}\"\n");
        text += &step.map_or(String::new(), |step| format!("step = {step}\n"));
    }
    folder.write("s/submission.toml", text);
    folder.audit(&["s"])
}

fn grid(step: f64) -> Vec<f64> {
    let count = (10.0 / step).round() as u32;
    (0..=count)
        .map(|k| (f64::from(k) * step * 1e6).round() / 1e6)
        .collect()
}

fn no_error(_: f64) -> f64 {
    0.0
}

#[test]
fn rows_left_out_are_missed_in_every_kind_of_grid() {
    let even = grid(0.01);
    let keep = |test: &dyn Fn(usize, f64) -> bool| -> Vec<f64> {
        even.iter()
            .enumerate()
            .filter(|(k, t)| test(*k, **t))
            .map(|(_, t)| *t)
            .collect()
    };
    let mut off_grid = keep(&|_, t| t <= 0.5);
    off_grid.extend(
        (0..=699)
            .map(|k| 3.003_123 + 0.01 * f64::from(k))
            .filter(|&t| t < 10.0),
    );
    off_grid.push(10.0);
    let varied: Vec<f64> = (0..=300)
        .map(|k| 10.0 * (f64::from(k) / 300.0).powf(1.3))
        .collect();
    for (what, times) in [
        ("one row", keep(&|k, _| k != 77)),
        ("a stretch", keep(&|_, t| !(0.5..3.0).contains(&t))),
        ("a stretch that ends off the grid", off_grid),
        (
            "a stretch beside doubled steps",
            keep(&|k, t| {
                let doubled = (700..712).contains(&k) && k % 2 == 1;
                !(doubled || (0.5..3.0).contains(&t))
            }),
        ),
        ("a stretch of varied steps", {
            varied
                .iter()
                .copied()
                .filter(|t| !(1.0..4.0).contains(t))
                .collect()
        }),
        ("all but the ends", vec![0.0, 10.0]),
        ("the end, leapt over", vec![0.0, 3.4, 6.8]),
    ] {
        let ran = audit("", &[("run.csv", None, file(&times, 15, no_error))]);
        assert_eq!(
            (ran.status, ran.verdict()),
            (1, "fail"),
            "{what}: {}",
            ran.seen()
        );
    }
    for times in [even, varied] {
        let ran = audit("", &[("run.csv", None, file(&times, 15, no_error))]);
        assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
    }
}

#[test]
fn rows_are_missed_by_the_stated_step_where_stamps_are_coarse() {
    let times: Vec<f64> = grid(0.05).iter().map(|&t| f64::from(t as f32)).collect();
    let all = audit("", &[("run.csv", Some(0.05), file(&times, 15, no_error))]);
    assert_eq!(all.verdict(), "pass", "{}", all.seen());
    let holed: Vec<f64> = times
        .iter()
        .enumerate()
        .filter(|(k, _)| *k != 50)
        .map(|(_, t)| *t)
        .collect();
    let ran = audit("", &[("run.csv", Some(0.05), file(&holed, 15, no_error))]);
    assert_eq!(ran.verdict(), "fail", "{}", ran.seen());
}

/// An error of first order in the step, as Euler's method has.
fn ladder(steps: &[(f64, f64)], decimals: usize) -> Vec<(&'static str, Option<f64>, String)> {
    let names = ["a.csv", "b.csv", "c.csv", "d.csv"];
    let files = steps.iter().zip(names).map(|(&(true_step, stated), name)| {
        let content = file(&grid(true_step), decimals, |t| {
            0.02 * true_step * (1.0 + t.sin())
        });
        (name, Some(stated), content)
    });
    files.collect()
}

#[test]
fn an_order_is_not_passed_by_doubt_or_by_stated_steps() {
    let claim = "[claims]\norder = 4\n[limits]\nabsolute = 1";
    for (what, steps, decimals) in [
        // Too few digits: the interval would reach any order.
        ("wide", vec![(0.05, 0.05), (0.04, 0.04)], 3),
        ("alike", vec![(0.05, 0.05), (0.05, 0.050_000_001)], 15),
        // Steps stated so close together that halving looks like the sixteenth.
        (
            "false steps",
            vec![(0.1, 0.1), (0.05, 0.084_09), (0.025, 0.070_71)],
            15,
        ),
        (
            "true steps",
            vec![(0.1, 0.1), (0.05, 0.05), (0.025, 0.025)],
            15,
        ),
    ] {
        let ran = audit(claim, &ladder(&steps, decimals));
        assert_ne!(ran.verdict(), "pass", "{what}: {}", ran.seen());
    }
    let honest = ladder(&[(0.1, 0.1), (0.05, 0.05), (0.025, 0.025)], 15);
    let ran = audit("[claims]\norder = 1\n[limits]\nabsolute = 1", &honest);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}

#[test]
fn what_loosens_the_judgement_is_said() {
    let good = || vec![("run.csv", None, file(&grid(0.01), 15, no_error))];
    for head in [
        "[limits]\nrelative_to = \"peak\"",
        "[limits]\norder_slack = 0.5",
    ] {
        let ran = audit(head, &good());
        assert_eq!(
            ran.report["submissions"][0]["limits_from"], "submission",
            "{head}"
        );
    }
    let ran = audit("[columns]\ni_r = \"v_c\"", &good());
    assert!(
        ran.seen().contains("state `v_c` is not in the file") || ran.status != 0,
        "{}",
        ran.seen()
    );
}

// Richardson's comparison of runs with each other (entry GC01 of the published checks
// has the formula): it shows the order, but nothing exact stands behind it.
#[test]
fn runs_without_a_case_show_their_order_and_never_pass() {
    let steps = [0.1, 0.05, 0.025, 0.0125].map(|step| (step, step));
    // Three runs give one number, which fails no claim; four that agree do.
    for (claimed, runs, verdict) in [
        (1.0, 4, "undecided"),
        (2.0, 3, "undecided"),
        (2.0, 4, "fail"),
    ] {
        let folder = Folder::new();
        let mut text = format!("[claims]\norder = {claimed}\n");
        for (name, step, content) in ladder(&steps[..runs], 15) {
            folder.write(&format!("s/{name}"), content);
            text += &format!("[[runs]]\nfile = \"{name}\"\nstep = {}\n", step.unwrap());
        }
        folder.write("s/submission.toml", text);
        let ran = folder.audit(&["s"]);
        assert_eq!((ran.status, ran.verdict()), (1, verdict), "{}", ran.seen());
        let observed = ran.report["submissions"][0]["orders"][0]["observed"]
            .as_f64()
            .unwrap();
        assert!((observed - 1.0).abs() < 0.02, "{observed}");
        assert!(
            ran.seen().contains("nothing exact stands behind it"),
            "{}",
            ran.seen()
        );
    }
}

#[test]
fn a_stated_step_moves_no_stamp_that_does_not_agree_with_it() {
    let varied: Vec<f64> = (0..=300)
        .map(|k| 10.0 * (f64::from(k) / 300.0).powf(1.3))
        .collect();
    let ran = audit("", &[("run.csv", Some(0.05), file(&varied, 15, no_error))]);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
    let errors = &ran.report["submissions"][0]["runs"][0]["channels"][0];
    assert!(errors["worst_error"].as_f64().unwrap() < 1e-13, "{errors}");
}

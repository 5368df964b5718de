//! What a submission is told of its step or its error setting, from planted errors and from
//! a plain program; followed, the advice helps.

use crate::folder::{Folder, Ran};
use serde_json::Value;
use stepgauge::Library;

const TAU: f64 = 8500.0 * 320.0 * 1e-3 / (6.0 * 210.0);
const SPAN: f64 = 24.0;

/// The cooling body with an error of so many degrees that swings once over the window.
fn planted(error: f64) -> String {
    let case = Library::new()
        .load("thermal/cooling-body", &Default::default())
        .unwrap();
    let exact = case.exact().unwrap();
    let mut text = "t,body,flux\n".to_owned();
    for k in 0..=96 {
        let t = 0.25 * f64::from(k);
        let values = exact.at(t).unwrap();
        let swing = error * (2.0 * std::f64::consts::PI * t / SPAN).sin();
        let (body, flux) = (values[0].value + swing, values[1].value + 0.21 * swing);
        text += &format!("{t},{body:.17e},{flux:.17e}\n");
    }
    text
}

/// Forward Euler in so many steps over the window, as a program writes it.
fn euler(steps: u32) -> String {
    euler_from(200.0, steps)
}

fn euler_from(start: f64, steps: u32) -> String {
    let h = SPAN / f64::from(steps);
    let mut body = start;
    let mut text = "t,body,flux\n".to_owned();
    for k in 0..=steps {
        let t = SPAN * f64::from(k) / f64::from(steps);
        text += &format!(
            "{t:.17e},{body:.17e},{:.17e}\n",
            210.0 * (body - 20.0) / 1000.0
        );
        body += h * (20.0 - body) / TAU;
    }
    text
}

fn submission(claims: &str, absolute: f64, runs: &[(String, String)]) -> Folder {
    let folder = Folder::new();
    let mut text = format!(
        "case = \"thermal/cooling-body\"\n{claims}\n[limits]\nabsolute = {absolute}\n\
         flux = {{ absolute = 1 }}\n"
    );
    for (number, (setting, rows)) in runs.iter().enumerate() {
        let file = format!("run-{number}.csv");
        text += &format!("[[runs]]\nfile = \"{file}\"\n{setting}\n");
        folder.write(&format!("sub/{file}"), rows);
    }
    folder.write("sub/submission.toml", text);
    folder
}

fn audited(folder: &Folder) -> (Ran, Value) {
    let ran = folder.audit(&["sub"]);
    let submission = ran.report["submissions"][0].clone();
    assert!(submission.is_object(), "{}", ran.seen());
    (ran, submission)
}

fn settings(slope: f64, factor: f64) -> Vec<(String, String)> {
    let rungs = [1e-3f64, 1e-4, 1e-5];
    let rung = |&setting: &f64| {
        let error = factor * setting.powf(slope);
        (format!("tolerance = {setting:e}"), planted(error))
    };
    rungs.iter().map(rung).collect()
}

#[test]
fn errors_that_keep_to_their_setting() {
    // 30 times the setting; the finest is about twice the limit.
    let (ran, submission) = audited(&submission("", 1.45e-4, &settings(1.0, 30.0)));
    assert_eq!(submission["verdict"], "fail");
    let body = &submission["settings"][0];
    assert_eq!(body["channel"], "body");
    assert!((body["slope"].as_f64().unwrap() - 1.0).abs() < 1e-6);
    assert!((body["spread"].as_f64().unwrap() - 1.0).abs() < 1e-6);
    assert_eq!(body["proportional"], true);
    assert_eq!(body["needed"], 4.3e-6);
    let ratios = body["rungs"].as_array().unwrap().iter();
    for rung in ratios {
        assert!((rung["error_over_setting"].as_f64().unwrap() - 30.0).abs() < 1e-6);
        assert_eq!(rung["counts"], true);
    }
    let told = "`body`: error over setting 30.0 to 30.0 in 3 runs, slope 1.00; the error keeps to \
                the setting; a setting of 4.3e-6 keeps the limit by this slope";
    assert!(ran.seen().contains(told), "{}", ran.seen());
    // No step can be advised to a code that chooses its own.
    assert_eq!(submission["advice"], Value::Null);
    // The setting advised is one that passes.
    let finer = [("tolerance = 4.3e-6".to_owned(), planted(30.0 * 4.3e-6))];
    let (_, submission) = audited(&self::submission("", 1.45e-4, &finer));
    assert_eq!(submission["verdict"], "pass");
}

#[test]
fn errors_that_do_not_keep_to_their_setting() {
    let (_, submission) = audited(&submission("", 1.0, &settings(0.5, 0.1)));
    let body = &submission["settings"][0];
    assert!((body["slope"].as_f64().unwrap() - 0.5).abs() < 1e-6);
    assert_eq!(body["proportional"], false);
    // Slope within a quarter of one, but eight times from end to end.
    let (_, submission) = audited(&self::submission("", 1.0, &settings(0.78, 0.1)));
    let body = &submission["settings"][0];
    assert!((body["spread"].as_f64().unwrap() - 100f64.powf(0.22)).abs() < 1e-3);
    assert_eq!(body["proportional"], true);
    let (_, submission) = audited(&self::submission("", 1.0, &settings(1.24, 0.1)));
    assert_eq!(submission["settings"][0]["proportional"], true);
    let (_, submission) = audited(&self::submission("", 1.0, &settings(1.26, 0.1)));
    assert_eq!(submission["settings"][0]["proportional"], false);
}

fn ladder(counts: &[u32]) -> Vec<(String, String)> {
    let rung = |&count: &u32| {
        let step = SPAN / f64::from(count);
        (format!("step = {step:e}"), euler(count))
    };
    counts.iter().map(rung).collect()
}

/// The step that the ladder points to is named twice with one number, and keeps the limit.
#[test]
fn a_ladder_names_the_step() {
    let claims = "[claims]\nmethod = \"forward Euler\"";
    let (ran, submission) = audited(&submission(claims, 0.1, &ladder(&[120, 240, 480])));
    assert_eq!(submission["verdict"], "fail", "{}", ran.seen());
    let advice = &submission["advice"];
    let step = advice["largest_step"].as_f64().unwrap();
    assert_eq!(advice["ruled_by"], "accuracy");
    let reasons = submission["reasons"].as_array().unwrap().iter();
    let reasons: Vec<&str> = reasons.map(|reason| reason.as_str().unwrap()).collect();
    let named = format!("a step of {step} s would keep it");
    assert!(
        reasons.iter().any(|r| r.ends_with(&named)),
        "{reasons:?} {step}"
    );
    assert!(
        advice["text"]
            .as_str()
            .unwrap()
            .contains(&format!("a step of {step} s"))
    );
    let line = format!("sub: step: {}", advice["text"].as_str().unwrap());
    assert!(ran.seen().contains(&line), "{}", ran.seen());
    // Followed, it passes; a run that is a third longer does not.
    let count = (SPAN / step).ceil() as u32;
    let (_, followed) = audited(&self::submission(claims, 0.1, &ladder(&[count])));
    assert_eq!(followed["verdict"], "pass");
    let (_, longer) = audited(&self::submission(claims, 0.1, &ladder(&[count * 3 / 4])));
    assert_eq!(longer["verdict"], "fail");
}

/// A single run has no order: the method itself says which step would do.
#[test]
fn a_method_names_the_step() {
    for claims in ["[claims]\nmethod = \"forward Euler\"", ""] {
        let (ran, submission) = audited(&submission(claims, 0.1, &ladder(&[240])));
        assert_eq!(submission["verdict"], "fail");
        let advice = &submission["advice"];
        let step = advice["largest_step"]
            .as_f64()
            .unwrap_or_else(|| panic!("{}", ran.seen()));
        assert_eq!(advice["ruled_by"], "accuracy");
        let text = advice["text"].as_str().unwrap();
        // 2 tau of the first-order decay.
        assert!(
            text.contains("forward Euler") && text.contains("stable up to 4.31 s"),
            "{text}"
        );
        let count = (SPAN / step).round() as u32;
        let (_, followed) = audited(&self::submission(claims, 0.1, &ladder(&[count])));
        assert_eq!(followed["verdict"], "pass", "{count}");
        let longer = count - count / 2000 - 1;
        let (_, longer) = audited(&self::submission(claims, 0.1, &ladder(&[longer])));
        assert_eq!(longer["verdict"], "fail", "{count}");
    }
}

/// With a wide limit nothing but stability holds the step.
#[test]
fn stability_rules_where_the_limit_is_wide() {
    let claims = "[claims]\nmethod = \"forward Euler\"";
    let (_, submission) = audited(&submission(claims, 200.0, &ladder(&[240])));
    let advice = &submission["advice"];
    assert_eq!(submission["verdict"], "pass");
    let step = advice["largest_step"].as_f64().unwrap();
    assert!(step <= 2.0 * TAU + 0.2, "{step}");
}

#[test]
fn a_step_that_is_short_enough_is_not_blamed() {
    // The right method and step, but another start.
    let runs = [("step = 5e-3".to_owned(), euler_from(201.0, 4800))];
    let claims = "[claims]\nmethod = \"forward Euler\"";
    let (_, submission) = audited(&submission(claims, 0.5, &runs));
    assert_eq!(submission["verdict"], "fail");
    let text = submission["advice"]["text"].as_str().unwrap();
    assert!(text.contains("the step is not what fails here"), "{text}");
}

/// The section of the factors on the terminal, and the same numbers in the report.
#[test]
fn growth_is_shown_where_few_are_audited() {
    let (ran, submission) = audited(&submission("", 5.0, &ladder(&[8, 24, 48, 96, 192])));
    let growth = &submission["evidence"]["growth"];
    assert_eq!(
        (&growth["order"], &growth["coefficients"]),
        (&1.into(), &2.into())
    );
    let first = &submission["evidence"]["runs"][1]["growth"][0];
    let factor = first["factor"][0].as_f64().unwrap();
    assert!((factor - (1.0 - 1.0 / TAU)).abs() <= 1e-12, "{factor}");
    let seen = ran.seen();
    for part in [
        "Growth per step: sub run mode, 1/s z factor exp(z)",
        "order on linear problems: 1 (reproduces 2 coefficients of exp)",
        // 1 + z, and exp(z).
        "damping at z = -1.39: 0.390 (exp: 0.249)",
    ] {
        assert!(seen.contains(part), "{part}: {seen}");
    }
}

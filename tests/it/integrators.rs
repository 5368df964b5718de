//! Each run comes with errors computed in ball arithmetic by
//! `tests/outside/integrators/make_errors.py`, which shares no code with us; the
//! integrators are SciPy, GSL, GNU Octave, Boost.Odeint and deSolve, driven by the
//! scripts beside it.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use serde_json::Value;
use stepgauge::audit::{Plan, Planned, audit};
use stepgauge::case::Library;
use stepgauge::judge::Verdict;
use stepgauge::outcome::{Audited, Outcome};
use stepgauge::submission::{Claims, LimitStated, LimitsStated, Run, Setting, Submission};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/outside/integrators")
}

fn json(name: &str) -> Value {
    let text = std::fs::read_to_string(folder().join("runs").join(name)).unwrap();
    serde_json::from_str(&text).unwrap()
}

fn manifest() -> Vec<Value> {
    json("manifest.json").as_array().unwrap().clone()
}

fn submission(case: &str, files: &[(&str, Setting)], limits: LimitsStated) -> Submission {
    let run = |(file, setting): &(&str, Setting)| Run {
        file: (*file).to_owned(),
        path: folder().join("runs").join(file),
        setting: *setting,
        role: None,
        cost: None,
        text: None,
    };
    Submission {
        case: Some(case.to_owned()),
        limits,
        runs: files.iter().map(run).collect(),
        ..Submission::default()
    }
}

fn run(submissions: Vec<Submission>) -> Outcome {
    let mut library = Library::new();
    library.add_folder(&folder().join("cases")).unwrap();
    let planned = |(index, submission): (usize, Submission)| Planned {
        name: index.to_string(),
        submission,
        file: None,
        reviewed: Default::default(),
    };
    let submissions = submissions.into_iter().enumerate().map(planned).collect();
    let outcome = audit(&Plan {
        library,
        submissions,
        unreadable: Vec::new(),
        threads: 2,
        traced: false,
        part: None,
    });
    assert!(outcome.not_audited.is_empty(), "{:?}", outcome.not_audited);
    outcome
}

/// Every channel limited to the same multiple of its certified worst error.
fn limits(errors: &Value, factor: f64) -> LimitsStated {
    let channels = errors["channels"]
        .as_object()
        .unwrap()
        .iter()
        .map(|(name, channel)| {
            let absolute = Some(factor * channel["worst_error"].as_f64().unwrap());
            (
                name.clone(),
                LimitStated {
                    absolute,
                    relative: Some(0.0),
                    of_peak: None,
                },
            )
        });
    LimitsStated {
        channels: channels.collect(),
        ..LimitsStated::default()
    }
}

fn each_file(factor: f64) -> Vec<(Value, Value, Audited)> {
    let errors = json("errors.json");
    let files: Vec<(Value, Value)> = manifest()
        .into_iter()
        .map(|entry| {
            let file = entry["file"].as_str().unwrap().to_owned();
            (entry, errors["files"][&file].clone())
        })
        .collect();
    let submissions = files.iter().map(|(entry, errors)| {
        let file = entry["file"].as_str().unwrap();
        let case = entry["case"].as_str().unwrap();
        submission(case, &[(file, Setting::Unstated)], limits(errors, factor))
    });
    let outcome = run(submissions.collect());
    let joined = files.into_iter().zip(outcome.submissions);
    joined
        .map(|((entry, errors), audited)| (entry, errors, audited))
        .collect()
}

#[test]
fn worst_errors_equal_the_certified_ones() {
    let (mut files, mut channels) = (0, 0);
    for (entry, errors, audited) in each_file(1.0) {
        let file = entry["file"].as_str().unwrap();
        let run = &audited.runs[0];
        assert_eq!(run.rows, errors["rows"].as_u64().unwrap(), "{file}");
        for channel in &run.channels {
            let found = channel.errors.as_ref().unwrap();
            let truth = &errors["channels"][&channel.name];
            let number = |key: &str| truth[key].as_f64().unwrap();
            // The file's resolution is the promise; beyond it only the rounding of the
            // printed numbers to f64 is left, a few units of the peak.
            let tolerance =
                found.resolution.min(1e-3 * number("worst_error")) + 2e-15 * number("peak");
            for (what, found, truth) in [
                ("worst error", found.worst, number("worst_error")),
                ("rms error", found.rms, number("rms_error")),
                ("end error", found.end, number("end_error")),
            ] {
                let gap = (found - truth).abs();
                assert!(
                    gap <= tolerance,
                    "{file} {} {what}: {found} for {truth}",
                    channel.name
                );
            }
            assert!(
                (found.peak - number("peak")).abs() <= 1e-14 * number("peak"),
                "{file}"
            );
            channels += 1;
        }
        files += 1;
    }
    assert!(
        files >= 24 && channels >= 24,
        "{files} files, {channels} channels"
    );
}

#[test]
fn a_limit_of_nine_tenths_fails_and_one_of_eleven_tenths_passes() {
    let mut open = 0;
    for (factor, expected) in [(0.9, Verdict::Fail), (1.1, Verdict::Pass)] {
        for (entry, _, audited) in each_file(factor) {
            let file = entry["file"].as_str().unwrap();
            for channel in &audited.runs[0].channels {
                let errors = channel.errors.as_ref().unwrap();
                // A tenth of the error must be larger than what the digits resolve
                // anywhere in the file (the coarsest format has seven significant
                // digits, so 5e-7 of the decade of the peak); else only the wrong
                // verdict is ruled out.
                let in_full = entry["digits_format"].as_str() == Some("%.17g");
                let elsewhere = if in_full {
                    0.0
                } else {
                    5e-6 * errors.peak.max(0.1)
                };
                if 0.1 * errors.worst > 1.01 * errors.resolution.max(elsewhere) {
                    assert_eq!(
                        channel.verdict, expected,
                        "{file} {} {factor}",
                        channel.name
                    );
                } else {
                    let wrong = if expected == Verdict::Fail {
                        Verdict::Pass
                    } else {
                        Verdict::Fail
                    };
                    assert_ne!(channel.verdict, wrong, "{file} {} {factor}", channel.name);
                    open += 1;
                }
            }
            assert!(
                audited.runs[0]
                    .findings
                    .iter()
                    .all(|finding| !finding.fatal),
                "{file}"
            );
        }
    }
    println!("{open} channels too coarse to tell");
}

/// Case, theoretical order, and files with their steps.
type Ladder = (String, f64, Vec<(String, f64)>);

/// Fixed-step ladders by name.
fn ladders() -> BTreeMap<String, Ladder> {
    let mut ladders = BTreeMap::new();
    for entry in manifest() {
        let word = |key: &str| entry[key].as_str().map(str::to_owned);
        let (Some(ladder), Some(order), Some(step)) = (
            word("ladder"),
            entry["order"].as_f64(),
            entry["step"].as_f64(),
        ) else {
            continue;
        };
        let place = ladders
            .entry(ladder)
            .or_insert((word("case").unwrap(), order, Vec::new()));
        place.2.push((word("file").unwrap(), step));
    }
    ladders
}

fn stepped(files: &[(String, f64)]) -> Vec<(&str, Setting)> {
    let steps = files.iter();
    steps
        .map(|(file, step)| (file.as_str(), Setting::Step(*step)))
        .collect()
}

#[test]
fn ladders_of_fixed_step_methods_show_their_order() {
    let ladders: Vec<_> = ladders().into_iter().collect();
    let submissions = ladders.iter().map(|(_, (case, order, files))| {
        let loose = LimitStated {
            absolute: Some(1e9),
            relative: Some(0.0),
            of_peak: None,
        };
        Submission {
            claims: Claims {
                method: None,
                order: Some(*order),
            },
            ..submission(
                case,
                &stepped(files),
                LimitsStated {
                    general: loose,
                    ..LimitsStated::default()
                },
            )
        }
    });
    let outcome = run(submissions.collect());
    let mut orders = [0; 9];
    for ((name, (_, order, _)), audited) in ladders.iter().zip(&outcome.submissions) {
        assert_eq!(
            audited.order_verdict,
            Some(Verdict::Pass),
            "{name}: {:?}",
            audited.reasons
        );
        for channel in &audited.orders {
            let (observed, ..) = channel
                .observed
                .unwrap_or_else(|| panic!("{name}: {channel:?}"));
            // Of a symplectic pair the velocity gains an order here; the script that made
            // the errors says so too.
            let gains = name.contains("symplectic") && observed > order + 0.5;
            assert!(
                gains || (observed - order).abs() < 0.1,
                "{name} {}: {observed}",
                channel.channel
            );
        }
        orders[*order as usize] += 1;
    }
    assert!(orders[1..=5].iter().all(|&count| count >= 2), "{orders:?}");
}

#[test]
fn a_claim_of_one_order_more_fails() {
    let ladders: Vec<_> = ladders().into_iter().collect();
    let submissions = ladders.iter().map(|(_, (case, order, files))| Submission {
        claims: Claims {
            method: None,
            order: Some(*order + 1.0),
        },
        ..submission(case, &stepped(files), LimitsStated::default())
    });
    let outcome = run(submissions.collect());
    for ((name, _), audited) in ladders.iter().zip(&outcome.submissions) {
        assert_eq!(
            audited.order_verdict,
            Some(Verdict::Fail),
            "{name}: {:?}",
            audited.orders
        );
    }
}

//! Rows in memory to a verdict: for the tests of an integrator written in Rust.

use std::fmt::Write;
use std::path::PathBuf;

use super::{Plan, Planned, audit};
use crate::case::{Library, Replacements};
use crate::fault::Fault;
use crate::outcome::Audited;
use crate::submission::{Claims, Run, Setting, Submission};
use crate::trajectory::Stated;

/// What an integrator has computed at one step.
#[derive(Clone, Debug, PartialEq)]
pub struct Rows {
    /// The step, in the time unit of the case.
    pub step: f64,
    /// Times, each with the states in the order of the case; from the start of the window to
    /// its end.
    pub rows: Vec<(f64, Vec<f64>)>,
}

/// Audits rows in memory like files that were written in full: errors, order across the
/// steps, evidence of the method, causes.
///
/// # Units
/// Those of the case.
///
/// # Errors
/// An unknown case, a step that is none, rows with more or fewer values than the case has states.
///
/// # Example
/// ```
/// use stepgauge::{Claims, Rows, Verdict, audit_rows};
///
/// // The integrator under test: Heun on `v' = (5 - v) / 1.02` over 10 ms.
/// let heun = |steps: u32| {
///     let (h, rate, mut v) = (10.0 / f64::from(steps), |v: f64| (5.0 - v) / 1.02, 0.0);
///     let rows = (0..=steps).map(|k| {
///         let row = (f64::from(k) * h, vec![v]);
///         v += 0.5 * h * (rate(v) + rate(v + h * rate(v)));
///         row
///     });
///     Rows { step: h, rows: rows.collect() }
/// };
/// let claims = Claims { method: Some("Heun".to_owned()), order: Some(2.0) };
/// let found = audit_rows("electrical/rc-constant", claims, &[400, 200, 100].map(heun)).unwrap();
/// assert_eq!(found.verdict, Verdict::Pass, "{:?}", found.reasons);
/// ```
pub fn audit_rows(case: &str, claims: Claims, runs: &[Rows]) -> Result<Audited, Vec<Fault>> {
    let library = Library::new();
    let states = library.load(case, &Replacements::new())?.states;
    let names: Vec<&str> = states.iter().map(|state| state.name.as_str()).collect();
    let runs = runs.iter().map(|rows| run(rows, &names));
    let runs = runs.collect::<Result<Vec<Run>, Fault>>();
    let submission = Submission {
        case: Some(case.to_owned()),
        claims,
        // Every digit that is needed is there.
        layout: Stated {
            digits: Some(17),
            ..Stated::default()
        },
        runs: runs.map_err(|fault| vec![fault])?,
        ..Submission::default()
    };
    let plan = Plan {
        library,
        submissions: vec![Planned {
            name: "rows in memory".to_owned(),
            file: None,
            submission,
            reviewed: Default::default(),
        }],
        unreadable: Vec::new(),
        threads: 1,
        traced: false,
        part: None,
    };
    let mut outcome = audit(&plan);
    match outcome.submissions.pop() {
        Some(audited) => Ok(audited),
        None => Err(outcome
            .not_audited
            .pop()
            .map_or(Vec::new(), |missing| missing.faults)),
    }
}

/// The rows as a file of comma-separated values would hold them: shortest digits that read
/// back.
fn run(rows: &Rows, names: &[&str]) -> Result<Run, Fault> {
    if !(rows.step > 0.0 && rows.step.is_finite()) {
        let fault = Fault::new(format!("a step of {} is none", rows.step));
        return Err(fault.help("give a step that is finite and above zero"));
    }
    let mut text = format!("t,{}\n", names.join(","));
    for (number, (time, values)) in rows.rows.iter().enumerate() {
        if values.len() != names.len() {
            let found = format!(
                "row {} at step {} has {} values, the case has {} states",
                number + 1,
                rows.step,
                values.len(),
                names.len()
            );
            let help = format!("give a value for each of {}", names.join(", "));
            return Err(Fault::new(found).help(help));
        }
        // Nothing can fail that writes to a string.
        let _ = write!(text, "{time:?}");
        for value in values {
            let _ = write!(text, ",{value:?}");
        }
        text.push('\n');
    }
    let file = format!("step {}", rows.step);
    Ok(Run {
        path: PathBuf::from(&file),
        file,
        setting: Setting::Step(rows.step),
        cost: None,
        role: None,
        text: Some(text.into()),
    })
}

//! The factor of each mode from row to row, for every run, and the order that they show.

use super::Model;
use super::evidence::{Among, steps_among_rows};
use super::run::RunCompared;
use crate::method::{Growth, Likeness, Linear, Unmeasured, growth, likeness};
use crate::outcome::{Audited, Damping, GrowthOutcome, GrowthSummary};
use crate::submission::Setting;

/// Fills in the growth of each run and what all of them come to.
pub(super) fn measure(model: &Model, runs: &[RunCompared], audited: &mut Audited) {
    let found: Vec<_> = runs.iter().map(|run| of_run(&model.linear, run)).collect();
    let Some(evidence) = &mut audited.evidence else {
        return;
    };
    let mut factors = Vec::new();
    let mut missing = None;
    for (run, result) in evidence.runs.iter_mut().zip(found) {
        match result {
            Ok((modes, steps)) => {
                run.growth = modes.iter().map(|mode| outcome(mode, steps)).collect();
                let known = steps.unwrap_or(1);
                factors.extend(modes.into_iter().map(|mode| (mode, known)));
            }
            Err(reason) => missing = missing.or(Some(reason.words())),
        }
    }
    let likeness = likeness(&factors);
    evidence.growth = Some(GrowthSummary {
        coefficients: match likeness {
            Likeness::Coefficients(count) => Some(count),
            Likeness::Exact | Likeness::Unseen => None,
        },
        exact: likeness == Likeness::Exact,
        damping: damping(&factors),
        missing: missing.filter(|_| factors.is_empty()),
    });
}

/// The modes of one run, and steps from row to row where the step is stated.
fn of_run(linear: &Linear, run: &RunCompared) -> Result<(Vec<Growth>, Option<u64>), Unmeasured> {
    let (spacing, _) = run.record.spacing.ok_or(Unmeasured::Spacing)?;
    let step = match run.outcome.setting {
        Setting::Step(step) => step,
        Setting::Unstated => return Ok((growth(linear, &run.record, 1)?, None)),
        // The step of a code that adapts it is not that of the rows.
        Setting::Tolerance(_) => return Err(Unmeasured::Spacing),
    };
    match steps_among_rows(spacing, step).ok_or(Unmeasured::Spacing)? {
        Among::StepsPerRow(steps) => Ok((growth(linear, &run.record, steps)?, Some(steps))),
        Among::RowsPerStep(rows) => Ok((growth(linear, &run.record.every(rows), 1)?, Some(1))),
    }
}

fn outcome(mode: &Growth, steps: Option<u64>) -> GrowthOutcome {
    let pair = |value: nalgebra::Complex<f64>| (value.re, value.im);
    let several = steps.filter(|&steps| steps > 1).map(|steps| steps as f64);
    let real = mode.factor.im == 0.0 && mode.factor.re > mode.doubt;
    let per_step = several.filter(|_| real).map(|steps| {
        let root = mode.factor.re.powf(1.0 / steps);
        let low = (mode.factor.re - mode.doubt).powf(1.0 / steps);
        (root, root - low)
    });
    GrowthOutcome {
        eigenvalue: pair(mode.eigenvalue),
        z: pair(mode.z),
        factor: pair(mode.factor),
        doubt: mode.doubt,
        exact: pair(mode.z.exp()),
        steps_per_row: steps,
        per_step,
    }
}

/// At the largest `z` that decays.
fn damping(factors: &[(Growth, u64)]) -> Option<Damping> {
    let decays = |growth: &&Growth| growth.z.re < -1e-9 * growth.z.norm();
    let decaying = factors.iter().map(|(growth, _)| growth).filter(decays);
    let largest = decaying.max_by(|a, b| a.z.norm().total_cmp(&b.z.norm()))?;
    Some(Damping {
        z: (largest.z.re, largest.z.im),
        factor: largest.factor.norm(),
        doubt: largest.doubt,
        exact: largest.z.exp().norm(),
    })
}

//! Which methods fit, by their largest residual, and the measured factors of the modes
//! beside `exp(z)`.

use super::axis::Axis;
use super::draw::{ACROSS, Look, Plot, Series, UP};
use crate::number::short;
use crate::outcome::{Audited, Consistent, GrowthOutcome, RunEvidence};

/// Methods shown.
const MOST_METHODS: usize = 4;

/// A smaller residual is drawn as this one.
const LEAST: f64 = 1e-12;

/// Residuals of the methods that fit a run, against what digits and rounding allow.
pub(super) fn consistent(audited: &Audited) -> Option<Plot> {
    let evidence = audited.evidence.as_ref()?;
    let telling = |run: &&RunEvidence| !run.exact && !run.consistent.is_empty();
    let run = evidence.runs.iter().find(telling)?;
    let mut families: Vec<&Consistent> = run.consistent.iter().collect();
    families.sort_by(|a, b| a.largest_residual.total_cmp(&b.largest_residual));
    // One alone needs no picture: the claims name it.
    let best = families.first().filter(|_| families.len() > 1)?;
    let finding = format!(
        "{}: {} {} within what digits and rounding allow; the closest is {} with {} of it.",
        run.file,
        families.len(),
        if families.len() == 1 {
            "pair of method and step lies"
        } else {
            "pairs of method and step lie"
        },
        best.family,
        short(best.largest_residual)
    );
    let shown = families.iter().take(MOST_METHODS);
    let allowed = vec![(1.0, 0.5), (1.0, MOST_METHODS as f64 + 0.5)];
    let mut series = vec![Series::line(Look::Limit, "allowed", allowed)];
    series.extend(shown.enumerate().map(|(rank, family)| {
        let step = family
            .step
            .map_or(String::new(), |step| format!(", step {}", short(step)));
        let name = format!("{}. {}{step}", rank + 1, family.family);
        let place = (family.largest_residual.max(LEAST), rank as f64 + 1.0);
        Series::dots(Look::Other(rank), name, vec![place])
    }));
    let residuals = families.iter().map(|f| f.largest_residual.max(LEAST));
    Some(Plot {
        title: "Methods that fit.".to_owned(),
        finding,
        across: Axis::log(
            "largest residual as a part of what is allowed".to_owned(),
            residuals.chain([1.0]),
            ACROSS,
        ),
        up: Axis::ranks("rank", MOST_METHODS.min(families.len()), UP),
        series,
    })
}

/// Magnitudes of the factors from row to row against that of z, beside those of `exp(z)`:
/// dots, since it is no function of `|z|` where modes turn.
pub(super) fn growth(audited: &Audited) -> Option<Plot> {
    let evidence = audited.evidence.as_ref()?;
    let modes: Vec<&GrowthOutcome> = evidence.runs.iter().flat_map(|run| &run.growth).collect();
    let measured: Vec<&GrowthOutcome> = modes
        .into_iter()
        .filter(|mode| size(mode.z) > 0.0 && size(mode.factor) > 0.0)
        .collect();
    if measured.is_empty() {
        return None;
    }
    let sorted = |read: &dyn Fn(&GrowthOutcome) -> f64| {
        let mut points: Vec<(f64, f64)> = measured
            .iter()
            .map(|mode| (size(mode.z), read(mode)))
            .collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        points
    };
    let (exact, seen) = (
        sorted(&|mode| size(mode.exact)),
        sorted(&|mode| size(mode.factor)),
    );
    let summary = evidence.growth.as_ref();
    let finding = match summary.and_then(|summary| summary.coefficients) {
        Some(count) => format!(
            "The factors share {count} coefficients with exp: order {} on linear problems.",
            count.saturating_sub(1)
        ),
        None if summary.is_some_and(|summary| summary.exact) => {
            "The factors cannot be told from exp.".to_owned()
        }
        None => "The factors say nothing of the order.".to_owned(),
    };
    let turns = measured.iter().any(|mode| mode.factor.1 != 0.0);
    let finding = match turns {
        true => finding + " Magnitudes only: an error of phase is not seen here.",
        false => finding,
    };
    let all: Vec<f64> = exact.iter().chain(&seen).map(|p| p.1).collect();
    let least = all.iter().copied().fold(f64::INFINITY, f64::min);
    let up_label = "|factor| from row to row".to_owned();
    let up = if least < 0.02 {
        Axis::log(up_label, all.iter().map(|x| x.max(1e-9)), UP)
    } else {
        Axis::linear(up_label, all.iter().copied(), UP)
    };
    Some(Plot {
        title: "Growth of the modes.".to_owned(),
        finding,
        across: Axis::log(
            "|z|, spacing of the rows times eigenvalue".to_owned(),
            exact.iter().map(|p| p.0),
            ACROSS,
        ),
        up,
        series: vec![
            Series::dots(Look::Exact, "|exp(z)|", exact),
            Series::dots(Look::Written, "measured", seen),
        ],
    })
}

fn size((re, im): (f64, f64)) -> f64 {
    re.hypot(im)
}

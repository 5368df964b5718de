//! Evidence as the tests of judgements plant it.

use super::claims::Claimed;
use crate::method::{Evidence, Family, Fit, METHODS, Method, Tried};

pub(super) fn method(name: &str) -> &'static Method {
    let named: Vec<_> = METHODS
        .iter()
        .filter(|method| method.name == name)
        .collect();
    named[0]
}

/// A fit of so many times what is allowed, with a residual as part of the peak.
pub(super) fn fit(ratio: f64, residual: f64) -> Fit {
    Fit {
        ratio,
        residual,
        astray: residual,
        blur: 0.0,
        compared: 40,
    }
}

pub(super) fn tried(name: &str, steps: u64, ratio: f64, residual: f64) -> Tried {
    // Up to the bound of the pair the exact solution is far from it.
    let mut tried = Tried::planted(method(name), steps, fit(ratio, residual), 1e9);
    tried.at_jumps.ratio = 0.0;
    tried
}

/// What the tried pair becomes where it stays among the consistent ones; one step of the row is
/// 0.1.
pub(super) fn family(tried: &Tried) -> Family {
    Family {
        methods: vec![tried.method],
        reading: tried.reading,
        steps: tried.steps,
        range: tried.range,
        step: Some(0.1 / tried.steps as f64),
        fit: tried.fit,
        apart: tried.apart,
        at_jumps: tried.at_jumps,
        free: tried.free,
    }
}

/// Rows that differ from the exact solution by the whole peak.
pub(super) fn beside(tried: Vec<Tried>) -> Evidence {
    let consistent = tried.iter().filter(|one| one.fit.holds()).map(family);
    Evidence {
        consistent: consistent.collect(),
        tried,
        exact: fit(1e12, 1.0),
        exact_between_jumps: false,
        jumps: false,
        skipped: Vec::new(),
    }
}

pub(super) fn claimed<'a>(name: &'a str, methods: &'a [&'static Method]) -> Claimed<'a> {
    Claimed {
        name: Some(name),
        methods,
        step: Some(0.1),
        steps: Some(1),
        adaptive: false,
        unit: f64::EPSILON / 2.0,
        time_unit: "s",
    }
}

//! Pairs that rows cannot tell apart, under one name.

use super::{Family, OUTDONE, TOLD, Tried};

/// Entries of the matrices of two methods that differ by less than this part of them are
/// the same: they are computed along different ways.
const SAME: f64 = 1e-11;

/// Consistent pairs, those of one effect together. `kicked` is how far the file leaves the
/// exact solution at jumps.
pub(super) fn families(tried: &[Tried], unit: f64, kicked: f64) -> Vec<Family> {
    let mut families: Vec<(Family, &Vec<f64>)> = Vec::new();
    let holding = || tried.iter().filter(|tried| tried.fit.holds());
    // Jumps tell as soon as anything explains them, and alone where the exact solution does
    // not.
    let met = holding().any(|other| other.at_jumps.holds());
    let met_only = met && kicked > OUTDONE;
    // Nor does a start that is free to choose, and would make the exact solution fit as well,
    // explain what something without such freedom does.
    let beside_jumps =
        |one: &Tried| (met && one.at_jumps.ratio > 1.0) || (met_only && one.at_jumps.compared == 0);
    let outdone = |one: &Tried| {
        let by = |other: &Tried| {
            other.outdoes(one, unit) > OUTDONE
                || (one.free
                    && !other.free
                    && other.apart > if one.apart > 1.0 { OUTDONE } else { TOLD })
        };
        let mut others = holding().filter(|other| !beside_jumps(other));
        beside_jumps(one) || others.any(by)
    };
    for one in holding().filter(|one| !outdone(one)) {
        let same = |(family, print): &&mut (Family, &Vec<f64>)| {
            family.steps == one.steps && alike(print, &one.print, f64::EPSILON)
        };
        match families.iter_mut().find(same) {
            Some((family, _)) => {
                if family.methods.iter().all(|m| m.name != one.method.name) {
                    family.methods.push(one.method);
                }
                if one.fit.ratio < family.fit.ratio {
                    family.fit = one.fit;
                }
            }
            None => {
                let family = Family {
                    methods: vec![one.method],
                    reading: one.reading,
                    steps: one.steps,
                    range: one.range,
                    step: one.step,
                    fit: one.fit,
                    apart: if one.at_jumps.holds() {
                        one.apart.max(kicked)
                    } else {
                        one.apart
                    },
                    at_jumps: one.at_jumps,
                    free: one.free,
                };
                families.push((family, &one.print));
            }
        }
    }
    let mut families: Vec<Family> = families.into_iter().map(|(family, _)| family).collect();
    // The plainest explanation first; the order of the catalogue stays among equals.
    families.sort_by_key(|family| family.steps);
    families
}

/// `near` is what entries may differ by in terms of the largest.
pub(super) fn alike(a: &[f64], b: &[f64], near: f64) -> bool {
    let largest = a
        .iter()
        .chain(b)
        .fold(0.0f64, |largest, x| largest.max(x.abs()));
    let same = |x: &f64, y: &f64| (x - y).abs() <= SAME * x.abs().max(y.abs()) + near * largest;
    a.len() == b.len() && a.iter().zip(b).all(|(x, y)| same(x, y))
}

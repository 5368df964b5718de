//! What is concluded from planted fits.

use super::*;

impl Tried {
    /// A pair with a fit of its own choosing, for tests of what is concluded from it.
    pub(crate) fn planted(method: &'static Method, steps: u64, fit: Fit, apart: f64) -> Tried {
        Tried {
            method,
            reading: Reading::AtNodes,
            steps,
            range: (steps, steps),
            step: None,
            fit,
            apart,
            at_jumps: Fit { compared: 0, ..fit },
            free: false,
            print: vec![method.name.len() as f64, steps as f64],
            coarse: 0.0,
        }
    }
}

fn one(name: &str, steps: u64, ratio: f64, residual: f64) -> Tried {
    let method = METHODS.iter().find(|method| method.name == name).unwrap();
    let fit = Fit {
        ratio,
        residual,
        astray: 10.0 * residual,
        blur: 0.0,
        compared: 40,
    };
    Tried::planted(method, steps, fit, 1e9)
}

#[test]
fn a_pair_outdoes_another_one_by_its_residual_or_by_what_steps_round() {
    const UNIT: f64 = f64::EPSILON / 2.0;
    let near = |found: f64, expected: f64| (found / expected - 1.0).abs() < 1e-12;
    let other = one("Heun", 4, 0.5, 1e-6);
    let best = one("forward Euler", 1, 0.5, 1e-9);
    assert!(near(best.outdoes(&other, UNIT), 1e3));
    // Roundings of the larger number of steps: four each, scattered or one after the other.
    let exact = one("forward Euler", 1, 0.5, 0.0);
    assert!(near(exact.outdoes(&other, UNIT), 1e-6 / (8.0 * UNIT)));
    let free = Tried {
        free: true,
        ..exact.clone()
    };
    assert!(near(free.outdoes(&other, UNIT), 1e-5 / (16.0 * UNIT)));
    // What has gone astray counts where either one runs on from its start.
    let fallen = Tried {
        free: true,
        ..other.clone()
    };
    assert!(near(best.outdoes(&fallen, UNIT), 1e3));
    assert!(near(exact.outdoes(&fallen, UNIT), 1e-5 / (8.0 * UNIT)));
    // What the comparison itself may have made is no merit.
    let mut blurred = other.clone();
    blurred.fit.blur = 0.4e-6;
    assert!(near(best.outdoes(&blurred, UNIT), 600.0));
    // It has to be told from the exact solution, or to come a hundred times closer.
    let apart = |apart: f64, ratio: f64, free: bool| {
        let mut best = Tried {
            apart,
            free,
            ..best.clone()
        };
        best.fit.ratio = ratio;
        best.outdoes(&other, UNIT) > 0.0
    };
    assert!(apart(1.01, 0.5, false) && !apart(1.0, 0.5, false));
    assert!(apart(0.9, 0.0089, false) && !apart(0.9, 0.0091, false));
    assert!(!apart(0.9, 0.0089, true) && apart(1.01, 0.5, true));
    // Methods of one effect at one step differ by how they are computed here.
    let mut same = one("Heun", 1, 0.5, 1e-6);
    same.print = best.print.clone();
    assert_eq!(best.outdoes(&same, UNIT), 0.0);
    same.steps = 2;
    assert!(best.outdoes(&same, UNIT) > 0.0);
}

#[test]
fn told_and_beyond_chance() {
    let told = |apart: f64, free: bool| {
        let tried = Tried {
            apart,
            free,
            ..one("Heun", 1, 0.5, 1e-9)
        };
        tried.is_told()
    };
    assert!(told(3.01, false) && !told(3.0, false));
    assert!(told(12.01, true) && !told(12.0, true));
    let family = |change: &dyn Fn(&mut Tried)| {
        let mut tried = one("Heun", 1, 0.5, 1e-9);
        change(&mut tried);
        Family {
            methods: vec![tried.method],
            reading: tried.reading,
            steps: tried.steps,
            range: tried.range,
            step: tried.step,
            fit: tried.fit,
            apart: tried.apart,
            at_jumps: tried.at_jumps,
            free: tried.free,
        }
    };
    let beyond = |change: &dyn Fn(&mut Tried)| family(change).is_beyond_chance();
    assert!(beyond(&|_| ()));
    assert!(beyond(&|t| t.apart = 0.51e6) && !beyond(&|t| t.apart = 0.49e6));
    // A ratio below a thousandth says no more than one at it.
    let small = |apart: f64| beyond(&|t| (t.fit.ratio, t.apart) = (1e-9, apart));
    assert!(small(1.01e3) && !small(0.99e3));
    assert!(!beyond(&|t| t.reading = Reading::Held));
    assert!(beyond(&|t| t.steps = 64) && !beyond(&|t| t.steps = 65));
    assert!(beyond(&|t| t.fit.compared = 16) && !beyond(&|t| t.fit.compared = 15));
    assert!(family(&|t| t.apart = 3.1).is_told() && !family(&|t| t.apart = 2.9).is_told());
}

#[test]
fn the_best_fit_meets_the_jumps_as_well() {
    let evidence = |tried: Vec<Tried>| Evidence {
        tried,
        consistent: Vec::new(),
        exact: Fit::NOTHING,
        exact_between_jumps: false,
        jumps: true,
        skipped: Vec::new(),
    };
    let heun = one("Heun", 1, 0.5, 1e-9).method;
    let mut misses = one("Heun", 1, 0.2, 1e-9);
    misses.at_jumps.ratio = 1.1;
    let mut meets = one("Heun", 1, 0.9, 1e-9);
    (meets.at_jumps.ratio, meets.at_jumps.compared) = (1.0, 3);
    let off = one("Heun", 1, 1.1, 1e-9);
    let found = evidence(vec![off.clone(), misses.clone(), meets.clone()]);
    assert_eq!(found.best(&[heun], Some(1)).unwrap().fit.ratio, 0.9);
    assert_eq!(found.best_of("Heun").unwrap().fit.ratio, 0.2);
    assert!(found.best(&[heun], Some(2)).is_none());
    assert!(found.any_at_jumps(&misses, &[heun]));
    assert!(!evidence(vec![misses.clone()]).any_at_jumps(&misses, &[heun]));
    let elsewhere = Tried {
        steps: 2,
        ..meets.clone()
    };
    assert!(!evidence(vec![elsewhere]).any_at_jumps(&misses, &[heun]));
    // Other numbers of steps that agree stand for it, where it holds.
    let ranged = |ratio: f64| {
        let wide = Tried {
            range: (2, 5),
            ..one("Heun", 3, ratio, 1e-9)
        };
        evidence(vec![wide])
    };
    assert!(ranged(0.5).best(&[heun], Some(5)).is_some());
    assert!(ranged(0.5).best(&[heun], Some(6)).is_none());
    assert!(ranged(1.5).best(&[heun], Some(5)).is_none());
    let mut none = off;
    none.fit.compared = 0;
    let none = evidence(vec![none]);
    assert!(none.best(&[heun], Some(1)).is_none() && !none.is_any());
    assert!(found.is_any());
}

#[test]
fn pieces_that_are_kept_are_spread_over_the_file() {
    let piece = |start: usize| Piece {
        window: 0,
        start,
        rows: 4,
    };
    let kept = |count: usize| -> Vec<usize> {
        let mut pieces: Vec<Piece> = (0..count).map(piece).collect();
        thin(&mut pieces);
        pieces.iter().map(|piece| piece.start).collect()
    };
    assert_eq!(kept(16), (0..16).collect::<Vec<_>>());
    // Fifteen gaps of ten.
    assert_eq!(kept(151), (0..16).map(|k| 10 * k).collect::<Vec<_>>());
}

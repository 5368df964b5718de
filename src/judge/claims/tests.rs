//! What is said of a claim beside evidence that was planted: every answer, and both sides of
//! the bounds between them.

use super::*;
use crate::judge::planted::{beside, claimed, fit, method, tried};
use crate::method::Fit;

const CANNOT: Support = Support::CannotTell;
const CONTRADICTS: Support = Support::Contradicts;
const AGREES: Support = Support::Agrees;

/// The answer to a claim of one method at step 0.1.
fn answer(evidence: &Evidence, name: &str) -> Answer {
    answer_to(evidence, name, |_| ())
}

fn answer_to(evidence: &Evidence, name: &str, change: impl Fn(&mut Claimed)) -> Answer {
    let methods = [method(name)];
    let mut claimed = claimed(name, &methods);
    change(&mut claimed);
    of_claim(evidence, &claimed).unwrap()
}

#[track_caller]
fn assert_says(answer: &Answer, support: Support, text: &str) {
    assert_eq!(answer.support, support, "{}", answer.text);
    assert!(answer.text.contains(text), "{}", answer.text);
}

#[test]
fn a_claim_that_fits_agrees_and_says_how_well() {
    let own = tried("forward Euler", 1, 0.3, 1e-15);
    let others = ["Heun", "backward Euler"].map(|name| tried(name, 1, 9.0, 1e-2));
    let mut all = vec![own];
    all.extend(others);
    let found = answer(&beside(all.clone()), "forward Euler");
    assert_eq!((found.method, found.step), (Some(AGREES), Some(AGREES)));
    assert_eq!(
        found.text,
        "the rows fit forward Euler at step 0.1 s: the largest residual is 30 % of what digits \
         and rounding allow; 2 methods are ruled out at any step"
    );
    // A method that fits at another step is not ruled out, one that was not compared neither.
    all.push(tried("Heun", 2, 0.9, 1e-15));
    all[2].fit.compared = 0;
    let found = answer(&beside(all.clone()), "forward Euler");
    assert_says(&found, AGREES, "allow");
    assert!(!found.text.contains("ruled out"), "{}", found.text);
    // How the inputs were read is said where it is not the plain way.
    all[0].reading = Reading::Held;
    let found = answer(&beside(all), "forward Euler");
    assert_says(&found, AGREES, "; inputs held from the start of each step");
}

#[test]
fn a_fit_that_tells_nothing_apart_is_left_open() {
    let mut own = tried("forward Euler", 1, 0.3, 1e-15);
    let all = beside(vec![own.clone(), tried("Heun", 1, 0.5, 1e-15)]);
    let found = answer(&all, "forward Euler");
    assert_says(&found, CANNOT, "and every other method as well");
    assert_eq!((found.method, found.step), (Some(CANNOT), Some(CANNOT)));
    let other = tried("Heun", 1, 9.0, 1e-2);
    own.apart = 1.0;
    let found = answer(&beside(vec![own.clone(), other.clone()]), "forward Euler");
    assert_says(&found, CANNOT, "and the exact solution as well");
    own.apart = 1.01;
    let found = answer(&beside(vec![own.clone(), other.clone()]), "forward Euler");
    assert_says(&found, AGREES, "allow");
    // Left out of what is consistent: something else comes closer.
    let mut evidence = beside(vec![own.clone(), other.clone()]);
    evidence.consistent.clear();
    let found = answer(&evidence, "forward Euler");
    assert_says(&found, CANNOT, "yet something else comes closer");
    // A start of its own choosing between jumps, with no row at them.
    own.free = true;
    let mut evidence = beside(vec![own, other]);
    assert_says(&answer(&evidence, "forward Euler"), AGREES, "allow");
    evidence.jumps = true;
    let found = answer(&evidence, "forward Euler");
    assert_says(&found, CANNOT, "its steps at them are not among the rows");
    evidence.tried[0].at_jumps.compared = 3;
    assert_says(&answer(&evidence, "forward Euler"), AGREES, "allow");
}

#[test]
fn inputs_read_now_on_one_side_and_now_on_the_other_do_not_outdo_a_plain_reading() {
    let mut own = tried("forward Euler", 1, 0.3, 1e-15);
    own.reading = Reading::EitherSide;
    let far = tried("classical RK4", 1, 9.0, 1e-2);
    let found = answer(&beside(vec![own.clone(), far.clone()]), "forward Euler");
    assert_says(&found, AGREES, "inputs read on either side");
    let plain = tried("Heun", 1, 0.9, 1e-15);
    let found = answer(&beside(vec![own, plain, far]), "forward Euler");
    assert_says(&found, CANNOT, "but also Heun at step 0.100 s");
}

#[test]
fn a_fit_that_another_one_comes_a_hundred_times_closer_than_is_contradicted() {
    let evidence = |own: f64| {
        beside(vec![
            tried("forward Euler", 1, 0.9, own),
            tried("Heun", 1, 0.3, 1e-12),
            tried("backward Euler", 1, 9.0, 1e-2),
        ])
    };
    let found = answer(&evidence(1.01e-10), "forward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, 101 times",
    );
    assert_says(
        &answer(&evidence(0.99e-10), "forward Euler"),
        AGREES,
        "allow",
    );
    // Not where its steps round as much in any case, or a start was free to choose.
    let mut rounded = evidence(1.01e-10);
    rounded.tried[0].coarse = 1.01e-10;
    assert_says(&answer(&rounded, "forward Euler"), AGREES, "allow");
    let mut free = evidence(1.01e-10);
    free.tried[0].free = true;
    assert_says(&answer(&free, "forward Euler"), AGREES, "allow");
}

#[test]
fn steps_at_jumps_count_as_well() {
    let evidence = |name: &str, residual: f64| {
        let mut own = tried(name, 1, 0.3, 1e-15);
        own.at_jumps = fit(5.0, residual);
        let mut other = tried("Heun", 1, 0.3, 1e-15);
        other.at_jumps = fit(5.0, 1e-2);
        beside(vec![own, other, tried("classical RK4", 1, 9.0, 1e-2)])
    };
    let found = answer(&evidence("forward Euler", 1e-2), "forward Euler");
    assert_says(
        &found,
        CANNOT,
        "between the jumps of the inputs and not at them",
    );
    let mut met = evidence("forward Euler", 1e-2);
    met.consistent[1].at_jumps = fit(0.5, 1e-15);
    let found = answer(&met, "forward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the steps at jumps of the inputs fit Heun",
    );
    // What an iteration may leave, only for a method that is solved for.
    let found = answer(&evidence("backward Euler", 2.9e-5), "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    let found = answer(&evidence("backward Euler", 3.1e-5), "backward Euler");
    assert_says(&found, CANNOT, "not at them");
    let found = answer(&evidence("forward Euler", 2.9e-5), "forward Euler");
    assert_says(&found, CANNOT, "not at them");
    // At its bound it agrees.
    let mut own = tried("forward Euler", 1, 0.3, 1e-15);
    own.at_jumps = fit(1.0, 1e-2);
    let evidence = beside(vec![own, tried("Heun", 1, 9.0, 1e-2)]);
    assert_says(&answer(&evidence, "forward Euler"), AGREES, "allow");
}

#[test]
fn what_does_not_fit_is_contradicted_and_what_fits_is_named() {
    let off = tried("forward Euler", 1, 1e6, 1e-2);
    let found = answer(&beside(vec![off.clone()]), "forward Euler");
    assert_says(
        &found,
        AGREES,
        "the rows are close to forward Euler at step 0.1 s",
    );
    let near = tried("Heun", 1, 1e6, 0.19);
    let found = answer(&beside(vec![off.clone(), near]), "forward Euler");
    assert_eq!(found.method, Some(CONTRADICTS));
    assert_says(
        &found,
        CONTRADICTS,
        "the rows do not follow forward Euler at step 0.1 s (off by 0.0100 of the peak, 1.00e6 times \
         what digits and rounding allow), nor any method of the catalogue",
    );
    let other = tried("Heun", 1, 0.3, 1e-15);
    let found = answer(&beside(vec![off.clone(), other.clone()]), "forward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, not forward Euler",
    );
    assert_eq!(
        (found.method, found.step),
        (Some(CONTRADICTS), Some(CONTRADICTS))
    );
    // The same method at another step: the method is right, the step is not.
    let own = tried("forward Euler", 2, 0.3, 1e-15);
    let found = answer(&beside(vec![off.clone(), own]), "forward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit forward Euler at step 0.0500 s, not 0.1 s",
    );
    assert_eq!(
        (found.method, found.step),
        (Some(AGREES), Some(CONTRADICTS))
    );
    // The exact solution itself.
    let mut exact = beside(vec![off.clone()]);
    exact.exact = fit(0.5, 1e-16);
    let found = answer(&exact, "forward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "closer to the exact solution than forward Euler",
    );
    // A run with an error setting chooses its own steps.
    let found = answer_to(&beside(vec![off, other]), "forward Euler", |claimed| {
        claimed.adaptive = true;
    });
    assert_says(&found, CANNOT, "chooses its own steps");
}

#[test]
fn residuals_that_iteration_or_coarse_arithmetic_would_leave_stay_open() {
    let beside_one = |name: &str, residual: f64, steps: u64| {
        let own = tried(name, steps, 1e6, residual);
        beside(vec![own, tried("Heun", steps, 1e7, residual * 1.1)])
    };
    // 3e-6 of the peak in up to five steps, in proportion beyond.
    for (residual, steps, support) in [
        (2.9e-6, 1, CANNOT),
        (3.1e-6, 1, CONTRADICTS),
        (2.9e-6, 5, CANNOT),
        (3.1e-6, 5, CONTRADICTS),
        (5.9e-6, 10, CANNOT),
        (6.1e-6, 10, CONTRADICTS),
    ] {
        let evidence = beside_one("forward Euler", residual, steps);
        let found = answer_to(&evidence, "forward Euler", |c| c.steps = Some(steps));
        assert_eq!(found.support, support, "{residual} {steps} {}", found.text);
    }
    // Ten times that where steps are solved for.
    for (residual, steps, support) in [
        (2.9e-5, 1, CANNOT),
        (3.1e-5, 1, CONTRADICTS),
        (5.9e-5, 10, CANNOT),
        (6.1e-5, 10, CONTRADICTS),
    ] {
        let evidence = beside_one("backward Euler", residual, steps);
        let found = answer_to(&evidence, "backward Euler", |c| c.steps = Some(steps));
        assert_eq!(found.support, support, "{residual} {steps} {}", found.text);
    }
    // Without a step there is nothing to be near to.
    let evidence = beside_one("forward Euler", 1e-2, 1);
    let found = answer_to(&evidence, "forward Euler", |c| {
        (c.step, c.steps) = (None, None);
    });
    assert_says(
        &found,
        CANNOT,
        "state the step to have forward Euler tested",
    );
    assert_eq!((found.method, found.step), (Some(CANNOT), None));
}

#[test]
fn an_iteration_that_stopped_early_is_not_blamed_where_nothing_speaks_against_it() {
    let evidence = |residual: f64, other: f64| {
        let own = tried("backward Euler", 1, 1e6, residual);
        beside(vec![own, tried("Heun", 1, 0.3, other)])
    };
    // Another method fits, but not so closely that the iteration would have had to hit it.
    let found = answer(&evidence(2.9e-5, 0.06 * 2.9e-5), "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    let found = answer(&evidence(2.9e-5, 0.04 * 2.9e-5), "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    // It does: a part in a thousand of the residual, or as close as the digits let it.
    let found = answer(&evidence(2.9e-5, 0.9e-3 * 2.9e-5), "backward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, not backward",
    );
    // More than an iteration leaves.
    let found = answer(&evidence(3.1e-5, 0.06 * 3.1e-5), "backward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, not backward",
    );
    // What goes astray over a stretch counts by its root.
    let mut far = evidence(2.9e-5, 0.06 * 2.9e-5);
    far.tried[0].fit.astray = 2.9e-5f64.sqrt();
    far.consistent[0].fit.astray = 1e-3;
    let found = answer(&far, "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    // The last digits are always an iteration's own: 256 roundings.
    let digits = 255.0 * f64::EPSILON;
    let found = answer(&evidence(digits, 1e-3 * digits), "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    // The exact solution twenty times closer leaves the iteration no room.
    let mut near = evidence(2.9e-5, 0.06 * 2.9e-5);
    near.exact = fit(5.0, 0.04 * 2.9e-5);
    let found = answer(&near, "backward Euler");
    assert_eq!(found.support, CONTRADICTS, "{}", found.text);
    near.exact = fit(5.0, 0.06 * 2.9e-5);
    let found = answer(&near, "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    // Rows that are exact, up to twice what their digits allow.
    let mut exact = beside(vec![tried("backward Euler", 1, 3.0, 1.9e-7)]);
    exact.exact = fit(0.5, 0.5e-7);
    let found = answer(&exact, "backward Euler");
    assert_says(&found, CANNOT, "an iteration that stops early");
    exact.tried[0].fit = fit(3.0, 2.1e-7);
    let found = answer(&exact, "backward Euler");
    assert_says(
        &found,
        CONTRADICTS,
        "closer to the exact solution than backward Euler",
    );
}

#[test]
fn a_method_whose_start_is_free_has_to_do_more_to_be_named() {
    let evidence = |apart: f64, ratio: f64, residual: f64| {
        let mut other = tried("BDF 2", 1, ratio, residual);
        (other.free, other.apart) = (true, apart);
        beside(vec![tried("forward Euler", 1, 1e6, 1e-3), other])
    };
    // A thousandth of the residual of the claim, and told from the exact solution.
    let found = answer(&evidence(2.0, 0.3, 0.9e-6), "forward Euler");
    assert_says(&found, CONTRADICTS, "the rows fit BDF 2");
    let found = answer(&evidence(2.0, 0.3, 1.1e-6), "forward Euler");
    assert_says(&found, CONTRADICTS, "the rows do not follow forward Euler");
    let found = answer(&evidence(1.0, 0.3, 0.9e-6), "forward Euler");
    assert_says(&found, CONTRADICTS, "the rows do not follow forward Euler");
}

#[test]
fn rows_that_some_start_of_the_claimed_method_meets_are_those_of_another_step() {
    let evidence = |residual: f64, steps: u64, compared: usize| {
        let mut evidence = beside(vec![tried("BDF 2", 1, 1e6, 1e-2)]);
        evidence.skipped = vec![Skipped {
            method: method("BDF 2"),
            steps,
            fit: Fit {
                compared,
                ..fit(0.0, residual)
            },
        }];
        evidence
    };
    let found = answer(&evidence(0.9e-6, 4, 2), "BDF 2");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit BDF 2 at step 0.0250 s, not 0.1 s",
    );
    assert_eq!(found.method, Some(AGREES));
    for other in [
        evidence(1.1e-6, 4, 2),
        evidence(0.9e-6, 65, 2),
        evidence(0.9e-6, 4, 0),
    ] {
        let found = answer(&other, "BDF 2");
        assert!(!found.text.contains("at step 0.0"), "{}", found.text);
    }
    let found = answer(&evidence(0.9e-6, 64, 2), "BDF 2");
    assert_says(&found, CONTRADICTS, "the rows fit BDF 2 at step 0.00156 s");
}

#[test]
fn steps_that_do_not_divide_the_rows_are_refuted_by_a_fit_beyond_chance_only() {
    let ask = |evidence: &Evidence, name: &str| {
        answer_to(evidence, name, |c| (c.step, c.steps) = (Some(0.07), None))
    };
    let fits = tried("Heun", 1, 0.3, 1e-15);
    let evidence = beside(vec![fits.clone()]);
    let found = ask(&evidence, "Heun");
    assert_eq!(
        (found.method, found.step),
        (Some(AGREES), Some(CONTRADICTS))
    );
    assert_eq!(
        found.text,
        "the rows fit Heun at step 0.100 s, and do not lie a whole number of steps of 0.07 s apart"
    );
    let found = ask(&evidence, "forward Euler");
    assert_eq!(
        (found.support, found.method),
        (CONTRADICTS, Some(CONTRADICTS))
    );
    let mut chance = evidence.clone();
    // A million times closer than the exact solution, over sixteen comparisons.
    chance.consistent[0].apart = 0.29e6;
    assert_says(
        &ask(&chance, "Heun"),
        CANNOT,
        "rows do not lie a whole number",
    );
    chance.consistent[0].apart = 0.31e6;
    assert_eq!(ask(&chance, "Heun").support, CONTRADICTS);
    chance.consistent[0].fit.compared = 15;
    assert_says(
        &ask(&chance, "Heun"),
        CANNOT,
        "rows do not lie a whole number",
    );
    chance.consistent[0].fit.compared = 16;
    assert_eq!(ask(&chance, "Heun").support, CONTRADICTS);
    // Within 5 % it may be the same step, stated to a few digits.
    let near = answer_to(&evidence, "Heun", |c| {
        (c.step, c.steps) = (Some(0.096), None)
    });
    assert_eq!(near.support, CANNOT);
    let apart = answer_to(&evidence, "Heun", |c| {
        (c.step, c.steps) = (Some(0.095), None)
    });
    assert_eq!(apart.support, CONTRADICTS);
}

#[test]
fn a_method_that_could_not_be_run_stays_open_unless_another_one_has_the_name() {
    let skipped = Skipped {
        method: method("BDF 2"),
        steps: 1,
        fit: Fit {
            compared: 0,
            ..fit(0.0, 0.0)
        },
    };
    let mut evidence = beside(vec![tried("Heun", 1, 1e6, 1e-2)]);
    evidence.skipped = vec![skipped.clone()];
    let found = answer(&evidence, "BDF 2");
    assert_says(&found, CANNOT, "too few for every form of BDF 2");
    let found = answer(&evidence, "forward Euler");
    assert_says(&found, CANNOT, "cannot be run beside these rows");
    let mut evidence = beside(vec![tried("Heun", 1, 0.3, 1e-15)]);
    evidence.skipped = vec![skipped];
    let found = answer(&evidence, "BDF 2");
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, not BDF 2",
    );
    evidence.exact.residual = 1.01;
    assert_says(
        &answer(&evidence, "BDF 2"),
        CANNOT,
        "too few for every form",
    );
}

#[test]
fn steps_and_names_alone() {
    let ask = |evidence: &Evidence, change: &dyn Fn(&mut Claimed)| {
        let mut claimed = claimed("", &[]);
        claimed.name = None;
        change(&mut claimed);
        of_claim(evidence, &claimed)
    };
    let evidence = beside(vec![tried("Heun", 1, 0.3, 1e-15)]);
    assert_eq!(ask(&evidence, &|c| c.step = None), None);
    let found = ask(&evidence, &|_| ()).unwrap();
    assert_says(&found, AGREES, "the rows fit Heun at step 0.100 s");
    assert_eq!((found.method, found.step), (None, Some(AGREES)));
    let found = ask(&evidence, &|c| c.steps = Some(2)).unwrap();
    assert_says(
        &found,
        CONTRADICTS,
        "the rows fit Heun at step 0.100 s, and no method at step",
    );
    let found = ask(&evidence, &|c| c.adaptive = true).unwrap();
    assert_says(&found, CANNOT, "a run with an error setting");
    let none = beside(vec![tried("Heun", 1, 1e6, 1e-2)]);
    let found = ask(&none, &|_| ()).unwrap();
    assert_says(&found, CANNOT, "no method fits the rows");
    let found = ask(&none, &|c| c.steps = None).unwrap();
    assert_says(&found, CANNOT, "rows are not a whole number of steps apart");
    let mut exact = evidence.clone();
    exact.exact = fit(1.0, 1e-16);
    let found = ask(&exact, &|_| ()).unwrap();
    assert_says(&found, CANNOT, "cannot be told from the exact solution");
    let two = beside(vec![
        tried("Heun", 1, 0.3, 1e-15),
        tried("Heun", 2, 0.3, 1e-15),
    ]);
    let found = ask(&two, &|_| ()).unwrap();
    assert_says(&found, CANNOT, "methods at several steps fit the rows");
    let found = ask(&beside(vec![]), &|_| ()).unwrap();
    assert_says(&found, CANNOT, "the rows are too few");

    let unknown = |change: &dyn Fn(&mut Claimed)| {
        let mut claimed = claimed("Huen", &[]);
        change(&mut claimed);
        of_claim(&evidence, &claimed).unwrap()
    };
    let found = unknown(&|c| c.step = None);
    assert_eq!(
        found.text,
        "`Huen` is not in the catalogue, did you mean `Heun`?; `stepgauge methods` lists what it holds"
    );
    assert_eq!(
        (found.support, found.method, found.step),
        (CANNOT, Some(CANNOT), None)
    );
    // Its step can be true all the same, and false.
    let found = unknown(&|_| ());
    assert_eq!(
        (found.support, found.method, found.step),
        (CANNOT, Some(CANNOT), Some(AGREES))
    );
    let found = unknown(&|c| c.steps = Some(2));
    assert_eq!(
        (found.support, found.step),
        (CONTRADICTS, Some(CONTRADICTS))
    );
}

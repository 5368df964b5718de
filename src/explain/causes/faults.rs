//! Faults on top of the exact solution, of the claimed method and of usual ones, for rows that no
//! method explains.

use rayon::prelude::*;

use super::bench::{Gap, Rows, Stepping, Way, affordable, trajectory};
use super::{
    Candidate, Kind, Names, Ranked, Trouble, method, model, ranked, rates, shape, written,
};
use crate::method::{Linear, Method, Sides, find};

/// Methods that are tried beside the claimed one.
pub(super) const USUAL: [&str; 8] = [
    "Heun",
    "classical RK4",
    "forward Euler",
    "backward Euler",
    "trapezoidal",
    "explicit midpoint",
    "implicit midpoint",
    "exponential Euler",
];
/// A fault of unknown company has to stand out of what the method leaves by this factor,
/// and to take away all but this part of the error.
const STANDS_OUT: f64 = 3.0;
pub(super) const TAKES_AWAY: f64 = 0.03;

/// Faults on top of one way to make the rows: those that leave nothing, those that leave what
/// a method would, and noise.
#[derive(Default)]
struct Beside {
    found: Vec<Ranked>,
    loose: Vec<Ranked>,
    smooth: Option<Candidate>,
    /// Nothing is wrong but what the method leaves.
    explained: bool,
}

/// No method explains the rows: faults on top of the exact solution, of the claimed method
/// and of usual ones.
pub(super) fn of_faults(trouble: &Trouble, rows: &Rows, names: &Names, before: Gap) -> Vec<Ranked> {
    let linear = trouble.linear;
    let mut found = Vec::new();
    let own = |candidate: Candidate| ranked(candidate, 0.0, None, 0.0);
    if let Some(candidate) = shape::interpolated(rows, names) {
        return vec![own(candidate)];
    }
    if let Some(candidate) = method::single_precision_time(linear, rows, names, trouble, before) {
        return vec![own(candidate)];
    }
    let step = trouble.step.or(rows.spacing);
    let mut ways: Vec<(Way, Option<&'static Method>)> = vec![(Way::Exact, None)];
    if let Some(step) = step.filter(|&step| rows.spacing.is_some_and(|h| step <= h * (1.0 + 1e-9)))
    {
        let usual = USUAL.iter().filter_map(|name| find(name));
        let mut methods: Vec<&'static Method> = trouble.methods.to_vec();
        methods.extend(usual);
        for (place, &method) in methods.iter().enumerate() {
            if methods[..place]
                .iter()
                .any(|known| known.name == method.name)
            {
                continue;
            }
            // The claimed method may see either value at a jump.
            let claimed = place < trouble.methods.len();
            let sides: &[Sides] =
                match claimed && linear.jumps_within(linear.window.0, linear.window.1) {
                    true => &[Sides::After, Sides::Own],
                    false => &[Sides::After],
                };
            for stepping in Stepping::all(method, linear, step) {
                ways.extend(sides.iter().map(|&sides| {
                    let stepping = Stepping {
                        sides,
                        ..stepping.clone()
                    };
                    (Way::Stepped(stepping), Some(method))
                }));
            }
        }
    }
    let most = affordable(linear, &rows.few()) / (rates::SOLUTIONS * ways.len());
    // A model too large to be solved so often is not asked what is wrong in it.
    let model_step = step.filter(|_| most > 0).unwrap_or(0.0);
    let healthy = healthy_share(trouble, rows, step);
    let rough = rates::Rough::new(linear, rows, most);
    let beside = |(way, method): &(Way, Option<&'static Method>)| {
        let mut one = Beside::default();
        let base = match way {
            Way::Exact => Some(rows.exact.clone()),
            way => trajectory(linear, rows, way),
        };
        let Some(base) = base else { return one };
        let own = rows.gap(&base);
        if !matches!(way, Way::Exact) && own.closes(before) {
            // All is the error of the method, but for coarse constants or arithmetic.
            one.explained = true;
            return one;
        }
        let mut candidates = written::candidates(rows, names, &base, 0.0, before);
        let exact = matches!(way, Way::Exact);
        let unnamed = method.is_none_or(|method| !trouble.is_claimed(method));
        if exact {
            candidates.extend(written::half_shifted(linear, rows, names));
            candidates.extend(written::candidates(
                rows,
                names,
                &base,
                STANDS_OUT * healthy,
                before,
            ));
        }
        if model_step > 0.0 {
            candidates.extend(model::candidates(
                linear, rows, names, way, model_step, before, &rough,
            ));
        }
        // A number that could not be found explains nothing.
        candidates.retain(|one| one.number.is_none_or(f64::is_finite));
        for candidate in candidates {
            let after = rows.gap(&candidate.values);
            let left_over = after.share / before.share.max(f64::MIN_POSITIVE);
            if after.closes(before) && !(unnamed && may_be_a_method(linear, &candidate, model_step))
            {
                let one_more = ranked(candidate, left_over, *method, after.ratio);
                one.found.push(one_more);
            } else if exact
                && before.share >= STANDS_OUT * healthy
                && after.share <= 1.5 * healthy
                && left_over <= TAKES_AWAY
            {
                let one_more = ranked(candidate, left_over, None, after.share);
                one.loose.push(one_more);
            }
        }
        one.smooth = shape::noise(rows, names, &base);
        one
    };
    let all: Vec<Beside> = ways.par_iter().map(beside).collect();
    if all.iter().any(|one| one.explained) {
        return Vec::new();
    }
    let mut loose: Vec<Ranked> = Vec::new();
    let mut smooth: Option<Candidate> = None;
    for one in all {
        found.extend(one.found);
        loose.extend(one.loose);
        if let Some(candidate) = one.smooth
            && smooth
                .as_ref()
                .is_none_or(|known| candidate.number < known.number)
        {
            smooth = Some(candidate);
        }
    }
    if found.is_empty() {
        found = of_parameters(trouble, rows, &ways, (model_step, most), before);
    }
    if found.is_empty() {
        found = loose;
    }
    if found.is_empty() {
        found.extend(smooth.map(own));
    }
    found
}

/// Any method moves the rates of a model a little, by up to half of what the fastest mode
/// does in a step: a scale within that, on top of the exact solution or of a method that nobody
/// named, is no fault.
fn may_be_a_method(linear: &Linear, candidate: &Candidate, step: f64) -> bool {
    let least = 0.6 * linear.matrix.row_sum_norm() * step;
    let moves_more = |factor: f64| factor.ln().abs() > least;
    candidate.kind == Kind::RateScaled && !candidate.number.is_some_and(moves_more)
}

/// A parameter by a factor off, with the exact solution, the claimed method or, where none is
/// claimed, a usual one at work.
fn of_parameters(
    trouble: &Trouble,
    rows: &Rows,
    ways: &[(Way, Option<&'static Method>)],
    (step, most): (f64, usize),
    before: Gap,
) -> Vec<Ranked> {
    let wanted = ways.iter().filter(|(_, method)| {
        trouble.methods.is_empty() || method.is_none_or(|method| trouble.is_claimed(method))
    });
    let wanted: Vec<_> = wanted.collect();
    let each = wanted.par_iter().flat_map_iter(|(way, method)| {
        let found = rates::parameters(trouble.linear, trouble.parameters, rows, way, most);
        found.into_iter().filter_map(|candidate| {
            let after = rows.gap(&candidate.values);
            let left_over = after.share / before.share.max(f64::MIN_POSITIVE);
            let exact = matches!(way, Way::Exact);
            let tight = after.closes(before)
                && !(exact && may_be_a_method(trouble.linear, &candidate, step));
            tight.then(|| ranked(candidate, left_over, *method, after.ratio))
        })
    });
    each.collect()
}

/// What the claimed method leaves at the step, or forward Euler where none is claimed, or
/// backward Euler where that is not stable.
fn healthy_share(trouble: &Trouble, rows: &Rows, step: Option<f64>) -> f64 {
    let Some(step) = step else { return 1e-3 };
    let shares = |methods: &[&'static Method]| -> Option<f64> {
        let ways = methods
            .iter()
            .flat_map(|m| Stepping::all(m, trouble.linear, step));
        let shares = ways.filter_map(|stepping| {
            let values = trajectory(trouble.linear, rows, &Way::Stepped(stepping))?;
            Some(rows.error_of(&values)).filter(|share| *share < 1.0)
        });
        shares.reduce(f64::max)
    };
    let usual = |name: &str| find(name).and_then(|method| shares(&[method]));
    shares(trouble.methods)
        .or_else(|| usual("forward Euler"))
        .or_else(|| usual("backward Euler"))
        .unwrap_or(1e-2)
}

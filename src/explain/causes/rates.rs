//! Rates that are scaled: all of them, those of the states alone, those of one state, or what a
//! parameter of the case goes into, by a factor that is looked for.

use super::bench::{Rows, Way, trajectory};
use super::written::slip;
use super::{Candidate, Kind, Names};
use crate::method::Linear;
use crate::number::beside;

/// What is scaled: every rate, or that of one state.
#[derive(Clone, Copy, PartialEq)]
enum Scaled {
    All,
    Time,
    One(usize),
}

impl Scaled {
    fn apply(self, linear: &Linear, factor: f64) -> Linear {
        let mut scaled = linear.clone();
        let hit = |state: usize| match self {
            Scaled::One(one) => one == state,
            Scaled::All | Scaled::Time => true,
        };
        for state in (0..linear.size()).filter(|&state| hit(state)) {
            for column in 0..linear.size() {
                scaled.matrix[(state, column)] *= factor;
            }
            if self != Scaled::Time {
                scaled.drive[state].iter_mut().for_each(|d| *d *= factor);
                scaled.constant[state] *= factor;
            }
        }
        scaled
    }
}

/// Factors that are tried before the best of them is refined.
const FACTORS: [f64; 31] = [
    1e-3,
    3e-3,
    1e-2,
    1.0 / 60.0,
    0.03,
    0.1,
    0.159,
    0.3,
    0.5,
    0.7,
    0.8,
    0.9,
    0.95,
    0.99,
    0.999,
    1.001,
    1.01,
    1.05,
    1.1,
    1.2,
    1.5,
    2.0,
    3.0,
    std::f64::consts::TAU,
    10.0,
    30.0,
    60.0,
    100.0,
    300.0,
    1000.0,
    3600.0,
];

/// What may be scaled, each with the place of the factor that fits the exact solution best:
/// methods come about as close with one near to it.
pub(super) struct Rough(Vec<(Scaled, usize)>);

/// Places to either side that a method may prefer.
const ASIDE: usize = 3;

/// Solutions over a few rows that one thing scaled costs for each way to make the rows.
pub(super) const SOLUTIONS: usize = 80;

impl Rough {
    /// Of at most so many things that may be scaled.
    pub(super) fn new(linear: &Linear, rows: &Rows, most: usize) -> Rough {
        let mut kinds = vec![Scaled::All];
        if !linear.is_steady()
            || linear.constant.iter().any(|c| *c != 0.0)
            || !linear.signals.is_empty()
        {
            kinds.push(Scaled::Time);
        }
        if linear.size() > 1 {
            kinds.extend((0..linear.size()).map(Scaled::One));
        }
        kinds.truncate(most);
        let few = rows.few();
        let best = |scaled: Scaled| {
            let of = |factor: f64| Some(scaled.apply(linear, factor));
            let best = nearest(&of, &few, &Way::Exact, 0..FACTORS.len())?;
            Some((scaled, best))
        };
        Rough(kinds.into_iter().filter_map(best).collect())
    }
}

/// A model with something scaled by a factor.
type Family<'a> = dyn Fn(f64) -> Option<Linear> + 'a;

/// How far the rows are from a model with something scaled. Squares: smooth in the factor, so
/// that it can be refined.
fn miss(of: &Family, few: &Rows, way: &Way, factor: f64) -> f64 {
    let values = of(factor).and_then(|scaled| trajectory(&scaled, few, way));
    values.map_or(f64::INFINITY, |values| few.squares(&values))
}

/// The best of some factors.
fn nearest(of: &Family, few: &Rows, way: &Way, places: std::ops::Range<usize>) -> Option<usize> {
    let tried = places.map(|place| (place, miss(of, few, way, FACTORS[place])));
    let best = tried.min_by(|a, b| a.1.total_cmp(&b.1))?;
    best.1.is_finite().then_some(best.0)
}

/// The factor itself, from the best of the list on.
fn refined(of: &Family, few: &Rows, way: &Way, best: usize) -> Option<f64> {
    let low = FACTORS[best.saturating_sub(1)];
    let high = FACTORS[(best + 1).min(FACTORS.len() - 1)];
    let far = |x: f64| miss(of, few, way, x.exp());
    let factor = least(&far, low.ln(), high.ln()).exp();
    // Known slips are exact.
    let factor = [1e3, 60.0, 3600.0, std::f64::consts::TAU]
        .into_iter()
        .flat_map(|known| [known, 1.0 / known])
        .find(|known| (factor / known - 1.0).abs() < 2e-4)
        .unwrap_or(factor);
    ((factor - 1.0).abs() >= 1e-9).then_some(factor)
}

/// Rates that are scaled, by a factor that is looked for.
pub(super) fn candidates(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    way: &Way,
    rough: &Rough,
) -> Vec<Candidate> {
    let few = rows.few();
    let mut found = Vec::new();
    for &(scaled, rough) in &rough.0 {
        let of = |factor: f64| Some(scaled.apply(linear, factor));
        let near = rough.saturating_sub(ASIDE)..(rough + ASIDE + 1).min(FACTORS.len());
        let best = nearest(&of, &few, way, near);
        let Some(factor) = best.and_then(|best| refined(&of, &few, way, best)) else {
            continue;
        };
        let Some(values) = trajectory(&scaled.apply(linear, factor), rows, way) else {
            continue;
        };
        let what = match scaled {
            Scaled::All => "every rate is".to_owned(),
            Scaled::Time => "every coefficient of the states, but not the inputs, is".to_owned(),
            Scaled::One(state) => format!("the rate of `{}` is", names.states[state].0),
        };
        let text = format!("{what} scaled by {}", beside(factor, factor - 1.0));
        let text = with_slip(text, factor, "check the parameters that go into it");
        let complexity = if scaled == Scaled::All { 1 } else { 2 };
        found.push(Candidate::new(
            Kind::RateScaled,
            complexity,
            Some(factor),
            values,
            text,
        ));
    }
    found
}

fn with_slip(text: String, factor: f64, else_do: &str) -> String {
    match slip(factor) {
        Some(slip) => format!("{text}, as from a slip of units ({slip})"),
        None => format!("{text}; {else_do}"),
    }
}

/// Parameters of a case, as far as a hypothesis needs them.
pub struct Parameters<'a> {
    /// Their names.
    pub names: Vec<String>,
    /// The model with one of them multiplied by a factor; `None` where that is no model.
    pub scaled: &'a (dyn Fn(usize, f64) -> Option<Linear> + Sync),
}

impl std::fmt::Debug for Parameters<'_> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Parameters")
            .field("names", &self.names)
            .finish_non_exhaustive()
    }
}

/// One of the first so many parameters that was given to the model by a factor too large or
/// too small.
pub(super) fn parameters(
    linear: &Linear,
    parameters: &Parameters,
    rows: &Rows,
    way: &Way,
    most: usize,
) -> Vec<Candidate> {
    let few = rows.few();
    let one = |place: usize| {
        // When inputs act is asked for elsewhere.
        let of = |factor: f64| {
            let scaled = (parameters.scaled)(place, factor)?;
            (scaled.signals == linear.signals).then_some(scaled)
        };
        let best = nearest(&of, &few, way, 0..FACTORS.len())?;
        let factor = refined(&of, &few, way, best)?;
        let values = trajectory(&of(factor)?, rows, way)?;
        let name = &parameters.names[place];
        let text = format!(
            "parameter `{name}` is multiplied by {}",
            beside(factor, factor - 1.0)
        );
        Some(Candidate::new(
            Kind::RateScaled,
            2,
            Some(factor),
            values,
            with_slip(text, factor, "check its value"),
        ))
    };
    (0..parameters.names.len().min(most))
        .filter_map(one)
        .collect()
}

/// Where a smooth function of one number is least, by golden sections and a parabola.
fn least(function: &dyn Fn(f64) -> f64, low: f64, high: f64) -> f64 {
    let golden = 0.5 * (5f64.sqrt() - 1.0);
    let (mut a, mut b) = (low, high);
    let (mut c, mut d) = (b - golden * (b - a), a + golden * (b - a));
    let (mut fc, mut fd) = (function(c), function(d));
    for _ in 0..16 {
        if fc <= fd {
            (b, d, fd) = (d, c, fc);
            c = b - golden * (b - a);
            fc = function(c);
        } else {
            (a, c, fc) = (c, d, fd);
            d = a + golden * (b - a);
            fd = function(d);
        }
    }
    // Squares are flat about their least value, where golden sections see roundings: the
    // vertices of ever narrower parabolas are known better.
    let (mut middle, mut width) = (0.5 * (a + b), (b - a).max(1e-4));
    for _ in 0..4 {
        let (left, at, right) = (
            function(middle - width),
            function(middle),
            function(middle + width),
        );
        let bend = left - 2.0 * at + right;
        if bend > 0.0 && bend.is_finite() {
            middle += (0.5 * width * (left - right) / bend).clamp(-width, width);
        }
        width *= 0.1;
    }
    middle
}

//! Which case the files are likely to belong to.

use super::Model;
use super::assign::{Assigned, assign};
use super::clock::{Frame, frames};
use super::look::Looked;
use super::names::likeness;
use crate::case::Case;
use crate::outcome::{By, Cover, NO_FIT};

/// Candidates that are kept.
const MOST_KEPT: usize = 6;
/// Scores that differ by less than this, a factor of five in the error, are as good as
/// equal.
const NEARLY: f64 = 0.7;
/// Smaller errors are not told apart.
const LEAST_ERROR: f64 = 1e-9;

/// A case with its columns and how much speaks for it.
pub(super) struct Likely {
    pub model: Model,
    pub frame: Frame,
    /// The column of the time stamps.
    pub time: usize,
    pub assigned: Vec<Assigned>,
    /// Decades of error, less what names speak for it; the smallest is the likeliest.
    score: f64,
}

/// The likely cases, best first, and whether no case has a window that the stamps cover.
/// A case that the user has named needs no more than a column.
pub(super) fn rank(cases: Vec<Case>, looked: &Looked, is_stated: bool) -> (Vec<Likely>, bool) {
    let mut likely: Vec<Likely> = Vec::new();
    let mut no_window = true;
    for case in cases {
        let frames = frames(&case, &looked.clocks);
        let whole = frames.iter().any(|frame| frame.cover == Cover::Whole);
        no_window &= !(whole || is_stated && !frames.is_empty());
        // Without a window or a name in common there is nothing to go by, and exact
        // solutions take time.
        if !(whole || is_stated || !frames.is_empty() && shares_names(&case, looked)) {
            continue;
        }
        let Ok(exact) = case.exact() else { continue };
        let model = Model { case, exact };
        let best = frames
            .into_iter()
            .filter_map(|frame| judge(&model, looked, frame, is_stated))
            .min_by(|a, b| a.2.total_cmp(&b.2));
        if let Some((frame, assigned, score)) = best {
            likely.push(Likely {
                time: looked.clocks[frame.clock].column,
                model,
                frame,
                assigned,
                score,
            });
        }
    }
    // Cases come in the order of their names, which decides between equals.
    likely.sort_by(|a, b| a.score.total_cmp(&b.score));
    likely.truncate(MOST_KEPT);
    (likely, no_window)
}

/// How many of those after the first are nearly as likely.
pub(super) fn rivals(likely: &[Likely]) -> usize {
    let Some((first, rest)) = likely.split_first() else {
        return 0;
    };
    rest.iter()
        .take_while(|other| other.score - first.score < NEARLY)
        .count()
}

fn shares_names(case: &Case, looked: &Looked) -> bool {
    let channels = case.channels();
    let named = |column: usize| {
        let name = looked.header(column).map_or("", |(name, _)| name);
        channels.iter().any(|c| likeness(name, c.name).is_some())
    };
    (0..looked.layout.columns).any(named)
}

/// Columns and score of one reading of the stamps; `None` where nothing speaks for it.
fn judge(
    model: &Model,
    looked: &Looked,
    frame: Frame,
    is_stated: bool,
) -> Option<(Frame, Vec<Assigned>, f64)> {
    let assigned = assign(model, looked, &frame);
    let states = model.case.states.len();
    let is_state = |one: &&Assigned| one.channel < states;
    let named = |one: &&Assigned| matches!(one.by, By::Name | By::LikeName);
    let found = assigned.iter().filter(is_state).count();
    let names = assigned.iter().filter(named).count();
    let states_named = assigned.iter().filter(is_state).filter(named).count();
    let error = worst(&assigned);
    let fits = error.is_some_and(|error| error <= NO_FIT);
    let whole = frame.cover == Cover::Whole;
    // By fit alone, every state must be there and the window covered: of a case of many
    // states one or two fit anything.
    let by_fit = fits && (names > 0 || whole && found == states);
    let by_names = whole && states_named == states;
    if assigned.is_empty() || !(by_fit || by_names || is_stated) {
        return None;
    }
    let decades = error.map_or(2.0, |error| error.clamp(LEAST_ERROR, 100.0).log10());
    let data = looked.clocks[frame.clock].columns.len();
    let unused = data.saturating_sub(assigned.len());
    let units = assigned
        .iter()
        .filter(|one| one.reading.as_ref().is_some_and(|r| r.unit.is_some()))
        .count();
    // What is guessed costs, what is named counts: a name is worth two decades of error.
    let score = decades + if fits { 0.0 } else { 3.0 } - 2.0 * names as f64 / assigned.len() as f64
        + 0.5 * unused as f64
        + (states - found) as f64
        + 0.1 * units as f64
        + match (whole, frame.unit.is_some()) {
            (true, false) => 0.0,
            (true, true) => 0.1,
            (false, false) => 1.5,
            (false, true) => 3.5,
        };
    Some((frame, assigned, score))
}

/// Largest error of all that could be compared.
fn worst(assigned: &[Assigned]) -> Option<f64> {
    let errors = assigned
        .iter()
        .filter_map(|one| Some(one.reading.as_ref()?.error));
    errors.reduce(f64::max)
}

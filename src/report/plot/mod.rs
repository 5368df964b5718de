//! Plots of what an audit has found, as SVG for the HTML report.
//!
//! `axis` and `draw` know numbers and the page, `trajectory`, `ladder` and `evidence` know
//! what an outcome holds. Nothing here decides anything.

mod axis;
mod draw;
mod evidence;
mod ladder;
mod trajectory;

use maud::Markup;

use crate::outcome::{Audited, ChannelOutcome, Outcome, RunOutcome};
use crate::submission::Role;

/// All plots of a submission; further channels where there is room for them.
pub(super) fn of_submission(audited: &Audited, most_channels: usize) -> Vec<Markup> {
    let Some(run) = shown_run(audited) else {
        return Vec::new();
    };
    let mut plots: Vec<draw::Plot> = Vec::new();
    let mut channels: Vec<&ChannelOutcome> = run.channels.iter().collect();
    channels.sort_by(|a, b| super::table::worse(b, a));
    for channel in channels.into_iter().take(most_channels) {
        plots.extend(trajectory::values(audited, run, channel));
        plots.extend(trajectory::errors(audited, run, channel));
        plots.extend(ladder::orders(audited, channel));
    }
    plots.extend(evidence::consistent(audited));
    plots.extend(evidence::growth(audited));
    plots.iter().map(draw::Plot::draw).collect()
}

/// Work against precision, a plot for each case with stated costs.
pub(super) fn of_costs(outcome: &Outcome) -> Vec<Markup> {
    let plots = ladder::costs(outcome);
    plots.iter().map(draw::Plot::draw).collect()
}

/// The run that the table shows: the result with the worst channel.
fn shown_run(audited: &Audited) -> Option<&RunOutcome> {
    let results = audited.runs.iter().filter(|run| run.role == Role::Result);
    let channels = results
        .clone()
        .flat_map(|run| run.channels.iter().map(move |c| (run, c)));
    let worst = channels.max_by(|a, b| super::table::worse(a.1, b.1));
    let first = || results.clone().next().or(audited.runs.first());
    worst.map(|(run, _)| run).or_else(first)
}

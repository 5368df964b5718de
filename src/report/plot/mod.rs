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

use crate::outcome::{Audited, ChannelOutcome, Outcome};

/// All plots of a submission; further channels where there is room for them.
pub(super) fn of_submission(audited: &Audited, most_channels: usize) -> Vec<Markup> {
    let shown = super::table::decisive(audited).0;
    let Some(run) = shown.or(audited.runs.first()) else {
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

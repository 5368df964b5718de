//! Ladders of error settings: what codes that adapt their step make of them.

use super::run::RunCompared;
use super::verdict::rung;
use crate::case::Case;
use crate::explain;
use crate::outcome::{Audited, OrderOutcome, SettingRung, SettingsOutcome};
use crate::submission::Setting;

/// An error counts where it stands this many times above its doubt, as for orders.
const CLEAR: f64 = 2.5;

/// Fills in the settings, channel by channel; a single run with a setting has them too.
pub(super) fn settings(case: &Case, runs: &[RunCompared], audited: &mut Audited) {
    let adapts = |run: &RunCompared| matches!(run.outcome.setting, Setting::Tolerance(_));
    if runs.is_empty() || !runs.iter().all(adapts) {
        return;
    }
    for (index, channel) in case.channels().iter().enumerate() {
        let order = audited.orders.iter().find(|o| o.channel == channel.name);
        let settings = of_channel(channel.name, index, runs, order);
        audited.settings.extend(settings);
    }
}

fn of_channel(
    name: &str,
    channel: usize,
    runs: &[RunCompared],
    order: Option<&OrderOutcome>,
) -> Option<SettingsOutcome> {
    let mut rungs = Vec::new();
    for run in runs {
        let Some(seen) = rung(run, channel) else {
            continue;
        };
        let (_, deviation) = run.deviations.iter().find(|(index, _)| *index == channel)?;
        let doubt = seen.resolution + seen.rounding();
        let rung = SettingRung {
            file: run.outcome.file.clone(),
            setting: seen.setting,
            error: seen.error,
            ratio: seen.error / seen.setting,
            counts: seen.error.is_finite() && seen.error >= CLEAR * doubt,
        };
        rungs.push((rung, deviation.margin.used));
    }
    rungs.sort_by(|(a, _), (b, _)| b.setting.total_cmp(&a.setting));
    let slope = order.and_then(|order| order.observed);
    let finest = rungs.iter().rfind(|(rung, _)| rung.counts);
    let needed = finest.zip(slope).and_then(|((rung, used), (slope, ..))| {
        explain::needed_setting(rung.setting, *used, slope)
    });
    let rungs: Vec<SettingRung> = rungs.into_iter().map(|(rung, _)| rung).collect();
    if rungs.is_empty() {
        return None;
    }
    let ratios = || {
        rungs
            .iter()
            .filter(|rung| rung.counts)
            .map(|rung| rung.ratio)
    };
    let (least, most) = (
        ratios().fold(f64::INFINITY, f64::min),
        ratios().fold(0.0, f64::max),
    );
    let spread = (ratios().count() > 1 && least > 0.0).then(|| most / least);
    let proportional = slope
        .zip(spread)
        .map(|((slope, ..), spread)| explain::is_proportional(slope, spread));
    let steep = slope.map(|(slope, ..)| slope);
    Some(SettingsOutcome {
        channel: name.to_owned(),
        text: explain::settings_text(name, &rungs, steep, proportional, needed),
        rungs,
        slope,
        spread,
        proportional,
        needed,
    })
}

//! One run of a submission: open, match, survey, compare.

use super::Model;
use super::curves::plot_points;
use super::keep::Keeping;
use crate::case::Case;
use crate::compare::{Compared, Comparison, Deviation, Limit, Spot};
use crate::fault::Fault;
use crate::judge;
use crate::method::{LATER_ROWS, Record, next_wanted};
use crate::number::{Conversion, counted};
use crate::outcome::{ChannelOutcome, ErrorOutcome, RowOutcome, RunOutcome};
use crate::submission::{
    Column, LimitsStated, Matched, Role, Run, Setting, Submission, match_columns,
};
use crate::trajectory::{Crew, Findings, Grid, Kind, Source};

/// One run with what the ladder needs of it.
pub(super) struct RunCompared {
    pub outcome: RunOutcome,
    pub role_stated: Option<Role>,
    /// Channel of the case and its errors.
    pub deviations: Vec<(usize, Deviation)>,
    /// The time stamp of largest size, in the unit of the case.
    pub latest: f64,
    /// Spacing of the rows in the unit of the case, where it is uniform.
    pub spacing: Option<f64>,
    /// Rows that are asked for their method.
    pub record: Record,
    /// Size of the file.
    pub bytes: u64,
}

/// The limit of one channel: what the submission states, else what the case has. A
/// submission that states one part of a limit has stated all of it.
pub(super) fn limit(case: &Case, stated: &LimitsStated, channel: &str) -> Limit {
    let own = stated.channels.get(channel).copied().unwrap_or_default();
    let general = stated.general;
    let own_states = own.absolute.is_some() || own.relative.is_some();
    let general_states = general.absolute.is_some() || general.relative.is_some();
    let of_peak = own.of_peak.or(general.of_peak).unwrap_or(false);
    let part = |own: Option<f64>, general: Option<f64>, case: f64| {
        if own_states || general_states {
            own.or(general).unwrap_or(0.0)
        } else {
            case
        }
    };
    Limit {
        absolute: part(own.absolute, general.absolute, case.limits.absolute),
        relative: part(own.relative, general.relative, case.limits.relative),
        of_peak,
    }
}

pub(super) fn compare(
    run: &Run,
    submission: &Submission,
    model: &Model,
    how: (bool, &Crew),
    notes: &mut Vec<String>,
) -> Result<RunCompared, Fault> {
    let source = run.open()?;
    let compared = compare_with(&source, run, submission, model, how, notes);
    // Before any complaint: a line that is cut may only not have been written to its end yet.
    source.is_unchanged()?;
    compared
}

fn compare_with(
    source: &Source,
    run: &Run,
    submission: &Submission,
    model: &Model,
    (traced, crew): (bool, &Crew),
    notes: &mut Vec<String>,
) -> Result<RunCompared, Fault> {
    let placed = |fault: Fault| fault.in_file(&run.path);
    let step = run.setting.step();
    let mut outcome = RunOutcome {
        file: run.file.clone(),
        role: run.role.unwrap_or(Role::Result),
        setting: run.setting,
        step,
        cost: run.cost,
        rows: 0,
        layout: "no rows".to_owned(),
        stamps: String::new(),
        findings: Vec::new(),
        channels: Vec::new(),
    };
    let mut findings = Findings::default();
    let Some(layout) = source.layout(&submission.layout).map_err(placed)? else {
        findings.fatal(Kind::EmptyFile, None, "the file has no rows of numbers");
        outcome.findings = findings.into_list();
        return Ok(RunCompared {
            outcome,
            role_stated: run.role,
            deviations: Vec::new(),
            latest: 0.0,
            spacing: None,
            record: Record::default(),
            bytes: source.size(),
        });
    };
    let matched = match_columns(&model.case, &layout, &submission.columns)?;
    for (channel, reason) in &matched.missing {
        findings.fatal(
            Kind::ColumnMissing,
            None,
            format!("`{channel}` is missing: {reason}"),
        );
    }
    for left in source.left_out() {
        notes.push(format!("{}: {left}", run.file));
    }
    for note in &matched.notes {
        if !notes.contains(note) {
            notes.push(note.clone());
        }
    }
    outcome.layout = layout.describe();
    let names: Vec<_> = model.case.channels();
    let channels: Vec<_> = matched
        .channels
        .iter()
        .map(|c| {
            (
                c.channel,
                c.conversion,
                limit(&model.case, &submission.limits, names[c.channel].name),
            )
        })
        .collect();
    let comparison = Comparison {
        exact: &model.exact,
        source,
        layout: &layout,
        selection: &matched.selection(),
        stated: &submission.layout,
        time: matched.time_conversion,
        channels: &channels,
        step,
        least_rows: model.case.time.least_rows,
        time_unit: &model.case.time.unit,
        traced,
        next_wanted: &next_wanted,
        last_rows: LATER_ROWS as usize,
        crew,
    };
    let mut compared = comparison.run(&mut findings).map_err(placed)?;
    let survey = &compared.survey;
    outcome.stamps = match survey.grid {
        Grid::Uniform { exact: Some(_), .. } => "an exact grid".to_owned(),
        _ => survey.time.describe(),
    };
    let columns = channels.iter().map(|&(c, conversion, _)| (c, conversion));
    let keeping = Keeping::new(&mut compared, columns.collect());
    let record = keeping.conclude(&compared, matched.time_conversion, step);
    if channels.is_empty() {
        let text = "no column of the file is a channel of the case";
        findings.fatal(Kind::ColumnMissing, None, text);
    }
    if compared.outside > 0 {
        notes.push(format!(
            "{}: {} outside the window not compared",
            run.file,
            counted(compared.outside, "row")
        ));
    }
    outcome.step = step.or(compared
        .spacing
        .filter(|_| run.setting == Setting::Unstated));
    outcome.rows = compared.rows;
    outcome.findings = findings.into_list();
    outcome.channels = channel_outcomes(model, &matched, &compared, &channels);
    let spacing = compared.spacing;
    let time = &model.case.time;
    let latest = time.from.to_f64().abs().max(time.to.to_f64().abs());
    let deviations = matched
        .channels
        .iter()
        .map(|c| c.channel)
        .zip(compared.channels)
        .collect();
    Ok(RunCompared {
        outcome,
        role_stated: run.role,
        deviations,
        latest,
        spacing,
        record,
        bytes: source.size(),
    })
}

fn channel_outcomes(
    model: &Model,
    matched: &Matched,
    compared: &Compared,
    limits: &[(usize, Conversion, Limit)],
) -> Vec<ChannelOutcome> {
    let channels = model.case.channels();
    let outcome = |(place, (column, deviation)): (usize, (&Column, &Deviation))| {
        let digits = deviation.resolution.describe();
        let errors = (deviation.rows > 0).then_some(ErrorOutcome {
            worst: deviation.worst,
            at: deviation.worst_at,
            rms: deviation.rms,
            end: deviation.end,
            peak: deviation.peak,
            resolution: deviation.worst_resolution,
            digits,
            limit: deviation.worst_limit,
            limit_used: deviation.margin.used,
            decisive: row(&deviation.decisive),
            doubtful: row(&deviation.doubtful),
            broken: deviation.margin.broken > 0.0,
        });
        let channel = &channels[column.channel];
        ChannelOutcome {
            name: channel.name.to_owned(),
            unit: channel.unit.to_owned(),
            errors,
            verdict: judge::of_deviation(deviation, compared.rows),
            trace: compared.traces.get(place).map_or(Vec::new(), |traced| {
                plot_points(traced, deviation, &limits[place].2)
            }),
        }
    };
    matched
        .channels
        .iter()
        .zip(&compared.channels)
        .enumerate()
        .map(outcome)
        .collect()
}

fn row(spot: &Spot) -> RowOutcome {
    let Spot {
        at,
        error,
        resolution,
        limit,
    } = *spot;
    RowOutcome {
        at,
        error,
        resolution,
        limit,
    }
}

//! The likely cases laid beside every row, as an audit does, and the runs with their steps.

use super::assign::Assigned;
use super::look::Looked;
use super::rank::Likely;
use crate::compare::{Compared, Comparison, Limit};
use crate::fault::Fault;
use crate::number::{Conversion, Double};
use crate::outcome::{By, Candidate, ColumnGuess, DraftRun, Step};
use crate::submission::convert;
use crate::trajectory::{Crew, Findings, Grid, Resolution, Selection, Stated, Survey};

/// Faults of one file that are told.
const MOST_FAULTS: usize = 3;

/// The candidates with their errors in the finest run, and all runs.
pub(super) fn conclude(
    likely: &[Likely],
    files: &[Looked],
) -> Result<(Vec<Candidate>, Vec<DraftRun>), Vec<Fault>> {
    let finest = super::look::finest(files);
    let mut candidates = Vec::new();
    for one in likely {
        let beside = Beside::new(one, finest).map_err(|fault| vec![fault])?;
        candidates.push(candidate(one, finest, &beside));
    }
    let mut runs = Vec::new();
    for file in files {
        runs.push(run(likely.first(), file).map_err(|fault| vec![fault.in_file(&file.path)])?);
    }
    tell_shared_steps(&mut runs);
    Ok((candidates, runs))
}

/// One file beside the exact solution of one case.
struct Beside {
    survey: Survey,
    compared: Compared,
    findings: Findings,
    step: Option<f64>,
}

impl Beside {
    fn new(likely: &Likely, looked: &Looked) -> Result<Beside, Fault> {
        let placed = |fault: Fault| fault.in_file(&looked.path);
        let case = &likely.model.case;
        let names = case.channels();
        let selection = Selection {
            time: likely.time,
            channels: likely.assigned.iter().map(|one| one.column).collect(),
        };
        let stated = Stated::default();
        let survey = Survey::new(
            &looked.source,
            looked.layout.clone(),
            selection.clone(),
            &stated,
        );
        let survey = survey.map_err(placed)?;
        let limit = Limit {
            absolute: case.limits.absolute,
            relative: case.limits.relative,
            of_peak: false,
        };
        let conversion = |one: &Assigned| likely.conversion(looked, one, names[one.channel].unit);
        let channels = likely.assigned.iter();
        let channels: Vec<_> = channels
            .map(|one| (one.channel, conversion(one), limit))
            .collect();
        let step = step(&survey, likely);
        let comparison = Comparison {
            exact: &likely.model.exact,
            source: &looked.source,
            layout: &looked.layout,
            selection: &selection,
            stated: &stated,
            time: likely.frame.conversion,
            channels: &channels,
            step,
            least_rows: case.time.least_rows,
            time_unit: &case.time.unit,
            traced: false,
            next_wanted: &|_| u64::MAX,
            last_rows: 0,
            crew: &Crew::default(),
        };
        let mut findings = Findings::default();
        let compared = comparison.run(&mut findings).map_err(placed)?;
        Ok(Beside {
            survey,
            compared,
            findings,
            step,
        })
    }

    /// Largest error of a channel as a share of its peak.
    fn share(&self, place: usize) -> Option<f64> {
        let deviation = self.compared.channels.get(place)?;
        let share = deviation.worst / deviation.peak;
        (deviation.rows > 0 && share.is_finite()).then_some(share)
    }

    fn worst(&self) -> Option<(usize, f64)> {
        let shares = (0..self.compared.channels.len()).filter_map(|i| Some((i, self.share(i)?)));
        shares.max_by(|a, b| a.1.total_cmp(&b.1))
    }
}

impl Likely {
    /// From the unit that is stated, or that of the header.
    fn conversion(&self, looked: &Looked, one: &Assigned, target: &str) -> Conversion {
        let stated = one.reading.as_ref().and_then(|r| r.unit.as_deref());
        let header = || looked.header(one.column).and_then(|(_, unit)| unit);
        let unit = stated.or_else(header);
        let conversion = unit.and_then(|unit| convert(unit, target).ok());
        conversion.unwrap_or(Conversion::NONE)
    }
}

fn candidate(likely: &Likely, looked: &Looked, beside: &Beside) -> Candidate {
    let case = &likely.model.case;
    let channels = case.channels();
    let time = likely.time;
    let is_missing = |state: &usize| likely.assigned.iter().all(|one| one.channel != *state);
    let missing = (0..case.states.len()).filter(is_missing);
    let unused = (0..looked.layout.columns)
        .filter(|&column| column != time)
        .filter(|&column| likely.assigned.iter().all(|one| one.column != column));
    let guesses = likely.assigned.iter().enumerate().map(|(place, one)| {
        let channel = &channels[one.channel];
        let reading = one.reading.as_ref();
        let mut rivals: Vec<String> = one.rivals.iter().map(|&c| looked.in_words(c)).collect();
        let units = reading.map_or(&[][..], |reading| &reading.rivals);
        rivals.extend(units.iter().map(|unit| format!("the unit {unit}")));
        ColumnGuess {
            channel: channel.name.to_owned(),
            is_state: channel.is_state,
            column: looked.column_name(one.column),
            unit: channel.unit.to_owned(),
            unit_guessed: reading.and_then(|reading| reading.unit.clone()),
            unit_of_header: unit_of_header(looked, one.column),
            by: one.by,
            error: beside.share(place),
            rivals,
            fits_in: one.fits_in.clone(),
        }
    });
    Candidate {
        case: case.name.clone(),
        title: case.title.clone(),
        time_unit: case.time.unit.clone(),
        window: (case.time.from.to_f64(), case.time.to.to_f64()),
        limits: (case.limits.absolute, case.limits.relative),
        states: case.states.len(),
        time: time_guess(likely, looked, time),
        channels: guesses.collect(),
        missing: missing
            .map(|state| channels[state].name.to_owned())
            .collect(),
        unused: unused.map(|column| looked.in_words(column)).collect(),
        error: beside.worst().map(|(_, error)| error),
        cover: likely.frame.cover,
    }
}

fn unit_of_header(looked: &Looked, column: usize) -> Option<String> {
    let (_, unit) = looked.header(column)?;
    unit.map(str::to_owned)
}

fn time_guess(likely: &Likely, looked: &Looked, column: usize) -> ColumnGuess {
    let is_named = looked.clocks.first().is_some_and(|clock| clock.is_named);
    let has_header = looked.layout.names.is_some();
    let like = looked
        .header(column)
        .is_some_and(|(name, _)| super::names::is_like_time(name));
    ColumnGuess {
        channel: "time".to_owned(),
        is_state: false,
        column: looked.column_name(column),
        unit: likely.model.case.time.unit.clone(),
        unit_guessed: likely.frame.unit.clone(),
        unit_of_header: unit_of_header(looked, column),
        by: match (is_named, like, has_header) {
            (true, ..) => By::Name,
            (_, true, _) => By::LikeName,
            (_, _, false) if column == 0 => By::Position,
            _ => By::Fit,
        },
        error: None,
        rivals: Vec::new(),
        fits_in: None,
    }
}

fn run(likely: Option<&Likely>, looked: &Looked) -> Result<DraftRun, Fault> {
    let clock = looked.clocks.first();
    let mut run = DraftRun {
        file: looked.file.clone(),
        rows: clock.map_or(0, |clock| clock.rows),
        stamps: clock.map_or((0.0, 0.0), |clock| (clock.first, clock.last)),
        layout: looked.layout.describe(),
        digits: Vec::new(),
        digits_open: None,
        step: Step::Varied,
        worst: None,
        faults: Vec::new(),
    };
    let Some(likely) = likely else {
        return Ok(run);
    };
    let beside = Beside::new(likely, looked)?;
    let channels = likely.model.case.channels();
    run.rows = beside.survey.rows;
    run.step = beside.step.map_or(Step::Varied, Step::Read);
    run.worst = beside.worst().map(|(place, error)| {
        let channel = likely.assigned[place].channel;
        (error, channels[channel].name.to_owned())
    });
    for (resolution, longest) in beside.survey.channels.iter().zip(&beside.survey.longest) {
        let words = resolution.describe();
        if !run.digits.contains(&words) {
            run.digits.push(words);
        }
        if *resolution == Resolution::Full && longest.is_some() {
            run.digits_open = run.digits_open.max(*longest);
        }
    }
    let fatal = beside.findings.into_list();
    let fatal = fatal.into_iter().filter(|finding| finding.fatal);
    let faults = fatal.map(|finding| match finding.line {
        Some(line) => format!("line {line}: {}", finding.text),
        None => finding.text,
    });
    run.faults = faults.take(MOST_FAULTS).collect();
    Ok(run)
}

/// The spacing of evenly spaced rows in the unit of the case: as a decimal where the stamps
/// are exact, else the whole part of the window that it is.
fn step(survey: &Survey, likely: &Likely) -> Option<f64> {
    let Grid::Uniform { spacing, exact, .. } = survey.grid else {
        return None;
    };
    let conversion = likely.frame.conversion;
    if let Some(exact) = exact {
        return Some((exact.to_double() * conversion.factor).to_f64());
    }
    let spacing = conversion.stretch(spacing);
    let time = &likely.model.case.time;
    let span = (time.to - time.from).to_f64();
    let count = (span / spacing).round();
    let rounding = conversion.stretch(survey.time.at(span)) + 1e-9 * span;
    let divides = count >= 1.0 && (count * spacing - span).abs() <= rounding.max(0.02 * spacing);
    let whole = || ((time.to - time.from) / Double::from(count)).to_f64();
    Some(if divides { whole() } else { spacing })
}

/// Runs of the same spacing cannot all be apart by their step.
fn tell_shared_steps(runs: &mut [DraftRun]) {
    let steps: Vec<Step> = runs.iter().map(|run| run.step).collect();
    for (index, run) in runs.iter_mut().enumerate() {
        if let Step::Read(step) = run.step {
            let twin = |(other, known): (usize, &Step)| {
                let same = matches!(known, Step::Read(known) if (known / step - 1.0).abs() < 1e-9);
                other != index && same
            };
            if steps.iter().enumerate().any(twin) {
                run.step = Step::Shared(step);
            }
        }
    }
}

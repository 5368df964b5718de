//! What will be done: submissions found and read, single files turned into
//! submissions, limits of the command line put in.

use std::collections::BTreeMap;
use std::path::PathBuf;

use super::args::{AuditArguments, RelativeTo, Sources};
use super::reports;
use super::reviewer::Reviewer;
use crate::audit::{Plan, Planned, Reviewed};
use crate::case::{Library, Replacements};
use crate::fault::{Fault, quoted};
use crate::number::plain;
use crate::outcome::{LimitsFrom, NotAudited};
use crate::submission::{
    Claims, ColumnName, ColumnStated, Expect, Found, LimitStated, LimitsStated,
    MOST_SUBMISSION_BYTES, Place, Run, Setting, Submission, discover,
};
use crate::trajectory::Stated;

/// The library with the folders that the user names.
pub(super) fn library(sources: &Sources) -> Result<Library, Vec<Fault>> {
    let mut library = Library::new();
    for folder in &sources.cases {
        library.add_folder(folder)?;
    }
    Ok(library)
}

/// How many threads can work at once.
pub(super) fn processors() -> usize {
    std::thread::available_parallelism().map_or(1, usize::from)
}

/// The plan of an audit, the reviewer who judges what came of it, and what to know of the
/// search.
///
/// # Errors
/// What keeps the whole audit from being done; a single submission that cannot be read
/// is part of the plan.
pub(super) fn plan(arguments: &AuditArguments) -> Result<(Plan, Reviewer, Vec<Fault>), Vec<Fault>> {
    let library = library(&arguments.sources)?;
    let reviewer = Reviewer::read(arguments, &library)?;
    let threads = match arguments.threads {
        Some(threads) => usize::from(threads),
        None => processors(),
    };
    let mut plan = Plan {
        library,
        submissions: Vec::new(),
        unreadable: Vec::new(),
        threads,
        traced: reports::any_plots(&arguments.write),
        part: None,
    };
    let mut notes = Vec::new();
    match &arguments.case {
        Some(case) => single_files(case, arguments, &mut plan)?,
        None => notes = submissions(arguments, &mut plan)?,
    }
    for planned in &mut plan.submissions {
        reviewer.review(planned, &plan.library);
        limits_of_command_line(planned, arguments);
    }
    Ok((plan, reviewer, notes))
}

fn single_files(case: &str, arguments: &AuditArguments, plan: &mut Plan) -> Result<(), Vec<Fault>> {
    let parameters: Replacements = arguments.parameters.iter().cloned().collect();
    // A case that is not there would otherwise be complained of once for every file.
    plan.library.load(case, &parameters)?;
    if arguments.step.is_some() && arguments.paths.len() > 1 {
        let fault = Fault::new("--step goes with one file, several were given");
        return Err(vec![
            fault.help("write a submission.toml with a step for each run"),
        ]);
    }
    let mut columns = BTreeMap::new();
    for (channel, column) in &arguments.columns {
        let name = match column.parse::<usize>() {
            Ok(number) if number > 0 => ColumnName::Number(number),
            _ => ColumnName::Name(column.clone()),
        };
        let stated = ColumnStated {
            column: Some(name),
            unit: None,
            place: None,
        };
        if columns.insert(channel.clone(), stated).is_some() {
            let text = format!("--column is given twice for {}", quoted(channel));
            return Err(vec![Fault::new(text)]);
        }
    }
    let mut faults = Vec::new();
    for path in &arguments.paths {
        if path.is_dir() {
            let fault = Fault::new("--case goes with trajectory files, this is a folder");
            faults.push(
                fault
                    .help("leave --case out to audit its submissions")
                    .in_file(path),
            );
            continue;
        }
        if !path.exists() {
            faults.push(Fault::new("there is no such file").in_file(path));
            continue;
        }
        let file = path
            .file_name()
            .unwrap_or_default()
            .to_string_lossy()
            .into_owned();
        let setting = arguments.step.map_or(Setting::Unstated, Setting::Step);
        let submission = Submission {
            case: Some(case.to_owned()),
            producer: None,
            expect: Expect::Pass,
            parameters: parameters.clone(),
            claims: Claims::default(),
            limits: LimitsStated::default(),
            columns: columns.clone(),
            layout: Stated::default(),
            places: BTreeMap::new(),
            runs: vec![Run {
                file,
                path: path.clone(),
                setting,
                cost: None,
                role: None,
                text: None,
            }],
        };
        let name = path.to_string_lossy().into_owned();
        plan.submissions.push(planned(name, None, submission));
    }
    if faults.is_empty() {
        Ok(())
    } else {
        Err(faults)
    }
}

/// Puts the submissions below the paths into the plan; what to know of the search.
fn submissions(arguments: &AuditArguments, plan: &mut Plan) -> Result<Vec<Fault>, Vec<Fault>> {
    let prefix = arguments.paths.len() > 1;
    let mut places: Vec<Place> = Vec::new();
    let (mut faults, mut notes) = (Vec::new(), Vec::new());
    let paths = arguments.paths.iter();
    let audited: Vec<PathBuf> = paths.filter_map(|path| path.canonicalize().ok()).collect();
    for path in &arguments.paths {
        match discover(path, prefix, &audited) {
            Ok(found) => {
                places.extend(found.places);
                notes.extend(found.notes);
            }
            Err(fault) => faults.push(fault),
        }
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    places.sort();
    places.dedup();
    for place in places.iter().filter(|place| place.is == Found::Submission) {
        if place.file.extension().is_none_or(|ending| ending != "toml") {
            let fault = Fault::new("this is no submission").in_file(&place.file);
            let help = "name the case with `--case`, or write a submission.toml beside it";
            return Err(vec![fault.help(help)]);
        }
    }
    for place in places {
        match read(&place) {
            Ok(submission) => {
                let one = planned(place.name, Some(place.file), submission);
                plan.submissions.push(one);
            }
            Err(faults) => {
                let faults = faults
                    .into_iter()
                    .map(|fault| fault.in_file(&place.file))
                    .collect();
                plan.unreadable.push(NotAudited {
                    name: place.name,
                    faults,
                });
            }
        }
    }
    Ok(notes)
}

fn read(place: &Place) -> Result<Submission, Vec<Fault>> {
    let path = &place.file;
    place.is.plain().map_err(|fault| vec![fault])?;
    let io = |error: std::io::Error| vec![Fault::io(path, &error)];
    let size = std::fs::metadata(path).map_err(io)?.len();
    if size > MOST_SUBMISSION_BYTES {
        let text = format!("has {size} bytes, at most {MOST_SUBMISSION_BYTES} are read");
        return Err(vec![Fault::new(text)]);
    }
    let bytes = std::fs::read(path).map_err(io)?;
    let text = String::from_utf8(bytes).map_err(|error| {
        let valid = error.utf8_error().valid_up_to();
        let text = String::from_utf8_lossy(&error.as_bytes()[..valid]).into_owned();
        let help = "save it as UTF-8; if it is a trajectory, name the case with `--case`";
        vec![
            Fault::new("this is not UTF-8 text")
                .help(help)
                .at_offset(&text, valid),
        ]
    })?;
    Submission::parse(&text, &place.folder)
}

/// Before what is laid down.
fn planned(name: String, file: Option<PathBuf>, submission: Submission) -> Planned {
    Planned {
        name,
        file,
        submission,
        reviewed: Reviewed::default(),
    }
}

/// Limits of the command line go before all others, those of channels included.
fn limits_of_command_line(planned: &mut Planned, arguments: &AuditArguments) {
    let limits = &mut planned.submission.limits;
    let of_peak = arguments
        .relative_to
        .map(|what| what == RelativeTo::Peak)
        .or(limits.general.of_peak);
    if arguments.absolute.is_none() && arguments.relative.is_none() {
        limits.general.of_peak = of_peak;
        return;
    }
    limits.general = LimitStated {
        absolute: arguments.absolute,
        relative: arguments.relative,
        of_peak,
    };
    limits.channels.clear();
    let reviewed = &mut planned.reviewed;
    if let Some(slack) = limits.order_slack
        && reviewed.limits_from.is_none()
    {
        let slack = plain(slack);
        reviewed.notes.push(format!(
            "`order_slack = {slack}` is the submission's own, the limits are not"
        ));
    }
    reviewed.limits_from = Some(LimitsFrom::CommandLine);
}

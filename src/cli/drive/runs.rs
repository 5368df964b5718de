//! All runs of a plan, several at a time, each in a folder of its own; what failed is told
//! and ends nothing else.

use std::collections::BTreeMap;
use std::ffi::OsString;
use std::io::ErrorKind;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};
use std::sync::{Mutex, PoisonError};

use super::plan::{Chosen, DrivePlan};
use super::process::{End, Finished, run};
use super::words::Filling;
use crate::fault::{Fault, escaped};
use crate::number::plain;
use crate::report::write_atomically;

/// The file that a run writes.
pub(super) const TRAJECTORY: &str = "trajectory.csv";
/// What a run has written that failed: out of the way of an audit.
const UNFINISHED: &str = "unfinished-trajectory.csv";
/// Lines of a failed run that are shown.
const MOST_LINES: usize = 5;
/// Characters of such a line.
const MOST_CHARACTERS: usize = 120;

/// For each case and step what went wrong, if anything.
pub(super) type Failures = Vec<Vec<Option<String>>>;

/// The folder of a run within the folder of its case.
pub(super) fn run_name(step: f64) -> String {
    format!("step-{}", plain(step))
}

/// Runs the command for every case and step. The order of the results is that of the plan.
///
/// # Errors
/// A command that cannot be started, folders that cannot be written to.
pub(super) fn run_all(plan: &DrivePlan, root: &Path, stop: &AtomicBool) -> Result<Failures, Fault> {
    let pairs: Vec<(&Chosen, f64)> = (plan.cases.iter())
        .flat_map(|chosen| chosen.steps.iter().map(move |&step| (chosen, step)))
        .collect();
    let next = AtomicUsize::new(0);
    let done = Mutex::new(BTreeMap::new());
    let fault = Mutex::new(None);
    let broken = AtomicBool::new(false);
    let work = || {
        while !broken.load(Ordering::Relaxed) && !stop.load(Ordering::Relaxed) {
            let index = next.fetch_add(1, Ordering::Relaxed);
            let Some(&(chosen, step)) = pairs.get(index) else {
                break;
            };
            match run_one(plan, chosen, step, root, stop) {
                Ok(failure) => {
                    let mut done = done.lock().unwrap_or_else(PoisonError::into_inner);
                    done.insert(index, failure);
                }
                Err(found) => {
                    let mut fault = fault.lock().unwrap_or_else(PoisonError::into_inner);
                    fault.get_or_insert(found);
                    broken.store(true, Ordering::Relaxed);
                }
            }
        }
    };
    std::thread::scope(|scope| {
        for _ in 0..plan.jobs.min(pairs.len()) {
            scope.spawn(work);
        }
    });
    if let Some(fault) = fault.into_inner().unwrap_or_else(PoisonError::into_inner) {
        return Err(fault);
    }
    if stop.load(Ordering::Relaxed) {
        return Err(Fault::new(
            "stopped before all runs were made; nothing was audited",
        ));
    }
    let mut results = done
        .into_inner()
        .unwrap_or_else(PoisonError::into_inner)
        .into_values();
    let of_case = |chosen: &Chosen| results.by_ref().take(chosen.steps.len()).collect();
    Ok(plan.cases.iter().map(of_case).collect())
}

fn run_one(
    plan: &DrivePlan,
    chosen: &Chosen,
    step: f64,
    root: &Path,
    stop: &AtomicBool,
) -> Result<Option<String>, Fault> {
    let folder = root.join(&chosen.case.name).join(run_name(step));
    let (case, output) = (folder.join("case.json"), folder.join(TRAJECTORY));
    std::fs::create_dir_all(&folder).map_err(|error| unwritten(&folder, &error))?;
    write(&case, chosen.json.as_bytes())?;
    let step_text = plain(step);
    let filling = Filling {
        case: &case,
        step: &step_text,
        output: &output,
        plan: &plan.folder,
    };
    let words: Vec<OsString> = plan
        .command
        .iter()
        .map(|word| word.fill(&filling))
        .collect();
    let finished = match run(&words, &folder, plan.time_limit, stop) {
        Ok(finished) => finished,
        Err(error)
            if matches!(
                error.kind(),
                ErrorKind::NotFound | ErrorKind::PermissionDenied
            ) =>
        {
            return Err(unstarted(plan, &words, &error));
        }
        // Such as too many processes at once: another run may fare better.
        Err(error) => {
            let name = run_name(step);
            return Ok(Some(format!(
                "{name}: the command could not be run: {error}"
            )));
        }
    };
    let failure = failure(plan, &finished, &output);
    let aside = folder.join(UNFINISHED);
    let kept = write(&folder.join("output.txt"), &finished.output.to_file())
        .and_then(|()| write(&folder.join("errors.txt"), &finished.errors.to_file()))
        .and_then(
            |()| match failure.is_some() && output.symlink_metadata().is_ok() {
                true => std::fs::rename(&output, &aside).map_err(|error| unwritten(&aside, &error)),
                false => Ok(()),
            },
        );
    // What a command has made of its folder is its own failure.
    let failure = failure.or_else(|| {
        let fault = kept.err()?;
        Some(format!(
            "its folder cannot be used any more: {}",
            fault.text
        ))
    });
    Ok(failure.map(|text| format!("{}: {text}{}", run_name(step), last_words(&finished))))
}

fn failure(plan: &DrivePlan, finished: &Finished, output: &Path) -> Option<String> {
    let status = match finished.end {
        End::Stopped => return Some("the run was stopped".to_owned()),
        End::TimeLimit => {
            let seconds = plain(plan.time_limit.as_secs_f64());
            return Some(format!(
                "the command was still running after {seconds} s, the `time_limit` of the plan, and was ended"
            ));
        }
        End::Ended(status) => status,
    };
    if !status.success() {
        return Some(match status.code() {
            Some(code) => format!("the command ended with exit status {code}"),
            None => format!("the command was ended by {status}"),
        });
    }
    match output.symlink_metadata() {
        Ok(found) if !found.is_file() => Some("what the command wrote is no plain file".to_owned()),
        Ok(found) if found.len() == 0 => Some("the command wrote an empty file".to_owned()),
        Ok(_) => None,
        Err(_) => Some(format!(
            "the command ended in order but wrote no `{{output}}` ({TRAJECTORY} in the folder of the run)"
        )),
    }
}

/// What the command has said at last, on standard error or else on standard output.
fn last_words(finished: &Finished) -> String {
    let errors = finished.errors.last_lines(MOST_LINES);
    let (lines, stream) = if errors.is_empty() {
        (finished.output.last_lines(MOST_LINES), "standard output")
    } else {
        (errors, "standard error")
    };
    if lines.is_empty() {
        return "; it said nothing".to_owned();
    }
    let shown: Vec<String> = lines.iter().map(|line| cut(line)).collect();
    let what = if shown.len() == 1 { "line" } else { "lines" };
    format!("; the last {what} of its {stream}: {}", shown.join(", "))
}

fn cut(line: &str) -> String {
    let line = escaped(line);
    let cut: String = line.chars().take(MOST_CHARACTERS).collect();
    let more = if cut.len() < line.len() { "..." } else { "" };
    format!("`{cut}{more}`")
}

fn unstarted(plan: &DrivePlan, words: &[OsString], error: &std::io::Error) -> Fault {
    let program = words.first().map(PathBuf::from).unwrap_or_default();
    let shown = escaped(&program.display().to_string());
    let help = match error.kind() {
        ErrorKind::NotFound => {
            "install it, or correct the first word of `command`; `{plan}` is the folder of the plan"
        }
        _ => "make the file executable, or put the program that runs it first",
    };
    let (line, column) = plan.command_place;
    Fault::new(format!("program `{shown}` cannot be started: {error}"))
        .help(help)
        .at(line, column)
}

pub(super) fn write(path: &Path, bytes: &[u8]) -> Result<(), Fault> {
    // Links and pipes that a command has laid there are replaced, not followed.
    write_atomically(path, bytes)
}

/// A complaint of the operating system about a file or folder that is to be written.
pub(super) fn unwritten(path: &Path, error: &std::io::Error) -> Fault {
    Fault::new(format!("cannot be written: {error}")).in_file(path)
}

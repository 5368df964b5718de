//! Runs a simulator over cases and steps as a plan says, and audits what it wrote: a run
//! that fails makes its case fail, only a plan that cannot be carried out is an error.

mod handed_in;
mod plan;
mod process;
mod runs;
mod select;
mod steps;
mod words;

use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use clap::Args;
use tempfile::TempDir;

use super::args::{Before, Sources};
use super::plan::{library, processors};
use super::reports::{self, Asked, Inputs};
use crate::audit::{Plan, Planned, audit};
use crate::case::Library;
use crate::fault::Fault;
use crate::judge::Verdict;
use crate::outcome::{Audited, LimitsFrom, Outcome};
use crate::submission::{LimitsStated, Submission};
use handed_in::submission_toml;
use plan::{Chosen, DrivePlan};
use runs::{Failures, run_all, run_name, unwritten, write};
use words::Filling;

/// Arguments of `drive`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: a plan with the command of a simulator, the cases and the steps
  producer = \"alder 2.3\"
  command = [\"python3\", \"{plan}/alder.py\", \"{case}\", \"{step}\", \"{output}\"]
  cases = [\"thermal/*\", \"electrical/rc-constant\"]
  steps = { of_time_constant = [0.1, 0.05, 0.025] }
  time_limit = 60
  [claims]
  method = \"Heun\"

The command is run without a shell, in a folder of its own for each run. {case} is a
file as `stepgauge case NAME --json` writes it, {step} the step in the time unit of the
case (parts of a time constant are rounded down to steps that divide the window),
{output} the file to write, {plan} the folder of the plan. A plan may also hold jobs,
[limits], [columns] and [layout], the latter as in submission.toml.

Exit status: 0 all in order, 1 a run or its audit failed or is undecided, 2 the plan
could not be carried out.")]
pub struct DriveArguments {
    /// What to run: a TOML file
    #[arg(value_name = "PLAN")]
    pub plan: PathBuf,
    /// Keeps all runs below this folder, which must be new or empty [default: a temporary
    /// folder, kept where something is not in order]
    #[arg(long, value_name = "DIR")]
    pub into: Option<PathBuf>,
    /// Writes a report whose kind follows from its ending, as `audit` does (repeatable)
    #[arg(long, value_name = "FILE")]
    pub write: Vec<PathBuf>,
    /// An earlier report to compare with
    #[command(flatten)]
    pub before: Before,
    /// Cases beside the built-in ones
    #[command(flatten)]
    pub sources: Sources,
}

/// What came of a plan.
pub(super) struct Driven {
    pub outcome: Outcome,
    /// Reports that were asked for.
    pub reports: Vec<Asked>,
    /// The folder with the runs, where it is not there by the user's wish.
    pub kept: Option<PathBuf>,
}

/// The folder of all runs.
enum Root {
    Wished(PathBuf),
    Temporary(TempDir),
}

impl Root {
    fn path(&self) -> &Path {
        match self {
            Root::Wished(path) => path,
            Root::Temporary(folder) => folder.path(),
        }
    }
}

/// Carries out a plan.
///
/// # Errors
/// What keeps the plan from being carried out.
pub(super) fn drive(arguments: &DriveArguments) -> Result<Driven, Vec<Fault>> {
    let library = library(&arguments.sources)?;
    let plan = plan::read(&arguments.plan, &library)?;
    let reports = reports::check(&arguments.write, &inputs(arguments, &plan))?;
    let drawn = reports::any_plots(&arguments.write);
    let root = root(arguments.into.as_deref()).map_err(|fault| vec![fault])?;
    let stop = Stop::listen();
    let failures = run_all(&plan, root.path(), &stop.asked);
    stop.done.store(true, Ordering::Relaxed);
    let judged = failures
        .map_err(|fault| fault.in_file(&arguments.plan))
        .and_then(|failures| judge(&plan, &failures, root.path(), library, drawn));
    let outcome = match judged {
        Ok(outcome) => outcome,
        Err(fault) => return Err(vec![fault, kept(root)]),
    };
    let kept = match root {
        Root::Temporary(folder) if !outcome.in_order() => Some(folder.keep()),
        _ => None,
    };
    Ok(Driven {
        outcome,
        reports,
        kept,
    })
}

/// What was run before everything ended stays where it is.
fn kept(root: Root) -> Fault {
    let folder = match root {
        Root::Wished(path) => path,
        Root::Temporary(folder) => folder.keep(),
    };
    Fault::new("the runs that were made are kept here").in_file(&folder)
}

/// What a plan and its command read: no report may take its place.
fn inputs(arguments: &DriveArguments, plan: &DrivePlan) -> Inputs {
    let nothing = Path::new("");
    let filling = Filling {
        case: nothing,
        step: "",
        output: nothing,
        plan: &plan.folder,
    };
    let words = plan.command.iter().map(|word| word.fill(&filling));
    // As in --config=FILE.
    let paths = words.flat_map(|word| {
        let text = word.to_string_lossy().into_owned();
        let value = text.split_once('=').map(|(_, value)| PathBuf::from(value));
        [Some(PathBuf::from(word)), value]
    });
    let named = [
        Some(arguments.plan.clone()),
        arguments.before.against.clone(),
    ];
    Inputs::files(named.into_iter().chain(paths).flatten())
}

/// How the user stops everything: the commands are in groups of their own, which the
/// terminal does not reach.
struct Stop {
    asked: Arc<AtomicBool>,
    /// Set once there is no command left to stop.
    done: Arc<AtomicBool>,
}

impl Stop {
    fn listen() -> Stop {
        let (asked, done) = (
            Arc::new(AtomicBool::new(false)),
            Arc::new(AtomicBool::new(false)),
        );
        let (ask, over) = (Arc::clone(&asked), Arc::clone(&done));
        // Where somebody else listens already, the commands run to their time limit.
        let _ = ctrlc::set_handler(move || {
            if over.load(Ordering::Relaxed) {
                std::process::exit(2);
            }
            ask.store(true, Ordering::Relaxed);
        });
        Stop { asked, done }
    }
}

/// A folder in which nothing can be overwritten. Its path is absolute, since commands run
/// elsewhere.
fn root(wished: Option<&Path>) -> Result<Root, Fault> {
    let Some(path) = wished else {
        let folder = tempfile::Builder::new()
            .prefix("stepgauge-drive-")
            .tempdir();
        let folder = folder.map_err(|error| unwritten(&std::env::temp_dir(), &error))?;
        return Ok(Root::Temporary(folder));
    };
    match std::fs::read_dir(path).map(|mut entries| entries.next().is_some()) {
        Ok(true) => {
            let fault = Fault::new("the folder of --into is not empty").in_file(path);
            return Err(fault.help("name a new folder: nothing is overwritten"));
        }
        Ok(false) => {}
        Err(_) if path.exists() => {
            let fault = Fault::new("--into names something that is no folder").in_file(path);
            return Err(fault.help("name a new folder"));
        }
        Err(_) => std::fs::create_dir_all(path).map_err(|error| unwritten(path, &error))?,
    }
    let absolute = std::path::absolute(path).map_err(|error| unwritten(path, &error))?;
    Ok(Root::Wished(absolute))
}

/// Audits the runs of every case that were made, and lets those that were not speak.
fn judge(
    plan: &DrivePlan,
    failures: &Failures,
    root: &Path,
    library: Library,
    drawn: bool,
) -> Result<Outcome, Fault> {
    let mut audits = Plan {
        library,
        submissions: Vec::new(),
        unreadable: Vec::new(),
        threads: processors(),
        traced: drawn,
        part: None,
    };
    let mut reasons: Vec<Vec<String>> = Vec::new();
    for (chosen, failures) in plan.cases.iter().zip(failures) {
        let folder = root.join(&chosen.case.name);
        let file = folder.join("submission.toml");
        // Failed runs are named too, and have no trajectory: whoever audits the folder
        // again must not find it in order.
        write(
            &file,
            submission_toml(plan, chosen, &chosen.steps).as_bytes(),
        )?;
        let made = chosen
            .steps
            .iter()
            .zip(failures)
            .filter(|(_, failure)| failure.is_none());
        let made: Vec<f64> = made.map(|(&step, _)| step).collect();
        let mut told: Vec<String> = failures.iter().flatten().cloned().collect();
        if !made.is_empty() {
            match Submission::parse(&submission_toml(plan, chosen, &made), &folder) {
                Ok(submission) => audits.submissions.push(Planned {
                    name: chosen.case.name.clone(),
                    file: Some(file),
                    submission,
                    reviewed: Default::default(),
                }),
                Err(faults) => told.extend(faults.iter().map(|fault| sentence(fault, &folder))),
            }
        }
        reasons.push(told);
    }
    let outcome = audit(&audits);
    Ok(merged(plan, failures, reasons, root, outcome))
}

/// The outcome in the order of the plan, with what failed before an audit could begin.
fn merged(
    plan: &DrivePlan,
    failures: &Failures,
    reasons: Vec<Vec<String>>,
    root: &Path,
    found: Outcome,
) -> Outcome {
    let mut audited: Vec<Audited> = found.submissions;
    let mut submissions = Vec::new();
    for ((chosen, failures), mut reasons) in plan.cases.iter().zip(failures).zip(reasons) {
        let name = &chosen.case.name;
        let place = audited.iter().position(|one| one.name == *name);
        let mut one = place.map_or_else(|| unaudited(plan, chosen), |place| audited.remove(place));
        // A file that cannot be read is the simulator's fault here: it has just written it.
        let unread = found.not_audited.iter().filter(|not| not.name == *name);
        let folder = root.join(name);
        reasons.extend(
            unread
                .flat_map(|not| &not.faults)
                .map(|fault| sentence(fault, &folder)),
        );
        if !reasons.is_empty() {
            one.verdict = Verdict::Fail;
            reasons.append(&mut one.reasons);
            one.reasons = reasons;
        }
        one.notes.extend(note_of_result(chosen, failures));
        submissions.push(one);
    }
    Outcome {
        submissions,
        ..Outcome::default()
    }
}

/// A case of which nothing came that could be audited.
fn unaudited(plan: &DrivePlan, chosen: &Chosen) -> Audited {
    let submission = Submission {
        producer: plan.producer.clone(),
        claims: chosen.terms.claims.clone(),
        ..Submission::default()
    };
    let from = if chosen.terms.limits == LimitsStated::default() {
        LimitsFrom::Case
    } else {
        LimitsFrom::Submission
    };
    let case = &chosen.case;
    let unit = case.time.unit.clone();
    Audited::new(
        case.name.clone(),
        Some(case.name.clone()),
        unit,
        &submission,
        from,
    )
}

/// Limits apply to the finest run; where it failed, to another than was meant.
fn note_of_result(chosen: &Chosen, failures: &[Option<String>]) -> Option<String> {
    let finest = |steps: &mut dyn Iterator<Item = f64>| steps.min_by(f64::total_cmp);
    let wanted = finest(&mut chosen.steps.iter().copied())?;
    let made = chosen
        .steps
        .iter()
        .zip(failures)
        .filter(|(_, failure)| failure.is_none());
    let result = finest(&mut made.map(|(&step, _)| step))?;
    (result > wanted).then(|| {
        format!(
            "the finest run failed: limits were applied to {}",
            run_name(result)
        )
    })
}

/// A complaint as one sentence, its path within the folder of the case.
fn sentence(fault: &Fault, folder: &Path) -> String {
    let mut fault = fault.clone();
    let help = fault.help.take();
    fault.path = fault.path.map(|path| {
        path.strip_prefix(folder)
            .map_or(path.clone(), Path::to_owned)
    });
    match help {
        Some(help) => format!("{fault}; {help}"),
        None => fault.to_string(),
    }
}

//! From arguments to an exit status; the only module that prints.

use std::io::{self, IsTerminal, Write};
use std::process::ExitCode;

use super::args::{
    Arguments, AuditArguments, CaseArguments, CaseChoice, CasesArguments, Command, ExactArguments,
    MethodsArguments, StepsArguments,
};
use super::draft::{Draft, DraftArguments, run_draft};
use super::drive::{DriveArguments, drive};
use super::earlier::Earlier;
use super::facts::facts;
use super::manual::{CompletionArguments, ManualArguments, completions, manual};
use super::methods::methods_text;
use super::parts::{self, MergeArguments};
use super::reports::{Asked, Inputs};
use super::{plan, reports, steps, watched};
use crate::case::{Case, Library, Replacements};
use crate::exact::Exact;
use crate::fault::{Fault, escaped, quoted};
use crate::number::{Decimal, Double, counted};
use crate::outcome::Outcome;
use crate::report::{
    ChannelCheck, Screen, ValueWriter, WIDEST, audit_report, audit_text, case_json, case_list,
    case_text, check_text, draft_text, merged_text, steps_csv, steps_text,
};
use crate::trajectory::{Findings, Selection, Stated, Survey, is_time_name, open};

/// All in order.
const IN_ORDER: u8 = 0;
/// Something failed, is undecided, not as expected or became worse.
const NOT_IN_ORDER: u8 = 1;
/// The audit could not be done.
const NOT_DONE: u8 = 2;

/// Notes that are shown one by one.
const MOST_NOTES: usize = 10;

/// What can end a command early.
enum Stop {
    /// Complaints, which are printed.
    Faults(Vec<Fault>),
    /// Standard output was closed or cannot be written to.
    Output(io::Error),
}

impl From<Vec<Fault>> for Stop {
    fn from(faults: Vec<Fault>) -> Stop {
        Stop::Faults(faults)
    }
}

impl From<Fault> for Stop {
    fn from(fault: Fault) -> Stop {
        Stop::Faults(vec![fault])
    }
}

impl From<io::Error> for Stop {
    fn from(error: io::Error) -> Stop {
        Stop::Output(error)
    }
}

/// Does what was asked for.
pub fn run(arguments: &Arguments) -> ExitCode {
    let result = match &arguments.command {
        Command::Audit(arguments) => run_audit(arguments),
        Command::Cases(arguments) => run_cases(arguments),
        Command::Case(arguments) => run_case(arguments),
        Command::Exact(arguments) => run_exact(arguments),
        Command::Draft(arguments) => run_drafting(arguments),
        Command::Methods(arguments) => run_methods(arguments),
        Command::Steps(arguments) => run_steps(arguments),
        Command::Completions(arguments) => run_completions(arguments),
        Command::Manual(arguments) => run_manual(arguments),
        Command::Drive(arguments) => run_drive(arguments),
        Command::Merge(arguments) => run_merge(arguments),
    };
    let status = match result {
        Ok(status) => status,
        Err(Stop::Faults(faults)) => {
            let mut stream = anstream::stderr();
            for fault in faults {
                // Nothing is left to do where even this cannot be written.
                let _ = writeln!(stream, "{fault}");
            }
            NOT_DONE
        }
        // Whoever reads has seen enough: a quiet end.
        Err(Stop::Output(error)) if error.kind() == io::ErrorKind::BrokenPipe => IN_ORDER,
        Err(Stop::Output(error)) => {
            let _ = writeln!(
                anstream::stderr(),
                "standard output cannot be written: {error}"
            );
            NOT_DONE
        }
    };
    ExitCode::from(status)
}

fn run_audit(arguments: &AuditArguments) -> Result<u8, Stop> {
    let (mut plan, reviewer, notes) = plan::plan(arguments)?;
    // Files of other parts are inputs too.
    let asked = reports::check(&arguments.write, &Inputs::of(arguments, &plan))?;
    parts::take(arguments, &reviewer, &mut plan)?;
    let earlier = Earlier::read(&arguments.before)?;
    if !arguments.quiet {
        note(&notes);
    }
    let mut outcome = watched::audit(plan, arguments.quiet);
    reviewer.conclude(&mut outcome);
    outcome.changes = earlier.map(|earlier| earlier.changes(&audit_report(&outcome)));
    conclude(&outcome, &asked, arguments.quiet)
}

fn run_drive(arguments: &DriveArguments) -> Result<u8, Stop> {
    let earlier = Earlier::read(&arguments.before)?;
    let mut driven = drive(arguments)?;
    let now = audit_report(&driven.outcome);
    driven.outcome.changes = earlier.map(|earlier| earlier.changes(&now));
    let status = conclude(&driven.outcome, &driven.reports, false);
    if let Some(folder) = driven.kept {
        let folder = escaped(&folder.display().to_string());
        // Nothing is left to do where even this cannot be written.
        let _ = writeln!(anstream::stderr(), "the runs are kept in {folder}");
    }
    status
}

/// Says what changes no result and is worth knowing all the same.
fn note(notes: &[Fault]) {
    let mut stream = anstream::stderr();
    for fault in notes.iter().take(MOST_NOTES) {
        // Nothing is left to do where even this cannot be written.
        let _ = writeln!(stream, "{fault}");
    }
    if notes.len() > MOST_NOTES {
        let more = counted((notes.len() - MOST_NOTES) as u64, "further link");
        let _ = writeln!(stream, "and {more} like these");
    }
}

/// Reports, screen and exit status of an audit.
fn conclude(outcome: &Outcome, asked: &[Asked], quiet: bool) -> Result<u8, Stop> {
    // Reports first: a closed pipe must not cost them.
    reports::write(asked, outcome)?;
    let status = if !outcome.not_audited.is_empty() || outcome.left > 0 {
        NOT_DONE
    } else if outcome.in_order() && !outcome.became_worse() {
        IN_ORDER
    } else {
        NOT_IN_ORDER
    };
    if quiet {
        return Ok(status);
    }
    shown(&audit_text(outcome, screen()), status)
}

/// The verdict stands whether or not anybody reads the table to its end.
fn shown(text: &str, status: u8) -> Result<u8, Stop> {
    match print(text) {
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => Ok(status),
        other => Ok(other.map(|()| status)?),
    }
}

/// Joined parts: screen and exit status of the audit that was divided.
fn run_merge(arguments: &MergeArguments) -> Result<u8, Stop> {
    let merged = parts::merge(arguments)?;
    let (report, changes) = (&merged.report, merged.changes.as_ref());
    let worse = changes.is_some_and(|changes| !changes.worse.is_empty());
    let status = if !report.not_audited.is_empty() {
        NOT_DONE
    } else if report.summary.in_order && !worse {
        IN_ORDER
    } else {
        NOT_IN_ORDER
    };
    if arguments.quiet {
        return Ok(status);
    }
    shown(&merged_text(report, changes, screen())?, status)
}

fn run_cases(arguments: &CasesArguments) -> Result<u8, Stop> {
    let library = plan::library(&arguments.sources)?;
    if arguments.names {
        let names: String = library.names().map(|name| format!("{name}\n")).collect();
        print(&names)?;
        return Ok(IN_ORDER);
    }
    let cases: Result<Vec<Case>, Vec<Fault>> = library
        .names()
        .map(|name| library.load(name, &Replacements::new()))
        .collect();
    print(&case_list(&cases?, screen()))?;
    Ok(IN_ORDER)
}

fn load(choice: &CaseChoice) -> Result<(Case, Exact), Stop> {
    let library: Library = plan::library(&choice.sources)?;
    let parameters: Replacements = choice.parameters.iter().cloned().collect();
    let case = library.load(&choice.name, &parameters)?;
    let exact = case.exact()?;
    Ok((case, exact))
}

fn run_case(arguments: &CaseArguments) -> Result<u8, Stop> {
    let (case, exact) = load(&arguments.choice)?;
    let facts = facts(&case, &exact);
    let text = if arguments.json {
        case_json(&case, &facts)
    } else {
        case_text(&case, &facts, screen())
    };
    print(&text)?;
    Ok(IN_ORDER)
}

fn run_exact(arguments: &ExactArguments) -> Result<u8, Stop> {
    let (case, exact) = load(&arguments.choice)?;
    if arguments.times.check {
        return check(&case, &exact);
    }
    let channels = case.channels();
    let names: Vec<&str> = channels.iter().map(|channel| channel.name).collect();
    // What is asked for is read before anything is written.
    let times = &arguments.times;
    let listed = times.at.iter().flatten();
    let listed: Vec<Double> = listed
        .map(|text| Ok(decimal(text, "--at")?.to_double()))
        .collect::<Result<_, Fault>>()?;
    let grid = times.step.as_deref().map(|text| grid(&case, text));
    let grid = grid.transpose()?;
    let mut walk = exact.walk_rounded();
    let mut writer = ValueWriter::new(io::BufWriter::new(io::stdout().lock()), &names)?;
    let mut write = |time: Double| -> Result<(), Stop> {
        let values: Vec<f64> = walk.at(time)?.iter().map(|value| value.value).collect();
        writer.row(time.to_f64(), &values)?;
        Ok(())
    };
    for time in listed {
        write(time)?;
    }
    if let Some((length, count)) = grid {
        let (from, to) = (case.time.from, case.time.to);
        for index in 0..=count {
            let time = from + length * Double::from(index as f64);
            write(if time > to { to } else { time })?;
        }
    }
    if let Some(path) = &times.times {
        at_stamps(path, &mut write)?;
    }
    writer.finish()?;
    Ok(IN_ORDER)
}

/// The exact solution by a second route.
fn check(case: &Case, exact: &Exact) -> Result<u8, Stop> {
    let checked = exact.check(case)?;
    let channels = checked.channels.iter().map(|gap| ChannelCheck {
        units: gap.units,
        at: gap.at,
        closed_form: gap.closed_form,
    });
    let channels: Vec<ChannelCheck> = channels.collect();
    let result = (checked.times, checked.agrees());
    print(&check_text(case, &channels, result, screen()))?;
    Ok(match checked.agrees() {
        true => IN_ORDER,
        false => NOT_IN_ORDER,
    })
}

fn run_drafting(arguments: &DraftArguments) -> Result<u8, Stop> {
    let Draft {
        drafted,
        toml,
        written,
    } = run_draft(arguments)?;
    let written = written.map(|path| path.display().to_string());
    let text = draft_text(&drafted, written.as_deref(), screen());
    let Some(toml) = toml else {
        print(&text)?;
        return Ok(NOT_IN_ORDER);
    };
    if arguments.print {
        // The submission alone may go into a file.
        let _ = anstream::stderr().write_all(text.as_bytes());
        print(&toml)?;
    } else {
        print(&text)?;
    }
    Ok(IN_ORDER)
}

fn run_methods(arguments: &MethodsArguments) -> Result<u8, Stop> {
    print(&methods_text(arguments, screen())?)?;
    Ok(IN_ORDER)
}

fn run_steps(arguments: &StepsArguments) -> Result<u8, Stop> {
    let (case, exact) = load(&arguments.choice)?;
    let outcome = steps::steps(arguments, &case, &exact)?;
    if arguments.csv {
        steps_csv(&case, &outcome, io::stdout().lock())?;
    } else {
        print(&steps_text(&case, &outcome, screen()))?;
    }
    Ok(IN_ORDER)
}

fn run_completions(arguments: &CompletionArguments) -> Result<u8, Stop> {
    io::stdout().write_all(&completions(arguments))?;
    Ok(IN_ORDER)
}

fn run_manual(arguments: &ManualArguments) -> Result<u8, Stop> {
    let page = manual(arguments)?;
    io::stdout().write_all(&page)?;
    Ok(IN_ORDER)
}

fn decimal(text: &str, option: &str) -> Result<Decimal, Fault> {
    let complain = || Fault::new(format!("{option}: {} is not a number", quoted(text)));
    Decimal::parse(text.trim()).ok_or_else(complain)
}

/// A grid over the window: its step, and how many of them there are.
fn grid(case: &Case, text: &str) -> Result<(Double, u64), Fault> {
    let length = decimal(text, "--step")?.to_double();
    let count = ((case.time.to - case.time.from) / length).to_f64();
    if !(length.to_f64() > 0.0 && count.is_finite() && count < 1e12) {
        let text = "--step must be above zero and not absurdly small for the window";
        return Err(Fault::new(text));
    }
    Ok((length, (count * (1.0 + 1e-12)).floor() as u64))
}

/// The stamps of a file: its column `t` or `time`, else its first column.
fn at_stamps(
    path: &std::path::Path,
    write: &mut dyn FnMut(Double) -> Result<(), Stop>,
) -> Result<(), Stop> {
    let stated = Stated::default();
    let placed = |fault: Fault| fault.in_file(path);
    let source = open(path)?;
    let Some(layout) = source.layout(&stated).map_err(placed)? else {
        return Err(placed(Fault::new("the file has no rows of numbers")).into());
    };
    let named = layout
        .names
        .as_ref()
        .and_then(|names| names.iter().position(|name| is_time_name(name)));
    let selection = Selection {
        time: named.unwrap_or(0),
        channels: Vec::new(),
    };
    let survey = Survey::new(&source, layout, selection, &stated).map_err(placed)?;
    let mut stopped = None;
    let mut findings = Findings::default();
    let result = survey.rows(&source, &mut findings, &|_| true, &mut |row| {
        write(row.time).map_err(|stop| match stop {
            Stop::Faults(mut faults) => faults
                .pop()
                .unwrap_or_else(|| Fault::new(""))
                .at(row.line, 1),
            Stop::Output(error) => {
                stopped = Some(error);
                Fault::new("standard output was closed")
            }
        })
    });
    match (result, stopped) {
        (_, Some(error)) => Err(error.into()),
        (Err(fault), None) => Err(placed(fault).into()),
        (Ok(()), None) => Ok(()),
    }
}

/// Text for standard output; colour is dropped where it does not belong.
fn print(text: &str) -> io::Result<()> {
    let mut stream = anstream::stdout().lock();
    stream.write_all(text.as_bytes())?;
    stream.flush()
}

/// What the terminal can show; a pipe gets a hundred columns unless `COLUMNS` says
/// otherwise.
fn screen() -> Screen {
    let stated = std::env::var("COLUMNS")
        .ok()
        .and_then(|columns| columns.parse::<u16>().ok());
    let seen = if io::stdout().is_terminal() {
        terminal_size::terminal_size().map(|(width, _)| width.0)
    } else {
        None
    };
    // Containers report terminals without a size.
    let width = seen.filter(|&width| width >= 40).or(stated).unwrap_or(100);
    let locale = ["LC_ALL", "LC_CTYPE", "LANG"]
        .iter()
        .find_map(|name| std::env::var(name).ok().filter(|value| !value.is_empty()))
        .unwrap_or_default()
        .to_lowercase();
    let unicode = locale.contains("utf-8") || locale.contains("utf8");
    Screen {
        width: width.clamp(40, WIDEST),
        unicode,
    }
}

//! What was typed: shape and ranges only; no file is touched here.

use std::path::PathBuf;

use super::drive::DriveArguments;
use super::parts::{MergeArguments, share_of};
use clap::{Args, Parser, Subcommand, ValueEnum};

use super::draft::DraftArguments;
use super::manual::{CompletionArguments, ManualArguments};

/// Audits what a time-stepping simulator wrote: errors against exact solutions of
/// linear models, order across steps, verdicts against limits.
#[derive(Debug, Parser)]
#[command(
    name = "stepgauge",
    version,
    max_term_width = 100,
    after_help = "\
Example: audit every submission below a folder, and keep the numbers
  stepgauge audit demo-runs --write report.json

Exit status: 0 all in order, 1 something failed, is undecided, not as expected or became
worse, 2 the audit could not be done."
)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// What to do.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Audits every submission below the paths, or single files with --case
    Audit(AuditArguments),
    /// Runs a simulator over cases and steps as a plan says, and audits what it wrote
    Drive(DriveArguments),
    /// Joins the .json reports of an audit that was divided by --part
    Merge(MergeArguments),
    /// Looks at files and writes a first submission.toml for them
    Draft(DraftArguments),
    /// Lists the cases
    Cases(CasesArguments),
    /// Shows one case in full: equations, numbers, inputs, exact solution
    Case(CaseArguments),
    /// Writes exact values of a case as CSV
    Exact(ExactArguments),
    /// Lists integration methods, or shows one in full: coefficients, stability, source
    Methods(MethodsArguments),
    /// Shows which step a case needs, method by method
    Steps(StepsArguments),
    /// Writes completions for a shell
    Completions(CompletionArguments),
    /// Writes a manual page
    Manual(ManualArguments),
}

/// Where cases come from.
#[derive(Debug, Args)]
pub struct Sources {
    /// Adds every case file below a folder (repeatable)
    #[arg(long, value_name = "DIR")]
    pub cases: Vec<PathBuf>,
}

/// An earlier report to compare with.
#[derive(Debug, Args)]
pub struct Before {
    /// Compares with an earlier .json report and says what became worse or better
    #[arg(long, value_name = "EARLIER.json")]
    pub against: Option<PathBuf>,
    /// By what share a worst error must have grown to be worse, as in 0.2 for 20 %
    /// [default: 0.2]
    #[arg(long, value_name = "SHARE", requires = "against", allow_negative_numbers = true, value_parser = share)]
    pub worse_by: Option<f64>,
}

/// Arguments of `audit`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: one file of a simulator, written at a step of 10 s
  stepgauge audit run.csv --case thermal/cold-room-defrost --column air=T1 --step 10 \\
      --absolute 1e-3

Example: what others hand in, by the rules of whoever accepts it
  stepgauge audit incoming --require rules.toml --own-parameters refuse

  # rules.toml
  [limits]                       # as in submission.toml; for one case:
  absolute = 1e-3                # [case_limits.\"thermal/cold-room-defrost\"]
  [[require]]
  case = \"thermal/cold-room-defrost\"
  runs = 3                       # at different steps
  methods = [\"RK4\"]              # claimed, and not contradicted

Exit status: 0 all in order, 1 something failed, is undecided, not as expected or became
worse, 2 the audit could not be done.")]
pub struct AuditArguments {
    /// Folders with submission.toml files, or trajectory files together with --case
    #[arg(required = true, value_name = "PATH")]
    pub paths: Vec<PathBuf>,
    /// The case that the files claim to solve
    #[arg(long, value_name = "NAME")]
    pub case: Option<String>,
    /// A column by name or number, as in air=T1 or time=1 (repeatable)
    #[arg(long = "column", value_name = "CHANNEL=COLUMN", requires = "case", value_parser = pair)]
    pub columns: Vec<(String, String)>,
    /// The step of the file, in the time unit of the case
    #[arg(long, value_name = "H", requires = "case", allow_negative_numbers = true, value_parser = positive)]
    pub step: Option<f64>,
    /// Replaces a parameter of the case, as in R_w=0.03 (repeatable)
    #[arg(long = "set", value_name = "PARAMETER=VALUE", requires = "case", value_parser = number_pair)]
    pub parameters: Vec<(String, f64)>,
    /// The absolute limit, in the unit of each channel; goes before any other limit
    #[arg(long, value_name = "LIMIT", allow_negative_numbers = true, value_parser = not_negative)]
    pub absolute: Option<f64>,
    /// The relative limit, a fraction; goes before any other limit
    #[arg(long, value_name = "LIMIT", allow_negative_numbers = true, value_parser = not_negative)]
    pub relative: Option<f64>,
    /// What the relative limit is a fraction of
    #[arg(long, value_name = "WHAT")]
    pub relative_to: Option<RelativeTo>,
    /// What a reviewer lays down
    #[command(flatten)]
    pub review: ReviewArguments,
    /// Writes a report whose kind follows from its ending: .html, .json, .xml (JUnit),
    /// .md, .csv (repeatable)
    #[arg(long, value_name = "FILE")]
    pub write: Vec<PathBuf>,
    /// Prints nothing but complaints; reports and the exit status tell
    #[arg(long, short)]
    pub quiet: bool,
    /// An earlier report to compare with
    #[command(flatten)]
    pub before: Before,
    /// Audits one share of the submissions found, as in 2/8; `stepgauge merge` joins the
    /// .json reports of all shares
    #[arg(long, value_name = "I/N", value_parser = share_of)]
    pub part: Option<(u32, u32)>,
    /// Threads to work with [default: all processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=256))]
    pub threads: Option<u16>,
    /// Cases beside the built-in ones
    #[command(flatten)]
    pub sources: Sources,
}

/// What a reviewer lays down for whatever is handed in.
#[derive(Debug, Args)]
pub struct ReviewArguments {
    /// Limits of the reviewer, a TOML file with `[limits]` or `[case_limits."FIELD/NAME"]`;
    /// those of submissions do not count then
    #[arg(long, value_name = "FILE.toml")]
    pub limits: Option<PathBuf>,
    /// What has to be there, a TOML file with `[[require]]`, and limits as for --limits; what
    /// is missing fails the audit (with --part `stepgauge merge --require` looks for it)
    #[arg(long, value_name = "FILE.toml")]
    pub require: Option<PathBuf>,
    /// Whether a submission may replace parameters of its case [default: allow]
    #[arg(long, value_name = "WHETHER")]
    pub own_parameters: Option<Whether>,
}

/// Whether something is allowed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum Whether {
    /// It is shown in every report.
    Allow,
    /// The submission fails by it.
    Refuse,
}

/// What a relative limit is a fraction of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum RelativeTo {
    /// The exact value of each row.
    Value,
    /// The largest exact value of the channel.
    Peak,
}

/// Arguments of `cases`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: every electrical case
  stepgauge cases --names | grep electrical/")]
pub struct CasesArguments {
    /// Prints one name a line
    #[arg(long)]
    pub names: bool,
    /// Cases beside the built-in ones
    #[command(flatten)]
    pub sources: Sources,
}

/// A case with numbers of one's own.
#[derive(Debug, Args)]
pub struct CaseChoice {
    /// The case
    #[arg(value_name = "NAME")]
    pub name: String,
    /// Replaces a parameter of the case, as in R_w=0.03 (repeatable)
    #[arg(long = "set", value_name = "PARAMETER=VALUE", value_parser = number_pair)]
    pub parameters: Vec<(String, f64)>,
    /// Cases beside the built-in ones
    #[command(flatten)]
    pub sources: Sources,
}

/// Arguments of `case`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: matrices, start values and inputs as numbers, to drive a simulator with
  stepgauge case thermal/cold-room-defrost --json")]
pub struct CaseArguments {
    /// Which case.
    #[command(flatten)]
    pub choice: CaseChoice,
    /// Gives matrices, start values and inputs as numbers
    #[arg(long)]
    pub json: bool,
}

/// Arguments of `exact`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: the exact trajectory every ten minutes
  stepgauge exact thermal/cold-room-defrost --step 600

`--check` exits with 0 where both routes agree to one unit in the last place, else with 1.")]
pub struct ExactArguments {
    /// Which case.
    #[command(flatten)]
    pub choice: CaseChoice,
    /// Where to evaluate.
    #[command(flatten)]
    pub times: Times,
}

/// Arguments of `methods`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: everything that goes by a name
  stepgauge methods RK4")]
pub struct MethodsArguments {
    /// The method, by any of its names; quotes are not needed
    #[arg(value_name = "NAME")]
    pub name: Vec<String>,
    /// Prints one name a line
    #[arg(long, conflicts_with = "name")]
    pub names: bool,
}

/// Where to evaluate: one of these.
#[derive(Debug, Args)]
#[group(required = true, multiple = false)]
pub struct Times {
    /// On a grid of this step from the start of the window to its end
    #[arg(long, value_name = "H", allow_negative_numbers = true)]
    pub step: Option<String>,
    /// At listed times
    #[arg(
        long,
        value_name = "T,T",
        value_delimiter = ',',
        allow_negative_numbers = true
    )]
    pub at: Option<Vec<String>>,
    /// At the time stamps of a file
    #[arg(long, value_name = "FILE")]
    pub times: Option<PathBuf>,
    /// Nowhere: computes the case once more by a second route instead, in twice the precision
    /// and by its closed form, and shows the largest differences
    #[arg(long)]
    pub check: bool,
}

/// Arguments of `steps`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: two methods at a limit of one's own
  stepgauge steps thermal/cold-room-defrost --method Heun --method \"BDF 2\" --absolute 1e-2

Methods are really run over the window; inputs are read as `t >= at` at a jump.
At most 200000 steps are run, fewer where a case has many states. Runs of more
than 3000 steps are compared at some 3000 nodes.")]
pub struct StepsArguments {
    /// Which case.
    #[command(flatten)]
    pub choice: CaseChoice,
    /// A method by name, as in RK4 (repeatable) [default: forward Euler, backward Euler,
    /// trapezoidal, Heun, classical RK4]
    #[arg(long = "method", value_name = "NAME")]
    pub methods: Vec<String>,
    /// The absolute limit, in the unit of each channel [default: that of the case]
    #[arg(long, value_name = "LIMIT", allow_negative_numbers = true, value_parser = not_negative)]
    pub absolute: Option<f64>,
    /// The relative limit, a fraction [default: that of the case]
    #[arg(long, value_name = "LIMIT", allow_negative_numbers = true, value_parser = not_negative)]
    pub relative: Option<f64>,
    /// Shows errors at this step; one that does not divide the window ends with the last
    /// step within it (repeatable) [default: a ladder of steps]
    #[arg(long = "step", value_name = "H", allow_negative_numbers = true, value_parser = positive)]
    pub steps: Vec<f64>,
    /// Writes a row for each method, step and channel as CSV
    #[arg(long)]
    pub csv: bool,
}

fn pair(text: &str) -> Result<(String, String), String> {
    match text.split_once('=') {
        Some((name, value)) if !name.trim().is_empty() && !value.trim().is_empty() => {
            Ok((name.trim().to_owned(), value.trim().to_owned()))
        }
        _ => Err("expected NAME=VALUE".to_owned()),
    }
}

fn number_pair(text: &str) -> Result<(String, f64), String> {
    let (name, value) = pair(text)?;
    Ok((name, finite(&value)?))
}

fn finite(text: &str) -> Result<f64, String> {
    let number = text.parse::<f64>().ok().filter(|number| number.is_finite());
    number.ok_or_else(|| "expected a finite number".to_owned())
}

fn positive(text: &str) -> Result<f64, String> {
    finite(text).and_then(|number| {
        if number > 0.0 {
            Ok(number)
        } else {
            Err("expected a number above zero".to_owned())
        }
    })
}

fn not_negative(text: &str) -> Result<f64, String> {
    finite(text).and_then(|number| {
        if number >= 0.0 {
            Ok(number)
        } else {
            Err("expected a number not below zero".to_owned())
        }
    })
}

pub(super) fn share(text: &str) -> Result<f64, String> {
    if text.contains('%') {
        return Err("expected a share, as in 0.2 for 20 %".to_owned());
    }
    not_negative(text)
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_definitions_are_consistent() {
        Arguments::command().debug_assert();
    }

    #[test]
    fn pairs_and_numbers() {
        assert_eq!(pair("air = T 1"), Ok(("air".to_owned(), "T 1".to_owned())));
        assert!(pair("air").is_err() && pair("=x").is_err());
        assert!(number_pair("R=nan").is_err() && positive("0").is_err());
        assert!(not_negative("-1").is_err() && not_negative("0").is_ok());
    }
}

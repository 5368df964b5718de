//! Files to a first `submission.toml`: which folder it lies in, whether it may be written,
//! and what is printed where.

use std::path::{Path, PathBuf};

use clap::Args;

use super::args::Sources;
use super::plan;
use crate::draft::{Question, draft};
use crate::fault::{Fault, quoted};
use crate::outcome::Drafted;
use crate::report::{draft_toml, write_new};
use crate::submission::{MOST_RUNS, Submission, confined};

/// What the file is called where nothing else is asked for.
const NAME: &str = "submission.toml";

/// Arguments of `draft`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: the runs of one simulator at several steps
  stepgauge draft cold-room/alder/*.csv

Columns, units, steps and the case are guessed from the names, the window of time and
the fit to exact solutions; every guess is a comment in the file, and so is what could
not be known. No file is ever overwritten.

Exit status: 0 a draft was written, 1 nothing is known well enough to write one,
2 files cannot be read, or the submission is already there.")]
pub struct DraftArguments {
    /// The trajectory files of one submission: runs that differ in their step alone
    #[arg(required = true, value_name = "FILE")]
    pub files: Vec<PathBuf>,
    /// The case, where it is known
    #[arg(long, value_name = "NAME")]
    pub case: Option<String>,
    /// Where to write; the files must lie in its folder or below [default: submission.toml
    /// in the folder of the files]
    #[arg(long, value_name = "FILE", conflicts_with = "print")]
    pub into: Option<PathBuf>,
    /// Prints the submission in place of writing it; the table goes to standard error
    #[arg(long)]
    pub print: bool,
    /// Cases beside the built-in ones
    #[command(flatten)]
    pub sources: Sources,
}

/// What came of it.
pub(super) struct Draft {
    pub drafted: Drafted,
    /// The submission; `None` where no case is likely.
    pub toml: Option<String>,
    /// The file that was written.
    pub written: Option<PathBuf>,
}

/// Looks at the files and writes the submission, if it can.
///
/// # Errors
/// Files that cannot be read or do not belong together, a submission that is already there.
pub(super) fn run_draft(arguments: &DraftArguments) -> Result<Draft, Vec<Fault>> {
    let library = plan::library(&arguments.sources)?;
    if arguments.files.len() > MOST_RUNS {
        let text = format!("at most {MOST_RUNS} files make a submission");
        return Err(vec![Fault::new(text)]);
    }
    let target = target(arguments)?;
    let folder = folder_of(&target);
    // Before the work, which may take a while; writing does not overwrite either.
    if !arguments.print && target.symlink_metadata().is_ok() {
        let fault = Fault::new("this file is already there and is not overwritten");
        let help = "move it away, write another one with `--into FILE`, or look at the draft with \
                    `--print`";
        return Err(vec![fault.help(help).in_file(&target)]);
    }
    let question = Question {
        library: &library,
        case: arguments.case.as_deref(),
        files: named(&arguments.files, &folder)?,
    };
    let drafted = draft(&question)?;
    let toml = draft_toml(&drafted);
    let mut written = None;
    if let Some(text) = &toml {
        // What is written must be a submission: a draft that the audit refuses helps nobody.
        Submission::parse(text, &folder)?;
        if !arguments.print {
            write_new(&target, text.as_bytes()).map_err(|fault| vec![fault])?;
            written = Some(target);
        }
    }
    Ok(Draft {
        drafted,
        toml,
        written,
    })
}

/// Where the submission goes: as stated, else beside the files.
fn target(arguments: &DraftArguments) -> Result<PathBuf, Vec<Fault>> {
    if let Some(path) = &arguments.into {
        let is_toml = path.extension().is_some_and(|ending| ending == "toml");
        if !is_toml {
            let fault = Fault::new("a submission is a file that ends in .toml");
            let help = format!("write `--into {NAME}`; audits of folders find that name alone");
            return Err(vec![fault.help(help).in_file(path)]);
        }
        if !folder_of(path).is_dir() {
            let fault = Fault::new("the folder of this submission is not there");
            return Err(vec![fault.help("make the folder first").in_file(path)]);
        }
        return Ok(path.clone());
    }
    let mut common: Option<PathBuf> = None;
    for file in &arguments.files {
        let folder = folder_of(file);
        common = Some(match common {
            None => folder,
            Some(known) => shared(&known, &folder),
        });
    }
    Ok(common.unwrap_or_default().join(NAME))
}

fn folder_of(path: &Path) -> PathBuf {
    match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder.to_owned(),
        _ => PathBuf::from("."),
    }
}

/// The deepest folder that holds both, as the user has written it.
fn shared(one: &Path, other: &Path) -> PathBuf {
    let same = one.components().zip(other.components());
    let same: PathBuf = same.take_while(|(a, b)| a == b).map(|(a, _)| a).collect();
    if same.as_os_str().is_empty() {
        PathBuf::from(".")
    } else {
        same
    }
}

/// The files as the submission names them.
fn named(files: &[PathBuf], folder: &Path) -> Result<Vec<(String, PathBuf)>, Vec<Fault>> {
    let mut named: Vec<(String, PathBuf)> = Vec::new();
    let mut faults = Vec::new();
    for path in files {
        match name_in(path, folder) {
            Ok(name) if named.iter().any(|(known, _)| *known == name) => {
                faults.push(Fault::new("this file is named twice").in_file(path));
            }
            Ok(name) => named.push((name, path.clone())),
            Err(fault) => faults.push(fault.in_file(path)),
        }
    }
    if faults.is_empty() {
        Ok(named)
    } else {
        Err(faults)
    }
}

fn name_in(path: &Path, folder: &Path) -> Result<String, Fault> {
    if path.is_dir() {
        let fault = Fault::new("this is a folder, trajectory files are expected");
        return Err(fault.help("name the files, as in `stepgauge draft FOLDER/*.csv`"));
    }
    let real = |path: &Path| {
        let read = path.canonicalize();
        read.map_err(|error| match error.kind() {
            std::io::ErrorKind::NotFound => Fault::new("there is no such file"),
            _ => Fault::io(path, &error),
        })
    };
    let (file, folder_real) = (real(path)?, real(folder)?);
    let Ok(within) = file.strip_prefix(&folder_real) else {
        let shown = quoted(&folder.display().to_string());
        let fault = Fault::new(format!(
            "this file does not lie in the folder of the submission, {shown}"
        ));
        let help = "a submission's files lie in its own folder: copy the file there, or choose \
                    the folder with `--into FOLDER/submission.toml`";
        return Err(fault.help(help));
    };
    let parts: Option<Vec<&str>> = within.iter().map(|part| part.to_str()).collect();
    let Some(name) = parts.map(|parts| parts.join("/")) else {
        let fault = Fault::new("the name of this file is not UTF-8 text");
        return Err(fault.help("give the file another name"));
    };
    confined(folder, &name)?;
    Ok(name)
}

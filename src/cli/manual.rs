//! Completions for shells and manual pages, from the definitions of the arguments.

use std::io::{self, Write};

use clap::{Args, CommandFactory};

use super::args::Arguments;
use crate::fault::{Fault, nearest, quoted};

/// Arguments of `completions`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: completions for bash, from the next login on
  stepgauge completions bash > ~/.local/share/bash-completion/completions/stepgauge")]
pub struct CompletionArguments {
    /// The shell to write them for
    #[arg(value_name = "SHELL")]
    pub shell: clap_complete::Shell,
}

/// Arguments of `manual`.
#[derive(Debug, Args)]
#[command(after_help = "\
Example: read the page of a command
  stepgauge manual audit | man -l -")]
pub struct ManualArguments {
    /// The command; left out, the page of stepgauge itself
    #[arg(value_name = "COMMAND")]
    pub command: Option<String>,
}

/// The script that a shell reads.
pub(super) fn completions(arguments: &CompletionArguments) -> Vec<u8> {
    let mut script = Vec::new();
    let mut command = Arguments::command();
    clap_complete::generate(arguments.shell, &mut command, "stepgauge", &mut script);
    script
}

/// A page in the language of `man`.
///
/// # Errors
/// A command that does not exist.
pub(super) fn manual(arguments: &ManualArguments) -> Result<Vec<u8>, Fault> {
    let mut all = Arguments::command();
    all.build();
    let page = match arguments.command.as_deref() {
        None => all,
        Some(name) => match all.find_subcommand(name) {
            Some(one) => one.clone(),
            None => {
                let fault = Fault::new(format!("{} is no command", quoted(name)));
                let near = nearest(name, all.get_subcommands().map(|one| one.get_name()));
                return Err(match near {
                    Some(near) => fault.help(format!("did you mean `{near}`?")),
                    None => fault.help("`stepgauge --help` lists all commands"),
                });
            }
        },
    };
    let mut text = Vec::new();
    render(page, &mut text).map_err(|error| Fault::new(error.to_string()))?;
    Ok(text)
}

fn render(page: clap::Command, out: &mut dyn Write) -> io::Result<()> {
    // No date: the page of one version is always the same.
    let mut bytes = Vec::new();
    clap_mangen::Man::new(page).date("").render(&mut bytes)?;
    out.write_all(&bytes)
}

//! Arguments in, exit status out.

use std::process::ExitCode;

use clap::Parser;
use stepgauge::cli::{Arguments, run};

fn main() -> ExitCode {
    run(&Arguments::parse())
}

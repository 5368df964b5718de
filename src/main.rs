//! Arguments in, exit status out.

use std::process::ExitCode;

use clap::Parser;
use stepgauge::cli::{Arguments, run};

/// Audits of many small runs make and drop many short vectors, on several threads.
#[global_allocator]
static ALLOCATOR: mimalloc::MiMalloc = mimalloc::MiMalloc;

fn main() -> ExitCode {
    run(&Arguments::parse())
}

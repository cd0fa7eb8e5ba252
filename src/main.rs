//! The `beltwright` program: parse, run, exit code.

use std::process::ExitCode;

use clap::Parser;

use beltwright::cli::{Cli, code_of};

fn main() -> ExitCode {
    let outcome = Cli::parse().run();
    if let Err(error) = &outcome {
        eprintln!("{error:#}");
    }
    ExitCode::from(code_of(&outcome))
}

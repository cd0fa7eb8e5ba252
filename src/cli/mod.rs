//! The command line: one file per command.
//!
//! A new command is a file with an `Args` struct (clap's derive) and `Args::run`, a variant of `Command`, and the arm
//! that the compiler then asks for.
//!
//! | exit code | meaning |
//! |---|---|
//! | 0 | done |
//! | 1 | done, but a check that was asked for fell short |
//! | 2 | bad input (settings, recording, arguments): nothing was done |
//! | 3 | a device failed |

mod caution;
mod check;
mod compare;
mod draw;
mod files;
mod interrupt;
mod judge;
mod mark;
mod pace;
mod propose;
mod replay;
mod report;
mod results;
mod sorting;
mod station;
mod sweep;
mod teach;
mod timeline;

use std::io::{self, Write};

use clap::{Parser, Subcommand};
use thiserror::Error;

/// Turns a camera over a conveyor and a line-side PC into a sorter.
///
/// Every command is a dry run unless it is told otherwise: no port is opened and nothing moves. This program is not a
/// safety function and must not be relied on to protect people.
#[derive(Debug, Parser)]
#[command(version, arg_required_else_help = true)]
pub struct Cli {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    Replay(replay::Args),
    Check(check::Args),
    Teach(teach::Args),
    Judge(judge::Args),
    Mark(mark::Args),
    Compare(compare::Args),
    Sweep(sweep::Args),
    Draw(draw::Args),
    Pace(pace::Args),
}

/// How a command ended when nothing failed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Outcome {
    /// All is well.
    Done,
    /// It did its work, but a check that was asked for fell short.
    FellShort,
    /// The input was bad, and the command has said so itself, for example in its JSON.
    BadInput,
}

/// A camera, a port or a pin that failed. Everything else that fails counts as bad input.
#[derive(Debug, Error)]
#[error(transparent)]
pub struct DeviceFailed(pub anyhow::Error);

impl Cli {
    /// Runs the command that was asked for.
    ///
    /// # Errors
    /// With a sentence for the person who typed it; [`code_of`] tells what kind it is.
    pub fn run(self) -> anyhow::Result<Outcome> {
        let mut out = io::stdout().lock();
        let outcome = match self.command {
            Command::Replay(args) => args.run(&mut out),
            Command::Check(args) => args.run(&mut out),
            Command::Teach(args) => args.run(&mut out),
            Command::Judge(args) => args.run(&mut out),
            Command::Mark(args) => args.run(&mut out),
            Command::Compare(args) => args.run(&mut out),
            Command::Sweep(args) => args.run(&mut out),
            Command::Draw(args) => args.run(),
            Command::Pace(args) => args.run(&mut out),
        };
        let flushed = out.flush();
        match outcome.and_then(|outcome| Ok(flushed.map(|()| outcome)?)) {
            Err(error) if is_closed_pipe(&error) => Ok(Outcome::Done),
            other => other,
        }
    }
}

/// Whoever read the output, such as `head`, had enough of it.
fn is_closed_pipe(error: &anyhow::Error) -> bool {
    let io = error.downcast_ref::<io::Error>();
    io.is_some_and(|error| error.kind() == io::ErrorKind::BrokenPipe)
}

/// The exit code for a command's end.
pub fn code_of(outcome: &anyhow::Result<Outcome>) -> u8 {
    match outcome {
        Ok(Outcome::Done) => 0,
        Ok(Outcome::FellShort) => 1,
        Ok(Outcome::BadInput) => 2,
        Err(error) if error.is::<DeviceFailed>() => 3,
        Err(_) => 2,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exit_codes_are_the_documented_ones() {
        let device = anyhow::Error::new(DeviceFailed(anyhow::anyhow!("no answer")));
        assert_eq!(code_of(&Ok(Outcome::Done)), 0);
        assert_eq!(code_of(&Ok(Outcome::FellShort)), 1);
        assert_eq!(code_of(&Ok(Outcome::BadInput)), 2);
        assert_eq!(code_of(&Err(anyhow::anyhow!("no such file"))), 2);
        assert_eq!(code_of(&Err(device.context("relay board"))), 3);
    }

    #[test]
    fn arguments_are_consistent() {
        use clap::CommandFactory;
        Cli::command().debug_assert();
    }
}

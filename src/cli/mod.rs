//! The command line: a file for each command, with its own options; no physics.

mod args;
mod calibrate;
mod check;
mod completions;
mod estimate;
mod events;
mod expect;
mod help;
mod manual;
mod pictures;
mod polygons;
mod profile;
mod report;
mod run;
mod text;

use std::io::Write;
use std::path::Path;

use anstyle::AnsiColor;
use clap::Parser;

use self::args::{Args, Command};
use crate::error::Error;

/// How a run ended; the value is the exit status.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[repr(u8)]
pub enum Status {
    /// Complete.
    Complete = 0,
    /// Complete, but some input was unusable.
    SomeInputUnusable = 1,
    /// Not done.
    NotDone = 2,
}

/// Runs the program with the arguments of the process.
#[must_use]
pub fn main() -> Status {
    let args = match Args::try_parse() {
        Ok(args) => args,
        Err(error) => {
            // Help and version are no errors; a closed pipe under them is none either.
            let status = if error.use_stderr() {
                Status::NotDone
            } else {
                Status::Complete
            };
            let _ = error.print();
            return status;
        }
    };
    let result = match &args.command {
        Command::Check(args) => check::check(args),
        Command::Polygons(args) => polygons::polygons(args),
        Command::Estimate(args) => estimate::estimate(args),
        Command::Calibrate(args) => calibrate::calibrate(args),
        Command::Events(args) => events::events(args),
        Command::Profile(args) => profile::profile(args),
        Command::Report(args) => report::report(args),
        Command::Completions(args) => completions::completions(args),
        Command::Manual(args) => manual::manual(args),
    };
    match result {
        Ok(status) => status,
        Err(error) if error.is_closed_pipe() => Status::Complete,
        Err(error) => {
            say("error", &error.to_string());
            Status::NotDone
        }
    }
}

/// Results for the user.
fn print(text: &str) -> Result<(), Error> {
    // Escape codes are for terminals (NO_COLOR, CLICOLOR and CLICOLOR_FORCE say otherwise).
    let mut out = anstream::stdout().lock();
    out.write_all(text.as_bytes())
        .and_then(|()| out.flush())
        .map_err(|e| Error::write(Path::new("standard output"), e))
}

/// Says something on stderr.
fn say(kind: &str, text: &str) {
    let style = match kind {
        "error" => AnsiColor::Red,
        "warning" => AnsiColor::Yellow,
        _ => AnsiColor::Cyan,
    };
    let style = style.on_default().bold();
    // There is nowhere else to say that this cannot be said.
    let _ = writeln!(anstream::stderr(), "{style}{kind}:{style:#} {text}");
}

//! `gyremesh completions`.

use clap::CommandFactory;
use clap_complete::Shell;

use super::args::Args;
use super::{Status, print};
use crate::error::Error;

/// Options of `completions`.
#[derive(Debug, clap::Args)]
pub(super) struct CompletionsArgs {
    /// The shell
    shell: Shell,
}

pub(super) fn completions(args: &CompletionsArgs) -> Result<Status, Error> {
    let mut script = Vec::new();
    clap_complete::generate(args.shell, &mut Args::command(), "gyremesh", &mut script);
    print(&String::from_utf8_lossy(&script))?;
    Ok(Status::Complete)
}

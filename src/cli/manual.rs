//! `gyremesh manual`: pages for `man`, from the same definitions as the help.

use std::io;
use std::path::{Path, PathBuf};

use clap::{Command, CommandFactory};
use clap_mangen::Man;
use clap_mangen::roff::{Roff, roman};

use super::args::{Args, output_set};
use super::{Status, print};
use crate::error::Error;

/// Options of `manual`.
#[derive(Debug, clap::Args)]
pub(super) struct ManualArgs {
    /// Write the pages of all commands into this folder, gyremesh.1 and so on; without it the first is printed
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
}

pub(super) fn manual(args: &ManualArgs) -> Result<Status, Error> {
    let out = args.out.as_deref().unwrap_or(Path::new("-"));
    let mut set = output_set(out, "gyremesh.1", &[])?;
    for (name, page) in pages() {
        let page = page.map_err(|e| Error::write(Path::new(&name), e))?;
        set.put(&name, &page)?;
    }
    let files = set.commit()?;
    if !files.is_empty() {
        print(&format!("{} pages in {}\n", files.len(), out.display()))?;
    }
    Ok(Status::Complete)
}

/// Name and text of every page.
fn pages() -> Vec<(String, io::Result<Vec<u8>>)> {
    let mut program = Args::command().disable_help_subcommand(true);
    program.build();
    let commands = std::iter::once(&program).chain(program.get_subcommands());
    let pages = commands.map(|command| {
        let man = Man::new(command.clone())
            .source(concat!("gyremesh ", env!("CARGO_PKG_VERSION")))
            .manual("Gyremesh");
        (man.get_filename(), page(&man, command))
    });
    pages.collect()
}

/// What stands after the options in the help keeps its lines, which fit a page.
fn page(man: &Man, command: &Command) -> io::Result<Vec<u8>> {
    let mut out = Vec::new();
    man.render_title(&mut out)?;
    man.render_name_section(&mut out)?;
    man.render_synopsis_section(&mut out)?;
    man.render_description_section(&mut out)?;
    man.render_options_section(&mut out)?;
    if command.has_subcommands() {
        man.render_subcommands_section(&mut out)?;
    }
    if let Some(text) = command.get_after_help() {
        let mut roff = Roff::new();
        roff.control("SH", ["DETAILS"]);
        roff.control("nf", []);
        roff.control("in", ["2n"]);
        for line in text.to_string().lines() {
            roff.text([roman(line)]);
        }
        roff.control("in", []);
        roff.control("fi", []);
        roff.to_writer(&mut out)?;
    }
    Ok(out)
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn a_page_has_every_option_and_all_of_the_help() {
        let mut program = Args::command();
        program.build();
        let pages: Vec<(String, String)> = pages()
            .into_iter()
            .map(|(name, page)| (name, String::from_utf8(page.unwrap()).unwrap()))
            .collect();
        let of = |name: &str| &pages.iter().find(|p| p.0 == name).unwrap().1;
        let commands = program.get_subcommands().filter(|c| c.get_name() != "help");
        let mut options = 0;
        for command in commands {
            let page = of(&format!("gyremesh-{}.1", command.get_name()));
            for option in command.get_arguments() {
                let Some(long) = option.get_long() else {
                    continue;
                };
                let written = format!("\\-\\-{}", long.replace('-', "\\-"));
                assert!(page.contains(&written), "{long}\n{page}");
                options += 1;
            }
            let help = command.get_after_help().map(ToString::to_string);
            let help = help.unwrap_or_default();
            for word in help.split(|c: char| !c.is_ascii_alphabetic()) {
                assert!(page.contains(word), "{word}\n{page}");
            }
            assert!(of("gyremesh.1").contains(command.get_name()));
        }
        assert!(options > 60, "{options}");
    }
}

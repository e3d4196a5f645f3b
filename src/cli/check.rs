//! `gyremesh check`.

use std::path::PathBuf;

use clap::Args;

use super::Status;
use super::args::{Format, OutputArgs, ReportArgs, several};
use super::run::{over_reports, tell};
use super::text::reading::reading_text;
use super::text::screening::explained_text;
use crate::error::{Error, nearest_name};
use crate::output::{FlaggedFiles, FlaggedFormats, reading_json};
use crate::pipeline::{Reading, Sources};
use crate::settings::Overrides;
use crate::station::Network;
use crate::time::Time;

/// Options of `check`.
#[derive(Debug, Args)]
pub(super) struct CheckArgs {
    /// Settings file
    network: PathBuf,
    #[command(flatten)]
    output: OutputArgs,
    /// Formats of the flagged reports, several separated by commas
    #[arg(
        long,
        value_name = "FORMAT",
        value_delimiter = ',',
        default_value = "csv",
        requires = "out"
    )]
    format: Vec<Format>,
    /// Print every test of a station's reports at, or nearest to, the time of --at, with its numbers
    #[arg(long, value_name = "STATION", requires = "at")]
    explain: Option<String>,
    /// Time of the reports to explain, RFC 3339
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339, requires = "explain")]
    at: Option<Time>,
    #[command(flatten)]
    reports: ReportArgs,
}

pub(super) fn check(args: &CheckArgs) -> Result<Status, Error> {
    args.reports.use_threads();
    let overrides = args.reports.over(Overrides::default());
    let sources = Sources::read(&args.network, &overrides)?;
    let (settings, network) = (&sources.settings, &sources.network);
    let explain = match (&args.explain, args.at) {
        (Some(id), Some(at)) => Some((station(network, id)?, at)),
        _ => None,
    };
    let formats = FlaggedFormats {
        csv: args.format.contains(&Format::Csv),
        parquet: args.format.contains(&Format::Parquet),
    };
    let ending = args.format.first().map_or("csv", |f| f.ending());
    let main = format!("reports_flagged.{ending}");
    let more = [several(&args.format), ("--explain", explain.is_some())];
    // The rows come in no steps that could be shown.
    let (reading, set) = over_reports(settings, true, |order, _| {
        let mut set = args.output.files(&main, &more)?;
        let mut files = None;
        let reading = Reading::with(settings, network, order, explain, |window, neighbours| {
            let Some(set) = &mut set else {
                return Ok(());
            };
            let files = match &mut files {
                Some(files) => files,
                None => files.insert(FlaggedFiles::new(settings, network, formats, set)?),
            };
            files.write(set, window, neighbours)
        })?;
        if let (Some(set), Some(files)) = (&mut set, files) {
            files.finish(set)?;
        }
        Ok((reading, set))
    })?;
    if let Some(set) = set {
        set.commit()?;
    }
    let status = tell(sources.warnings.iter().chain(&reading.warnings), &reading);
    args.output.show(
        || reading_json(settings, network, &reading),
        || match explain {
            Some((s, _)) => {
                let id = &network.stations()[s].id; // a station of the network
                explained_text(id, &reading.explained, &reading)
            }
            None => reading_text(settings, network, &reading),
        },
    )?;
    Ok(if reading.failures.len() == reading.files.len() {
        Status::NotDone
    } else {
        status
    })
}

/// The station of an identifier.
fn station(network: &Network, id: &str) -> Result<usize, Error> {
    network.find(id).ok_or_else(|| {
        let ids = network.stations().iter().map(|s| s.id.as_str());
        let near = nearest_name(id, ids);
        let meant = near.map_or_else(String::new, |near| format!("; is `{near}` meant?"));
        Error::Network(format!("there is no station `{id}`{meant}"))
    })
}

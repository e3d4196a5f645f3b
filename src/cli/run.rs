//! What the commands that read reports have in common.

use indicatif::{ProgressBar, ProgressStyle};

use super::{Status, say};
use crate::error::{Error, ErrorKind};
use crate::pipeline::Reading;
use crate::report::InputOrder;
use crate::settings::Settings;
use crate::warning::Warning;

/// Does a job over the reports in the order of time; if they are not in it, they are sorted and the job begins anew. The
/// job tells the function it is given how many rows it has read, which are shown unless `quiet`.
pub(super) fn over_reports<T>(
    settings: &Settings,
    quiet: bool,
    mut job: impl FnMut(InputOrder, &dyn Fn(u64)) -> Result<T, Error>,
) -> Result<T, Error> {
    let bar = progress_bar(quiet);
    let progress = |rows| bar.set_position(rows);
    let result = match job(InputOrder::first_try(&settings.reports), &progress) {
        Err(error) if error.kind() == ErrorKind::Order => {
            say("note", &format!("{error}: they are sorted first"));
            job(InputOrder::Any, &progress)
        }
        result => result,
    };
    bar.finish_and_clear();
    result
}

/// Tells the warnings and the files that could not be read; whether all input was usable.
pub(super) fn tell<'a>(
    warnings: impl IntoIterator<Item = &'a Warning>,
    reading: &Reading,
) -> Status {
    for warning in warnings {
        say("warning", &warning.to_string());
    }
    for failure in &reading.failures {
        say("warning", &failure.to_string());
    }
    if reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    }
}

/// On stderr, and only on a terminal.
fn progress_bar(quiet: bool) -> ProgressBar {
    if quiet {
        return ProgressBar::hidden();
    }
    let bar = ProgressBar::new_spinner();
    if let Ok(style) = ProgressStyle::with_template("{spinner} {human_pos} reports read, {per_sec}")
    {
        bar.set_style(style);
    }
    bar
}

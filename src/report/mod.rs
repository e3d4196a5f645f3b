//! Wind reports: reading them into columns.
//!
//! A report is one station's wind at one time. Readers turn rows of any format into [`Rows`], plain columns in the
//! order of the input; [`ReportTable`] sorts them by station and time, counts repeats, and is what all later stages
//! see. No reader of tables allocates per row.

mod build;
mod cache;
mod chunk;
mod coded;
mod coded_file;
mod columnar;
mod direction;
mod feed;
mod format;
mod layout;
mod metar;
mod names;
mod read;
mod rounding;
mod rows;
mod spill;
mod stream;
mod synop;
mod table;
mod text;
mod values;

pub use build::CONFLICTS_KEPT;
pub use coded::{CodeError, CodedDirection, CodedSpeed, CodedWind, DayTime, Entry};
pub use feed::ReportFiles;
pub use format::{Columns, ReportForm, ReportFormat, ScalarColumn, WindColumns};
pub use metar::{Metar, Metars, metars, parse_metar};
pub use read::{FileOutcome, ReadOutcome, read_bytes, read_reports};
pub use rounding::{Rounding, RoundingFinder, SpeedStep};
pub use rows::{Moving, Part, Report, Rows, SCALARS, ScalarValues};
pub use stream::{InputOrder, OrderedReports, ReportStream};
pub use synop::{Synop, Synops, synops};
pub use table::{Conflict, Content, ReportTable};

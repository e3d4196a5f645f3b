//! Area-averaged vorticity and divergence, with error bars, from the reports of wind-station networks.
#![forbid(unsafe_code)]

pub mod align;
pub mod check;
pub mod cli;
pub mod error;
pub mod integral;
pub mod output;
pub mod pipeline;
pub mod polygon;
pub mod report;
pub mod settings;
pub mod station;
pub mod sum;
pub mod tally;
pub mod time;
pub mod units;
pub mod warning;

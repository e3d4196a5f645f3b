//! Checks of the reports, station by station, at their own times. A check removes nothing: it raises a flag, and the
//! alignment decides.
//!
//! The tests are those of the IOOS QARTOD Manual for Real-Time Quality Control of Wind Data, with WMO's guidance for
//! automatic stations (Zahumenský 2004) beside them. Each report keeps the flag of each test ([`TestFlags`]); its own
//! flag is the worst of them. What a test must know of earlier reports it keeps itself ([`StationScreen`]), so no flag
//! depends on how the reports were cut into windows.

mod agreement;
mod attenuated;
mod climatology;
mod flag;
mod gap;
mod location;
mod persistence;
mod point;
mod range;
mod rate;
mod run;
mod screen;
mod spike;
mod steps;
mod stuck;
mod summary;
mod witness;

pub use flag::{Flag, Test, TestFlags};
pub use range::range_flag;
pub use screen::{StationScreen, screen, screen_all};
pub use summary::{StationReading, StationSums};
pub use witness::{Explained, Finding, Listener};

//! Events: areas where the air converges, diverges or spins up, followed in time; wind shifts and the lines they make.
//!
//! - **Areas** ([`AreaFinder`], [`Tracker`]). A triangle is strong if its mean is as large as a jump of the wind by 5 m/s
//!   across it makes it (`[events] jump`), so that the same figure serves networks of any spacing. Strong triangles that
//!   share a station make an area, which begins with a triangle that is strong *and* called different from zero, and goes on
//!   with triangles of half that strength that differ from zero by 1.96 standard errors. Areas of following times are the
//!   same event if they share triangles; a gap of 20 min does not end it. Of an area that splits the part with most of
//!   the old triangles goes on; of areas that merge the one that has most of the new.
//! - **Wind shifts** ([`ShiftFinder`]). A station's wind shifts when the mean after a time differs from that before it by
//!   3 m/s and 2.5 standard errors, more than at any other time around; time and error come from a smooth step fitted to the winds.
//! - **Lines** ([`LineFinder`]). Wind shifts alike at six stations or more, whose times make a plane t = t0 + s·x, are a line
//!   that moves at 1/|s|. It is known when enough stations have been passed; from then on each further one improves it.
//!
//! All three take the winds time after time, and remember what they need in bounded room, besides the events themselves.
//!
//! A line is taken as straight, and its speed as constant; what bends or slows it shows in the scatter of its arrivals,
//! and so in the errors, only as far as the stations have seen it. A line that stands still, or moves at less than 1 m/s,
//! is an area, not a line. Only triangles make areas: a triangle left out by `[limits]`, or doubted for a suspect station, is a
//! hole in them.

mod area;
mod arrival;
mod fit;
mod line;
mod motion;
mod shift;
mod step;
mod track;

pub use area::{AreaFinder, AreaKind, Cell, Snapshot, connected};
pub use arrival::{Forecast, PlaceArrival};
pub use line::{LineEvent, LineFinder};
pub use motion::{Motion, Path};
pub use shift::{Passage, ShiftFinder};
pub use track::{AreaEvent, Tracker};

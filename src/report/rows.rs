//! Reports in the order of the input.

use crate::time::Time;
use crate::units::FromDirection;

/// A report as a reader hands it over.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Report {
    /// Place of the station in the network.
    pub station: u32,
    /// End of the averaging window.
    pub time: Time,
    /// m/s
    pub speed: Option<f64>,
    /// Where the wind blows from.
    pub direction: Option<FromDirection>,
    /// Which of the two the input holds at all.
    pub part: Part,
    /// m/s
    pub gust: Option<f64>,
    /// Position and level of the report itself.
    pub moving: Option<Moving>,
    /// 0 for the first report, more for each correction of it.
    pub correction: u8,
    /// Number of the file, line in it.
    pub place: (u32, u64),
}

/// What of a wind an input holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Part {
    /// Speed and direction.
    Whole,
    /// Speed alone; the direction comes from elsewhere.
    Speed,
    /// Direction alone; the speed comes from elsewhere.
    Direction,
}

/// Position and level that a report carries itself.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Moving {
    /// Degrees north and east, if given.
    pub position: Option<crate::station::Position>,
    /// Height, m, or pressure, Pa, if given.
    pub level: Option<f64>,
}

/// Most scalars that report files can have.
pub const SCALARS: usize = 4;

/// Values of observed scalars, in the user's units, in the order of the settings.
pub type ScalarValues = [Option<f64>; SCALARS];

/// None of them.
pub(super) const NO_SCALARS: ScalarValues = [None; SCALARS];

/// Bits of the `kind` column.
pub(super) mod kind {
    pub const SPEED: u8 = 1;
    pub const DIRECTION: u8 = 2;
    pub const SPEED_PART: u8 = 4;
    pub const DIRECTION_PART: u8 = 8;
}

/// What every report has, packed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Packed {
    pub(super) time: Time,
    /// m/s; 0 where there is none.
    pub(super) speed: f64,
    /// Degrees; 0 where there is none.
    pub(super) direction: f64,
    pub(super) station: u32,
    pub(super) line: u32,
    pub(super) file: u16,
    pub(super) kind: u8,
}

/// Reports in the order of the input. What few inputs have stands in columns of its own, which are empty where none of
/// their values is there.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Rows {
    pub(super) packed: Vec<Packed>,
    /// First and last time.
    span: Option<(Time, Time)>,
    pub(super) gust: Vec<Option<f64>>,
    pub(super) moving: Vec<Option<Moving>>,
    pub(super) correction: Vec<u8>,
    pub(super) scalars: Vec<ScalarValues>,
}

impl Rows {
    /// Rows with room for `n` reports.
    #[must_use]
    pub fn with_capacity(n: usize) -> Self {
        Self {
            packed: Vec::with_capacity(n),
            ..Self::default()
        }
    }

    /// Adds a report.
    #[inline]
    pub fn push(&mut self, report: &Report) {
        let before = self.len();
        let part = match report.part {
            Part::Whole => 0,
            Part::Speed => kind::SPEED_PART,
            Part::Direction => kind::DIRECTION_PART,
        };
        let speed = if report.speed.is_some() {
            kind::SPEED
        } else {
            0
        };
        let direction = if report.direction.is_some() {
            kind::DIRECTION
        } else {
            0
        };
        self.push_packed(Packed {
            time: report.time,
            speed: report.speed.unwrap_or(0.0),
            direction: report.direction.map_or(0.0, FromDirection::degrees),
            station: report.station,
            line: u32::try_from(report.place.1).unwrap_or(u32::MAX),
            file: u16::try_from(report.place.0).unwrap_or(u16::MAX),
            kind: part | speed | direction,
        });
        put(
            &mut self.gust,
            before,
            report.gust,
            report.gust.is_some(),
            None,
        );
        put(
            &mut self.moving,
            before,
            report.moving,
            report.moving.is_some(),
            None,
        );
        put(
            &mut self.correction,
            before,
            report.correction,
            report.correction > 0,
            0,
        );
        put(&mut self.scalars, before, NO_SCALARS, false, NO_SCALARS);
    }

    /// Adds scalars to the last report.
    #[inline]
    pub fn put_scalars(&mut self, values: &ScalarValues) {
        if let Some(before) = self.len().checked_sub(1)
            && values.iter().any(Option::is_some)
        {
            self.scalars.truncate(before);
            put(&mut self.scalars, before, *values, true, NO_SCALARS);
        }
    }

    /// Adds a report of speed (m/s) and direction and nothing else: the usual one, on the shortest way.
    #[inline]
    pub fn push_wind(
        &mut self,
        station: u32,
        time: Time,
        speed: f64,
        direction: FromDirection,
        place: (u32, u64),
    ) {
        self.push_packed(Packed {
            time,
            speed,
            direction: direction.degrees(),
            station,
            line: u32::try_from(place.1).unwrap_or(u32::MAX),
            file: u16::try_from(place.0).unwrap_or(u16::MAX),
            kind: kind::SPEED | kind::DIRECTION,
        });
        // Columns that others have begun go on.
        if !self.gust.is_empty() {
            self.gust.push(None);
        }
        if !self.moving.is_empty() {
            self.moving.push(None);
        }
        if !self.correction.is_empty() {
            self.correction.push(0);
        }
        if !self.scalars.is_empty() {
            self.scalars.push(NO_SCALARS);
        }
    }

    /// Adds a row of `other`, which has it.
    pub(super) fn push_from(&mut self, other: &Self, row: usize) {
        let before = self.len();
        self.push_packed(other.packed[row]);
        let gust = other.gust.get(row).copied().flatten();
        put(&mut self.gust, before, gust, gust.is_some(), None);
        let moving = other.moving.get(row).copied().flatten();
        put(&mut self.moving, before, moving, moving.is_some(), None);
        let correction = other.correction.get(row).copied().unwrap_or(0);
        let corrected = correction > 0;
        put(&mut self.correction, before, correction, corrected, 0);
        let scalars = other.scalars.get(row).copied().unwrap_or(NO_SCALARS);
        let there = scalars != NO_SCALARS;
        put(&mut self.scalars, before, scalars, there, NO_SCALARS);
    }

    /// First and last time.
    #[must_use]
    pub fn span(&self) -> Option<(Time, Time)> {
        self.span
    }

    /// Adds what every report has.
    #[inline]
    pub(super) fn push_packed(&mut self, packed: Packed) {
        let time = packed.time;
        self.span = Some(match self.span {
            Some((first, last)) => (first.min(time), last.max(time)),
            None => (time, time),
        });
        self.packed.push(packed);
    }

    /// Takes out the rows from `cut` on; both parts keep their order.
    #[must_use]
    pub fn split_off_from(&mut self, cut: Time) -> Self {
        let stays: Vec<bool> = self.packed.iter().map(|row| row.time < cut).collect();
        let part = |wanted: bool| {
            let packed = chosen(&self.packed, &stays, wanted);
            let mut times = packed.iter().map(|row| row.time);
            let first = times.next();
            Self {
                span: first.map(|first| {
                    times.fold((first, first), |(a, b), time| (a.min(time), b.max(time)))
                }),
                packed,
                gust: chosen(&self.gust, &stays, wanted),
                moving: chosen(&self.moving, &stays, wanted),
                correction: chosen(&self.correction, &stays, wanted),
                scalars: chosen(&self.scalars, &stays, wanted),
            }
        };
        let later = part(false);
        *self = part(true);
        later
    }

    /// Memory that the rows take, bytes.
    #[must_use]
    pub fn bytes(&self) -> usize {
        self.packed.capacity() * size_of::<Packed>()
            + self.gust.capacity() * size_of::<Option<f64>>()
            + self.moving.capacity() * size_of::<Option<Moving>>()
            + self.correction.capacity()
            + self.scalars.capacity() * size_of::<ScalarValues>()
    }

    /// How many there are.
    #[must_use]
    pub fn len(&self) -> usize {
        self.packed.len()
    }

    /// True if there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.packed.is_empty()
    }
}

/// The values that are wanted; a column that is empty stays so.
fn chosen<T: Copy>(column: &[T], stays: &[bool], wanted: bool) -> Vec<T> {
    let pairs = column.iter().zip(stays);
    let of_part = pairs.filter(|&(_, &stays)| stays == wanted);
    of_part.map(|(&value, _)| value).collect()
}

/// Adds a value to a column that stays empty until a value `is_there`.
#[inline]
fn put<T: Copy>(column: &mut Vec<T>, before: usize, value: T, is_there: bool, nothing: T) {
    if is_there || !column.is_empty() {
        column.resize(before, nothing);
        column.push(value);
    }
}

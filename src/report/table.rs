//! Reports in columns.

use crate::check::Flag;
use crate::tally::{Reason, Tally};
use crate::time::Time;
use crate::units::{FromDirection, Wind};

/// What a report says of the wind.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Content {
    /// Speed and direction.
    Wind,
    /// Calm: the speed is below what the sensor sees.
    Calm,
    /// A speed without a direction.
    SpeedOnly,
    /// Neither.
    Nothing,
}

/// Reports in the order of the input, as columns of equal length.
#[derive(Debug, Default)]
pub struct Rows {
    station: Vec<u32>,
    time: Vec<Time>,
    /// m/s; 0 where there is none.
    speed: Vec<f64>,
    /// Degrees; 0 where there is none.
    direction: Vec<f64>,
    content: Vec<Content>,
    file: Vec<u32>,
    line: Vec<u32>,
}

impl Rows {
    /// Adds a report of station `station` (its place in the network).
    pub fn push(
        &mut self,
        station: u32,
        time: Time,
        speed: Option<f64>,
        direction: Option<FromDirection>,
        place: (u32, u64),
    ) {
        let content = match (speed, direction) {
            // Common practice: no speed is calm, whatever stands for the direction.
            (Some(0.0), _) => Content::Calm,
            (Some(_), Some(_)) => Content::Wind,
            (Some(_), None) => Content::SpeedOnly,
            (None, _) => Content::Nothing,
        };
        self.station.push(station);
        self.time.push(time);
        self.speed.push(speed.unwrap_or(0.0));
        self.direction
            .push(direction.map_or(0.0, FromDirection::degrees));
        self.content.push(content);
        self.file.push(place.0);
        self.line.push(u32::try_from(place.1).unwrap_or(u32::MAX));
    }

    /// Adds rows that come later in the input.
    pub fn append(&mut self, mut later: Self) {
        self.station.append(&mut later.station);
        self.time.append(&mut later.time);
        self.speed.append(&mut later.speed);
        self.direction.append(&mut later.direction);
        self.content.append(&mut later.content);
        self.file.append(&mut later.file);
        self.line.append(&mut later.line);
    }

    /// How many there are.
    #[must_use]
    pub fn len(&self) -> usize {
        self.time.len()
    }

    /// True if there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.time.is_empty()
    }

    fn same_wind(&self, a: usize, b: usize) -> bool {
        self.content[a] == self.content[b]
            && self.speed[a].to_bits() == self.speed[b].to_bits()
            && self.direction[a].to_bits() == self.direction[b].to_bits()
    }
}

/// The values of a column at these places.
fn gather<T: Copy>(column: &[T], places: &[u32]) -> Vec<T> {
    places.iter().map(|&i| column[i as usize]).collect()
}

/// Reports sorted by station and time, each station and time once.
#[derive(Debug)]
pub struct ReportTable {
    rows: Rows,
    flag: Vec<Flag>,
    /// Station s has the rows `starts[s]..starts[s + 1]`.
    starts: Vec<usize>,
}

impl ReportTable {
    /// Sorts rows by station, then time. Of rows with the same station and time the last of the input holds; the
    /// others are set aside as [`Reason::Repeated`] if they say the same, [`Reason::Replaced`] if not.
    ///
    /// `stations` is the number of stations in the network; the tally is of rows.
    #[must_use]
    pub fn new(rows: &Rows, stations: usize) -> (Self, Tally) {
        let mut order: Vec<u32> = (0..u32::try_from(rows.len()).unwrap_or(u32::MAX)).collect();
        // Stable: the order of the input remains among equals. Files in time order are nearly sorted runs, which the
        // standard sort makes use of.
        order.sort_by_key(|&i| {
            let i = i as usize; // an index of `rows`
            (rows.station[i], rows.time[i])
        });

        let mut tally = Tally::default();
        let mut kept: Vec<u32> = Vec::with_capacity(order.len());
        for &i in &order {
            if let Some(last) = kept.last_mut() {
                let (a, b) = (*last as usize, i as usize);
                if rows.station[a] == rows.station[b] && rows.time[a] == rows.time[b] {
                    let reason = if rows.same_wind(a, b) {
                        Reason::Repeated
                    } else {
                        Reason::Replaced
                    };
                    tally.set_aside(reason, 1);
                    *last = i;
                    continue;
                }
            }
            kept.push(i);
        }
        tally.pass(kept.len() as u64);

        let mut counts = vec![0_usize; stations + 1];
        for &i in &kept {
            counts[rows.station[i as usize] as usize + 1] += 1; // stations are < `stations`
        }
        for s in 0..stations {
            counts[s + 1] += counts[s];
        }
        let sorted = Rows {
            station: gather(&rows.station, &kept),
            time: gather(&rows.time, &kept),
            speed: gather(&rows.speed, &kept),
            direction: gather(&rows.direction, &kept),
            content: gather(&rows.content, &kept),
            file: gather(&rows.file, &kept),
            line: gather(&rows.line, &kept),
        };
        let table = Self {
            flag: vec![Flag::NotEvaluated; sorted.len()],
            rows: sorted,
            starts: counts,
        };
        (table, tally)
    }

    /// Number of stations of the network.
    #[must_use]
    pub fn stations(&self) -> usize {
        self.starts.len().saturating_sub(1)
    }

    /// Number of reports.
    #[must_use]
    pub fn len(&self) -> usize {
        self.rows.len()
    }

    /// True if there are no reports.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.rows.is_empty()
    }

    /// The reports of a station, in the order of time.
    #[must_use]
    pub fn of_station(&self, station: usize) -> std::ops::Range<usize> {
        self.starts[station]..self.starts[station + 1]
    }

    /// Times of all reports.
    #[must_use]
    pub fn times(&self) -> &[Time] {
        &self.rows.time
    }

    /// What report `i` says.
    #[must_use]
    pub fn content(&self, i: usize) -> Content {
        self.rows.content[i]
    }

    /// Speed of report `i`, m/s.
    #[must_use]
    pub fn speed(&self, i: usize) -> Option<f64> {
        (self.rows.content[i] != Content::Nothing).then(|| self.rows.speed[i])
    }

    /// Direction of report `i`; calm has none.
    #[must_use]
    pub fn direction(&self, i: usize) -> Option<FromDirection> {
        match self.rows.content[i] {
            Content::Wind => FromDirection::new(self.rows.direction[i]),
            _ => None,
        }
    }

    /// Wind vector of report `i`; calm is the zero vector.
    #[must_use]
    pub fn wind(&self, i: usize) -> Option<Wind> {
        match self.rows.content[i] {
            Content::Calm => Some(Wind::default()),
            Content::Wind => FromDirection::new(self.rows.direction[i])
                .map(|from| Wind::blowing_from(self.rows.speed[i], from)),
            Content::SpeedOnly | Content::Nothing => None,
        }
    }

    /// Place of report `i` in the input: number of the file as read, line.
    #[must_use]
    pub fn origin(&self, i: usize) -> (u32, u32) {
        (self.rows.file[i], self.rows.line[i])
    }

    /// Flag of report `i`.
    #[must_use]
    pub fn flag(&self, i: usize) -> Flag {
        self.flag[i]
    }

    /// Raises the flag of report `i` to at least `flag`.
    pub fn raise_flag(&mut self, i: usize, flag: Flag) {
        self.flag[i] = self.flag[i].worst(flag);
    }

    /// First and last time of all reports.
    #[must_use]
    pub fn period(&self) -> Option<(Time, Time)> {
        let first = self.rows.time.iter().min()?;
        let last = self.rows.time.iter().max()?;
        Some((*first, *last))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(rows: &mut Rows, station: u32, second: i64, speed: f64) {
        let line = rows.len() as u64;
        let from = FromDirection::new(90.0);
        rows.push(
            station,
            Time::from_micros(second * 1_000_000),
            Some(speed),
            from,
            (0, line),
        );
    }

    #[test]
    fn sorts_and_counts_repeats() {
        let mut rows = Rows::default();
        row(&mut rows, 1, 20, 1.0);
        row(&mut rows, 0, 10, 2.0);
        row(&mut rows, 1, 10, 3.0);
        row(&mut rows, 1, 20, 1.0); // the same again
        row(&mut rows, 0, 10, 4.0); // another speed: this one holds
        let (table, tally) = ReportTable::new(&rows, 3);
        assert_eq!(tally.received, 5);
        assert_eq!(tally.count(Reason::Repeated), 1);
        assert_eq!(tally.count(Reason::Replaced), 1);
        assert!(tally.balances());
        assert_eq!(table.of_station(0), 0..1);
        assert_eq!(table.of_station(1), 1..3);
        assert_eq!(table.of_station(2), 3..3);
        assert_eq!(table.speed(0), Some(4.0));
        assert_eq!(table.origin(0), (0, 4));
        assert!(table.times()[1] < table.times()[2]);
    }
}

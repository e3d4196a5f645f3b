//! Rows as bytes: column by column, compressed. What does not fit into memory and what is kept for another run are
//! written so.

use std::io;

use super::rows::{Moving, NO_SCALARS, Packed, Rows};
use crate::station::Position;
use crate::time::Time;

/// Level of the compression: the fastest.
const LEVEL: i32 = 1;
/// Most rows of a chunk; more are a sign of damage.
const MOST_ROWS: u32 = 1 << 24;

/// Bits that say which of the rarer columns follow.
mod has {
    pub const GUST: u8 = 1;
    pub const MOVING: u8 = 2;
    pub const CORRECTION: u8 = 4;
    pub const SCALARS: u8 = 8;
}

/// Bits that say which values of a moving instrument are there.
mod given {
    pub const ANY: u8 = 1;
    pub const POSITION: u8 = 2;
    pub const LEVEL: u8 = 4;
}

/// The rows as bytes.
///
/// # Errors
/// The refusal of the compression.
pub(super) fn encode(rows: &Rows) -> io::Result<Vec<u8>> {
    let mut raw = Vec::with_capacity(rows.len() * size_of::<Packed>() + 8);
    let count = u32::try_from(rows.len()).map_err(|_| damaged())?;
    raw.extend_from_slice(&count.to_le_bytes());
    let bit = |there: bool, bit: u8| if there { bit } else { 0 };
    raw.push(
        bit(!rows.gust.is_empty(), has::GUST)
            | bit(!rows.moving.is_empty(), has::MOVING)
            | bit(!rows.correction.is_empty(), has::CORRECTION)
            | bit(!rows.scalars.is_empty(), has::SCALARS),
    );
    let packed = &rows.packed;
    raw.extend(packed.iter().flat_map(|r| r.time.micros().to_le_bytes()));
    raw.extend(packed.iter().flat_map(|r| r.speed.to_le_bytes()));
    raw.extend(packed.iter().flat_map(|r| r.direction.to_le_bytes()));
    raw.extend(packed.iter().flat_map(|r| r.station.to_le_bytes()));
    raw.extend(packed.iter().flat_map(|r| r.line.to_le_bytes()));
    raw.extend(packed.iter().flat_map(|r| r.file.to_le_bytes()));
    raw.extend(packed.iter().map(|r| r.kind));
    raw.extend(rows.gust.iter().map(|g| u8::from(g.is_some())));
    raw.extend(
        rows.gust
            .iter()
            .flat_map(|g| g.unwrap_or(0.0).to_le_bytes()),
    );
    for moving in &rows.moving {
        let position = moving.and_then(|m| m.position);
        let level = moving.and_then(|m| m.level);
        raw.push(
            bit(moving.is_some(), given::ANY)
                | bit(position.is_some(), given::POSITION)
                | bit(level.is_some(), given::LEVEL),
        );
        let (latitude, longitude) = position.map_or((0.0, 0.0), |p| (p.latitude(), p.longitude()));
        for value in [latitude, longitude, level.unwrap_or(0.0)] {
            raw.extend_from_slice(&value.to_le_bytes());
        }
    }
    raw.extend_from_slice(&rows.correction);
    for value in rows.scalars.iter().flatten() {
        raw.push(u8::from(value.is_some()));
        raw.extend_from_slice(&value.unwrap_or(0.0).to_le_bytes());
    }
    zstd::bulk::compress(&raw, LEVEL)
}

/// The rows of a chunk.
///
/// # Errors
/// Says that the bytes are no chunk.
pub(super) fn decode(bytes: &[u8]) -> io::Result<Rows> {
    let raw = zstd::stream::decode_all(bytes)?;
    let mut source = Bytes(&raw);
    let count = u32::from_le_bytes(source.take()?);
    if count > MOST_ROWS {
        return Err(damaged());
    }
    let n = count as usize;
    let [columns] = source.take::<1>()?;
    let times = source.column::<8>(n)?;
    let speeds = source.column::<8>(n)?;
    let directions = source.column::<8>(n)?;
    let stations = source.column::<4>(n)?;
    let lines = source.column::<4>(n)?;
    let files = source.column::<2>(n)?;
    let kinds = source.column::<1>(n)?;
    let mut rows = Rows::with_capacity(n);
    let numbers = times.iter().zip(speeds).zip(directions);
    let names = stations.iter().zip(lines).zip(files).zip(kinds);
    for (((time, speed), direction), (((station, line), file), [kind])) in numbers.zip(names) {
        rows.push_packed(Packed {
            time: Time::from_micros(i64::from_le_bytes(*time)),
            speed: f64::from_le_bytes(*speed),
            direction: f64::from_le_bytes(*direction),
            station: u32::from_le_bytes(*station),
            line: u32::from_le_bytes(*line),
            file: u16::from_le_bytes(*file),
            kind: *kind,
        });
    }
    if columns & has::GUST != 0 {
        let there = source.column::<1>(n)?;
        let values = source.column::<8>(n)?;
        let gusts = there.iter().zip(values);
        rows.gust.extend(
            gusts.map(|(&[there], value)| (there != 0).then(|| f64::from_le_bytes(*value))),
        );
    }
    if columns & has::MOVING != 0 {
        for _ in 0..n {
            let [bits] = source.take::<1>()?;
            let latitude = f64::from_le_bytes(source.take()?);
            let longitude = f64::from_le_bytes(source.take()?);
            let level = f64::from_le_bytes(source.take()?);
            let position = if bits & given::POSITION != 0 {
                Some(Position::new(latitude, longitude).map_err(|_| damaged())?)
            } else {
                None
            };
            let moving = Moving {
                position,
                level: (bits & given::LEVEL != 0).then_some(level),
            };
            rows.moving.push((bits & given::ANY != 0).then_some(moving));
        }
    }
    if columns & has::CORRECTION != 0 {
        let corrections = source.column::<1>(n)?;
        rows.correction.extend(corrections.iter().map(|&[c]| c));
    }
    if columns & has::SCALARS != 0 {
        for _ in 0..n {
            let mut values = NO_SCALARS;
            for value in &mut values {
                let [there] = source.take::<1>()?;
                let number = f64::from_le_bytes(source.take()?);
                *value = (there != 0).then_some(number);
            }
            rows.scalars.push(values);
        }
    }
    if source.0.is_empty() {
        Ok(rows)
    } else {
        Err(damaged())
    }
}

fn damaged() -> io::Error {
    io::Error::new(io::ErrorKind::InvalidData, "the rows kept are damaged")
}

/// Bytes still to be read.
struct Bytes<'b>(&'b [u8]);

impl<'b> Bytes<'b> {
    fn take<const N: usize>(&mut self) -> io::Result<[u8; N]> {
        let (value, rest) = self.0.split_first_chunk::<N>().ok_or_else(damaged)?;
        self.0 = rest;
        Ok(*value)
    }

    /// `n` values of `N` bytes each.
    fn column<const N: usize>(&mut self, n: usize) -> io::Result<&'b [[u8; N]]> {
        let (column, rest) = self.0.split_at_checked(n * N).ok_or_else(damaged)?;
        self.0 = rest;
        Ok(column.as_chunks::<N>().0)
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::super::rows::{Part, Report};
    use super::*;
    use crate::units::FromDirection;

    fn rows(rich: bool) -> Rows {
        let mut rows = Rows::default();
        for k in 0..500_u32 {
            let odd = rich && k % 3 == 1;
            rows.push(&Report {
                station: k % 7,
                time: Time::from_micros(i64::from(k) * 1_000_003 - 5_000_000),
                speed: (k % 5 > 0).then(|| f64::from(k) * 0.1),
                direction: FromDirection::new(f64::from(k % 360)),
                part: if odd { Part::Speed } else { Part::Whole },
                gust: odd.then(|| f64::from(k) * 0.2),
                moving: odd.then(|| Moving {
                    position: Position::new(45.0, f64::from(k % 180)).ok(),
                    level: (k % 2 == 0).then_some(85_000.0),
                }),
                correction: u8::from(odd),
                place: (k % 4, u64::from(k)),
            });
            if odd && k % 2 == 0 {
                rows.put_scalars(&[Some(f64::from(k) * 0.3), None, Some(-1.5), None]);
            }
        }
        rows
    }

    #[test]
    fn what_goes_out_comes_back() {
        for rich in [false, true] {
            let rows = rows(rich);
            assert_eq!(decode(&encode(&rows).unwrap()).unwrap(), rows);
        }
        let nothing = Rows::default();
        assert_eq!(decode(&encode(&nothing).unwrap()).unwrap(), nothing);
    }

    #[test]
    fn damage_is_told() {
        let bytes = encode(&rows(true)).unwrap();
        assert!(decode(&bytes[..bytes.len() / 2]).is_err());
        assert!(decode(b"").is_err());
        let raw = zstd::stream::decode_all(bytes.as_slice()).unwrap();
        for length in (0..raw.len()).step_by(997) {
            let cut = zstd::bulk::compress(&raw[..length], LEVEL).unwrap();
            assert!(decode(&cut).is_err(), "{length} of {}", raw.len());
        }
    }
}

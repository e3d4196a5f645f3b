//! Which station a name in a report means.

use std::collections::{HashMap, HashSet};

use crate::station::{Declinations, Network, tidy_id};
use crate::time::Time;

/// All names of all stations.
pub(super) struct Names<'a> {
    pub(super) network: &'a Network,
    pub(super) declinations: Declinations<'a>,
    index: HashMap<Vec<u8>, u32>,
    not_asked_for: HashSet<Vec<u8>>,
    pub(super) any_moved: bool,
}

/// What a name is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Found {
    Station(u32),
    NotAskedFor,
    Unknown,
}

impl<'a> Names<'a> {
    pub(super) fn new(network: &'a Network) -> Self {
        let mut index = HashMap::new();
        for (number, station) in (0..).zip(network.stations()) {
            index.insert(station.id.clone().into_bytes(), number);
        }
        // An identifier goes before an alias of the same spelling.
        for (number, station) in (0..).zip(network.stations()) {
            for alias in &station.aliases {
                index.entry(alias.clone().into_bytes()).or_insert(number);
            }
        }
        let not_asked_for = network
            .not_asked_for()
            .map(|id| id.as_bytes().to_vec())
            .collect();
        Self {
            network,
            declinations: Declinations::new(network),
            index,
            not_asked_for,
            any_moved: network
                .stations()
                .iter()
                .any(|s| s.valid_from.is_some() || s.valid_to.is_some()),
        }
    }

    pub(super) fn find(&self, text: &[u8]) -> Found {
        if let Some(&station) = self.index.get(text) {
            return Found::Station(station);
        }
        let tidy = tidy_id(&String::from_utf8_lossy(text)).into_bytes();
        match self.index.get(&tidy) {
            Some(&station) => Found::Station(station),
            None if self.not_asked_for.contains(&tidy) || self.not_asked_for.contains(text) => {
                Found::NotAskedFor
            }
            None => Found::Unknown,
        }
    }

    /// True if the station of this number stands where the list says at this time.
    pub(super) fn is_valid(&self, station: u32, time: Time) -> bool {
        if !self.any_moved {
            return true;
        }
        self.network
            .stations()
            .get(station as usize)
            .is_none_or(|s| {
                s.valid_from.is_none_or(|from| time >= from)
                    && s.valid_to.is_none_or(|to| time < to)
            })
    }
}

/// Finds stations row after row: files repeat their order, so the station that followed the last one before is tried
/// first, with the spelling it had then.
pub(super) struct Finder<'a> {
    names: &'a Names<'a>,
    last: usize,
    follows: Vec<u32>,
    spelling: Vec<Vec<u8>>,
}

impl<'a> Finder<'a> {
    pub(super) fn new(names: &'a Names<'a>) -> Self {
        Self {
            names,
            last: 0,
            follows: vec![0; names.network.len()],
            spelling: names
                .network
                .stations()
                .iter()
                .map(|s| s.id.clone().into_bytes())
                .collect(),
        }
    }

    /// The station that is expected next, and its name as spelled before.
    #[inline]
    pub(super) fn expected(&self) -> Option<(u32, &[u8])> {
        let guess = *self.follows.get(self.last)?;
        Some((guess, self.spelling.get(guess as usize)?))
    }

    /// The station that was expected did come.
    #[inline]
    pub(super) fn was_expected(&mut self, station: u32) {
        self.last = station as usize;
    }

    pub(super) fn find(&mut self, text: &[u8]) -> Found {
        let guess = self.follows.get(self.last).copied().unwrap_or(0);
        let found = match self.spelling.get(guess as usize) {
            Some(spelling) if spelling == text => Found::Station(guess),
            _ => self.names.find(text),
        };
        if let Found::Station(station) = found {
            if station != guess
                && let Some(next) = self.follows.get_mut(self.last)
            {
                *next = station;
            }
            self.last = station as usize;
            if let Some(spelling) = self.spelling.get_mut(self.last)
                && spelling != text
            {
                spelling.clear();
                spelling.extend_from_slice(text);
            }
        }
        found
    }
}

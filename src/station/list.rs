//! All places of all stations, and the network of a period.

use std::collections::{BTreeMap, BTreeSet, HashMap, HashSet};

use super::entry::{EntryReader, Field, Texts, Whence};
use super::{Catalogue, Network, Station, tidy_id};
use crate::error::{Place, Problem};
use crate::time::Time;
use crate::warning::Warning;

/// Stations that a warning names; the others are counted.
const NAMED: usize = 3;

/// A period, both ends included; an end that is not given is open.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Period {
    /// Its first instant.
    pub from: Option<Time>,
    /// Its last instant.
    pub to: Option<Time>,
}

impl Period {
    /// True if a station stands at its place for some part of the period.
    fn touches(self, station: &Station) -> bool {
        let ended = (self.from.zip(station.valid_to)).is_some_and(|(from, until)| until <= from);
        let not_yet = (self.to.zip(station.valid_from)).is_some_and(|(to, since)| since > to);
        !ended && !not_yet
    }
}

/// A station at one of its places, and where the list says so.
#[derive(Debug, Clone, PartialEq)]
struct Placed {
    station: Station,
    at: Whence,
}

/// A station list: every place of every station. A station that moved has several, with periods that do not overlap.
#[derive(Debug, Clone, PartialEq)]
pub struct StationList {
    file: String,
    id_column: String,
    /// By identifier, then by time.
    places: Vec<Placed>,
    not_asked_for: Vec<String>,
    repeats: u64,
    warnings: Vec<Warning>,
}

impl StationList {
    /// The stations as they stand in a period. One that stands nowhere in it is left out, and its reports count as
    /// not asked for; one that comes or leaves within it keeps its limits.
    ///
    /// # Errors
    /// Each station that moved within the period.
    pub fn network(&self, period: Period) -> Result<Network, Vec<Problem>> {
        let mut stations = Vec::new();
        let mut problems = Vec::new();
        let mut not_asked_for = self.not_asked_for.clone();
        for places in self.by_station() {
            let touching: Vec<&Placed> = places
                .iter()
                .filter(|place| period.touches(&place.station))
                .collect();
            match touching[..] {
                [] => {
                    let names = places.iter().flat_map(|place| names(&place.station));
                    not_asked_for.extend(names.map(str::to_string));
                }
                [place] => stations.push(place.station.clone()),
                [_, .., last] => {
                    let place = last.at.place(&self.file, &self.id_column);
                    problems.push(Problem::new(place, moved(&touching)));
                }
            }
        }
        if problems.is_empty() {
            Ok(Network::new(stations).with_not_asked_for(not_asked_for))
        } else {
            Err(problems)
        }
    }

    /// The parts of a period in which no station moves, in the order of time: each later place of a station begins one.
    #[must_use]
    pub fn epochs(&self, period: Period) -> Vec<Period> {
        let mut moves: Vec<Time> = Vec::new();
        for places in self.by_station() {
            let touching = places.iter().filter(|place| period.touches(&place.station));
            let later = touching.skip(1);
            moves.extend(later.filter_map(|place| place.station.valid_from));
        }
        moves.sort_unstable();
        moves.dedup();
        let mut from = period.from;
        let mut epochs = Vec::with_capacity(moves.len() + 1);
        for at in moves {
            let to = Some(at.plus_micros(-1));
            epochs.push(Period { from, to });
            from = Some(at);
        }
        epochs.push(Period {
            from,
            to: period.to,
        });
        epochs
    }

    /// Every station once, at its last place and without limits: for work that reads reports and needs no geometry.
    #[must_use]
    pub fn all_times(&self) -> Network {
        let stations = self.by_station().filter_map(|places| {
            let mut station = places.last()?.station.clone();
            station.valid_from = None;
            station.valid_to = None;
            for alias in places.iter().flat_map(|place| &place.station.aliases) {
                if !station.aliases.contains(alias) {
                    station.aliases.push(alias.clone());
                }
            }
            Some(station)
        });
        Network::new(stations.collect()).with_not_asked_for(self.not_asked_for.clone())
    }

    /// Entries that say again what an earlier one said.
    #[must_use]
    pub fn repeats(&self) -> u64 {
        self.repeats
    }

    /// What the user should know of the list.
    #[must_use]
    pub fn warnings(&self) -> &[Warning] {
        &self.warnings
    }

    fn by_station(&self) -> impl Iterator<Item = &[Placed]> {
        self.places.chunk_by(|a, b| a.station.id == b.station.id)
    }
}

/// Identifier and aliases.
fn names(station: &Station) -> impl Iterator<Item = &str> {
    [station.id.as_str()]
        .into_iter()
        .chain(station.aliases.iter().map(String::as_str))
}

/// What to do about a station at several places.
fn moved(places: &[&Placed]) -> String {
    let mut when: Vec<String> = Vec::new();
    let mut until: Option<Time> = None;
    for (k, place) in places.iter().enumerate() {
        let from = match place.station.valid_from {
            _ if k == 0 => None,
            from if from == until => Some("then from it".to_string()),
            from => from.map(|from| format!("then from {from}")),
        };
        until = place.station.valid_to;
        let limit = match until {
            Some(until) if k + 1 < places.len() => Some(format!("until {until}")),
            _ => None,
        };
        let words: Vec<String> = from.into_iter().chain(limit).collect();
        when.push(words.join(" "));
    }
    let id = places.first().map_or("", |place| &place.station.id);
    format!(
        "station `{id}` stands at {} places in the period ({}): set `analysis.from` and `analysis.to` to one side of \
         the move",
        places.len(),
        when.join(", ")
    )
}

/// What was read of one entry of a station.
struct Seen {
    at: Whence,
    /// `None` if the entry has defects.
    station: Option<Station>,
}

/// Takes the entries of a list one after the other.
pub(super) struct ListBuilder<'a> {
    file: &'a str,
    catalogue: &'a Catalogue,
    only: Option<HashSet<String>>,
    reader: EntryReader<'a>,
    seen: HashMap<String, Vec<Seen>>,
    without_position: BTreeSet<String>,
    not_asked_for: BTreeSet<String>,
    /// The stations, asked for or not, that an alias belongs to.
    owners: BTreeMap<String, BTreeSet<String>>,
    repeats: u64,
}

impl<'a> ListBuilder<'a> {
    pub(super) fn new(file: &'a str, catalogue: &'a Catalogue, decimal_comma: bool) -> Self {
        let only = catalogue.only.as_ref();
        Self {
            file,
            catalogue,
            only: only.map(|only| only.iter().map(|id| tidy_id(id)).collect()),
            reader: EntryReader::new(file, catalogue, decimal_comma),
            seen: HashMap::new(),
            without_position: BTreeSet::new(),
            not_asked_for: BTreeSet::new(),
            owners: BTreeMap::new(),
            repeats: 0,
        }
    }

    pub(super) fn file(&self) -> &'a str {
        self.file
    }

    /// Notes a defect.
    pub(super) fn problem(&mut self, problem: Problem) {
        self.reader.problems.push(problem);
    }

    /// Notes a line that is no row.
    pub(super) fn broken(&mut self, line: u64, message: String) {
        let place = Place {
            file: self.file.into(),
            line: Some(line),
            column: None,
        };
        self.problem(Problem::new(place, message));
    }

    /// Adds an entry; `elevation` (m) holds if no column states one.
    pub(super) fn add(&mut self, at: Whence, texts: &Texts, elevation: Option<f64>) {
        let written = texts(Field::Id);
        let id = tidy_id(&written);
        let first_of_each = self.catalogue.first_of_each;
        if let Some(only) = &self.only
            && !only.contains(&id)
        {
            if self.not_asked_for.insert(id.clone()) || !first_of_each {
                let aliases = self.reader.aliases(texts, &id, &written);
                self.own(&aliases, &id);
                self.not_asked_for.extend(aliases);
            }
            return;
        }
        if id.is_empty() {
            if !first_of_each {
                self.reader
                    .problem(at, Field::Id, "the identifier is empty");
            }
            return;
        }
        if first_of_each {
            if self.seen.contains_key(&id) {
                self.repeats += 1;
                return;
            }
            let missing = |field| self.reader.is_missing(&texts(field));
            if missing(Field::Latitude) || missing(Field::Longitude) {
                self.without_position.insert(id);
                return;
            }
            self.without_position.remove(&id);
        }
        let aliases = self.reader.aliases(texts, &id, &written);
        self.own(&aliases, &id);
        let mut station = self.reader.station(at, texts, id.clone());
        if let Some(station) = &mut station {
            station.elevation = station.elevation.or(elevation);
            station.aliases = aliases;
        }
        self.place(at, id, station);
    }

    fn own(&mut self, aliases: &[String], id: &str) {
        for alias in aliases {
            let owners = self.owners.entry(alias.clone()).or_default();
            owners.insert(id.to_string());
        }
    }

    /// Compares an entry with the earlier ones of the station.
    fn place(&mut self, at: Whence, id: String, station: Option<Station>) {
        let earlier = self.seen.entry(id).or_default();
        if let Some(new) = &station {
            let period = |s: &Station| (s.valid_from, s.valid_to);
            let same =
                |old: &&mut Station| old.position == new.position && period(old) == period(new);
            if let Some(old) = earlier
                .iter_mut()
                .filter_map(|s| s.station.as_mut())
                .find(same)
            {
                self.repeats += 1;
                for alias in &new.aliases {
                    if !old.aliases.contains(alias) {
                        old.aliases.push(alias.clone());
                    }
                }
                return;
            }
        }
        let clash = earlier.iter().find_map(|old| clash(old, station.as_ref()));
        earlier.push(Seen { at, station });
        if let Some(message) = clash {
            self.reader.problem(at, Field::Id, message);
        }
    }

    /// The list, or all its defects.
    pub(super) fn finish(mut self) -> Result<StationList, Vec<Problem>> {
        for wanted in self.catalogue.only.iter().flatten() {
            let id = tidy_id(wanted);
            if !self.seen.contains_key(&id) && !self.without_position.contains(&id) {
                let place = Place {
                    file: self.file.into(),
                    line: None,
                    column: Some(self.catalogue.columns.id.clone()),
                };
                let message =
                    format!("station `{wanted}`, asked for in the settings, is not in the list");
                self.reader.problems.push(Problem::new(place, message));
            }
        }
        if !self.reader.problems.is_empty() {
            return Err(self.reader.problems);
        }
        let mut warnings = Vec::new();
        if !self.without_position.is_empty() {
            warnings.push(Warning::NoPosition {
                stations: self.without_position.len(),
                first: self.without_position.iter().take(NAMED).cloned().collect(),
            });
        }
        let shared = self.shared_aliases();
        if let Some((alias, owners)) = shared.first_key_value() {
            warnings.push(Warning::SharedAliases {
                aliases: shared.len(),
                first: alias.clone(),
                stations: owners.iter().take(NAMED).cloned().collect(),
            });
        }
        let mut places: Vec<Placed> = Vec::new();
        for seen in self.seen.into_values().flatten() {
            if let Some(mut station) = seen.station {
                station.aliases.retain(|alias| !shared.contains_key(alias));
                places.push(Placed {
                    station,
                    at: seen.at,
                });
            }
        }
        places.sort_by(|a, b| {
            let key = |p: &Placed| (p.station.valid_from, p.at);
            (a.station.id.cmp(&b.station.id)).then_with(|| key(a).cmp(&key(b)))
        });
        // Their reports are no surprise: the warning says why they are not used.
        self.not_asked_for.extend(self.without_position);
        Ok(StationList {
            file: self.file.into(),
            id_column: self.catalogue.columns.id.clone(),
            places,
            not_asked_for: self.not_asked_for.into_iter().collect(),
            repeats: self.repeats,
            warnings,
        })
    }

    /// Aliases that do not tell stations apart: those of several stations, and those that are another's identifier.
    fn shared_aliases(&self) -> BTreeMap<String, BTreeSet<String>> {
        let mut shared = BTreeMap::new();
        for (alias, owners) in &self.owners {
            let mut owners = owners.clone();
            if self.seen.contains_key(alias) {
                owners.insert(alias.clone());
            }
            let asked_for = owners.iter().any(|id| self.seen.contains_key(id));
            if owners.len() > 1 && asked_for {
                shared.insert(alias.clone(), owners);
            }
        }
        shared
    }
}

/// Why an entry cannot stand beside an earlier one of the same station.
fn clash(old: &Seen, new: Option<&Station>) -> Option<String> {
    let has_period = |s: &Station| s.valid_from.is_some() || s.valid_to.is_some();
    let place = format!("{} {}", old.at.preposition(), old.at);
    match (&old.station, new) {
        (Some(old), Some(new)) if has_period(old) || has_period(new) => {
            let apart = |a: &Station, b: &Station| {
                (a.valid_to.zip(b.valid_from)).is_some_and(|(until, since)| until <= since)
            };
            (!apart(old, new) && !apart(new, old)).then(|| {
                format!(
                    "station `{}` is already {place} in a part of this period (periods that do not overlap expected)",
                    new.id
                )
            })
        }
        // Nothing is known of the periods of an entry with defects.
        (None, Some(new)) if has_period(new) => None,
        (_, None) => None,
        (_, Some(new)) => Some(format!(
            "station `{}` is already {place} (each station once expected)",
            new.id
        )),
    }
}

//! Reads a TOML file section by section and collects every defect with its line.
//!
//! A key that nobody asked for is unknown: it is reported when its section is finished, with the nearest key that was
//! asked for. So the code that reads a key is also its declaration.

use std::cell::RefCell;

use serde::de::DeserializeOwned;
use toml::Spanned;
use toml::de::{DeTable, DeValue, ValueDeserializer};

use crate::error::{Place, Problem, nearest_name};

/// A settings file and the defects found in it so far.
pub(super) struct Document<'a> {
    file: &'a str,
    text: &'a str,
    problems: RefCell<Vec<Problem>>,
}

impl<'a> Document<'a> {
    pub(super) fn new(file: &'a str, text: &'a str) -> Self {
        Self {
            file,
            text,
            problems: RefCell::default(),
        }
    }

    /// The whole file as one section.
    pub(super) fn root(&self) -> Section<'_> {
        let (table, errors) = DeTable::parse_recoverable(self.text);
        for error in errors {
            let at = error.span().map_or(0, |span| span.start);
            self.report(at, None, error.message());
        }
        Section {
            document: self,
            path: String::new(),
            at: 0,
            table: table.into_inner(),
            asked: Vec::new(),
            taken: Vec::new(),
        }
    }

    pub(super) fn into_problems(self) -> Vec<Problem> {
        let mut problems = self.problems.into_inner();
        problems.sort_by_key(|p| p.place.line);
        problems
    }

    fn place(&self, at: usize, key: Option<&str>) -> Place {
        let before = self.text.as_bytes().get(..at).unwrap_or_default();
        let line = 1 + memchr::memchr_iter(b'\n', before).count() as u64;
        Place {
            file: self.file.into(),
            line: Some(line),
            column: key.map(str::to_string),
        }
    }

    fn report(&self, at: usize, key: Option<&str>, message: impl Into<String>) {
        let problem = Problem::new(self.place(at, key), message);
        self.problems.borrow_mut().push(problem);
    }
}

/// A value with its place.
pub(super) struct Found<T> {
    pub value: T,
    pub place: Place,
}

/// One table of the file.
pub(super) struct Section<'d> {
    document: &'d Document<'d>,
    path: String,
    at: usize,
    table: DeTable<'d>,
    asked: Vec<&'static str>,
    taken: Vec<&'static str>,
}

impl<'d> Section<'d> {
    fn full_key(&self, key: &str) -> String {
        if self.path.is_empty() {
            key.to_string()
        } else {
            format!("{}.{key}", self.path)
        }
    }

    fn take(&mut self, key: &'static str) -> Option<Spanned<DeValue<'d>>> {
        self.asked.push(key);
        let value = self.table.remove(key);
        if value.is_some() {
            self.taken.push(key);
        }
        value
    }

    /// A value of any type that serde reads; `None` if absent or defective.
    pub(super) fn value<T: DeserializeOwned>(&mut self, key: &'static str) -> Option<Found<T>> {
        let value = self.take(key)?;
        let at = value.span().start;
        match T::deserialize(ValueDeserializer::from(value)) {
            Ok(value) => Some(Found {
                value,
                place: self.document.place(at, Some(&self.full_key(key))),
            }),
            Err(error) => {
                let at = error.span().map_or(at, |span| span.start);
                self.document
                    .report(at, Some(&self.full_key(key)), error.message().trim_end());
                None
            }
        }
    }

    /// A value, or a defect if it is absent.
    pub(super) fn required<T: DeserializeOwned>(&mut self, key: &'static str) -> Option<Found<T>> {
        if !self.has(key) {
            self.asked.push(key);
            self.missing(key);
            return None;
        }
        self.value(key)
    }

    /// Reports that a key is missing.
    pub(super) fn missing(&self, key: &str) {
        let what = format!("`{key}` is missing");
        let path = (!self.path.is_empty()).then_some(self.path.as_str());
        self.document.report(self.at, path, what);
    }

    /// A text turned into a quantity by `parse`.
    pub(super) fn parsed<T>(
        &mut self,
        key: &'static str,
        parse: impl FnOnce(&str) -> Result<T, String>,
    ) -> Option<T> {
        let found: Found<String> = self.value(key)?;
        match parse(&found.value) {
            Ok(value) => Some(value),
            Err(message) => {
                self.document
                    .problems
                    .borrow_mut()
                    .push(Problem::new(found.place, message));
                None
            }
        }
    }

    /// A number within `range`, or a defect.
    pub(super) fn number(
        &mut self,
        key: &'static str,
        range: std::ops::RangeInclusive<f64>,
    ) -> Option<f64> {
        let found: Found<f64> = self.value(key)?;
        if range.contains(&found.value) {
            return Some(found.value);
        }
        let message = format!(
            "{} is out of range ({} to {} expected)",
            found.value,
            range.start(),
            range.end()
        );
        self.problem(found.place, message);
        None
    }

    /// One of a few words.
    pub(super) fn choice<T: Clone, const N: usize>(
        &mut self,
        key: &'static str,
        choices: &[(&str, T); N],
    ) -> Option<T> {
        self.parsed(key, |text| {
            let chosen = choices.iter().find(|(word, _)| *word == text);
            chosen.map(|(_, value)| value.clone()).ok_or_else(|| {
                let words: Vec<String> = choices
                    .iter()
                    .map(|(word, _)| format!("`{word}`"))
                    .collect();
                format!("`{text}` is none of {}", words.join(", "))
            })
        })
    }

    /// Reports a defect at a place of this file.
    pub(super) fn problem(&self, place: Place, message: impl Into<String>) {
        self.document
            .problems
            .borrow_mut()
            .push(Problem::new(place, message));
    }

    /// True if the key is in the file, read already or not.
    pub(super) fn has(&self, key: &str) -> bool {
        self.table.contains_key(key) || self.taken.contains(&key)
    }

    /// The place of this section's start.
    pub(super) fn place(&self) -> Place {
        let path = (!self.path.is_empty()).then_some(self.path.as_str());
        self.document.place(self.at, path)
    }

    /// A table inside this one; an empty one if absent.
    pub(super) fn section(&mut self, key: &'static str) -> Section<'d> {
        let path = self.full_key(key);
        let (at, table) = match self.take(key) {
            Some(value) => self.table_of(value, &path),
            None => (self.at, DeTable::new()),
        };
        Section {
            document: self.document,
            path,
            at,
            table,
            asked: Vec::new(),
            taken: Vec::new(),
        }
    }

    /// The tables of an array of tables (`[[key]]`).
    pub(super) fn sections(&mut self, key: &'static str) -> Vec<Section<'d>> {
        let path = self.full_key(key);
        let Some(value) = self.take(key) else {
            return Vec::new();
        };
        let at = value.span().start;
        let DeValue::Array(array) = value.into_inner() else {
            self.document.report(
                at,
                Some(&path),
                format!("a list of tables is expected: write `[[{path}]]`"),
            );
            return Vec::new();
        };
        array
            .into_iter()
            .map(|value| {
                let (at, table) = self.table_of(value, &path);
                Section {
                    document: self.document,
                    path: path.clone(),
                    at,
                    table,
                    asked: Vec::new(),
                    taken: Vec::new(),
                }
            })
            .collect()
    }

    fn table_of(&self, value: Spanned<DeValue<'d>>, path: &str) -> (usize, DeTable<'d>) {
        let at = value.span().start;
        if let DeValue::Table(table) = value.into_inner() {
            (at, table)
        } else {
            self.document.report(at, Some(path), "a table is expected");
            (at, DeTable::new())
        }
    }

    /// Reports the keys that nobody asked for.
    pub(super) fn finish(self) {
        for (key, _) in &self.table {
            let name = key.get_ref().as_ref();
            let mut message = "there is no such key".to_string();
            match nearest_name(name, self.asked.iter().copied()) {
                Some(near) => {
                    message.push_str("; is `");
                    message.push_str(near);
                    message.push_str("` meant?");
                }
                None => {
                    message.push_str(" (known: ");
                    message.push_str(&self.asked.join(", "));
                    message.push(')');
                }
            }
            let full = self.full_key(name);
            self.document.report(key.span().start, Some(&full), message);
        }
    }
}

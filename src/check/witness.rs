//! Listens to the tests of a few reports, to explain them.

use std::fmt::Write as _;

use super::{Flag, Test};
use crate::report::ReportTable;
use crate::time::Time;

/// Hears what each test finds.
pub(super) trait Witness {
    /// The tests of report `i` of the table begin.
    fn begin(&mut self, table: &ReportTable, i: usize);
    /// The verdict of a test, and its numbers in words.
    fn tell(&mut self, test: Test, flag: Flag, words: impl FnOnce() -> String);
    /// They are done; `flag` is the report's own.
    fn end(&mut self, flag: Flag);
}

/// Hears nothing, and costs nothing.
pub(super) struct Nobody;

impl Witness for Nobody {
    #[inline]
    fn begin(&mut self, _: &ReportTable, _: usize) {}
    #[inline]
    fn tell(&mut self, _: Test, _: Flag, _: impl FnOnce() -> String) {}
    #[inline]
    fn end(&mut self, _: Flag) {}
}

/// What a test found.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Finding {
    /// The test.
    pub test: Test,
    /// Its flag.
    pub flag: Flag,
    /// Its numbers.
    pub words: String,
}

/// A report and what every test found of it.
#[derive(Debug, Clone, PartialEq)]
pub struct Explained {
    /// Time of the report.
    pub time: Time,
    /// Its values in words.
    pub report: String,
    /// File (number as read) and line.
    pub origin: (u16, u32),
    /// The worst flag.
    pub flag: Flag,
    /// The tests that had a say, in order.
    pub findings: Vec<Finding>,
}

/// Keeps the reports of a station at a time, or the nearest before and after it.
#[derive(Debug, Clone, PartialEq)]
pub struct Listener {
    at: Time,
    before: Vec<Explained>,
    after: Vec<Explained>,
    hears: bool,
}

impl Listener {
    /// Of the reports at this time.
    #[must_use]
    pub fn new(at: Time) -> Self {
        Self {
            at,
            before: Vec::new(),
            after: Vec::new(),
            hears: false,
        }
    }

    /// What was heard, in the order of time.
    #[must_use]
    pub fn heard(&self) -> Vec<Explained> {
        let exact = self.before.iter().any(|e| e.time == self.at);
        let after = if exact { &[] } else { self.after.as_slice() };
        self.before.iter().chain(after).cloned().collect()
    }

    /// The list to which the last report went.
    fn current(&mut self) -> &mut Vec<Explained> {
        if self.after.is_empty() {
            &mut self.before
        } else {
            &mut self.after
        }
    }
}

impl Witness for Listener {
    fn begin(&mut self, table: &ReportTable, i: usize) {
        let time = table.times()[i];
        let list = if time <= self.at {
            &mut self.before
        } else {
            &mut self.after
        };
        let late = time > self.at && list.first().is_some_and(|e| e.time < time);
        self.hears = !late;
        if late {
            return;
        }
        // Reports of several levels at one time stay together.
        if list.first().is_some_and(|e| e.time < time) {
            list.clear();
        }
        list.push(Explained {
            time,
            report: in_words(table, i),
            origin: table.origin(i),
            flag: Flag::NotEvaluated,
            findings: Vec::new(),
        });
    }

    fn tell(&mut self, test: Test, flag: Flag, words: impl FnOnce() -> String) {
        if self.hears
            && let Some(explained) = self.current().last_mut()
        {
            let words = words();
            explained.findings.push(Finding { test, flag, words });
        }
    }

    fn end(&mut self, flag: Flag) {
        if self.hears
            && let Some(explained) = self.current().last_mut()
        {
            explained.flag = flag;
            explained.findings.sort_by_key(|finding| finding.test);
        }
    }
}

/// The values of a report.
fn in_words(table: &ReportTable, i: usize) -> String {
    use crate::report::Content;
    let mut words = match (table.content(i), table.speed(i), table.direction(i)) {
        (Content::Calm, ..) => "calm".to_string(),
        (_, Some(speed), Some(from)) => {
            format!("{speed:.1} m/s from {:.0} degrees", from.degrees())
        }
        (_, Some(speed), None) => format!("{speed:.1} m/s, no direction"),
        (_, None, _) => "no speed".to_string(),
    };
    if let Some(gust) = table.gust(i) {
        // Writing to a string cannot fail.
        let _ = write!(words, ", gust {gust:.1} m/s");
    }
    words
}

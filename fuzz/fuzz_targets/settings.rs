//! Any text as the settings of a network.
#![no_main]

use std::fs;
use std::sync::LazyLock;

use gyremesh::settings::{Overrides, read_settings};
use libfuzzer_sys::fuzz_target;
use tempfile::TempDir;

/// A folder with what the settings may name.
static FOLDER: LazyLock<TempDir> = LazyLock::new(|| {
    let folder = tempfile::tempdir().expect("a folder");
    for name in ["stations.csv", "reports.csv"] {
        fs::write(folder.path().join(name), "id\n").expect("a file");
    }
    folder
});

fuzz_target!(|text: &str| {
    // Patterns that would list half the disk.
    if text.matches(['*', '?', '[']).count() > 12 || text.contains("**") || text.contains("*/") {
        return;
    }
    let path = FOLDER.path().join("network.toml");
    fs::write(&path, text).expect("written");
    let (_, problems) = read_settings(&path, &Overrides::default()).expect("readable");
    let lines = 1 + text.matches('\n').count() as u64;
    for problem in problems {
        assert!(!problem.message.is_empty());
        let line = problem.place.line.expect("every defect has its line");
        assert!((1..=lines).contains(&line), "{problem}");
    }
});

//! The report page and the pictures: what they hold equals the tables, nothing comes from elsewhere, no name breaks them.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

use serde_json::Value;

fn gyremesh(args: &[&str]) {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .args(args)
        .output()
        .unwrap();
    let text = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.code() < Some(2), "{args:?}: {text}");
}

/// The JSON within the page.
fn data(page: &str) -> Value {
    let begin = "<script type=\"application/json\" id=\"data\">";
    let rest = page.split_once(begin).unwrap().1;
    serde_json::from_str(rest.split_once("</script>").unwrap().0).unwrap()
}

/// Tags that are not closed, or closed in another order; void elements of HTML and self-closed ones are left out.
fn unbalanced(page: &str) -> Vec<String> {
    let mut open: Vec<String> = Vec::new();
    let mut rest = page;
    while let Some(at) = rest.find('<') {
        rest = &rest[at + 1..];
        if rest.starts_with('!') {
            continue;
        }
        let end = rest.find('>').unwrap();
        let tag = &rest[..end];
        let name: String = tag
            .trim_start_matches('/')
            .chars()
            .take_while(char::is_ascii_alphanumeric)
            .collect();
        rest = &rest[end + 1..];
        if tag.starts_with('/') {
            let last = open.pop();
            assert_eq!(last.as_deref(), Some(name.as_str()), "before {rest:.80}");
        } else if !tag.ends_with('/') && !["meta", "input", "br", "link"].contains(&name.as_str()) {
            if ["script", "style", "pre"].contains(&name.as_str()) {
                let close = format!("</{name}>");
                rest = rest.split_once(close.as_str()).unwrap().1;
            } else {
                open.push(name);
            }
        }
    }
    open
}

fn page(folder: &Path, network: &str, more: &[&str]) -> String {
    let out = ["report", network, "--out", folder.to_str().unwrap()];
    gyremesh(&[&out, more].concat());
    fs::read_to_string(folder.join("report.html")).unwrap()
}

#[test]
fn the_page_holds_what_the_tables_hold() {
    let folder = tempfile::tempdir().unwrap();
    let network = "networks/ostrin/network.toml";
    let hours = [
        "--from",
        "2031-06-14T13:00:00Z",
        "--to",
        "2031-06-14T19:00:00Z",
    ];
    let page = page(folder.path(), network, &hours);
    let out = [
        "estimate",
        network,
        "--out",
        folder.path().to_str().unwrap(),
    ];
    gyremesh(&[&out, &hours[..]].concat());

    assert_eq!(unbalanced(&page), Vec::<String>::new());
    assert!(page.contains(gyremesh::output::CAUTION.split_once(". ").unwrap().1));
    assert!(page.contains("Hollin Ridge wind farm") && page.contains("Crannet Fell"));
    // Nothing is fetched: no address but the names of markup languages.
    for address in page.split("http").skip(1) {
        assert!(address.starts_with("://www.w3.org/"), "{address:.60}");
    }
    assert!(!page.contains("src=") && !page.contains("@import") && !page.contains("url(h"));

    let data = data(&page);
    let times = data["times"].as_array().unwrap();
    let polygons = data["value"][0][0].as_array().unwrap().len();
    assert_eq!((times.len(), polygons), (73, 55));
    let mut reader = csv::Reader::from_path(folder.path().join("polygons.csv")).unwrap();
    let mut rows = 0;
    for (k, row) in reader.records().enumerate() {
        let row = row.unwrap();
        let (t, p) = (k / polygons, k % polygons);
        let state = data["state"][t].as_str().unwrap().as_bytes()[p];
        rows += 1;
        if row[4].is_empty() {
            assert!(state == b'm' || state == b'f', "{row:?}");
            continue;
        }
        for (field, list) in [(4, "value"), (5, "error"), (6, "value"), (7, "error")] {
            let stated: f64 = row[field].parse().unwrap();
            let shown = data[list][(field - 4) / 2][t][p].as_f64().unwrap() * 1e-7;
            assert!((shown - stated).abs() <= 0.501e-7, "{shown} {row:?}");
        }
        let significant = u8::from(&row[19] == "1") + 2 * u8::from(&row[20] == "1");
        let first = if &row[10] == "3" { b's' } else { b'a' };
        assert_eq!(state, first + significant, "{row:?}");
    }
    assert_eq!(rows, 73 * 55);
}

/// A network of three stations with names that would break a page.
fn hostile() -> (tempfile::TempDir, PathBuf) {
    let folder = tempfile::tempdir().unwrap();
    let stations = "id,name,latitude,longitude\nA<b>,</script><script>alert(1)</script>,-46.0,179.9\n\
                    \"B\"\"&\",\u{395}\u{3bb} {{ 7*7 }},-46.0,-179.8\nC,C's,-45.7,-179.95\n";
    fs::write(folder.path().join("stations.csv"), stations).unwrap();
    let mut reports = String::from("time,station,direction,speed\n");
    for minute in 0..6 {
        for (id, speed) in [("A<b>", 4.0), ("\"B\"\"&\"", 30.0), ("C", 0.0)] {
            let speed = speed + f64::from(minute) * 0.1;
            let from = 200 + 10 * minute;
            writeln!(reports, "2031-06-14T00:{minute}0:00Z,{id},{from},{speed}").unwrap();
        }
    }
    fs::write(folder.path().join("reports.csv"), reports).unwrap();
    let network = folder.path().join("network.toml");
    let settings = "name = \"Ä & <i>B</i> </title>\"\n[stations]\nfile = \"stations.csv\"\ncolumns = { name = \"name\" }\n\
                    [[reports]]\nfiles = [\"reports.csv\"]\n";
    fs::write(&network, settings).unwrap();
    (folder, network)
}

#[test]
fn no_name_breaks_the_page() {
    let (folder, network) = hostile();
    let page = page(folder.path(), network.to_str().unwrap(), &[]);
    assert_eq!(unbalanced(&page), Vec::<String>::new());
    assert!(!page.contains("<script>alert") && !page.contains("<i>B</i>"));
    assert!(page.contains("{{ 7*7 }}"), "a name is no template");
    assert_eq!(data(&page)["times"].as_array().unwrap().len(), 6);
    // South of the equator barbs are mirrored: 30 m/s has a pennant to the left of a wind from the north.
    assert!(page.contains("<path id=\"barb12\" d=\"M0 0L0 -24M0 -24L-10 "));
}

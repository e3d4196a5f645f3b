//! `[scalars.NAME]`: what is known of the observed scalars that `columns.scalars` of the reports name.

use std::collections::BTreeMap;

use super::section::Section;
use super::{ReportSource, ScalarSettings};
use crate::report::{ReportForm, SCALARS, ScalarColumn, WindColumns};

/// The scalars of all report files; gives each of their columns its place among them.
pub(super) fn scalars(root: &mut Section, sources: &mut [ReportSource]) -> Vec<ScalarSettings> {
    #[derive(serde::Deserialize)]
    #[serde(deny_unknown_fields)]
    struct Stated {
        error: f64,
    }
    let stated = root.value::<BTreeMap<String, Stated>>("scalars");
    let mut place = root.place();
    let mut errors = BTreeMap::new();
    if let Some(found) = stated {
        place = found.place;
        errors.extend(found.value.into_iter().map(|(name, s)| (name, s.error)));
    }
    let mut columns: Vec<&mut ScalarColumn> = sources
        .iter_mut()
        .filter_map(|source| match &mut source.format.form {
            ReportForm::Table(columns) => Some(&mut columns.scalars),
            ReportForm::Metar | ReportForm::Synop => None,
        })
        .flatten()
        .collect();
    let mut names: Vec<String> = columns.iter().map(|c| c.name.clone()).collect();
    names.sort_unstable();
    names.dedup();
    if names.len() > SCALARS {
        let message = format!("there are {} scalars ({SCALARS} at most)", names.len());
        root.problem(place.clone(), message);
        names.truncate(SCALARS);
    }
    for column in &mut columns {
        let slot = names.iter().position(|name| *name == column.name);
        column.slot = slot.unwrap_or(0); // more than can be kept: reported above
    }
    for (name, error) in &errors {
        if !names.contains(name) {
            let message = format!("no report file has a scalar `{name}` (`columns.scalars`)");
            root.problem(place.clone(), message);
        }
        if !(error.is_finite() && *error >= 0.0) {
            let message = format!("the error of `{name}` is {error} (0 or more expected)");
            root.problem(place.clone(), message);
        }
    }
    let of = |name: String| {
        let error = errors.get(&name).copied();
        if error.is_none() {
            let message = format!(
                "the standard error of `{name}` is missing: write `[scalars.{name}]` and `error = ...`, in its own unit"
            );
            root.problem(place.clone(), message);
        }
        ScalarSettings {
            name,
            error: error.unwrap_or(0.0),
        }
    };
    names.into_iter().map(of).collect()
}

/// `columns.scalars` of a group of tables: the user's names with the names of the columns.
pub(super) fn columns(section: &mut Section, wind: &WindColumns) -> Vec<ScalarColumn> {
    let Some(found) = section.value::<BTreeMap<String, String>>("scalars") else {
        return Vec::new();
    };
    if wind.is_wide() || matches!(wind, WindColumns::Metar { .. }) {
        section.problem(
            found.place,
            "scalars are read from tables with a row for each station and time, and wind in columns of numbers",
        );
        return Vec::new();
    }
    if found.value.keys().any(|name| name.trim().is_empty()) {
        section.problem(found.place, "a scalar has no name");
        return Vec::new();
    }
    let column = |(name, column)| ScalarColumn {
        name,
        column,
        slot: 0,
    };
    found.value.into_iter().map(column).collect()
}

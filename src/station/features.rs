//! Station lists in GeoJSON (RFC 7946): a collection of points.

use std::borrow::Cow;
use std::collections::BTreeSet;

use geojson::feature::Id;
use geojson::{Feature, GeometryValue};
use serde_json::Value;

use super::entry::{Field, Whence};
use super::list::ListBuilder;
use super::{Catalogue, StationList, missing_column};
use crate::error::{Place, Problem};

/// Reads a collection of points; the error holds all defects.
pub(super) fn read_features(
    file: &str,
    bytes: &[u8],
    catalogue: &Catalogue,
) -> Result<StationList, Vec<Problem>> {
    let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
    let refuse = |line: Option<u64>, message: String| {
        let place = Place {
            file: file.into(),
            line,
            column: None,
        };
        Err(vec![Problem::new(place, message)])
    };
    let mut document = match serde_json::from_slice(bytes) {
        Ok(Value::Object(document)) => document,
        Ok(_) => return refuse(None, "a GeoJSON FeatureCollection is expected".into()),
        Err(error) => return refuse(Some(error.line() as u64), format!("not JSON: {error}")),
    };
    let kind = document.get("type").and_then(Value::as_str).unwrap_or("");
    if kind != "FeatureCollection" {
        let message = format!("the type is `{kind}` (a GeoJSON `FeatureCollection` expected)");
        return refuse(None, message);
    }
    let Some(Value::Array(features)) = document.remove("features") else {
        return refuse(None, "the collection has no list of `features`".into());
    };

    let mut builder = ListBuilder::new(file, catalogue, false);
    let mut seen = BTreeSet::new();
    let any = !features.is_empty();
    for (number, value) in (1..).zip(features) {
        let at = Whence::Feature(number);
        match serde_json::from_value::<Feature>(value) {
            Ok(feature) => {
                if let Some(properties) = &feature.properties {
                    for name in properties.keys() {
                        if !seen.contains(name) {
                            seen.insert(name.clone());
                        }
                    }
                }
                add(&mut builder, at, &feature, catalogue);
            }
            Err(error) => {
                let place = at.place(file, "");
                builder.problem(Problem::new(
                    place,
                    format!("it is not a GeoJSON feature: {error}"),
                ));
            }
        }
    }
    for (field, column) in catalogue.columns.named() {
        let is_property = !matches!(field, Field::Id | Field::Latitude | Field::Longitude);
        if any && is_property && !seen.contains(column) {
            let mut problem = missing_column(file, column, seen.iter().map(String::as_str));
            problem.place.line = None;
            problem.message = problem
                .message
                .replace("there is no such column", "no feature has this property")
                .replace(": the file is empty", "");
            builder.problem(problem);
        }
    }
    builder.finish()
}

/// Adds a feature, which must be a point, or may lack a geometry where rows without a position are skipped.
fn add(builder: &mut ListBuilder, at: Whence, feature: &Feature, catalogue: &Catalogue) {
    let coordinates = match feature.geometry.as_ref().map(|geometry| &geometry.value) {
        Some(GeometryValue::Point { coordinates }) => coordinates.as_slice(),
        None => &[],
        Some(other) => {
            let message = format!("the geometry is a {} (a Point expected)", other.type_name());
            builder.problem(Problem::new(at.place(builder.file(), ""), message));
            return;
        }
    };
    if coordinates.len() < 2 && !catalogue.first_of_each {
        let message = "there is no position (a Point with longitude and latitude expected)";
        builder.problem(Problem::new(at.place(builder.file(), ""), message));
        return;
    }
    let coordinate = |k: usize| match coordinates.get(k) {
        Some(degrees) => Cow::Owned(degrees.to_string()),
        None => Cow::Borrowed(""),
    };
    let texts = |field| match field {
        Field::Longitude => coordinate(0),
        Field::Latitude => coordinate(1),
        Field::Id => {
            let property = property(feature, &catalogue.columns.id);
            match &feature.id {
                Some(Id::String(id)) if property.is_empty() => Cow::Borrowed(id.trim()),
                Some(Id::Number(id)) if property.is_empty() => Cow::Owned(id.to_string()),
                _ => property,
            }
        }
        _ => catalogue
            .columns
            .column(field)
            .map_or(Cow::Borrowed(""), |column| property(feature, column)),
    };
    builder.add(at, &texts, coordinates.get(2).copied());
}

/// A property as text; a list is joined with `;`, as a list of aliases is written in a table.
fn property<'f>(feature: &'f Feature, name: &str) -> Cow<'f, str> {
    match feature.property(name) {
        None | Some(Value::Null) => Cow::Borrowed(""),
        Some(Value::String(text)) => Cow::Borrowed(text.trim()),
        Some(Value::Array(items)) => {
            let texts = items.iter().map(|item| match item {
                Value::String(text) => text.clone(),
                other => other.to_string(),
            });
            Cow::Owned(texts.collect::<Vec<_>>().join(";"))
        }
        Some(other) => Cow::Owned(other.to_string()),
    }
}

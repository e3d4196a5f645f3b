//! `summary.json`: settings used, books of every stage, self-test, strongest values.

use std::collections::BTreeMap;

use serde_json::{Value, json};

use super::vertical_motion::assumption_of_height;
use super::{CAUTION, error_bars};
use crate::helmholtz::Part;
use crate::integral::{Attribution, Cause, Peak, Statistics};
use crate::pipeline::{Outcome, Setup};
use crate::settings::{AlignMethod, MeansSettings, ReportSource, Settings};
use crate::station::Station;

/// The summary of a run, as JSON. It holds nothing that differs between two runs of the same input.
#[must_use]
pub fn summary_json(setup: &Setup, outcome: &Outcome) -> String {
    let period = &outcome.period;
    let polygons = setup.built.polygons.len() as u64;
    let mut reasons: BTreeMap<&str, usize> = BTreeMap::new();
    for (_, why) in &setup.built.excluded {
        *reasons.entry(why.name()).or_default() += 1;
    }
    let excluded: Vec<Value> = setup
        .built
        .excluded
        .iter()
        .map(|(p, why)| json!({ "polygon": p.id, "reason": why.name(), "detail": why.to_string() }))
        .collect();
    let files: Vec<Value> = outcome
        .reading
        .files
        .iter()
        .map(|f| json!({ "file": f.file, "rows": f.tally }))
        .collect();
    let failures: Vec<String> = outcome
        .reading
        .failures
        .iter()
        .map(ToString::to_string)
        .collect();
    let warnings: Vec<String> = outcome.warnings.iter().map(ToString::to_string).collect();
    let extremes = &outcome.extremes;
    let summary = json!({
        "program": { "name": env!("CARGO_PKG_NAME"), "version": env!("CARGO_PKG_VERSION") },
        "network": setup.settings.name,
        "settings": settings(&setup.settings),
        "period": {
            "first": period.ends.map(|ends| ends.0.to_string()),
            "last": period.ends.map(|ends| ends.1.to_string()),
            "times": period.times,
            "times_without_report": period.empty_times,
        },
        "reports": {
            "rows": outcome.reading.rows,
            "files": files,
            "failures": failures,
            "repeats": outcome.reading.repeats,
            "aligned": outcome.aligned,
            "share_used": outcome.share_used(),
        },
        "stations": setup.network.len(),
        "polygons": {
            "used": setup.built.polygons.len(),
            "excluded": setup.built.excluded.len(),
            "excluded_by_reason": reasons,
            "excluded_list": excluded,
            "flat_triangles": setup.built.flat,
            "filling_holes": outcome.extra.len(),
            "values": extremes.values.iter().take(setup.built.polygons.len()).sum::<u64>(),
            "values_possible": period.times * polygons,
        },
        "values_by_reason": Cause::NAMES.iter().zip(outcome.causes.all())
            .map(|(name, n)| ((*name).to_string(), n.into()))
            .collect::<serde_json::Map<String, Value>>(),
        "odd_means": odd_means(setup, outcome),
        "self_test": setup.self_test,
        "significance": {
            "false_discovery_rate": setup.settings.errors.false_discovery_rate,
            "vorticity_share": significant_share(&outcome.statistics.vorticity),
            "divergence_share": significant_share(&outcome.statistics.divergence),
        },
        "fits": outcome.fits.0.iter().map(|book| json!({
            "polygon": setup.built.polygons[book.polygon].id,
            "times": book.times,
            "disagreeing_share": book.share(),
            "vorticity_difference": book.difference()[0],
            "divergence_difference": book.difference()[1],
            "residual": book.residual(),
        })).collect::<Vec<Value>>(),
        "structure": outcome.structure.last().map(|report| json!({
            "time": report.time.to_string(),
            "function": report.function,
            "by_distance": report.rows,
        })),
        "extremes": {
            "convergence": peak(setup, outcome, extremes.convergence),
            "divergence": peak(setup, outcome, extremes.divergence),
            "cyclonic_vorticity": peak(setup, outcome, extremes.cyclonic),
            "anticyclonic_vorticity": peak(setup, outcome, extremes.anticyclonic),
        },
        "kinetic_energy": energy(setup, outcome),
        "vertical_motion": setup.settings.w_at.map(|height| json!({
            "height_m": height,
            "assumption": assumption_of_height(height),
        })),
        "corrections": corrections(setup),
        "warnings": warnings,
        "units": {
            "vorticity": "s-1", "divergence": "s-1", "speed": "m s-1", "area_km2": "km2", "time": "RFC 3339 UTC",
        },
        "error_bars": error_bars(&setup.settings.errors),
        "caution": CAUTION,
    });
    let mut text = format!("{summary:#}");
    text.push('\n');
    text
}

/// Kinetic energy by parts of the wind, if it was asked for.
fn energy(setup: &Setup, outcome: &Outcome) -> Option<Value> {
    let books = &outcome.energy;
    setup.settings.decompose.then(|| {
        let shares = Part::ALL.map(|part| (format!("{}_share", part.name()), books.share(part)));
        let mut out = json!({ "times": books.times });
        for (name, share) in shares {
            out[name] = share.into();
        }
        out
    })
}

/// What the station list corrects.
fn corrections(setup: &Setup) -> Vec<Value> {
    let of = |s: &Station| {
        let c = s.correction.as_ref()?;
        Some(json!({
            "station": s.id,
            "direction": c.direction,
            "speed_factor": c.speed_factor,
            "from": c.from.map(|t| t.to_string()),
            "origin": c.origin,
        }))
    };
    setup.network.stations().iter().filter_map(of).collect()
}

/// Stations that would explain the means around them.
fn odd_means(setup: &Setup, outcome: &Outcome) -> Vec<Value> {
    let of = |found: &Attribution| {
        json!({
            "station": setup.network.stations()[found.station].id, // a station of the network
            "offset_u": found.offset.u,
            "offset_v": found.offset.v,
            "offset_se": found.error,
            "explained_share": found.explained,
            "polygons": found.polygons,
        })
    };
    outcome.attributions.iter().map(of).collect()
}

/// Share of the values that differ from zero at the false-discovery rate.
pub(crate) fn significant_share(statistics: &[Statistics]) -> Option<f64> {
    let values: u64 = statistics.iter().map(|s| s.count).sum();
    let significant: u64 = statistics.iter().map(|s| s.significant).sum();
    (values > 0).then(|| significant as f64 / values as f64)
}

fn peak(setup: &Setup, outcome: &Outcome, peak: Option<Peak>) -> Option<Value> {
    let peak = peak?;
    let polygon = outcome.polygon(setup, peak.polygon)?;
    Some(json!({
            "polygon": polygon.id,
            "latitude": polygon.middle.0,
            "longitude": polygon.middle.1,
            "time": peak.time.to_string(),
            "value": peak.value,
            "standard_error": peak.error,
    }))
}

fn means(means: &MeansSettings) -> Option<Value> {
    let by = means.by?;
    let periods = means
        .periods
        .iter()
        .map(|p| json!({ "name": p.name, "from": p.from.to_string(), "to": p.to.to_string() }));
    Some(json!({
        "by": by,
        "zone": means.zone.to_string(),
        "periods": periods.collect::<Vec<_>>(),
    }))
}

/// The settings used, without what says nothing of the results (memory, cache).
pub(super) fn settings(settings: &Settings) -> Value {
    let analysis = &settings.analysis;
    let method = match analysis.method {
        AlignMethod::Nearest { tolerance } => {
            json!({ "method": "nearest", "tolerance_s": tolerance.as_secs_f64() })
        }
        AlignMethod::Linear { tolerance } => {
            json!({ "method": "linear", "tolerance_s": tolerance.as_secs_f64() })
        }
        AlignMethod::VectorMean {
            window,
            least_reports,
        } => {
            json!({ "method": "mean", "window_s": window.as_secs_f64(), "least_reports": least_reports })
        }
    };
    let reports: Vec<Value> = settings
        .reports
        .iter()
        .map(|ReportSource { files, format }| {
            json!({
                "files": files,
                "form": format.form,
                "speed_unit": format.speed_unit.symbol(),
                "north": format.north,
                "text": format.text,
                "time": {
                    "form": format!("{:?}", format.time.form),
                    "zone": format!("{:?}", format.time.zone),
                    "label": format!("{:?}", format.time.label),
                    "averaging_s": format.time.averaging.as_secs_f64(),
                },
                "reference": format.reference.map(|t| t.to_string()),
            })
        })
        .collect();
    let polygons = &settings.polygons;
    let rings: Vec<Value> = polygons
        .rings
        .iter()
        .map(|ring| json!({ "name": ring.name, "stations": ring.stations }))
        .collect();
    let regions: Vec<&str> = polygons.regions.iter().map(|r| r.name.as_str()).collect();
    json!({
        "station_file": settings.station_file,
        "stations": settings.catalogue,
        "reports": reports,
        "sensor": settings.sensor,
        "analysis": {
            "interval_s": analysis.interval.as_secs_f64(),
            "align": method,
            "from": analysis.from.map(|t| t.to_string()),
            "to": analysis.to.map(|t| t.to_string()),
            "height_m": analysis.height.map(|h| h.height),
            "level": analysis.level,
        },
        "errors": settings.errors,
        "kinematics": settings.kinematics,
        "decompose": settings.decompose,
        "scalars": settings.scalars,
        "means": means(&settings.means),
        "check": settings.screen.then_some(&settings.check),
        "polygons": {
            "triangles": settings.polygons.triangles,
            "missing": settings.missing,
            "rings": rings,
            "regions": regions,
        },
        "limits": settings.limits,
    })
}

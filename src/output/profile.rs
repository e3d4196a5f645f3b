//! Profiles: `profile.csv` and JSON.

use serde_json::{Value, json};

use super::csv::{number, optional, quoted};
use super::vertical_motion::assumption_of_height;
use super::{CAUTION, error_bars};
use crate::pipeline::{LevelEstimate, PolygonProfile, ProfileOutcome, Setup};
use crate::profile::{Coordinate, Level, Motion, air_at_pressure, w_of_omega};

/// The vertical wind of a motion in pressure, with the temperature of the standard atmosphere.
#[must_use]
pub fn w_of(motion: &Motion, pressure: f64) -> Motion {
    let air = air_at_pressure(pressure);
    let w = |omega: f64| w_of_omega(omega, &air);
    Motion {
        // No motion has no sign.
        value: w(motion.value) + 0.0,
        se: w(motion.se).abs(),
        se_correlated: w(motion.se_correlated).abs(),
    }
}

/// What the motions of a run are, in words: how they were made and what is assumed.
#[must_use]
pub fn assumptions(setup: &Setup, outcome: &ProfileOutcome) -> Vec<String> {
    use crate::profile::Adjustment;
    use crate::settings::Boundary;
    let wanted = &setup.settings.profile;
    let mut out = vec![format!("Errors: {}.", error_bars(&setup.settings.errors))];
    if let Some([least, most]) = outcome.prior_share {
        out.push(format!(
            "The sampling errors rest on the structure function of each level, {} by the stated prior ([errors]).",
            if most - least < 5e-3 {
                format!("{:.0} %", 100.0 * most)
            } else {
                format!("{:.0} to {:.0} %", 100.0 * least, 100.0 * most)
            }
        ));
    }
    if let (true, Some(height)) = (wanted.levels.is_empty(), wanted.height) {
        out.push(assumption_of_height(height));
        return out;
    }
    let (symbol, unit) = match wanted.coordinate {
        Coordinate::Pressure => ("omega", "Pa/s"),
        Coordinate::Height => ("w", "m/s"),
    };
    let boundary = |boundary: Boundary| match boundary {
        Boundary::Zero => format!("{symbol} = 0"),
        Boundary::Given(motion) => format!("{symbol} = {motion} {unit}"),
        Boundary::Slope => "air along the plane of the stations' elevations".to_string(),
    };
    out.push(format!("Lower boundary: {}.", boundary(wanted.lower)));
    match wanted.adjustment {
        Adjustment::None => out.push("Not adjusted to an upper boundary.".into()),
        adjustment => out.push(format!(
            "Adjusted to {} at the highest level, the divergence by {} (O'Brien 1970).",
            boundary(wanted.upper),
            match adjustment {
                Adjustment::Constant => "the same at all levels",
                _ => "amounts that grow linearly from the bottom",
            }
        )),
    }
    out.push(match (wanted.coordinate, wanted.anelastic) {
        (Coordinate::Pressure, _) => {
            "w = -omega R T/(g p) with the temperature of the standard atmosphere: 10 % off for 25 K.".into()
        }
        (Coordinate::Height, true) => "Density of the standard atmosphere (anelastic).".into(),
        (Coordinate::Height, false) => "Constant density (shallow).".into(),
    });
    out
}

/// `profile.csv`: a row for each time, polygon and level. Levels in Pa or m; ω in Pa/s (positive downward), w in m/s
/// (positive upward), at `motion_at`; `_se` for independent errors of the levels, `_se_correlated` for fully correlated.
#[must_use]
pub fn profile_csv(setup: &Setup, outcome: &ProfileOutcome) -> String {
    let coordinate = shown_in(setup);
    let level = match coordinate {
        Coordinate::Pressure => "pressure",
        Coordinate::Height => "height",
    };
    let mut out = format!(
        "time,polygon,stations,{level},{level}_top,latitude,longitude,area_km2,vorticity,vorticity_se,divergence,\
         divergence_se,motion_at"
    );
    let symbols: &[&str] = match coordinate {
        Coordinate::Pressure => &["omega", "omega_adjusted", "w", "w_adjusted"],
        Coordinate::Height => &["w", "w_adjusted"],
    };
    for symbol in symbols {
        for part in [",", symbol, ",", symbol, "_se,", symbol, "_se_correlated"] {
            out.push_str(part);
        }
    }
    out.push_str(",flag,reason\n");
    for profile in &outcome.profiles {
        for found in &profile.levels {
            row(&mut out, setup, profile, found, coordinate);
        }
    }
    out
}

fn row(
    out: &mut String,
    setup: &Setup,
    profile: &PolygonProfile,
    found: &LevelEstimate,
    coordinate: Coordinate,
) {
    let (bottom, top) = match found.level {
        Level::At(level) => (level, level),
        Level::Between(bottom, top) => (bottom, top),
    };
    let mut fields = vec![
        profile.time.to_string(),
        quoted(&profile.polygon),
        quoted(&stations(setup, found)),
        number(bottom),
        number(top),
        optional(found.place.map(|p| p.0.0)),
        optional(found.place.map(|p| p.0.1)),
        optional(found.place.map(|p| p.1 * 1e-6)),
    ];
    for k in [0, 1] {
        let measured = found.estimate.map(|e| e[k]);
        fields.push(optional(measured.map(|m| m.value)));
        fields.push(optional(measured.map(|m| m.se)));
    }
    fields.push(number(found.motion_at));
    let mut motions = vec![found.motion, found.adjusted];
    if coordinate == Coordinate::Pressure {
        let w = |motion: Option<Motion>| motion.map(|m| w_of(&m, found.motion_at));
        motions.extend([w(found.motion), w(found.adjusted)]);
    }
    for motion in motions {
        fields.push(optional(motion.map(|m| m.value)));
        fields.push(optional(motion.map(|m| m.se)));
        fields.push(optional(motion.map(|m| m.se_correlated)));
    }
    fields.push(found.flag.value().to_string());
    fields.push(quoted(&found.reason));
    out.push_str(&fields.join(","));
    out.push('\n');
}

/// Identifiers of a polygon's stations at a level, counter-clockwise.
fn stations(setup: &Setup, found: &LevelEstimate) -> String {
    let all = setup.network.stations();
    let ids = found.stations.iter().filter_map(|&s| all.get(s));
    ids.map(|s| s.id.as_str()).collect::<Vec<_>>().join(" ")
}

/// Reports without levels are shown over height.
fn shown_in(setup: &Setup) -> Coordinate {
    if setup.settings.profile.levels.is_empty() {
        Coordinate::Height
    } else {
        setup.settings.profile.coordinate
    }
}

/// All profiles as JSON, with what they assume.
#[must_use]
pub fn profile_json(setup: &Setup, outcome: &ProfileOutcome) -> String {
    let coordinate = shown_in(setup);
    let motion = |m: Option<Motion>| {
        m.map(|m| json!({ "value": m.value, "se": m.se, "se_correlated": m.se_correlated }))
    };
    let level = |found: &LevelEstimate| {
        let w = |m: Option<Motion>| motion(m.map(|m| w_of(&m, found.motion_at)));
        let mut value = json!({
            "level": found.level.words(coordinate),
            "stations": stations(setup, found),
            "latitude": found.place.map(|p| p.0.0),
            "longitude": found.place.map(|p| p.0.1),
            "area_km2": found.place.map(|p| p.1 * 1e-6),
            "vorticity": found.estimate.map(|e| e[0].value),
            "vorticity_se": found.estimate.map(|e| e[0].se),
            "divergence": found.estimate.map(|e| e[1].value),
            "divergence_se": found.estimate.map(|e| e[1].se),
            "motion_at": found.motion_at,
            "flag": found.flag,
            "reason": found.reason,
        });
        let motions = match coordinate {
            Coordinate::Pressure => vec![
                ("omega", motion(found.motion)),
                ("omega_adjusted", motion(found.adjusted)),
                ("w", w(found.motion)),
                ("w_adjusted", w(found.adjusted)),
            ],
            Coordinate::Height => vec![
                ("w", motion(found.motion)),
                ("w_adjusted", motion(found.adjusted)),
            ],
        };
        for (name, motion) in motions {
            value[name] = motion.unwrap_or(Value::Null);
        }
        value
    };
    let profiles: Vec<Value> = outcome
        .profiles
        .iter()
        .map(|p| {
            let levels: Vec<Value> = p.levels.iter().map(level).collect();
            json!({ "time": p.time.to_string(), "polygon": p.polygon, "levels": levels })
        })
        .collect();
    let warnings: Vec<String> = outcome.warnings.iter().map(ToString::to_string).collect();
    let value = json!({
        "network": setup.settings.name,
        "settings": {
            "coordinate": coordinate,
            "lower_boundary": setup.settings.profile.lower,
            "upper_boundary": setup.settings.profile.upper,
            "adjustment": setup.settings.profile.adjustment,
            "largest_gap": setup.settings.profile.largest_gap,
        },
        "assumptions": assumptions(setup, outcome),
        "times": outcome.times,
        "platform_levels": {
            "with_wind": outcome.with_wind,
            "without": outcome.without.iter().map(|(why, n)| json!({ "reason": why, "count": n })).collect::<Vec<_>>(),
        },
        "prior_share": outcome.prior_share,
        "rows": outcome.reading.rows,
        "profiles": profiles,
        "warnings": warnings,
        "caution": CAUTION,
    });
    format!("{value:#}\n")
}

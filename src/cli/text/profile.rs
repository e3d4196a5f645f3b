//! The text of `gyremesh profile`, in 80 columns.

use std::fmt::Write as _;

use super::{WIDTH, cut, heading, wrapped};
use crate::output::{CAUTION, assumptions, w_of};
use crate::pipeline::{LevelEstimate, PolygonProfile, ProfileOutcome, Setup};
use crate::profile::{Coordinate, Motion};

/// Profiles that are printed.
const SHOWN: usize = 6;

/// The surest profiles, and what they rest on.
pub(crate) fn profile_text(setup: &Setup, outcome: &ProfileOutcome) -> String {
    let mut out = String::new();
    let without: u64 = outcome.without.values().sum();
    // Writing to a string cannot fail.
    let _ = writeln!(out, "{}", heading(&cut(&setup.settings.name, WIDTH)));
    let _ = writeln!(
        out,
        "Platforms   {}; winds at {} of {} platform levels; nominal times: {}",
        setup.network.len(),
        outcome.with_wind,
        outcome.with_wind + without,
        outcome.times
    );
    for (why, n) in &outcome.without {
        let _ = writeln!(out, "            {n:>6} where the platform {}", why.words());
    }
    let estimates = |p: &PolygonProfile| p.levels.iter().filter(|l| l.estimate.is_some()).count();
    let with_motion = |p: &&PolygonProfile| p.levels.iter().any(|l| l.motion.is_some());
    let moving = outcome.profiles.iter().filter(with_motion).count();
    let with_any = outcome.profiles.iter().filter(|p| estimates(p) > 0).count();
    let _ = writeln!(
        out,
        "Profiles    {} of {} polygons and times have an estimate, {} a vertical motion",
        with_any,
        outcome.profiles.len(),
        moving
    );
    let mut order: Vec<(f64, &PolygonProfile)> = outcome
        .profiles
        .iter()
        .filter(|p| estimates(p) > 0)
        .map(|p| (sureness(p), p))
        .collect();
    order.sort_by(|a, b| b.0.total_cmp(&a.0));
    if order.len() > SHOWN {
        let _ = writeln!(
            out,
            "\nThe {SHOWN} whose motion is largest against its error; --out writes all:"
        );
    }
    let on_ground = setup.settings.profile.levels.is_empty();
    for (_, profile) in order.into_iter().take(SHOWN) {
        profile_table(&mut out, setup, profile, on_ground);
    }
    let _ = writeln!(
        out,
        "\n{}",
        wrapped(
            "Vorticity and divergence in 1e-5 /s, w in cm/s upward. Errors of the motion: the larger of those for \
             independent and for fully correlated errors of the levels.",
            WIDTH
        )
    );
    for line in assumptions(setup, outcome) {
        let _ = writeln!(out, "{}", wrapped(&line, WIDTH));
    }
    let _ = writeln!(out, "\n{}", wrapped(CAUTION, WIDTH));
    out
}

fn error_of(motion: &Motion) -> f64 {
    motion.se.max(motion.se_correlated)
}

/// Largest motion of a profile relative to its error; adjusted where there is one.
fn sureness(profile: &PolygonProfile) -> f64 {
    let ratio = |level: &LevelEstimate| {
        let motion = level.adjusted.or(level.motion)?;
        let error = error_of(&motion);
        (error > 0.0).then(|| motion.value.abs() / error)
    };
    profile.levels.iter().filter_map(ratio).fold(0.0, f64::max)
}

fn profile_table(out: &mut String, setup: &Setup, profile: &PolygonProfile, on_ground: bool) {
    let pressure = !on_ground && setup.settings.profile.coordinate == Coordinate::Pressure;
    let place = profile.levels.iter().find_map(|l| l.place);
    let place = place.map_or_else(String::new, |((latitude, longitude), area)| {
        format!("  {latitude:.1} N {longitude:.1} E, {:.0} km2", area / 1e6)
    });
    let head = format!("{}  {}{place}", profile.time, profile.polygon);
    let _ = writeln!(out, "\n{}", heading(&cut(&head, WIDTH)));
    let motion = if pressure { "omega Pa/s" } else { "w cm/s" };
    let last = if pressure { "w cm/s" } else { "" };
    let line = format!(
        "  {:<15} {:>12} {:>12} {motion:>14} {:>14}",
        "level", "vorticity", "divergence", "adjusted"
    );
    let _ = writeln!(out, "{}", format!("{line} {last:>6}").trim_end());
    for level in &profile.levels {
        let words = if on_ground {
            "ground".to_string()
        } else {
            level.level.words(setup.settings.profile.coordinate)
        };
        let estimate = |k: usize| {
            let found = level.estimate.map(|e| e[k]);
            found.map_or_else(
                || "-".into(),
                |m| format!("{:+.1} ± {:.1}", m.value * 1e5, m.se * 1e5),
            )
        };
        let shown = |m: Option<Motion>| {
            m.map_or_else(
                || "-".into(),
                |m| {
                    if pressure {
                        format!("{:+.3} ± {:.3}", m.value, error_of(&m))
                    } else {
                        format!("{:+.1} ± {:.1}", 100.0 * m.value, 100.0 * error_of(&m))
                    }
                },
            )
        };
        let w = level.adjusted.or(level.motion).filter(|_| pressure);
        let w = w.map_or_else(String::new, |m| {
            format!("{:+.1}", 100.0 * w_of(&m, level.motion_at).value)
        });
        let line = format!(
            "  {:<15} {:>12} {:>12} {:>14} {:>14} {w:>6}",
            cut(&words, 15),
            estimate(0),
            estimate(1),
            shown(level.motion),
            shown(level.adjusted)
        );
        let _ = writeln!(out, "{}", line.trim_end());
        if !level.reason.is_empty() {
            let _ = writeln!(out, "    {}", cut(&level.reason, WIDTH - 4));
        }
    }
}

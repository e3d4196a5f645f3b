//! The keys of `[check]`.

use super::check::{CheckLimits, RunLimits, Season};
use super::section::Section;
use crate::check::Test;
use crate::time::micros_of;
use crate::units;

/// Reads `[check]`; `starting_speed` is the default of that key.
pub(super) fn check(mut section: Section, starting_speed: f64) -> CheckLimits {
    let mut limits = CheckLimits::with_starting_speed(starting_speed);
    let all = &mut limits;
    put_speed(&mut section, "speed_suspect", &mut all.range.speed_suspect);
    put_speed(&mut section, "speed_fail", &mut all.range.speed_fail);
    put_speed(&mut section, "starting_speed", &mut all.starting_speed);
    put_time(&mut section, "gap", &mut all.gap);
    let anywhere = |text: &str| match text {
        "any" => Ok(None),
        text => units::parse_length(text).map(Some),
    };
    if let Some(displacement) = section.parsed("displacement", anywhere) {
        all.displacement = displacement;
    }
    all.off = off(&mut section);
    all.climatology = climatology(&mut section);

    let mut part = section.section("spike");
    put_speed(&mut part, "suspect", &mut all.spike.suspect);
    put_speed(&mut part, "fail", &mut all.spike.fail);
    part.finish();

    let mut part = section.section("rate_of_change");
    let rate = &mut all.rate_of_change;
    put_number(&mut part, "deviations", 0.0..=1000.0, &mut rate.deviations);
    put_time(&mut part, "period", &mut rate.period);
    put_speed(&mut part, "least", &mut rate.least);
    put_number(
        &mut part,
        "least_changes",
        2.0..=1e6,
        &mut rate.least_changes,
    );
    part.finish();

    let mut part = section.section("flat_line");
    put_speed(&mut part, "speed", &mut all.flat_line.speed);
    put_number(
        &mut part,
        "direction",
        0.0..=180.0,
        &mut all.flat_line.direction,
    );
    run(&mut part, &mut all.flat_line.run);
    part.finish();

    let mut part = section.section("stuck_vane");
    put_speed(&mut part, "varies", &mut all.stuck_vane.varies);
    run(&mut part, &mut all.stuck_vane.run);
    part.finish();

    let mut part = section.section("frozen_anemometer");
    let frozen = &mut all.frozen_anemometer;
    put_number(&mut part, "varies", 0.0..=180.0, &mut frozen.varies);
    run(&mut part, &mut frozen.run);
    part.finish();

    let mut part = section.section("persistence");
    let persistence = &mut all.persistence;
    put_speed(&mut part, "speed", &mut persistence.speed);
    put_number(
        &mut part,
        "direction",
        0.0..=180.0,
        &mut persistence.direction,
    );
    put_time(&mut part, "period", &mut persistence.period);
    put_speed(&mut part, "exempt_below", &mut persistence.exempt_below);
    put_time(&mut part, "interval", &mut persistence.interval);
    part.finish();

    let mut part = section.section("agreement");
    put_speed(&mut part, "gust_below", &mut all.agreement.gust_below);
    if let Some(found) = part.value("calm_direction") {
        all.agreement.calm_direction = found.value;
    }
    part.finish();

    let mut part = section.section("attenuated_signal");
    let attenuated = &mut all.attenuated_signal;
    put_time(&mut part, "period", &mut attenuated.period);
    put_speed(&mut part, "least_range", &mut attenuated.least_range);
    put_number(
        &mut part,
        "usual_times",
        0.0..=1000.0,
        &mut attenuated.usual_times,
    );
    put_time(&mut part, "calm_after", &mut attenuated.calm_after);
    part.finish();

    let mut part = section.section("neighbour");
    let neighbour = &mut all.neighbour;
    put_number(
        &mut part,
        "deviations",
        1.0..=1000.0,
        &mut neighbour.deviations,
    );
    if let Some(found) = part.value::<u32>("least_neighbours") {
        neighbour.least_neighbours = found.value.max(1);
    }
    put_time(&mut part, "report_within", &mut neighbour.report_within);
    part.finish();

    section.finish();
    limits
}

fn run(part: &mut Section, limits: &mut RunLimits) {
    let mut count = |key, to: &mut u32| {
        if let Some(found) = part.value::<u32>(key) {
            *to = found.value.max(2);
        }
    };
    count("suspect_reports", &mut limits.suspect_reports);
    count("fail_reports", &mut limits.fail_reports);
    put_time(part, "suspect_after", &mut limits.suspect_after);
    put_time(part, "fail_after", &mut limits.fail_after);
    put_time(
        part,
        "coarse_suspect_after",
        &mut limits.coarse_suspect_after,
    );
    put_time(part, "coarse_fail_after", &mut limits.coarse_fail_after);
}

/// Names of tests that are not made.
fn off(section: &mut Section) -> Vec<Test> {
    let Some(found) = section.value::<Vec<String>>("off") else {
        return Vec::new();
    };
    let mut tests = Vec::new();
    for name in &found.value {
        match Test::ALL.into_iter().find(|test| test.name() == name) {
            Some(test) => tests.push(test),
            None => {
                let names = Test::ALL.map(Test::name).join(", ");
                section.problem(
                    found.place.clone(),
                    format!("`{name}` is no test ({names})"),
                );
            }
        }
    }
    tests.sort_unstable();
    tests.dedup();
    tests
}

fn climatology(section: &mut Section) -> Vec<Season> {
    let mut seasons: Vec<Season> = Vec::new();
    for mut part in section.sections("climatology") {
        let months = part.required::<Vec<u32>>("months");
        let (mut least, mut most) = (0.0, f64::MAX);
        put_speed(&mut part, "speed_least", &mut least);
        put_speed(&mut part, "speed_most", &mut most);
        if let Some(months) = months {
            for &month in &months.value {
                if !(1..=12).contains(&month) {
                    let message = format!("{month} is no month (1 to 12 expected)");
                    part.problem(months.place.clone(), message);
                } else if seasons.iter().any(|season| season.has_month(month)) {
                    let message = format!("month {month} has limits already");
                    part.problem(months.place.clone(), message);
                }
            }
            seasons.push(Season::new(&months.value, least, most));
        }
        part.finish();
    }
    seasons
}

fn put_speed(section: &mut Section, key: &'static str, to: &mut f64) {
    if let Some(speed) = section.parsed(key, units::parse_speed) {
        *to = speed;
    }
}

fn put_number(
    section: &mut Section,
    key: &'static str,
    range: std::ops::RangeInclusive<f64>,
    to: &mut f64,
) {
    if let Some(number) = section.number(key, range) {
        *to = number;
    }
}

fn put_time(section: &mut Section, key: &'static str, to: &mut i64) {
    if let Some(time) = section.parsed(key, units::parse_duration) {
        *to = micros_of(time);
    }
}

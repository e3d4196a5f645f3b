#![expect(clippy::unwrap_used, reason = "a test may panic")]

use super::*;
use crate::align::{AlignedWind, Covariance};
use crate::settings::NeighbourLimits;
use crate::station::{Position, Station};
use crate::structure::{Exponent, Predictor, StructureSettings};

const SPACING: f64 = 25e3;

/// A grid of stations moved off its points, `side` × `side`.
fn network(side: i32) -> Network {
    grid(side, 0.06)
}

fn grid(side: i32, jitter: f64) -> Network {
    let mut stations = Vec::new();
    for i in 0..side {
        for j in 0..side {
            let off = |k: i32| jitter * f64::from((k * 7919) % 11 - 5) / 5.0;
            let latitude = 46.0 + 0.225 * f64::from(i) + off(3 * i + j);
            let longitude = 8.0 + 0.32 * f64::from(j) + off(i + 5 * j + 2);
            let position = Position::new(latitude, longitude).unwrap();
            stations.push(Station::new(format!("S{:02}", side * i + j), position));
        }
    }
    Network::new(stations)
}

/// The law with ratio 1 and a noise that is a power of 2 of its amplitude: the middle of a class.
fn model() -> StructureFunction {
    StructureFunction {
        longitudinal: 2.0,
        transverse: 2.0,
        site_variance: 0.0,
        ..StructureSettings::default().prior(SPACING)
    }
}

const VARIANCE: f64 = 0.25;

fn block(network: &Network, times: usize, wind: impl Fn(usize, usize) -> (f64, f64)) -> WindBlock {
    let minutes = |t: usize| Time::from_micros(i64::try_from(t).unwrap() * 300_000_000);
    let mut block = WindBlock::empty((0..times).map(minutes).collect(), network.len());
    for station in 0..network.len() {
        for t in 0..times {
            let (u, v) = wind(station, t);
            let value = AlignedWind {
                wind: Wind { u, v },
                covariance: Covariance {
                    uu: VARIANCE,
                    uv: 0.0,
                    vv: VARIANCE,
                },
                flag: Flag::Pass,
                age: 0.0,
            };
            block.set(station, t, &value);
        }
    }
    block
}

fn check(network: &Network) -> SpatialCheck {
    SpatialCheck::new(network, SPACING, NeighbourLimits::default())
}

/// No station's own reports are known: the values at other times are looked at.
fn no_changes(_: usize, _: Time) -> Option<[Option<Wind>; 2]> {
    None
}

/// A wavy wind that is no linear function of place.
fn wavy(station: usize, _: usize) -> (f64, f64) {
    let x = f64::from(u32::try_from(station).unwrap());
    (5.0 + 0.4 * x.sin(), 1.0 + 0.4 * (1.7 * x).cos())
}

/// With at most eleven stations both predict from all others: residual and variance are those of the full inverse.
#[test]
fn the_prediction_is_that_of_the_full_inverse() {
    let network = network(3);
    let (block, models) = (block(&network, 1, wavy), vec![model()]);
    let check = check(&network);
    let predictor = Predictor::new(&network, SPACING);
    let expected = predictor.predict(&models[0], &block, 0);
    assert_eq!(expected.len(), 9);
    for full in expected {
        let own = check.deviation(&block, &models, full.station, 0).unwrap();
        let off = (own.residual.u - full.residual.u).hypot(own.residual.v - full.residual.v);
        assert!(off < 2e-3, "{own:?} {full:?}");
        let variance = 0.5 * (full.covariance.uu + full.covariance.vv);
        assert!(
            (own.variance / variance - 1.0).abs() < 2e-3,
            "{own:?} {full:?}"
        );
        assert_eq!(own.neighbours, 8);
    }
}

/// What a class of the model costs: the noise in the middle between two classes, the ratio at the edge of one. The
/// variance of the weights in use is never below that of the best ones, and at most 1 % above.
#[test]
fn the_weights_of_a_class_are_nearly_the_best() {
    let network = network(3);
    let mut models = vec![model()];
    // (0.49 + 0.25)/2.12 = 2^(-1.52).
    models[0].site_variance = 0.49;
    models[0].transverse = 2.0 * 1.25_f64.sqrt() * 0.999;
    let block = block(&network, 1, wavy);
    let check = check(&network);
    for full in Predictor::new(&network, SPACING).predict(&models[0], &block, 0) {
        let own = check.deviation(&block, &models, full.station, 0).unwrap();
        let best = 0.5 * (full.covariance.uu + full.covariance.vv);
        let ratio = own.variance / best;
        assert!((0.9999..1.01).contains(&ratio), "{ratio}");
    }
}

/// Ten neighbours against the neighbourhoods of thirty, stations inside and at the edge alike, under the laws of the
/// books.
#[test]
fn ten_neighbours_are_enough() {
    let network = network(7);
    let block = block(&network, 1, wavy);
    for exponent in [1.0 / 3.0, 2.0 / 3.0, 1.0, 4.0 / 3.0] {
        let models = vec![StructureFunction {
            exponent: Exponent::nearest(exponent),
            ..model()
        }];
        let check = check(&network);
        let mut largest: f64 = 0.0;
        for full in Predictor::new(&network, SPACING).predict(&models[0], &block, 0) {
            let own = check.deviation(&block, &models, full.station, 0).unwrap();
            let best = 0.5 * (full.covariance.uu + full.covariance.vv);
            largest = largest.max((own.variance / best).sqrt());
        }
        assert!((0.99..1.02).contains(&largest), "{exponent}: {largest}");
    }
}

#[test]
fn a_uniform_wind_leaves_nothing_and_the_edge_has_wider_limits() {
    let network = grid(5, 0.0);
    // Uniform in space, so all but the turn of north between the stations.
    let block = block(&network, 3, |_, _| (8.0, -3.0));
    let models = vec![model(); 3];
    let check = check(&network);
    let of = |s: usize| check.deviation(&block, &models, s, 1).unwrap();
    for s in 0..25 {
        assert!(of(s).residual.speed() < 0.05, "{s} {:?}", of(s));
    }
    let mean = |stations: &[usize]| -> f64 {
        stations.iter().map(|&s| of(s).variance).sum::<f64>() / stations.len() as f64
    };
    let inside = mean(&[6, 7, 8, 11, 12, 13, 16, 17, 18]);
    let ratio = mean(&[0, 4, 20, 24]) / inside;
    assert!(ratio > 1.2, "{ratio}");
}

#[test]
fn a_single_wild_value_fails_and_only_that() {
    let network = network(5);
    let mut judge = check(&network);
    let wild = |s: usize, t: usize| {
        let (u, v) = wavy(s, t);
        if (s, t) == (12, 5) {
            (u - 9.0, v + 6.0)
        } else {
            (u + 0.01 * f64::from(u32::try_from(t).unwrap()), v)
        }
    };
    let winds = [block(&network, 9, wild)];
    let found = judge.judge(&winds, &[vec![model(); 9]], &no_changes);
    assert_eq!(found.len(), 1, "{found:?}");
    assert_eq!((found[0].deviation.station, found[0].at), (12, (0, 5)));
    assert_eq!(found[0].flag(), Flag::Fail);
    assert!((found[0].deviation.residual.u + 9.0).abs() < 1.0);
    // By its own reports, as they are told: a report after it that stays there, or none known.
    let stays = |_: usize, _: Time| Some([Some(Wind { u: 9.0, v: -6.0 }), Some(Wind::default())]);
    let found = judge.judge(&winds, &[vec![model(); 9]], &stays);
    assert_eq!(found[0].support, Support::OwnReport);
    let unknown = |_: usize, _: Time| Some([Some(Wind { u: 9.0, v: -6.0 }), None]);
    let found = judge.judge(&winds, &[vec![model(); 9]], &unknown);
    assert_eq!(
        (found[0].support, found[0].flag()),
        (Support::Unknown, Flag::Suspect)
    );
}

/// Two wild neighbours in opposite directions hide in each other's predictions; the worst goes first, then the other is
/// seen as it is.
#[test]
fn several_are_found_the_worst_first() {
    let network = network(5);
    let mut judge = check(&network);
    let wild = |s: usize, t: usize| {
        let (u, v) = wavy(s, t);
        match (s, t) {
            (12, 4) => (u + 14.0, v),
            (13, 4) => (u - 8.0, v + 2.0),
            _ => (u, v),
        }
    };
    let winds = [block(&network, 9, wild)];
    let found = judge.judge(&winds, &[vec![model(); 9]], &no_changes);
    let stations: Vec<usize> = found.iter().map(|o| o.deviation.station).collect();
    assert_eq!(stations, [12, 13]);
    for (outlier, planted) in found.iter().zip([14.0, -8.0]) {
        assert!(
            (outlier.deviation.residual.u - planted).abs() < 1.2,
            "{outlier:?}"
        );
    }
}

/// A front over the western column: each of its stations is off, and the others speak for it.
#[test]
fn a_front_is_suspect_at_most() {
    let network = network(5);
    let mut judge = check(&network);
    // For one time only, so that no own report speaks for it.
    let front = |s: usize, t: usize| {
        let (u, v) = wavy(s, t);
        if s.is_multiple_of(5) && t == 4 {
            (u - 12.0, v + 9.0)
        } else {
            (u, v)
        }
    };
    let winds = [block(&network, 9, front)];
    let found = judge.judge(&winds, &[vec![model(); 9]], &no_changes);
    assert!(found.iter().all(|o| o.flag() == Flag::Suspect), "{found:?}");
    assert!(
        found
            .iter()
            .any(|o| matches!(o.support, Support::Neighbour(_)))
    );
}

#[test]
fn missing_and_failed_neighbours_are_not_used() {
    let network = network(3);
    let mut winds = block(&network, 2, wavy);
    let models = vec![model(); 2];
    let check = check(&network);
    for s in 1..6 {
        winds.raise_flag(
            s,
            0,
            if s % 2 == 0 {
                Flag::Fail
            } else {
                Flag::Missing
            },
        );
    }
    assert_eq!(
        check.deviation(&winds, &models, 0, 0).unwrap().neighbours,
        3
    );
    assert!(check.can_judge(&winds, 0, 0) && !check.can_judge(&winds, 2, 0));
    winds.raise_flag(6, 0, Flag::Fail);
    assert_eq!(check.deviation(&winds, &models, 0, 0), None);
    assert!(!check.can_judge(&winds, 0, 0));
    assert_eq!(
        check.deviation(&winds, &models, 0, 1).unwrap().neighbours,
        8
    );
}

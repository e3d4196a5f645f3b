//! Faults that no gain describes: directions mirrored, data of two stations exchanged, spikes.

use nalgebra::Complex;

use super::gains::{Expected, Fit};
use super::record::{Record, median};

type C = Complex<f64>;

/// What is left of the variance with the reflection, relative to a turn, at which the reflection is believed.
const MIRRORED: f64 = 0.4;
/// What is left of the residuals' variance after the exchange at which it is believed.
const EXCHANGED: f64 = 0.5;
/// In a record of less than five days, in which neighbours may have much the same weather.
const EXCHANGED_IN_DAYS: f64 = 0.25;
/// Stations that are compared pairwise, the worst first, and their least misfit.
const MOST_COMPARED: usize = 60;
const LEAST_MISFIT: f64 = 1.6;
/// Fewer outliers are no pattern.
const LEAST_SPIKES: usize = 4;

/// Directions that run the wrong way round: wind = gain × conjugate of the field.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Reflection {
    /// Angle of its gain, degrees: 90 if u and v are swapped, 180 if directions are counted anticlockwise.
    pub angle: f64,
    /// Share of the variance that a turn leaves unexplained.
    pub left_by_turn: f64,
    /// Share that the reflection leaves.
    pub left_by_reflection: f64,
}

/// Tests whether a station's directions run the wrong way round. While the wind blows from one side only, that looks like
/// a turned vane.
pub(super) fn reflection(record: &Record, expected: &[Expected], s: usize) -> Option<Reflection> {
    let (mut direct, mut mirrored) = (C::default(), C::default());
    let (mut own, mut field) = (0.0, 0.0);
    for e in expected {
        let Some(wind) = record.wind(s, e.t) else {
            continue;
        };
        direct += e.weight * wind * e.field.conj();
        mirrored += e.weight * wind * e.field;
        own += e.weight * wind.norm_sqr();
        field += e.weight * e.field.norm_sqr();
    }
    let both = own * field;
    if both <= 0.0 {
        return None;
    }
    let left = |cross: C| 1.0 - cross.norm_sqr() / both;
    let found = Reflection {
        angle: mirrored.arg().to_degrees(),
        left_by_turn: left(direct),
        left_by_reflection: left(mirrored),
    };
    (found.left_by_reflection < MIRRORED * found.left_by_turn).then_some(found)
}

/// Two stations that each report the other's wind.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Exchange {
    pub(super) stations: [usize; 2],
    /// Variance of the residuals after the exchange over that before it, the larger of both.
    pub(super) left: f64,
}

/// Pairs of stations whose winds fit better when exchanged; each station once, the best pairs first.
pub(super) fn exchanges(
    record: &Record,
    fit: &Fit,
    expected: &[Vec<Expected>],
    days: bool,
) -> Vec<Exchange> {
    let limit = if days { EXCHANGED } else { EXCHANGED_IN_DAYS };
    let mut worst: Vec<usize> = (0..expected.len())
        .filter(|&s| fit.misfit[s] > LEAST_MISFIT && !expected[s].is_empty())
        .collect();
    worst.sort_by(|&a, &b| fit.misfit[b].total_cmp(&fit.misfit[a]).then(a.cmp(&b)));
    worst.truncate(MOST_COMPARED);
    // Squared distance of a station's winds from what is expected at another.
    let distance = |of: usize, at: usize| -> Option<f64> {
        let residual = |e: &Expected| Some((record.wind(of, e.t)? - e.field).norm_sqr());
        let mut squares: Vec<f64> = expected[at].iter().filter_map(residual).collect();
        median(&mut squares).filter(|&m| m > 0.0)
    };
    let mut found = Vec::new();
    for (k, &a) in worst.iter().enumerate() {
        for &b in &worst[k + 1..] {
            let ratio = |of: usize, at: usize| Some(distance(of, at)? / distance(of, of)?);
            if let Some((first, second)) = ratio(a, b).zip(ratio(b, a)) {
                let left = first.max(second);
                if left < limit {
                    found.push(Exchange {
                        stations: [a.min(b), a.max(b)],
                        left,
                    });
                }
            }
        }
    }
    found.sort_by(|a, b| a.left.total_cmp(&b.left).then(a.stations.cmp(&b.stations)));
    let mut taken = Vec::new();
    found.retain(|x| {
        let free = !x.stations.iter().any(|s| taken.contains(s));
        if free {
            taken.extend(x.stations);
        }
        free
    });
    found
}

/// Share of the winds that stand alone outside: outliers whose neighbours in time are none; 0 if there are few.
pub(super) fn spikes(fit: &Fit, record: &Record, s: usize) -> f64 {
    let n = fit.times();
    let there: Vec<bool> = (0..n)
        .filter(|&t| record.wind(s, t).is_some())
        .map(|t| fit.is_far_off(s, t))
        .collect();
    let alone = there.windows(3).filter(|w| !w[0] && w[1] && !w[2]).count();
    if alone < LEAST_SPIKES {
        return 0.0;
    }
    alone as f64 / there.len().max(1) as f64
}

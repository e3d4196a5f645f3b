//! Sectors of wind direction in which a turbine stands in the wake of another.

use crate::station::Network;
use crate::structure::LocalPlane;

/// Width of the sector that a wind turbine disturbs at a distance, degrees.
///
/// α = 1.3 · atan(2.5 D/L + 0.15) + 10, with D the rotor diameter, L the distance, and the arc tangent in degrees.
///
/// - **Assumes**: flat terrain; the sector is centred on the direction of the turbine; no wake counts beyond 20 D.
/// - **Reference**: IEC 61400-12-1:2005, annex A (assessment of obstacles at the test site; from memory).
#[must_use]
pub fn disturbed_sector(distance: f64, diameter: f64) -> f64 {
    1.3 * (2.5 * diameter / distance + 0.15).atan().to_degrees() + 10.0
}

/// For each station the sectors that turbines within `reach` of their diameters disturb, degrees, from and to clockwise,
/// joined where they overlap. `diameters` holds the rotor diameter of each station, m; 0 for one that is no turbine.
#[must_use]
pub fn wake_sectors(network: &Network, diameters: &[f64], reach: f64) -> Vec<Vec<[f64; 2]>> {
    let stations = network.stations();
    let turbines = || stations.iter().zip(diameters).filter(|t| *t.1 > 0.0);
    let of_station = |s: usize| {
        let here = stations[s].position;
        let plane = LocalPlane::at((here.latitude(), here.longitude()));
        let sectors = turbines().filter_map(|(turbine, &diameter)| {
            // A degree of latitude is 111 km; most pairs of a large network end here.
            let far = (turbine.position.latitude() - here.latitude()).abs() * 111e3;
            if far > 1.1 * reach * diameter {
                return None;
            }
            let [x, y] = plane.place(turbine.position).at;
            let distance = x.hypot(y);
            if distance < 1.0 || distance > reach * diameter {
                return None;
            }
            let half = 0.5 * disturbed_sector(distance, diameter);
            let bearing = x.atan2(y).to_degrees();
            Some([bearing - half, bearing + half])
        });
        joined(sectors.collect())
    };
    (0..stations.len()).map(of_station).collect()
}

/// Sectors without overlaps, with ends from 0 to 360.
fn joined(mut sectors: Vec<[f64; 2]>) -> Vec<[f64; 2]> {
    for sector in &mut sectors {
        let width = sector[1] - sector[0];
        sector[0] = sector[0].rem_euclid(360.0);
        sector[1] = sector[0] + width;
    }
    sectors.sort_by(|a, b| a[0].total_cmp(&b[0]));
    let mut found: Vec<[f64; 2]> = Vec::new();
    for [from, to] in sectors {
        match found.last_mut() {
            Some(last) if from <= last[1] => last[1] = last[1].max(to),
            _ => found.push([from, to]),
        }
    }
    // The last may reach over north into the first ones.
    while let [first, .., last] = &mut found[..]
        && last[1] - 360.0 >= first[0]
    {
        last[1] = last[1].max(first[1] + 360.0);
        found.remove(0);
    }
    if let [[from, to]] = found[..]
        && to - from >= 360.0
    {
        return vec![[0.0, 360.0]];
    }
    let end = |d: f64| if d > 360.0 { d - 360.0 } else { d };
    found.iter().map(|&[from, to]| [from, end(to)]).collect()
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::station::{Position, Station};

    #[test]
    fn widths_of_the_formula() {
        // Worked out by hand: atan(0.25 + 0.15) = 21.801 degrees, atan(1.25 + 0.15) = 54.462 degrees.
        assert!((disturbed_sector(10.0, 1.0) - 38.342).abs() < 1e-3);
        assert!((disturbed_sector(2.0, 1.0) - 80.801).abs() < 1e-3);
        // The nearer, the wider; never less than 1.3 · atan(0.15) + 10 = 21.09.
        assert!(disturbed_sector(1e9, 100.0) > 21.09 && disturbed_sector(1e9, 100.0) < 21.1);
    }

    #[test]
    fn a_turbine_to_the_north_disturbs_the_north() {
        let at = |lat: f64, lon: f64| Position::new(lat, lon).unwrap();
        let stations = [
            Station::new("A", at(50.0, 10.0)),
            Station::new("B", at(50.01, 10.0)),
        ];
        let network = Network::new(stations.to_vec());
        // 0.01 degrees of the meridian at 50 N are 1112.3 m (WGS 84).
        let half = 0.5 * disturbed_sector(1112.3, 100.0);
        let [a, b] = &wake_sectors(&network, &[100.0, 100.0], 20.0)[..] else {
            return;
        };
        assert!((a[0][0] - (360.0 - half)).abs() < 0.01 && (a[0][1] - half).abs() < 0.01);
        assert!((b[0][0] - (180.0 - half)).abs() < 0.01 && (b[0][1] - (180.0 + half)).abs() < 0.01);
        // Beyond the reach, or of a mast, there is none.
        let none = vec![Vec::<[f64; 2]>::new(); 2];
        assert_eq!(wake_sectors(&network, &[100.0, 100.0], 10.0), none);
        assert_eq!(wake_sectors(&network, &[0.0, 0.0], 20.0), none);
        assert_eq!(wake_sectors(&network, &[0.0, 100.0], 20.0)[1], none[1]);
    }

    #[test]
    fn overlapping_sectors_are_joined_also_over_north() {
        assert_eq!(joined(vec![[10.0, 40.0], [30.0, 50.0]]), [[10.0, 50.0]]);
        assert_eq!(
            joined(vec![[-20.0, 10.0], [5.0, 30.0], [100.0, 120.0]]),
            [[100.0, 120.0], [340.0, 30.0]]
        );
        let all = (0..8).map(|k| [f64::from(k) * 45.0, f64::from(k) * 45.0 + 60.0]);
        assert_eq!(joined(all.collect()), [[0.0, 360.0]]);
        assert_eq!(joined(Vec::new()), Vec::<[f64; 2]>::new());
    }
}

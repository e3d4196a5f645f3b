#![expect(clippy::unwrap_used, reason = "tests may panic")]

use super::*;
use crate::profile::{Air, GAS_CONSTANT, GRAVITY, w_of_omega};
use crate::units::{FromDirection, Wind};

const ZERO: Measured = Measured::exact(0.0);

fn exact(values: &[f64]) -> Vec<Measured> {
    values.iter().map(|d| Measured::exact(d * 1e-5)).collect()
}

fn all_near(found: &[f64], expected: &[f64], tolerance: f64) {
    assert_eq!(found.len(), expected.len());
    for (a, b) in found.iter().zip(expected) {
        assert!((a - b).abs() <= tolerance, "{found:?} {expected:?}");
    }
}

fn values(motion: &[Motion]) -> Vec<f64> {
    motion.iter().map(|m| m.value).collect()
}

fn five_layers() -> Column {
    let bounds: Vec<f64> = (0..6).map(|k| 1e5 - 15_000.0 * f64::from(k)).collect();
    Column::of_layers(Coordinate::Pressure, &bounds, |_| 1.0).unwrap()
}

// methods.md 4, five layers of 150 hPa: printed with these digits.
#[test]
fn obrien_five_layers() {
    let d = exact(&[1.0, 0.5, -0.5, -1.0, -1.5]);
    let found = |adjustment| five_layers().motion(&d, ZERO, ZERO, adjustment).unwrap();
    let linear = found(Adjustment::Linear);
    all_near(
        &values(&linear.motion),
        &[0.0, 0.15, 0.225, 0.15, 0.0, -0.225],
        1e-12,
    );
    all_near(
        &values(&linear.adjusted),
        &[0.0, 0.165, 0.27, 0.24, 0.15, 0.0],
        1e-12,
    );
    all_near(
        &linear.divergence,
        &[1.1e-5, 0.7e-5, -0.2e-5, -0.6e-5, -1.0e-5],
        1e-18,
    );
    let constant = found(Adjustment::Constant);
    all_near(
        &values(&constant.adjusted),
        &[0.0, 0.195, 0.315, 0.285, 0.18, 0.0],
        1e-12,
    );
    assert!(found(Adjustment::None).adjusted.is_empty());
}

// The same formula written out: ω′_k = ω_k − k(k+1)/(K(K+1)) (ω_K − ω_T), O'Brien 1970, with ω_0 and ω_T not 0.
#[test]
fn obrien_to_other_boundaries() {
    let d = exact(&[0.3, -0.8, 1.4, 0.2, -0.6]);
    let (lower, upper) = (Measured::exact(0.07), Measured::exact(-0.02));
    let found = five_layers()
        .motion(&d, lower, upper, Adjustment::Linear)
        .unwrap();
    let raw = values(&found.motion);
    let expected: Vec<f64> = (0..6)
        .map(|k| {
            let share = f64::from(k * (k + 1)) / 30.0;
            raw[usize::try_from(k).unwrap()] - share * (raw[5] - upper.value)
        })
        .collect();
    all_near(&values(&found.adjusted), &expected, 1e-14);
    // The adjusted divergence alone makes the adjusted motion.
    let again: Vec<Measured> = found
        .divergence
        .iter()
        .map(|&d| Measured::exact(d))
        .collect();
    let again = five_layers()
        .motion(&again, lower, ZERO, Adjustment::None)
        .unwrap();
    all_near(&values(&again.motion), &values(&found.adjusted), 1e-14);
}

// methods.md 11, case 7 (Holton, chapter 3): ω with its printed digits; w with R = 287 and g = 9.81 J/(kg K), m/s².
#[test]
fn holton_table() {
    let levels = [1e5, 85e3, 70e3, 50e3, 30e3, 10e3];
    let column = Column::of_levels(Coordinate::Pressure, &levels, |_| 1.0).unwrap();
    let d = exact(&[0.9, 0.6, 0.3, 0.0, -0.6, -1.0]);
    let found = column.motion(&d, ZERO, ZERO, Adjustment::None).unwrap();
    let omega = values(&found.motion);
    all_near(&omega, &[0.0, 0.1125, 0.18, 0.21, 0.15, -0.01], 1e-12);
    let constants = (287.0 / 9.81) / (GAS_CONSTANT / GRAVITY);
    let w: Vec<f64> = omega
        .iter()
        .zip(levels)
        .map(|(&omega, pressure)| {
            let air = Air {
                pressure,
                temperature: 260.0,
                density: pressure / (GAS_CONSTANT * 260.0),
            };
            100.0 * constants * w_of_omega(omega, &air)
        })
        .collect();
    all_near(&w, &[0.0, -1.007, -1.956, -3.195, -3.803, 0.761], 5e-4);
}

// methods.md 11, case 8 (printed 11 cm/s, recomputed 11.04): from 5460 m up to 9430 m, w = 0 on top; the constant
// density is that of the exercise's layer of constant D.
#[test]
fn layer_below_a_lid() {
    let column = Column::of_layers(Coordinate::Height, &[5_460.0, 9_430.0], |_| 1.0).unwrap();
    let d = [Measured::exact(2.78e-5)];
    // Upward from an unknown bottom: what it must be for w = 0 on top.
    let rise = column
        .motion(&d, ZERO, ZERO, Adjustment::None)
        .unwrap()
        .motion[1]
        .value;
    assert!((-100.0 * rise - 11.04).abs() < 5e-3, "{rise}");
}

// methods.md 11, case 15: +20 % in 10 min between 300 and 100 hPa, ω(100 hPa) = 0: −6.667 Pa/s at 300 hPa.
#[test]
fn anvil() {
    let column = Column::of_layers(Coordinate::Pressure, &[30e3, 10e3], |_| 1.0).unwrap();
    let d = [Measured::exact(0.2 / 600.0)];
    let change = column
        .motion(&d, ZERO, ZERO, Adjustment::None)
        .unwrap()
        .motion[1]
        .value;
    assert!((-change + 6.667).abs() < 5e-4, "{change}");
}

// methods.md 11, case 6 (Holton, chapter 3): stations 50 km east, north, west and south; D = 2.0e-5, w(500 m) = −1.0 cm/s;
// rss of 10 % speed errors 1.31e-5. The divergence in the plane is (u_E − u_W + v_N − v_S)/(100 km).
#[test]
fn holton_square() {
    let wind = |d, v| Wind::blowing_from(v, FromDirection::new(d).unwrap());
    let [east, north, west, south] = [
        wind(90.0, 10.0),
        wind(120.0, 4.0),
        wind(90.0, 8.0),
        wind(60.0, 4.0),
    ];
    let d = (east.u - west.u + north.v - south.v) / 100e3;
    assert!((d - 2.0e-5).abs() < 1e-12, "{d}");
    let se = [east.u, west.u, north.v, south.v].map(|c| (0.1 * c / 100e3).powi(2));
    let se = se.iter().sum::<f64>().sqrt();
    let w = motion_at_height(Measured { value: d, se }, 500.0);
    assert!((w.value + 0.010).abs() < 1e-9 && (w.se / 500.0 - 1.31e-5).abs() < 5e-8);
}

// Closed form: ρ = ρ0 exp(−z/H) and constant D give ρ w = −D ρ0 H (1 − exp(−z/H)).
#[test]
fn anelastic_air() {
    let scale = 8_000.0;
    let density = |z: f64| 1.2 * (-z / scale).exp();
    let levels: Vec<f64> = (0..=100).map(|k| 100.0 * f64::from(k)).collect();
    let column = Column::of_levels(Coordinate::Height, &levels, density).unwrap();
    let d = vec![Measured::exact(1e-5); 101];
    let found = column.motion(&d, ZERO, ZERO, Adjustment::None).unwrap();
    let top = found.motion[100].value;
    let expected = -1e-5 * scale * ((10_000.0_f64 / scale).exp() - 1.0);
    // The trapezoid is off by (Δz/H)²/12.
    assert!((top / expected - 1.0).abs() < 2e-5, "{top} {expected}");
}

#[test]
fn errors_go_through() {
    let d = vec![
        Measured {
            value: 0.0,
            se: 1e-5
        };
        5
    ];
    let lower = Measured {
        value: 0.0,
        se: 0.05,
    };
    let found = five_layers()
        .motion(&d, lower, ZERO, Adjustment::Linear)
        .unwrap();
    // Each layer adds 0.15 Pa/s: √k of it where they are independent, k of it where they are not.
    for (k, m) in found.motion.iter().enumerate() {
        let k = k as f64;
        let boundary = 0.05_f64.powi(2);
        assert!((m.se - (k * 0.15 * 0.15 + boundary).sqrt()).abs() < 1e-12);
        assert!((m.se_correlated - ((k * 0.15).powi(2) + boundary).sqrt()).abs() < 1e-12);
    }
    assert!(found.adjusted[5].se.abs() < 1e-12 && found.adjusted[5].value.abs() < 1e-12);
    assert!((found.adjusted[0].se - 0.05).abs() < 1e-12);
    // An error that is the same everywhere is all taken out by a constant correction.
    let same = five_layers()
        .motion(&d, ZERO, ZERO, Adjustment::Constant)
        .unwrap();
    assert!(same.adjusted.iter().all(|m| m.se_correlated < 1e-12));
    assert!(same.adjusted[2].se > 0.1);
}

#[test]
fn sloping_ground() {
    let w = motion_along_slope(Wind { u: 10.0, v: -5.0 }, [0.25, 0.0, 0.25], [0.01, 0.004]);
    assert!((w.value - 0.08).abs() < 1e-12);
    assert!((w.se - 0.5 * 0.01_f64.hypot(0.004)).abs() < 1e-12);
}

#[test]
fn no_column() {
    let pressure = |levels: &[f64]| Column::of_levels(Coordinate::Pressure, levels, |_| 1.0);
    assert!(pressure(&[1e5]).is_none());
    assert!(pressure(&[5e4, 1e5]).is_none());
    assert!(pressure(&[1e5, f64::NAN]).is_none());
    assert!(pressure(&[1e5, -1.0]).is_none());
    assert!(Column::of_levels(Coordinate::Height, &[0.0, 9.0], |_| 0.0).is_none());
    assert!(
        five_layers()
            .motion(&[ZERO], ZERO, ZERO, Adjustment::Linear)
            .is_none()
    );
}

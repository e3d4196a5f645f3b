//! The standard atmosphere: temperature and density where reports of the wind say nothing of them.

/// Gas constant of dry air, J/(kg K) (U.S. Standard Atmosphere 1976, from memory).
pub const GAS_CONSTANT: f64 = 287.052_87;
/// Standard acceleration of gravity, m/s² (CGPM 1901).
pub const GRAVITY: f64 = 9.806_65;

/// Base height, m (geopotential), base temperature, K, and lapse, K/m, of its layers (ISO 2533:1975 and U.S. Standard
/// Atmosphere 1976, from memory).
const LAYERS: [(f64, f64, f64); 7] = [
    (0.0, 288.15, -0.0065),
    (11_000.0, 216.65, 0.0),
    (20_000.0, 216.65, 0.001),
    (32_000.0, 228.65, 0.0028),
    (47_000.0, 270.65, 0.0),
    (51_000.0, 270.65, -0.0028),
    (71_000.0, 214.65, -0.002),
];
/// Pressure at height 0, Pa.
const SURFACE_PRESSURE: f64 = 101_325.0;

/// Pressure, temperature and density of one height or pressure.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Air {
    /// Pa
    pub pressure: f64,
    /// K
    pub temperature: f64,
    /// kg/m³
    pub density: f64,
}

impl Air {
    fn new(pressure: f64, temperature: f64) -> Self {
        Self {
            pressure,
            temperature,
            density: pressure / (GAS_CONSTANT * temperature),
        }
    }
}

/// Pressure at `rise` metres above the base of a layer, relative to that at its base.
fn ratio(temperature: f64, lapse: f64, rise: f64) -> f64 {
    let here = temperature + lapse * rise;
    if lapse.abs() > 0.0 {
        (here / temperature).powf(-GRAVITY / (GAS_CONSTANT * lapse))
    } else {
        (-GRAVITY * rise / (GAS_CONSTANT * temperature)).exp()
    }
}

/// The standard air at a height above mean sea level, m; the difference of geopotential and geometric height (0.16 % at
/// 10 km) is left out. Below 0 and above 85 km the nearest layer goes on.
#[must_use]
pub fn air_at_height(height: f64) -> Air {
    let mut base_pressure = SURFACE_PRESSURE;
    for (k, &(base, temperature, lapse)) in LAYERS.iter().enumerate() {
        let top = LAYERS.get(k + 1).map_or(f64::INFINITY, |next| next.0);
        if height < top || k + 1 == LAYERS.len() {
            // Above all layers it must not become colder than nothing.
            let here = (temperature + lapse * (height - base)).max(1.0);
            let rise = if lapse.abs() > 0.0 {
                (here - temperature) / lapse
            } else {
                height - base
            };
            return Air::new(base_pressure * ratio(temperature, lapse, rise), here);
        }
        base_pressure *= ratio(temperature, lapse, top - base);
    }
    Air::new(base_pressure, 288.15)
}

/// The standard air at a pressure above 0, Pa.
#[must_use]
pub fn air_at_pressure(pressure: f64) -> Air {
    let mut base_pressure = SURFACE_PRESSURE;
    for (k, &(base, temperature, lapse)) in LAYERS.iter().enumerate() {
        let next = LAYERS
            .get(k + 1)
            .map(|next| base_pressure * ratio(temperature, lapse, next.0 - base));
        match next {
            Some(next) if pressure <= next => base_pressure = next,
            _ => {
                let share = pressure / base_pressure;
                let here = temperature * share.powf(-GAS_CONSTANT * lapse / GRAVITY);
                return Air::new(pressure, here);
            }
        }
    }
    Air::new(pressure, 288.15)
}

/// Vertical wind, m/s, of a motion in pressure, Pa/s: w ≈ −ω R T/(g p).
///
/// - **Assumes**: hydrostatic air; what the pressure at a fixed height changes in time, and along the wind, is left out.
/// - **Reference**: Holton, An introduction to dynamic meteorology, 4th ed., eq. 3.37 (from memory); `methods.md` 4.
#[must_use]
pub fn w_of_omega(omega: f64, air: &Air) -> f64 {
    -omega / (air.density * GRAVITY)
}

#[cfg(test)]
mod tests {
    use super::*;

    // U.S. Standard Atmosphere 1976, tables (from memory): 1.2250 kg/m³ at 0; 22,632 Pa and 0.36392 at 11 km; 5,474.9 Pa at
    // 20 km; 868.02 Pa at 32 km.
    #[test]
    fn tabulated_air() {
        let near = |a: f64, b: f64| (a / b - 1.0).abs() < 2e-4;
        assert!(near(air_at_height(0.0).density, 1.225));
        let tropopause = air_at_height(11_000.0);
        assert!(near(tropopause.pressure, 22_632.1) && near(tropopause.density, 0.363_92));
        assert!(near(air_at_height(20_000.0).pressure, 5_474.9));
        assert!(near(air_at_height(32_000.0).pressure, 868.02));
    }

    #[test]
    fn height_and_pressure_are_one() {
        for height in [
            -300.0, 0.0, 5_000.0, 10_999.0, 11_001.0, 25_000.0, 40_000.0, 60_000.0, 80_000.0,
        ] {
            let a = air_at_height(height);
            let b = air_at_pressure(a.pressure);
            assert!((a.temperature - b.temperature).abs() < 1e-6, "{height}");
        }
        assert!(
            air_at_height(1e9).density.is_finite() && air_at_pressure(1e-300).density.is_finite()
        );
    }
}

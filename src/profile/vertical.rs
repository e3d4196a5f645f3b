//! Vertical motion from a profile of divergence.

use super::Coordinate;

/// A value with its standard error.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Measured {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
}

impl Measured {
    /// A value without error.
    #[must_use]
    pub const fn exact(value: f64) -> Self {
        Self { value, se: 0.0 }
    }
}

/// A vertical motion with its standard error for both ends of what can be assumed of the divergence errors.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Motion {
    /// ω in Pa/s or w in m/s.
    pub value: f64,
    /// Standard error if the errors of the divergence at different levels are independent.
    pub se: f64,
    /// Standard error if they are the same everywhere but for their size (correlation 1). Of an adjusted motion it can be
    /// the smaller one, as the adjustment takes such errors out.
    pub se_correlated: f64,
}

/// How the divergence is corrected so that the motion meets the upper boundary.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Adjustment {
    /// A correction of the divergence that grows linearly from the bottom, as its errors do (O'Brien 1970).
    #[default]
    Linear,
    /// The same correction at all levels.
    Constant,
    /// None.
    None,
}

/// A column of air in layers, from the bottom up: how the divergences measured in it make the vertical motion.
#[derive(Debug, Clone, PartialEq)]
pub struct Column {
    /// Bottom of the lowest layer, and top of each: Pa or m.
    bounds: Vec<f64>,
    /// What the divergence of each layer is multiplied with: ω_k = ω_(k−1) + D Δp, ρw_k = ρw_(k−1) − ρD Δz.
    steps: Vec<f64>,
    /// Weights of the measured divergences in that of each layer, times the density there.
    layers: Vec<Vec<(usize, f64)>>,
    /// Density at each bound over height; 1 over pressure.
    density: Vec<f64>,
    /// How many divergences are measured.
    measured: usize,
}

/// The motion in a column.
#[derive(Debug, Clone, PartialEq)]
pub struct VerticalMotion {
    /// Pa or m, from the bottom up.
    pub bounds: Vec<f64>,
    /// At each bound: ω, Pa/s, positive downward, or w, m/s, positive upward.
    pub motion: Vec<Motion>,
    /// The same adjusted to the upper boundary; empty without adjustment.
    pub adjusted: Vec<Motion>,
    /// Adjusted divergence of each layer, 1/s (over height weighted with the density); empty without adjustment.
    pub divergence: Vec<f64>,
}

impl Column {
    /// A column with divergences measured on levels, from the bottom up; between levels it is linear (trapezoidal rule).
    /// `density` gives that of the air at a height, kg/m³: a constant for the shallow form; over pressure it is not asked.
    /// `None` unless there are two levels, all finite and in order (pressures above 0).
    #[must_use]
    pub fn of_levels(
        coordinate: Coordinate,
        levels: &[f64],
        density: impl Fn(f64) -> f64,
    ) -> Option<Self> {
        let density = densities(coordinate, levels, density)?;
        let layers = (1..levels.len())
            .map(|k| vec![(k - 1, 0.5 * density[k - 1]), (k, 0.5 * density[k])])
            .collect();
        Some(Self {
            bounds: levels.to_vec(),
            steps: steps(levels),
            layers,
            density,
            measured: levels.len(),
        })
    }

    /// A column with the mean divergences of layers, from the bottom up; `bounds` has one more.
    /// `None` as for [`Self::of_levels`].
    #[must_use]
    pub fn of_layers(
        coordinate: Coordinate,
        bounds: &[f64],
        density: impl Fn(f64) -> f64,
    ) -> Option<Self> {
        let at_bounds = densities(coordinate, bounds, &density)?;
        let layers = bounds.windows(2).enumerate().map(|(k, pair)| {
            let weight = match coordinate {
                Coordinate::Pressure => 1.0,
                Coordinate::Height => density(0.5 * (pair[0] + pair[1])),
            };
            vec![(k, weight)]
        });
        Some(Self {
            layers: layers.collect(),
            bounds: bounds.to_vec(),
            steps: steps(bounds),
            density: at_bounds,
            measured: bounds.len() - 1,
        })
    }

    /// How many divergences it wants.
    #[must_use]
    pub fn measured(&self) -> usize {
        self.measured
    }

    /// The vertical motion at all bounds, by continuity.
    ///
    /// - **Formula**: pressure: ω_k = ω_(k−1) + D Δp with Δp > 0 the pressure across the layer; height:
    ///   ρ_k w_k = ρ_(k−1) w_(k−1) − (ρD) Δz (anelastic; shallow where the density is constant).
    /// - **Adjustment** to the motion `upper` at the top: D′ = D − g_k (ω_K − ω_T)/Σ g Δp. Linear: g_k grows with the
    ///   distance of the layer's top from the bottom, which for equal layers is
    ///   ω′_k = ω_k − k(k+1)/(K(K+1)) (ω_K − ω_T); constant: g_k = 1.
    /// - **Sign**: ω < 0 and w > 0 for rising air; divergence positive for air flowing out.
    /// - **Error**: both linear in the divergences, so the errors go through with the same weights, once for independent and
    ///   once for fully correlated errors of the levels; those of the boundaries are independent of them.
    /// - **Reference**: O'Brien 1970, J. Appl. Meteor. 9, 197; `methods.md` 4 (Pedder 1981, MWR 109, 1813, on the constant
    ///   correction).
    ///
    /// `None` unless there is one divergence for each level or layer.
    #[must_use]
    pub fn motion(
        &self,
        divergence: &[Measured],
        lower: Measured,
        upper: Measured,
        adjustment: Adjustment,
    ) -> Option<VerticalMotion> {
        if divergence.len() != self.measured {
            return None;
        }
        let lower_density = *self.density.first()?;
        // Weights of the divergences in the motion times the density, bound by bound.
        let mut weights = vec![vec![0.0; self.measured]];
        for (step, layer) in self.steps.iter().zip(&self.layers) {
            let mut next = weights.last()?.clone();
            for &(level, weight) in layer {
                next[level] += step * weight;
            }
            weights.push(next);
        }
        let sum = |row: &[f64], lower_share: f64, upper_share: f64, density: f64| {
            let terms = || row.iter().zip(divergence);
            let value: f64 = terms().map(|(w, d)| w * d.value).sum();
            let own: f64 = terms().map(|(w, d)| (w * d.se).powi(2)).sum();
            let shared: f64 = terms().map(|(w, d)| w * d.se).sum();
            let boundary = (lower_share * lower.se).powi(2) + (upper_share * upper.se).powi(2);
            let value = value + lower_share * lower.value + upper_share * upper.value;
            Motion {
                value: value / density,
                se: (own + boundary).sqrt() / density,
                se_correlated: (shared * shared + boundary).sqrt() / density,
            }
        };
        let bounds = weights.iter().zip(&self.density);
        let motion = bounds
            .map(|(row, &density)| sum(row, lower_density, 0.0, density))
            .collect();
        let (mut adjusted, mut corrected) = (Vec::new(), Vec::new());
        if let Some(growth) = self.growth(adjustment) {
            let (top, top_density) = (weights.last()?, *self.density.last()?);
            let parts = growth.iter().zip(&self.steps);
            let all: f64 = parts.map(|(g, step)| g * step.abs()).sum();
            let mut share = 0.0;
            for (k, (row, &density)) in weights.iter().zip(&self.density).enumerate() {
                if let Some(below) = k.checked_sub(1) {
                    share += growth[below] * self.steps[below].abs() / all;
                }
                // The top is met exactly, whatever rounding says.
                let share = if k == self.steps.len() { 1.0 } else { share };
                let row: Vec<f64> = row.iter().zip(top).map(|(w, t)| w - share * t).collect();
                let lower_share = lower_density * (1.0 - share);
                adjusted.push(sum(&row, lower_share, share * top_density, density));
            }
            let missed = sum(top, lower_density, -top_density, 1.0).value;
            for ((layer, step), g) in self.layers.iter().zip(&self.steps).zip(&growth) {
                let density: f64 = layer.iter().map(|(_, weight)| weight).sum();
                let terms = layer.iter().map(|&(level, w)| w * divergence[level].value);
                let sum: f64 = terms.sum();
                corrected.push((sum - step.signum() * g * missed / all) / density);
            }
        }
        Some(VerticalMotion {
            bounds: self.bounds.clone(),
            motion,
            adjusted,
            divergence: corrected,
        })
    }

    /// How the correction of the divergence grows from layer to layer.
    fn growth(&self, adjustment: Adjustment) -> Option<Vec<f64>> {
        let bottom = *self.bounds.first()?;
        match adjustment {
            Adjustment::Linear => {
                let tops = self.bounds.iter().skip(1);
                Some(tops.map(|top| (top - bottom).abs()).collect())
            }
            Adjustment::Constant => Some(vec![1.0; self.steps.len()]),
            Adjustment::None => None,
        }
    }
}

/// The density at each bound; `None` if these are not in order.
fn densities(
    coordinate: Coordinate,
    bounds: &[f64],
    density: impl Fn(f64) -> f64,
) -> Option<Vec<f64>> {
    let in_order = |pair: &[f64]| coordinate.is_above(pair[1], pair[0]);
    let possible = |b: &f64| b.is_finite() && (coordinate == Coordinate::Height || *b > 0.0);
    let ordered = bounds.len() >= 2 && bounds.windows(2).all(in_order);
    if !ordered || !bounds.iter().all(possible) {
        return None;
    }
    let at = |&bound: &f64| match coordinate {
        Coordinate::Pressure => 1.0,
        Coordinate::Height => density(bound),
    };
    let found: Vec<f64> = bounds.iter().map(at).collect();
    found
        .iter()
        .all(|d| d.is_finite() && *d > 0.0)
        .then_some(found)
}

/// Bottom less top: Δp above 0, and −Δz.
fn steps(bounds: &[f64]) -> Vec<f64> {
    bounds.windows(2).map(|pair| pair[0] - pair[1]).collect()
}

/// Vertical wind at a height above the ground, m/s, from the divergence at the ground alone: w = −D h.
///
/// - **Assumes**: the divergence is the same from flat ground to that height: state the height with the number.
/// - **Reference**: `methods.md` 4.
#[must_use]
pub fn motion_at_height(divergence: Measured, height: f64) -> Measured {
    Measured {
        // No motion has no sign.
        value: 0.0 - divergence.value * height,
        se: divergence.se * height,
    }
}

/// Vertical wind of air that follows sloping ground, m/s: w = u ∂z/∂x + v ∂z/∂y, with `variances` of u, their covariance,
/// and of v.
///
/// - **Reference**: `methods.md` 4.
#[must_use]
pub fn motion_along_slope(
    wind: crate::units::Wind,
    [uu, uv, vv]: [f64; 3],
    [east, north]: [f64; 2],
) -> Measured {
    let variance = east * east * uu + 2.0 * east * north * uv + north * north * vv;
    Measured {
        value: wind.u * east + wind.v * north,
        se: variance.max(0.0).sqrt(),
    }
}

#[cfg(test)]
#[path = "vertical_tests.rs"]
mod tests;

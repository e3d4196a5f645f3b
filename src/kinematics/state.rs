//! What is known of the wind in a polygon at one time: six numbers and their covariance.

use super::LocalWind;
use crate::integral::MomentCovariance;

/// Mean wind (u, v), vorticity, divergence, stretching and shearing, in this order, with the covariance of their errors.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct State {
    /// m/s, then 1/s.
    pub values: [f64; 6],
    /// Their products.
    pub covariance: [[f64; 6]; 6],
}

impl State {
    /// From mean wind and gradient, and their covariance by pairs of forms ([`crate::integral::PAIRS`]).
    #[must_use]
    pub fn new(wind: &LocalWind, of_forms: &MomentCovariance) -> Self {
        let values = [
            wind.mean.u,
            wind.mean.v,
            wind.vorticity(),
            wind.divergence(),
            wind.stretching(),
            wind.shearing(),
        ];
        Self {
            values,
            covariance: covariance(of_forms),
        }
    }

    /// Standard error of a quantity with this gradient in the six numbers, to first order.
    #[must_use]
    pub fn error_of(&self, gradient: [f64; 6]) -> f64 {
        let mut variance = 0.0;
        for (row, a) in self.covariance.iter().zip(gradient) {
            let along: f64 = row.iter().zip(gradient).map(|(c, b)| c * b).sum();
            variance += a * along;
        }
        // Rounding may leave a variance of nothing just below 0.
        variance.max(0.0).sqrt()
    }
}

/// Covariance of the six numbers from those of the forms: ζ = v_x − u_y, δ = u_x + v_y, stretching u_x − v_y, shearing
/// v_x + u_y.
fn covariance(of_forms: &MomentCovariance) -> [[f64; 6]; 6] {
    let &[
        [m_uu, m_uv, m_vv],
        [mx_uu, mx_uv, mx_vv],
        [my_uu, my_uv, my_vv],
        [xx_uu, xx_uv, xx_vv],
        [xy_uu, xy_uv, xy_vv],
        [yy_uu, yy_uv, yy_vv],
    ] = of_forms;
    let u = [mx_uv - my_uu, mx_uu + my_uv, mx_uu - my_uv, mx_uv + my_uu];
    let v = [mx_vv - my_uv, mx_uv + my_vv, mx_uv - my_vv, mx_vv + my_uv];
    let z = xx_vv - 2.0 * xy_uv + yy_uu;
    let d = xx_uu + 2.0 * xy_uv + yy_vv;
    let st = xx_uu - 2.0 * xy_uv + yy_vv;
    let sh = xx_vv + 2.0 * xy_uv + yy_uu;
    let z_d = xx_uv + xy_vv - xy_uu - yy_uv;
    let z_st = xx_uv - xy_vv - xy_uu + yy_uv;
    let z_sh = xx_vv - yy_uu;
    let d_st = xx_uu - yy_vv;
    let d_sh = xx_uv + xy_uu + xy_vv + yy_uv;
    let st_sh = xx_uv + xy_uu - xy_vv - yy_uv;
    [
        [m_uu, m_uv, u[0], u[1], u[2], u[3]],
        [m_uv, m_vv, v[0], v[1], v[2], v[3]],
        [u[0], v[0], z, z_d, z_st, z_sh],
        [u[1], v[1], z_d, d, d_st, d_sh],
        [u[2], v[2], z_st, d_st, st, st_sh],
        [u[3], v[3], z_sh, d_sh, st_sh, sh],
    ]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::Wind;

    /// Against the plain product J K Jᵀ of the six forms (u, v, u_x, v_x, u_y, v_y).
    #[test]
    fn covariance_is_that_of_the_forms() {
        let mut number = 0.0;
        let of_forms: MomentCovariance = std::array::from_fn(|_| {
            std::array::from_fn(|_| {
                number += 1.0;
                f64::sin(number)
            })
        });
        let place = |a: usize, b: usize| {
            let pair = (a.min(b), a.max(b));
            crate::integral::PAIRS.iter().position(|&p| p == pair)
        };
        let full = |i: usize, j: usize| {
            place(i / 2, j / 2).map_or(f64::NAN, |pair| of_forms[pair][i % 2 + j % 2])
        };
        let rows: [[f64; 6]; 6] = [
            [1.0, 0.0, 0.0, 0.0, 0.0, 0.0],
            [0.0, 1.0, 0.0, 0.0, 0.0, 0.0],
            [0.0, 0.0, 0.0, 1.0, -1.0, 0.0],
            [0.0, 0.0, 1.0, 0.0, 0.0, 1.0],
            [0.0, 0.0, 1.0, 0.0, 0.0, -1.0],
            [0.0, 0.0, 0.0, 1.0, 1.0, 0.0],
        ];
        let wind = LocalWind {
            mean: Wind { u: 1.0, v: 2.0 },
            gradient: [1.0, 2.0, 3.0, 5.0],
        };
        let state = State::new(&wind, &of_forms);
        for (found, expected) in state.values.iter().zip([1.0, 2.0, 1.0, 6.0, -4.0, 5.0]) {
            assert!((found - expected).abs() < 1e-15);
        }
        for (a, row) in rows.iter().enumerate() {
            for (b, other) in rows.iter().enumerate() {
                let mut sum = 0.0;
                for (i, x) in row.iter().enumerate() {
                    for (j, y) in other.iter().enumerate() {
                        sum += x * full(i, j) * y;
                    }
                }
                assert!((state.covariance[a][b] - sum).abs() < 1e-14, "{a} {b}");
            }
        }
    }
}

//! Colours of values around zero.

/// From the most negative to the most positive value: blue, nearly white, orange. Blue and orange differ for all common
/// kinds of colour blindness, and either end is darker than the middle, so that it shows in print.
pub(crate) const STOPS: [[u8; 3]; 7] = [
    [13, 58, 102],
    [46, 117, 173],
    [142, 189, 218],
    [243, 241, 235],
    [242, 184, 120],
    [201, 108, 34],
    [112, 48, 8],
];
/// The same on a dark ground: the middle is dark, the ends are light.
pub(crate) const DARK_STOPS: [[u8; 3]; 7] = [
    [158, 214, 255],
    [72, 150, 208],
    [42, 88, 128],
    [38, 43, 50],
    [120, 74, 36],
    [206, 124, 54],
    [255, 205, 148],
];
/// Polygons without a value.
pub(crate) const NO_VALUE: &str = "#c9cdd2";

/// A scale centred on zero.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Scale {
    /// The value of the last colour; larger ones have it too.
    pub(crate) limit: f64,
}

impl Scale {
    /// The scale for values: its limit is 1, 2, 3, 5 or 8 times a power of ten, and at least the size that all but one in
    /// fifty have.
    pub(crate) fn of(values: impl Iterator<Item = f64>) -> Self {
        let mut sizes: Vec<f64> = values.map(f64::abs).filter(|v| v.is_finite()).collect();
        sizes.sort_unstable_by(f64::total_cmp);
        let size = sizes.get(sizes.len().saturating_sub(1) * 49 / 50);
        let size = size.copied().filter(|&s| s > 0.0).unwrap_or(1e-5);
        let ten = 10f64.powf(size.log10().floor());
        let steps = [1.0, 2.0, 3.0, 5.0, 8.0, 10.0];
        let step = steps.into_iter().find(|s| s * ten >= size * 0.999_999);
        Self {
            limit: step.unwrap_or(10.0) * ten,
        }
    }

    /// The colour of a value, as `#rrggbb`.
    pub(crate) fn colour(self, value: f64) -> String {
        let at = (value / self.limit).clamp(-1.0, 1.0) * 3.0 + 3.0;
        let low = at.floor().min(5.0);
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "0 to 5"
        )]
        let k = if at.is_nan() { 3 } else { low as usize };
        let part = if at.is_nan() { 0.0 } else { at - low };
        let mix = |c: usize| {
            let (a, b) = (f64::from(STOPS[k][c]), f64::from(STOPS[k + 1][c]));
            #[expect(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "between two bytes"
            )]
            let byte = (a + part * (b - a)).round() as u8;
            byte
        };
        format!("#{:02x}{:02x}{:02x}", mix(0), mix(1), mix(2))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn zero_is_the_middle_and_ends_are_clamped() {
        let scale = Scale { limit: 5e-4 };
        assert_eq!(scale.colour(0.0), "#f3f1eb");
        assert_eq!(scale.colour(-1.0), "#0d3a66");
        assert_eq!(scale.colour(9.0), "#703008");
        assert_eq!(scale.colour(f64::NAN), "#f3f1eb");
    }

    #[test]
    fn limits_are_round_numbers_above_nearly_all_values() {
        let scale = |values: &[f64]| Scale::of(values.iter().copied()).limit;
        assert!((scale(&[1e-5, -4.2e-4, 3e-4]) - 3e-4).abs() < 1e-12);
        assert!((scale(&[1e-5; 3]) - 1e-5).abs() < 1e-15);
        assert!((scale(&[]) - 1e-5).abs() < 1e-15);
        let mut many = vec![1.9e-4; 100];
        many.push(1.0);
        assert!((scale(&many) - 2e-4).abs() < 1e-12);
    }
}

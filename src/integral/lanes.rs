//! Sums and extremes of columns in eight lanes, so that the steps need not wait for each other and vectorise. The order
//! of the additions is fixed: the same values give the same bytes on every processor.

const LANES: usize = 8;

/// Sum of a term of each value.
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
pub(super) fn sum(values: &[f64], term: impl Fn(f64) -> f64) -> f64 {
    let mut lanes = [0.0; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    for chunk in chunks {
        for (lane, &value) in lanes.iter_mut().zip(chunk) {
            *lane += term(value);
        }
    }
    for (lane, &value) in lanes.iter_mut().zip(rest) {
        *lane += term(value);
    }
    let [a, b, c, d, e, f, g, h] = lanes;
    ((a + e) + (c + g)) + ((b + f) + (d + h))
}

/// The largest value times `sign`, and where it stands first; `None` of nothing.
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
pub(super) fn strongest(values: &[f64], sign: f64) -> Option<(f64, usize)> {
    let mut lanes = [f64::NEG_INFINITY; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    let better = |lane: f64, value: f64| if value > lane { value } else { lane };
    for chunk in chunks {
        for (lane, &value) in lanes.iter_mut().zip(chunk) {
            *lane = better(*lane, value * sign);
        }
    }
    for (lane, &value) in lanes.iter_mut().zip(rest) {
        *lane = better(*lane, value * sign);
    }
    let best = lanes.into_iter().fold(f64::NEG_INFINITY, better);
    #[expect(clippy::float_cmp, reason = "the very value is looked for")]
    let place = values.iter().position(|&value| value * sign == best)?;
    Some((best, place))
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn lanes_give_what_a_plain_loop_gives() {
        for n in 0..40_u32 {
            let values: Vec<f64> = (0..n).map(|k| f64::from(k * 7 % 11) - 3.0).collect();
            let squares: f64 = values.iter().map(|v| v * v).sum();
            assert!((sum(&values, |v| v * v) - squares).abs() < 1e-12);
            for sign in [1.0, -1.0] {
                let best = values.iter().map(|v| v * sign).fold(f64::MIN, f64::max);
                match strongest(&values, sign) {
                    None => assert!(values.is_empty()),
                    Some((found, place)) => {
                        assert!((found - best).abs() < 1e-15);
                        let first = values.iter().position(|v| (v * sign - best).abs() < 1e-15);
                        assert_eq!(place, first.unwrap());
                    }
                }
            }
        }
    }
}

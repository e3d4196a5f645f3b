//! Sums of large numbers that nearly cancel.

/// Running sum that carries the rounding error of each addition along.
///
/// - **Accuracy**: the error of the total does not grow with the number of terms (about 2 ulp of the sum, plus n·ε² of
///   the sum of magnitudes).
/// - **Reference**: Neumaier, A., 1974, Z. Angew. Math. Mech. 54, 39-51, improved Kahan-Babuska summation.
#[derive(Debug, Clone, Copy, Default)]
pub struct CompensatedSum {
    sum: f64,
    lost: f64,
}

impl CompensatedSum {
    /// Adds one term.
    pub fn add(&mut self, term: f64) {
        let next = self.sum + term;
        self.lost += if self.sum.abs() >= term.abs() {
            (self.sum - next) + term
        } else {
            (term - next) + self.sum
        };
        self.sum = next;
    }

    /// The total so far.
    #[must_use]
    pub fn total(self) -> f64 {
        self.sum + self.lost
    }
}

impl FromIterator<f64> for CompensatedSum {
    fn from_iter<I: IntoIterator<Item = f64>>(terms: I) -> Self {
        let mut sum = Self::default();
        for term in terms {
            sum.add(term);
        }
        sum
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    #[expect(clippy::float_cmp, reason = "the compensated sum is exact here")]
    fn keeps_what_plain_addition_loses() {
        let sum: CompensatedSum = [1.0, 1e100, 1.0, -1e100].into_iter().collect();
        assert_eq!(sum.total(), 2.0);
    }
}

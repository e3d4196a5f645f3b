//! The factor of a stiffness matrix, and its solutions.

use nalgebra_sparse::CscMatrix;
use nalgebra_sparse::factorization::CscCholesky;

use super::order::reverse_cuthill_mckee;

/// Cholesky factor L Lᵀ of a symmetric positive definite matrix, in an order of its own.
#[derive(Debug, Clone)]
pub struct Factor {
    /// At each place of the factor the number of the unknown.
    order: Vec<usize>,
    /// Where the columns of L begin, their rows (the diagonal first) and values.
    offsets: Vec<usize>,
    rows: Vec<usize>,
    values: Vec<f64>,
}

impl Factor {
    /// The factor of a matrix given by its columns, each with its entries as (row, part), in any order; parts of the same
    /// entry add up. `None` if it is not positive definite.
    #[must_use]
    pub fn of(columns: &[Vec<(usize, f64)>]) -> Option<Self> {
        let n = columns.len();
        let neighbours: Vec<Vec<usize>> = columns
            .iter()
            .enumerate()
            .map(|(j, column)| {
                let mut rows: Vec<usize> = column.iter().map(|e| e.0).filter(|&i| i != j).collect();
                rows.sort_unstable();
                rows.dedup();
                rows
            })
            .collect();
        let order = reverse_cuthill_mckee(&neighbours);
        let mut place = vec![0; n];
        for (k, &unknown) in order.iter().enumerate() {
            place[unknown] = k;
        }
        let (mut offsets, mut rows, mut values) = (vec![0], Vec::new(), Vec::new());
        for &unknown in &order {
            let mut column: Vec<(usize, f64)> = columns[unknown]
                .iter()
                .map(|&(row, part)| (place[row], part))
                .collect();
            column.sort_by_key(|e| e.0); // stable: parts add up in the order given
            for entry in column.chunk_by(|a, b| a.0 == b.0) {
                rows.push(entry[0].0); // a chunk has a first
                values.push(entry.iter().map(|e| e.1).sum());
            }
            offsets.push(rows.len());
        }
        let matrix = CscMatrix::try_from_csc_data(n, n, offsets, rows, values).ok()?;
        let (offsets, rows, values) = CscCholesky::factor(&matrix).ok()?.take_l().disassemble();
        Some(Self {
            order,
            offsets,
            rows,
            values,
        })
    }

    /// Number of unknowns.
    #[must_use]
    pub fn unknowns(&self) -> usize {
        self.order.len()
    }

    /// Entries of the factor.
    #[must_use]
    pub fn entries(&self) -> usize {
        self.values.len()
    }

    /// Solves for `m` right sides at once. `sides` holds those of each unknown side by side (unknowns × `m`), and is
    /// replaced by the solutions; each is the same whatever stands beside it.
    pub fn solve(&self, sides: &mut [f64], m: usize) {
        if m == 0 {
            return;
        }
        let n = self.unknowns();
        let mut x: Vec<f64> = Vec::with_capacity(n * m);
        for &unknown in &self.order {
            x.extend_from_slice(&sides[unknown * m..(unknown + 1) * m]);
        }
        for j in 0..n {
            let (own, below) = x.split_at_mut((j + 1) * m);
            let own = &mut own[j * m..];
            let (diagonal, column) = self.column(j);
            for value in own.iter_mut() {
                *value /= diagonal;
            }
            for (row, l) in column {
                let start = (row - j - 1) * m;
                for (b, a) in below[start..start + m].iter_mut().zip(&*own) {
                    *b -= l * a;
                }
            }
        }
        for j in (0..n).rev() {
            let (own, below) = x.split_at_mut((j + 1) * m);
            let own = &mut own[j * m..];
            let (diagonal, column) = self.column(j);
            for (row, l) in column {
                let start = (row - j - 1) * m;
                for (a, b) in own.iter_mut().zip(&below[start..start + m]) {
                    *a -= l * b;
                }
            }
            for value in own.iter_mut() {
                *value /= diagonal;
            }
        }
        for (&unknown, found) in self.order.iter().zip(x.chunks_exact(m)) {
            sides[unknown * m..(unknown + 1) * m].copy_from_slice(found);
        }
    }

    /// The diagonal of a column of L, and what stands below it.
    fn column(&self, j: usize) -> (f64, impl Iterator<Item = (usize, f64)>) {
        let (first, end) = (self.offsets[j], self.offsets[j + 1]);
        let below = self.rows[first + 1..end]
            .iter()
            .copied()
            .zip(self.values[first + 1..end].iter().copied());
        (self.values[first], below)
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    /// The second difference on a line of n points, [-1 2 -1], has the inverse min(i, j) (n + 1 - max(i, j))/(n + 1).
    #[test]
    fn solutions_of_a_known_inverse() {
        let n = 9;
        let columns: Vec<Vec<(usize, f64)>> = (0..n)
            .map(|j| {
                let mut column = vec![(j, 1.5), (j, 0.5)];
                if j > 0 {
                    column.push((j - 1, -1.0));
                }
                if j + 1 < n {
                    column.push((j + 1, -1.0));
                }
                column
            })
            .collect();
        let factor = Factor::of(&columns).unwrap();
        assert_eq!((factor.unknowns(), factor.entries()), (n, 2 * n - 1));
        let mut sides = vec![0.0; n * n];
        for k in 0..n {
            sides[k * n + k] = 1.0;
        }
        factor.solve(&mut sides, n);
        for i in 0..n {
            for j in 0..n {
                let inverse = ((i.min(j) + 1) * (n - i.max(j))) as f64 / (n + 1) as f64;
                assert!((sides[i * n + j] - inverse).abs() < 1e-14, "{i} {j}");
            }
        }
    }

    #[test]
    fn what_is_not_positive_definite_has_no_factor() {
        assert!(Factor::of(&[vec![(0, 1.0), (1, 2.0)], vec![(0, 2.0), (1, 1.0)]]).is_none());
    }
}

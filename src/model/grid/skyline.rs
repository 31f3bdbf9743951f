//! The Cholesky factor of a symmetric positive matrix whose rows start late: each row is kept from its first entry that is not 0.
//!
//! The factor fills nothing to the left of that entry (A. Jennings, The Computer Journal 9, 281 (1966)), so a chain of elements
//! costs (levels) x (degree)^2, and one last row that joins both ends of a ring only its own length. Errors: backward stable, a few
//! roundings of each entry.

use super::krylov::dot;

/// Rows from their first entry to the diagonal.
#[derive(Debug, Clone)]
pub struct Skyline {
    first: Vec<usize>,
    rows: Vec<Vec<f64>>,
}

impl Skyline {
    /// A matrix of zeros whose row k starts at column `first[k]`.
    pub fn zeros(first: Vec<usize>) -> Skyline {
        let rows = first.iter().enumerate().map(|(k, start)| vec![0.0; k + 1 - start]).collect();
        Skyline { first, rows }
    }

    /// Adds to the entry of row `i` and column `j`; of a pair only the one below the diagonal is kept.
    pub fn add(&mut self, i: usize, j: usize, value: f64) {
        if j <= i {
            let column = j - self.first[i];
            self.rows[i][column] += value;
        }
    }

    /// Replaces the matrix by its lower factor; false where it is not positive.
    pub fn factor(&mut self) -> bool {
        for i in 0..self.rows.len() {
            let (before, rest) = self.rows.split_at_mut(i);
            let (row, start) = (&mut rest[0], self.first[i]);
            for j in start..=i {
                let from = start.max(self.first[j]);
                let length = j - from;
                let mine = from - start;
                let mut sum = row[j - start];
                if j < i {
                    let theirs = from - self.first[j];
                    let part = dot(&row[mine..mine + length], &before[j][theirs..theirs + length]);
                    let diagonal = before[j][j - self.first[j]];
                    row[j - start] = (sum - part) / diagonal;
                } else {
                    sum -= row[mine..mine + length].iter().map(|a| a * a).sum::<f64>();
                    if !(sum > 0.0 && sum.is_finite()) {
                        return false;
                    }
                    row[j - start] = sum.sqrt();
                }
            }
        }
        true
    }

    /// Solves with the factor, in place.
    pub fn solve(&self, b: &mut [f64]) {
        for i in 0..b.len() {
            let (row, start) = (&self.rows[i], self.first[i]);
            let sum: f64 = dot(&row[..i - start], &b[start..i]);
            b[i] = (b[i] - sum) / row[i - start];
        }
        for i in (0..b.len()).rev() {
            let (row, start) = (&self.rows[i], self.first[i]);
            b[i] /= row[i - start];
            let x = b[i];
            for (entry, to) in row[..i - start].iter().zip(&mut b[start..i]) {
                *to -= entry * x;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A chain whose ends are joined: 2 on the diagonal, -0.9 beside it and in the corner; A x = b for a known x.
    #[test]
    fn exact_solution_of_a_ring() {
        let size = 9;
        let entry = |i: usize, j: usize| match (i + size - j) % size {
            0 => 2.0,
            1 | 8 => -0.9,
            _ => 0.0,
        };
        let mut matrix = Skyline::zeros((0..size).map(|k| if k + 1 == size { 0 } else { k.saturating_sub(1) }).collect());
        for i in 0..size {
            for j in 0..=i {
                if entry(i, j) != 0.0 {
                    matrix.add(i, j, entry(i, j));
                }
            }
        }
        let x: Vec<f64> = (0..size).map(|k| 1.0 + (k * k % 5) as f64).collect();
        let mut b: Vec<f64> = (0..size).map(|i| (0..size).map(|j| entry(i, j) * x[j]).sum()).collect();
        assert!(matrix.factor());
        matrix.solve(&mut b);
        assert!(b.iter().zip(&x).all(|(a, b)| (a - b).abs() < 1e-14), "{b:?}");
    }

    #[test]
    fn prop_a_matrix_that_is_not_positive_is_refused() {
        let mut matrix = Skyline::zeros(vec![0, 0]);
        matrix.add(0, 0, 1.0);
        matrix.add(1, 0, 2.0);
        matrix.add(1, 1, 1.0);
        assert!(!matrix.factor());
    }
}

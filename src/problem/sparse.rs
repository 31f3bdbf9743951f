//! Matrices by their rows, zeros left out: entries of `dim` x `dim` complex matrices, whatever their unit.

use num_complex::Complex64;

use super::Matrix;

/// Rows of column and value; no column stands twice in a row.
#[derive(Debug, Clone)]
pub struct Sparse {
    rows: Vec<Vec<(usize, Complex64)>>,
}

impl Sparse {
    /// All zero.
    pub fn zero(dim: usize) -> Self {
        Sparse { rows: vec![Vec::new(); dim] }
    }

    /// What is not zero in a dense matrix.
    pub fn of(matrix: &Matrix) -> Self {
        let row =
            |row: usize| (0..matrix.ncols()).map(|k| (k, matrix[(row, k)])).filter(|(_, value)| *value != Complex64::default()).collect();
        Sparse { rows: (0..matrix.nrows()).map(row).collect() }
    }

    /// Adds to one entry.
    pub fn add(&mut self, row: usize, column: usize, value: Complex64) {
        match self.rows[row].iter_mut().find(|(at, _)| *at == column) {
            Some((_, entry)) => *entry += value,
            None => self.rows[row].push((column, value)),
        }
    }

    /// Adds `times` another.
    pub fn add_all(&mut self, other: &Sparse, times: f64) {
        for (row, entries) in other.rows.iter().enumerate() {
            for (column, value) in entries {
                self.add(row, *column, value * times);
            }
        }
    }

    /// Takes the mean off the diagonal, which commutes with everything.
    pub fn centre(&mut self) {
        let trace: Complex64 = self
            .rows
            .iter()
            .enumerate()
            .flat_map(|(j, row)| row.iter().filter(move |(column, _)| *column == j))
            .map(|(_, value)| value)
            .sum();
        let mean = trace / self.rows.len() as f64;
        for j in 0..self.rows.len() {
            self.add(j, j, -mean);
        }
    }

    /// Root of the sum of the squares of all entries.
    pub fn norm(&self) -> f64 {
        self.rows.iter().flatten().map(|(_, value)| value.norm_sqr()).sum::<f64>().sqrt()
    }

    /// Norm of A B - B A.
    pub fn commutator(&self, other: &Sparse) -> f64 {
        let mut row = vec![Complex64::default(); self.rows.len()];
        let mut touched = Vec::new();
        let mut square = 0.0;
        for j in 0..self.rows.len() {
            for (first, second, sign) in [(self, other, 1.0), (other, self, -1.0)] {
                for (k, a) in &first.rows[j] {
                    for (l, b) in &second.rows[*k] {
                        row[*l] += sign * a * b;
                        touched.push(*l);
                    }
                }
            }
            for l in touched.drain(..) {
                square += row[l].norm_sqr();
                row[l] = Complex64::default();
            }
        }
        square.sqrt()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Norms and commutators against those of the dense matrices.
    #[test]
    fn exact_as_dense_matrices() {
        let entries = |k: usize| -> Vec<(usize, usize, Complex64)> {
            (0..7).map(|i| ((3 * i + k) % 6, (i * i + 2 * k) % 6, Complex64::new(0.3 + i as f64, k as f64 - 0.7 * i as f64))).collect()
        };
        let both = |k: usize| {
            let (mut sparse, mut dense) = (Sparse::zero(6), Matrix::zeros(6, 6));
            for (row, column, value) in entries(k) {
                sparse.add(row, column, value);
                dense[(row, column)] += value;
            }
            (sparse, dense)
        };
        let ((a, dense_a), (b, dense_b)) = (both(1), both(2));
        assert!((a.norm() / dense_a.norm() - 1.0).abs() < 1e-15);
        let dense = (&dense_a * &dense_b - &dense_b * &dense_a).norm();
        assert!(dense > 1.0 && (a.commutator(&b) / dense - 1.0).abs() < 1e-14, "{} {dense}", a.commutator(&b));
        assert_eq!(a.commutator(&a), 0.0);
        assert!((Sparse::of(&dense_a).commutator(&Sparse::of(&dense_b)) / dense - 1.0).abs() < 1e-14);
        let mut centred = dense_b.clone();
        let mean = dense_b.trace() / Complex64::from(6.0);
        (0..6).for_each(|j| centred[(j, j)] -= mean);
        let mut same = b.clone();
        same.centre();
        assert!(mean.norm() > 0.1 && (same.norm() / centred.norm() - 1.0).abs() < 1e-14);
        let mut sum = a.clone();
        sum.add_all(&b, 0.5);
        assert!((sum.norm() / (&dense_a + &dense_b * Complex64::from(0.5)).norm() - 1.0).abs() < 1e-14);
    }
}

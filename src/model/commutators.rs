//! How far two Hermitian terms are from commuting.
//!
//! size = |AB - BA| / (2 |A| |B|), |A| the square root of the sum of the squared moduli, both taken without their mean
//! diagonal so that the zero of energy does not count. 0 where they commute; at most 1/sqrt(2), because |AB - BA| <=
//! sqrt(2) |A| |B| (A. Boettcher and D. Wenzel, Linear Algebra and its Applications 429, 1864 (2008)). Errors: a few
//! roundings times the number of levels.

use num_complex::Complex64;

use crate::problem::{Matrix, Sparse};

/// The size for every two of `terms` in order: first, second, size; all terms are square and as large as each other.
pub fn commutators(terms: &[Matrix]) -> Vec<(usize, usize, f64)> {
    let unit: Vec<Option<Sparse>> = terms.iter().map(|term| unit_without_trace(term).as_ref().map(Sparse::of)).collect();
    let count = terms.len();
    let pairs = (0..count).flat_map(|a| (a + 1..count).map(move |b| (a, b)));
    pairs.map(|(a, b)| (a, b, size(unit[a].as_ref(), unit[b].as_ref()))).collect()
}

/// The matrix less its mean diagonal, of norm 1; none where nothing but rounding is left.
fn unit_without_trace(matrix: &Matrix) -> Option<Matrix> {
    let dim = matrix.nrows();
    let mean = matrix.trace() / Complex64::from(dim as f64);
    let mut rest = matrix.clone();
    for k in 0..dim {
        rest[(k, k)] -= mean;
    }
    let (whole, norm) = (matrix.norm(), rest.norm());
    (norm > 2.0 * f64::EPSILON * whole).then(|| rest / Complex64::from(norm))
}

fn size(a: Option<&Sparse>, b: Option<&Sparse>) -> f64 {
    match (a, b) {
        (Some(a), Some(b)) => 0.5 * a.commutator(b),
        _ => 0.0,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn matrix(entries: [f64; 4]) -> Matrix {
        Matrix::from_row_iterator(2, 2, entries.into_iter().map(Complex64::from))
    }

    /// [z, x] = 2 i y: norm sqrt(8) over 2 sqrt(2) sqrt(2), the largest there is.
    #[test]
    fn exact_pauli_z_and_x_with_any_zero_of_energy() {
        let found = commutators(&[matrix([10e6, 0.0, 0.0, 35e6]), matrix([1.0, 0.0, 0.0, 0.0]), matrix([0.0, 1.0, 1.0, 0.0])]);
        let sizes: Vec<f64> = found.iter().map(|(_, _, size)| *size).collect();
        let most = 0.5f64.sqrt();
        assert_eq!(sizes[0], 0.0);
        assert!((sizes[1] - most).abs() < 1e-15 && (sizes[2] - most).abs() < 1e-15, "{sizes:?}");
    }

    #[test]
    fn exact_a_multiple_of_one_commutes() {
        let found = commutators(&[matrix([0.1, 0.0, 0.0, 0.1]), matrix([0.0, 1.0, 1.0, 0.0])]);
        assert_eq!(found, vec![(0, 1, 0.0)]);
    }
}

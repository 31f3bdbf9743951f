//! Eigenvectors of a Hermitian matrix by plane rotations (C. G. J. Jacobi, Journal fuer die reine und angewandte Mathematik 30,
//! 51 (1846)): slower than reduction to tridiagonal form, but it cannot break down and is exact to rounding on nearly diagonal
//! matrices (J. Demmel, K. Veselic, SIAM Journal on Matrix Analysis and Applications 13, 1204 (1992)).

use num_complex::Complex64;

use crate::problem::Matrix;

/// Sweeps over all pairs; the off-diagonal shrinks quadratically after the first few.
const MOST_SWEEPS: usize = 60;

/// Eigenvalues (unit of `h`) and eigenvectors as columns, in no order; `h` finite and Hermitian. Error: a few units of rounding
/// times the norm.
pub(super) fn eigenvectors(mut h: Matrix) -> (Vec<f64>, Matrix) {
    let n = h.ncols();
    let mut vectors = Matrix::identity(n, n);
    for _ in 0..MOST_SWEEPS {
        let mut rotated = false;
        for p in 0..n {
            for q in p + 1..n {
                let entry = h[(p, q)];
                let size = entry.norm();
                let (low, high) = (h[(p, p)].re, h[(q, q)].re);
                // what does not change either diagonal entry is as good as zero
                if size <= f64::MIN_POSITIVE
                    || size * size <= 1e-40 * (low - high).abs().max(size) * (low.abs() + high.abs()).max(f64::MIN_POSITIVE)
                {
                    continue;
                }
                rotated = true;
                let phase = entry / size;
                let lean = (high - low) / (2.0 * size);
                let tangent = if lean == 0.0 { 1.0 } else { lean.signum() / (lean.abs() + lean.hypot(1.0)) };
                let cos = 1.0 / tangent.hypot(1.0);
                let sin = tangent * cos;
                for k in 0..n {
                    turn(&mut h, k, p, q, cos, sin, phase);
                    turn(&mut vectors, k, p, q, cos, sin, phase);
                }
                for k in 0..n {
                    let (a, b) = (h[(p, k)], h[(q, k)]);
                    h[(p, k)] = a * cos - phase * b * sin;
                    h[(q, k)] = phase.conj() * a * sin + b * cos;
                }
                h[(p, q)] = Complex64::default();
                h[(q, p)] = Complex64::default();
            }
        }
        if !rotated {
            break;
        }
    }
    (h.diagonal().iter().map(|value| value.re).collect(), vectors)
}

/// Columns p and q of row k: (a, b) to (c a - s conj(phase) b, s phase a + c b).
fn turn(m: &mut Matrix, k: usize, p: usize, q: usize, cos: f64, sin: f64, phase: Complex64) {
    let (a, b) = (m[(k, p)], m[(k, q)]);
    m[(k, p)] = a * cos - phase.conj() * b * sin;
    m[(k, q)] = phase * a * sin + b * cos;
}

#[cfg(test)]
mod tests {
    use super::*;

    /// H V = V E and V unitary, for a graded matrix and for one that is nearly diagonal.
    #[test]
    fn exact_eigenvectors_of_graded_and_nearly_diagonal_matrices() {
        for (size, coupling) in [(2, 1.0), (5, 0.3), (15, 1e-9), (20, 1e-30)] {
            let h = Matrix::from_fn(size, size, |j, k| match j.cmp(&k) {
                std::cmp::Ordering::Equal => Complex64::from((j as f64 * 1.7).sin() * 10f64.powi(j as i32 % 7)),
                std::cmp::Ordering::Less => Complex64::new(coupling, 0.5 * coupling * (j + 2 * k) as f64),
                std::cmp::Ordering::Greater => Complex64::new(coupling, -0.5 * coupling * (k + 2 * j) as f64),
            });
            let (values, vectors) = eigenvectors(h.clone());
            let right =
                &vectors * Matrix::from_diagonal(&nalgebra::DVector::from_iterator(size, values.iter().map(|v| Complex64::from(*v))));
            assert!((&h * &vectors - right).norm() <= 2e-14 * h.norm(), "{size}: {}", (&h * &vectors).norm());
            assert!((vectors.adjoint() * &vectors - Matrix::identity(size, size)).norm() < 1e-13);
        }
    }
}

//! One set of samples by the eigenvectors of every slice, for any number of levels: the simple form that the fast one is held against.
//!
//! With H = Q w Q+ in a slice of length h, N at its end N1, and x = (w_j - w_k) h/2, the mean of N over the slice has the entries
//! (Q+ W Q)_jk = exp(i x) sin(x)/x (Q+ N1 Q)_jk, the divided difference of the exponential (Ju. L. Daleckii and S. G. Krein, Trudy Seminara
//! po Funktsional'nomu Analizu, Voronezh 1, 81 (1956)). Error: rounding alone, a few 1e-16 times (1 + ||H|| h) a slice.

use num_complex::Complex64;

use super::controlled::{Controlled, GradientFault};
use super::goals::Goal;
use super::Gradient;
use crate::problem::Matrix;

/// N at the end: the Hermitian matrix that the gradient is read from.
pub(super) fn end_matrix(end: &Matrix, seed: &Matrix) -> Matrix {
    let m = end * seed.adjoint();
    (&m - m.adjoint()) * Complex64::new(0.0, -0.5)
}

/// sin(x)/x.
fn sinc(x: f64) -> f64 {
    if x.abs() < 1e-3 {
        1.0 - x * x / 6.0 * (1.0 - x * x / 20.0)
    } else {
        x.sin() / x
    }
}

/// The gradient of `goal` for one set of samples, by eigenvectors.
///
/// # Errors
/// As of [`super::gradient`].
pub fn plain_gradient(system: &Controlled, samples: &[f64], goal: &dyn Goal) -> Result<Gradient, GradientFault> {
    system.check(samples, 1, goal)?;
    let modes: Vec<(Vec<f64>, Matrix)> = (0..system.lengths_s.len())
        .map(|slice| {
            let eigen = system.hamiltonian(samples, slice).symmetric_eigen();
            (eigen.eigenvalues.iter().copied().collect(), eigen.eigenvectors)
        })
        .collect();
    let mut end = goal.start();
    for ((w, q), h) in modes.iter().zip(&system.lengths_s) {
        let mut inner = q.ad_mul(&end);
        for (mut row, w) in inner.row_iter_mut().zip(w) {
            row *= Complex64::cis(-w * h);
        }
        end = q * inner;
    }
    let mut n = end_matrix(&end, &goal.seed(&end));
    let mut by_samples = vec![0.0; samples.len()];
    let count = system.controls.len();
    for (slice, ((w, q), h)) in modes.iter().zip(&system.lengths_s).enumerate().rev() {
        let inner = q.ad_mul(&(&n * q));
        let apart = |j: usize, k: usize| (w[j] - w[k]) * h;
        let mean = Matrix::from_fn(w.len(), w.len(), |j, k| {
            let x = 0.5 * apart(j, k);
            inner[(j, k)] * Complex64::cis(x) * sinc(x)
        });
        let mean = q * mean * q.adjoint();
        for (control, derivative) in system.controls.iter().zip(&mut by_samples[slice * count..]) {
            *derivative = h * control.dotc(&mean).re;
        }
        n = q * Matrix::from_fn(w.len(), w.len(), |j, k| inner[(j, k)] * Complex64::cis(apart(j, k))) * q.adjoint();
    }
    Ok(Gradient { value: goal.value(&end), by_samples })
}

/// How much number and derivatives change where every slice is cut in two.
pub(super) fn change_in_halves(
    system: &Controlled,
    samples: &[f64],
    goal: &dyn Goal,
    found: &Gradient,
) -> Result<(f64, f64), GradientFault> {
    let count = system.controls.len();
    let twice = |list: &[f64]| -> Vec<f64> { list.chunks(count.max(1)).flat_map(|slice| [slice, slice].concat()).collect() };
    let halves = system.lengths_s.iter().flat_map(|length| [0.5 * length; 2]).collect();
    let cut = Controlled::new(system.statics.clone(), system.controls.clone(), halves)?;
    let finer = plain_gradient(&cut, &twice(samples), goal)?;
    let of_slices = finer.by_samples.chunks(2 * count.max(1)).flat_map(|pair| (0..count).map(move |c| pair[c] + pair[c + count]));
    let derivative = of_slices.zip(&found.by_samples).map(|(fine, coarse)| (fine - coarse).abs()).fold(0.0, f64::max);
    Ok(((finer.value - found.value).abs(), derivative))
}

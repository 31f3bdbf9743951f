//! Matrices in a basis: the checked config's entries become dense Hermitian matrices. Knows nothing of time.

pub mod commutators;
pub mod gaps;

use num_complex::Complex64;

use crate::config::matrix::MatrixEntry;
use crate::config::state::State;
use crate::problem::{Matrix, Vector};
use crate::units::cis_turns;

/// The matrix of written entries, `size` x `size`, in the unit of the entries; `values` are the registers of the tape.
pub fn dense(size: usize, entries: &[MatrixEntry], values: &[f64]) -> Matrix {
    let mut matrix = Matrix::zeros(size, size);
    for entry in entries {
        let im = entry.value.im.map_or(0.0, |im| values[im as usize]);
        matrix[(entry.row, entry.column)] += Complex64::new(values[entry.value.re as usize], im);
    }
    matrix
}

/// Whether a matrix equals its adjoint to `share` of its largest entry.
pub fn is_hermitian(matrix: &Matrix, share: f64) -> bool {
    let largest = matrix.iter().map(|z| z.norm()).fold(0.0, f64::max);
    (0..matrix.ncols()).all(|j| (0..=j).all(|i| (matrix[(i, j)] - matrix[(j, i)].conj()).norm() <= share * largest))
}

/// Amplitudes of a state, norm 1.
pub fn amplitudes(size: usize, state: &State, values: &[f64]) -> Vector {
    let mut vector = Vector::zeros(size);
    match state {
        State::Level(level) => vector[*level] = 1.0.into(),
        State::Superposition(parts, _) => {
            for (level, amplitude, phase) in parts {
                vector[*level] += cis_turns(values[phase.register as usize]) * values[amplitude.register as usize];
            }
            vector.normalize_mut();
        }
        State::Amplitudes(list) => {
            for (k, (re, im)) in list.iter().enumerate() {
                vector[k] = Complex64::new(*re, *im);
            }
        }
    }
    vector
}

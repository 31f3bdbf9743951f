//! Real coordinates of Hermitian matrices: the diagonal, then sqrt(2) times real and imaginary part of each entry above it, column
//! after column. The basis is orthonormal (trace of products), so lengths are Frobenius norms. No dimension.

use std::f64::consts::{FRAC_1_SQRT_2, SQRT_2};

use num_complex::Complex64;

use crate::problem::{Channel, Matrix};
use crate::units::cis_turns;

/// Coordinates of a density matrix of `dim` levels.
pub(super) fn count(dim: usize) -> usize {
    dim * dim
}

/// Where the real part of entry (row, column) above the diagonal stands; its imaginary part is next.
pub(super) fn place(dim: usize, row: usize, column: usize) -> usize {
    dim + column * (column - 1) + 2 * row
}

/// The coordinates of a Hermitian matrix.
pub(super) fn real(matrix: &Matrix, into: &mut [f64]) {
    let dim = matrix.nrows();
    for column in 0..dim {
        into[column] = matrix[(column, column)].re;
        for row in 0..column {
            let at = place(dim, row, column);
            let entry = matrix[(row, column)];
            into[at] = entry.re * SQRT_2;
            into[at + 1] = entry.im * SQRT_2;
        }
    }
}

/// The Hermitian matrix of coordinates; what comes after them is not looked at.
pub(super) fn matrix(coordinates: &[f64], into: &mut Matrix) {
    let dim = into.nrows();
    for column in 0..dim {
        into[(column, column)] = Complex64::from(coordinates[column]);
        for row in 0..column {
            let at = place(dim, row, column);
            let entry = Complex64::new(coordinates[at], coordinates[at + 1]) * FRAC_1_SQRT_2;
            into[(row, column)] = entry;
            into[(column, row)] = entry.conj();
        }
    }
}

/// From a picture that turns at `turns_hz` to the frame of the problem: entry (j, k) times exp(-2 pi i (F_j - F_k) tau).
pub(super) fn turn(turns_hz: &[f64], tau_s: f64, coordinates: &mut [f64]) {
    let dim = turns_hz.len();
    let phases: Vec<Complex64> = turns_hz.iter().map(|f| cis_turns(-super::super::picture::turns(*f, tau_s))).collect();
    for column in 1..dim {
        for row in 0..column {
            let at = place(dim, row, column);
            let turned = Complex64::new(coordinates[at], coordinates[at + 1]) * (phases[row] * phases[column].conj());
            coordinates[at] = turned.re;
            coordinates[at + 1] = turned.im;
        }
    }
}

/// The Hermitian operators whose images make a channel, one after another: for each j |j><j|; for each j before k
/// |j><k| + |k><j| and -i |j><k| + i |k><j|. `each` is called with the coordinates of each.
pub(super) fn operators(dim: usize, within: &[usize], mut each: impl FnMut(&[f64])) {
    let mut operator = Matrix::zeros(dim, dim);
    let mut coordinates = vec![0.0; count(dim)];
    let mut show = |operator: &Matrix| {
        real(operator, &mut coordinates);
        each(&coordinates);
    };
    for (column, k) in within.iter().enumerate() {
        operator[(*k, *k)] = Complex64::from(1.0);
        show(&operator);
        operator[(*k, *k)] = Complex64::default();
        for j in &within[..column] {
            for value in [Complex64::from(1.0), Complex64::new(0.0, -1.0)] {
                operator[(*j, *k)] = value;
                operator[(*k, *j)] = value.conj();
                show(&operator);
            }
            operator[(*j, *k)] = Complex64::default();
            operator[(*k, *j)] = Complex64::default();
        }
    }
}

/// The channel from the images of [`operators`], each `stride` numbers long.
pub(super) fn channel(dim: usize, within: &[usize], images: &[f64], stride: usize) -> Channel {
    let d = within.len();
    let mut found = Channel { within: within.to_vec(), images: vec![Matrix::zeros(dim, dim); d * d] };
    let mut image = images.chunks_exact(stride);
    let mut next = || {
        let mut m = Matrix::zeros(dim, dim);
        if let Some(coordinates) = image.next() {
            matrix(coordinates, &mut m);
        }
        m
    };
    for k in 0..d {
        found.images[k + d * k] = next();
        for j in 0..k {
            // |j><k| is half the sum of the first and i times the second
            let (sum, difference) = (next(), next() * Complex64::i());
            found.images[j + d * k] = (&sum + &difference) * Complex64::from(0.5);
            found.images[k + d * j] = (sum - difference) * Complex64::from(0.5);
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prop_there_and_back() {
        let a = Matrix::from_fn(4, 4, |j, k| Complex64::new((j * 7 + k * 3) as f64 % 5.0 - 2.0, j as f64 - 0.5 * k as f64));
        let a = &a + a.adjoint();
        let (mut x, mut b) = (vec![0.0; 16], Matrix::zeros(4, 4));
        real(&a, &mut x);
        matrix(&x, &mut b);
        assert!((&a - b).norm() < 1e-14);
        assert!((x.iter().map(|x| x * x).sum::<f64>().sqrt() - a.norm()).abs() < 1e-13);
    }

    #[test]
    fn exact_identity_channel() {
        let mut all = Vec::new();
        operators(4, &[3, 1, 2], |x| all.extend_from_slice(x));
        let found = channel(4, &[3, 1, 2], &all, 16);
        let one = Channel::of_propagator(&Matrix::identity(4, 4), &[3, 1, 2]);
        for (a, b) in found.images.iter().zip(&one.images) {
            assert!((a - b).norm() < 1e-15);
        }
    }
}

//! The lowest eigenvectors of a symmetric positive matrix from a Krylov space of its inverse.
//!
//! Blocks of two vectors, so that the pairs of equal energy of a ring are both found; each new vector is made orthogonal to all
//! before it, twice (G. H. Golub and R. Underwood, in Mathematical Software III (1977), 361; T. Ericsson and A. Ruhe, Mathematics of
//! Computation 35, 1251 (1980)). The space grows until |A^-1 v - theta v| <= 1e-13 of the largest theta for every wanted vector.

use nalgebra::{DMatrix, SymmetricEigen};

/// Vectors that belong together, each as long as the matrix is wide.
pub type Vectors = Vec<Vec<f64>>;

/// The residual at which a vector counts as found, relative to the largest eigenvalue of the inverse.
const FOUND: f64 = 1e-13;

/// Sum of the products, in eight partial sums so that it runs in lanes.
pub fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sums = [0.0; 8];
    let (left, right) = (a.chunks_exact(8), b.chunks_exact(8));
    let rest: f64 = left.remainder().iter().zip(right.remainder()).map(|(x, y)| x * y).sum();
    for (x, y) in left.zip(right) {
        for k in 0..8 {
            sums[k] += x[k] * y[k];
        }
    }
    sums.iter().sum::<f64>() + rest
}

/// Takes the parts along `others` out of `v`, twice, and scales it to norm 1; false where nothing but rounding is left.
pub fn orthonormalise(v: &mut [f64], others: &Vectors) -> bool {
    let before = dot(v, v).sqrt();
    for _ in 0..2 {
        for other in others {
            let part = dot(v, other);
            v.iter_mut().zip(other).for_each(|(x, y)| *x -= part * y);
        }
    }
    let norm = dot(v, v).sqrt();
    if !(norm > 1e-11 * before && norm > 0.0) {
        return false;
    }
    v.iter_mut().for_each(|x| *x /= norm);
    true
}

/// sum over k of `share[k]` `vectors[k]`.
pub fn mixed(vectors: &Vectors, share: &[f64]) -> Vec<f64> {
    let mut out = vec![0.0; vectors[0].len()];
    for (vector, share) in vectors.iter().zip(share) {
        out.iter_mut().zip(vector).for_each(|(to, from)| *to += share * from);
    }
    out
}

/// A symmetric matrix from its entries on and above the diagonal.
pub fn symmetric(size: usize, entry: &dyn Fn(usize, usize) -> f64) -> DMatrix<f64> {
    let mut matrix = DMatrix::zeros(size, size);
    for column in 0..size {
        for row in 0..=column {
            matrix[(row, column)] = entry(row, column);
            matrix[(column, row)] = matrix[(row, column)];
        }
    }
    matrix
}

/// A stream of numbers on (-1, 1) that is the same in every run (G. Marsaglia, Journal of Statistical Software 8, 14 (2003)).
struct Stream(u64);

impl Stream {
    fn vector(&mut self, size: usize) -> Vec<f64> {
        let mut next = || {
            self.0 ^= self.0 << 13;
            self.0 ^= self.0 >> 7;
            self.0 ^= self.0 << 17;
            (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
        };
        (0..size).map(|_| next()).collect()
    }
}

/// `wanted` orthonormal vectors of the lowest eigenvalues, lowest first; `invert` applies the inverse in place. Fewer where the
/// matrix is smaller.
pub fn lowest(size: usize, wanted: usize, invert: &dyn Fn(&mut [f64])) -> Vectors {
    let wanted = wanted.min(size);
    let mut stream = Stream(0x9e37_79b9_7f4a_7c15);
    let (mut space, mut images): (Vectors, Vectors) = (Vec::new(), Vec::new());
    let mut check = (wanted + wanted / 2 + 12).min(size);
    loop {
        while space.len() < check {
            let mut next = if space.len() < 2 { stream.vector(size) } else { images[space.len() - 2].clone() };
            while !orthonormalise(&mut next, &space) {
                next = stream.vector(size);
            }
            let mut image = next.clone();
            invert(&mut image);
            space.push(next);
            images.push(image);
        }
        let count = space.len();
        let raw = symmetric(count, &|i, j| dot(&space[i], &images[j]));
        let eigen = SymmetricEigen::new(raw);
        let mut order: Vec<usize> = (0..count).collect();
        order.sort_by(|a, b| eigen.eigenvalues[*b].total_cmp(&eigen.eigenvalues[*a]));
        let largest = eigen.eigenvalues[order[0]].abs();
        let shares = |k: usize| eigen.eigenvectors.column(order[k]).iter().copied().collect::<Vec<f64>>();
        let residual = |k: usize| {
            let theta = eigen.eigenvalues[order[k]];
            let (image, vector) = (mixed(&images, &shares(k)), mixed(&space, &shares(k)));
            image.iter().zip(&vector).map(|(a, b)| (a - theta * b).powi(2)).sum::<f64>().sqrt()
        };
        // the highest wanted vector is found last, so it is looked at first
        if count == size || (0..wanted).rev().all(|k| residual(k) <= FOUND * largest) {
            return (0..wanted).map(|k| mixed(&space, &shares(k))).collect();
        }
        check = (count + count / 4 + 4).min(size);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The diagonal 1, 2, 2, 3, 4 ..: the pair is found whole.
    #[test]
    fn exact_unit_vectors_of_a_diagonal_matrix() {
        let size = 60;
        let entry = |k: usize| if k < 2 { (k + 1) as f64 } else { k as f64 };
        let found = lowest(size, 4, &|v: &mut [f64]| v.iter_mut().enumerate().for_each(|(k, x)| *x /= entry(k)));
        let weight = |v: &[f64], among: &[usize]| among.iter().map(|k| v[*k] * v[*k]).sum::<f64>();
        let places: [&[usize]; 4] = [&[0], &[1, 2], &[1, 2], &[3]];
        for (vector, among) in found.iter().zip(places) {
            assert!((weight(vector, among) - 1.0).abs() < 1e-13, "{among:?}");
        }
        assert!(dot(&found[1], &found[2]).abs() < 1e-13);
    }
}

//! What a whole sequence does to states of some levels, as a linear map of operators: the image of every |a><b|.
//!
//! A unitary is the special case rho -> U rho U+. Channels of several draws of noise are averaged entry by entry; figures are made
//! from the average.

use num_complex::Complex64;

use super::Matrix;

/// The images of |a><b| for a, b among some levels of the basis.
#[derive(Debug, Clone, PartialEq)]
pub struct Channel {
    /// The d levels a, b run over, as numbers of basis states.
    pub within: Vec<usize>,
    /// E(|within_j><within_k|) at place j + d k, each `dim` x `dim`, in the frame of the run.
    pub images: Vec<Matrix>,
}

impl Channel {
    /// rho -> U rho U+ on the levels `within`.
    pub fn of_propagator(u: &Matrix, within: &[usize]) -> Channel {
        let pairs = within.iter().flat_map(|k| within.iter().map(move |j| (*j, *k)));
        Channel { within: within.to_vec(), images: pairs.map(|(j, k)| u.column(j) * u.column(k).adjoint()).collect() }
    }

    /// E(|within_j><within_k|).
    pub fn image(&self, j: usize, k: usize) -> &Matrix {
        &self.images[j + self.within.len() * k]
    }

    /// Adds `weight` times another channel of the same levels.
    pub fn add(&mut self, other: &Channel, weight: f64) {
        for (image, added) in self.images.iter_mut().zip(&other.images) {
            image.zip_apply(added, |entry, more| *entry += more * weight);
        }
    }

    /// Choi matrix sum |j><k| x E(|j><k|), d dim x d dim: no eigenvalue is below zero if and only if the map is completely
    /// positive (M.-D. Choi, Linear Algebra and its Applications 10, 285 (1975)).
    pub fn choi(&self) -> Matrix {
        let d = self.within.len();
        let dim = self.images.first().map_or(0, |image| image.nrows());
        let mut choi = Matrix::from_element(d * dim, d * dim, Complex64::default());
        for k in 0..d {
            for j in 0..d {
                choi.view_mut((j * dim, k * dim), (dim, dim)).copy_from(self.image(j, k));
            }
        }
        choi
    }
}

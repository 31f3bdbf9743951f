//! The turn that suits best behind a gate of two levels.
//!
//! A turn is a unit quaternion q, W = q_0 - i (q_1 s_x + q_2 s_y + q_3 s_z) with the Pauli matrices s; the overlap of the gate with
//! W times the target is q K q with the real part K of K_mn = sum_jk <j|V+ B_m+ E(|j><k|) B_n V|k>, B = (1, -i s). The best q is
//! the eigenvector of the largest eigenvalue (B. K. P. Horn, Journal of the Optical Society of America A 4, 629 (1987)).

use num_complex::Complex64;

use super::gate::ordered;
use crate::problem::Matrix;
use crate::units::RAD_PER_TURN;

/// A turn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Behind {
    /// How far, turns from 0 to 1/2.
    pub turns: f64,
    /// About which axis, the lower level at +z; z where nothing turns.
    pub axis: [f64; 3],
    /// The overlap with the target turned by it.
    pub overlap: f64,
}

/// The best turn for the images E(|j><k|) (at j + 2 k, each 2 x 2) and the target V.
pub fn turn_behind(images: &[Matrix], target: &Matrix, first_is_lower: bool) -> Behind {
    let z = |re: f64, im: f64| Complex64::new(re, im);
    let (zero, one) = (z(0.0, 0.0), z(1.0, 0.0));
    let basis = [
        [[one, zero], [zero, one]],
        [[zero, z(0.0, -1.0)], [z(0.0, -1.0), zero]],
        [[zero, z(-1.0, 0.0)], [z(1.0, 0.0), zero]],
        [[z(0.0, -1.0), zero], [zero, z(0.0, 1.0)]],
    ];
    let turned: Vec<Matrix> = basis.iter().map(|b| ordered(first_is_lower, *b) * target).collect();
    let k = nalgebra::Matrix4::from_fn(|m, n| {
        let column = |matrix: &Matrix, j: usize| matrix.column(j).into_owned();
        let pairs = [(0, 0), (1, 0), (0, 1), (1, 1)];
        pairs.iter().map(|(j, k)| column(&turned[m], *j).dotc(&(&images[j + 2 * k] * column(&turned[n], *k))).re).sum::<f64>()
    });
    let eigen = (0.5 * (k + k.transpose())).symmetric_eigen();
    let best = (0..4).fold(0, |best, j| if eigen.eigenvalues[j] > eigen.eigenvalues[best] { j } else { best });
    let q = eigen.eigenvectors.column(best);
    // the shorter way round; the global sign does not count
    let sign = if q[0] < 0.0 { -1.0 } else { 1.0 };
    let along = [sign * q[1], sign * q[2], sign * q[3]];
    let sin = along.iter().map(|x| x * x).sum::<f64>().sqrt();
    let axis = if sin > 0.0 { along.map(|x| x / sin) } else { [0.0, 0.0, 1.0] };
    Behind { turns: 2.0 * sin.atan2(q[0].abs()) / RAD_PER_TURN, axis, overlap: eigen.eigenvalues[best] }
}

//! The part of an average gate fidelity that a free turn about z can raise.
//!
//! With C_ab = sum_jk conj(V_aj) <a|E(|j><k|)|b> V_bk and turns theta_a = sum_k phi_k z_ka of the levels it is
//! f = sum_ab C_ab exp(2 pi i (theta_a - theta_b)); C is Hermitian without an eigenvalue below zero (of a propagator
//! C_ab = x_a conj(x_b)). For two levels the best angle has a closed form; for several operators f is raised by Newton's method
//! from the phases that would fit best in the sense of least squares, and from zero.

use num_complex::Complex64;

use crate::problem::Matrix;
use crate::units::{cis_turns, RAD_PER_TURN};

/// C, d x d.
pub struct Overlaps(Matrix);

impl Overlaps {
    /// From the images E(|j><k|) (at j + d k, cut down to the subspace) and the target V.
    pub fn new(images: &[Matrix], target: &Matrix) -> Overlaps {
        let d = target.nrows();
        let entry = |a: usize, b: usize| {
            let pairs = (0..d).flat_map(|k| (0..d).map(move |j| (j, k)));
            pairs.map(|(j, k)| target[(a, j)].conj() * images[j + d * k][(a, b)] * target[(b, k)]).sum::<Complex64>()
        };
        Overlaps(Matrix::from_fn(d, d, entry))
    }

    /// f at these angles, in turns; `free` holds the diagonal z of each free operator.
    pub fn at(&self, free: &[Vec<f64>], phi: &[f64]) -> f64 {
        self.turned(free, phi).sum().re
    }

    /// C with its levels turned.
    fn turned(&self, free: &[Vec<f64>], phi: &[f64]) -> Matrix {
        let factors: Vec<Complex64> =
            (0..self.0.nrows()).map(|a| cis_turns(free.iter().zip(phi).map(|(z, phi)| z[a] * phi).sum())).collect();
        Matrix::from_fn(self.0.nrows(), self.0.ncols(), |a, b| factors[a] * self.0[(a, b)] * factors[b].conj())
    }

    /// The angles, turns, that make f largest.
    pub fn best_turns(&self, free: &[Vec<f64>]) -> Vec<f64> {
        let (c, count) = (&self.0, free.len());
        if count == 0 {
            return Vec::new();
        }
        if count == 1 && c.nrows() == 2 {
            // the one off-diagonal pair is made real
            let across = free[0][0] - free[0][1];
            let apart = -c[(0, 1)].arg() / RAD_PER_TURN;
            return vec![if across == 0.0 { 0.0 } else { (apart - apart.round()) / across }];
        }
        // phases of the levels against the one that stands out most, to be met by z phi + common phase = -turns
        let d = c.nrows();
        let most = (0..d).fold(0, |most, a| if c[(a, a)].re > c[(most, most)].re { a } else { most });
        let rows = nalgebra::DMatrix::from_fn(d, count + 1, |a, k| if k < count { free[k][a] } else { 1.0 });
        let wanted = nalgebra::DVector::from_fn(d, |a, _| -c[(a, most)].arg() / RAD_PER_TURN);
        let fitted =
            rows.svd(true, true).solve(&wanted, 1e-12).map(|x| x.as_slice()[..count].to_vec()).unwrap_or_else(|_| vec![0.0; count]);
        let [(first, small), (second, large)] = [vec![0.0; count], fitted].map(|start| self.newton(free, start));
        if large >= small {
            second
        } else {
            first
        }
    }

    fn newton(&self, free: &[Vec<f64>], mut phi: Vec<f64>) -> (Vec<f64>, f64) {
        let (count, d) = (phi.len(), self.0.nrows());
        let mut best = self.at(free, &phi);
        for _ in 0..100 {
            // derivatives by the angles in radians, h the turned matrix and r its sums by row: f_k = -2 Im sum_a z_ka r_a,
            // f_kl = -2 Re sum_a z_ka z_la r_a + 2 Re sum_ab z_ka h_ab z_lb
            let h = self.turned(free, &phi);
            let r: Vec<Complex64> = h.row_iter().map(|row| row.sum()).collect();
            let gradient = nalgebra::DVector::from_fn(count, |k, _| -2.0 * (0..d).map(|a| free[k][a] * r[a].im).sum::<f64>());
            let hessian = nalgebra::DMatrix::from_fn(count, count, |k, l| {
                let own: f64 = (0..d).map(|a| free[k][a] * free[l][a] * r[a].re).sum();
                let cross: f64 =
                    (0..d).flat_map(|a| (0..d).map(move |b| (a, b))).map(|(a, b)| free[k][a] * h[(a, b)].re * free[l][b]).sum();
                2.0 * (cross - own)
            });
            // uphill even where the surface is not concave: the curvature's modulus, and a floor for flat directions
            let eigen = hessian.symmetric_eigen();
            let along = eigen.eigenvectors.transpose() * &gradient;
            let floor = 1e-12 * eigen.eigenvalues.amax().max(1e-300);
            let scaled = along.zip_map(&eigen.eigenvalues, |g, e| if e.abs() > floor { g / e.abs() } else { 0.0 });
            let step = eigen.eigenvectors * scaled;
            let mut share = 1.0;
            let moved = loop {
                let next: Vec<f64> = phi.iter().zip(step.iter()).map(|(p, s)| p + share * s / RAD_PER_TURN).collect();
                let found = self.at(free, &next);
                if found > best {
                    break Some((next, found));
                }
                share *= 0.5;
                if share < 1e-6 {
                    break None;
                }
            };
            let Some((next, found)) = moved else { break };
            let gain = found - best;
            (phi, best) = (next, found);
            if gain <= 1e-16 * best {
                break;
            }
        }
        (phi, best)
    }
}

//! Gate error and leakage within a subspace of dimension d, M = P U P the propagator cut down to it, V the target:
//! F = (Tr(M M+) + |Tr(V+ M)|^2)/(d (d + 1)), averaged over all pure states of the subspace (L. H. Pedersen, N. M. Moller,
//! K. Molmer, Physics Letters A 367, 47 (2007)); gate error 1 - F, leakage 1 - Tr(M M+)/d.
//!
//! A free turn about z stands after the target: V is replaced by exp(-i sum_k phi_k Z_k) V with the phi that suit best. For two
//! levels Z is half the Pauli matrix with the lower level at +z and the best phi has a closed form; for several operators the
//! overlap is raised by Newton's method from the phases that would fit best in the sense of least squares.

use num_complex::Complex64;

use super::Last;
use crate::config::document::Document;
use crate::config::record::{FreeZ, Gate, Target};
use crate::model;
use crate::model::built::Built;
use crate::problem::Matrix;
use crate::units::{cis_turns, sin_cos_turns, RAD_PER_TURN};

/// Judges propagators against one target.
#[derive(Debug, Clone)]
pub struct GateJudge {
    within: Vec<usize>,
    target: Matrix,
    /// Of two levels: whether the first of `within` is the lower one.
    first_is_lower: bool,
    /// Diagonals of the free generators, turns of phase per turn of the angle.
    free: Vec<Vec<f64>>,
}

/// What is known of a gate.
#[derive(Debug, Clone, PartialEq)]
pub struct GateFigures {
    /// 1 - F.
    pub error: f64,
    /// 1 - Tr(M M+)/d.
    pub leakage: f64,
    /// The free angles found, turns in (-1/2, 1/2]; empty where none is free.
    pub free_z_turns: Vec<f64>,
    /// Of two levels: what is left between target and gate, as a turn (turns, from 0 to 1/2) about an axis (lower level at +z).
    pub residual: Option<(f64, [f64; 3])>,
}

impl GateJudge {
    /// For `gate` with the numbers of one point; `energies_hz` orders two levels.
    pub fn new(document: &Document, built: &Built, gate: &Gate, values: &[f64], energies_hz: &[f64]) -> GateJudge {
        let size = gate.within.len();
        let first_is_lower = size != 2 || energies_hz[gate.within[0]] <= energies_hz[gate.within[1]];
        let value = |quantity: crate::config::reader::Quantity| values[quantity.register as usize];
        let target = match &gate.target {
            Target::Equator(turn, axis) => {
                // exp(-i theta/2 (cos a sx + sin a sy)), lower level first
                let (sin, cos) = sin_cos_turns(value(*turn) / 2.0);
                let across = |turns: f64| Complex64::new(0.0, -sin) * cis_turns(turns);
                let axis = value(*axis);
                ordered(first_is_lower, [[cos.into(), across(-axis)], [across(axis), cos.into()]])
            }
            Target::AboutZ(turn, sign) => {
                let half = sign * value(*turn) / 2.0;
                ordered(first_is_lower, [[cis_turns(-half), 0.0.into()], [0.0.into(), cis_turns(half)]])
            }
            Target::Rows(entries) => model::dense(size, entries, values),
        };
        let free = match &gate.free_z {
            FreeZ::No => Vec::new(),
            FreeZ::Yes if first_is_lower => vec![vec![0.5, -0.5]],
            FreeZ::Yes => vec![vec![-0.5, 0.5]],
            FreeZ::Operators(operators) => operators
                .iter()
                .map(|index| {
                    let matrix = model::operator(document, built, *index, values);
                    gate.within.iter().map(|level| matrix[(*level, *level)].re).collect()
                })
                .collect(),
        };
        GateJudge { within: gate.within.clone(), target, first_is_lower, free }
    }

    /// Judges the propagator `u` of the whole system.
    pub fn judge(&self, u: &Matrix) -> GateFigures {
        let d = self.within.len();
        let m = Matrix::from_fn(d, d, |row, column| u[(self.within[row], self.within[column])]);
        let kept = m.norm_squared();
        // Tr(V+ Z+ M) = sum_j conj(z_j) (M V+)_jj
        let product = &m * self.target.adjoint();
        let diagonal: Vec<Complex64> = product.diagonal().iter().copied().collect();
        let free_z_turns = self.best_turns(&diagonal);
        let turned = |j: usize| -> f64 { self.free.iter().zip(&free_z_turns).map(|(z, phi)| z[j] * phi).sum() };
        let overlap: Complex64 = diagonal.iter().enumerate().map(|(j, a)| a * cis_turns(turned(j))).sum();
        let n = d as f64;
        let residual = (d == 2).then(|| {
            let free = Matrix::from_diagonal(&nalgebra::DVector::from_fn(2, |j, _| cis_turns(turned(j))));
            self.residual_turn(&(free * product))
        });
        GateFigures {
            error: 1.0 - (kept + overlap.norm_sqr()) / (n * (n + 1.0)),
            leakage: 1.0 - kept / n,
            free_z_turns: free_z_turns.iter().map(|phi| phi - (phi - 0.5).ceil()).collect(),
            residual,
        }
    }

    /// The free angles, turns, that make |sum_j a_j exp(2 pi i sum_k phi_k z_kj)| largest.
    fn best_turns(&self, a: &[Complex64]) -> Vec<f64> {
        let count = self.free.len();
        if count == 0 {
            return Vec::new();
        }
        let turns: Vec<f64> = a.iter().map(|a| a.arg() / RAD_PER_TURN).collect();
        if count == 1 && a.len() == 2 {
            // both terms in phase: z_0 phi + t_0 = z_1 phi + t_1
            let across = self.free[0][0] - self.free[0][1];
            if across == 0.0 {
                return vec![0.0];
            }
            let apart = turns[1] - turns[0];
            return vec![(apart - apart.round()) / across];
        }
        // least squares for z phi + common phase = -turns, then Newton on the true overlap, from there and from zero
        let rows = nalgebra::DMatrix::from_fn(a.len(), count + 1, |j, k| if k < count { self.free[k][j] } else { 1.0 });
        let wanted = nalgebra::DVector::from_iterator(a.len(), turns.iter().map(|t| -t));
        let fitted =
            rows.svd(true, true).solve(&wanted, 1e-12).map(|x| x.as_slice()[..count].to_vec()).unwrap_or_else(|_| vec![0.0; count]);
        let raised = [vec![0.0; count], fitted].map(|start| self.newton(a, start));
        let [(first, small), (second, large)] = raised;
        if large >= small {
            second
        } else {
            first
        }
    }

    fn newton(&self, a: &[Complex64], mut phi: Vec<f64>) -> (Vec<f64>, f64) {
        let count = phi.len();
        let size = |phi: &[f64]| self.overlap(a, phi).norm_sqr();
        let mut best = size(&phi);
        for _ in 0..100 {
            // derivatives of |S|^2 by the angles in radians: S_k = i sum z_kj s_j, S_kl = - sum z_kj z_lj s_j
            let s: Vec<Complex64> =
                a.iter().enumerate().map(|(j, a)| a * cis_turns((0..count).map(|k| self.free[k][j] * phi[k]).sum())).collect();
            let whole: Complex64 = s.iter().sum();
            let first: Vec<Complex64> =
                (0..count).map(|k| Complex64::i() * s.iter().zip(&self.free[k]).map(|(s, z)| s * *z).sum::<Complex64>()).collect();
            let gradient = nalgebra::DVector::from_iterator(count, first.iter().map(|d| 2.0 * (whole.conj() * d).re));
            let hessian = nalgebra::DMatrix::from_fn(count, count, |k, l| {
                let second: Complex64 = -(0..s.len()).map(|j| s[j] * (self.free[k][j] * self.free[l][j])).sum::<Complex64>();
                2.0 * (first[k].conj() * first[l] + whole.conj() * second).re
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
                let found = size(&next);
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

    fn overlap(&self, a: &[Complex64], phi: &[f64]) -> Complex64 {
        a.iter().enumerate().map(|(j, a)| a * cis_turns(self.free.iter().zip(phi).map(|(z, p)| z[j] * p).sum())).sum()
    }

    /// Angle and axis of a two-level map close to the identity, by its nearest unitary (polar decomposition).
    fn residual_turn(&self, r: &Matrix) -> (f64, [f64; 3]) {
        let r = if self.first_is_lower { r.clone() } else { Matrix::from_fn(2, 2, |i, j| r[(1 - i, 1 - j)]) };
        let svd = r.svd(true, true);
        let (Some(u), Some(vt)) = (svd.u, svd.v_t) else {
            return (0.0, [0.0, 0.0, 1.0]);
        };
        let w = u * vt;
        let phase = (w[(0, 0)] * w[(1, 1)] - w[(0, 1)] * w[(1, 0)]).sqrt();
        let w = w / if phase.norm() > 0.0 { phase } else { 1.0.into() };
        // w = cos(theta/2) - i sin(theta/2) n.s
        let cos = 0.5 * (w[(0, 0)] + w[(1, 1)]).re;
        let n = [-(w[(0, 1)] + w[(1, 0)]).im / 2.0, (w[(1, 0)] - w[(0, 1)]).re / 2.0, -(w[(0, 0)] - w[(1, 1)]).im / 2.0];
        let sin = n.iter().map(|x| x * x).sum::<f64>().sqrt();
        // the shorter way round; the global sign does not count
        let sign = if cos < 0.0 { -1.0 } else { 1.0 };
        let axis = if sin > 0.0 { n.map(|x| sign * x / sin) } else { [0.0, 0.0, 1.0] };
        (2.0 * sin.atan2(cos.abs()) / RAD_PER_TURN, axis)
    }
}

/// A matrix written with the lower level first, in the order of `within`.
fn ordered(first_is_lower: bool, m: [[Complex64; 2]; 2]) -> Matrix {
    let at = |k: usize| if first_is_lower { k } else { 1 - k };
    Matrix::from_fn(2, 2, |row, column| m[at(row)][at(column)])
}

impl Last for GateJudge {
    fn names(&self) -> Vec<String> {
        ["gate_error", "gate_leakage"].map(str::to_string).to_vec()
    }

    fn see(&self, propagator: &Matrix, numbers: &mut Vec<f64>) {
        let figures = self.judge(propagator);
        numbers.extend([figures.error, figures.leakage]);
    }
}

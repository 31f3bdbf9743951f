//! Gate error and leakage within a subspace of dimension d, from the channel E of the whole sequence, V the target. Averaged over
//! all pure states of the subspace
//!
//! ```text
//! F = ( sum_jk <j|V+ E(|j><k|) V|k> + sum_jk <k|E(|j><j|)|k> ) / (d (d + 1))
//! ```
//!
//! (M. A. Nielsen, Physics Letters A 303, 249 (2002); of a propagator cut down to M = P U P this is
//! (Tr(M M+) + |Tr(V+ M)|^2)/(d (d + 1)), L. H. Pedersen, N. M. Moller, K. Molmer, Physics Letters A 367, 47 (2007)). Gate error
//! 1 - F, leakage 1 - Tr(P E(P))/d, which contains what was lost.
//!
//! A free turn about z stands after the target: V is replaced by exp(-i sum_k phi_k Z_k) V with the phi that suit best (`overlap`).
//! For two levels Z is half the Pauli matrix with the lower level at +z. There too the gate error splits: incoherent is what
//! would be left after the best turn of any axis put behind the gate (`turn_behind`), coherent the rest.

use num_complex::Complex64;

use super::overlap::Overlaps;
use super::turn_behind::turn_behind;
use super::{Last, Whole};
use crate::config::document::Document;
use crate::config::record::{FreeZ, Gate, Target};
use crate::model;
use crate::model::built::Built;
use crate::problem::{Channel, Matrix};
use crate::units::{cis_turns, sin_cos_turns};

/// Judges channels against one target.
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
    /// 1 - Tr(P E(P))/d.
    pub leakage: f64,
    /// The free angles found, turns in (-1/2, 1/2]; empty where none is free.
    pub free_z_turns: Vec<f64>,
    /// Of two levels: what is left between target and gate, as a turn (turns, from 0 to 1/2) about an axis (lower level at +z).
    pub residual: Option<(f64, [f64; 3])>,
    /// Of two levels: the error that would be left after the best turn of any axis behind the gate.
    pub incoherent: Option<f64>,
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

    /// For a target matrix on levels of the basis, of two levels in the order lower, upper; `free` are diagonals of free generators.
    pub fn of(within: &[usize], target: Matrix, free: Vec<Vec<f64>>) -> GateJudge {
        GateJudge { within: within.to_vec(), target, first_is_lower: true, free }
    }

    /// Judges the channel of the whole sequence, in the frame of the run.
    pub fn judge(&self, channel: &Channel) -> GateFigures {
        let d = self.within.len();
        // images cut down to the subspace
        let cut = |j: usize, k: usize| {
            let image = channel.image(j, k);
            Matrix::from_fn(d, d, |a, b| image[(self.within[a], self.within[b])])
        };
        let images: Vec<Matrix> = (0..d).flat_map(|k| (0..d).map(move |j| (j, k))).map(|(j, k)| cut(j, k)).collect();
        let kept: f64 = (0..d).map(|j| images[j + d * j].trace().re).sum();
        let overlaps = Overlaps::new(&images, &self.target);
        let free_z_turns = overlaps.best_turns(&self.free);
        let n = d as f64;
        let error = |overlap: f64| 1.0 - (kept + overlap) / (n * (n + 1.0));
        let whole = error(overlaps.at(&self.free, &free_z_turns));
        let behind = (d == 2).then(|| {
            let turned = |a: usize| -> f64 { self.free.iter().zip(&free_z_turns).map(|(z, phi)| z[a] * phi).sum() };
            let factors = [cis_turns(turned(0)), cis_turns(turned(1))];
            let turned: Vec<Matrix> =
                images.iter().map(|image| Matrix::from_fn(2, 2, |a, b| factors[a] * image[(a, b)] * factors[b].conj())).collect();
            turn_behind(&turned, &self.target, self.first_is_lower)
        });
        GateFigures {
            error: whole,
            leakage: 1.0 - kept / n,
            free_z_turns: free_z_turns.iter().map(|phi| phi - (phi - 0.5).ceil()).collect(),
            residual: behind.as_ref().map(|behind| (behind.turns, behind.axis)),
            incoherent: behind.as_ref().map(|behind| error(behind.overlap).min(whole)),
        }
    }

    /// The numbers of a propagator on two levels with nothing free. With M cut down to them and M V+ = c_0 - i c.s, the overlap with the target
    /// turned by a unit quaternion q is 4 |sum q_k c_k|^2; its largest value over q is the larger root of a Gram matrix of two rows.
    fn pair(&self, u: &Matrix) -> [f64; 4] {
        let m = |row: usize, column: usize| u[(self.within[row], self.within[column])];
        let v = |row: usize, column: usize| self.target[(row, column)].conj();
        let a = |row: usize, column: usize| m(row, 0) * v(column, 0) + m(row, 1) * v(column, 1);
        let (a00, a01, a10, a11) = (a(0, 0), a(0, 1), a(1, 0), a(1, 1));
        let i = Complex64::i();
        let twice = [a00 + a11, i * (a01 + a10), a10 - a01, i * (a00 - a11)];
        let dot = |f: fn(&Complex64) -> f64, g: fn(&Complex64) -> f64| twice.iter().map(|c| f(c) * g(c)).sum::<f64>();
        let (rr, ri, ii) = (dot(|c| c.re, |c| c.re), dot(|c| c.re, |c| c.im), dot(|c| c.im, |c| c.im));
        let best = 0.5 * (rr + ii) + (0.5 * (rr - ii)).hypot(ri);
        let kept: f64 = [m(0, 0), m(0, 1), m(1, 0), m(1, 1)].iter().map(Complex64::norm_sqr).sum();
        let error = |overlap: f64| 1.0 - (kept + overlap) / 6.0;
        let whole = error(twice[0].norm_sqr());
        let incoherent = error(best).min(whole);
        [whole, 1.0 - 0.5 * kept, whole - incoherent, incoherent]
    }

    /// Levels of the subspace.
    pub fn within(&self) -> &[usize] {
        &self.within
    }

    /// The target.
    pub(super) fn target(&self) -> &Matrix {
        &self.target
    }

    /// Diagonals of the free generators.
    pub(super) fn free(&self) -> &[Vec<f64>] {
        &self.free
    }

    /// Of two levels: whether the first is the lower one.
    pub(super) fn first_is_lower(&self) -> bool {
        self.first_is_lower
    }

    /// The same levels with another target and nothing free.
    pub(super) fn with_target(&self, target: Matrix) -> GateJudge {
        GateJudge { target, free: Vec::new(), ..self.clone() }
    }
}

/// A matrix written with the lower level first, in the order of `within`.
pub(super) fn ordered(first_is_lower: bool, m: [[Complex64; 2]; 2]) -> Matrix {
    let at = |k: usize| if first_is_lower { k } else { 1 - k };
    Matrix::from_fn(2, 2, |row, column| m[at(row)][at(column)])
}

impl Last for GateJudge {
    fn names(&self) -> Vec<String> {
        let split = ["gate_coherent", "gate_incoherent"].iter().take(if self.within.len() == 2 { 2 } else { 0 });
        ["gate_error", "gate_leakage"].iter().chain(split).map(|name| (*name).to_string()).collect()
    }

    fn see(&self, whole: Whole, numbers: &mut Vec<f64>) {
        let figures = match whole {
            Whole::Propagator(u) if self.within.len() == 2 && self.free.is_empty() => {
                numbers.extend(self.pair(u));
                return;
            }
            Whole::Propagator(u) => self.judge(&Channel::of_propagator(u, &self.within)),
            Whole::Channel(channel) => self.judge(channel),
        };
        numbers.extend(figures.numbers());
    }
}

impl GateFigures {
    /// The figures in the order of their names.
    pub fn numbers(&self) -> Vec<f64> {
        let split = self.incoherent.map(|incoherent| [self.error - incoherent, incoherent]);
        [self.error, self.leakage].into_iter().chain(split.into_iter().flatten()).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The short way for a propagator of two levels gives what the way of all channels gives.
    #[test]
    fn exact_propagators_of_two_levels_go_both_ways() {
        let mut seed = 0.3f64;
        let mut next = || {
            seed = (seed * 997.13 + 0.7).fract();
            seed - 0.5
        };
        for _ in 0..200 {
            let u = Matrix::from_fn(3, 3, |_, _| Complex64::new(next(), next()));
            let target = Matrix::from_fn(2, 2, |row, column| if row == column { 0.6.into() } else { Complex64::new(0.0, -0.8) });
            let judge = GateJudge::of(&[2, 0], target, Vec::new());
            let mut short = Vec::new();
            judge.see(Whole::Propagator(&u), &mut short);
            let long = judge.judge(&Channel::of_propagator(&u, &[2, 0])).numbers();
            assert_eq!(short.len(), long.len());
            for (s, l) in short.iter().zip(&long) {
                assert!((s - l).abs() < 4e-15, "{short:?} {long:?}");
            }
        }
    }
}

//! exp(-i H tau) of a constant Hermitian H, acting on columns.
//!
//! H in rad/s, `dim` x `dim`, column after column; tau in s; columns of `dim` amplitudes. The mean of the diagonal is taken off first and
//! comes back as a phase in turns. Error: a few units of rounding times (1 + ||H|| tau), the second part being the rounding of H
//! itself.
//!
//! * diagonal H: phases;
//! * two levels: cos(w tau) - i sin(w tau)/w (H - mean), w the half distance of the eigenvalues; small entries keep their
//!   relative accuracy;
//! * ||H - mean|| tau up to 1: Taylor series to rounding;
//! * else: eigenvectors and phases reduced in turns, so that the norm may be as large as it likes.

use nalgebra::SymmetricEigen;
use num_complex::Complex64;

use crate::problem::Matrix;
use crate::units::{cis_turns, sin_cos_turns, RAD_PER_TURN};

const ZERO: Complex64 = Complex64::new(0.0, 0.0);

/// exp(-i H tau), prepared for any tau up to the one it was made for.
#[derive(Debug, Clone)]
pub(super) enum Flow {
    Phases {
        turns_hz: Vec<f64>,
    },
    Two {
        mean_hz: f64,
        half_gap: f64,
        coupling: Complex64,
        rate: f64,
    },
    Series {
        mean_hz: f64,
        /// -i (H - mean), column after column.
        generator: Vec<Complex64>,
        dim: usize,
    },
    Modes {
        turns_hz: Vec<f64>,
        vectors: Matrix,
    },
    /// The eigenvectors were not found: H holds what is not a number.
    Broken,
}

/// Largest norm times tau for which the Taylor series is summed.
const SERIES_UP_TO_RAD: f64 = 1.0;

impl Flow {
    /// Prepares exp(-i `h` tau) for tau up to `longest_s`; `modes` asks for eigenvectors whatever the size (needed by [`Flow::dwell`]).
    pub fn new(h: &[Complex64], dim: usize, longest_s: f64, modes: bool) -> Self {
        if dim == 2 && !modes {
            let (a, b) = (h[0].re, h[3].re);
            let half_gap = 0.5 * (a - b);
            let rate = half_gap.hypot(h[2].re.hypot(h[2].im));
            return Flow::Two { mean_hz: 0.5 * (a + b) / RAD_PER_TURN, half_gap, coupling: h[2], rate };
        }
        let mean = (0..dim).map(|j| h[j * (dim + 1)].re).sum::<f64>() / dim as f64;
        let mut bound: f64 = 0.0;
        let mut diagonal = true;
        for column in 0..dim {
            let mut sum = 0.0;
            for row in 0..dim {
                let entry = h[row + dim * column];
                if row == column {
                    sum += (entry.re - mean).abs();
                } else {
                    sum += entry.re.abs() + entry.im.abs();
                    diagonal &= entry == ZERO;
                }
            }
            bound = if sum > bound || sum.is_nan() { sum } else { bound };
        }
        if !bound.is_finite() {
            return Flow::Broken;
        }
        if diagonal {
            return Flow::Phases { turns_hz: (0..dim).map(|j| h[j * (dim + 1)].re / RAD_PER_TURN).collect() };
        }
        if bound * longest_s <= SERIES_UP_TO_RAD && !modes {
            let mut generator: Vec<Complex64> = h.iter().map(|entry| Complex64::new(entry.im, -entry.re)).collect();
            for j in 0..dim {
                generator[j * (dim + 1)] = Complex64::new(0.0, mean - h[j * (dim + 1)].re);
            }
            return Flow::Series { mean_hz: mean / RAD_PER_TURN, generator, dim };
        }
        let mut centred = Matrix::from_column_slice(dim, dim, h);
        for j in 0..dim {
            centred[(j, j)] = Complex64::new(centred[(j, j)].re - mean, 0.0);
        }
        let (values, vectors) = eigenvectors(centred);
        Flow::Modes { turns_hz: values.iter().map(|value| (value + mean) / RAD_PER_TURN).collect(), vectors }
    }

    /// `to` = exp(-i H tau) `from`, one column; `room` is scratch of any length. Gives the matrix-vector products used.
    pub fn act(&self, tau_s: f64, from: &[Complex64], to: &mut [Complex64], room: &mut Vec<Complex64>) -> u64 {
        match self {
            Flow::Phases { turns_hz } => {
                for ((out, f), psi) in to.iter_mut().zip(turns_hz).zip(from) {
                    *out = psi * cis_turns(-super::picture::turns(*f, tau_s));
                }
                1
            }
            Flow::Two { mean_hz, half_gap, coupling, rate } => {
                let (sin, cos) = sin_cos_turns(super::picture::turns(rate / RAD_PER_TURN, tau_s));
                let s = if *rate == 0.0 { tau_s } else { sin / rate };
                let phase = cis_turns(-super::picture::turns(*mean_hz, tau_s));
                let off = coupling * s;
                let lean = s * half_gap;
                let (a, b) = (from[0], from[1]);
                to[0] = phase * (Complex64::new(cos, -lean) * a + Complex64::new(off.im, -off.re) * b);
                to[1] = phase * (Complex64::new(-off.im, -off.re) * a + Complex64::new(cos, lean) * b);
                1
            }
            Flow::Series { mean_hz, generator, dim } => series(*mean_hz, generator, *dim, tau_s, from, to, room),
            Flow::Modes { turns_hz, vectors } => {
                let dim = turns_hz.len();
                let columns = vectors.as_slice();
                to.fill(ZERO);
                for (mode, f) in columns.chunks_exact(dim).zip(turns_hz) {
                    let mut share = ZERO;
                    for (v, psi) in mode.iter().zip(from) {
                        share += v.conj() * psi;
                    }
                    share *= cis_turns(-super::picture::turns(*f, tau_s));
                    for (out, v) in to.iter_mut().zip(mode) {
                        *out += v * share;
                    }
                }
                2
            }
            Flow::Broken => {
                to.fill(Complex64::new(f64::NAN, f64::NAN));
                1
            }
        }
    }

    /// Adds the integral of |(exp(-i H t) from)_j|^2 over t from 0 to tau, in s; made with `modes`.
    pub fn dwell(&self, tau_s: f64, from: &[Complex64], into_s: &mut [f64]) {
        let Flow::Modes { turns_hz, vectors } = self else {
            // Made with `modes`, what is not `Modes` is diagonal (or broken, and the state shows that).
            for (time, psi) in into_s.iter_mut().zip(from) {
                *time += psi.norm_sqr() * tau_s;
            }
            return;
        };
        let dim = turns_hz.len();
        let shares: Vec<Complex64> = (0..dim).map(|a| (0..dim).map(|j| vectors[(j, a)].conj() * from[j]).sum()).collect();
        for a in 0..dim {
            for (j, time) in into_s.iter_mut().enumerate() {
                *time += (vectors[(j, a)] * shares[a]).norm_sqr() * tau_s;
            }
            for b in 0..a {
                // Integral of exp(-2 pi i f t) over t from 0 to tau: tau exp(-pi i f tau) sin(pi f tau)/(pi f tau).
                let half = super::picture::turns(0.5 * (turns_hz[a] - turns_hz[b]), tau_s);
                let whole = 0.5 * (turns_hz[a] - turns_hz[b]) * tau_s;
                let sinc = if whole.abs() < 1e-9 { 1.0 } else { sin_cos_turns(half).0 / (RAD_PER_TURN * whole) };
                let integral = cis_turns(-half) * (tau_s * sinc);
                for (j, time) in into_s.iter_mut().enumerate() {
                    *time += 2.0 * (vectors[(j, a)] * shares[a] * (vectors[(j, b)] * shares[b]).conj() * integral).re;
                }
            }
        }
    }
}

/// Eigenvalues and eigenvectors of a finite Hermitian matrix: by the library, and where its iteration breaks down (it can on
/// nearly diagonal matrices of ten and more levels) by Jacobi's rotations.
fn eigenvectors(h: Matrix) -> (Vec<f64>, Matrix) {
    if let Some(eigen) = SymmetricEigen::try_new(h.clone(), f64::EPSILON, 200 * h.ncols()) {
        if eigen.eigenvectors.iter().all(|z| z.re.is_finite() && z.im.is_finite())
            && eigen.eigenvalues.iter().all(|value| value.is_finite())
        {
            return (eigen.eigenvalues.iter().copied().collect(), eigen.eigenvectors);
        }
    }
    super::jacobi::eigenvectors(h)
}

fn series(
    mean_hz: f64,
    generator: &[Complex64],
    dim: usize,
    tau_s: f64,
    from: &[Complex64],
    to: &mut [Complex64],
    room: &mut Vec<Complex64>,
) -> u64 {
    room.clear();
    room.extend_from_slice(from);
    room.resize(2 * dim, ZERO);
    to.copy_from_slice(from);
    let (mut power, mut next) = room.split_at_mut(dim);
    let mut products = 0;
    for order in 1..=40 {
        next.fill(ZERO);
        let scale = tau_s / f64::from(order);
        for (column, psi) in generator.chunks_exact(dim).zip(power.iter()) {
            if *psi == ZERO {
                continue;
            }
            let psi = psi * scale;
            for (out, entry) in next.iter_mut().zip(column) {
                *out += entry * psi;
            }
        }
        products += 1;
        let mut largest: f64 = 0.0;
        for (out, term) in to.iter_mut().zip(next.iter()) {
            *out += term;
            largest = largest.max(term.re.abs()).max(term.im.abs());
        }
        std::mem::swap(&mut power, &mut next);
        // Entries that only higher orders reach must keep their relative accuracy when tiny, hence a threshold far below rounding.
        if largest < 1e-20 {
            break;
        }
    }
    let phase = cis_turns(-super::picture::turns(mean_hz, tau_s));
    for out in to.iter_mut() {
        *out *= phase;
    }
    products
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Hermitian with entries spread over many sizes, from a small generator.
    fn hermitian(dim: usize, spread: f64, seed: &mut u64) -> Vec<Complex64> {
        let mut unit = || {
            *seed ^= *seed << 13;
            *seed ^= *seed >> 7;
            *seed ^= *seed << 17;
            (*seed >> 11) as f64 / 9_007_199_254_740_992.0 - 0.5
        };
        let mut h = vec![ZERO; dim * dim];
        for column in 0..dim {
            for row in 0..=column {
                let size = spread.powf(unit());
                let entry = if row == column { Complex64::new(size * unit(), 0.0) } else { Complex64::new(size * unit(), size * unit()) };
                h[row + dim * column] = entry;
                h[column + dim * row] = entry.conj();
            }
        }
        h
    }

    fn norm(v: &[Complex64]) -> f64 {
        v.iter().map(Complex64::norm_sqr).sum::<f64>().sqrt()
    }

    #[test]
    fn prop_modes_solve_badly_scaled_matrices() {
        let mut seed = 42;
        for dim in [2, 3, 4, 7, 16, 40, 64] {
            for spread in [1.0, 1e4, 1e15, 1e30] {
                let h = hermitian(dim, spread, &mut seed);
                let Flow::Modes { turns_hz, vectors } = Flow::new(&h, dim, 1e30, true) else {
                    panic!("no modes found: {dim} levels, spread {spread:e}");
                };
                let whole = norm(&h);
                let matrix = Matrix::from_column_slice(dim, dim, &h);
                for (a, f) in turns_hz.iter().enumerate() {
                    let v = vectors.column(a);
                    let rest = &matrix * v - v * Complex64::new(f * RAD_PER_TURN, 0.0);
                    assert!(rest.norm() < 2e-14 * whole, "{dim} levels, spread {spread:e}: residual {:e}", rest.norm() / whole);
                }
                let off = (vectors.adjoint() * &vectors - Matrix::identity(dim, dim)).norm();
                assert!(off < 2e-14 * dim as f64, "{dim} levels, spread {spread:e}: {off:e} from unitary");
            }
        }
    }

    #[test]
    fn prop_series_closed_form_and_modes_agree() {
        let mut seed = 7;
        let mut room = Vec::new();
        for dim in [2, 3, 5, 20] {
            let h = hermitian(dim, 100.0, &mut seed);
            let start: Vec<Complex64> = (0..dim).map(|j| Complex64::new(1.0, j as f64) / dim as f64).collect();
            let (mut a, mut b) = (start.clone(), start.clone());
            let tau = 0.9 / (norm(&h) * (dim as f64).sqrt());
            let direct = Flow::new(&h, dim, tau, false);
            assert!(!matches!(direct, Flow::Modes { .. }));
            direct.act(tau, &start, &mut a, &mut room);
            Flow::new(&h, dim, tau, true).act(tau, &start, &mut b, &mut room);
            let apart = a.iter().zip(&b).map(|(x, y)| (x - y).norm()).fold(0.0, f64::max);
            assert!(apart < 2e-15 * dim as f64, "{dim} levels: {apart:e}");
        }
    }

    #[test]
    fn prop_tiny_amplitudes_of_a_series_keep_relative_accuracy() {
        // Third level reached in second order only: amplitude -g1 g2 tau^2 / 2, relative correction of order (g tau)^2.
        let (g, tau) = (3e-6, 1.0);
        let mut h = vec![ZERO; 9];
        for (row, column) in [(0, 1), (1, 0), (1, 2), (2, 1)] {
            h[row + 3 * column] = Complex64::new(g, 0.0);
        }
        let mut end = vec![ZERO; 3];
        Flow::new(&h, 3, tau, false).act(tau, &[Complex64::new(1.0, 0.0), ZERO, ZERO], &mut end, &mut Vec::new());
        assert!((end[2].re / (-0.5 * g * g) - 1.0).abs() < 1e-11, "{}", end[2]);
    }
}

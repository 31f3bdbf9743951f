//! Amplitudes between jumps where H and G are constant: exp(-i H tau - G tau/2) psi, and when its norm falls to a threshold.
//!
//! A diagonal exponent is known at any time; the logarithm of the norm is then convex, and Newton's method meets the threshold from
//! below. Else by eigenvectors where they are well conditioned, or by Taylor series in short steps; the threshold then by the
//! Illinois form of the rule of false position (M. Dowell, P. Jarratt, BIT 11, 168 (1971)).

use nalgebra::linalg::Schur;
use num_complex::Complex64;

use super::super::picture::{turns, Picture};
use super::leaving::Leaving;
use crate::problem::{Instant, Matrix, Term};
use crate::units::{cis_turns, RAD_PER_TURN};

const ZERO: Complex64 = Complex64::new(0.0, 0.0);
/// Worst condition of eigenvectors that are trusted.
const CONDITION: f64 = 1e4;

/// exp(-i (H - i G/2) tau), prepared.
#[derive(Debug)]
pub(super) enum Still {
    /// Turning, Hz, and decay of the amplitude, 1/s, of each level or eigenvector; the eigenvectors and their inverse, if any.
    Modes { turns_hz: Vec<f64>, decay: Vec<f64>, vectors: Option<Box<(Matrix, Matrix)>> },
    /// Entries of -i H - G/2 and a bound of its size, 1/s.
    Steps { entries: Vec<(usize, usize, Complex64)>, bound: f64 },
}

/// Scratch.
#[derive(Debug, Default)]
pub(super) struct Room {
    shares: Vec<Complex64>,
    trial: Vec<Complex64>,
    powers: Vec<Vec<Complex64>>,
}

pub(super) fn norm(psi: &[Complex64]) -> f64 {
    psi.iter().map(|z| z.norm_sqr()).sum()
}

impl Still {
    pub fn new(picture: &Picture, terms: &[Term], leaving: &Leaving, start: Instant) -> Still {
        let n = picture.dim;
        let mut h = vec![ZERO; n * n];
        picture.fill(terms, 0.0, &mut h);
        let mut m = Matrix::from_column_slice(n, n, &h);
        for (j, out) in leaving.diagonal.iter().enumerate() {
            m[(j, j)] -= Complex64::new(0.0, 0.5 * out);
        }
        for entry in &leaving.beating {
            m[(entry.row, entry.column)] -= entry.at(start, 0.0) * Complex64::new(0.0, 0.5);
        }
        let modes = |values: Vec<Complex64>, vectors| Still::Modes {
            turns_hz: values.iter().map(|value| value.re / RAD_PER_TURN).collect(),
            decay: values.iter().map(|value| (-value.im).max(0.0)).collect(),
            vectors,
        };
        if (0..n).all(|j| (0..n).all(|k| j == k || m[(j, k)] == ZERO)) {
            return modes(m.diagonal().iter().copied().collect(), None);
        }
        if let Some((values, vectors, inverse)) = eigenvectors(&m) {
            return modes(values, Some(Box::new((vectors, inverse))));
        }
        let entries: Vec<(usize, usize, Complex64)> = (0..n)
            .flat_map(|k| (0..n).map(move |j| (j, k)))
            .filter(|(j, k)| m[(*j, *k)] != ZERO)
            .map(|(j, k)| (j, k, m[(j, k)] * Complex64::new(0.0, -1.0)))
            .collect();
        let column = |k: usize| m.column(k).iter().map(|z| z.norm()).sum::<f64>();
        Still::Steps { entries, bound: (0..n).map(column).fold(0.0, f64::max) }
    }

    /// Carries `psi` on by `gap_s`, or until its norm squared falls to `threshold` within a share `tolerance`; gives the time in
    /// the latter case.
    pub fn advance(&self, psi: &mut [Complex64], gap_s: f64, threshold: f64, tolerance: f64, room: &mut Room) -> Option<f64> {
        match self {
            Still::Modes { turns_hz, decay, vectors: None } => {
                let at_s = diagonal_crossing(decay, psi, gap_s, threshold, tolerance);
                for ((psi, f), out) in psi.iter_mut().zip(turns_hz).zip(decay) {
                    if *psi != ZERO {
                        let t = at_s.unwrap_or(gap_s);
                        *psi *= cis_turns(-turns(*f, t)) * (-out * t).exp();
                    }
                }
                at_s
            }
            Still::Modes { turns_hz, decay, vectors: Some(pair) } => {
                let n = psi.len();
                let (vectors, inverse) = &**pair;
                let Room { shares, trial, .. } = room;
                shares.clear();
                shares.resize(n, ZERO);
                multiply(inverse, psi, shares);
                trial.resize(n, ZERO);
                let start = norm(psi);
                let mut moved = vec![ZERO; n];
                let mut to = |t: f64, psi: &mut [Complex64]| {
                    for (k, out) in moved.iter_mut().enumerate() {
                        *out = shares[k] * cis_turns(-turns(turns_hz[k], t)) * (-decay[k] * t).exp();
                    }
                    multiply(vectors, &moved, psi);
                };
                to(gap_s, trial);
                let at_s = crossing(gap_s, start, norm(trial), threshold, tolerance, |t| {
                    to(t, trial);
                    norm(trial)
                });
                if let Some(t) = at_s {
                    to(t, trial);
                }
                psi.copy_from_slice(trial);
                at_s
            }
            Still::Steps { entries, bound } => steps(entries, *bound, psi, gap_s, threshold, tolerance, room),
        }
    }

    /// How fast populations swing or decay, 1/s.
    pub fn rate(&self) -> f64 {
        match self {
            Still::Modes { decay, vectors: None, .. } => decay.iter().fold(0.0, |most: f64, out| most.max(2.0 * out)),
            Still::Modes { turns_hz, decay, .. } => {
                let (low, high) = turns_hz.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), f| (f.min(low), f.max(high)));
                (high - low) * RAD_PER_TURN + decay.iter().fold(0.0, |most: f64, out| most.max(2.0 * out))
            }
            Still::Steps { bound, .. } => 2.0 * bound,
        }
    }
}

/// `to` = `m` `from`.
fn multiply(m: &Matrix, from: &[Complex64], to: &mut [Complex64]) {
    to.fill(ZERO);
    for (column, factor) in m.as_slice().chunks_exact(from.len()).zip(from) {
        if *factor != ZERO {
            to.iter_mut().zip(column).for_each(|(out, entry)| *out += entry * factor);
        }
    }
}

/// Eigenvalues and eigenvectors with their inverse, if well conditioned and met.
fn eigenvectors(m: &Matrix) -> Option<(Vec<Complex64>, Matrix, Matrix)> {
    let n = m.nrows();
    let size = m.norm();
    let (q, t) = Schur::try_new(m.clone(), f64::EPSILON, 400 * n)?.unpack();
    let mut y = Matrix::identity(n, n);
    for k in 0..n {
        for j in (0..k).rev() {
            let sum: Complex64 = (j + 1..=k).map(|l| t[(j, l)] * y[(l, k)]).sum();
            let apart = t[(j, j)] - t[(k, k)];
            if apart.norm() <= 1e-13 * size && sum.norm() > 1e-15 * size {
                return None;
            }
            y[(j, k)] = if sum == ZERO { ZERO } else { -sum / apart };
        }
    }
    let mut vectors = q * y;
    for mut column in vectors.column_iter_mut() {
        let length = column.norm();
        column /= Complex64::from(length);
    }
    let inverse = vectors.clone().try_inverse()?;
    let values: Vec<Complex64> = t.diagonal().iter().copied().collect();
    let back = &vectors * Matrix::from_diagonal(&nalgebra::DVector::from_vec(values.clone())) * &inverse;
    let good = vectors.norm() * inverse.norm() < CONDITION * n as f64 && (back - m).norm() <= 1e-12 * size;
    good.then_some((values, vectors, inverse))
}

/// When sum |psi_j|^2 e^(-2 d_j t) falls to `threshold`, if before `gap_s`.
fn diagonal_crossing(decay: &[f64], psi: &[Complex64], gap_s: f64, threshold: f64, tolerance: f64) -> Option<f64> {
    let at = |t: f64| {
        let (mut whole, mut slope) = (0.0, 0.0);
        for (out, amplitude) in decay.iter().zip(psi) {
            if *amplitude != ZERO {
                let left = amplitude.norm_sqr() * if *out == 0.0 { 1.0 } else { (-2.0 * out * t).exp() };
                whole += left;
                slope += 2.0 * out * left;
            }
        }
        (whole, slope)
    };
    if at(gap_s).0 > threshold {
        return None;
    }
    let mut t = 0.0;
    for _ in 0..200 {
        let (whole, slope) = at(t);
        let above = (whole / threshold).ln();
        if above <= tolerance || !(slope > 0.0) {
            break;
        }
        t += above * whole / slope;
        if t >= gap_s {
            return Some(gap_s);
        }
    }
    Some(t)
}

/// When a falling norm squared, `first` at 0 and `last` at `gap_s`, meets `threshold` within a share `tolerance`.
pub(super) fn crossing(gap_s: f64, first: f64, last: f64, threshold: f64, tolerance: f64, mut at: impl FnMut(f64) -> f64) -> Option<f64> {
    if !(last <= threshold) {
        return None;
    }
    let above = |norm: f64| (norm.max(f64::MIN_POSITIVE) / threshold).ln();
    let (mut low, mut high) = (0.0, gap_s);
    let (mut over, mut under) = (above(first), above(last));
    if over <= 0.0 {
        return Some(0.0);
    }
    let mut side = 0;
    for _ in 0..200 {
        if -under <= tolerance || high - low <= f64::EPSILON * gap_s {
            return Some(high);
        }
        let t = (low + (high - low) * (over / (over - under))).clamp(low, high);
        let here = above(at(t));
        if here.abs() <= tolerance {
            return Some(t);
        }
        if here > 0.0 {
            (low, over) = (t, here);
            if side == 1 {
                under *= 0.5;
            }
            side = 1;
        } else {
            (high, under) = (t, here);
            if side == -1 {
                over *= 0.5;
            }
            side = -1;
        }
    }
    Some(high)
}

/// Taylor series in steps of size 1.
fn steps(
    entries: &[(usize, usize, Complex64)],
    bound: f64,
    psi: &mut [Complex64],
    gap_s: f64,
    threshold: f64,
    tolerance: f64,
    room: &mut Room,
) -> Option<f64> {
    let n = psi.len();
    let count = (bound * gap_s).ceil().max(1.0);
    let h = gap_s / count;
    let Room { trial, powers, .. } = room;
    trial.resize(n, ZERO);
    let mut done = 0.0;
    while done < count {
        let mut orders = 1;
        if powers.is_empty() {
            powers.push(Vec::new());
        }
        powers[0].clear();
        powers[0].extend_from_slice(psi);
        for order in 1..40 {
            if powers.len() <= order {
                powers.push(Vec::new());
            }
            let (before, now) = powers.split_at_mut(order);
            let (before, now) = (&before[order - 1], &mut now[0]);
            now.clear();
            now.resize(n, ZERO);
            for (row, column, value) in entries {
                now[*row] += value * before[*column];
            }
            let scale = h / order as f64;
            now.iter_mut().for_each(|z| *z *= scale);
            orders = order + 1;
            if now.iter().all(|z| z.re.abs().max(z.im.abs()) < 1e-18) {
                break;
            }
        }
        let to = |share: f64, psi: &mut [Complex64]| {
            psi.copy_from_slice(&powers[orders - 1]);
            for power in powers[..orders - 1].iter().rev() {
                psi.iter_mut().zip(power).for_each(|(sum, term)| *sum = *sum * share + term);
            }
        };
        let first = norm(psi);
        to(1.0, trial);
        let at = crossing(1.0, first, norm(trial), threshold, tolerance, |share| {
            to(share, trial);
            norm(trial)
        });
        if let Some(share) = at {
            to(share, psi);
            return Some(h * (done + share));
        }
        psi.copy_from_slice(trial);
        done += 1.0;
    }
    None
}

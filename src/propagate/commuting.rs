//! Stretches in which H changes but commutes with itself at all times: psi(tau) = exp(-i integral of H) psi(0), exact whatever the
//! pulse looks like (the first term of W. Magnus, Communications on Pure and Applied Mathematics 7, 649 (1954), when all others
//! vanish). A pulse on resonance seen in its own frame is of this kind, and a tuned gap.
//!
//! H of the picture is a sum of constant Hermitian matrices with real functions of time; it commutes with itself if every two of
//! the matrices do. The integrals are taken by Gauss's rule with 20 points on `cells` equal parts of each gap between moments;
//! the second resolution has more cells.

use num_complex::Complex64;

use super::exponential::Flow;
use super::picture::{Picture, Turning};
use super::run::{Eye, State, Stretch, Work};
use crate::problem::{Sparse, Term};
use crate::quadrature;

/// Moments at which a coefficient is looked at to see whether its phase stands still.
const LOOKS: u32 = 48;
/// Commutators below this share of twice the product of the norms are rounding.
const CLOSE: f64 = 1e-14;

/// Turns of H in a segment beyond which its integral is left to the other methods, whose steps grow with the couplings alone.
const MOST_TURNS: f64 = 1e4;

/// Whether H of a picture commutes with itself all through a segment of `length_s`.
pub(super) fn commutes(picture: &Picture, terms: &[Term], length_s: f64) -> bool {
    if picture.fastest_hz * length_s > MOST_TURNS {
        return false;
    }
    if picture.turnings.iter().any(|turning| turns_one_way(picture.dim, turning, terms, length_s)) {
        return false;
    }
    let n = picture.dim;
    let mut parts: Vec<Sparse> = Vec::new();
    let mut constant = Sparse::zero(n);
    for (j, value) in picture.diagonal.iter().enumerate() {
        constant.add(j, j, Complex64::from(*value));
    }
    for turning in &picture.turnings {
        let factors: Vec<Complex64> =
            (0..=LOOKS).map(|k| Picture::factor(turning, terms, length_s * (f64::from(k) + 0.37) / (f64::from(LOOKS) + 1.0))).collect();
        let largest = factors.iter().copied().fold(Complex64::default(), |a, b| if b.norm() > a.norm() { b } else { a });
        if largest.norm() == 0.0 {
            continue;
        }
        let phase = largest / largest.norm();
        let one = hermitian(n, turning, phase);
        if factors.iter().all(|f| (f - largest).norm() <= 1e-15 * largest.norm()) {
            constant.add_all(&one, largest.norm());
            continue;
        }
        parts.push(one);
        // a coefficient whose phase moves drives two matrices
        if factors.iter().any(|f| (f * phase.conj()).im.abs() > 1e-14 * largest.norm()) {
            parts.push(hermitian(n, turning, phase * Complex64::i()));
        }
    }
    constant.centre();
    parts.push(constant);
    let close = |a: &Sparse, b: &Sparse| a.commutator(b) <= CLOSE * 2.0 * a.norm() * b.norm();
    parts.iter().enumerate().all(|(k, a)| parts[..k].iter().all(|b| close(a, b)))
}

/// z X + adjoint, X the entries of a group.
fn hermitian(dim: usize, turning: &Turning, z: Complex64) -> Sparse {
    let mut sparse = Sparse::zero(dim);
    for part in &turning.parts {
        sparse.add(part.row, part.column, z * part.value);
        sparse.add(part.column, part.row, (z * part.value).conj());
    }
    sparse
}

/// Whether a group alone shows that H does not commute: a coefficient whose phase moves drives X + adjoint and i X + adjoint, which
/// commute only if X is normal, and no matrix is whose rows and columns differ in norm.
fn turns_one_way(dim: usize, turning: &Turning, terms: &[Term], length_s: f64) -> bool {
    if turning.turns_hz == 0.0 {
        return false;
    }
    let mut lean = vec![0.0; dim];
    for part in &turning.parts {
        lean[part.row] += part.value.norm_sqr();
        lean[part.column] -= part.value.norm_sqr();
    }
    let most = turning.parts.iter().map(|part| part.value.norm_sqr()).fold(0.0, f64::max);
    let [a, b, c] = [0.31, 0.5, 0.64].map(|part| Picture::factor(turning, terms, part * length_s));
    let moves = |a: Complex64, b: Complex64| (a * b.conj()).im.abs() > 1e-3 * a.norm() * b.norm();
    lean.iter().any(|lean| lean.abs() > 1e-6 * most) && (moves(a, b) || moves(b, c))
}

/// Carries the state through the stretch.
pub(super) fn pass(stretch: &Stretch, cells: f64, state: &mut State, eye: &mut Eye, work: &mut Work) {
    let dim = state.dim;
    let picture = stretch.picture;
    let zero = Complex64::default();
    let (mut k, mut psi, mut room) = (vec![zero; dim * dim], vec![zero; dim], Vec::new());
    // cells short enough for every turn of H and every rise of an envelope
    let rate = (4.0 / stretch.sampled.busy / stretch.length_s + picture.fastest_hz) * cells;
    let mut tau_s = 0.0;
    for m in 0..=stretch.moments.len() {
        let stop_s = stretch.moments.get(m).map_or(stretch.length_s, |moment| moment.offset_s.min(stretch.length_s));
        let gap_s = stop_s - tau_s;
        if gap_s > 0.0 && !work.exhausted() {
            let parts = (gap_s * rate).ceil().max(1.0);
            k.fill(zero);
            for (j, value) in picture.diagonal.iter().enumerate() {
                k[j * (dim + 1)] = Complex64::from(value * gap_s);
            }
            for turning in &picture.turnings {
                let mut factor = zero;
                let mut done = 0.0;
                while done < parts && !work.exhausted() {
                    let from_s = tau_s + gap_s * (done / parts);
                    done += 1.0;
                    let to_s = tau_s + gap_s * (done / parts);
                    let part = |part: fn(&Complex64) -> f64| {
                        quadrature::integral(from_s, to_s, |t| part(&Picture::factor(turning, stretch.terms, t)))
                    };
                    factor += Complex64::new(part(|z| z.re), part(|z| z.im));
                    work.step(40, dim);
                }
                for part in &turning.parts {
                    let entry = factor * part.value;
                    k[part.row + dim * part.column] += entry;
                    k[part.column + dim * part.row] += entry.conj();
                }
            }
            let flow = Flow::new(&k, dim, 1.0, false);
            let mut products = 0;
            for column in state.amplitudes.chunks_exact_mut(dim) {
                products += flow.act(1.0, column, &mut psi, &mut room);
                column.copy_from_slice(&psi);
            }
            work.step(products, dim * dim);
            tau_s = stop_s;
        }
        if m < stretch.moments.len() {
            eye.see(stretch, m, &state.amplitudes[..dim], &state.time_in_s);
        }
    }
}

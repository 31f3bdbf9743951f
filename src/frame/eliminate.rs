//! Far levels taken out to second order in the couplings over the detuning (J. R. Schrieffer, P. A. Wolff, Physical Review 149,
//! 491 (1966)): with E the diagonal and V the off-diagonal of the kept terms in the frame, the other levels evolve by
//!
//! ```text
//! H_ab + 1/2 sum over e of V_ae V_eb (1/(E_a - E_e) + 1/(E_b - E_e))
//! ```
//!
//! at every moment. The eliminated levels stay in the basis, uncoupled and at energy 0, so that indices keep their meaning.

use std::collections::BTreeMap;
use std::sync::Arc;

use num_complex::Complex64;

use crate::problem::{Chirped, Envelope, Jump, Matrix, Problem, Segment, Slow, Term, TurningPart};
use crate::units::{cis_turns, RAD_PER_TURN};

/// From here on the expansion is refused.
pub const LARGEST_VALIDITY: f64 = 0.3;

/// What elimination did, at the moment at which the couplings to the eliminated levels are largest.
#[derive(Debug, Clone, PartialEq)]
pub struct Elimination {
    /// Levels taken out.
    pub levels: Vec<usize>,
    /// Added diagonal of each other level, Hz.
    pub shifts_hz: Vec<(usize, f64)>,
    /// Added entries <a|H|b>, a before b, Hz.
    pub couplings_hz: Vec<(usize, usize, Complex64)>,
    /// Largest |V_ae / (E_a - E_e)| over the whole sequence.
    pub validity: f64,
}

/// One product of an off-diagonal entry: V_ij has this value times the factor of its term (or 1), conjugated or not.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
struct Factor {
    term: Option<usize>,
    conjugate: bool,
}

/// Two factors and the index of the matrix that their product multiplies.
type Pairing = (Factor, Factor, usize);

/// Times within a segment at which the couplings are looked at.
const LOOKS: u32 = 64;

/// Takes `levels` out of a problem.
pub fn eliminate(problem: &Problem, levels: &[usize]) -> (Problem, Elimination) {
    let size = problem.dim();
    let gone = |j: usize| levels.contains(&j);
    let mut statics = (*problem.statics).clone();
    for j in 0..size {
        for k in 0..size {
            if gone(j) || gone(k) {
                statics[(j, k)] = Complex64::default();
            }
        }
    }
    let mut matrices: Vec<Matrix> = problem
        .matrices
        .iter()
        .map(|matrix| Matrix::from_fn(size, size, |j, k| if gone(j) || gone(k) { Complex64::default() } else { matrix[(j, k)] }))
        .collect();
    let mut out = Elimination { levels: levels.to_vec(), shifts_hz: Vec::new(), couplings_hz: Vec::new(), validity: 0.0 };
    let mut strongest = 0.0;
    let mut segments = Vec::with_capacity(problem.segments.len());
    let mut terms = Vec::new();
    // the matrices that segments with the same terms share
    let mut known: BTreeMap<Vec<(usize, u64)>, Vec<Pairing>> = BTreeMap::new();
    for segment in &problem.segments {
        let first = terms.len();
        terms.extend(problem.terms_of(segment).iter().cloned());
        judge(problem, segment, levels, &mut out, &mut strongest);
        let diagonal = Diagonal::of(problem, segment);
        if diagonal.moving.is_empty() {
            let key = problem
                .terms_of(segment)
                .iter()
                .map(|term| (term.matrix, 0))
                .chain(diagonal.fixed.iter().map(|e| (usize::MAX, e.to_bits())))
                .collect();
            let made = known.entry(key).or_insert_with(|| products(problem, segment, levels, &diagonal.fixed, &mut matrices)).clone();
            for (left, right, matrix) in made {
                terms.push(product_term(problem, segment, left, right, matrix, None));
            }
        } else {
            moving_products(problem, segment, levels, &diagonal, &mut matrices, &mut terms);
        }
        segments.push(Segment { start: segment.start, length_s: segment.length_s, terms: first..terms.len() });
    }
    let problem = Problem {
        statics: Arc::new(statics),
        matrices: Arc::new(matrices),
        segments,
        terms,
        start: problem.start.clone(),
        jumps: Arc::new(problem.jumps.iter().map(|jump| within(jump, &gone)).collect()),
        moments: problem.moments.clone(),
    };
    (problem, out)
}

/// A jump without what leaves eliminated levels; what arrives there is refused before.
fn within(jump: &Jump, gone: &impl Fn(usize) -> bool) -> Jump {
    let cut = |matrix: &Matrix| {
        Matrix::from_fn(matrix.nrows(), matrix.ncols(), |j, k| if gone(k) { Complex64::default() } else { matrix[(j, k)] })
    };
    let turning = jump.turning.iter().map(|part| TurningPart { matrix: cut(&part.matrix), ..part.clone() }).collect();
    Jump { matrix: cut(&jump.matrix), turning, ..jump.clone() }
}

/// The diagonal of a segment: what is fixed, and what moves in time.
struct Diagonal {
    fixed: Vec<f64>,
    moving: Vec<(Vec<f64>, Term)>,
}

impl Diagonal {
    fn of(problem: &Problem, segment: &Segment) -> Diagonal {
        let mut fixed: Vec<f64> = problem.statics.diagonal().iter().map(|entry| entry.re).collect();
        let mut moving = Vec::new();
        for term in problem.terms_of(segment) {
            let own: Vec<Complex64> = problem.matrices[term.matrix].diagonal().iter().copied().collect();
            if own.iter().all(|entry| entry.norm() == 0.0) {
                continue;
            }
            if term.is_constant() && term.turns_hz == 0.0 {
                let c = term.slow(0.0) * cis_turns(-term.phase_turns);
                fixed.iter_mut().zip(&own).for_each(|(e, b)| *e += 2.0 * (c * b).re);
            } else {
                moving.push((own.iter().map(|b| b.re).collect(), term.clone()));
            }
        }
        Diagonal { fixed, moving }
    }

    /// E_j in rad/s.
    fn at(&self, j: usize, tau_s: f64) -> f64 {
        let moved =
            |(own, term): &(Vec<f64>, Term)| 2.0 * own[j] * (term.slow(tau_s) * cis_turns(-(term.phase_turns + term.turns_hz * tau_s))).re;
        self.fixed[j] + self.moving.iter().map(moved).sum::<f64>()
    }
}

/// 1/2 (1/(E_a - E_e) + 1/(E_b - E_e)), s.
fn weight(a: f64, b: f64, e: f64) -> f64 {
    0.5 * (1.0 / (a - e) + 1.0 / (b - e))
}

/// The factors that make up V_jk in a segment: (factor, value).
fn pieces(problem: &Problem, segment: &Segment, j: usize, k: usize) -> Vec<(Factor, Complex64)> {
    let mut found = Vec::new();
    if problem.statics[(j, k)].norm() > 0.0 {
        found.push((Factor { term: None, conjugate: false }, problem.statics[(j, k)]));
    }
    for (index, term) in problem.terms_of(segment).iter().enumerate() {
        let b = &problem.matrices[term.matrix];
        if b[(j, k)].norm() > 0.0 {
            found.push((Factor { term: Some(index), conjugate: false }, b[(j, k)]));
        }
        if b[(k, j)].norm() > 0.0 {
            found.push((Factor { term: Some(index), conjugate: true }, b[(k, j)].conj()));
        }
    }
    found
}

/// One matrix for each pair of factors; upper triangle, the diagonal halved (the adjoint adds the rest).
fn products(problem: &Problem, segment: &Segment, levels: &[usize], energies: &[f64], matrices: &mut Vec<Matrix>) -> Vec<Pairing> {
    let size = problem.dim();
    let mut made: BTreeMap<(Factor, Factor), Matrix> = BTreeMap::new();
    for (a, b, e) in triples(size, levels) {
        let w = weight(energies[a], energies[b], energies[e]) * if a == b { 0.5 } else { 1.0 };
        for (left, x) in pieces(problem, segment, a, e) {
            for (right, y) in pieces(problem, segment, e, b) {
                made.entry((left, right)).or_insert_with(|| Matrix::zeros(size, size))[(a, b)] += x * y * w;
            }
        }
    }
    made.into_iter()
        .map(|((left, right), matrix)| {
            matrices.push(matrix);
            (left, right, matrices.len() - 1)
        })
        .collect()
}

/// The same where the distances move in time: one term for each entry.
fn moving_products(
    problem: &Problem,
    segment: &Segment,
    levels: &[usize],
    diagonal: &Diagonal,
    matrices: &mut Vec<Matrix>,
    terms: &mut Vec<Term>,
) {
    let size = problem.dim();
    let shared = Arc::new(Diagonal { fixed: diagonal.fixed.clone(), moving: diagonal.moving.clone() });
    for (a, b, e) in triples(size, levels) {
        for (left, x) in pieces(problem, segment, a, e) {
            for (right, y) in pieces(problem, segment, e, b) {
                let mut matrix = Matrix::zeros(size, size);
                matrix[(a, b)] = x * y * if a == b { 0.5 } else { 1.0 };
                matrices.push(matrix);
                let distance = Distance { diagonal: shared.clone(), levels: [a, b, e] };
                terms.push(product_term(problem, segment, left, right, matrices.len() - 1, Some(distance)));
            }
        }
    }
}

/// Pairs a, b of levels that stay, a at or before b, with each level that goes.
fn triples(size: usize, levels: &[usize]) -> Vec<(usize, usize, usize)> {
    let stays: Vec<usize> = (0..size).filter(|j| !levels.contains(j)).collect();
    let pairs = stays.iter().enumerate().flat_map(|(k, a)| stays[k..].iter().map(|b| (*a, *b))).collect::<Vec<_>>();
    pairs.into_iter().flat_map(|(a, b)| levels.iter().map(move |e| (a, b, *e))).collect()
}

#[derive(Clone)]
struct Distance {
    diagonal: Arc<Diagonal>,
    levels: [usize; 3],
}

/// The product of two factors as an envelope.
struct Product {
    factors: Vec<(Envelope, bool)>,
    distance: Option<Distance>,
}

impl std::fmt::Debug for Product {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Product").field("factors", &self.factors).finish_non_exhaustive()
    }
}

impl Slow for Product {
    fn at(&self, tau_s: f64) -> Complex64 {
        let mut value = Complex64::from(1.0);
        for (envelope, conjugate) in &self.factors {
            let factor = envelope.at(tau_s);
            value *= if *conjugate { factor.conj() } else { factor };
        }
        if let Some(Distance { diagonal, levels: [a, b, e] }) = &self.distance {
            value *= weight(diagonal.at(*a, tau_s), diagonal.at(*b, tau_s), diagonal.at(*e, tau_s));
        }
        value
    }
}

/// The term of a product of two factors: turnings, phases and sweeps add, those of a conjugate with the other sign.
fn product_term(problem: &Problem, segment: &Segment, left: Factor, right: Factor, matrix: usize, distance: Option<Distance>) -> Term {
    let terms = problem.terms_of(segment);
    let mut made = Term { matrix, turns_hz: 0.0, phase_turns: 0.0, envelope: Envelope::Constant(Complex64::from(1.0)), chirps: Vec::new() };
    let mut factors = Vec::new();
    for factor in [left, right] {
        let Some(term) = factor.term.map(|index| &terms[index]) else { continue };
        let sign = if factor.conjugate { -1.0 } else { 1.0 };
        made.turns_hz += sign * term.turns_hz;
        made.phase_turns += sign * term.phase_turns;
        made.chirps.extend(term.chirps.iter().map(|chirp| Chirped { times: sign * chirp.times, ..chirp.clone() }));
        factors.push((term.envelope.clone(), factor.conjugate));
    }
    made.phase_turns -= made.phase_turns.round();
    made.chirps = super::rotating::joined(made.chirps);
    let constant = distance.is_none() && factors.iter().all(|(envelope, _)| matches!(envelope, Envelope::Constant(_)));
    let product = Product { factors, distance };
    made.envelope = if constant {
        Envelope::Constant(product.at(0.0))
    } else {
        Envelope::Smooth { shape: Arc::new(product), since_s: 0.0, scale: Complex64::from(1.0) }
    };
    made
}

/// Looks for the largest ratio and the strongest couplings in a segment.
fn judge(problem: &Problem, segment: &Segment, levels: &[usize], out: &mut Elimination, strongest: &mut f64) {
    let size = problem.dim();
    let still = problem.terms_of(segment).iter().all(Term::is_constant);
    let looks = if still { 0 } else { LOOKS };
    let diagonal = Diagonal::of(problem, segment);
    for look in 0..=looks {
        let tau_s = if looks == 0 { 0.0 } else { segment.length_s * f64::from(look) / f64::from(looks) };
        let h = problem.hamiltonian(segment, tau_s);
        let energies: Vec<f64> = (0..size).map(|j| diagonal.at(j, tau_s)).collect();
        let stays = (0..size).filter(|j| !levels.contains(j));
        let mut strength = 0.0;
        for (a, e) in stays.flat_map(|a| levels.iter().map(move |e| (a, *e))) {
            let v = h[(a, e)].norm();
            strength += v * v;
            if v > 0.0 {
                let ratio = v / (energies[a] - energies[e]).abs();
                out.validity = out.validity.max(ratio);
            }
        }
        if strength > *strongest {
            *strongest = strength;
            let added = |a: usize, b: usize| -> Complex64 {
                // a level that is not coupled may lie wherever it likes, at no distance too
                let coupled = levels.iter().filter(|e| h[(a, **e)].norm() > 0.0 && h[(**e, b)].norm() > 0.0);
                coupled.map(|e| h[(a, *e)] * h[(*e, b)] * weight(energies[a], energies[b], energies[*e])).sum()
            };
            let stays: Vec<usize> = (0..size).filter(|j| !levels.contains(j)).collect();
            out.shifts_hz = stays.iter().map(|a| (*a, added(*a, *a).re / RAD_PER_TURN)).collect();
            let pairs = stays.iter().enumerate().flat_map(|(k, a)| stays[k + 1..].iter().map(|b| (*a, *b))).collect::<Vec<_>>();
            out.couplings_hz = pairs.into_iter().map(|(a, b)| (a, b, added(a, b) / RAD_PER_TURN)).collect();
        }
    }
}

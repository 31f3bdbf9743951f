//! A problem whose envelopes are all held at 1: its segments and terms are few, and the entries of its matrices are all that moves.

use num_complex::Complex64;

use crate::problem::{Envelope, Matrix, Problem};
use crate::propagate::lanes::place_of;
use crate::units::cis_turns;

/// One term, but for its size.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Slot {
    /// Which of the matrices.
    pub matrix: usize,
    /// Turns per second, 0 where it stands still.
    pub turns_hz: f64,
    /// Phase at the start of its segment in turns, 0 where it stands still (its size then has it).
    pub phase_turns: f64,
}

/// What all points must have in common.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Frame {
    /// Length of each segment, s, and its slots.
    pub segments: Vec<(f64, Vec<Slot>)>,
    /// The matrices.
    pub matrices: Vec<Matrix>,
}

/// What all points must have in common; nothing where a term is not held.
pub(super) fn frame(flat: &Problem) -> Option<Frame> {
    let mut segments = Vec::with_capacity(flat.segments.len());
    for segment in &flat.segments {
        let mut slots = Vec::new();
        for term in flat.terms_of(segment) {
            if !term.is_constant() {
                return None;
            }
            let still = term.turns_hz == 0.0;
            slots.push(Slot { matrix: term.matrix, turns_hz: term.turns_hz, phase_turns: if still { 0.0 } else { term.phase_turns } });
        }
        segments.push((segment.length_s, slots));
    }
    Some(Frame { segments, matrices: flat.matrices.to_vec() })
}

/// Size of every term, in order, rad/s.
pub(super) fn sizes(flat: &Problem) -> Vec<Complex64> {
    let size = |term: &crate::problem::Term| match term.envelope {
        Envelope::Constant(value) if term.turns_hz == 0.0 => value * cis_turns(-term.phase_turns),
        Envelope::Constant(value) => value,
        Envelope::Smooth { .. } => Complex64::new(f64::NAN, 0.0),
    };
    flat.terms.iter().map(size).collect()
}

/// Appends the packed entries of A, then those of every channel: `size B + adjoint`, times i before the adjoint for a `quarter` one.
pub(super) fn packed(flat: &Problem, channels: &[(usize, bool)], entries: &mut Vec<f64>) {
    let dim = flat.dim();
    let start = entries.len();
    entries.resize(start + dim * dim * (1 + channels.len()), 0.0);
    let (statics, rest) = entries[start..].split_at_mut(dim * dim);
    pack(dim, statics, |j, k| flat.statics[(j, k)]);
    let sizes = sizes(flat);
    for ((term, quarter), into) in channels.iter().zip(rest.chunks_exact_mut(dim * dim)) {
        let b = &flat.matrices[flat.terms[*term].matrix];
        let size = if *quarter { sizes[*term] * Complex64::i() } else { sizes[*term] };
        pack(dim, into, |j, k| size * b[(j, k)] + (size * b[(k, j)]).conj());
    }
}

pub(super) fn pack(dim: usize, into: &mut [f64], entry: impl Fn(usize, usize) -> Complex64) {
    for j in 0..dim {
        into[j] = entry(j, j).re;
        for k in j + 1..dim {
            let value = entry(j, k);
            let at = place_of(dim, j, k);
            (into[at], into[at + 1]) = (value.re, value.im);
        }
    }
}

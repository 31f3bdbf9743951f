//! The elements into which the axis is cut: ends at every jump and kink, then halved where the wave functions ask for it.

use super::piece::Piece;
use crate::units::{kinetic_hz_m2, RAD_PER_TURN};

/// Fewest elements over the whole axis, so that no feature hides between the nodes of a first look.
const FEWEST: f64 = 10.0;
/// The largest k l/2 of an element, and points at which it is looked for.
const CARRIED: f64 = 3.6;
const LOOKS: usize = 8;

/// Elements side by side from left to right.
#[derive(Debug, Clone)]
pub struct Mesh {
    /// Ends of the elements, m, one more than there are elements.
    pub ends: Vec<f64>,
    /// The piece in which each element lies.
    pub piece: Vec<usize>,
    /// Whether the last end is the first one again.
    pub ring: bool,
}

impl Mesh {
    /// Every piece in equal elements, none longer than a tenth of the whole.
    pub fn coarse(pieces: &[Piece], ring: bool) -> Mesh {
        let (first, last) = (pieces[0].from_m, pieces[pieces.len() - 1].to_m);
        let longest = (last - first) / FEWEST;
        let (mut ends, mut piece) = (vec![first], Vec::new());
        for (index, part) in pieces.iter().enumerate() {
            let count = (((part.to_m - part.from_m) / longest) * (1.0 - 1e-9)).ceil().max(1.0) as usize;
            for k in 1..=count {
                let share = k as f64 / count as f64;
                ends.push(if k == count { part.to_m } else { part.from_m + share * (part.to_m - part.from_m) });
                piece.push(index);
            }
        }
        Mesh { ends, piece, ring }
    }

    /// Number of elements.
    pub fn count(&self) -> usize {
        self.piece.len()
    }

    /// Halved until `keep` states can be carried, by the wave number that the highest has where: k = sqrt((E - V)/kappa), E from the
    /// count of half waves, integral of k dx = pi keep (H. Weyl, Mathematische Annalen 71, 441 (1912)). A wave of k over an element
    /// of length l has Legendre coefficients j_n(k l/2), which at n = 20 are below 1e-12 up to k l/2 = 3.6.
    pub fn carrying(mut self, pieces: &[Piece], keep: usize, most: usize) -> Mesh {
        let Some(top) = self.top_hz(pieces, keep) else { return self };
        loop {
            let turn = |k: usize| {
                let half = 0.5 * (self.ends[k + 1] - self.ends[k]);
                self.looks(pieces, k).map(|(depth, kappa)| ((top - depth).max(0.0) / kappa).sqrt() * half).fold(0.0, f64::max)
            };
            let asks: Vec<bool> = (0..self.count()).map(|k| turn(k) > CARRIED).collect();
            if !asks.contains(&true) || self.count() > most {
                return self;
            }
            self = self.halved(&asks);
        }
    }

    /// Potential and kappa on a comb of an element.
    fn looks<'p>(&'p self, pieces: &'p [Piece], element: usize) -> impl Iterator<Item = (f64, f64)> + 'p {
        let (from, to, piece) = (self.ends[element], self.ends[element + 1], &pieces[self.piece[element]]);
        (0..LOOKS).map(move |j| {
            let x = from + (to - from) * (j as f64 + 0.5) / LOOKS as f64;
            (piece.energy_hz(x), kinetic_hz_m2(piece.mass_kg.value(x)))
        })
    }

    /// About the energy of the highest kept state, Hz; none where the potential has no value somewhere.
    fn top_hz(&self, pieces: &[Piece], keep: usize) -> Option<f64> {
        let all: Vec<(f64, f64, f64)> = (0..self.count())
            .flat_map(|k| {
                let width = (self.ends[k + 1] - self.ends[k]) / LOOKS as f64;
                self.looks(pieces, k).map(move |(depth, kappa)| (depth, kappa, width)).collect::<Vec<_>>()
            })
            .collect();
        if !all.iter().all(|(depth, kappa, _)| depth.is_finite() && kappa.is_finite() && *kappa > 0.0) {
            return None;
        }
        let wanted = 0.5 * RAD_PER_TURN * (keep as f64 + 1.0);
        let turns = |top: f64| all.iter().map(|(depth, kappa, width)| ((top - depth).max(0.0) / kappa).sqrt() * width).sum::<f64>();
        let bottom = all.iter().map(|look| look.0).fold(f64::INFINITY, f64::min);
        let mut step = all.iter().map(|look| look.1).fold(0.0, f64::max) / all.iter().map(|look| look.2).sum::<f64>().powi(2);
        while turns(bottom + step) < wanted && step.is_finite() {
            step *= 2.0;
        }
        let (mut low, mut high) = (bottom, bottom + step);
        for _ in 0..40 {
            let middle = 0.5 * (low + high);
            if turns(middle) < wanted {
                low = middle;
            } else {
                high = middle;
            }
        }
        high.is_finite().then_some(high)
    }

    /// The elements for which `asks` is true in halves, the others as they are.
    pub fn halved(&self, asks: &[bool]) -> Mesh {
        let (mut ends, mut piece) = (vec![self.ends[0]], Vec::new());
        for (k, asks) in asks.iter().enumerate() {
            if *asks {
                ends.push(0.5 * (self.ends[k] + self.ends[k + 1]));
                piece.push(self.piece[k]);
            }
            ends.push(self.ends[k + 1]);
            piece.push(self.piece[k]);
        }
        Mesh { ends, piece, ring: self.ring }
    }
}

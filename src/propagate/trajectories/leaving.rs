//! What jumps do to amplitudes in the picture of a segment: between them i d(psi)/dt = (H - i G/2) psi with G = sum of rate L+ L,
//! and at one psi becomes L psi.

use num_complex::Complex64;

use super::super::open::entries::{alike, entries, grain, Entry};
use super::super::picture::{turns, Picture};
use crate::problem::{Instant, Problem};
use crate::units::cis_turns;

/// An entry of G off the diagonal, or one on it that beats.
#[derive(Debug, Clone)]
pub(super) struct Beating {
    pub row: usize,
    pub column: usize,
    pub value: Complex64,
    pub turns_hz: f64,
    phase_turns: f64,
    lab_hz: f64,
}

impl Beating {
    /// Its value at `tau_s` from the start of a segment, 1/s.
    pub fn at(&self, start: Instant, tau_s: f64) -> Complex64 {
        let turned = self.phase_turns + start.turns(self.lab_hz) + turns(self.turns_hz, tau_s);
        if turned == 0.0 {
            self.value
        } else {
            self.value * cis_turns(-turned)
        }
    }

    /// Whether it is the same whenever a segment starts.
    pub fn knows_no_clock(&self) -> bool {
        self.lab_hz == 0.0
    }
}

/// One jump operator.
#[derive(Debug)]
struct Kick {
    entries: Vec<Entry>,
    alike: bool,
    keeps: bool,
}

/// All jumps in one picture.
#[derive(Debug)]
pub(super) struct Leaving {
    /// G on the diagonal where it stands still, 1/s.
    pub diagonal: Vec<f64>,
    /// The rest of G.
    pub beating: Vec<Beating>,
    kicks: Vec<Kick>,
}

impl Leaving {
    pub fn new(problem: &Problem, picture: &Picture) -> Leaving {
        let mut made = Leaving { diagonal: vec![0.0; picture.dim], beating: Vec::new(), kicks: Vec::new() };
        for jump in problem.jumps.iter().filter(|jump| jump.rate_per_s > 0.0) {
            let found = entries(jump, picture);
            for (e, other) in found.iter().flat_map(|e| found.iter().map(move |other| (e, other))) {
                if e.row == other.row {
                    made.add(e, other, picture);
                }
            }
            made.kicks.push(Kick { alike: alike(&found, picture), keeps: jump.keeps, entries: found });
        }
        made
    }

    /// conj(other) times e.
    fn add(&mut self, e: &Entry, other: &Entry, picture: &Picture) {
        let apart = e.turns_hz - other.turns_hz;
        let turns_hz = if apart.abs() <= grain(e, other, picture) { 0.0 } else { apart };
        let (phase_turns, lab_hz) = (e.phase_turns - other.phase_turns, e.lab_hz - other.lab_hz);
        let value = other.value.conj() * e.value;
        let (row, column) = (other.column, e.column);
        if row == column && turns_hz == 0.0 && phase_turns == 0.0 && lab_hz == 0.0 {
            self.diagonal[row] += value.re;
            return;
        }
        let same = |known: &&mut Beating| {
            (known.row, known.column) == (row, column)
                && known.turns_hz == turns_hz
                && known.phase_turns == phase_turns
                && known.lab_hz == lab_hz
        };
        match self.beating.iter_mut().find(same) {
            Some(known) => known.value += value,
            None => self.beating.push(Beating { row, column, value, turns_hz, phase_turns, lab_hz }),
        }
    }

    /// Whether G stands still.
    pub fn is_still(&self) -> bool {
        self.beating.iter().all(|entry| entry.turns_hz == 0.0)
    }

    /// Chooses a jump by its rate with `chance` between 0 and 1 and does it to `psi` at `tau_s`; the norm is 1 after it. Where what
    /// jumps is lost, gives false.
    pub fn jump(&self, chance: f64, start: Instant, tau_s: f64, psi: &mut [Complex64], room: &mut Vec<Complex64>) -> bool {
        room.resize(psi.len(), Complex64::default());
        let mut whole = 0.0;
        let mut shares = Vec::with_capacity(self.kicks.len());
        for kick in &self.kicks {
            let share = kick.act(start, tau_s, psi, room);
            whole += share;
            shares.push(share);
        }
        let mut left = chance * whole;
        let chosen = shares.iter().position(|share| {
            left -= share;
            left < 0.0
        });
        // rounding may leave a little of the last one that has a share at all
        let Some(chosen) = chosen.or_else(|| shares.iter().rposition(|share| *share > 0.0)) else { return true };
        let size = self.kicks[chosen].act(start, tau_s, psi, room).sqrt();
        psi.iter_mut().zip(room.iter()).for_each(|(psi, jumped)| *psi = jumped / size);
        self.kicks[chosen].keeps
    }
}

impl Kick {
    /// L psi into `room`, but for a common phase; gives its norm squared, 1/s.
    fn act(&self, start: Instant, tau_s: f64, psi: &[Complex64], room: &mut [Complex64]) -> f64 {
        if let [only] = self.entries[..] {
            let amplitude = only.value * psi[only.column];
            room.fill(Complex64::default());
            room[only.row] = amplitude;
            return amplitude.norm_sqr();
        }
        room.fill(Complex64::default());
        for e in &self.entries {
            let mut value = e.value;
            if !self.alike {
                value *= cis_turns(-(e.phase_turns + start.turns(e.lab_hz) + turns(e.turns_hz, tau_s)));
            }
            room[e.row] += value * psi[e.column];
        }
        room.iter().map(|z| z.norm_sqr()).sum()
    }
}

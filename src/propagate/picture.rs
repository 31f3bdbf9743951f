//! The turning diagonal picture of a segment, in which as little as possible moves.
//!
//! psi(tau) = exp(-2 pi i F tau) phi(tau) with a real diagonal F in Hz, exact: nothing is dropped. phi obeys the same equation
//! with A_jj - 2 pi F_j on the diagonal, and entry (j, k) of a term turning at f turns at nu = f - (F_j - F_k) instead.
//!
//! * [`Kind::Tied`]: each entry that turns at f ties F_j - F_k = f where j and k are not joined yet, entries of earlier terms
//!   first and larger ones first; entries that stand still tie F_j = F_k. One-sided drives on a tree of levels then stand still altogether.
//!   Where that is not the case, F = 0 is taken if less turns in it, unless the couplings are weak.
//! * [`Kind::Free`]: F_j = A_jj / (2 pi), nothing is left on the diagonal (the interaction picture); best for Runge-Kutta, whose
//!   error then grows with the couplings and not with the level distances.

use std::collections::HashMap;
use std::rc::Rc;

use nalgebra::Complex;
use num_complex::Complex64;

use super::asked::Demand;
use super::sampled::Sampled;
use crate::problem::{Instant, Matrix, Problem, Segment, Term};
use crate::units::{cis_turns, rad_s, RAD_PER_TURN};

/// Which picture is wanted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    /// As still as possible.
    Tied,
    /// Nothing on the diagonal.
    Free,
    /// F = 0: the frame of the problem itself.
    Rest,
    /// Tied, but no level further than half a turning from its own frequency.
    Folded,
    /// The same, or nothing on the diagonal where that is much calmer for all levels.
    Calm,
}

impl Kind {
    /// Where carriers are followed: all levels count where their propagator is wanted, else mostly the lowest of a ladder.
    pub fn followed(demand: &Demand) -> Kind {
        if demand.propagator {
            Kind::Calm
        } else {
            Kind::Folded
        }
    }
}

/// An entry (row, column) of a matrix; its adjoint is implied.
#[derive(Debug, Clone, Copy)]
pub(super) struct Part {
    pub row: usize,
    pub column: usize,
    /// No dimension for a term, rad/s for the static matrix.
    pub value: Complex64,
}

/// The entries of one term (or of the static matrix) that turn alike.
#[derive(Debug, Clone)]
pub(super) struct Turning {
    /// Index within the terms of the segment; `None` for the static matrix.
    pub term: Option<usize>,
    /// nu, in turns per second.
    pub turns_hz: f64,
    pub parts: Vec<Part>,
}

/// The picture of all segments with the same matrices and turning frequencies.
#[derive(Debug, Clone)]
pub(super) struct Picture {
    pub dim: usize,
    /// F in Hz.
    pub turns_hz: Vec<f64>,
    /// Whether F is zero throughout.
    pub at_rest: bool,
    /// What is left on the diagonal, rad/s.
    pub diagonal: Vec<f64>,
    pub turnings: Vec<Turning>,
    /// Largest |nu|, Hz.
    pub fastest_hz: f64,
    /// F less that of the tied picture, Hz, where waves are to take their turnings from that one.
    pub from_tied_hz: Option<Vec<f64>>,
    key: Vec<(usize, u64)>,
}

impl Picture {
    /// What an entry turns by for the waves, Hz.
    pub fn turns_of_waves_hz(&self, turning: &Turning, part: &Part) -> f64 {
        turning.turns_hz - self.from_tied_hz.as_ref().map_or(0.0, |left| left[part.column] - left[part.row])
    }

    /// Whether H of this picture is constant with these terms.
    pub fn constant(&self, terms: &[Term]) -> bool {
        self.fastest_hz == 0.0 && terms.iter().all(Term::is_constant)
    }

    /// The factor of one group at `tau_s`: rad/s for a term, no dimension for the static matrix.
    pub fn factor(turning: &Turning, terms: &[Term], tau_s: f64) -> Complex64 {
        let turned = turns(turning.turns_hz, tau_s);
        match turning.term {
            None => cis_turns(-turned),
            Some(k) => terms[k].slow(tau_s) * cis_turns(-(terms[k].phase_turns + turned)),
        }
    }

    /// H of the picture at `tau_s` into `h`, rad/s, column after column.
    pub fn fill(&self, terms: &[Term], tau_s: f64, h: &mut [Complex64]) {
        let n = self.dim;
        h.fill(Complex64::default());
        for (j, value) in self.diagonal.iter().enumerate() {
            h[j * (n + 1)] = Complex64::new(*value, 0.0);
        }
        for turning in &self.turnings {
            let factor = Self::factor(turning, terms, tau_s);
            for part in &turning.parts {
                let entry = factor * part.value;
                h[part.row + n * part.column] += entry;
                h[part.column + n * part.row] += entry.conj();
            }
        }
    }

    /// Multiplies rows by exp(-2 pi i F `tau_s`): from the picture to the frame of the problem. `columns` of length dim each.
    pub fn to_problem(&self, tau_s: f64, columns: &mut [Complex64]) {
        if self.at_rest {
            return;
        }
        for (j, f) in self.turns_hz.iter().enumerate() {
            let phase = cis_turns(-turns(*f, tau_s));
            for amplitude in columns.iter_mut().skip(j).step_by(self.dim) {
                *amplitude *= phase;
            }
        }
    }

    fn new(problem: &Problem, terms: &[Term], f_hz: Vec<f64>, key: Vec<(usize, u64)>) -> Self {
        let n = problem.dim();
        let a = &problem.statics;
        let mut picture = Picture {
            dim: n,
            at_rest: f_hz.iter().all(|f| *f == 0.0),
            diagonal: (0..n).map(|j| a[(j, j)].re - rad_s(f_hz[j])).collect(),
            turns_hz: f_hz,
            turnings: Vec::new(),
            fastest_hz: 0.0,
            from_tied_hz: None,
            key,
        };
        for column in 0..n {
            for row in 0..column {
                picture.add(None, 0.0, row, column, a[(row, column)]);
            }
        }
        for (k, term) in terms.iter().enumerate() {
            let b = &problem.matrices[term.matrix];
            for column in 0..n {
                for row in 0..n {
                    picture.add(Some(k), term.turns_hz, row, column, b[(row, column)]);
                }
            }
        }
        picture.fastest_hz = picture.turnings.iter().fold(0.0, |most, turning| turning.turns_hz.abs().max(most));
        picture
    }

    fn add(&mut self, term: Option<usize>, f: f64, row: usize, column: usize, value: Complex64) {
        if value == Complex64::default() {
            return;
        }
        let (upper, lower) = (self.turns_hz[row], self.turns_hz[column]);
        let grain = 4.0 * f64::EPSILON * upper.abs().max(lower.abs()).max(f.abs());
        let nu = f - (upper - lower);
        let nu = if nu.abs() <= grain { 0.0 } else { nu };
        let part = Part { row, column, value };
        let alike = self.turnings.iter_mut().rev().take_while(|turning| turning.term == term);
        match alike.into_iter().find(|turning| turning.turns_hz == nu) {
            Some(turning) => turning.parts.push(part),
            None => self.turnings.push(Turning { term, turns_hz: nu, parts: vec![part] }),
        }
    }
}

/// `hz` times `tau_s`, in turns; whole turns are taken off where they would cost digits.
pub(super) fn turns(hz: f64, tau_s: f64) -> f64 {
    let product = hz * tau_s;
    if product.abs() < 64.0 {
        product
    } else {
        Instant::at(tau_s).turns(hz)
    }
}

/// Makes pictures and keeps the latest few, since consecutive segments mostly repeat their turning frequencies.
#[derive(Debug)]
pub(super) struct Pictures<'a> {
    problem: &'a Problem,
    tied: Vec<Rc<Picture>>,
    free: Vec<Rc<Picture>>,
    rest: Vec<Rc<Picture>>,
    folded: Vec<Rc<Picture>>,
    calm: Vec<Rc<Picture>>,
    samples: HashMap<(usize, u64), Rc<Sampled>>,
    replaced: usize,
}

const KEPT: usize = 32;
const MOST_SAMPLED: usize = 65_536;
/// The interaction picture must be so much calmer than the folded one to be taken, as its couplings turn one by one.
const CALMER: f64 = 2.0;
/// H of the tied picture over the fastest turning at rest, below which the tied one is taken although more turns in it.
const WEAK: f64 = 0.1;

impl<'a> Pictures<'a> {
    pub fn new(problem: &'a Problem) -> Self {
        Pictures {
            problem,
            tied: Vec::new(),
            free: Vec::new(),
            rest: Vec::new(),
            folded: Vec::new(),
            calm: Vec::new(),
            samples: HashMap::new(),
            replaced: 0,
        }
    }

    /// What samples of the envelopes of a segment say.
    pub fn sampled(&mut self, segment: &Segment) -> Rc<Sampled> {
        let key = (segment.terms.start, segment.length_s.to_bits());
        if let Some(found) = self.samples.get(&key) {
            return found.clone();
        }
        let made = Rc::new(Sampled::of(self.problem.terms_of(segment), segment.length_s));
        if self.samples.len() < MOST_SAMPLED {
            self.samples.insert(key, made.clone());
        }
        made
    }

    /// The picture of a segment.
    pub fn of(&mut self, segment: &Segment, kind: Kind) -> Rc<Picture> {
        let problem = self.problem;
        let terms = problem.terms_of(segment);
        let kept = match kind {
            Kind::Tied => &self.tied,
            Kind::Free => &self.free,
            Kind::Rest => &self.rest,
            Kind::Folded => &self.folded,
            Kind::Calm => &self.calm,
        };
        let same = |picture: &Rc<Picture>| {
            picture.key.len() == terms.len()
                && picture.key.iter().zip(terms).all(|(key, term)| key.0 == term.matrix && key.1 == term.turns_hz.to_bits())
        };
        if let Some(found) = kept.iter().find(|picture| same(picture)) {
            return found.clone();
        }
        let key: Vec<_> = terms.iter().map(|term| (term.matrix, term.turns_hz.to_bits())).collect();
        let made = Rc::new(match kind {
            Kind::Free => Picture::new(problem, terms, interaction(&problem.statics), key),
            Kind::Rest => Picture::new(problem, terms, vec![0.0; problem.dim()], key),
            Kind::Folded => Picture::new(problem, terms, folded(problem, terms), key),
            Kind::Calm => calmest(problem, terms, key),
            Kind::Tied => self.stillest(segment, key),
        });
        let kept = match kind {
            Kind::Tied => &mut self.tied,
            Kind::Free => &mut self.free,
            Kind::Rest => &mut self.rest,
            Kind::Folded => &mut self.folded,
            Kind::Calm => &mut self.calm,
        };
        if kept.len() < KEPT {
            kept.push(made.clone());
        } else {
            self.replaced = (self.replaced + 1) % KEPT;
            kept[self.replaced] = made.clone();
        }
        made
    }
}

impl Pictures<'_> {
    /// The tied picture, or that at rest.
    fn stillest(&mut self, segment: &Segment, key: Vec<(usize, u64)>) -> Picture {
        let terms = self.problem.terms_of(segment);
        let tied = Picture::new(self.problem, terms, ties(self.problem, terms), key.clone());
        if tied.fastest_hz == 0.0 {
            return tied;
        }
        let resting = Picture::new(self.problem, terms, vec![0.0; self.problem.dim()], key);
        // weak couplings swing the state little in the tied picture, and what turns there averages out; at rest the
        // distances of the levels would swing it as often as the carrier turns
        let weak = super::load::size_hz(&tied, &self.sampled(segment).heights) < WEAK * resting.fastest_hz;
        if !weak && resting.fastest_hz < tied.fastest_hz {
            resting
        } else {
            tied
        }
    }
}

fn interaction(a: &Matrix) -> Vec<f64> {
    a.diagonal().iter().map(|value: &Complex<f64>| value.re / RAD_PER_TURN).collect()
}

/// F of the tied picture, moved by whole turnings of the slowest carrier that touches a level to within half of one of the
/// frequency of the level itself: then no wave of one carrier comes nearer to standing still than that.
fn folded(problem: &Problem, terms: &[Term]) -> Vec<f64> {
    let mut f_hz = ties(problem, terms);
    for (j, f) in f_hz.iter_mut().enumerate() {
        let touches = |term: &&Term| {
            let b = &problem.matrices[term.matrix];
            term.turns_hz != 0.0 && (0..b.ncols()).any(|k| b[(j, k)] != Complex64::default() || b[(k, j)] != Complex64::default())
        };
        let carrier = terms.iter().filter(touches).map(|term| term.turns_hz.abs()).fold(f64::INFINITY, f64::min);
        if carrier.is_finite() {
            *f += carrier * ((problem.statics[(j, j)].re / RAD_PER_TURN - *f) / carrier).round();
        }
    }
    f_hz
}

/// The folded picture, or the interaction picture where that leaves much less to turn: up a long ladder a small detuning of every step
/// adds up on the diagonal, while no coupling turns faster than one step.
fn calmest(problem: &Problem, terms: &[Term], key: Vec<(usize, u64)>) -> Picture {
    let (free, folded) = (interaction(&problem.statics), folded(problem, terms));
    let left: Vec<f64> = free.iter().zip(&folded).map(|(energy, f)| energy - f).collect();
    let (low, high) = left.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), left| (low.min(*left), high.max(*left)));
    let mut slow: f64 = 0.0;
    let mut look = |matrix: &Matrix, carrier_hz: f64| {
        for column in 0..matrix.ncols() {
            for row in (0..matrix.nrows()).filter(|row| *row != column && matrix[(*row, column)] != Complex64::default()) {
                let turns_hz = (carrier_hz - (free[row] - free[column])).abs();
                // what turns like the carrier follows in either picture
                if carrier_hz == 0.0 || turns_hz < 0.5 * carrier_hz.abs() {
                    slow = slow.max(turns_hz);
                }
            }
        }
    };
    look(&problem.statics, 0.0);
    terms.iter().for_each(|term| look(&problem.matrices[term.matrix], term.turns_hz));
    if CALMER * slow < 0.5 * (high - low) {
        let tied = ties(problem, terms);
        let left = free.iter().zip(&tied).map(|(energy, f)| energy - f).collect();
        Picture { from_tied_hz: Some(left), ..Picture::new(problem, terms, free, key) }
    } else {
        Picture::new(problem, terms, folded, key)
    }
}

/// A wish F_row - F_column = f.
struct Tie {
    row: usize,
    column: usize,
    f: f64,
    size: f64,
}

/// F of the tied picture: components of joined levels, each then moved as a whole so that its diagonal is 0 on average.
fn ties(problem: &Problem, terms: &[Term]) -> Vec<f64> {
    let n = problem.dim();
    let a = &problem.statics;
    let mut component: Vec<usize> = (0..n).collect();
    let mut f_hz = vec![0.0; n];
    let mut join = |mut wishes: Vec<Tie>| {
        wishes.sort_by(|x, y| y.size.total_cmp(&x.size));
        for tie in wishes {
            let (keep, moved) = (component[tie.column], component[tie.row]);
            if keep == moved {
                continue;
            }
            let shift = f_hz[tie.column] + tie.f - f_hz[tie.row];
            for j in 0..n {
                if component[j] == moved {
                    component[j] = keep;
                    f_hz[j] += shift;
                }
            }
        }
    };
    let mut still = Vec::new();
    for term in terms {
        let b = &problem.matrices[term.matrix];
        let mut wishes = Vec::new();
        for column in 0..n {
            for row in 0..n {
                let size = b[(row, column)].norm();
                if row == column || size == 0.0 {
                    continue;
                }
                if term.turns_hz == 0.0 {
                    still.push(Tie { row, column, f: 0.0, size: 0.0 });
                } else if b[(column, row)] == Complex64::default() || (a[(row, row)].re - a[(column, column)].re) * term.turns_hz > 0.0 {
                    wishes.push(Tie { row, column, f: term.turns_hz, size });
                }
            }
        }
        join(wishes);
    }
    for column in 0..n {
        for row in 0..column {
            if a[(row, column)] != Complex64::default() {
                still.push(Tie { row, column, f: 0.0, size: a[(row, column)].norm() });
            }
        }
    }
    join(still);
    if component.iter().any(|c| *c != component[0]) {
        for c in 0..n {
            let members: Vec<usize> = (0..n).filter(|j| component[*j] == c).collect();
            let offset = members.iter().map(|j| a[(*j, *j)].re / RAD_PER_TURN - f_hz[*j]).sum::<f64>() / members.len().max(1) as f64;
            for j in members {
                f_hz[j] += offset;
            }
        }
    }
    f_hz
}

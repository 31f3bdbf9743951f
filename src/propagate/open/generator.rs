//! The generator G of d(x)/dt = G(t) x, x the real coordinates of a density matrix in the picture of a segment, 1/s.
//!
//! G(tau) = S + sum over movers of Re f(tau) R + Im f(tau) I with constant sparse real matrices. f is the factor of a group of
//! entries of H that turn alike (rad/s), or the beat exp(-2 pi i ..) of two entries of one jump operator that turn differently in
//! the picture. Jumps with a single entry, and diagonal ones, stand still in every picture.
//!
//! Where times spent are wanted, x is followed by the integrals of the populations over the time, divided by a unit of time: rows
//! of G like any other, so that every method gives them.

use std::collections::BTreeMap;
use std::f64::consts::{FRAC_1_SQRT_2, SQRT_2};
use std::rc::Rc;

use num_complex::Complex64;

use super::super::picture::{turns, Picture};
use super::coordinates::{count, place};
use super::entries::{alike, entries, grain, Entry};
use crate::problem::{Instant, Jump, Matrix, Problem, Term};
use crate::units::cis_turns;

/// Where the factor of a mover comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Source {
    /// A term of the segment.
    Term(usize),
    /// The static part of H.
    Static,
    /// Two entries of a jump operator: difference of their phases in turns at time zero, and of their frequencies, Hz.
    Beat { phase_turns: f64, lab_hz: f64 },
}

/// A part of G with one factor.
#[derive(Debug, Clone)]
struct Mover {
    source: Source,
    turns_hz: f64,
    /// Place among the entries of G, what the real part of the factor brings, and what the imaginary part.
    entries: Vec<(usize, [f64; 2])>,
}

/// G in one picture, as compressed rows.
#[derive(Debug, Clone)]
pub(super) struct Generator {
    /// Its number among those made for a problem.
    pub number: u64,
    /// Length of x, times spent included.
    pub size: usize,
    /// Fastest |turning| of a mover, Hz.
    pub fastest_hz: f64,
    rows: Vec<usize>,
    columns: Vec<usize>,
    still: Vec<f64>,
    movers: Vec<Mover>,
}

/// Collects superoperator entries: x'_target += z x_source on matrix units becomes rows of real coordinates.
struct Builder {
    dim: usize,
    entries: BTreeMap<(usize, usize), [f64; 2]>,
}

impl Builder {
    fn new(dim: usize) -> Builder {
        Builder { dim, entries: BTreeMap::new() }
    }

    fn put(&mut self, row: usize, column: usize, part: usize, value: f64) {
        if value != 0.0 {
            self.entries.entry((row, column)).or_insert([0.0; 2])[part] += value;
        }
    }

    /// rho'_target += f z rho_source, or conj(f) z; the caller adds the adjoint, whose part below the diagonal is implied.
    fn add(&mut self, target: (usize, usize), source: (usize, usize), z: Complex64, conjugate: bool) {
        if target.0 > target.1 {
            return;
        }
        let i = if conjugate { -Complex64::i() } else { Complex64::i() };
        for (part, z) in [(0, z), (1, z * i)] {
            // rho_source = a x + i b y
            let (at, a, b) = match source.0.cmp(&source.1) {
                std::cmp::Ordering::Equal => (source.0, 1.0, 0.0),
                std::cmp::Ordering::Less => (place(self.dim, source.0, source.1), FRAC_1_SQRT_2, FRAC_1_SQRT_2),
                std::cmp::Ordering::Greater => (place(self.dim, source.1, source.0), FRAC_1_SQRT_2, -FRAC_1_SQRT_2),
            };
            let (to, scale) = if target.0 == target.1 { (target.0, 1.0) } else { (place(self.dim, target.0, target.1), SQRT_2) };
            self.put(to, at, part, scale * a * z.re);
            if b != 0.0 {
                self.put(to, at + 1, part, -scale * b * z.im);
            }
            if target.0 != target.1 {
                self.put(to + 1, at, part, scale * a * z.im);
                if b != 0.0 {
                    self.put(to + 1, at + 1, part, scale * b * z.re);
                }
            }
        }
    }

    /// -i [f v |a><b| + adjoint, rho].
    fn commutator(&mut self, a: usize, b: usize, v: Complex64) {
        let forth = Complex64::new(v.im, -v.re);
        for k in 0..self.dim {
            self.add((a, k), (b, k), forth, false);
            self.add((k, a), (k, b), forth.conj(), true);
            self.add((b, k), (a, k), Complex64::new(-v.im, -v.re), true);
            self.add((k, b), (k, a), Complex64::new(-v.im, v.re), false);
        }
    }
}

/// Movers under construction, found by their factor.
struct Parts {
    still: Builder,
    beats: Vec<(Source, f64, Builder)>,
}

impl Parts {
    /// Where to put what goes with the factor of `e` over that of `other`; true where it is the conjugate of the one kept.
    fn of(&mut self, e: &Entry, other: &Entry, picture: &Picture) -> (&mut Builder, bool) {
        let mut turns_hz = e.turns_hz - other.turns_hz;
        if turns_hz.abs() <= grain(e, other, picture) {
            turns_hz = 0.0;
        }
        let (phase_turns, lab_hz) = (e.phase_turns - other.phase_turns, e.lab_hz - other.lab_hz);
        if turns_hz == 0.0 && phase_turns == 0.0 && lab_hz == 0.0 {
            return (&mut self.still, false);
        }
        let conjugate = turns_hz < 0.0 || (turns_hz == 0.0 && (lab_hz < 0.0 || (lab_hz == 0.0 && phase_turns < 0.0)));
        let sign = if conjugate { -1.0 } else { 1.0 };
        let source = Source::Beat { phase_turns: sign * phase_turns, lab_hz: sign * lab_hz };
        let key = (source, sign * turns_hz);
        let at = match self.beats.iter().position(|(known, hz, _)| (*known, *hz) == key) {
            Some(at) => at,
            None => {
                self.beats.push((source, key.1, Builder::new(picture.dim)));
                self.beats.len() - 1
            }
        };
        (&mut self.beats[at].2, conjugate)
    }

    /// One jump operator.
    fn jump(&mut self, jump: &Jump, picture: &Picture) {
        let dim = picture.dim;
        let found = entries(jump, picture);
        if jump.keeps && jump.turning.is_empty() && found.iter().all(|e| e.row == e.column) {
            // of a diagonal L each coherence loses half the squared difference, formed without cancellation
            let mut l = vec![Complex64::default(); dim];
            found.iter().for_each(|e| l[e.row] = e.value);
            for a in 0..dim {
                for b in (0..dim).filter(|b| *b != a) {
                    let z = Complex64::new(-0.5 * (l[a] - l[b]).norm_sqr(), (l[a] * l[b].conj()).im);
                    self.still.add((a, b), (a, b), z, false);
                }
            }
            return;
        }
        if alike(&found, picture) {
            self.still_jump(jump, &found, dim);
            return;
        }
        for e in &found {
            for other in &found {
                let (builder, conjugate) = self.of(e, other, picture);
                let z = e.value * other.value.conj();
                if jump.keeps {
                    builder.add((e.row, other.row), (e.column, other.column), z, conjugate);
                }
                if e.row == other.row {
                    // (L+ L) from `other` (adjoint) and `e`
                    let half = z * -0.5;
                    for k in 0..dim {
                        builder.add((other.column, k), (e.column, k), half, conjugate);
                        builder.add((k, e.column), (k, other.column), half, conjugate);
                    }
                }
            }
        }
    }
}

impl Parts {
    /// A jump operator whose entries turn alike.
    fn still_jump(&mut self, jump: &Jump, entries: &[Entry], dim: usize) {
        let mut l = Matrix::zeros(dim, dim);
        for e in entries {
            l[(e.row, e.column)] += e.value;
            if jump.keeps {
                for other in entries {
                    self.still.add((e.row, other.row), (e.column, other.column), e.value * other.value.conj(), false);
                }
            }
        }
        let gone = l.adjoint() * &l;
        for b in 0..dim {
            for a in (0..dim).filter(|a| gone[(*a, b)] != Complex64::default()) {
                let half = gone[(a, b)] * -0.5;
                for k in 0..dim {
                    self.still.add((a, k), (b, k), half, false);
                    self.still.add((k, b), (k, a), half, false);
                }
            }
        }
    }
}

impl Generator {
    /// The generator of `problem` in a picture with the terms it was made for; with times spent in `unit_s` where given.
    fn new(problem: &Problem, picture: &Picture, unit_s: Option<f64>) -> Generator {
        let dim = picture.dim;
        let mut parts = Parts { still: Builder::new(dim), beats: Vec::new() };
        for a in 0..dim {
            for b in (0..dim).filter(|b| *b != a) {
                let apart = picture.diagonal[a] - picture.diagonal[b];
                parts.still.add((a, b), (a, b), Complex64::new(0.0, -apart), false);
            }
        }
        for jump in problem.jumps.iter().filter(|jump| jump.rate_per_s > 0.0) {
            parts.jump(jump, picture);
        }
        let mut movers = Vec::new();
        for turning in &picture.turnings {
            let mut builder = Builder::new(dim);
            turning.parts.iter().for_each(|part| builder.commutator(part.row, part.column, part.value));
            if turning.term.is_none() && turning.turns_hz == 0.0 {
                builder.entries.iter().for_each(|((row, column), value)| parts.still.put(*row, *column, 0, value[0]));
                continue;
            }
            movers.push((turning.term.map_or(Source::Static, Source::Term), turning.turns_hz, builder));
        }
        movers.extend(parts.beats);
        if let Some(unit_s) = unit_s {
            (0..dim).for_each(|j| parts.still.put(count(dim) + j, j, 0, 1.0 / unit_s));
        }
        Generator::packed(count(dim) + if unit_s.is_some() { dim } else { 0 }, &parts.still, movers)
    }

    fn packed(size: usize, still: &Builder, movers: Vec<(Source, f64, Builder)>) -> Generator {
        let mut places: BTreeMap<(usize, usize), usize> = BTreeMap::new();
        for key in still.entries.keys().chain(movers.iter().flat_map(|(.., builder)| builder.entries.keys())) {
            places.insert(*key, 0);
        }
        let (mut rows, mut columns) = (vec![0; size + 1], Vec::with_capacity(places.len()));
        for (at, ((row, column), place)) in places.iter_mut().enumerate() {
            *place = at;
            rows[row + 1] += 1;
            columns.push(*column);
        }
        for row in 0..size {
            rows[row + 1] += rows[row];
        }
        let mut values = vec![0.0; columns.len()];
        still.entries.iter().for_each(|(key, value)| values[places[key]] = value[0]);
        let fastest_hz = movers.iter().fold(0.0, |most: f64, (_, hz, _)| most.max(hz.abs()));
        let movers = movers
            .into_iter()
            .map(|(source, turns_hz, builder)| Mover {
                source,
                turns_hz,
                entries: builder.entries.iter().map(|(key, value)| (places[key], *value)).collect(),
            })
            .collect();
        Generator { number: 0, size, fastest_hz, rows, columns, still: values, movers }
    }

    /// Entries that may differ from zero.
    pub fn entries(&self) -> usize {
        self.columns.len()
    }

    /// Whether beats make G depend on when a segment starts.
    pub fn knows_the_clock(&self) -> bool {
        self.movers.iter().any(|mover| matches!(mover.source, Source::Beat { lab_hz, .. } if lab_hz != 0.0))
    }

    /// Whether G does not change within a segment with these terms.
    pub fn constant(&self, terms: &[Term]) -> bool {
        self.fastest_hz == 0.0 && self.movers.iter().all(|mover| !matches!(mover.source, Source::Term(k) if !terms[k].is_constant()))
    }

    /// The entries of G at `tau_s` from the `start` of a segment, 1/s.
    pub fn at(&self, terms: &[Term], start: Instant, tau_s: f64, values: &mut Vec<f64>) {
        values.clear();
        values.extend_from_slice(&self.still);
        // the groups of one term follow each other
        let mut known = None;
        for mover in &self.movers {
            let turned = turns(mover.turns_hz, tau_s);
            let factor = match mover.source {
                Source::Static => cis_turns(-turned),
                Source::Beat { phase_turns, lab_hz } => cis_turns(-(phase_turns + start.turns(lab_hz) + turned)),
                Source::Term(k) => {
                    let slow = match known {
                        Some((of, slow)) if of == k => slow,
                        _ => terms[k].slow(tau_s),
                    };
                    known = Some((k, slow));
                    let phase = terms[k].phase_turns + turned;
                    if phase == 0.0 {
                        slow
                    } else {
                        slow * cis_turns(-phase)
                    }
                }
            };
            for (at, [re, im]) in &mover.entries {
                values[*at] += factor.re * re + factor.im * im;
            }
        }
    }

    /// `to` = G `from` for each column of `size` numbers.
    pub fn act(&self, values: &[f64], from: &[f64], to: &mut [f64]) {
        for (to, from) in to.chunks_exact_mut(self.size).zip(from.chunks_exact(self.size)) {
            for (out, range) in to.iter_mut().zip(self.rows.windows(2)) {
                let row = range[0]..range[1];
                *out = values[row.clone()].iter().zip(&self.columns[row]).map(|(value, column)| value * from[*column]).sum();
            }
        }
    }

    /// Adds `scale` G to a dense matrix, column after column.
    pub fn dense(&self, values: &[f64], scale: f64, into: &mut [f64]) {
        for (row, range) in self.rows.windows(2).enumerate() {
            for at in range[0]..range[1] {
                into[row + self.size * self.columns[at]] += values[at] * scale;
            }
        }
    }

    /// Coordinates that hang together, block by block.
    pub fn blocks(&self) -> Vec<Vec<usize>> {
        let mut block: Vec<usize> = (0..self.size).collect();
        fn root(block: &mut [usize], mut at: usize) -> usize {
            while block[at] != at {
                block[at] = block[block[at]];
                at = block[at];
            }
            at
        }
        for (row, range) in self.rows.windows(2).enumerate() {
            for column in &self.columns[range[0]..range[1]] {
                let (a, b) = (root(&mut block, row), root(&mut block, *column));
                block[a.max(b)] = a.min(b);
            }
        }
        let mut found: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
        for at in 0..self.size {
            let first = root(&mut block, at);
            found.entry(first).or_default().push(at);
        }
        found.into_values().collect()
    }

    /// The rows and columns of one block, dense.
    pub fn block(&self, values: &[f64], block: &[usize]) -> nalgebra::DMatrix<f64> {
        let mut dense = nalgebra::DMatrix::zeros(block.len(), block.len());
        for (to, row) in block.iter().enumerate() {
            for at in self.rows[*row]..self.rows[row + 1] {
                if let Ok(from) = block.binary_search(&self.columns[at]) {
                    dense[(to, from)] += values[at];
                }
            }
        }
        dense
    }

    /// Largest sum of moduli in a column, a bound of the growth of x in the sum norm, 1/s.
    pub fn bound(&self, values: &[f64], room: &mut Vec<f64>) -> f64 {
        room.clear();
        room.resize(self.size, 0.0);
        for (value, column) in values.iter().zip(&self.columns) {
            room[*column] += value.abs();
        }
        room.iter().fold(0.0, |most: f64, sum| if *sum > most || sum.is_nan() { *sum } else { most })
    }
}

/// Makes generators and keeps those of the pictures that are kept.
#[derive(Debug)]
pub(super) struct Generators<'a> {
    problem: &'a Problem,
    unit_s: Option<f64>,
    kept: Vec<(Rc<Picture>, Rc<Generator>)>,
    next: usize,
    made: u64,
}

const KEPT: usize = 64;

impl<'a> Generators<'a> {
    /// For a problem, with times spent in `unit_s` where given.
    pub fn new(problem: &'a Problem, unit_s: Option<f64>) -> Self {
        Generators { problem, unit_s, kept: Vec::new(), next: 0, made: 0 }
    }

    /// The generator in a picture.
    pub fn of(&mut self, picture: &Rc<Picture>) -> Rc<Generator> {
        if let Some((_, found)) = self.kept.iter().find(|(known, _)| Rc::ptr_eq(known, picture)) {
            return found.clone();
        }
        self.made += 1;
        let made = Rc::new(Generator { number: self.made, ..Generator::new(self.problem, picture, self.unit_s) });
        let entry = (picture.clone(), made.clone());
        if self.kept.len() < KEPT {
            self.kept.push(entry);
        } else {
            self.next = (self.next + 1) % KEPT;
            self.kept[self.next] = entry;
        }
        made
    }
}

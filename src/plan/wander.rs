//! A point whose numbers move within a shot: its sequence cut into cells of time, in each of which they stand still.
//!
//! What moves is the static matrix and the size of envelopes. The static matrix enters as terms of its own, one for each entry that
//! moves, with a constant coefficient in each cell; the terms of a drive are scaled cell by cell. Everything else, frames included,
//! is that of the point.

use std::collections::hash_map::Entry::Vacant;
use std::collections::HashMap;
use std::sync::Arc;

use num_complex::Complex64;

use super::shaken::Shaken;
use super::{part_key, statics, PartKey, Point, Touched};
use crate::config::document::Document;
use crate::config::drives::Drive;
use crate::config::messages::{Fault, Mistake};
use crate::config::settings::Frame;
use crate::drive::segments::{cut, owners, PulseParts};
use crate::model;
use crate::model::surroundings::Surroundings;
use crate::problem::{Chirped, Envelope, Instant, Matrix, Moment, Problem, Segment, Term};
use crate::units::rad_s;

/// The cells of a sequence: each stretch between two ends of segments or recorded moments, cut into equal parts.
#[derive(Debug, Clone, PartialEq)]
pub struct Cells {
    /// Segment of the uncut sequence, seconds from its start, length in s.
    cells: Vec<(usize, f64, f64)>,
    parts: u32,
}

impl Cells {
    /// Every stretch of a problem in `parts` parts.
    pub fn of(problem: &Problem, parts: u32) -> Cells {
        let mut cells = Vec::new();
        let mut next = 0;
        for (index, segment) in problem.segments.iter().enumerate() {
            let mut bounds = vec![0.0];
            while let Some(moment) = problem.moments.get(next).filter(|moment| moment.segment <= index) {
                let last = bounds[bounds.len() - 1];
                // what lies apart by rounding alone makes no cell
                if moment.offset_s - last > 1e-12 * segment.length_s && segment.length_s - moment.offset_s > 1e-12 * segment.length_s {
                    bounds.push(moment.offset_s);
                }
                next += 1;
            }
            bounds.push(segment.length_s);
            for pair in bounds.windows(2) {
                let at = |part: u32| pair[0] + (pair[1] - pair[0]) * f64::from(part) / f64::from(parts);
                cells.extend((0..parts).map(|part| (index, at(part), at(part + 1) - at(part))));
            }
        }
        Cells { cells, parts }
    }

    /// Whether these are the cells of another problem too.
    pub fn fit(&self, problem: &Problem) -> bool {
        *self == Cells::of(problem, self.parts)
    }

    /// How many.
    pub fn count(&self) -> usize {
        self.cells.len()
    }

    /// Lengths, s.
    pub fn lengths_s(&self) -> Vec<f64> {
        self.cells.iter().map(|(.., length_s)| *length_s).collect()
    }
}

/// A point that can be made to wander on given cells.
#[derive(Debug, Clone)]
pub struct Wanderer<'p> {
    document: &'p Document,
    cells: Cells,
    touched: Touched,
    point: Point<'p>,
    /// Terms of a pulse of unit size and the pulse that each belongs to, where the size of an envelope moves.
    unit: Option<(Vec<Term>, Vec<usize>)>,
    /// The static matrix per unit of each number, rad/s, where it is linear in them.
    slopes: Option<Vec<(u32, Matrix)>>,
    /// The problem cut into cells, in its frame, where no size moves.
    still: Option<Problem>,
    /// By how much H changes with the numbers about as far out as they go, rad/s.
    reach_rad_s: f64,
}

impl<'p> Wanderer<'p> {
    /// From a point that slow noise may have moved; `numbers` are those that will wander, each with about how far.
    pub fn new(shaken: &Shaken<'p>, numbers: &[(u32, f64)], cells: Cells) -> Result<Wanderer<'p>, Mistake> {
        let document = shaken.document;
        let indices: Vec<u32> = numbers.iter().map(|(index, _)| *index).collect();
        let touched = Touched::by(document, document.tape.shaken(&indices), Vec::new());
        let moved = |register| touched.registers.contains(&register);
        let calibrated = |drive: &Drive| {
            drive.calibration.is_some_and(|calibration| moved(calibration.rabi.register) || moved(calibration.volts.register))
        };
        let sizes = document.envelopes.iter().any(|envelope| moved(envelope.size.register)) || document.drives.iter().any(calibrated);
        let mut wanderer =
            Wanderer { document, cells, touched, point: shaken.point.clone(), unit: None, slopes: None, still: None, reach_rad_s: 0.0 };
        if wanderer.touched.statics {
            wanderer.slopes = wanderer.slopes(numbers)?;
        }
        wanderer.judge(numbers)?;
        wanderer.reach_rad_s += wanderer.size_reach(numbers)?;
        if sizes {
            wanderer.unit = Some(wanderer.unit_terms()?);
        } else {
            wanderer.still = Some(wanderer.framed(&[])?);
        }
        Ok(wanderer)
    }

    /// What moves off the diagonal would have to turn with a rotating frame, and a basis of eigenstates would turn with the noise.
    fn judge(&mut self, numbers: &[(u32, f64)]) -> Result<(), Mistake> {
        if self.touched.surroundings && self.moved(numbers, Self::rates)? != self.rates()? {
            return Err(self.refused(numbers, "the rate of a decay or of a dephasing"));
        }
        if !self.touched.statics {
            return Ok(());
        }
        let written = self.statics()?;
        let moved = self.moved(numbers, Self::statics)? - written;
        self.reach_rad_s = moved.norm();
        let size = moved.nrows();
        let off = (0..size).any(|k| (0..k).any(|j| moved[(j, k)].norm() > 1e-12 * moved.camax()));
        let what = match (&self.document.frame, self.point.built.basis.is_some()) {
            (_, true) => "a basis of eigenstates",
            (Frame::Rotating(_), _) if off => "an entry off the diagonal, in a rotating frame",
            _ => return Ok(()),
        };
        Err(self.refused(numbers, what))
    }

    /// Rates of the jumps, 1/s; a bath looks at the gaps as they are without noise.
    fn rates(&self) -> Result<Vec<f64>, Mistake> {
        let point = &self.point;
        let surroundings = Surroundings::new(self.document, &point.built, &point.values, &point.energies_hz)?;
        Ok(surroundings.jumps.iter().map(|jump| jump.rate_per_s).collect())
    }

    fn refused(&self, numbers: &[(u32, f64)], what: &str) -> Mistake {
        let entry = self.document.noise.iter().find(|entry| entry.moves.iter().any(|moved| numbers.iter().any(|(n, _)| *n == moved.index)));
        let (place, name) = entry.map_or_else(Default::default, |entry| (entry.place, entry.moves[0].name.clone()));
        Mistake::error(place, Fault::CorrelatedMoves { name, what: what.to_string() })
    }

    /// By how much the couplings change with the numbers about as far out as they go, rad/s.
    fn size_reach(&mut self, numbers: &[(u32, f64)]) -> Result<f64, Mistake> {
        let (written, moved) = (self.sizes()?, self.moved(numbers, Self::sizes)?);
        let apart = |(key, size): (&PartKey, &f64)| {
            let change = size - written.get(key).copied().unwrap_or(0.0);
            2.0 * rad_s(change.abs()) * self.point.couplings[key.0].turning.norm()
        };
        Ok(moved.iter().map(apart).sum())
    }

    /// The cells.
    pub fn cells(&self) -> &Cells {
        &self.cells
    }

    /// By how much H changes with the numbers about as far out as they go, rad/s.
    pub fn reach_rad_s(&self) -> f64 {
        self.reach_rad_s
    }

    /// The problem with the amounts that `amounts` appends for each cell added to the numbers: (number, SI).
    pub fn along(&mut self, amounts: impl Fn(usize, &mut Vec<(u32, f64)>)) -> Result<Problem, Mistake> {
        let mut list = Vec::new();
        let mut moved = Vec::with_capacity(self.cells.cells.len());
        for cell in 0..self.cells.cells.len() {
            list.clear();
            amounts(cell, &mut list);
            moved.push(list.clone());
        }
        let mut problem = match &self.still {
            Some(still) => still.clone(),
            None => {
                let sizes = moved.iter().map(|list| self.moved(list, Self::sizes)).collect::<Result<Vec<_>, _>>()?;
                self.framed(&sizes)?
            }
        };
        match (&self.slopes, self.touched.statics) {
            (Some(slopes), _) => add_linear(&mut problem, slopes, &moved),
            (None, true) => {
                let statics = moved.iter().map(|list| self.moved(list, Self::statics)).collect::<Result<Vec<_>, _>>()?;
                add_statics(&mut problem, &statics, &self.statics()?);
            }
            (None, false) => {}
        }
        Ok(problem)
    }

    /// What something comes to with amounts added to the numbers.
    fn moved<T>(&mut self, list: &[(u32, f64)], find: impl Fn(&Self) -> Result<T, Mistake>) -> Result<T, Mistake> {
        let (values, shift) = (self.point.values.clone(), self.point.shift.clone());
        for (number, amount) in list {
            self.point.shift[*number as usize] += amount;
        }
        let point = &mut self.point;
        self.document.tape.replay_shaken(&self.touched.registers, &point.set, &point.shift, &mut point.values);
        let found = find(self);
        (self.point.values, self.point.shift) = (values, shift);
        found
    }

    /// The static matrix, rad/s.
    fn statics(&self) -> Result<Matrix, Mistake> {
        Ok(statics(&model::build(self.document, &self.point.values)?).0)
    }

    /// Size of c at envelope 1 of each pulse in use, Hz.
    fn sizes(&self) -> Result<HashMap<PartKey, f64>, Mistake> {
        let mut sizes = HashMap::new();
        for pulse in &self.point.timeline.pulses {
            if let Vacant(vacant) = sizes.entry(part_key(pulse)) {
                vacant.insert(self.point.half_rabi_hz(self.document, pulse.drive, pulse.envelope)?);
            }
        }
        Ok(sizes)
    }

    /// Terms of pulses whose size is 1 Hz, and which pulse each belongs to.
    fn unit_terms(&self) -> Result<(Vec<Term>, Vec<usize>), Mistake> {
        let parts = self.point.parts(self.document)?;
        let (segments, terms) = cut(&self.point.timeline, &|pulse| {
            let PulseParts { pieces, chirp, signal, .. } = &*parts[&part_key(pulse)];
            Arc::new(PulseParts { pieces: pieces.clone(), half_rabi_hz: 1.0, chirp: chirp.clone(), signal: signal.clone() })
        });
        let owners = owners(&self.point.timeline, &segments);
        Ok((terms, owners))
    }

    /// The problem with a segment for each cell and the sizes of each cell, in the frame of the run.
    fn framed(&mut self, sizes_hz: &[HashMap<PartKey, f64>]) -> Result<Problem, Mistake> {
        let lab = self.cut(sizes_hz);
        let Frame::Rotating(frame) = &self.document.frame else { return Ok(lab) };
        let parts = self.point.parts(self.document)?;
        let whole = std::mem::replace(&mut self.point.lab, lab);
        let rotated = self.point.rotate(self.document, frame, &parts);
        self.point.lab = whole;
        Ok(rotated?.rotated.problem)
    }

    fn cut(&self, sizes_hz: &[HashMap<PartKey, f64>]) -> Problem {
        let lab = &self.point.lab;
        let mut segments = Vec::with_capacity(self.cells.cells.len());
        let mut terms = Vec::new();
        for (cell, (index, offset_s, length_s)) in self.cells.cells.iter().enumerate() {
            let whole = &lab.segments[*index];
            let first = terms.len();
            for k in whole.terms.clone() {
                let term = match &self.unit {
                    None => later(&lab.terms[k], *offset_s),
                    Some((unit, owners)) => {
                        let mut term = later(&unit[k], *offset_s);
                        let key = part_key(&self.point.timeline.pulses[owners[k]]);
                        scale(&mut term.envelope, sizes_hz.get(cell).and_then(|sizes| sizes.get(&key)).copied().unwrap_or(0.0));
                        term
                    }
                };
                terms.push(term);
            }
            segments.push(Segment { start: whole.start.after(*offset_s), length_s: *length_s, terms: first..terms.len() });
        }
        let moments = lab.moments.iter().map(|moment| placed(moment, &self.cells)).collect();
        Problem { segments, terms, moments, ..lab.clone() }
    }

    /// The static matrix per unit of each number, if it is linear in all of them: as far as an amount at which it has changed by as
    /// much as it is large, all by themselves and all together.
    fn slopes(&mut self, numbers: &[(u32, f64)]) -> Result<Option<Vec<(u32, Matrix)>>, Mistake> {
        let largest = |matrix: &Matrix| matrix.iter().map(|z| z.norm()).fold(0.0, f64::max);
        let written = self.statics()?;
        let mut slopes = Vec::new();
        let mut all = Vec::new();
        let mut sum = written.clone();
        for (number, about) in numbers.iter().filter(|(_, about)| *about != 0.0) {
            let near = largest(&(self.moved(&[(*number, *about)], Self::statics)? - &written));
            if near == 0.0 {
                continue;
            }
            let doublings = (largest(&written) / near).log2().ceil().clamp(0.0, 60.0);
            let far = about * doublings.exp2();
            let whole = self.moved(&[(*number, far)], Self::statics)? - &written;
            let half = self.moved(&[(*number, 0.5 * far)], Self::statics)? - &written;
            let back = self.moved(&[(*number, -far)], Self::statics)? - &written;
            let off = largest(&(&whole - &half * Complex64::from(2.0))).max(largest(&(&whole + &back)));
            if !(off <= 1e-13 * largest(&whole)) {
                return Ok(None);
            }
            sum += &whole;
            all.push((*number, far));
            slopes.push((*number, whole / Complex64::from(far)));
        }
        let together = self.moved(&all, Self::statics)?;
        let linear = largest(&(&together - &sum)) <= 1e-13 * largest(&sum).max(largest(&together));
        Ok(linear.then_some(slopes))
    }
}

/// Adds terms to each segment: `of` gives the matrix and the coefficient of each, rad/s.
fn add_terms(problem: &mut Problem, mut of: impl FnMut(usize, &mut Vec<(usize, Complex64)>)) {
    let mut terms = Vec::with_capacity(problem.terms.len() + problem.segments.len());
    let mut list = Vec::new();
    for (cell, segment) in problem.segments.iter_mut().enumerate() {
        let first = terms.len();
        terms.extend(problem.terms[segment.terms.clone()].iter().cloned());
        list.clear();
        of(cell, &mut list);
        terms.extend(list.iter().map(|(matrix, value)| Term {
            matrix: *matrix,
            turns_hz: 0.0,
            phase_turns: 0.0,
            envelope: Envelope::Constant(*value),
            chirps: Vec::new(),
        }));
        segment.terms = first..terms.len();
    }
    problem.terms = terms;
}

/// A static matrix that is linear in the numbers: a matrix for each, the amounts as coefficients.
fn add_linear(problem: &mut Problem, slopes: &[(u32, Matrix)], moved: &[Vec<(u32, f64)>]) {
    let mut matrices = (*problem.matrices).clone();
    let first = matrices.len();
    // the adjoint is added to a term
    matrices.extend(slopes.iter().map(|(_, slope)| slope * Complex64::from(0.5)));
    problem.matrices = Arc::new(matrices);
    add_terms(problem, |cell, list| {
        for (k, (number, _)) in slopes.iter().enumerate() {
            let amount: f64 = moved[cell].iter().filter(|(moved, _)| moved == number).map(|(_, amount)| amount).sum();
            list.push((first + k, Complex64::from(amount)));
        }
    });
}

/// Any other static matrix: a matrix for each entry, its change as coefficient.
fn add_statics(problem: &mut Problem, statics: &[Matrix], written: &Matrix) {
    let size = written.nrows();
    let mut matrices = (*problem.matrices).clone();
    let mut known: HashMap<(usize, usize), usize> = HashMap::new();
    add_terms(problem, |cell, list| {
        for (j, k) in (0..size).flat_map(|k| (0..=k).map(move |j| (j, k))) {
            let moved = statics[cell][(j, k)] - written[(j, k)];
            if moved == Complex64::default() {
                continue;
            }
            let matrix = *known.entry((j, k)).or_insert_with(|| {
                let mut matrix = Matrix::zeros(size, size);
                // the adjoint is added to a term, so that a diagonal entry counts twice
                matrix[(j, k)] = Complex64::from(if j == k { 0.5 } else { 1.0 });
                matrices.push(matrix);
                matrices.len() - 1
            });
            list.push((matrix, moved));
        }
    });
    problem.matrices = Arc::new(matrices);
}

/// A term as seen from a moment within its segment.
fn later(term: &Term, offset_s: f64) -> Term {
    let turned = term.phase_turns + Instant::at(offset_s).turns(term.turns_hz);
    let envelope = match &term.envelope {
        Envelope::Constant(value) => Envelope::Constant(*value),
        Envelope::Smooth { shape, since_s, scale } => Envelope::Smooth { shape: shape.clone(), since_s: since_s + offset_s, scale: *scale },
    };
    let chirps = term.chirps.iter().map(|chirp| Chirped { since_s: chirp.since_s + offset_s, ..chirp.clone() }).collect();
    Term { matrix: term.matrix, turns_hz: term.turns_hz, phase_turns: turned - turned.round(), envelope, chirps }
}

fn scale(envelope: &mut Envelope, factor: f64) {
    match envelope {
        Envelope::Constant(value) => *value *= factor,
        Envelope::Smooth { scale, .. } => *scale *= factor,
    }
}

/// The cell in which a moment lies: at a bound the later one, but for the end.
fn placed(moment: &Moment, cells: &Cells) -> Moment {
    let key = |cell: &(usize, f64, f64)| (cell.0, cell.1);
    let close = 1e-12;
    let after = cells.cells.partition_point(|cell| {
        let (segment, start_s) = key(cell);
        segment < moment.segment || (segment == moment.segment && start_s <= moment.offset_s * (1.0 + close) + f64::MIN_POSITIVE)
    });
    let index = after.saturating_sub(1);
    let (_, start_s, length_s) = cells.cells[index];
    let offset_s = (moment.offset_s - start_s).clamp(0.0, length_s);
    let at_end = length_s - offset_s <= close * length_s;
    Moment { segment: index, offset_s: if at_end { length_s } else { offset_s }, time_s: moment.time_s }
}

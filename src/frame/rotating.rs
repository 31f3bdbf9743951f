//! The rotating frame: psi_lab = exp(-2 pi i integral F dt) psi_rot with a real diagonal F, so that
//! H_rot = exp(i ..) H exp(-i ..) - 2 pi F (I. I. Rabi, N. F. Ramsey, J. Schwinger, Reviews of Modern Physics 26, 167 (1954)).
//!
//! Entry (j, k) of a term that turns at f in the laboratory turns at f - (F_j - F_k) in the frame. With F a sum of carriers (see
//! `follow`) that difference is a sum of carriers with whole coefficients again, so what stands still does so exactly, and a
//! sweep that the frame follows leaves the coupling and reappears on the diagonal. Terms slower than the limit are kept,
//! time-dependent if they still turn; faster ones go into the ledger. Differences of optical frequencies are formed in two
//! doubles before anything is rounded.

use std::collections::{HashMap, HashSet};
use std::sync::Arc;

use num_complex::Complex64;

use super::follow::LevelTurning;
use super::jumps::{Carriers, JumpBeat};
use super::ledger::{Ledger, LedgerLine, Source, TermKey};
use crate::config::tape::Wide;
use crate::drive::coupling::Coupling;
use crate::drive::timeline::Timeline;
use crate::problem::{Chirped, Envelope, Instant, Matrix, Problem, Segment, Slow, Sweep, Term};
use crate::units::rad_s;

/// What the rewriting needs to know beside the problem.
pub struct Setting<'a> {
    /// The sequence.
    pub timeline: &'a Timeline<'a>,
    /// Matrices of the drives.
    pub couplings: &'a [Coupling],
    /// Drives without a carrier.
    pub direct: &'a [bool],
    /// Diagonal of the static Hamiltonian, Hz.
    pub energies_hz: &'a [Wide],
    /// Frequencies of the timeline's carriers (centres), Hz.
    pub carriers_hz: &'a [Wide],
    /// Largest modulus of c of each drive, by drive and carrier, Hz.
    pub sizes_hz: &'a HashMap<(usize, Option<usize>), f64>,
    /// How the levels turn.
    pub turning: &'a LevelTurning,
    /// Terms that turn faster are dropped, Hz; infinite keeps all.
    pub limit_hz: f64,
    /// Terms kept whatever their speed.
    pub put_back: &'a [TermKey],
}

/// A kept resonant half that still turns.
#[derive(Debug, Clone, PartialEq)]
pub struct Beat {
    /// Index of its drive.
    pub drive: usize,
    /// Upper and lower level.
    pub levels: [usize; 2],
    /// How fast it turns, Hz, with the sign of carrier minus what the frame offers.
    pub turns_hz: f64,
    /// Whole coefficients of the carriers in it, by drive.
    pub counts: Vec<i32>,
}

/// A problem in its frame.
#[derive(Debug, Clone)]
pub struct Rotated {
    /// The problem, in the frame.
    pub problem: Problem,
    /// What was kept and dropped.
    pub ledger: Ledger,
    /// Kept resonant halves that still turn.
    pub beats: Vec<Beat>,
    /// Entries of jump operators that turn differently.
    pub jump_beats: Vec<JumpBeat>,
    /// Frequencies of the levels at time zero, Hz.
    pub level_hz: Vec<f64>,
    /// Turns that each level's frame has made at the end, less the whole turns.
    pub end_turns: Vec<f64>,
}

/// Entries of one term that turn alike: whole coefficients of the carriers, and the table's part.
#[derive(Debug, Clone)]
struct Alike {
    /// Whole coefficients m: the group turns at sum m_d f_d + table.
    counts: Vec<i32>,
    table_hz: f64,
    /// Index of the matrix in the rewritten problem.
    matrix: usize,
    entries: Vec<(usize, usize)>,
}

/// The state of each drive's carrier as the frame sees it: a continuous integral.
#[derive(Debug, Clone, Copy)]
struct Running {
    carrier: Option<usize>,
    since: Instant,
    turns: f64,
}

/// Rewrites a problem of the laboratory frame.
pub fn rotate(lab: &Problem, setting: &Setting) -> Rotated {
    let mut work = Work::new(lab, setting);
    work.statics();
    for segment in &lab.segments {
        work.changes(segment);
        let first = work.terms.len();
        work.segment(segment);
        let range = first..work.terms.len();
        work.segments.push(Segment { start: segment.start, length_s: segment.length_s, terms: range });
        work.follow_sweeps(segment);
    }
    work.finish()
}

struct Work<'a> {
    lab: &'a Problem,
    setting: &'a Setting<'a>,
    running: Vec<Running>,
    first_carriers: Vec<Option<usize>>,
    next_change: usize,
    matrices: Vec<Matrix>,
    /// Groups of the entries of a drive's matrix, and of the static off-diagonal.
    groups: HashMap<Source, Vec<Alike>>,
    /// Diagonal matrices of whole coefficients, by drive.
    diagonals: HashMap<usize, usize>,
    statics: Matrix,
    segments: Vec<Segment>,
    terms: Vec<Term>,
    ledger: Ledger,
    beats: Vec<Beat>,
    noted: HashSet<(Source, Vec<Option<usize>>)>,
}

impl<'a> Work<'a> {
    fn new(lab: &'a Problem, setting: &'a Setting<'a>) -> Work<'a> {
        let first_carriers = setting.timeline.first_carriers.clone();
        Work {
            running: first_carriers.iter().map(|carrier| Running { carrier: *carrier, since: Instant::default(), turns: 0.0 }).collect(),
            first_carriers,
            next_change: 0,
            matrices: Vec::new(),
            groups: HashMap::new(),
            diagonals: HashMap::new(),
            statics: Matrix::zeros(lab.dim(), lab.dim()),
            segments: Vec::with_capacity(lab.segments.len()),
            terms: Vec::with_capacity(lab.terms.len()),
            ledger: Ledger { lines: Vec::new(), limit_hz: setting.limit_hz },
            beats: Vec::new(),
            noted: HashSet::new(),
            lab,
            setting,
        }
    }

    fn carrier_hz(&self, carrier: Option<usize>) -> Wide {
        carrier.map_or(Wide::default(), |carrier| self.setting.carriers_hz[carrier])
    }

    /// sum m_d f_d + table with the carriers in force; what is rounding of the sum counts as standing still.
    fn speed_hz(&self, alike: &Alike) -> f64 {
        let mut sum = Wide { high: alike.table_hz, low: 0.0 };
        let mut largest = alike.table_hz.abs();
        for (d, count) in alike.counts.iter().enumerate().filter(|(_, count)| **count != 0) {
            let carrier = self.carrier_hz(self.running[d].carrier);
            sum = sum.plus(carrier.times(f64::from(*count)));
            largest = largest.max(carrier.high.abs());
        }
        let speed = sum.value();
        if speed.abs() <= 8.0 * f64::EPSILON * largest {
            0.0
        } else {
            speed
        }
    }

    /// Energy less level frequency on the diagonal, with the carriers of time zero; what stands still off it.
    fn statics(&mut self) {
        let size = self.lab.dim();
        for j in 0..size {
            let mut left = self.setting.energies_hz[j].plus(Wide { high: -self.setting.turning.table_hz[j], low: 0.0 });
            for (d, count) in self.setting.turning.counts[j].iter().enumerate().filter(|(_, count)| **count != 0) {
                left = left.plus(self.carrier_hz(self.first_carriers[d]).times(-f64::from(*count)));
            }
            self.statics[(j, j)] = Complex64::from(rad_s(left.value()));
        }
        let a = &self.lab.statics;
        let entries: Vec<(usize, usize, Complex64)> = (0..size)
            .flat_map(|k| (0..k).map(move |j| (j, k)))
            .map(|(j, k)| (j, k, a[(j, k)]))
            .filter(|(.., value)| value.norm() > 0.0)
            .collect();
        self.group(Source::Static, &entries, None);
        // a group that cannot turn whatever the carriers do is simply static
        let groups = self.groups.get_mut(&Source::Static).map(std::mem::take).unwrap_or_default();
        let (still, turning): (Vec<Alike>, Vec<Alike>) =
            groups.into_iter().partition(|alike| alike.table_hz == 0.0 && alike.counts.iter().all(|m| *m == 0));
        for (j, k) in still.iter().flat_map(|alike| &alike.entries) {
            self.statics[(*j, *k)] = a[(*j, *k)];
            self.statics[(*k, *j)] = a[(*k, *j)];
            let key = TermKey { source: Source::Static, row: *j, column: *k };
            self.ledger.note(LedgerLine { key, size_hz: a[(*j, *k)].norm() / rad_s(1.0), turns_at_hz: 0.0, kept: true });
        }
        self.groups.insert(Source::Static, turning);
    }

    /// Sorts the entries of a source by how they turn and makes a matrix for each group.
    fn group(&mut self, source: Source, entries: &[(usize, usize, Complex64)], drive: Option<usize>) {
        let size = self.lab.dim();
        let turning = self.setting.turning;
        let mut groups: Vec<Alike> = Vec::new();
        for (row, column, value) in entries {
            let mut counts: Vec<i32> = turning.counts[*column].iter().zip(&turning.counts[*row]).map(|(k, j)| k - j).collect();
            if let Some(drive) = drive {
                counts[drive] += 1;
            }
            let table_hz = turning.table_hz[*column] - turning.table_hz[*row];
            // a term put back alone is a group of its own
            let single = self.setting.put_back.contains(&TermKey { source, row: *row, column: *column });
            let same = |alike: &&mut Alike| {
                !single
                    && alike.counts == counts
                    && alike.table_hz == table_hz
                    && !self.setting.put_back.contains(&TermKey { source, row: alike.entries[0].0, column: alike.entries[0].1 })
            };
            match groups.iter_mut().find(same) {
                Some(alike) => {
                    self.matrices[alike.matrix][(*row, *column)] = *value;
                    alike.entries.push((*row, *column));
                }
                None => {
                    let mut matrix = Matrix::zeros(size, size);
                    matrix[(*row, *column)] = *value;
                    self.matrices.push(matrix);
                    groups.push(Alike { counts, table_hz, matrix: self.matrices.len() - 1, entries: vec![(*row, *column)] });
                }
            }
        }
        self.groups.insert(source, groups);
    }

    /// Groups of a drive's matrix, made when it is first met.
    fn drive_groups(&mut self, drive: usize) {
        if self.groups.contains_key(&Source::Drive(drive)) {
            return;
        }
        let b = &self.lab.matrices[drive];
        let size = self.lab.dim();
        let direct = self.setting.direct[drive];
        let mut entries = Vec::new();
        for row in 0..size {
            for column in 0..size {
                // of a direct drive both triangles are one term: the upper one stands for both
                let value = match (direct, row.cmp(&column)) {
                    (true, std::cmp::Ordering::Greater) => continue,
                    (true, std::cmp::Ordering::Less) => b[(row, column)] + b[(column, row)].conj(),
                    _ => b[(row, column)],
                };
                if value.norm() > 0.0 {
                    entries.push((row, column, value));
                }
            }
        }
        self.group(Source::Drive(drive), &entries, (!direct).then_some(drive));
    }

    /// Carriers set anew at or before the start of a segment.
    fn changes(&mut self, segment: &Segment) {
        let changes = &self.setting.timeline.changes;
        while let Some(change) = changes.get(self.next_change).filter(|change| change.at.since(segment.start) <= 0.0) {
            let running = self.running[change.drive];
            let turned = running.turns + change.at.minus(running.since).turns(self.carrier_hz(running.carrier).value());
            self.running[change.drive] = Running { carrier: Some(change.carrier), since: change.at, turns: turned - turned.round() };
            self.next_change += 1;
        }
    }

    /// Turns that the frame's carrier of a drive has made at a moment.
    fn turned(&self, drive: usize, at: Instant) -> f64 {
        let running = self.running[drive];
        running.turns + at.minus(running.since).turns(self.carrier_hz(running.carrier).value())
    }

    /// What the frame contributes to the turning of a group at the start of a segment, turns, and the sweeps it follows meanwhile.
    /// Carrier and frame count by the same sums, so that equals cancel exactly.
    fn frame_turned(&self, counts: &[i32], table_hz: f64, segment: &Segment, sweeps: &[Option<Chirped>]) -> (f64, Vec<Chirped>) {
        let mut turned = segment.start.turns(table_hz);
        let mut chirps = Vec::new();
        for (d, count) in counts.iter().enumerate().filter(|(_, count)| **count != 0) {
            turned += f64::from(*count) * self.turned(d, segment.start);
            if let Some(chirp) = &sweeps[d] {
                // a sweep counts from the start of its pulse; what it had turned by now is among the frame's turns already
                turned -= f64::from(*count) * chirp.sweep.turns(chirp.since_s);
                chirps.push(Chirped { times: f64::from(*count), ..chirp.clone() });
            }
        }
        (turned, chirps)
    }

    /// Terms of one segment.
    fn segment(&mut self, segment: &Segment) {
        let lab = self.lab;
        // the sweep of each drive that is swept now
        let mut sweeps: Vec<Option<Chirped>> = vec![None; self.running.len()];
        for term in lab.terms_of(segment) {
            if let Some(chirp) = term.chirps.first() {
                sweeps[term.matrix].get_or_insert_with(|| chirp.clone());
            }
        }
        for term in lab.terms_of(segment) {
            self.drive_groups(term.matrix);
            let source = Source::Drive(term.matrix);
            let carrier = self.running[term.matrix].carrier;
            self.note(source, carrier);
            for g in 0..self.groups[&source].len() {
                let alike = self.groups[&source][g].clone();
                if !self.kept(source, &alike) {
                    continue;
                }
                let speed = self.speed_hz(&alike);
                // of the group's coefficients one belongs to the carrier itself, the others to the frame
                let taken: Vec<i32> = alike
                    .counts
                    .iter()
                    .enumerate()
                    .map(|(d, count)| count - i32::from(d == term.matrix && !self.setting.direct[d]))
                    .collect();
                let (turned, mut chirps) = self.frame_turned(&taken, alike.table_hz, segment, &sweeps);
                chirps.extend(term.chirps.iter().cloned());
                let phase = term.phase_turns + turned;
                self.terms.push(Term {
                    matrix: alike.matrix,
                    turns_hz: speed,
                    phase_turns: phase - phase.round(),
                    envelope: term.envelope.clone(),
                    chirps: joined(chirps),
                });
            }
        }
        self.static_terms(segment, &sweeps);
        self.diagonal_terms(&sweeps);
    }

    /// Whether a group is kept with the carriers in force.
    fn kept(&self, source: Source, alike: &Alike) -> bool {
        let put_back =
            alike.entries.iter().any(|(row, column)| self.setting.put_back.contains(&TermKey { source, row: *row, column: *column }));
        put_back || self.speed_hz(alike).abs() <= self.setting.limit_hz
    }

    /// Enters the terms of a source into the ledger, once for each set of carriers in force.
    fn note(&mut self, source: Source, carrier: Option<usize>) {
        let in_force: Vec<Option<usize>> = self.running.iter().map(|running| running.carrier).collect();
        if !self.noted.insert((source, in_force)) {
            return;
        }
        for alike in self.groups[&source].clone() {
            let speed = self.speed_hz(&alike);
            let kept = self.kept(source, &alike);
            let size = match source {
                Source::Drive(drive) => self.setting.sizes_hz.get(&(drive, carrier)).copied().unwrap_or(0.0),
                Source::Static => 1.0 / rad_s(1.0),
            };
            for (row, column) in &alike.entries {
                if row == column && matches!(source, Source::Drive(drive) if self.setting.direct[drive]) {
                    // a level moved by a direct drive does not turn in any frame
                    continue;
                }
                let key = TermKey { source, row: *row, column: *column };
                let size_hz = size * self.matrices[alike.matrix][(*row, *column)].norm();
                self.ledger.note(LedgerLine { key, size_hz, turns_at_hz: speed.abs(), kept });
                if let (Source::Drive(drive), true) = (source, kept && speed != 0.0) {
                    if !self.setting.direct[drive] && self.is_resonant_half(drive, *row, *column) {
                        self.beats.push(Beat { drive, levels: [*row, *column], turns_hz: speed, counts: alike.counts.clone() });
                    }
                }
            }
        }
    }

    /// Whether the entry (row, column) is the half in the sense of the energies: the row is the upper level.
    fn is_resonant_half(&self, drive: usize, row: usize, column: usize) -> bool {
        if row == column {
            return false;
        }
        let (upper, lower) = (self.setting.energies_hz[row].value(), self.setting.energies_hz[column].value());
        if upper == lower {
            return match self.setting.couplings[drive].reference {
                Some([a, b]) if [a, b] == [column, row] => true,
                Some([a, b]) if [a, b] == [row, column] => false,
                _ => row > column,
            };
        }
        upper > lower
    }

    fn static_terms(&mut self, segment: &Segment, sweeps: &[Option<Chirped>]) {
        if self.groups[&Source::Static].is_empty() {
            return;
        }
        self.note(Source::Static, None);
        for alike in self.groups[&Source::Static].clone() {
            if !self.kept(Source::Static, &alike) {
                continue;
            }
            let (phase, chirps) = self.frame_turned(&alike.counts, alike.table_hz, segment, sweeps);
            let speed = self.speed_hz(&alike);
            let envelope = Envelope::Constant(Complex64::from(1.0));
            self.terms.push(Term { matrix: alike.matrix, turns_hz: speed, phase_turns: phase - phase.round(), envelope, chirps });
        }
    }

    /// What the frame's own changes of speed put on the diagonal: a carrier set anew, and a sweep that is followed.
    fn diagonal_terms(&mut self, sweeps: &[Option<Chirped>]) {
        for d in 0..self.running.len() {
            if self.setting.turning.counts.iter().all(|counts| counts[d] == 0) {
                continue;
            }
            let now = self.carrier_hz(self.running[d].carrier);
            let moved = now.plus(self.carrier_hz(self.first_carriers[d]).times(-1.0)).value();
            if moved != 0.0 {
                let matrix = self.diagonal(d);
                let envelope = Envelope::Constant(Complex64::from(-rad_s(moved)));
                self.terms.push(Term { matrix, turns_hz: 0.0, phase_turns: 0.0, envelope, chirps: Vec::new() });
            }
            if let Some(chirp) = &sweeps[d] {
                let shape = Arc::new(Rate(chirp.sweep.clone()));
                let since_s = chirp.since_s;
                let matrix = self.diagonal(d);
                let envelope = Envelope::Smooth { shape, since_s, scale: Complex64::from(-rad_s(1.0)) };
                self.terms.push(Term { matrix, turns_hz: 0.0, phase_turns: 0.0, envelope, chirps: Vec::new() });
            }
        }
    }

    /// Half the whole coefficients of a drive on the diagonal; the adjoint adds the other half.
    fn diagonal(&mut self, drive: usize) -> usize {
        if let Some(known) = self.diagonals.get(&drive) {
            return *known;
        }
        let size = self.lab.dim();
        let matrix = Matrix::from_fn(size, size, |j, k| {
            Complex64::from(if j == k { 0.5 * f64::from(self.setting.turning.counts[j][drive]) } else { 0.0 })
        });
        self.matrices.push(matrix);
        self.diagonals.insert(drive, self.matrices.len() - 1);
        self.matrices.len() - 1
    }

    /// After a swept pulse the frame has turned further by the integral of the sweep.
    fn follow_sweeps(&mut self, segment: &Segment) {
        let mut done = HashSet::new();
        for term in self.lab.terms_of(segment) {
            if let Some(chirp) = term.chirps.first().filter(|_| done.insert(term.matrix)) {
                let turned = chirp.sweep.turns(chirp.since_s + segment.length_s) - chirp.sweep.turns(chirp.since_s);
                self.running[term.matrix].turns += turned - turned.round();
            }
        }
    }

    fn finish(mut self) -> Rotated {
        self.ledger.sort();
        let level_hz = (0..self.lab.dim())
            .map(|j| {
                let counts = &self.setting.turning.counts[j];
                let followed: f64 =
                    counts.iter().enumerate().map(|(d, count)| f64::from(*count) * self.carrier_hz(self.first_carriers[d]).value()).sum();
                followed + self.setting.turning.table_hz[j]
            })
            .collect();
        let end = self.setting.timeline.end;
        let end_turns = (0..self.lab.dim())
            .map(|j| {
                let counts = &self.setting.turning.counts[j];
                let followed: f64 = counts
                    .iter()
                    .enumerate()
                    .filter(|(_, count)| **count != 0)
                    .map(|(d, count)| f64::from(*count) * self.turned(d, end))
                    .sum();
                let turns = followed + end.turns(self.setting.turning.table_hz[j]);
                turns - turns.round()
            })
            .collect();
        let first_hz: Vec<Wide> = self.first_carriers.iter().map(|carrier| self.carrier_hz(*carrier)).collect();
        let swept = |d: usize| self.lab.terms.iter().any(|term| term.matrix == d && !term.chirps.is_empty());
        let moved: Vec<bool> =
            (0..first_hz.len()).map(|d| swept(d) || self.setting.timeline.changes.iter().any(|change| change.drive == d)).collect();
        let carriers = Carriers { turning: self.setting.turning, first_hz: &first_hz, moved: &moved, limit_hz: self.setting.limit_hz };
        let (jumps, jump_beats) = carriers.rotate(&self.lab.jumps);
        let problem = Problem {
            statics: Arc::new(self.statics),
            matrices: Arc::new(self.matrices),
            segments: self.segments,
            terms: self.terms,
            start: self.lab.start.clone(),
            jumps: Arc::new(jumps),
            moments: self.lab.moments.clone(),
        };
        Rotated { problem, ledger: self.ledger, beats: self.beats, jump_beats, level_hz, end_turns }
    }
}

/// The rate of a sweep as an envelope, Hz.
#[derive(Debug)]
struct Rate(Arc<dyn Sweep>);

impl Slow for Rate {
    fn at(&self, t_s: f64) -> Complex64 {
        Complex64::from(self.0.offset_hz(t_s))
    }
}

/// The same sweep taken several times is one; taken no times it is gone.
pub(super) fn joined(chirps: Vec<Chirped>) -> Vec<Chirped> {
    let mut sums: Vec<Chirped> = Vec::new();
    for chirp in chirps {
        match sums.iter_mut().find(|sum| Arc::ptr_eq(&sum.sweep, &chirp.sweep) && sum.since_s == chirp.since_s) {
            Some(sum) => sum.times += chirp.times,
            None => sums.push(chirp),
        }
    }
    sums.retain(|sum| sum.times != 0.0);
    sums
}

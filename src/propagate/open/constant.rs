//! Stretches whose generator is constant: x becomes exp(G tau) x, from moment to moment, any length.
//!
//! The action of the exponential on the columns is cheaper where few short gaps are passed, the dense exponential where a gap is
//! long or comes again. What comes again is not known beforehand: a gap is carried by the action until that has cost as much as
//! its dense exponential would have, which is at most twice the least cost. A second resolution cuts each gap into pieces.

use std::collections::HashMap;
use std::rc::Rc;

use super::super::run::Work;
use super::exponential::{act, apply, dense, products, squarings, Room};
use super::run::{Columns, Eye, Stretch};

/// A gap met before: its dense exponential, or what its action has cost so far.
#[derive(Debug)]
pub(super) enum Kept {
    Dense(Vec<f64>),
    Spent(f64),
}

/// Exponentials of the run so far, found by the bits of generator, terms and gap.
pub(super) struct Steps {
    kept: HashMap<Vec<u64>, Rc<Kept>>,
    /// Levels, where their populations keep their sum.
    populations: Option<usize>,
    values: Vec<f64>,
    room: Room,
    sums: Vec<f64>,
    image: Vec<f64>,
}

/// Numbers that all kept exponentials may hold together: 64 MB.
const MOST_NUMBERS: usize = 8_000_000;
/// Gaps remembered.
const MOST_KEYS: usize = 65_536;

impl Steps {
    pub fn new(kept: HashMap<Vec<u64>, Rc<Kept>>, populations: Option<usize>) -> Steps {
        Steps { kept, populations, values: Vec::new(), room: Room::default(), sums: Vec::new(), image: Vec::new() }
    }

    /// What is kept, for the next run.
    pub fn leave(self) -> HashMap<Vec<u64>, Rc<Kept>> {
        self.kept
    }

    /// Carries the columns over a gap; `key` but for the gap.
    fn gap(&mut self, stretch: &Stretch, key: &mut Vec<u64>, gap_s: f64, columns: &mut Columns, work: &mut Work) {
        let n = columns.size;
        let count = columns.x.len() / n;
        let norm = stretch.generator.bound(&self.values, &mut self.sums) * gap_s;
        key[0] = gap_s.to_bits();
        let known = self.kept.get(key).cloned();
        if let Some(Kept::Dense(matrix)) = known.as_deref() {
            self.image.resize(columns.x.len(), 0.0);
            apply(n, matrix, &columns.x, &mut self.image);
            columns.x.copy_from_slice(&self.image);
            work.step(count as u64, n * n);
            return;
        }
        let spent = if let Some(Kept::Spent(spent)) = known.as_deref() { *spent } else { 0.0 };
        let by_action = products(norm) * (2 * stretch.generator.entries() + n) as f64 * count as f64;
        // blocked products of large matrices are faster than their number of multiplications says
        let cube = (n as f64).powi(3) * if n > 32 { 0.25 } else { 1.0 };
        let by_matrix = (6 + squarings(norm)) as f64 * cube;
        let room_left = self.kept.len() < MOST_KEYS && (self.kept.len() + 1) * n * n <= MOST_NUMBERS;
        if by_matrix < by_action || (room_left && by_matrix < by_action + spent) {
            let mut a = vec![0.0; n * n];
            stretch.generator.dense(&self.values, gap_s, &mut a);
            let matrix = dense(n, &a, norm, self.populations);
            work.step(((6 + squarings(norm)) * n as i32) as u64, if n > 32 { n * n / 4 } else { n * n });
            self.image.resize(columns.x.len(), 0.0);
            apply(n, &matrix, &columns.x, &mut self.image);
            columns.x.copy_from_slice(&self.image);
            if room_left {
                self.kept.insert(key.clone(), Rc::new(Kept::Dense(matrix)));
            }
            return;
        }
        if room_left || known.is_some() {
            self.kept.insert(key.clone(), Rc::new(Kept::Spent(spent + by_action)));
        }
        act(stretch.generator, &self.values, gap_s, norm, &mut columns.x, &mut self.room, work);
    }
}

/// Carries the columns through the stretch, each gap in `pieces` equal pieces.
pub(super) fn pass(stretch: &Stretch, pieces: u32, steps: &mut Steps, columns: &mut Columns, eye: &mut Eye, work: &mut Work) {
    stretch.generator.at(stretch.terms, stretch.start, 0.0, &mut steps.values);
    let mut key = vec![0, stretch.generator.number];
    for term in stretch.terms {
        let value = term.slow(0.0);
        key.extend([term.phase_turns.to_bits(), value.re.to_bits(), value.im.to_bits()]);
    }
    if stretch.generator.knows_the_clock() {
        key.push(stretch.start.seconds().to_bits());
    }
    let (mut tau_s, mut before_s) = (0.0, 0.0);
    for k in 0..=stretch.moments.len() {
        let stop_s = stretch.moments.get(k).map_or(stretch.length_s, |moment| moment.offset_s.min(stretch.length_s));
        // gaps that differ by the rounding of the clock are the same; the clock goes on from where the state is
        let left_s = stop_s - tau_s;
        let gap_s = if (left_s - before_s).abs() <= 4.0 * f64::EPSILON * stop_s { before_s } else { left_s };
        if gap_s > 4.0 * f64::EPSILON * stop_s {
            for _ in 0..pieces {
                steps.gap(stretch, &mut key, gap_s / f64::from(pieces), columns, work);
            }
            tau_s += gap_s;
            before_s = gap_s;
        }
        if k < stretch.moments.len() {
            eye.see(stretch, k, &columns.x);
        }
    }
}

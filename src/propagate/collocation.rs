//! Collocation on adaptive elements, for smooth H: Gauss's eight nodes, order 16 at the ends of elements.
//!
//! In the tied picture (diagonal exact, `turning.rs`) each element holds its amplitudes as polynomials of degree 8 and solves for all
//! nodes at once (`element.rs`), so that recorded moments cost an evaluation and no step. Amplitudes without dimension, tau in s, H in
//! rad/s. K. Wright, BIT 10, 217 (1970), for collocation and one-step methods; C. W. Clenshaw and H. J. Norton, Computer Journal 6, 88
//! (1963), for the iteration on polynomials.
//!
//! The estimated error of an element of h seconds, from the fall of the last Legendre coefficients, is held below tolerance h / T, T the
//! time over which H changes; within an element, of order 9, only where a moment lies. Where entries turn much faster than all
//! else changes, `waves.rs` lets them follow, and elements are many turns long; where elements would be so short that these do not
//! follow safely, every turn is resolved instead. Measured floor: 1e-15 for each element.

use num_complex::Complex64;

use super::element::{Element, Seed};
use super::picture::Picture;
use super::run::{Eye, Fineness, State, Stretch, Work};
use super::sampled::Sampled;
use super::turning::Block;
use super::waves::{Wanted, Waves};
use crate::units::RAD_PER_TURN;

/// Least turning of a wave that follows over an element, rad; below, slopes of amplitudes are no longer small against it.
const FOLLOWS_FROM_RAD: f64 = 60.0;
/// Largest sum of couplings times length of an element, rad.
const LONGEST_RAD: f64 = 14.0;
/// Turns of a coefficient over an element at most.
const RESOLVED_TURNS: f64 = 0.6;
/// Threshold of waves over the tolerance, and what a finer run lowers it by.
const WAVES_OVER_TOLERANCE: f64 = 0.1;
const ONE_MORE_HARMONIC: f64 = 1e-3;
/// More sweeps than these make a longer element dearer, and a shorter one cheaper.
const MANY_SWEEPS: usize = 12;
const TOO_MANY_SWEEPS: usize = 18;
/// Most amplitudes of all elements together that a run remembers for the next (50 MB).
const MOST_SOWN: usize = 400_000;
/// The same in bytes.
pub(super) const MOST_SOWN_BYTES: f64 = 128.0 * MOST_SOWN as f64;

/// The elements of a run, from which a finer one takes half of each and where it starts its iteration.
#[derive(Debug, Default)]
pub(super) struct Path {
    elements: Vec<Laid>,
    /// What they found, `Element::found`.
    sown: Vec<Block>,
    /// Levels and turnings of the waves that were at work.
    lists: Vec<Vec<(usize, f64)>>,
    /// Whether it was too much to remember.
    forgotten: bool,
}

#[derive(Debug, Clone, Copy)]
struct Laid {
    from_s: f64,
    element_s: f64,
    to_s: f64,
    /// End of its part of `sown`, the columns of the state from last to first.
    sown: usize,
    list: usize,
}

/// Carries the state through the stretch; with `follow`, fast waves follow. `path` is that of the run before, and becomes that of this one.
pub(super) fn pass(stretch: &Stretch, follow: bool, limits: &Limits, path: &mut Path, state: &mut State, eye: &mut Eye, work: &mut Work) {
    let (picture, sampled, length_s) = (stretch.picture, stretch.sampled, stretch.length_s);
    let fineness = limits.fineness;
    let cap_s = length_s * sampled.busy / (2.0 + f64::from(fineness.pieces));
    let refinements = f64::from((fineness.pieces - 1) / 2);
    let mut present = vec![0.0f64; state.dim];
    for column in state.amplitudes.chunks_exact(state.dim) {
        for (most, amplitude) in present.iter_mut().zip(column) {
            *most = most.max(amplitude.norm_sqr());
        }
    }
    present.iter_mut().for_each(|most| *most = most.sqrt());
    let wanted = Wanted {
        picture,
        heights: &sampled.heights,
        present: &present,
        length_s,
        slow_hz: f64::INFINITY,
        threshold: (WAVES_OVER_TOLERANCE * fineness.tolerance * ONE_MORE_HARMONIC.powf(refinements)).max(1e-18),
    };
    // the run that halves is mostly the last
    let before = if fineness.halved && !path.forgotten { std::mem::take(path) } else { Path::default() };
    *path = Path { forgotten: fineness.halved, ..Path::default() };
    let coupling_rad_s = coupling_rad_s(picture, &sampled.heights);
    let mut passage = Passage { stretch, limits, cap_s, coupling_rad_s, tau_s: 0.0, next: 0, before, path, ends: state.amplitudes.clone() };
    if let Some(waves) = if follow { expand(&wanted, passage.longest_s()) } else { None } {
        if passage.go(&waves, state, eye, work) {
            return;
        }
    }
    if let Some(waves) = Waves::new(&wanted) {
        passage.go(&waves, state, eye, work);
    }
}

/// How finely, and over how long altogether.
#[derive(Debug, Clone, Copy)]
pub(super) struct Limits<'a> {
    pub fineness: &'a Fineness,
    /// How long H changes, s; the tolerance is spread over it.
    pub changing_s: f64,
}

/// The way through one stretch.
struct Passage<'a> {
    stretch: &'a Stretch<'a>,
    limits: &'a Limits<'a>,
    cap_s: f64,
    coupling_rad_s: f64,
    tau_s: f64,
    /// The next moment to be shown.
    next: usize,
    before: Path,
    path: &'a mut Path,
    /// Amplitudes at its end.
    ends: Vec<Complex64>,
}

/// Equal elements to the end of the stretch.
struct Row {
    from_s: f64,
    count: f64,
    done: f64,
    element_s: f64,
}

impl Row {
    fn new(from_s: f64, to_s: f64, wish_s: f64) -> Self {
        let count = ((to_s - from_s) / wish_s).ceil().max(1.0);
        Row { from_s, count, done: 0.0, element_s: (to_s - from_s) / count }
    }

    fn next_s(&self, to_s: f64) -> f64 {
        if self.done + 1.0 >= self.count {
            to_s
        } else {
            self.from_s + (self.done + 1.0) * self.element_s
        }
    }
}

/// How one element came out, over all columns.
struct Solved {
    sweeps: usize,
    converged: bool,
    /// Estimated error, and the power of the length that it grows with.
    error: f64,
    order: f64,
}

impl Passage<'_> {
    /// How long an element may be from here on, by the couplings alone.
    fn longest_s(&self) -> f64 {
        let length_s = self.stretch.length_s;
        let reach = LONGEST_RAD / (self.coupling_rad_s * length_s);
        self.cap_s.min(length_s * self.stretch.sampled.reach(self.tau_s / length_s, reach))
    }

    /// Element after element to the end; false where an element would be too short for its waves to follow.
    fn go(&mut self, waves: &Waves, state: &mut State, eye: &mut Eye, work: &mut Work) -> bool {
        let mut element = Element::new(waves, self.stretch.picture);
        self.path.lists.push(waves.list.iter().map(|wave| (wave.level, wave.turns_hz)).collect());
        if !self.halves(waves, &mut element, state, eye, work) {
            return false;
        }
        let length_s = self.stretch.length_s;
        let rest_s = RESOLVED_TURNS / waves.rest_hz;
        // the finer run halves what this one lays
        let shortest_s = 2.0 * FOLLOWS_FROM_RAD / waves.slowest_rad_s;
        let mut row = Row::new(self.tau_s, length_s, self.longest_s().max(1.02 * shortest_s).min(rest_s));
        while self.tau_s < length_s && !work.exhausted() {
            let h = row.element_s;
            if h < shortest_s && row.count > 1.0 {
                return false;
            }
            let (to_s, allowed) = (row.next_s(length_s), self.allowed(h));
            let solved = self.solve(&mut element, h, to_s, state, work, |_| None);
            if solved.error.is_nan() {
                work.left = -1.0;
                return true;
            }
            let factor = if solved.converged { (0.8 * (allowed / solved.error).powf(1.0 / solved.order)).clamp(0.3, 2.0) } else { 0.4 };
            if (solved.error > allowed || !solved.converged) && h > 1e-9 * length_s {
                row = Row::new(self.tau_s, length_s, h * factor.min(0.8));
                continue;
            }
            self.accept(&mut element, h, to_s, state, eye);
            row.done += 1.0;
            let factor = match solved.sweeps {
                few if few <= MANY_SWEEPS => factor,
                many if many <= TOO_MANY_SWEEPS => factor.min(1.0),
                _ => factor.min(0.7),
            };
            let wish_s = (h * factor).min(self.longest_s()).max(1.02 * shortest_s).min(rest_s);
            if !(0.95..1.3).contains(&(wish_s / h)) && row.done < row.count {
                let other = Row::new(to_s, length_s, wish_s);
                if other.count != row.count - row.done {
                    row = other;
                }
            }
        }
        self.show_rest(state, eye);
        true
    }

    /// Halves of the elements of the run before, as far as they go; false where they are too short for the waves to follow.
    fn halves(&mut self, waves: &Waves, element: &mut Element, state: &mut State, eye: &mut Eye, work: &mut Work) -> bool {
        let shortest_s = FOLLOWS_FROM_RAD / waves.slowest_rad_s;
        let columns = state.amplitudes.len() / state.dim;
        let before = std::mem::take(&mut self.before);
        let places: Vec<Vec<usize>> = before.lists.iter().map(|list| places(waves, list)).collect();
        let mut from = 0;
        for laid in &before.elements {
            let sown = &before.sown[from..laid.sown];
            from = laid.sown;
            if laid.from_s < self.tau_s || work.exhausted() {
                continue;
            }
            let h = 0.5 * laid.element_s;
            if h < shortest_s {
                self.before = before;
                return false;
            }
            let each = sown.len() / columns;
            for second in [false, true] {
                let to_s = if second { laid.to_s } else { laid.from_s + h };
                let seed = |column: usize| {
                    Some(Seed { places: &places[laid.list], sown: &sown[(columns - 1 - column) * each..(columns - column) * each], second })
                };
                let solved = self.solve(element, h, to_s, state, work, seed);
                if solved.error.is_nan() {
                    work.left = -1.0;
                }
                if !solved.converged {
                    return true;
                }
                self.accept(element, h, to_s, state, eye);
            }
        }
        true
    }

    fn allowed(&self, h: f64) -> f64 {
        (self.limits.fineness.tolerance * h / self.limits.changing_s).max(1e-17)
    }

    /// All columns through an element of nominal length `h` that ends at `to_s`; the state last, so that its amplitudes within are at hand.
    fn solve<'s>(
        &mut self,
        element: &mut Element,
        h: f64,
        to_s: f64,
        state: &State,
        work: &mut Work,
        seed: impl Fn(usize) -> Option<Seed<'s>>,
    ) -> Solved {
        let dim = state.dim;
        let seen = self.stretch.moments.get(self.next).is_some_and(|moment| moment.offset_s < to_s);
        let allowed = self.allowed(h);
        element.place(self.stretch.picture, self.stretch.terms, self.tau_s, h, allowed);
        let mut solved = Solved { sweeps: 0, converged: true, error: 0.0, order: 17.0 };
        let mut updates = 0;
        let laid = self.path.elements.last().map_or(0, |laid| laid.sown);
        self.path.sown.truncate(laid);
        for (k, (from, end)) in state.amplitudes.chunks_exact(dim).zip(self.ends.chunks_exact_mut(dim)).enumerate().rev() {
            let found = element.solve(from, end, 0.2 * allowed, seed(k));
            updates += found.updates;
            solved.sweeps = solved.sweeps.max(found.sweeps);
            solved.converged &= found.converged;
            if found.at_end > solved.error || found.at_end.is_nan() {
                solved.error = found.at_end;
            }
            if k == 0 && seen && found.within > solved.error {
                (solved.error, solved.order) = (found.within, 9.0);
            }
            if !solved.converged {
                break;
            }
            if !self.path.forgotten {
                element.found(&mut self.path.sown);
            }
        }
        work.step(updates as u64, 20);
        solved
    }

    /// Shows the moments within, and goes on to the end of the element.
    fn accept(&mut self, element: &mut Element, h: f64, to_s: f64, state: &mut State, eye: &mut Eye) {
        let mut within = Vec::new();
        while let Some(moment) = self.stretch.moments.get(self.next).filter(|moment| moment.offset_s < to_s) {
            within.resize(state.dim, Complex64::default());
            element.state_at((moment.offset_s - self.tau_s) / h, &mut within);
            eye.see(self.stretch, self.next, &within, &state.time_in_s);
            self.next += 1;
        }
        if !self.path.forgotten {
            if self.path.elements.is_empty() {
                let more = (self.stretch.length_s / h).ceil().min(1e4) as usize;
                self.path.elements.reserve(2 * more);
                self.path.sown.reserve((2 * more * self.path.sown.len()).min(MOST_SOWN));
            }
            let list = self.path.lists.len() - 1;
            self.path.elements.push(Laid { from_s: self.tau_s, element_s: h, to_s, sown: self.path.sown.len(), list });
            if self.path.sown.len() > MOST_SOWN {
                *self.path = Path { forgotten: true, ..Path::default() };
            }
        }
        state.amplitudes.copy_from_slice(&self.ends);
        self.tau_s = to_s;
    }

    fn show_rest(&mut self, state: &State, eye: &mut Eye) {
        for k in self.next..self.stretch.moments.len() {
            eye.see(self.stretch, k, &state.amplitudes[..state.dim], &state.time_in_s);
        }
        self.next = self.stretch.moments.len();
    }
}

/// For each wave its number in a list of levels and turnings, which mostly come in the same order.
fn places(waves: &Waves, list: &[(usize, f64)]) -> Vec<usize> {
    let mut next = 0;
    let found = waves.list.iter().map(|wave| {
        let same = |place: &usize| list[*place] == (wave.level, wave.turns_hz);
        let place = (next..list.len()).find(same).or_else(|| (0..next).find(same));
        next = place.map_or(next, |place| place + 1);
        place.unwrap_or(usize::MAX)
    });
    found.collect()
}

/// Turns of the fastest entry of a segment where it may follow at first sight, else 0.
pub(super) fn followed_turns(picture: &Picture, sampled: &Sampled, length_s: f64) -> f64 {
    let reach = LONGEST_RAD / (coupling_rad_s(picture, &sampled.heights) * length_s);
    let longest_s = length_s * (sampled.busy / 3.0).min(sampled.reach(0.0, reach));
    if picture.fastest_hz >= slow_hz(picture, longest_s) {
        picture.fastest_hz * length_s
    } else {
        0.0
    }
}

/// Entries that turn slower than this are resolved in elements of about `length_s` or as much shorter as they need.
fn slow_hz(picture: &Picture, mut length_s: f64) -> f64 {
    loop {
        let slow_hz = 2.0 * FOLLOWS_FROM_RAD / RAD_PER_TURN / length_s;
        let all = picture.turnings.iter().flat_map(|turning| turning.parts.iter().map(|part| picture.turns_of_waves_hz(turning, part)));
        let slow = all.map(f64::abs).filter(|nu| *nu < slow_hz).fold(0.0, f64::max);
        let resolved_s = RESOLVED_TURNS / slow;
        if resolved_s >= length_s {
            return slow_hz;
        }
        length_s = resolved_s;
    }
}

/// The waves of a segment whose elements last about `first_s`, where some turn fast enough to follow.
fn expand(wanted: &Wanted, first_s: f64) -> Option<Waves> {
    let slow_hz = slow_hz(wanted.picture, first_s);
    if wanted.picture.fastest_hz < slow_hz {
        return None;
    }
    Waves::new(&Wanted { slow_hz, ..*wanted }).filter(|waves| waves.strength > 0.0)
}

/// Largest sum of couplings into a level, rad/s.
fn coupling_rad_s(picture: &Picture, heights: &[f64]) -> f64 {
    let mut rows = vec![0.0; picture.dim];
    for turning in &picture.turnings {
        let most = turning.term.map_or(1.0, |k| heights[k]);
        for part in &turning.parts {
            let size = most * part.value.norm();
            rows[part.row] += size;
            rows[part.column] += size;
        }
    }
    rows.into_iter().fold(0.0, f64::max)
}

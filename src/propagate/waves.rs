//! The expansion that both collocation methods act on: every level as a sum of waves with slowly varying amplitudes.
//!
//! In a picture in which level j has D_j left on its diagonal (rad/s) and entry (j, k) of a group turns at nu, write
//!
//! ```text
//! phi_j(tau) = sum over W of u_(j,W)(tau) exp(-2 pi i W tau),
//! i du_(j,W)/dtau = (D_j - 2 pi W) u_(j,W) + sum over entries of c(tau) value u_(k,W - nu)
//! ```
//!
//! (tau from the start of an element). Each level has one slow wave, W = 0, which is integrated from its start; the others turn by
//! themselves much faster than anything changes and follow without a part of their own (`turning::following`). Any split of phi_j into
//! waves whose sum starts at phi_j(0) solves the equation of phi_j, so nothing is dropped but the waves below a threshold: the list is
//! made from the levels that the state is in outwards, along every entry, as long as the estimated size is above it: size of the wave
//! before, times the entry, over what the new wave turns by (for slow waves that may be its distance from any well filled level, or one
//! over the time that there is). Entries that turn slower than `slow_hz` join slow waves with a coefficient that turns.
//!
//! Expansion in harmonics of the drive: J. H. Shirley, Physical Review 138, B979 (1965); with slow amplitudes: S. Guerin and
//! H. R. Jauslin, Advances in Chemical Physics 125, 147 (2003). Several carriers make sums and differences of their frequencies.

use std::collections::VecDeque;
use std::ops::Range;

use num_complex::Complex64;

use super::picture::Picture;
use crate::units::rad_s;

/// What multiplies entries within an element: the factor of a group of the picture (its conjugate for the adjoint), turning on
/// at `rest_hz` beside the waves that it joins.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Coefficient {
    /// Index in `Picture::turnings`.
    pub group: usize,
    pub conjugate: bool,
    pub rest_hz: f64,
}

/// An entry between two waves.
#[derive(Debug, Clone, Copy)]
pub(super) struct Edge {
    pub to: usize,
    pub from: usize,
    pub coefficient: usize,
    pub value: Complex64,
}

/// One wave; the slow ones come first, in the order of the levels.
#[derive(Debug, Clone)]
pub(super) struct Wave {
    pub level: usize,
    /// W, turns per second.
    pub turns_hz: f64,
    /// D_j - 2 pi W, rad/s.
    pub rest_rad_s: f64,
    /// Estimated size.
    pub size: f64,
    /// Number of the slow wave of its level.
    pub slow: usize,
    /// Its entries, as a range of [`Waves::bundles`].
    pub bundles: Range<usize>,
}

/// Entries into one wave that share a coefficient.
#[derive(Debug, Clone)]
pub(super) struct Bundle {
    pub coefficient: usize,
    /// Range of [`Waves::edges`].
    pub edges: Range<usize>,
}

/// All waves of a segment.
#[derive(Debug, Clone)]
pub(super) struct Waves {
    pub dim: usize,
    /// How many of the list are slow.
    pub slow: usize,
    pub list: Vec<Wave>,
    /// By target, then by coefficient.
    pub edges: Vec<Edge>,
    /// By target.
    pub bundles: Vec<Bundle>,
    pub coefficients: Vec<Coefficient>,
    /// Levels that nothing reaches.
    pub idle: Vec<usize>,
    /// Slowest turning of a wave that follows, rad/s; infinite if there is none.
    pub slowest_rad_s: f64,
    /// Fastest turning of a coefficient, Hz.
    pub rest_hz: f64,
    /// Largest size of a wave that follows.
    pub strength: f64,
    /// What that one turns by, rad/s.
    pub strongest_rad_s: f64,
}

/// What the list is made from.
#[derive(Debug, Clone, Copy)]
pub(super) struct Wanted<'a> {
    pub picture: &'a Picture,
    /// Largest sizes of the terms in the segment, rad/s.
    pub heights: &'a [f64],
    /// Largest amplitude of each level at the start of the segment.
    pub present: &'a [f64],
    pub length_s: f64,
    /// Entries that turn slower have coefficients that turn.
    pub slow_hz: f64,
    /// Smaller waves are left out.
    pub threshold: f64,
}

/// An entry of H seen from the level that it starts from.
#[derive(Debug, Clone, Copy)]
struct Step {
    to: usize,
    value: Complex64,
    group: usize,
    conjugate: bool,
    /// What it turns by for the waves.
    turns_hz: f64,
    /// What it turns by beside that.
    rest_hz: f64,
    /// Largest coupling, rad/s.
    push: f64,
}

/// A wave in the making.
#[derive(Debug, Clone, Copy)]
struct Draft {
    level: usize,
    turns_hz: f64,
    size: f64,
    /// The next of the same level.
    next: usize,
    waiting: bool,
}

/// Most waves of one segment for each level.
const MOST_PER_LEVEL: usize = 200;
/// Levels with this share of the amplitude or more count as well filled.
const WELL_FILLED: f64 = 0.1;
/// A wave whose estimate has grown by less is not gone through again.
const GROWN: f64 = 2.0;
const NONE: usize = usize::MAX;

impl Waves {
    /// Lists the waves. None where they are too many, or one of them turns too slowly to follow.
    pub fn new(wanted: &Wanted) -> Option<Waves> {
        let dim = wanted.picture.dim;
        let (starts, steps) = steps(wanted);
        let drafts = drafts(wanted, &starts, &steps)?;
        // a level with any wave has its slow one, which starts at what the others leave
        let mut reached = vec![false; dim];
        for draft in drafts.iter().filter(|draft| draft.size >= wanted.threshold) {
            reached[draft.level] = true;
        }
        let is_kept = |index: usize| if index < dim { reached[index] } else { drafts[index].size >= wanted.threshold };
        let mut place = vec![NONE; drafts.len()];
        let mut waves = Waves {
            dim,
            slow: 0,
            list: Vec::with_capacity(drafts.len()),
            edges: Vec::with_capacity(2 * drafts.len()),
            bundles: Vec::with_capacity(2 * drafts.len()),
            coefficients: Vec::new(),
            idle: Vec::new(),
            slowest_rad_s: f64::INFINITY,
            rest_hz: 0.0,
            strength: 0.0,
            strongest_rad_s: f64::INFINITY,
        };
        for (index, draft) in drafts.iter().enumerate() {
            if !is_kept(index) {
                if index < dim {
                    waves.idle.push(index);
                }
                continue;
            }
            place[index] = waves.list.len();
            let rest_rad_s = wanted.picture.diagonal[draft.level] - rad_s(draft.turns_hz);
            waves.list.push(Wave {
                level: draft.level,
                turns_hz: draft.turns_hz,
                rest_rad_s,
                size: draft.size,
                slow: place[draft.level],
                bundles: 0..0,
            });
            if index < dim {
                waves.slow += 1;
            } else {
                waves.slowest_rad_s = waves.slowest_rad_s.min(rest_rad_s.abs());
                if draft.size > waves.strength {
                    (waves.strength, waves.strongest_rad_s) = (draft.size, rest_rad_s.abs());
                }
            }
        }
        for (index, draft) in drafts.iter().enumerate().filter(|(index, _)| is_kept(*index)) {
            for step in &steps[starts[draft.level]..starts[draft.level + 1]] {
                let reached_hz = draft.turns_hz + step.turns_hz;
                let Some(to) = find(&drafts, step.to, reached_hz, wanted.slow_hz).filter(|to| place[*to] != NONE) else { continue };
                waves.join(place[index], place[to], step, reached_hz - drafts[to].turns_hz, reached_hz);
            }
        }
        waves.edges.sort_unstable_by_key(|edge| (edge.to, edge.coefficient, edge.from));
        waves.bundle();
        Some(waves)
    }

    /// Bundles of the edges, which are sorted.
    fn bundle(&mut self) {
        let mut at = 0;
        for (index, wave) in self.list.iter_mut().enumerate() {
            let first = self.bundles.len();
            while let Some(edge) = self.edges.get(at).filter(|edge| edge.to == index) {
                let from = at;
                while self.edges.get(at).is_some_and(|other| other.to == index && other.coefficient == edge.coefficient) {
                    at += 1;
                }
                self.bundles.push(Bundle { coefficient: edge.coefficient, edges: from..at });
            }
            wave.bundles = first..self.bundles.len();
        }
    }

    fn join(&mut self, from: usize, to: usize, step: &Step, rest_hz: f64, reached_hz: f64) {
        let grain = 8.0 * f64::EPSILON * reached_hz.abs().max(step.turns_hz.abs());
        let rest_hz = step.rest_hz + if rest_hz.abs() <= grain { 0.0 } else { rest_hz };
        let coefficient = Coefficient { group: step.group, conjugate: step.conjugate, rest_hz };
        let known = self.coefficients.iter().position(|known| *known == coefficient);
        let index = known.unwrap_or_else(|| {
            self.coefficients.push(coefficient);
            self.coefficients.len() - 1
        });
        self.rest_hz = self.rest_hz.max(rest_hz.abs());
        self.edges.push(Edge { to, from, coefficient: index, value: step.value });
    }
}

/// The wave of a level at a turning, if there is one: the slow one for slow turnings, else one close by.
fn find(drafts: &[Draft], level: usize, turns_hz: f64, slow_hz: f64) -> Option<usize> {
    if turns_hz.abs() <= slow_hz {
        return Some(level);
    }
    let mut at = drafts[level].next;
    while at != NONE && (drafts[at].turns_hz - turns_hz).abs() > 0.5 * slow_hz {
        at = drafts[at].next;
    }
    (at != NONE).then_some(at)
}

/// All waves that may be large enough, the slow one of each level first.
fn drafts(wanted: &Wanted, starts: &[usize], steps: &[Step]) -> Option<Vec<Draft>> {
    let dim = wanted.picture.dim;
    let diagonal = &diagonal_of_waves(wanted.picture);
    let mut drafts: Vec<Draft> = (0..dim)
        .map(|level| {
            let size = wanted.present[level].min(1.0);
            Draft { level, turns_hz: 0.0, size, next: NONE, waiting: size >= wanted.threshold }
        })
        .collect();
    let mut queue: VecDeque<usize> = (0..dim).filter(|level| drafts[*level].waiting).collect();
    while let Some(at) = queue.pop_front() {
        drafts[at].waiting = false;
        let Draft { level, turns_hz, size, .. } = drafts[at];
        for step in &steps[starts[level]..starts[level + 1]] {
            let reached_hz = turns_hz + step.turns_hz;
            let found = find(&drafts, step.to, reached_hz, wanted.slow_hz);
            let turned_hz = found.map_or(reached_hz, |to| drafts[to].turns_hz);
            let rest_rad_s = wanted.picture.diagonal[step.to] - rad_s(turned_hz);
            let rate = if found == Some(step.to) {
                let rest_rad_s = diagonal[step.to] - rad_s(turned_hz);
                // driven by whatever well filled levels turn by
                let filled = drafts[..dim].iter().enumerate().filter(|(k, draft)| *k != step.to && draft.size >= WELL_FILLED);
                let nearest = filled.map(|(k, _)| (diagonal[k] - rest_rad_s).abs()).fold(f64::INFINITY, f64::min);
                nearest.min((diagonal[level] - rest_rad_s).abs()).max(1.0 / wanted.length_s)
            } else {
                rest_rad_s.abs()
            };
            // a slow wave swings by twice what it would follow with
            let swing = if found == Some(step.to) { 2.0 } else { 1.0 };
            let reached = (swing * size * step.push / rate).min(1.0);
            if reached < wanted.threshold {
                continue;
            }
            let to = match found {
                Some(to) if reached <= GROWN * drafts[to].size => {
                    drafts[to].size = drafts[to].size.max(reached);
                    continue;
                }
                Some(to) => to,
                None => {
                    if rest_rad_s.abs() < rad_s(wanted.slow_hz) || drafts.len() >= MOST_PER_LEVEL * dim {
                        return None;
                    }
                    let next = drafts[step.to].next;
                    drafts[step.to].next = drafts.len();
                    drafts.push(Draft { level: step.to, turns_hz: reached_hz, size: 0.0, next, waiting: false });
                    drafts.len() - 1
                }
            };
            drafts[to].size = reached;
            if !drafts[to].waiting {
                drafts[to].waiting = true;
                queue.push_back(to);
            }
        }
    }
    Some(drafts)
}

/// What is left on the diagonal of the picture that waves take their turnings from, rad/s.
fn diagonal_of_waves(picture: &Picture) -> Vec<f64> {
    match &picture.from_tied_hz {
        Some(left) => picture.diagonal.iter().zip(left).map(|(rest, left)| rest + rad_s(*left)).collect(),
        None => picture.diagonal.clone(),
    }
}

/// Every entry of the picture and its adjoint, by the level that it starts from.
fn steps(wanted: &Wanted) -> (Vec<usize>, Vec<Step>) {
    let picture = wanted.picture;
    let mut starts = vec![0; picture.dim + 1];
    for part in picture.turnings.iter().flat_map(|turning| &turning.parts) {
        starts[part.column + 1] += 1;
        starts[part.row + 1] += 1;
    }
    for level in 0..picture.dim {
        starts[level + 1] += starts[level];
    }
    let empty = Step { to: 0, value: Complex64::default(), group: 0, conjugate: false, turns_hz: 0.0, rest_hz: 0.0, push: 0.0 };
    let mut steps = vec![empty; starts[picture.dim]];
    let mut next = starts.clone();
    for (group, turning) in picture.turnings.iter().enumerate() {
        let height = turning.term.map_or(1.0, |k| wanted.heights[k]);
        for part in &turning.parts {
            let (nu, value) = (turning.turns_hz, part.value);
            let push = height * value.norm();
            let turns_hz = picture.turns_of_waves_hz(turning, part);
            let rest_hz = nu - turns_hz;
            steps[next[part.column]] = Step { to: part.row, value, group, conjugate: false, turns_hz, rest_hz, push };
            next[part.column] += 1;
            let back = Step { to: part.column, value: value.conj(), group, conjugate: true, turns_hz: -turns_hz, rest_hz: -rest_hz, push };
            steps[next[part.row]] = back;
            next[part.row] += 1;
        }
    }
    (starts, steps)
}

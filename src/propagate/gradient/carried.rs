//! Derivatives of final numbers by whatever moves a problem, for drives of any shape, open and closed: the columns X are carried
//! forwards, the seed of each number backwards by the adjoint equation, and with lambda the seed carried back
//!
//! ```text
//! df/dp = integral of Re Tr(lambda+ (dG/dp) X) ds + Re Tr(lambda+ dX/dp) at the start
//! ```
//!
//! with G of `flow.rs` and dG/dp from problems in which p is moved a little (L. S. Pontryagin et al., The Mathematical Theory of Optimal
//! Processes, 1962, chapter 2; for pulses N. Khaneja et al., Journal of Magnetic Resonance 172, 296 (2005)).
//!
//! Both equations by collocation at Gauss's eight nodes, solved by repeated substitution, order 16 at the ends of the elements, where
//! adjoint and quadrature are of the same order; elements of at most 0.7 of the inverse norm of G and a quarter of a turn. Error: measured by
//! the caller at another fineness. Price: two integrations, and for each p a few evaluations of G at every node.

use num_complex::Complex64;

use super::flow::Local;
use crate::problem::{Matrix, Problem};
use crate::propagate::gauss::{NODES, RULE};

/// Complex numbers that may be kept at the nodes: half a gigabyte.
const MOST_KEPT: f64 = 3.2e7;
/// Multiplications that a sweep may take: some seconds.
const MOST_PRODUCTS: f64 = 1e9;
/// Largest norm of G over an element.
const LARGEST_STEP: f64 = 0.7;
/// Elements to a turn of the fastest term.
const ELEMENTS_PER_TURN: f64 = 4.0;
/// Least elements of a segment in which anything changes.
const LEAST_ELEMENTS: f64 = 4.0;

/// A number at the end of a run, as far as its derivative is concerned.
#[derive(Debug, Clone)]
pub struct Seed {
    /// First of the columns it is made of.
    pub first: usize,
    /// G with df = Re Tr(G+ dX), of these columns alone.
    pub seed: Matrix,
}

/// How a number p moves the problem: the derivative of anything is the sum of weight times what it is in the problem.
#[derive(Debug)]
pub struct Moved<'p> {
    /// Weights (per unit of p) and problems; same segments as the one that is carried.
    pub problems: Vec<(f64, &'p Problem)>,
    /// dX/dp at the start, of all columns.
    pub start: Matrix,
}

/// Why a problem is not carried.
#[derive(Debug, Clone, PartialEq)]
pub enum TooLarge {
    /// So many elements are needed, and so many numbers would have to be kept.
    Elements {
        /// Elements.
        elements: f64,
        /// Complex numbers.
        kept: f64,
    },
    /// Repeated substitution did not settle: G is not finite, or has a peak between the nodes at which it was looked at.
    Unsettled,
}

/// Columns of a problem on their way from start to end.
#[derive(Debug)]
pub struct Carried<'p> {
    problem: &'p Problem,
    open: bool,
    /// Segment, start and length in it (both as shares of it) of each element.
    elements: Vec<(usize, f64, f64)>,
    /// X at the nodes of each element.
    nodes: Vec<[Matrix; NODES]>,
    /// X at the end.
    pub end: Matrix,
}

/// Elements for each segment, with their number multiplied by `fineness`.
fn elements(problem: &Problem, open: bool, fineness: f64) -> Vec<(usize, f64, f64)> {
    let mut found = Vec::new();
    for (number, segment) in problem.segments.iter().enumerate() {
        let sizes = (0..9).map(|k| Local::new(problem, number, f64::from(k) / 8.0, open).size());
        let size = sizes.fold(0.0, f64::max);
        let terms = problem.terms_of(segment);
        let moving =
            terms.iter().any(|term| !term.is_constant() || term.turns_hz != 0.0) || problem.jumps.iter().any(|j| !j.turning.is_empty());
        let chirps = |term: &crate::problem::Term| -> f64 {
            let ends = [0.0, 0.5, 1.0].map(|s| {
                term.chirps.iter().map(|c| c.times * c.sweep.offset_hz(c.since_s + s * segment.length_s)).sum::<f64>() + term.turns_hz
            });
            ends.iter().map(|hz| hz.abs()).fold(0.0, f64::max)
        };
        let of_jumps = problem.jumps.iter().flat_map(|jump| &jump.turning).map(|part| 2.0 * part.turns_hz.abs());
        let fastest = terms.iter().map(chirps).chain(of_jumps).fold(0.0, f64::max);
        let least = if moving { LEAST_ELEMENTS } else { 1.0 };
        let count = (size / LARGEST_STEP).max(ELEMENTS_PER_TURN * fastest * segment.length_s).max(least) * fineness;
        // what is not finite or without end is judged by its number
        let count = if count < 1e9 { count.ceil() as usize } else { usize::MAX };
        if count > 10_000_000 {
            return vec![(number, 0.0, 1.0); 10_000_001];
        }
        found.extend((0..count).map(|k| (number, k as f64 / count as f64, 1.0 / count as f64)));
    }
    found
}

impl<'p> Carried<'p> {
    /// Carries `start`: states side by side, or with `open` density matrices side by side. `fineness` 1 is enough for smooth pulses.
    ///
    /// # Errors
    /// Where it would take too long or too much memory.
    pub fn new(problem: &'p Problem, start: &Matrix, open: bool, fineness: f64) -> Result<Carried<'p>, TooLarge> {
        let elements = elements(problem, open, fineness);
        let (count, dim) = (elements.len() as f64, problem.dim() as f64);
        let kept = count * (NODES * start.len()) as f64;
        // some fifteen substitutions; small matrices cost as much as larger ones
        let acting = if open { 2.0 + 2.0 * problem.jumps.len() as f64 } else { 1.0 };
        let products = count * (15 * NODES) as f64 * (acting * dim * start.len() as f64).max(50.0);
        if count > 1e7 || kept > MOST_KEPT || products > MOST_PRODUCTS {
            return Err(TooLarge::Elements { elements: count, kept });
        }
        let mut carried = Carried { problem, open, elements, nodes: Vec::new(), end: start.clone() };
        for k in 0..carried.elements.len() {
            let locals = carried.locals(problem, k);
            let length = carried.elements[k].2;
            let inner = substituted(&locals, length, &carried.end, Direction::Forwards).ok_or(TooLarge::Unsettled)?;
            for (j, x) in inner.iter().enumerate() {
                locals[j].act(length * RULE.weights.0[j], x, &mut carried.end);
            }
            carried.nodes.push(inner);
        }
        Ok(carried)
    }

    fn locals(&self, problem: &Problem, element: usize) -> [Local; NODES] {
        let (segment, from, length) = self.elements[element];
        std::array::from_fn(|j| Local::new(problem, segment, from + length * RULE.nodes.0[j], self.open))
    }

    /// The derivatives of each seeded number by each moved one, `[seed][moved]`.
    ///
    /// # Errors
    /// As of [`Carried::new`].
    pub fn derivatives(&self, seeds: &[Seed], moved: &[Moved]) -> Result<Vec<Vec<f64>>, TooLarge> {
        let mut found = vec![vec![0.0; moved.len()]; seeds.len()];
        // all seeds side by side; `places` are their first columns there
        let mut places = Vec::with_capacity(seeds.len());
        let mut width = 0;
        for seed in seeds {
            places.push(width);
            width += seed.seed.ncols();
        }
        let mut back = Matrix::zeros(self.problem.dim(), width);
        for (seed, at) in seeds.iter().zip(&places) {
            back.columns_mut(*at, seed.seed.ncols()).copy_from(&seed.seed);
        }
        let project = |back: &Matrix, changed: &Matrix, seed: usize| {
            let columns = seeds[seed].seed.ncols();
            back.columns(places[seed], columns).dotc(&changed.columns(seeds[seed].first, columns)).re
        };
        for element in (0..self.elements.len()).rev() {
            let length = self.elements[element].2;
            let locals = self.locals(self.problem, element);
            let inner = substituted(&locals, length, &back, Direction::Backwards).ok_or(TooLarge::Unsettled)?;
            for (p, moved) in moved.iter().enumerate() {
                let neighbours: Vec<(f64, [Local; NODES])> =
                    moved.problems.iter().map(|(weight, problem)| (*weight, self.locals(problem, element))).collect();
                for (j, lambda) in inner.iter().enumerate() {
                    let x = &self.nodes[element][j];
                    let mut changed = Matrix::zeros(x.nrows(), x.ncols());
                    for (weight, locals) in &neighbours {
                        locals[j].act(*weight, x, &mut changed);
                    }
                    let share = length * RULE.weights.0[j];
                    for (seed, row) in found.iter_mut().enumerate() {
                        row[p] += share * project(lambda, &changed, seed);
                    }
                }
            }
            for (j, lambda) in inner.iter().enumerate() {
                locals[j].act_adjoint(length * RULE.weights.0[j], lambda, &mut back);
            }
        }
        for (seed, row) in found.iter_mut().enumerate() {
            for (p, moved) in moved.iter().enumerate() {
                row[p] += project(&back, &moved.start, seed);
            }
        }
        Ok(found)
    }
}

/// How far two problems are apart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Apart {
    /// The largest change of an entry of G over the largest modulus that this entry has.
    pub relative: f64,
    /// The norm of the change of G, summed over the segments: about the radians that the change turns by.
    pub action: f64,
}

/// How far `other` is from `of`, seen at a few moments of each segment; none where their segments do not match.
pub fn apart(of: &Problem, other: &Problem, open: bool) -> Option<Apart> {
    let same =
        of.segments.len() == other.segments.len() && of.segments.iter().zip(&other.segments).all(|(a, b)| a.terms.len() == b.terms.len());
    if !same {
        return None;
    }
    let dim = of.dim();
    let (mut change, mut size) = (Matrix::zeros(dim, dim), Matrix::zeros(dim, dim));
    let raise = |to: &mut Matrix, by: &Matrix| to.zip_apply(by, |most, entry| most.re = most.re.max(entry.norm()));
    let mut action = 0.0;
    for segment in 0..of.segments.len() {
        let mut largest = 0.0f64;
        for s in [0.03, 0.31, 0.52, 0.77, 0.98] {
            let (here, there) = (Local::new(of, segment, s, open), Local::new(other, segment, s, open));
            let moved = &there.left - &here.left;
            largest = largest.max(moved.norm());
            raise(&mut change, &moved);
            raise(&mut size, &here.left);
        }
        action += largest;
    }
    let most = size.iter().map(|entry| entry.re).fold(0.0, f64::max);
    // what is rounding beside the largest entry has no change of its own
    let ratio = |(change, size): (&Complex64, &Complex64)| if size.re > 1e-10 * most { change.re / size.re } else { 0.0 };
    let relative = change.iter().zip(size.iter()).map(ratio).fold(0.0, f64::max);
    let new = change.iter().zip(size.iter()).any(|(change, size)| size.re <= 1e-10 * most && change.re > 1e-8 * most);
    Some(Apart { relative: if new { relative.max(change.norm() / most.max(f64::MIN_POSITIVE)) } else { relative }, action })
}

/// Which end of an element is known.
#[derive(Clone, Copy)]
enum Direction {
    Forwards,
    Backwards,
}

/// Values at the nodes of an element from the known end: x_i = x + length sum_j S_ij G_j x_j forwards, and backwards
/// x_i = x + length sum_j (w_j - S_ij) G_j+ x_j. None where it does not settle.
fn substituted(locals: &[Local; NODES], length: f64, known: &Matrix, direction: Direction) -> Option<[Matrix; NODES]> {
    let mut inner: [Matrix; NODES] = std::array::from_fn(|_| known.clone());
    let scale = known.norm();
    if !scale.is_finite() {
        return None;
    }
    let scale = scale.max(f64::MIN_POSITIVE);
    let mut last = f64::INFINITY;
    for sweep in 0..60 {
        let rates: [Matrix; NODES] = std::array::from_fn(|j| {
            let mut rate = Matrix::zeros(known.nrows(), known.ncols());
            match direction {
                Direction::Forwards => locals[j].act(length, &inner[j], &mut rate),
                Direction::Backwards => locals[j].act_adjoint(length, &inner[j], &mut rate),
            }
            rate
        });
        let mut change = 0.0f64;
        for (i, x) in inner.iter_mut().enumerate() {
            let mut next = known.clone();
            for (j, rate) in rates.iter().enumerate() {
                let s = RULE.integral[j].0[i];
                let share = match direction {
                    Direction::Forwards => s,
                    Direction::Backwards => RULE.weights.0[j] - s,
                };
                next.zip_apply(rate, |entry, more| *entry += more * share);
            }
            // a sum, so that what is not a number is seen
            change += (&next - &*x).norm();
            *x = next;
        }
        if !change.is_finite() {
            return None;
        }
        // rounding alone is left where it no longer falls
        if change <= 16.0 * f64::EPSILON * scale || (sweep > 8 && change >= 0.5 * last && change < 1e-13 * scale) {
            return Some(inner);
        }
        last = change;
    }
    None
}

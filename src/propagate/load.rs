//! How large, fast and long a problem is: the numbers that the choice of a method compares, and that bound the rounding error.

use super::asked::Demand;
use super::coherent::Groups;
use super::commuting::commutes;
use super::picture::{Kind, Picture, Pictures};
use crate::problem::{Matrix, Problem};
use crate::units::RAD_PER_TURN;

/// Sizes of a problem; turns are dimensionless, summed over the stretches where H changes in every picture.
#[derive(Debug, Clone, PartialEq)]
pub struct Load {
    /// Levels.
    pub levels: usize,
    /// Columns carried: the state, and the propagator if wanted.
    pub columns: usize,
    /// Whether times spent are wanted.
    pub time_in: bool,
    /// Segments.
    pub segments: usize,
    /// Moments to record.
    pub moments: usize,
    /// Accuracy asked for.
    pub accuracy: f64,
    /// Segments in which H changes.
    pub changing: usize,
    /// Segments in which H changes but commutes with itself, so that its integral is exponentiated (automatic choice alone).
    pub commuting: usize,
    /// How long H changes, s; commuting segments do not count.
    pub changing_s: f64,
    /// Turns through which the couplings alone swing the state.
    pub coupling_turns: f64,
    /// Turns of the fastest entry where nothing is left on the diagonal.
    pub entry_turns: f64,
    /// Turns through which the whole of H swings the state in the stillest picture.
    pub swing_turns: f64,
    /// Turns of H itself in the stillest picture.
    pub still_turns: f64,
    /// Turns of what turns fast enough to be carried by harmonics, in the segments where something does.
    pub followed_turns: f64,
    /// How often the envelopes rise or fall by all of their height.
    pub rises: f64,
    /// Size of H in the frame of the problem, its mean taken off, times time, over everything, rad.
    pub lab_rad: f64,
    /// The same with those entries of the diagonal, as they stand, whose phases can be seen: what rounding is relative to, rad.
    pub entries_rad: f64,
    /// Largest turning frequency times time, over everything, turns.
    pub carrier_turns: f64,
    /// Of an open problem: real coordinates of a density matrix; else 0.
    pub coordinates: usize,
    /// Entries of its generator where it changes.
    pub nonzero: usize,
    /// Lifetimes of the fastest decay that pass where it changes.
    pub decays: f64,
    /// The same over everything.
    pub all_decays: f64,
}

/// Bound of ||H - middle of the diagonal|| of a picture, in Hz, with these largest sizes of the terms in rad/s.
pub(super) fn size_hz(picture: &Picture, heights: &[f64]) -> f64 {
    let mut rows = vec![0.0; picture.dim];
    for turning in &picture.turnings {
        let most = turning.term.map_or(1.0, |k| heights[k]);
        for part in &turning.parts {
            let size = most * part.value.norm();
            rows[part.row] += size;
            rows[part.column] += size;
        }
    }
    let coupling = rows.into_iter().fold(0.0, f64::max);
    (coupling + half_range(picture.diagonal.iter().copied())) / RAD_PER_TURN
}

/// Periods below which no segment is worth an expansion in harmonics.
const LEAST_PERIODS: f64 = 10.0;

fn half_range(values: impl Iterator<Item = f64>) -> f64 {
    let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| (value.min(low), value.max(high)));
    if high >= low {
        0.5 * (high - low)
    } else {
        0.0
    }
}

/// Largest sum of moduli in a row of B + adjoint, the diagonal counted too.
pub(super) fn row_bound(b: &Matrix) -> f64 {
    (0..b.nrows()).map(|j| (0..b.ncols()).map(|k| b[(j, k)].norm() + b[(k, j)].norm()).sum::<f64>()).fold(0.0, f64::max)
}

/// Bounds of the size of the static part, rad/s: its mean taken off, and that of its off-diagonal entries alone.
pub(super) fn resting(problem: &Problem) -> (f64, f64) {
    let n = problem.dim();
    let a = &problem.statics;
    let off = (0..n).map(|j| (0..n).filter(|k| *k != j).map(|k| a[(j, k)].norm()).sum::<f64>()).fold(0.0, f64::max);
    (off + half_range((0..n).map(|j| a[(j, j)].re)), off)
}

impl Load {
    /// Sizes that need no look at the segments; one column.
    pub(super) fn empty(problem: &Problem, demand: &Demand, accuracy: f64) -> Self {
        Load {
            levels: problem.dim(),
            columns: 1,
            time_in: demand.time_in,
            segments: problem.segments.len(),
            moments: problem.moments.len(),
            accuracy,
            changing: 0,
            commuting: 0,
            changing_s: 0.0,
            coupling_turns: 0.0,
            entry_turns: 0.0,
            swing_turns: 0.0,
            still_turns: 0.0,
            rises: 0.0,
            followed_turns: 0.0,
            lab_rad: 0.0,
            entries_rad: 0.0,
            carrier_turns: 0.0,
            coordinates: 0,
            nonzero: 0,
            decays: 0.0,
            all_decays: 0.0,
        }
    }

    /// The load, and for each segment whether it is done by its integral (never without `integrals`).
    pub(super) fn of(problem: &Problem, demand: &Demand, accuracy: f64, integrals: bool, pictures: &mut Pictures) -> (Self, Vec<bool>) {
        let n = problem.dim();
        let bounds: Vec<f64> = problem.matrices.iter().map(row_bound).collect();
        let (resting_rad_s, off_rad_s) = resting(problem);
        let mut groups = Groups::at_start(problem, demand.propagator);
        let mut load = Load { columns: if demand.propagator { n + 1 } else { 1 }, ..Load::empty(problem, demand, accuracy) };
        let mut by_integral = vec![false; problem.segments.len()];
        for (index, segment) in problem.segments.iter().enumerate() {
            let (terms, length_s) = (problem.terms_of(segment), segment.length_s);
            groups.meet(terms);
            let entries_rad_s = off_rad_s + groups.largest_diagonal(&problem.statics);
            let tied = pictures.of(segment, Kind::Tied);
            let mut rad_s = resting_rad_s;
            let carrier = terms.iter().fold(0.0, |most: f64, term| term.turns_hz.abs().max(most));
            if tied.constant(terms) {
                rad_s += terms.iter().map(|term| bounds[term.matrix] * term.slow(0.0).norm()).sum::<f64>();
            } else {
                let sampled = pictures.sampled(segment);
                rad_s += terms.iter().zip(&sampled.heights).map(|(term, most)| bounds[term.matrix] * most).sum::<f64>();
                if integrals && commutes(&tied, terms, length_s) {
                    load.commuting += 1;
                    by_integral[index] = true;
                    load.lab_rad += rad_s * length_s;
                    load.entries_rad += (rad_s - resting_rad_s + entries_rad_s) * length_s;
                    load.carrier_turns += carrier * length_s;
                    continue;
                }
                let free = pictures.of(segment, Kind::Free);
                load.changing += 1;
                load.changing_s += length_s;
                load.coupling_turns += size_hz(&free, &sampled.heights) * length_s;
                load.entry_turns += free.fastest_hz * length_s;
                load.swing_turns += size_hz(&tied, &sampled.heights) * length_s;
                load.still_turns += tied.fastest_hz * length_s;
                load.rises += sampled.way;
                if !demand.time_in && free.fastest_hz * length_s > LEAST_PERIODS {
                    load.followed_turns +=
                        super::collocation::followed_turns(&pictures.of(segment, Kind::followed(demand)), &sampled, length_s);
                }
            }
            load.lab_rad += rad_s * length_s;
            load.entries_rad += (rad_s - resting_rad_s + entries_rad_s) * length_s;
            load.carrier_turns += carrier * length_s;
        }
        (load, by_integral)
    }

    /// What rounding leaves uncertain in any recorded number: that of the entries of H over the whole time, and that of `sums`
    /// products one after the other, which all err in the same sense where the factors are alike.
    pub(super) fn floor(&self, sums: u64) -> f64 {
        f64::EPSILON * (4.0 + 1.05 * self.entries_rad + 0.25 * sums as f64)
    }
}

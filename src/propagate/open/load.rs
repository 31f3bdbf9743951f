//! How large, fast and long an open problem is, in the terms of [`Load`].

use super::super::asked::Demand;
use super::super::choose::Method;
use super::super::coherent::Groups;
use super::super::load::{resting, row_bound, size_hz, Load};
use super::super::sampled::Sampled;
use super::run::{Route, Stretch};
use crate::problem::{Problem, Segment};
use crate::units::RAD_PER_TURN;

/// Bound of how fast the state swings or decays in a stretch, turns per second; decays count one turn for 2 pi lifetimes.
pub(super) fn rate_hz(stretch: &Stretch) -> f64 {
    let mut values = Vec::new();
    let mut most: f64 = 0.0;
    let looks = if stretch.generator.constant(stretch.terms) { 0 } else { 8 };
    for look in 0..=looks {
        let tau_s = stretch.length_s * (f64::from(look) + 0.5) / f64::from(looks + 1);
        stretch.generator.at(stretch.terms, stretch.start, tau_s, &mut values);
        most = most.max(stretch.generator.bound(&values, &mut Vec::new()));
    }
    // a commutator swings by differences, and the sum norm counts both parts of each coherence
    0.5 * most / RAD_PER_TURN
}

/// Largest rate at which a level is left, 1/s, beats at their largest.
fn decay_per_s(problem: &Problem) -> f64 {
    let n = problem.dim();
    let leaving = |b: usize| -> f64 {
        let of = |jump: &crate::problem::Jump| {
            let column = |matrix: &crate::problem::Matrix| matrix.column(b).norm_squared();
            jump.rate_per_s * (column(&jump.matrix) + jump.turning.iter().map(|part| column(&part.matrix)).sum::<f64>())
        };
        problem.jumps.iter().map(of).sum()
    };
    (0..n).map(leaving).fold(0.0, f64::max)
}

impl Load {
    /// The load of an open problem.
    pub(in super::super) fn of_open(problem: &Problem, demand: &Demand, accuracy: f64, route: &mut Route) -> Load {
        let n = problem.dim();
        let (resting_rad_s, off_rad_s) = resting(problem);
        let mut groups = Groups::at_start(problem, demand.propagator);
        let bounds: Vec<f64> = problem.matrices.iter().map(row_bound).collect();
        let decay = decay_per_s(problem);
        let within = if demand.within.is_empty() { n } else { demand.within.len() };
        let mut load = Load::empty(problem, demand, accuracy);
        load.columns = if demand.propagator { within * within + 1 } else { 1 };
        load.coordinates = n * n;
        for segment in &problem.segments {
            let (terms, length_s) = (problem.terms_of(segment), segment.length_s);
            groups.meet(terms);
            let entries_rad_s = off_rad_s + groups.largest_diagonal(&problem.statics);
            let mut rad_s = resting_rad_s;
            let mut carrier: f64 = 0.0;
            let sampled = Sampled::of(terms, length_s);
            for (term, most) in terms.iter().zip(&sampled.heights) {
                rad_s += bounds[term.matrix] * most;
                carrier = carrier.max(term.turns_hz.abs());
            }
            if route.still(segment).is_none() {
                load.changing += 1;
                load.changing_s += length_s;
                load.rises += sampled.way / sampled.busy.max(0.25);
                load.decays += decay * length_s;
                moving(&mut load, segment, &sampled, route);
            }
            load.all_decays += decay * length_s;
            load.lab_rad += rad_s * length_s;
            load.entries_rad += (rad_s - resting_rad_s + entries_rad_s) * length_s;
            load.carrier_turns += carrier * length_s;
        }
        load
    }
}

/// What a changing segment adds.
fn moving(load: &mut Load, segment: &Segment, sampled: &Sampled, route: &mut Route) {
    let length_s = segment.length_s;
    let (free, generator) = route.moving(segment, Method::Smooth);
    load.coupling_turns += size_hz(&free, &sampled.heights) * length_s;
    load.entry_turns += generator.fastest_hz * length_s;
    load.nonzero = load.nonzero.max(generator.entries());
    let (tied, generator) = route.moving(segment, Method::Geometric);
    load.swing_turns += size_hz(&tied, &sampled.heights) * length_s;
    load.still_turns += generator.fastest_hz * length_s;
}

//! A mixed start of a system that nothing damps: its eigenvectors are carried as amplitudes, each with its weight.

use num_complex::Complex64;

use super::asked::{Demand, Recorder};
use super::run::{run, Fineness, Route, Work};
use crate::problem::{Channel, Matrix, Problem, Start, State};

/// Weights below this share of the largest are rounding.
const NOTHING: f64 = 1e-17;

/// The parts of a closed problem that starts mixed: weight and pure problem, the largest weight first; none of any other problem.
pub(super) fn parts(problem: &Problem) -> Vec<(f64, Problem)> {
    let Start::Mixed(density) = &problem.start else { return Vec::new() };
    if problem.jumps.iter().any(|jump| jump.rate_per_s > 0.0) {
        return Vec::new();
    }
    let eigen = ((density + density.adjoint()) * Complex64::from(0.5)).symmetric_eigen();
    let mut pairs: Vec<(f64, usize)> = eigen.eigenvalues.iter().copied().zip(0..).collect();
    pairs.sort_by(|a, b| b.0.total_cmp(&a.0));
    let least = NOTHING * pairs.first().map_or(0.0, |(weight, _)| *weight);
    pairs.retain(|(weight, _)| *weight > least);
    let pure = |k: usize| Start::Pure(eigen.eigenvectors.column(k).into_owned());
    pairs.into_iter().map(|(weight, k)| (weight, Problem { start: pure(k), ..problem.clone() })).collect()
}

/// The routes of all parts.
pub(super) struct Mixture<'p> {
    routes: Vec<(f64, Route<'p>)>,
    demand: Demand,
}

impl<'p> Mixture<'p> {
    /// `route` makes the route of one part.
    pub fn new(parts: &'p [(f64, Problem)], demand: &Demand, route: impl Fn(&'p Problem) -> Route<'p>) -> Mixture<'p> {
        Mixture { routes: parts.iter().map(|(weight, part)| (*weight, route(part))).collect(), demand: demand.clone() }
    }

    /// Runs all parts, then shows their sum.
    pub fn run(&mut self, fineness: &Fineness, left: f64, recorder: &mut dyn Recorder) -> Work {
        let mut sum = Sum::default();
        let mut whole = Work { steps: 0, products: 0, left };
        for (weight, route) in &mut self.routes {
            sum.weight = *weight;
            let work = run(route, fineness, whole.left, &mut sum);
            whole = Work { steps: whole.steps + work.steps, products: whole.products + work.products, left: work.left };
        }
        for (moment, (density, times)) in sum.densities.iter().zip(&sum.times).enumerate() {
            recorder.see(moment, State::Mixed(density), times);
        }
        recorder.finish(None);
        if let Some(u) = &sum.propagator {
            let within: Vec<usize> = if self.demand.within.is_empty() { (0..u.nrows()).collect() } else { self.demand.within.clone() };
            recorder.finish_channel(&Channel::of_propagator(u, &within));
        }
        whole
    }
}

/// Adds up what the parts show.
#[derive(Default)]
struct Sum {
    weight: f64,
    densities: Vec<Matrix>,
    times: Vec<Vec<f64>>,
    propagator: Option<Matrix>,
}

impl Recorder for Sum {
    fn see(&mut self, moment: usize, state: State, time_in_s: &[f64]) {
        let more = state.density() * Complex64::from(self.weight);
        if moment == self.densities.len() {
            self.densities.push(more);
            self.times.push(time_in_s.iter().map(|time| time * self.weight).collect());
        } else {
            self.densities[moment] += more;
            self.times[moment].iter_mut().zip(time_in_s).for_each(|(sum, time)| *sum += time * self.weight);
        }
    }

    fn finish(&mut self, propagator: Option<&Matrix>) {
        self.propagator = propagator.cloned();
    }

    fn numbers(&self) -> &[f64] {
        &[]
    }
}

//! One run over all segments at one resolution: constant stretches by exponentials, the others by the method chosen.

use std::collections::HashMap;
use std::rc::Rc;

use num_complex::Complex64;

use super::asked::{Demand, Recorder};
use super::choose::Method;
use super::constant::Flows;
use super::picture::{Kind, Picture, Pictures};
use super::sampled::Sampled;
use super::smooth::Smooth;
use super::{collocation, commuting, constant, geometric, slices};
use crate::problem::{self, Matrix, Moment, Problem, Term, Vector};

/// How finely a run is done; each method reads its own field.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Fineness {
    /// Runge-Kutta: error of the whole run that the step control aims at.
    pub tolerance: f64,
    /// Constant stretches: exponentials for each; Runge-Kutta: least steps between moments.
    pub pieces: u32,
    /// Equal steps: how often the first number of steps is doubled.
    pub doublings: u32,
    /// Collocation: whether to halve the elements of the run before.
    pub halved: bool,
}

impl Fineness {
    /// The same with a tolerance of at least `least`.
    pub fn no_finer_than(self, least: f64) -> Fineness {
        Fineness { tolerance: self.tolerance.max(least), ..self }
    }
}

/// What a run has cost, and what it may still cost.
#[derive(Debug, Clone, Copy)]
pub(super) struct Work {
    /// Steps of this run.
    pub steps: u64,
    /// Matrix-vector products of this run.
    pub products: u64,
    /// Multiplications left; at zero the run is cut short and worthless.
    pub left: f64,
}

impl Work {
    /// Books `products` matrix-vector products of `multiplications` each in one step.
    pub fn step(&mut self, products: u64, multiplications: usize) {
        self.steps += 1;
        self.products += products;
        // Twenty multiplications stand for what a product costs beside its entries (phases, envelopes, the loop).
        self.left -= products as f64 * (multiplications + 20) as f64;
    }

    /// Whether nothing is left.
    pub fn exhausted(&self) -> bool {
        self.left <= 0.0
    }
}

/// Amplitudes in the picture of the segment: the state, then the columns of the propagator if wanted.
#[derive(Debug, Clone)]
pub(super) struct State {
    pub dim: usize,
    pub amplitudes: Vec<Complex64>,
    /// Seconds spent in each basis state so far; empty unless wanted.
    pub time_in_s: Vec<f64>,
}

/// One segment in its picture, with the moments that lie in it.
pub(super) struct Stretch<'a> {
    pub picture: &'a Picture,
    pub terms: &'a [Term],
    /// Samples of the terms; empty where H is constant.
    pub sampled: &'a Sampled,
    pub length_s: f64,
    pub moments: &'a [Moment],
    /// Number of the first of them among all moments.
    pub first: usize,
}

/// Shows states to the recorder in the frame of the problem.
pub(super) struct Eye<'a> {
    pub recorder: &'a mut dyn Recorder,
    pub lab: Vector,
}

impl Eye<'_> {
    /// Shows the state `psi` of the picture at moment number `k` of the stretch.
    pub fn see(&mut self, stretch: &Stretch, k: usize, psi: &[Complex64], time_in_s: &[f64]) {
        self.lab.as_mut_slice().copy_from_slice(psi);
        stretch.picture.to_problem(stretch.moments[k].offset_s, self.lab.as_mut_slice());
        self.recorder.see(stretch.first + k, problem::State::Pure(&self.lab), time_in_s);
    }
}

/// What all runs of one problem have in common.
pub(super) struct Route<'p> {
    pub problem: &'p Problem,
    pub demand: Demand,
    pub method: Method,
    /// Segments whose H commutes with itself and that are done by its integral.
    pub by_integral: Vec<bool>,
    /// How long H changes altogether, s; the step control spreads its tolerance over it.
    pub changing_s: f64,
    pub pictures: Pictures<'p>,
    /// Elements of the last run, by segment (collocation alone).
    pub paths: HashMap<usize, collocation::Path>,
}

/// Runs the whole problem once, with `left` multiplications to spend at most.
pub(super) fn run(route: &mut Route, fineness: &Fineness, left: f64, recorder: &mut dyn Recorder) -> Work {
    let Route { problem, demand, method, by_integral, changing_s, pictures, paths } = route;
    let (problem, method) = (*problem, *method);
    let dim = problem.dim();
    let start = problem.start.amplitudes().expect("a closed problem starts pure");
    let mut work = Work { steps: 0, products: 0, left };
    let mut state = State { dim, amplitudes: start.as_slice().to_vec(), time_in_s: vec![0.0; if demand.time_in { dim } else { 0 }] };
    if demand.propagator {
        state.amplitudes.extend_from_slice(Matrix::identity(dim, dim).as_slice());
    }
    let mut eye = Eye { recorder, lab: start.clone() };
    let mut flows = Flows::new(dim);
    let mut smooth = None;
    let mut next = 0;
    for (index, segment) in problem.segments.iter().enumerate() {
        let first = next;
        while next < problem.moments.len() && problem.moments[next].segment <= index {
            next += 1;
        }
        let terms = problem.terms_of(segment);
        let tied = pictures.of(segment, Kind::Tied);
        let still = tied.constant(terms);
        let commuting = by_integral[index];
        let picture = match method {
            _ if still || commuting => tied,
            Method::Smooth => pictures.of(segment, Kind::Free),
            Method::Carrier => pictures.of(segment, Kind::followed(demand)),
            _ => tied,
        };
        let sampled = if still { Rc::default() } else { pictures.sampled(segment) };
        let stretch = Stretch {
            picture: &picture,
            terms,
            sampled: &sampled,
            length_s: segment.length_s,
            moments: &problem.moments[first..next],
            first,
        };
        if still {
            constant::pass(&stretch, fineness.pieces, &mut flows, &mut state, &mut eye, &mut work);
        } else if commuting {
            commuting::pass(&stretch, f64::from(fineness.pieces) * 2f64.powi(fineness.doublings as i32), &mut state, &mut eye, &mut work);
        } else {
            let limits = collocation::Limits { fineness, changing_s: *changing_s };
            let path = paths.entry(index).or_default();
            match method {
                Method::Collocation => collocation::pass(&stretch, false, &limits, path, &mut state, &mut eye, &mut work),
                Method::Carrier => collocation::pass(&stretch, true, &limits, path, &mut state, &mut eye, &mut work),
                Method::Smooth => smooth
                    .get_or_insert_with(|| Smooth::new(dim, state.amplitudes.len(), demand.time_in, *changing_s))
                    .pass(&stretch, fineness, &mut state, &mut eye, &mut work),
                Method::Geometric => geometric::pass(&stretch, fineness.doublings, &mut state, &mut eye, &mut work),
                Method::ConstantSteps => slices::pass(&stretch, fineness.doublings, &mut state, &mut eye, &mut work),
            }
        }
        picture.to_problem(segment.length_s, &mut state.amplitudes);
    }
    for moment in next..problem.moments.len() {
        eye.lab.as_mut_slice().copy_from_slice(&state.amplitudes[..dim]);
        eye.recorder.see(moment, problem::State::Pure(&eye.lab), &state.time_in_s);
    }
    let propagator = demand.propagator.then(|| Matrix::from_column_slice(dim, dim, &state.amplitudes[dim..]));
    eye.recorder.finish(propagator.as_ref());
    work
}

//! Tests of the whole room: problems are built by hand here, without any other room.

mod closed_forms;
mod collocation;
mod laws;
mod open;
mod open_forms;
mod open_laws;
mod reference;
mod speed;
mod statistics;
mod steady;
mod trajectories;

use std::sync::Arc;

use num_complex::Complex64;

use super::{Asked, Demand, Method, Recorder};
use crate::problem::{Envelope, Instant, Matrix, Moment, Problem, Segment, Slow, Start, State, Term, Vector};
use crate::units::rad_s;

/// Records populations, amplitudes, times spent (over the last time) and the propagator, as asked.
#[derive(Debug, Clone, Default)]
pub struct Kept {
    pub populations_only: bool,
    pub amplitudes: Vec<Vec<Complex64>>,
    pub time_in_s: Vec<Vec<f64>>,
    pub propagator: Option<Matrix>,
    pub scale_s: f64,
    numbers: Vec<f64>,
}

impl Recorder for Kept {
    fn see(&mut self, moment: usize, state: State, time_in_s: &[f64]) {
        assert_eq!(moment, self.amplitudes.len(), "moments come in order");
        let State::Pure(state) = state else { panic!("closed problems show amplitudes") };
        self.numbers.extend(state.iter().map(|a| a.norm_sqr()));
        if !self.populations_only {
            self.numbers.extend(state.iter().flat_map(|a| [a.re, a.im]));
        }
        self.numbers.extend(time_in_s.iter().map(|t| t / self.scale_s));
        self.amplitudes.push(state.as_slice().to_vec());
        self.time_in_s.push(time_in_s.to_vec());
    }

    fn finish(&mut self, propagator: Option<&Matrix>) {
        self.propagator = propagator.cloned();
        if let Some(u) = propagator {
            self.numbers.extend(u.iter().flat_map(|a| [a.re, a.im]));
        }
    }

    fn numbers(&self) -> &[f64] {
        &self.numbers
    }
}

impl Kept {
    pub fn last(&self) -> &[Complex64] {
        self.amplitudes.last().expect("the end is a moment")
    }

    pub fn population(&self, j: usize) -> f64 {
        self.last()[j].norm_sqr()
    }
}

/// An envelope from a closure.
pub struct Shape(pub Box<dyn Fn(f64) -> Complex64 + Send + Sync>);

impl std::fmt::Debug for Shape {
    fn fmt(&self, f: &mut std::fmt::Formatter) -> std::fmt::Result {
        f.write_str("Shape")
    }
}

impl Slow for Shape {
    fn at(&self, t_s: f64) -> Complex64 {
        (self.0)(t_s)
    }
}

pub fn re(x: f64) -> Complex64 {
    Complex64::new(x, 0.0)
}

/// `peak_hz` times a shape of the time in the segment.
pub fn shaped(peak_hz: f64, shape: impl Fn(f64) -> f64 + Send + Sync + 'static) -> Envelope {
    Envelope::Smooth { shape: Arc::new(Shape(Box::new(move |t| re(shape(t))))), since_s: 0.0, scale: re(rad_s(peak_hz)) }
}

pub fn flat(hz: f64) -> Envelope {
    Envelope::Constant(re(rad_s(hz)))
}

/// A term of one segment under construction.
pub fn term(matrix: usize, turns_hz: f64, phase_turns: f64, envelope: Envelope) -> Term {
    Term { matrix, turns_hz, phase_turns, envelope, chirps: Vec::new() }
}

/// Builds a problem from matrices in Hz and (length, terms, offsets of moments) of each segment; the end is recorded too.
pub fn problem(statics_hz: &Matrix, matrices: Vec<Matrix>, segments: Vec<(f64, Vec<Term>, Vec<f64>)>) -> Problem {
    let dim = statics_hz.nrows();
    let mut built = Problem {
        statics: Arc::new(statics_hz.map(|entry| entry * rad_s(1.0))),
        matrices: Arc::new(matrices),
        segments: Vec::new(),
        terms: Vec::new(),
        start: Start::Pure(Vector::from_fn(dim, |j, _| re(if j == 0 { 1.0 } else { 0.0 }))),
        jumps: Arc::default(),
        moments: Vec::new(),
    };
    let mut start = Instant::at(0.0);
    let count = segments.len();
    for (index, (length_s, terms, offsets)) in segments.into_iter().enumerate() {
        let from = built.terms.len();
        built.terms.extend(terms);
        built.segments.push(Segment { start, length_s, terms: from..built.terms.len() });
        for offset_s in offsets {
            built.moments.push(Moment { segment: index, offset_s, time_s: start.after(offset_s).seconds() });
        }
        if index + 1 == count {
            built.moments.push(Moment { segment: index, offset_s: length_s, time_s: start.after(length_s).seconds() });
        }
        start = start.after(length_s);
    }
    built
}

/// A pure start.
pub fn start(amplitudes: &[f64]) -> Start {
    Start::Pure(Vector::from_iterator(amplitudes.len(), amplitudes.iter().map(|a| re(*a))))
}

/// A matrix with the given entries, 0 elsewhere.
pub fn sparse(dim: usize, entries: &[(usize, usize, f64)]) -> Matrix {
    let mut m = Matrix::zeros(dim, dim);
    for (row, column, value) in entries {
        m[(*row, *column)] = re(*value);
    }
    m
}

pub fn diagonal(values: &[f64]) -> Matrix {
    sparse(values.len(), &values.iter().enumerate().map(|(j, v)| (j, j, *v)).collect::<Vec<_>>())
}

pub fn asked(accuracy: f64, method: Option<Method>) -> Asked {
    Asked { accuracy, method, cross_check: false }
}

/// Solves for populations and amplitudes.
pub fn solve(problem: &Problem, accuracy: f64, method: Option<Method>) -> super::Solved<Kept> {
    super::solve(problem, &Demand::default(), &asked(accuracy, method), Kept::default)
}

/// The last state of a run with equal steps doubled so many times.
pub fn at_doublings(problem: &Problem, method: Method, doublings: u32) -> Vec<Complex64> {
    let mut kept = Kept::default();
    let pictures = super::picture::Pictures::new(problem);
    let mut route = super::run::Route {
        problem,
        demand: Demand::default(),
        method,
        by_integral: vec![false; problem.segments.len()],
        changing_s: problem.length_s(),
        pictures,
        paths: Default::default(),
    };
    let fineness = super::run::Fineness { tolerance: 1e-10, pieces: 1, doublings, halved: false };
    super::run::run(&mut route, &fineness, 1e12, &mut kept);
    kept.last().to_vec()
}

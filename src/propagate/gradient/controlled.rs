//! A system under controls that are constant in slices: H = A + sum_c u_c C_c.

use std::fmt;

use super::goals::Goal;
use crate::problem::Matrix;

/// A system and the slices of its controls; the samples come with each question.
#[derive(Debug, Clone)]
pub struct Controlled {
    pub(super) statics: Matrix,
    pub(super) controls: Vec<Matrix>,
    pub(super) lengths_s: Vec<f64>,
}

/// Why no gradient can be given.
#[derive(Debug, Clone, PartialEq)]
pub enum GradientFault {
    /// A matrix is not `dim` x `dim`: which control, none for the static matrix.
    Shape(Option<usize>),
    /// A matrix is not Hermitian, or not finite: which control, none for the static matrix.
    NotHermitian(Option<usize>),
    /// There is no slice, or one whose length is not positive.
    Length(usize),
    /// There are no samples at all.
    NoSets,
    /// So many samples were given, and a multiple of so many is needed.
    Count {
        /// Given.
        given: usize,
        /// Slices times controls.
        of_a_set: usize,
    },
    /// The sample at this place is not a finite number.
    NotFinite(usize),
    /// The goal is for so many levels, the system has so many.
    Goal {
        /// Levels of the goal.
        goal: usize,
        /// Levels of the system.
        system: usize,
    },
    /// A slice turns by so many radians: more than can be carried.
    TooStrong(f64),
}

impl fmt::Display for GradientFault {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        let which = |control: &Option<usize>| control.map_or("the static matrix".to_string(), |k| format!("the matrix of control {k}"));
        match self {
            GradientFault::Shape(control) => write!(f, "{} has another size than the static matrix", which(control)),
            GradientFault::NotHermitian(control) => write!(f, "{} is not a Hermitian matrix of finite numbers", which(control)),
            GradientFault::Length(slice) => write!(f, "slice {slice} has no positive length"),
            GradientFault::NoSets => write!(f, "there are no samples"),
            GradientFault::Count { given, of_a_set } => {
                write!(f, "{given} samples are not a multiple of {of_a_set}, slices times controls")
            }
            GradientFault::NotFinite(place) => write!(f, "sample {place} is not a finite number"),
            GradientFault::Goal { goal, system } => write!(f, "the goal is for {goal} levels, the system has {system}"),
            GradientFault::TooStrong(rad) => write!(f, "a slice turns by {rad:.1e} rad, too much to be resolved; use shorter slices"),
        }
    }
}

impl std::error::Error for GradientFault {}

impl Controlled {
    /// `statics` is A in rad/s, `controls` the C_c without dimension, all Hermitian to 1e-12 of their largest entry.
    ///
    /// # Errors
    /// Where shapes, Hermiticity or lengths are wrong.
    pub fn new(statics: Matrix, controls: Vec<Matrix>, lengths_s: Vec<f64>) -> Result<Controlled, GradientFault> {
        let dim = statics.nrows();
        let all = std::iter::once((None, &statics)).chain(controls.iter().enumerate().map(|(k, control)| (Some(k), control)));
        for (which, matrix) in all {
            if dim == 0 || matrix.shape() != (dim, dim) {
                return Err(GradientFault::Shape(which));
            }
            let largest = matrix.iter().map(|entry| entry.norm()).fold(0.0, f64::max);
            let odd = (matrix - matrix.adjoint()).iter().map(|entry| entry.norm()).fold(0.0, f64::max);
            let finite = matrix.iter().all(|entry| entry.re.is_finite() && entry.im.is_finite());
            if !finite || odd > 1e-12 * largest {
                return Err(GradientFault::NotHermitian(which));
            }
        }
        if let Some(slice) = lengths_s.iter().position(|length| !(*length > 0.0 && length.is_finite())) {
            return Err(GradientFault::Length(slice));
        }
        if lengths_s.is_empty() {
            return Err(GradientFault::Length(0));
        }
        Ok(Controlled { statics, controls, lengths_s })
    }

    /// Number of levels.
    pub fn dim(&self) -> usize {
        self.statics.nrows()
    }

    /// Number of samples of a set: slices times controls.
    pub fn samples(&self) -> usize {
        self.lengths_s.len() * self.controls.len()
    }

    /// H of a slice, rad/s.
    pub fn hamiltonian(&self, samples: &[f64], slice: usize) -> Matrix {
        let count = self.controls.len();
        let mut h = self.statics.clone();
        for (control, sample) in self.controls.iter().zip(&samples[slice * count..]) {
            h.zip_apply(control, |entry, more| *entry += more * *sample);
        }
        h
    }

    pub(super) fn check(&self, samples: &[f64], sets: usize, goal: &dyn Goal) -> Result<(), GradientFault> {
        let of_a_set = self.samples();
        if sets == 0 || samples.is_empty() {
            return Err(GradientFault::NoSets);
        }
        if samples.len() != sets * of_a_set {
            return Err(GradientFault::Count { given: samples.len(), of_a_set });
        }
        if let Some(place) = samples.iter().position(|sample| !sample.is_finite()) {
            return Err(GradientFault::NotFinite(place));
        }
        if goal.dim() != self.dim() {
            return Err(GradientFault::Goal { goal: goal.dim(), system: self.dim() });
        }
        Ok(())
    }
}

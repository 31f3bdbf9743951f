//! One run of an open problem over all segments at one resolution.

use std::collections::HashMap;
use std::rc::Rc;

use super::super::asked::{Demand, Recorder};
use super::super::choose::Method;
use super::super::picture::{Kind, Picture, Pictures};
use super::super::run::{Fineness, Work};
use super::constant::Steps;
use super::generator::{Generator, Generators};
use super::smooth::Smooth;
use super::{constant, coordinates, even_steps};
use crate::problem::{Instant, Matrix, Moment, Problem, Segment, State, Term};

/// Coordinates in the picture of the segment: the density matrix (and times spent), then the operators of the channel if wanted.
#[derive(Debug, Clone)]
pub(super) struct Columns {
    /// Length of a column.
    pub size: usize,
    /// Column after column.
    pub x: Vec<f64>,
}

/// One segment in its picture, with the moments that lie in it.
pub(super) struct Stretch<'a> {
    pub picture: &'a Picture,
    pub generator: &'a Generator,
    pub terms: &'a [Term],
    pub start: Instant,
    pub length_s: f64,
    pub moments: &'a [Moment],
    /// Number of the first of them among all moments.
    pub first: usize,
}

/// Shows densities to the recorder in the frame of the problem.
pub(super) struct Eye<'a> {
    recorder: &'a mut dyn Recorder,
    density: Matrix,
    x: Vec<f64>,
    /// Of times spent, s; 0 where they are not wanted.
    unit_s: f64,
}

impl Eye<'_> {
    /// Shows the first of the columns at moment number `k` of the stretch.
    pub fn see(&mut self, stretch: &Stretch, k: usize, x: &[f64]) {
        let turned = (!stretch.picture.at_rest).then_some((&stretch.picture.turns_hz[..], stretch.moments[k].offset_s));
        self.show(stretch.first + k, x, turned);
    }

    fn show(&mut self, moment: usize, x: &[f64], turned: Option<(&[f64], f64)>) {
        let dim = self.density.nrows();
        let length = coordinates::count(dim) + if self.unit_s > 0.0 { dim } else { 0 };
        self.x.clear();
        self.x.extend_from_slice(&x[..length]);
        if let Some((turns_hz, tau_s)) = turned {
            coordinates::turn(turns_hz, tau_s, &mut self.x);
        }
        coordinates::matrix(&self.x, &mut self.density);
        let times = &mut self.x[coordinates::count(dim)..];
        times.iter_mut().for_each(|time| *time *= self.unit_s);
        self.recorder.see(moment, State::Mixed(&self.density), times);
    }
}

/// What all runs of one open problem have in common.
pub(in super::super) struct Route<'p> {
    problem: &'p Problem,
    demand: Demand,
    method: Method,
    changing_s: f64,
    pictures: Pictures<'p>,
    generators: Generators<'p>,
    unit_s: Option<f64>,
    /// Dense exponentials, kept from run to run.
    kept: HashMap<Vec<u64>, Rc<constant::Kept>>,
}

impl<'p> Route<'p> {
    /// For a problem; [`Route::changing_s`] is still to be set.
    pub fn new(problem: &'p Problem, demand: &Demand) -> Route<'p> {
        let unit_s = demand.time_in.then(|| problem.length_s().max(f64::MIN_POSITIVE));
        Route {
            problem,
            demand: demand.clone(),
            method: Method::ConstantSteps,
            changing_s: 0.0,
            pictures: Pictures::new(problem),
            generators: Generators::new(problem, unit_s),
            unit_s,
            kept: HashMap::new(),
        }
    }

    /// The method where the generator changes, and for how long it does, s.
    pub fn carry(&mut self, method: Method, changing_s: f64) {
        self.method = method;
        self.changing_s = changing_s;
    }

    /// The picture of a kind and the generator in it.
    pub(super) fn in_picture(&mut self, segment: &Segment, kind: Kind) -> (Rc<Picture>, Rc<Generator>) {
        let picture = self.pictures.of(segment, kind);
        let generator = self.generators.of(&picture);
        (picture, generator)
    }

    /// The picture and generator in which a segment is constant, if there is one.
    pub(super) fn still(&mut self, segment: &Segment) -> Option<(Rc<Picture>, Rc<Generator>)> {
        let terms = self.problem.terms_of(segment);
        if !terms.iter().all(Term::is_constant) {
            return None;
        }
        let found = self.in_picture(segment, Kind::Tied);
        if found.1.constant(terms) {
            return Some(found);
        }
        if terms.iter().any(|term| term.turns_hz != 0.0) {
            return None;
        }
        Some(self.in_picture(segment, Kind::Rest)).filter(|(_, generator)| generator.constant(terms))
    }

    /// The picture in which a changing segment is carried by a method.
    pub(super) fn moving(&mut self, segment: &Segment, method: Method) -> (Rc<Picture>, Rc<Generator>) {
        if method == Method::Smooth {
            let (free, rest) = (self.in_picture(segment, Kind::Free), self.in_picture(segment, Kind::Rest));
            // weak couplings gain from a picture without diagonal; where jumps turn in it more than it takes away they do not
            return if free.1.fastest_hz <= 2.0 * (rest.1.fastest_hz + spread_hz(&rest.0)) { free } else { rest };
        }
        let (tied, rest) = (self.in_picture(segment, Kind::Tied), self.in_picture(segment, Kind::Rest));
        if tied.1.fastest_hz <= tied.0.fastest_hz || tied.1.fastest_hz <= rest.1.fastest_hz {
            tied
        } else {
            rest
        }
    }

    fn columns(&self) -> Columns {
        let dim = self.problem.dim();
        let size = coordinates::count(dim) + if self.unit_s.is_some() { dim } else { 0 };
        let mut x = vec![0.0; size];
        coordinates::real(&self.problem.start.density(), &mut x);
        if self.demand.propagator {
            coordinates::operators(dim, &self.within(), |operator| {
                let at = x.len();
                x.resize(at + size, 0.0);
                x[at..at + operator.len()].copy_from_slice(operator);
            });
        }
        Columns { size, x }
    }

    /// The levels of the channel.
    fn within(&self) -> Vec<usize> {
        if self.demand.within.is_empty() {
            (0..self.problem.dim()).collect()
        } else {
            self.demand.within.clone()
        }
    }

    /// Runs the whole problem once, with `left` multiplications to spend at most.
    pub fn run(&mut self, fineness: &Fineness, left: f64, recorder: &mut dyn Recorder) -> Work {
        let (problem, method) = (self.problem, self.method);
        let dim = problem.dim();
        let mut work = Work { steps: 0, products: 0, left };
        let mut columns = self.columns();
        let mut eye = Eye { recorder, density: Matrix::zeros(dim, dim), x: Vec::new(), unit_s: self.unit_s.unwrap_or(0.0) };
        let keeps = problem.jumps.iter().all(|jump| jump.keeps || jump.rate_per_s == 0.0);
        let mut steps = Steps::new(std::mem::take(&mut self.kept), keeps.then_some(dim));
        let mut smooth = Smooth::new(columns.size, columns.x.len(), self.changing_s);
        let mut next = 0;
        for (index, segment) in problem.segments.iter().enumerate() {
            let first = next;
            while next < problem.moments.len() && problem.moments[next].segment <= index {
                next += 1;
            }
            let terms = problem.terms_of(segment);
            let still = self.still(segment);
            let constant = still.is_some();
            let (picture, generator) = still.unwrap_or_else(|| self.moving(segment, method));
            let stretch = Stretch {
                picture: &picture,
                generator: &generator,
                terms,
                start: segment.start,
                length_s: segment.length_s,
                moments: &problem.moments[first..next],
                first,
            };
            if constant {
                constant::pass(&stretch, fineness.pieces, &mut steps, &mut columns, &mut eye, &mut work);
            } else {
                match method {
                    Method::Smooth | Method::Collocation | Method::Carrier => {
                        smooth.pass(&stretch, fineness, &mut columns, &mut eye, &mut work)
                    }
                    Method::Geometric => even_steps::geometric(&stretch, fineness.doublings, &mut columns, &mut eye, &mut work),
                    Method::ConstantSteps => even_steps::slices(&stretch, fineness.doublings, &mut columns, &mut eye, &mut work),
                }
            }
            if !picture.at_rest {
                columns.x.chunks_exact_mut(columns.size).for_each(|x| coordinates::turn(&picture.turns_hz, segment.length_s, x));
            }
        }
        self.kept = steps.leave();
        for moment in next..problem.moments.len() {
            eye.show(moment, &columns.x, None);
        }
        eye.recorder.finish(None);
        if self.demand.propagator {
            let channel = coordinates::channel(dim, &self.within(), &columns.x[columns.size..], columns.size);
            eye.recorder.finish_channel(&channel);
        }
        work
    }
}

/// Distance of the outermost diagonal entries, Hz.
fn spread_hz(picture: &Picture) -> f64 {
    let (low, high) = picture.diagonal.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), e| (e.min(low), e.max(high)));
    (high - low).max(0.0) / crate::units::RAD_PER_TURN
}

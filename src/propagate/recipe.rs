//! How finely a method is run on many problems of one kind, found from a few of them: the points of a scan are then run once, at
//! one resolution, and some of them again to measure their error.
//!
//! The steps of a run follow from its own load, at a given [`Fineness`]: so the finest of a few problems serves others like them.

use super::asked::{Asked, Demand, Recorder};
use super::choose::{Method, METHODS};
use super::mixture;
use super::refine::{is_hopeless, least_tolerance, Way, MOST_MULTIPLICATIONS};
use super::run::Fineness;
use crate::problem::Problem;

/// The resolution at which a problem was solved.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Resolved {
    /// The method where H changes.
    pub method: Method,
    /// Runge-Kutta: error that the step control aims at.
    pub tolerance: f64,
    /// Exponentials for each constant stretch, or least steps between moments.
    pub pieces: u32,
    /// How often a first number of equal steps was doubled.
    pub doublings: u32,
    /// Error figure over the accuracy asked for.
    pub share: f64,
}

/// A probe's error may be this share of what is asked for, so that its neighbours have room.
const ROOM: f64 = 0.2;

/// Tolerance over accuracy of points that nobody looks at again, at most: elements mostly come out far more accurate than their
/// tolerance, but one of a hundred does not (6400 points at ten times the accuracy: 12 of 13 below 1e-3 of it, the worst 0.23).
const UNSEEN: f64 = 0.1;

impl Resolved {
    pub(super) fn new(method: Method, fineness: Fineness, share: f64, accuracy: f64) -> Resolved {
        let Fineness { mut tolerance, pieces, doublings, halved: _ } = fineness;
        if matches!(method, Method::Collocation | Method::Carrier) {
            tolerance = tolerance.min(UNSEEN * accuracy);
        }
        Resolved { method, tolerance, pieces, doublings, share }
    }

    fn fineness(&self) -> Fineness {
        Fineness { tolerance: self.tolerance, pieces: self.pieces, doublings: self.doublings, halved: false }
    }
}

/// For each method that was met, the resolution to run it at.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Recipe {
    rows: Vec<(Method, Fineness)>,
}

impl Recipe {
    /// Takes in how a problem was solved.
    pub fn add(&mut self, found: &Resolved) {
        let mut fineness = found.fineness();
        if found.share > ROOM {
            match found.method {
                Method::Smooth | Method::Collocation | Method::Carrier => fineness.tolerance *= ROOM / found.share,
                // order 6 and order 2: a factor of 64, and of 16 for two doublings
                Method::Geometric => fineness.doublings += 1,
                Method::ConstantSteps if fineness.doublings > 0 || fineness.pieces > 1 => fineness.doublings += 2,
                Method::ConstantSteps => {}
            }
        }
        match self.rows.iter_mut().find(|(method, _)| *method == found.method) {
            None => self.rows.push((found.method, fineness)),
            Some((_, row)) => {
                row.tolerance = row.tolerance.min(fineness.tolerance);
                row.pieces = row.pieces.max(fineness.pieces);
                row.doublings = row.doublings.max(fineness.doublings);
            }
        }
    }

    /// Whether it knows a method.
    pub fn is_empty(&self) -> bool {
        self.rows.is_empty()
    }

    pub(super) fn of(&self, method: Method) -> Option<Fineness> {
        self.rows.iter().find(|(row, _)| *row == method).map(|(_, fineness)| *fineness)
    }

    /// Whether a problem was solved at the resolution that stands here, and no finer.
    pub fn suffices(&self, found: &Resolved) -> bool {
        self.of(found.method).is_some_and(|row| {
            // a tolerance below what rounding allows a problem was raised for it
            found.tolerance >= row.tolerance && found.pieces <= row.pieces && found.doublings <= row.doublings
        })
    }

    /// In words, method by method.
    pub fn words(&self) -> Vec<String> {
        let one = |(method, fineness): &(Method, Fineness)| {
            let word = METHODS.iter().find(|row| row.method == *method).map_or("", |row| row.word);
            match method {
                Method::Smooth | Method::Collocation | Method::Carrier => format!("{word}, tolerance {:.0e}", fineness.tolerance),
                Method::Geometric => format!("{word}, first steps doubled {} times", fineness.doublings),
                Method::ConstantSteps if fineness.doublings == 0 => format!("{word}, one exponential for each constant stretch"),
                Method::ConstantSteps => format!("{word}, first slices doubled {} times", fineness.doublings),
            }
        };
        self.rows.iter().map(one).collect()
    }
}

/// Runs a problem once at the resolution of a recipe. None where it has none for the method of this problem, or the run broke down.
pub fn solve_once<R: Recorder>(problem: &Problem, demand: &Demand, asked: &Asked, recipe: &Recipe, mut recorder: R) -> Option<R> {
    let parts = mixture::parts(problem);
    let (mut way, load, method, _) = Way::new(problem, &parts, demand, asked);
    if is_hopeless(&load, method).is_some() {
        return None;
    }
    let fineness = recipe.of(method)?.no_finer_than(least_tolerance(&load));
    let work = way.run(&fineness, MOST_MULTIPLICATIONS, &mut recorder);
    (!work.exhausted() && recorder.numbers().iter().all(|number| number.is_finite())).then_some(recorder)
}

//! What is known of decay, dephasing and mixtures only once all numbers are laid out: steady starts, points with causes switched
//! off, and what the surroundings make doubtful or impossible.

use std::sync::Arc;

use num_complex::Complex64;

use super::Point;
use crate::config::document::Document;
use crate::config::messages::{Fault, Mistake, OpenFault};
use crate::config::place::Place;
use crate::config::record::{Cause, Item};
use crate::config::sequence::Step;
use crate::config::state::State;
use crate::model::surroundings::Surroundings;
use crate::problem::{Instant, Jump, Matrix, Moment, Problem, Segment, Start, Vector};
use crate::propagate::{steady, NotSteady};

/// A wait is far longer than a lifetime from this ratio on.
const LONG: f64 = 100.0;

/// The jumps whose cause is not switched off.
pub(super) fn jumps(surroundings: &Surroundings, off: &[Cause]) -> Arc<Vec<Jump>> {
    let kept = surroundings.jumps.iter().zip(&surroundings.causes).filter(|(_, cause)| !off.contains(cause));
    Arc::new(kept.map(|(jump, _)| jump.clone()).collect())
}

/// Why there is no steady state, as a mistake.
fn not_steady(place: Place, why: NotSteady) -> Mistake {
    let (reason, write) = match why {
        NotSteady::Changes => (
            "what drives the last stretch still changes in the frame of the run".to_string(),
            "a wait at the end of the sequence, or a rotating frame that follows the drives",
        ),
        NotSteady::NotUnique(free) => (
            format!("several states stay as they are ({free} free numbers), and nothing says which one is meant"),
            "start: {mix: {..}}, or a decay that joins the levels",
        ),
        NotSteady::TooLarge(size) => {
            (format!("{size} numbers of the density matrix hang together, too many to solve at once"), "a longer wait")
        }
    };
    Mistake::error(place, Fault::Open(OpenFault::NotSteady { reason, write: write.to_string() }))
}

/// The steady state of the static system (`statics` in rad/s) with its decays, drives off.
pub(super) fn steady_start(place: Place, statics: &Matrix, surroundings: &Surroundings) -> Result<Start, Mistake> {
    let alone = Problem {
        statics: Arc::new(statics.clone()),
        matrices: Arc::default(),
        segments: vec![Segment { start: Instant::default(), length_s: 1.0, terms: 0..0 }],
        terms: Vec::new(),
        start: Start::Pure(Vector::zeros(statics.nrows())),
        jumps: Arc::new(surroundings.jumps.clone()),
        moments: vec![Moment { segment: 0, offset_s: 1.0, time_s: 1.0 }],
    };
    let found = steady(&alone, None).map_err(|why| not_steady(place, why))?;
    if !(found.state.trace().re > 0.5) {
        let fault = OpenFault::NotSteady {
            reason: "everything leaves the system in the end".to_string(),
            write: "start: a level, or a mixture".to_string(),
        };
        return Err(Mistake::error(place, Fault::Open(fault)));
    }
    Ok(Start::Mixed(found.state))
}

impl<'p> Point<'p> {
    /// The same point with some causes switched off, its end alone recorded, from the pure state `level`: for gate errors, which do
    /// not depend on the start.
    pub fn without(&self, document: &'p Document, off: &[Cause], level: usize) -> Result<Point<'p>, Mistake> {
        let mut point = self.clone();
        point.off = off.to_vec();
        point.lab.jumps = jumps(&point.surroundings, off);
        let mut start = Vector::zeros(point.lab.dim());
        start[level] = Complex64::from(1.0);
        point.lab.start = Start::Pure(start);
        point.end_only = true;
        point.lab.moments.clear();
        point.segment(document)?;
        Ok(point)
    }

    /// Refuses what the surroundings make impossible, and warns of what they make doubtful.
    pub(super) fn judge_surroundings(&mut self, document: &Document) -> Result<(), Mistake> {
        for item in &document.record.items {
            match item {
                Item::Steady(place) => {
                    let size = self.lab.dim();
                    let equal = Matrix::identity(size, size) / Complex64::from(size as f64);
                    steady(self.problem(), Some(&equal)).map_err(|why| not_steady(*place, why))?;
                }
                Item::Shots(shots) => {
                    let faulty = |fault| Mistake::error(shots.place, fault);
                    shots.probabilities(&document.system.names, &self.values).map_err(faulty)?;
                }
                _ => {}
            }
        }
        self.warn_of_long_waits(document);
        self.warn_of_cut_quanta(document);
        Ok(())
    }

    fn warn_of_cut_quanta(&mut self, document: &Document) {
        let State::Quanta { modes, .. } = &document.start else { return };
        for warm in modes {
            let mean = self.values[warm.mean.register as usize];
            let next = mean / (mean + 1.0);
            let left_out = next.powf(warm.levels as f64);
            if left_out > LEFT_OUT {
                let enough = (LEFT_OUT.ln() / next.ln()).ceil();
                let fault = OpenFault::QuantaCut { mean, levels: warm.levels, left_out, enough };
                self.warnings.push(Mistake::warning(warm.mean.place, Fault::Open(fault)));
            }
        }
    }

    fn warn_of_long_waits(&mut self, document: &Document) {
        let Some(lifetime_s) = self.surroundings.longest_lifetime_s(document.system.names.len()) else { return };
        let mut waits = Vec::new();
        collect_waits(&document.sequence, &mut waits);
        for (register, place) in waits {
            let wait_s = self.values[register as usize];
            if wait_s > LONG * lifetime_s {
                self.warnings.push(Mistake::warning(place, Fault::Open(OpenFault::LongWait { wait_s, lifetime_s })));
            }
        }
    }
}

/// The share of a thermal distribution beyond the last level that draws a warning.
const LEFT_OUT: f64 = 1e-3;

/// Every wait, each once however often it is repeated.
fn collect_waits(steps: &[Step], waits: &mut Vec<(u32, Place)>) {
    for step in steps {
        match step {
            Step::Wait(time) if !waits.contains(&(time.register, time.place)) => waits.push((time.register, time.place)),
            Step::Repeat(_, inner) | Step::Block(inner) => collect_waits(inner, waits),
            _ => {}
        }
    }
}

/// The state at time zero; `statics` in rad/s.
pub(super) fn start_state(document: &Document, values: &[f64], statics: &Matrix, surroundings: &Surroundings) -> Result<Start, Mistake> {
    let hz = statics.map(|entry| entry / crate::units::rad_s(1.0));
    match (crate::model::start(&document.start, values, &hz)?, &document.start) {
        (Some(start), _) => Ok(start),
        (None, State::Steady(place)) => steady_start(*place, statics, surroundings),
        (None, _) => Ok(Start::Pure(Vector::zeros(statics.nrows()))),
    }
}

//! From states to the recorded numbers, one file per quantity.
//!
//! Comes in: the state at each moment, in the frame of the run, and at the end the propagator. Leaves: one row of numbers per
//! moment and a list of final numbers, each with its name (the heading of its column) and unit. Nothing is integrated here.

mod adiabatic;
mod bloch;
mod coherence;
mod energy;
mod fidelity;
mod gate;
mod gate_recorder;
#[cfg(test)]
mod gate_tests;
mod held;
mod lost;
mod mean;
mod outside;
mod overlap;
mod part;
mod population;
mod propagator;
mod quasi;
mod recorder;
mod shots;
mod static_levels;
mod time_in;
mod turn_behind;

use crate::config::document::Document;
use crate::config::record::Item;
use crate::model::built::Built;
use crate::problem::{Channel, Matrix, Moment, Problem, State};
use crate::propagate::Demand;

pub use gate::{GateFigures, GateJudge};
pub use gate_recorder::GateRecorder;
pub use quasi::{breaks_period, QuasiEnergy, QuasiRecorder};
pub use recorder::{Recorded, TraceRecorder};
pub use shots::{counts, Count};

/// What a quantity sees at a moment.
pub struct Seen<'a> {
    /// The moment.
    pub moment: &'a Moment,
    /// The state in the frame of the run.
    pub state: State<'a>,
    /// Seconds spent in each level so far; empty unless asked for.
    pub time_in_s: &'a [f64],
}

/// One column of the traces.
#[derive(Debug, Clone, PartialEq)]
pub struct Column {
    /// Heading, such as `population_up`.
    pub name: String,
    /// `1`, `Hz` or `s`.
    pub unit: &'static str,
    /// What an error is judged against: 1, or a power of two near the size of the operator or the length of the run.
    pub scale: f64,
    /// Path in `final` of result.json, such as `["populations", "up"]`; several columns of one path make a list.
    pub path: Vec<String>,
    /// Which panel of the plot it belongs to.
    pub panel: &'static str,
    /// How the plot calls it.
    pub label: String,
}

impl Column {
    /// A column without dimension.
    pub fn plain(name: String, path: &[&str], panel: &'static str, label: String) -> Column {
        Column { name, unit: "1", scale: 1.0, path: path.iter().map(|part| (*part).to_string()).collect(), panel, label }
    }
}

/// A recorded quantity: its columns, and their numbers at a moment.
pub trait Quantity: Sync {
    /// Its columns, in order.
    fn columns(&self) -> Vec<Column>;
    /// Appends one number per column.
    fn see(&self, seen: &Seen, row: &mut Vec<f64>);
}

/// What the whole sequence does.
#[derive(Debug, Clone, Copy)]
pub enum Whole<'a> {
    /// Of a closed system.
    Propagator(&'a Matrix),
    /// Of one that decays, dephases, or is averaged over noise.
    Channel(&'a Channel),
}

/// A quantity of the whole sequence, made from its propagator or channel.
pub trait Last: Sync {
    /// Names of its numbers, which have no dimension.
    fn names(&self) -> Vec<String>;
    /// Appends one number per name.
    fn see(&self, whole: Whole, numbers: &mut Vec<f64>);
}

/// Everything that one run records.
pub struct Observables<'a> {
    /// Quantities of each moment, in the order written.
    pub quantities: Vec<Box<dyn Quantity + 'a>>,
    /// Quantities of the propagator.
    pub last: Vec<Box<dyn Last + 'a>>,
    /// The gate, if one is judged.
    pub gate: Option<gate::GateJudge>,
    /// Whether the propagator is written out.
    pub propagator: bool,
    /// What the methods must supply.
    pub demand: Demand,
}

/// The quantities that a config records, with the numbers of one point.
pub fn observables<'a>(document: &Document, built: &Built, values: &[f64], energies_hz: &[f64], problem: &'a Problem) -> Observables<'a> {
    let names = &document.system.names;
    let stays = |level: &usize| !document.frame.eliminated().contains(level);
    let mut found = Observables { quantities: Vec::new(), last: Vec::new(), gate: None, propagator: false, demand: Demand::default() };
    for item in &document.record.items {
        let quantity: Box<dyn Quantity> = match item {
            Item::Populations(levels) => {
                let levels: Vec<usize> = levels.iter().copied().filter(stays).collect();
                Box::new(population::Populations::new(names, &levels))
            }
            Item::OutsideOf(levels) => Box::new(outside::Outside::new(levels.clone(), loses(problem))),
            Item::Lost => Box::new(lost::Lost),
            // what is averaged over noise is linear in the state; a purity is not
            Item::Part(which) => Box::new(part::PartAlone::new(&document.system.parts(), *which, document.noise.is_empty())),
            Item::Coherence(pairs) => Box::new(coherence::Coherences::new(names, pairs)),
            Item::Bloch(pairs) => Box::new(bloch::BlochVectors::new(names, pairs)),
            Item::MeanOf(operators) => Box::new(mean::Means::new(document, built, values, operators)),
            Item::Levels(levels) => Box::new(static_levels::StaticLevels::levels(names, built, levels)),
            Item::Transitions(pairs) => Box::new(static_levels::StaticLevels::gaps(names, built, pairs)),
            Item::Energy => Box::new(energy::Energy::new(problem)),
            Item::TimeIn(levels) => {
                found.demand.time_in = true;
                Box::new(time_in::TimeIn::new(names, levels, problem.length_s()))
            }
            Item::AdiabaticPopulations => {
                Box::new(adiabatic::AdiabaticPopulations::new(names, problem, &(0..names.len()).filter(stays).collect::<Vec<_>>()))
            }
            Item::Fidelity(state) => match crate::model::amplitudes(names.len(), state, values) {
                Some(to) => Box::new(fidelity::Fidelity::new(to)),
                None => continue,
            },
            // from runs of their own, or from the populations at the end
            Item::QuasiEnergies(_) | Item::Steady(_) | Item::Shots(_) | Item::ErrorBudget(_) => continue,
            Item::Propagator => {
                found.demand.propagator = true;
                found.propagator = true;
                found.last.push(Box::new(propagator::WholePropagator::new(names.len())));
                continue;
            }
            Item::Gate(gate) => {
                found.demand.propagator = true;
                found.demand.within = gate.within.clone();
                let judge = gate::GateJudge::new(document, built, gate, values, energies_hz);
                found.last.push(Box::new(judge.clone()));
                found.gate = Some(judge);
                continue;
            }
        };
        found.quantities.push(quantity);
    }
    found
}

/// Whether anything can be missing from the populations: something is lost, or was lost before the start.
fn loses(problem: &Problem) -> bool {
    problem.jumps.iter().any(|jump| !jump.keeps) || problem.start.state().trace() < 1.0 - 1e-12
}

/// The power of two at or above a size, so that scaling by it is exact; 1 for 0.
fn binary_scale(size: f64) -> f64 {
    if size > 0.0 && size.is_finite() {
        size.log2().ceil().exp2()
    } else {
        1.0
    }
}

//! Collects the recorded numbers of one run, row after row.

use super::{Column, Observables, Seen};
use crate::problem::{Matrix, Problem, Start, State};
use crate::propagate::Recorder;

/// The recorded numbers of one run, each over its scale, and the state and propagator at the end.
pub struct TraceRecorder<'a> {
    observables: &'a Observables<'a>,
    problem: &'a Problem,
    scales: &'a [f64],
    row: Vec<f64>,
    numbers: Vec<f64>,
    /// The state at the last moment.
    pub end_state: Option<Start>,
    /// Propagator of the whole sequence, if asked for.
    pub propagator: Option<Matrix>,
}

impl<'a> TraceRecorder<'a> {
    /// A recorder of `observables`; `scales` are those of their columns.
    pub fn new(observables: &'a Observables<'a>, problem: &'a Problem, scales: &'a [f64]) -> TraceRecorder<'a> {
        let numbers = Vec::with_capacity(problem.moments.len() * scales.len());
        TraceRecorder { observables, problem, scales, row: Vec::new(), numbers, end_state: None, propagator: None }
    }

    /// Number `column` of row `moment`, in the unit of its column.
    pub fn value(&self, moment: usize, column: usize) -> f64 {
        self.numbers.get(moment * self.scales.len() + column).map_or(f64::NAN, |number| number * self.scales[column])
    }

    /// The numbers of the propagator, in the order of their names.
    pub fn last(&self) -> &[f64] {
        self.numbers.get(self.problem.moments.len() * self.scales.len()..).unwrap_or_default()
    }
}

impl Recorder for TraceRecorder<'_> {
    fn see(&mut self, moment: usize, state: State, time_in_s: &[f64]) {
        let seen = Seen { moment: &self.problem.moments[moment], state, time_in_s };
        self.row.clear();
        for quantity in &self.observables.quantities {
            quantity.see(&seen, &mut self.row);
        }
        self.numbers.extend(self.row.iter().zip(self.scales).map(|(number, scale)| number / scale));
        if moment + 1 == self.problem.moments.len() {
            self.end_state = Some(state.keep());
        }
    }

    fn finish(&mut self, propagator: Option<&Matrix>) {
        if let Some(propagator) = propagator {
            for quantity in &self.observables.last {
                quantity.see(propagator, &mut self.numbers);
            }
            self.propagator = Some(propagator.clone());
        }
    }

    fn numbers(&self) -> &[f64] {
        &self.numbers
    }
}

impl Observables<'_> {
    /// All columns, in order.
    pub fn columns(&self) -> Vec<Column> {
        self.quantities.iter().flat_map(|quantity| quantity.columns()).collect()
    }
}

//! Collects the recorded numbers of one run, row after row.

use super::{Column, Observables, Seen, Whole};
use crate::problem::{Channel, Matrix, Problem, Start, State};
use crate::propagate::Recorder;

/// What one run recorded: every number over its scale, and the state and propagator at the end.
#[derive(Debug, Clone, Default)]
pub struct Recorded {
    /// Row after row, then the numbers of the whole sequence.
    pub numbers: Vec<f64>,
    /// How many of them belong to rows.
    pub in_rows: usize,
    /// The state at the last moment.
    pub end_state: Option<Start>,
    /// Propagator of the whole sequence, if asked for and there is one.
    pub propagator: Option<Matrix>,
    /// Channel of the levels of the gate, if one is judged.
    pub channel: Option<Channel>,
}

impl Recorded {
    /// The numbers of the whole sequence, in the order of their names.
    pub fn last(&self) -> &[f64] {
        self.numbers.get(self.in_rows..).unwrap_or_default()
    }
}

/// Records one run.
pub struct TraceRecorder<'a> {
    observables: &'a Observables<'a>,
    problem: &'a Problem,
    scales: &'a [f64],
    row: Vec<f64>,
    recorded: Recorded,
}

impl<'a> TraceRecorder<'a> {
    /// A recorder of `observables`; `scales` are those of their columns.
    pub fn new(observables: &'a Observables<'a>, problem: &'a Problem, scales: &'a [f64]) -> TraceRecorder<'a> {
        let in_rows = problem.moments.len() * scales.len();
        let recorded = Recorded { numbers: Vec::with_capacity(in_rows), in_rows, ..Recorded::default() };
        TraceRecorder { observables, problem, scales, row: Vec::new(), recorded }
    }

    /// What was recorded.
    pub fn done(self) -> Recorded {
        self.recorded
    }
}

impl Recorder for TraceRecorder<'_> {
    fn see(&mut self, moment: usize, state: State, time_in_s: &[f64]) {
        let seen = Seen { moment: &self.problem.moments[moment], state, time_in_s };
        self.row.clear();
        for quantity in &self.observables.quantities {
            quantity.see(&seen, &mut self.row);
        }
        self.recorded.numbers.extend(self.row.iter().zip(self.scales).map(|(number, scale)| number / scale));
        if moment + 1 == self.problem.moments.len() {
            self.recorded.end_state = Some(state.keep());
        }
    }

    fn finish(&mut self, propagator: Option<&Matrix>) {
        if let Some(propagator) = propagator {
            for quantity in &self.observables.last {
                quantity.see(Whole::Propagator(propagator), &mut self.recorded.numbers);
            }
            self.recorded.channel = self.observables.gate.as_ref().map(|gate| Channel::of_propagator(propagator, gate.within()));
            self.recorded.propagator = Some(propagator.clone());
        }
    }

    fn finish_channel(&mut self, channel: &Channel) {
        for quantity in &self.observables.last {
            quantity.see(Whole::Channel(channel), &mut self.recorded.numbers);
        }
        self.recorded.channel = Some(channel.clone());
    }

    fn numbers(&self) -> &[f64] {
        &self.recorded.numbers
    }
}

impl Observables<'_> {
    /// All columns, in order.
    pub fn columns(&self) -> Vec<Column> {
        self.quantities.iter().flat_map(|quantity| quantity.columns()).collect()
    }
}

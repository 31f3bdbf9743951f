//! Records nothing but the figures of a gate, for runs that are made for its sake alone.

use super::gate::{GateFigures, GateJudge};
use crate::problem::{Channel, Matrix, State};
use crate::propagate::Recorder;

/// The figures of one run, and the channel they are made of.
pub struct GateRecorder<'a> {
    judge: &'a GateJudge,
    /// What was found; none before the run has finished.
    pub figures: Option<GateFigures>,
    /// The channel of the levels of the gate.
    pub channel: Option<Channel>,
    numbers: Vec<f64>,
}

impl<'a> GateRecorder<'a> {
    /// A recorder that judges by `judge`.
    pub fn new(judge: &'a GateJudge) -> GateRecorder<'a> {
        GateRecorder { judge, figures: None, channel: None, numbers: Vec::new() }
    }
}

impl Recorder for GateRecorder<'_> {
    fn see(&mut self, _: usize, _: State, _: &[f64]) {}

    fn finish(&mut self, propagator: Option<&Matrix>) {
        if let Some(propagator) = propagator {
            self.finish_channel(&Channel::of_propagator(propagator, self.judge.within()));
        }
    }

    fn finish_channel(&mut self, channel: &Channel) {
        let figures = self.judge.judge(channel);
        self.numbers = figures.numbers();
        self.figures = Some(figures);
        self.channel = Some(channel.clone());
    }

    fn numbers(&self) -> &[f64] {
        &self.numbers
    }
}

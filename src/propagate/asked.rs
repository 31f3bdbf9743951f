//! What a caller hands to [`solve`](super::solve) beside the problem.

use super::choose::Method;
use crate::problem::{Channel, Matrix, State};

/// What is wanted beside the state at each moment.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Demand {
    /// The propagator of the whole sequence; of an open problem the channel.
    pub propagator: bool,
    /// Levels on which the channel is wanted; all where none is named.
    pub within: Vec<usize>,
    /// The integral of each population over time.
    pub time_in: bool,
}

/// How well, how, and whether to check by a second route.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Asked {
    /// Largest allowed absolute error of any recorded number.
    pub accuracy: f64,
    /// The method the user wrote; `None` is automatic.
    pub method: Option<Method>,
    /// Whether the independent second route is run too.
    pub cross_check: bool,
}

/// Turns states into the numbers that are kept; made by the caller, one for each run.
pub trait Recorder {
    /// Called at every entry of `Problem::moments` in order: the state in the frame of the problem, and the seconds spent in each
    /// basis state since time 0 (empty unless asked for).
    fn see(&mut self, moment: usize, state: State, time_in_s: &[f64]);

    /// Called once after the last moment, with the propagator of the whole sequence in the frame of the problem if asked for.
    fn finish(&mut self, propagator: Option<&Matrix>);

    /// Called in its stead, after `finish(None)`, with the channel of the whole sequence if the problem is open.
    fn finish_channel(&mut self, _channel: &Channel) {}

    /// All numbers recorded so far, scaled so that an absolute comparison is right.
    fn numbers(&self) -> &[f64];
}

//! What [`solve`](super::solve) gives back.

use super::choose::Method;
use super::recipe::Resolved;

/// One resolution at which the problem was solved.
#[derive(Debug, Clone, PartialEq)]
pub struct Resolution {
    /// In words, such as "tolerance 3e-10, 1240 steps".
    pub words: String,
    /// Steps taken.
    pub steps: u64,
}

/// The recorded numbers at two resolutions and what is known about their error.
#[derive(Debug)]
pub struct Solved<R> {
    /// The coarser run, whose numbers are the result.
    pub recorded: R,
    /// The finer run, against which the result was held.
    pub finer: R,
    /// At which resolution the result was computed; none where it is an average.
    pub resolved: Option<Resolved>,
    /// The method that was used where H changes.
    pub method: Method,
    /// Why that method, with the numbers compared.
    pub reason: String,
    /// The coarser and the finer resolution.
    pub resolutions: [Resolution; 2],
    /// Largest error figure of any recorded number; infinite where a run broke down.
    pub error_figure: f64,
    /// What rounding alone leaves uncertain in double precision.
    pub floor: f64,
    /// Whether the error figure is at most the accuracy asked for.
    pub reached: bool,
    /// The second route, where asked for.
    pub cross_check: Option<CrossCheck<R>>,
    /// Steps of the recorded run.
    pub steps: u64,
    /// Matrix-vector products of all runs together.
    pub products: u64,
}

impl<R> Solved<R> {
    /// The same with what was recorded made into something else.
    pub fn map<S>(self, make: impl Fn(R) -> S) -> Solved<S> {
        let cross_check = self.cross_check.map(|check| match check {
            CrossCheck::Done { method, recorded, difference } => CrossCheck::Done { method, recorded: make(recorded), difference },
            CrossCheck::Skipped { method, reason } => CrossCheck::Skipped { method, reason },
        });
        Solved {
            recorded: make(self.recorded),
            finer: make(self.finer),
            resolved: self.resolved,
            method: self.method,
            reason: self.reason,
            resolutions: self.resolutions,
            error_figure: self.error_figure,
            floor: self.floor,
            reached: self.reached,
            cross_check,
            steps: self.steps,
            products: self.products,
        }
    }
}

/// The outcome of the independent second route.
#[derive(Debug)]
pub enum CrossCheck<R> {
    /// It was run.
    Done {
        /// What was done.
        method: String,
        /// Its numbers.
        recorded: R,
        /// Largest absolute difference from the result.
        difference: f64,
    },
    /// It was not run, or broke off.
    Skipped {
        /// What would have been done.
        method: String,
        /// Why it was not.
        reason: String,
    },
}

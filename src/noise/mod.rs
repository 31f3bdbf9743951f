//! Averages over noise: many runs of one point with other numbers, and what their mean is worth.
//!
//! Comes in: a point, and the causes of noise of its document. Leaves: the averaged numbers at both resolutions, the error of the
//! average itself where it is a rule of nodes, the standard error where it is a random sample. Probabilities are averaged, never
//! amplitudes.
//!
//! `source`: what shares a draw, and how far it moves each number; `gauss`: rules of nodes, `grid`: several at once; `process`: numbers that
//! wander within a shot, `path`: their shots; `average`: the runs and their sums; `budget`: the
//! runs of an error budget; `trajectories`: large systems that decay, by pure states that jump at random;
//! `statistics`: sums in an order that does not depend on the number of threads.

mod average;
mod budget;
mod gauss;
mod grid;
mod path;
mod process;
mod source;
mod statistics;
mod trajectories;

pub use average::{compute, is_average, Draws};
pub use source::figures;

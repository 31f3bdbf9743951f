//! Many points of one plan side by side, where they share their timeline: what moves is a handful of matrix entries.
//!
//! Comes in: a [`Plan`](crate::plan::Plan), the names of the numbers that move, the range of each, and a few sample points. Leaves: the
//! final numbers of groups of eight points, at two resolutions, by the kernels of [`propagate::lanes`](crate::propagate::lanes). Where a
//! plan does not fit, [`Layout::new`] says why, and its points are computed one by one as ever; those are what the fast ones are
//! tested against.
//!
//! | file | what it does |
//! |---|---|
//! | `sizes.rs` | a problem without its shapes in time: entries of matrices |
//! | `entries.rs` | these entries as functions of the moved numbers |
//! | `own.rs` | points whose pulses differ: a timeline for each |
//! | `profiles.rs` | the shapes in time: stretches and channels |
//! | `wanted.rs` | what is recorded, and the columns it takes |
//! | `layout.rs` | all of it, and the number of steps |
//! | `runs.rs` | runs of one point that noise has moved |
//! | `worker.rs` | groups of points to numbers |

mod entries;
mod layout;
mod own;
mod profiles;
mod runs;
mod sizes;
#[cfg(test)]
mod tests;
mod wanted;
mod worker;

pub use layout::Layout;
pub use runs::Runs;
pub use worker::Worker;

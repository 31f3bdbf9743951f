//! Open systems: the density matrix as real coordinates x, d(x)/dt = G(t) x.
//!
//! Error figures are made as in `../refine.rs`. Held against an independent collocation of order 16 of the whole Liouvillian in 800
//! problems of 2 to 4 levels with up to three jumps (test `calibrate_error_figure_of_densities`, 200 each by automatic choice,
//! Runge-Kutta, Magnus and slices): the true error never exceeded the figure, and the figure was never more than ten times the
//! larger of the true error and 1e-12.
//!
//! | file | what it does |
//! |---|---|
//! | `coordinates.rs` | Hermitian matrix to real numbers and back; operators of a channel |
//! | `entries.rs` | entries of jump operators in the picture of a segment |
//! | `generator.rs` | G in the picture of a segment, sparse |
//! | `exponential.rs` | exp(G tau), dense and acting |
//! | `constant.rs` | stretches of constant G |
//! | `even_steps.rs` | slices and Magnus steps |
//! | `smooth.rs` | Runge-Kutta 8(5,3) |
//! | `run.rs` | one run over all segments |
//! | `load.rs` | how large, fast and long a problem is |
//! | `steady.rs` | steady states |
//! | `cross_check.rs` | the independent second route |

mod constant;
mod coordinates;
mod cross_check;
pub(super) mod entries;
mod even_steps;
mod exponential;
mod generator;
mod load;
mod run;
mod smooth;
mod steady;

pub(super) use cross_check::cross_check;
pub(super) use run::Route;
pub use steady::{steady, NotSteady, Steady};

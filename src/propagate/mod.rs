//! A [`Problem`](crate::problem::Problem) (rad/s, s) and a wanted accuracy come in; recorded numbers at two resolutions, their
//! measured error figure, the method and the reason for it leave. States reach the caller's [`Recorder`] one moment at a time in
//! the frame of the problem, so nothing here grows with the number of rows.
//!
//! | file | what it does |
//! |---|---|
//! | `asked.rs`, `solved.rs` | what a caller hands over, what he gets back |
//! | `choose.rs` | the table [`METHODS`] and the automatic choice |
//! | `refine.rs` | [`solve`]: two resolutions, error figure, tightening |
//! | `recipe.rs` | one resolution for many like problems: [`solve_once`], [`solve_from`] |
//! | `run.rs` | one run over all segments at one resolution |
//! | `picture.rs` | the turning diagonal picture of a segment |
//! | `coherent.rs` | which levels can be coherent, and so whose rounding matters |
//! | `load.rs` | how large, fast and long a problem is |
//! | `exponential.rs` | exp(-i H tau) of a constant Hermitian H |
//! | `jacobi.rs` | eigenvectors that cannot fail |
//! | `constant.rs` | stretches of constant H |
//! | `memory.rs` | what a run will hold in memory |
//! | `sampled.rs` | how high and how often the envelopes of a segment rise |
//! | `commuting.rs` | stretches whose H commutes with itself |
//! | `even_steps.rs` | equal steps between moments, shared by the next two |
//! | `slices.rs` | midpoint slices, order 2 |
//! | `geometric.rs` | Magnus expansion, order 6 |
//! | `collocation.rs` | adaptive elements of order 16, dense output |
//! | `gauss.rs`, `turning.rs`, `element.rs` | its rule, its exact diagonal, its iteration |
//! | `waves.rs` | harmonics of fast carriers for it |
//! | `smooth.rs`, `dormand_prince.rs` | Runge-Kutta 8(5,3) and its coefficients |
//! | `cross_check.rs` | the independent second route |
//! | `gradient/` | derivatives by all samples of the controls, in reverse |
//! | `lanes/` | many points side by side |
//! | `mixture.rs` | mixed starts of closed systems |
//! | `open/` | the same for density matrices |
//! | `trajectories/` | pure states that jump at random, where density matrices are too large |

mod asked;
mod choose;
mod coherent;
mod collocation;
mod commuting;
mod constant;
mod cross_check;
mod dormand_prince;
mod element;
mod even_steps;
mod exponential;
mod gauss;
mod geometric;
pub mod gradient;
mod jacobi;
pub mod lanes;
mod load;
mod memory;
mod mixture;
mod open;
mod picture;
mod recipe;
mod refine;
mod run;
mod sampled;
mod slices;
mod smooth;
mod solved;
#[cfg(test)]
mod tests;
mod trajectories;
mod turning;
mod waves;

pub use asked::{Asked, Demand, Recorder};
pub use choose::{Method, Row, METHODS};
pub use load::Load;
pub use memory::{machine_bytes, memory_bytes};
pub use open::{steady, NotSteady, Steady};
pub use recipe::{solve_once, Recipe, Resolved};
pub use refine::{figure, solve, solve_from};
pub use solved::{CrossCheck, Resolution, Solved};
pub use trajectories::{Fine, Trajectories, LARGEST_DENSITY};

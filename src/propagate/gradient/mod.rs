//! Gradients of numbers made of the end of a run by every sample of its controls, in reverse: their price does not grow with the
//! number of controls.
//!
//! H = A + sum_c u_c C_c, constant in each slice; A in rad/s, C without dimension, u in rad/s, lengths in s, hbar = 1. The columns X
//! (states, or columns of the propagator) obey i dX/dt = H X. A goal f is a real function of X at the end, with
//! df = Re Tr(seed+ dX). With L the columns that the seed becomes when it is carried backwards by the same equation,
//!
//! ```text
//! N = (X L+ - L X+)/(2i)        df/du_c of a slice of length h = h Tr(C_c W)
//! ```
//!
//! with W the mean of N over the slice, on which N obeys dN/dt = -i [H, N] (N. Khaneja et al., Journal of Magnetic Resonance 172, 296
//! (2005), there with W taken as N; W is the derivative of the exponential in its adjoint form, A. H. Al-Mohy and N. J. Higham, SIAM
//! Journal on Matrix Analysis and Applications 30, 1639 (2009)).
//!
//! ```
//! use nutate::problem::{Matrix, Vector};
//! use nutate::propagate::gradient::{gradient, Controlled, Mean};
//! use num_complex::Complex64;
//!
//! // a resonant drive of 100 slices of 1 ns on two levels: H = u sx/2, so that level 1 holds sin^2(sum u h/2) at the end
//! let c = |x: f64| Complex64::new(x, 0.0);
//! let sx = Matrix::from_row_slice(2, 2, &[c(0.0), c(0.5), c(0.5), c(0.0)]);
//! let pulse = Controlled::new(Matrix::zeros(2, 2), vec![sx], vec![1e-9; 100])?;
//! let goal = Mean::population(Vector::from_vec(vec![c(1.0), c(0.0)]), 1);
//! let found = gradient(&pulse, &vec![5e6; 100], &goal)?;
//! assert!((found.value - 0.25f64.sin().powi(2)).abs() < 1e-13);
//! // d/du = h/2 sin(sum u h), s
//! assert!((found.by_samples[17] - 0.5e-9 * 0.5f64.sin()).abs() < 1e-22);
//! # Ok::<(), nutate::propagate::gradient::GradientFault>(())
//! ```
//!
//! | file | what it does |
//! |---|---|
//! | `controlled.rs` | [`Controlled`]: a system under controls in slices |
//! | `goals.rs` | [`Goal`] and the goals that are at hand |
//! | `plain.rs` | one set of samples by eigenvectors, for any number of levels |
//! | `side_by_side.rs` | eight sets at a time, for few levels |
//! | `carried.rs`, `flow.rs` | by whatever moves a [`Problem`](crate::problem::Problem), drives of any shape, open and closed |

mod carried;
mod controlled;
mod flow;
mod goals;
mod plain;
mod side_by_side;
#[cfg(test)]
mod tests;

pub use carried::{apart, Apart, Carried, Moved, Seed, TooLarge};
pub use controlled::{Controlled, GradientFault};
pub use goals::{AverageGateError, GateOverlap, Goal, Mean};
pub use plain::plain_gradient;
pub use side_by_side::{gradients_at_width, has_lanes};

use crate::propagate::lanes::Width;

/// A number and its derivatives.
#[derive(Debug, Clone, PartialEq)]
pub struct Gradient {
    /// The number.
    pub value: f64,
    /// Its derivatives by the samples, control by control and slice after slice like them, in its unit times seconds (per rad/s).
    pub by_samples: Vec<f64>,
}

/// The same of many sets of samples.
#[derive(Debug, Clone, PartialEq)]
pub struct Gradients {
    /// One for each set, in their order.
    pub gradients: Vec<Gradient>,
    /// Measured error of the numbers.
    pub value_error: f64,
    /// Measured error of the derivatives, s.
    pub derivative_error: f64,
}

/// The gradient of `goal` for one set of samples (rad/s, those of a slice together, slice after slice).
///
/// # Errors
/// Where the number of samples does not fit, or a sample is not finite, or the goal has another number of levels.
pub fn gradient(system: &Controlled, samples: &[f64], goal: &dyn Goal) -> Result<Gradient, GradientFault> {
    system.check(samples, 1, goal)?;
    if !has_lanes(system) {
        return plain_gradient(system, samples, goal);
    }
    let found = gradients_at_width(Width::chosen(), system, samples, goal, 1)?;
    found.gradients.into_iter().next().ok_or(GradientFault::NoSets)
}

/// The gradients of `goal` for many sets of samples, one after the other in `samples`, shared by `threads`.
///
/// The errors are measured: eight sets, and the eight of the strongest slices, are computed again with twice as many parts of slices and
/// longer series; without lanes, the first one by parts of half the length.
///
/// # Errors
/// As of [`gradient`].
pub fn gradients(system: &Controlled, samples: &[f64], goal: &dyn Goal, threads: usize) -> Result<Gradients, GradientFault> {
    let size = system.samples();
    let sets = samples.len() / size.max(1);
    system.check(samples, sets, goal)?;
    if has_lanes(system) {
        return gradients_at_width(Width::chosen(), system, samples, goal, threads);
    }
    let found: Result<Vec<Gradient>, GradientFault> = samples.chunks(size).map(|set| plain_gradient(system, set, goal)).collect();
    let gradients = found?;
    let (value_change, derivative_change) = plain::change_in_halves(system, &samples[..size], goal, &gradients[0])?;
    Ok(judged(system, goal, gradients, value_change, derivative_change))
}

/// The gradients with their errors: what they change under refinement with a fifth on top, at least the rounding of so many slices.
fn judged(system: &Controlled, goal: &dyn Goal, gradients: Vec<Gradient>, value_change: f64, derivative_change: f64) -> Gradients {
    let rounding = f64::EPSILON * (system.lengths_s.len() as f64).sqrt();
    let largest = gradients.iter().flat_map(|found| &found.by_samples).map(|derivative| derivative.abs()).fold(0.0, f64::max);
    let value_error = (1.2 * value_change).max(rounding * goal.size());
    let derivative_error = (1.2 * derivative_change).max(rounding * largest);
    Gradients { gradients, value_error, derivative_error }
}

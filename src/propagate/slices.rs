//! Midpoint slices: H is held at its value in the middle of each slice and exponentiated; order 2.
//!
//! W. Magnus, Communications on Pure and Applied Mathematics 7, 649 (1954): the first term of his expansion with the midpoint
//! rule. Used where the user asks for constant steps although H changes.

use num_complex::Complex64;

use super::even_steps;
use super::exponential::Flow;
use super::run::{Eye, State, Stretch, Work};

/// Carries the state through the stretch.
pub(super) fn pass(stretch: &Stretch, doublings: u32, state: &mut State, eye: &mut Eye, work: &mut Work) {
    let dim = state.dim;
    let zero = Complex64::default();
    let (mut h, mut psi, mut room) = (vec![zero; dim * dim], vec![zero; dim], Vec::new());
    even_steps::pass(stretch, doublings, state, eye, work, |tau_s, step_s, state| {
        stretch.picture.fill(stretch.terms, tau_s + 0.5 * step_s, &mut h);
        let timed = !state.time_in_s.is_empty();
        let flow = Flow::new(&h, dim, step_s, timed);
        if timed {
            flow.dwell(step_s, &state.amplitudes[..dim], &mut state.time_in_s);
        }
        let mut products = 1;
        for column in state.amplitudes.chunks_exact_mut(dim) {
            products += flow.act(step_s, column, &mut psi, &mut room);
            column.copy_from_slice(&psi);
        }
        products
    });
}

//! Equal steps between moments, for the methods that take steps of a length known beforehand.

use super::run::{Eye, State, Stretch, Work};

/// Steps of a stretch before any doubling: enough to see each turn of H and each turn of the state, roughly.
fn first_steps(stretch: &Stretch) -> f64 {
    let turning = stretch.picture.fastest_hz * stretch.length_s;
    let swing = super::load::size_hz(stretch.picture, &stretch.sampled.heights) * stretch.length_s;
    4.0 / stretch.sampled.busy + turning + 0.5 * swing
}

/// Carries the state through the stretch; `step(tau, h, state)` does one step of h seconds from tau and gives its matrix-vector products.
pub(super) fn pass(
    stretch: &Stretch,
    doublings: u32,
    state: &mut State,
    eye: &mut Eye,
    work: &mut Work,
    mut step: impl FnMut(f64, f64, &mut State) -> u64,
) {
    let dim = state.dim;
    let rate = first_steps(stretch) / stretch.length_s;
    let mut tau_s = 0.0;
    for k in 0..=stretch.moments.len() {
        let stop_s = stretch.moments.get(k).map_or(stretch.length_s, |moment| moment.offset_s.min(stretch.length_s));
        let gap_s = stop_s - tau_s;
        if gap_s > 0.0 {
            let steps = (gap_s * rate).ceil().max(1.0) * 2f64.powi(doublings as i32);
            let mut done = 0.0;
            while done < steps && !work.exhausted() {
                let from_s = tau_s + gap_s * (done / steps);
                done += 1.0;
                let to_s = tau_s + gap_s * (done / steps);
                let products = step(from_s, to_s - from_s, state);
                work.step(products, dim * dim);
            }
            tau_s = stop_s;
        }
        if k < stretch.moments.len() {
            eye.see(stretch, k, &state.amplitudes[..dim], &state.time_in_s);
        }
    }
}

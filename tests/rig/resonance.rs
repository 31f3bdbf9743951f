//! Where a linearly driven pair of levels is on resonance, from its quasi-energies.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

use crate::rig::run;

/// Difference of the two quasi-energies of a linear drive at 10 MHz, in carriers; `gap` and `rabi` in carriers too.
fn splitting(gap: f64, rabi: f64, phase: f64) -> f64 {
    let outcome = run(&format!(
        "format: 1
system:
  levels: {{down: 0 MHz, up: {gap:.17} * 10 MHz}}
drives:
  rf: {{pair: [down, up], form: linear, carrier: 10 MHz}}
envelopes:
  on: {{shape: square, length: 100 ns, peak: {rabi:.17} * 10 MHz}}
sequence:
  - pulse: {{drive: rf, envelope: on, phase: {phase} turn}}
start: down
record: {{at: [100 ns], populations: all, quasi_energies: {{period: 100 ns}}}}
accuracy: {{final: 1e-12, method: smooth}}
"
    ));
    let (_, levels, _) = outcome.quasi_energies.unwrap();
    let apart = levels[1].turns - levels[0].turns;
    apart.min(1.0 - apart)
}

/// How far below the carrier, in carriers, the gap must be for resonance. The time-averaged probability of transition is
/// 1/2 (1 - 4 (dq/dgap)^2) (J. H. Shirley, Physical Review 138, B979 (1965)), so the quasi-energies are closest there.
pub fn shift(rabi: f64, phase: f64) -> f64 {
    let h = 0.01 * rabi;
    let slope = |gap: f64| splitting(gap + h, rabi, phase) - splitting(gap - h, rabi, phase);
    let middle = 1.0 - rabi * rabi / 4.0;
    let (mut a, mut b) = (middle - 0.02 * rabi, middle + 0.02 * rabi);
    let (mut at_a, mut at_b) = (slope(a), slope(b));
    for _ in 0..4 {
        if at_a == at_b {
            break;
        }
        let next = b - at_b * (b - a) / (at_b - at_a);
        (a, at_a) = (b, at_b);
        (b, at_b) = (next, slope(next));
        if (b - a).abs() < 1e-13 {
            break;
        }
    }
    1.0 - b
}

//! Composite pulses against the products of closed-form rotations, and the orders of error that their papers claim. Parameters,
//! digits and sources stand in tests/reference/closed_forms.json.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use rig::{at, close, last, run};
use serde_json::Value;

fn case(name: &str) -> Value {
    let all: Value = serde_json::from_str(include_str!("reference/closed_forms.json")).unwrap();
    assert!(all[name].is_object(), "no case {name}");
    all[name].clone()
}

fn digits(value: &Value) -> f64 {
    value.as_str().unwrap().parse().unwrap()
}

/// M. H. Levitt, R. Freeman, Journal of Magnetic Resonance 33, 473 (1979): 90x 180y 90x, too weak and off resonance, by light.
#[test]
fn three_part_inversion() {
    let outcome = run("format: 1
numbers: {rabi: 2 MHz, weak: 0.82, line: 150 MHz, quarter: 0.25 turn / rabi}
system: {levels: {up: 0 MHz, down: line}}
drives:
  rf:
    pair: [up, down]
    form: one_sided
    carrier: line + 0.22 * rabi
    carrier_phase: runs on
envelopes:
  quarter: {shape: square, length: quarter, peak: weak * rabi}
  half: {shape: square, length: 2 * quarter, peak: weak * rabi}
sequence:
  - pulse: {drive: rf, envelope: quarter, turn_about: x}
  - pulse: {drive: rf, envelope: half, turn_about: y}
  - pulse: {drive: rf, envelope: quarter, turn_about: x}
start: up
record: {at: [quarter, 3 * quarter, 4 * quarter], populations: all}
frame: {kind: lab}
accuracy: {final: 1e-11, method: automatic}
");
    for (k, time_s) in [125e-9, 375e-9, 500e-9].into_iter().enumerate() {
        let wanted = &case("composite-inversion")["expected"]["populations"][k];
        close(at(&outcome, "population_up", time_s), digits(&wanted[0]), 5e-13);
        close(at(&outcome, "population_down", time_s), digits(&wanted[1]), 5e-13);
    }
}

/// Error of the gate of a sequence of (angle, phase) in turns, meant as half a turn about x: each pulse `1 + eps` too strong, and
/// a turn about z at `f` of the Rabi frequency beside it.
fn gate_error(sequence: &[(f64, f64)], eps: f64, f: f64) -> f64 {
    let mut envelopes = String::new();
    let mut steps = String::new();
    for (k, (angle, phase)) in sequence.iter().enumerate() {
        for (axis, word) in [("x", "cos"), ("y", "sin")] {
            let size = format!("(1 + eps) * rabi / 2 * {word}({phase:e} turn)");
            envelopes += &format!("  {axis}{k}: {{shape: square, length: {angle:e} turn / rabi, matrix_element: {size}}}\n");
        }
        steps += &format!("  - together: [{{pulse: {{drive: x, envelope: x{k}}}}}, {{pulse: {{drive: y, envelope: y{k}}}}}]\n");
    }
    let outcome = run(&format!(
        "format: 1
numbers: {{rabi: 1 MHz, eps: {eps:e}, f: {f:e}}}
system: {{levels: {{up: f * rabi / 2, down: -f * rabi / 2}}}}
operators:
  sx: {{rows: [[0, 1], [1, 0]]}}
  sy: {{rows: [[0, -i], [i, 0]]}}
drives:
  x: {{operator: sx, form: direct}}
  y: {{operator: sy, form: direct}}
envelopes:
{envelopes}sequence:
{steps}start: up
record: {{gate: {{within: [up, down], target: {{turn: 0.5 turn, about: x}}, free_z: false}}}}
frame: {{kind: lab}}
accuracy: {{final: 1e-11, method: automatic}}
"
    ));
    last(&outcome, "gate_error")
}

/// S. Wimperis, Journal of Magnetic Resonance A 109, 221 (1994), BB1; K. R. Brown, A. W. Harrow, I. L. Chuang, Physical Review A
/// 70, 052318 (2004), SK1; H. K. Cummins, G. Llewellyn, J. A. Jones, Physical Review A 67, 042308 (2003), CORPSE; half a turn.
#[test]
fn corrected_half_turns() {
    let case = case("composite-pi");
    let turn = std::f64::consts::TAU;
    let q = (-0.25f64).acos() / turn;
    let k = 0.5f64.asin() / turn;
    let sequences: [(&str, Vec<(f64, f64)>); 4] = [
        ("plain", vec![(0.5, 0.0)]),
        ("BB1", vec![(0.5, 0.0), (0.5, q), (1.0, 3.0 * q), (0.5, q)]),
        ("SK1", vec![(0.5, 0.0), (1.0, q), (1.0, -q)]),
        ("CORPSE", vec![(1.25 - k, 0.0), (1.0 - 2.0 * k, 0.5), (0.25 - k, 0.0)]),
    ];
    let errors = [0.1, 0.05, 0.02, -0.1];
    for (name, sequence) in &sequences {
        let strength = errors.map(|eps| gate_error(sequence, eps, 0.0));
        let detuning = errors.map(|f| gate_error(sequence, 0.0, f));
        for (which, found) in [("eps", strength), ("f", detuning)] {
            let wanted = &case["expected"][format!("{name}_infidelity_vs_{which}")];
            for (k, found) in found.into_iter().enumerate() {
                close(found, digits(&wanted[k]), 2e-14);
            }
        }
        // the order of error, from two small errors; all orders are even, so a half tells them apart
        let halved = [gate_error(sequence, 0.01, 0.0), gate_error(sequence, 0.0, 0.01)];
        for (k, found) in [strength, detuning].into_iter().enumerate() {
            let order = (found[2] / halved[k]).log2();
            let wanted = case["expected"][format!("{name}_exponents")][k].as_f64().unwrap();
            close(order, wanted, 0.5);
        }
    }
}

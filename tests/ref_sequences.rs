//! Whole configs against numbers of mpmath and SciPy; tests/reference/sequences.py made sequences.json.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use nutate::outcome::Outcome;
use rig::{at, close, run};
use serde_json::Value;

/// Compares the populations of `names` at `time_s` with a list of the reference.
fn populations(outcome: &Outcome, names: &[&str], time_s: f64, wanted: &Value, tolerance: f64) {
    assert_eq!(wanted.as_array().map(Vec::len), Some(names.len()));
    for (k, name) in names.iter().enumerate() {
        let wanted = wanted[k].as_f64().unwrap_or_else(|| wanted[k].as_str().unwrap().parse().unwrap());
        close(at(outcome, &format!("population_{name}"), time_s), wanted, tolerance);
    }
}

fn reference(name: &str) -> Value {
    let all: Value = serde_json::from_str(include_str!("reference/sequences.json")).unwrap();
    all[name]["populations"].clone()
}

/// mpmath.expm at 40 digits: seven levels, couplings of every phase, the upper triangle written.
#[test]
fn seven_levels_left_alone() {
    let rows: String = (0..7)
        .map(|j: i32| {
            let entry = |k: i32| {
                if k == j {
                    format!("3.7 * {k} - {k}^2 / 4")
                } else {
                    format!("(1 + {j} / 2) / {}^2 * ({} + {} * i) / 8", k - j, k - 2 * j, j + 1)
                }
            };
            let entries: Vec<String> = (j..7).map(entry).collect();
            format!("      - [{}]\n", entries.join(", "))
        })
        .collect();
    let outcome = run(&format!(
        "format: 1
system:
  hamiltonian:
    names: [a, b, c, d, e, f, g]
    unit: MHz
    lower: mirror
    rows:
{rows}sequence: [{{wait: 2.3 us}}]
start: c
record: {{populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-12, method: automatic}}
"
    ));
    populations(&outcome, &["a", "b", "c", "d", "e", "f", "g"], 2.3e-6, &reference("chain"), 5e-14);
}

/// SciPy DOP853 at 1e-13: a chirped gaussian on three levels, linear drive, far from any picture in which terms could be dropped.
#[test]
fn chirped_gaussian_on_three_levels() {
    let outcome = run("format: 1
system: {levels: {a: 0 MHz, b: 21 MHz, c: 39 MHz}}
drives:
  rf:
    strengths: [{pair: [a, b], strength: 1}, {pair: [b, c], strength: 1.3}]
    reference_pair: [a, b]
    form: linear
    carrier: {centre: 20.5 MHz, instantaneous: 20.5 MHz + 3 MHz/us * (t - 0.5 us)}
envelopes:
  hump: {shape: gaussian, field_sigma: 0.15 us, cut_at: 0.5 us, edge: step, peak: 2.4 MHz}
sequence: [{pulse: {drive: rf, envelope: hump}}]
start: a
record: {at: [0.4 us, 1 us], populations: all}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
");
    let wanted = reference("chirped_gaussian");
    // the reference itself is good to about 1e-12
    populations(&outcome, &["a", "b", "c"], 0.4e-6, &wanted[0], 2e-11);
    populations(&outcome, &["a", "b", "c"], 1e-6, &wanted[1], 2e-11);
}

/// SciPy DOP853 at 1e-13: three shapes with waits between, one linear drive whose carrier runs on, three phases.
#[test]
fn three_shapes_with_waits() {
    let outcome = run("format: 1
system: {levels: {down: 0 MHz, up: 14 MHz}}
drives:
  rf: {pair: [down, up], form: linear, carrier: 14.3 MHz, carrier_phase: runs on}
envelopes:
  first: {shape: raised cosine, length: 0.2 us, peak: 3 MHz}
  second: {shape: trapezoid, length: 0.4 us, rise: 0.1 us, peak: 3 MHz}
  third: {shape: blackman, length: 0.3 us, peak: 3 MHz}
sequence:
  - pulse: {drive: rf, envelope: first}
  - wait: 0.3 us
  - pulse: {drive: rf, envelope: second, phase: 90 deg}
  - wait: 0.3 us
  - pulse: {drive: rf, envelope: third, phase: 45 deg}
start: down
record: {at: [0.5 us, 1.2 us, 1.5 us], populations: all}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
");
    let wanted = reference("echo");
    for (k, time_s) in [0.5e-6, 1.2e-6, 1.5e-6].into_iter().enumerate() {
        populations(&outcome, &["down", "up"], time_s, &wanted[k], 2e-11);
    }
}

/// mpmath.odefun at 25 digits: a raised cosine with its derivative in quadrature on a ladder of four, in the frame of the carrier.
#[test]
fn derivative_in_quadrature_on_a_ladder() {
    let outcome = run("format: 1
numbers: {bend: -250 MHz}
system: {ladder: {levels: 4, first_gap: 4.9 GHz, anharmonicity: bend, couplings_grow: sqrt}}
drives:
  xy: {acts_on: ladder, reference_pair: [0, 1], form: one_sided, carrier: 4.9 GHz}
envelopes:
  bump:
    shape: raised cosine
    length: 20 ns
    turn: 0.5 turn
    derivative: {factor: 1, against: bend}
sequence: [{pulse: {drive: xy, envelope: bump}}]
start: 0
record: {populations: all}
frame: {kind: lab}
accuracy: {final: 1e-11, method: automatic}
");
    populations(&outcome, &["0", "1", "2", "3"], 20e-9, &reference("quadrature"), 2e-12);
}

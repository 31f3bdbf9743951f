//! From the text of a config to its numbers, in process.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise
#![allow(dead_code)] // each test file uses its part

use std::path::Path;

use nutate::config::document::{read_str, Document};
use nutate::outcome::{compute, Outcome};
use nutate::plan::Plan;

/// A resonant square pulse on two levels.
pub const ONE_PULSE: &str = "format: 1
system:
  levels: {down: 0 MHz, up: 40 MHz}
drives:
  rf:
    pair: [down, up]
    form: one_sided
    carrier: 40.3 MHz
envelopes:
  flat: {shape: square, length: 2 us, peak: 0.7 MHz}
sequence:
  - pulse: {drive: rf, envelope: flat}
start: down
record: {populations: all}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
";

/// Reads a config that must be good; `set` as `name`, `value`.
pub fn document(text: &str, set: &[(&str, &str)]) -> Document {
    let set: Vec<(String, String)> = set.iter().map(|(name, value)| (name.to_string(), value.to_string())).collect();
    read_str("config.yaml", text, Path::new("."), &set).unwrap_or_else(|refusal| panic!("{}\n{text}", refusal.text()))
}

/// Runs a config that must be good and reach its accuracy.
pub fn run(text: &str) -> Outcome {
    run_set(text, &[])
}

/// The same with other values in place of named numbers.
pub fn run_set(text: &str, set: &[(&str, &str)]) -> Outcome {
    let plan = Plan::new(document(text, set));
    let point = plan.point().unwrap_or_else(|mistake| panic!("{mistake:?}\n{text}"));
    let outcome = compute(plan.document(), &point);
    assert!(outcome.reached, "the figure is {:e}\n{text}", outcome.error_figure);
    outcome
}

/// The message on a config that must be refused.
pub fn refusal(text: &str) -> String {
    match read_str("config.yaml", text, Path::new("."), &[]) {
        Err(refusal) => refusal.text(),
        Ok(document) => {
            let plan = Plan::new(document);
            let refused = plan.point().map(drop);
            nutate::config::messages::render(&plan.document().sources, &[refused.expect_err("a refusal")])
        }
    }
}

/// A number at the end of the sequence, by the name of its column.
pub fn last(outcome: &Outcome, name: &str) -> f64 {
    let found = outcome.finals.iter().find(|last| last.name == name);
    found.unwrap_or_else(|| panic!("no {name} among {:?}", outcome.finals.iter().map(|last| &last.name).collect::<Vec<_>>())).value
}

/// A number at a recorded time.
pub fn at(outcome: &Outcome, name: &str, time_s: f64) -> f64 {
    let column = outcome.columns.iter().position(|column| column.name == name).unwrap();
    let row = outcome.times_s.iter().position(|time| (time - time_s).abs() <= 1e-12 * time_s).unwrap();
    outcome.rows[row * outcome.columns.len() + column]
}

/// Asserts that `found` is within `tolerance` of `wanted`.
#[track_caller]
pub fn close(found: f64, wanted: f64, tolerance: f64) {
    assert!((found - wanted).abs() <= tolerance, "{found:.17e} is off {wanted:.17e} by {:.2e}", found - wanted);
}

//! Bundles against points computed one by one.

use std::path::Path;

use super::{Layout, Worker};
use crate::config::document::read_str;
use crate::outcome::{compute, final_columns};
use crate::plan::Plan;
use crate::propagate::lanes::{Width, WIDTHS};

fn plan(text: &str) -> Plan {
    let document = read_str("bundle", text, Path::new(""), &[]).map_err(|refusal| refusal.text()).expect("a lawful config");
    Plan::new(document)
}

/// Points of a box: its corners, and some inside.
fn samples(bounds: &[(f64, f64)]) -> Vec<Vec<f64>> {
    let corners = (0..1usize << bounds.len())
        .map(|set| bounds.iter().enumerate().map(|(i, (low, high))| if set >> i & 1 == 1 { *high } else { *low }).collect());
    let inside = (1..9).map(|k| {
        let share = |i: usize| (f64::from(k) * [0.618_034, 0.754_878, 0.569_840][i % 3]).fract();
        bounds.iter().enumerate().map(|(i, (low, high))| low + share(i) * (high - low)).collect()
    });
    corners.chain(inside).collect()
}

/// Every sample by bundle and one by one: they agree within both error figures, and the figure is met.
fn check(text: &str, names: &[&str], bounds: &[(f64, f64)]) -> String {
    let plan = plan(text);
    let all = samples(bounds);
    let layout = Layout::new(&plan, names, bounds, &all, Width::chosen()).expect("it fits");
    let accuracy = plan.document().accuracy.last;
    let mut mover = plan.mover(names).expect("the names exist");
    for width in WIDTHS.into_iter().filter(|width| width.is_here()) {
        let mut worker = Worker::new(&plan, names, &layout).expect("it was laid out").with_width(width);
        for some in all.chunks(8) {
            let (coarse, fine) =
                (worker.numbers(&layout, some, false).expect("it fits"), worker.numbers(&layout, some, true).expect("it fits"));
            let each = coarse.len() / some.len();
            for (k, values) in some.iter().enumerate() {
                let point = mover.at(values).expect("the numbers are lawful");
                let names: Vec<String> = final_columns(plan.document(), point).into_iter().map(|column| column.name).collect();
                let outcome = compute(plan.document(), point);
                assert_eq!(names.len(), each, "{names:?}");
                for (j, name) in names.iter().enumerate() {
                    let last = outcome.finals.iter().find(|last| last.name == *name).expect("it is recorded");
                    let (found, figure) = (coarse[k * each + j], (coarse[k * each + j] - fine[k * each + j]).abs() * 1.2);
                    let limit = last.error + figure.max(layout.floor());
                    assert!(
                        (found - last.value).abs() <= limit,
                        "{} {name} at {values:?}: {found} and {}, {limit:e}",
                        width.word(),
                        last.value
                    );
                    assert!(figure <= accuracy, "{name} at {values:?}: {figure:e}");
                }
            }
        }
    }
    layout.words()
}

const TWO_HELD: &str = "format: 1
numbers: {miss: 10 MHz, rabi: 20 MHz}
system:
  levels: {down: 0 MHz, up: miss}
drives:
  rf: {pair: [down, up], form: direct}
envelopes:
  hump: {shape: samples, samples: [0.1, 0.4, 0.9, 1, 0.7, 0.3, 0.2], between: hold, length: 41 ns, matrix_element: rabi / 2}
sequence:
  - wait: 5 ns
  - pulse: {drive: rf, envelope: hump}
  - pulse: {drive: rf, envelope: hump}
start: {superposition: {down: [0.6, 0 deg], up: [0.8, 40 deg]}}
record: {at: [5 ns], populations: all, coherence: [[down, up]]}
accuracy: {final: 1e-10}
";

/// Few slices: exact in each, found by the plain exponential too.
#[test]
fn exact_held_pulses_of_two_levels() {
    let words = check(TWO_HELD, &["miss", "rabi"], &[(-30e6, 30e6), (1e6, 50e6)]);
    assert!(words.ends_with("slices"), "{words}");
}

/// A smooth pulse in a rotating frame with its derivative, as a gate on a ladder of three levels; carrier and size move.
#[test]
fn exact_smooth_gate_of_three_levels() {
    let text = "format: 1
numbers: {rabi: 20 MHz, off: 0 MHz, factor: 0.5}
system:
  ladder: {levels: 3, first_gap: 5 GHz, anharmonicity: -250 MHz, couplings_grow: sqrt}
drives:
  line: {acts_on: ladder, reference_pair: [0, 1], form: one_sided, carrier: 5 GHz + off}
envelopes:
  bell: {shape: gaussian, field_sigma: 5 ns, cut_at: 15 ns, edge: lift, peak: rabi, derivative: {factor: factor, against: -250 MHz}}
sequence:
  - pulse: {drive: line, envelope: bell, phase: 20 deg}
start: 0
frame: {kind: rotating, follows: drives, drop_terms_faster_than: 1 GHz}
record: {at: [30 ns], populations: all, gate: {within: [0, 1], target: {turn: 180 deg, about: x}, free_z: false}}
accuracy: {final: 1e-9}
";
    let words = check(text, &["rabi", "off"], &[(5e6, 60e6), (-10e6, 10e6)]);
    assert!(words.contains("order 6"), "{words}");
    // frozen, so that a method that takes more steps is noticed without a clock
    assert_eq!(words, "104 steps of order 6 (156 in the finer run)");
}

/// What does not fit is said.
#[test]
fn prop_what_does_not_fit_is_refused() {
    let plan = plan(&TWO_HELD.replace("length: 41 ns", "length: 0.5 turn / rabi"));
    let bounds = [(1e6, 5e7)];
    let found = Layout::new(&plan, &["rabi"], &bounds, &samples(&bounds), Width::chosen());
    assert!(found.is_err());
}

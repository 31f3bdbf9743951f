//! Sensitivities against derivatives of closed forms, and against differences of whole runs by the methods of `nutate run`.

use std::f64::consts::TAU;
use std::path::Path;

use nutate::config::document::read_str;
use nutate::outcome::sensitivity::{Derivative, Sensitivity};
use nutate::outcome::{compute, final_columns};
use nutate::plan::Plan;
use nutate::sensitivity::{sensitivity, NoSensitivity};

fn plan(text: &str) -> Plan {
    Plan::new(read_str("test.yaml", text, Path::new("."), &[]).unwrap_or_else(|refusal| panic!("{}", refusal.text())))
}

fn of(text: &str, tolerance: Option<f64>) -> Sensitivity {
    let plan = plan(text);
    let point = plan.point().expect("the text is right");
    sensitivity(&plan, &point, tolerance).unwrap_or_else(|refusal| panic!("{}", refusal.words().0))
}

fn by(found: &Sensitivity, last: &str, number: &str) -> Derivative {
    let row = found.finals.iter().find(|of| of.name == last).unwrap_or_else(|| panic!("{last} is recorded"));
    let at = found.numbers.iter().position(|n| n.name == number).unwrap_or_else(|| panic!("{number} is moved"));
    row.by[at]
}

/// Within the error figure, which is no more than ten times too large (or than `floor` of the derivative), and close.
fn agrees(found: Derivative, expected: f64, limit: f64) {
    let off = (found.first - expected).abs();
    assert!(off <= limit * (1.0 + expected.abs()), "{:e} for {expected:e}: off by {off:e}", found.first);
    assert!(off <= found.error.max(2e-15), "off by {off:e}, figure {:e}", found.error);
    assert!(found.error <= limit * 10.0 * (1.0 + expected.abs()), "figure {:e}", found.error);
}

const FLIP: &str =
    "format: 1\nframe: {kind: rotating, follows: drives, drop_terms_faster_than: nothing}\naccuracy: {final: 1e-10}\nrecord: {populations: all}\nstart: down\n\
    numbers: {rabi: 2 MHz, miss: 0.6 MHz, length: 700 ns, phase: 20 deg, split: 80 MHz}\n\
    system: {levels: {down: 0 MHz, up: split}}\n\
    drives: {line: {pair: [down, up], form: one_sided, carrier: split + miss}}\n\
    envelopes: {flat: {shape: square, length: length, peak: rabi}}\n\
    sequence: [{pulse: {drive: line, envelope: flat, phase: phase}}]\n";

/// Rabi's formula (Physical Review 51, 652 (1937)): with r, m in MHz, t in us, w^2 = r^2 + m^2, P = (r/w)^2 sin^2(pi w t).
#[test]
fn exact_detuned_flip() {
    let found = of(FLIP, Some(1e-4));
    let (r, m, t): (f64, f64, f64) = (2.0, 0.6, 0.7);
    let w2 = r * r + m * m;
    let w = w2.sqrt();
    let (sin, cos) = (0.5 * TAU * w * t).sin_cos();
    // dP/dw at fixed r, and the explicit one by r
    let by_w = -2.0 * r * r / (w * w2) * sin * sin + r * r / w2 * TAU * t * sin * cos;
    agrees(by(&found, "population_up", "miss"), by_w * m / w, 1e-12);
    agrees(by(&found, "population_up", "rabi"), by_w * r / w + 2.0 * r / w2 * sin * sin, 1e-12);
    // per ns
    agrees(by(&found, "population_up", "length"), 1e-3 * r * r / w2 * TAU * w * sin * cos, 1e-12);
    agrees(by(&found, "population_down", "length"), -1e-3 * r * r / w2 * TAU * w * sin * cos, 1e-12);
    agrees(by(&found, "population_up", "phase"), 0.0, 1e-13);
    assert!(by(&found, "population_up", "split").is_nothing(), "the carrier follows the split");
    let unit = |name: &str| found.numbers.iter().find(|n| n.name == name).map(|n| (n.unit.clone(), n.value));
    assert_eq!(unit("miss"), Some(("MHz".to_string(), 0.6)));
    assert_eq!(unit("length").map(|(unit, _)| unit), Some("ns".to_string()));
}

/// At the top of a flip the first derivative by the drive vanishes and the second one, -(pi t)^2/2 per MHz^2 with t in us (P = sin^2 of
/// pi r t), says what is allowed: t/2 x pi = sqrt(tolerance).
#[test]
fn exact_curvature_at_the_top() {
    let text = FLIP.replace("miss: 0.6 MHz", "miss: 0 MHz").replace("700 ns", "250 ns");
    let found = of(&text, Some(1e-4));
    let rabi = by(&found, "population_up", "rabi");
    let second = -0.5 * (TAU * 0.25).powi(2);
    assert!(rabi.first.abs() < 1e-12, "{:e}", rabi.first);
    assert!((rabi.second / second - 1.0).abs() < 2e-4, "{} {second}", rabi.second);
    assert!((rabi.allowed / (2e-4 / -second).sqrt() - 1.0).abs() < 2e-4, "{}", rabi.allowed);
}

/// Decay from the upper level for a time t: exp(-t/T); a superposition dephases; both by the density matrix.
#[test]
fn exact_decay() {
    let text = "format: 1\nframe: {kind: lab}\naccuracy: {final: 1e-10}\nrecord: {populations: all, coherence: [[a, b]]}\n\
        numbers: {life: 900 ns, pure: 2 us, wait: 400 ns, split: 0.3 MHz, tilt: 50 deg}\n\
        start: {superposition: {a: [cos(tilt), 0 deg], b: [sin(tilt), 0 deg]}}\nsystem: {levels: {a: 0 MHz, b: split}}\nsequence: [{wait: wait}]\n\
        decay: [{from: b, to: a, lifetime: life}]\ndephasing: [{energy_of: {b: 1}, pure_time: pure}]\n";
    let found = of(text, None);
    let (life, pure, wait) = (0.9f64, 2.0f64, 0.4f64);
    let tilt = 50f64.to_radians();
    let p = tilt.sin().powi(2) * (-wait / life).exp();
    agrees(by(&found, "population_b", "life"), 1e-3 * p * wait / (life * life), 1e-12);
    agrees(by(&found, "population_b", "wait"), -1e-3 * p / life, 1e-12);
    agrees(by(&found, "population_b", "tilt"), (2.0 * tilt).sin() * (-wait / life).exp() * TAU / 360.0, 1e-12);
    agrees(by(&found, "population_b", "pure"), 0.0, 1e-13);
    // rho_ab = cos sin exp(2 pi i split t) exp(-t/(2 T) - t/pure)
    let size = tilt.cos() * tilt.sin() * (-wait / (2.0 * life) - wait / pure).exp();
    let (sin, cos) = (TAU * 0.3 * wait).sin_cos();
    agrees(by(&found, "coherence_a_b_re", "split"), -size * sin * TAU * wait, 1e-11);
    agrees(by(&found, "coherence_a_b_im", "pure"), size * sin * wait / (pure * pure), 1e-11);
    agrees(by(&found, "coherence_a_b_re", "wait"), 1e-3 * (-size * cos * (0.5 / life + 1.0 / pure) - size * sin * TAU * 0.3), 1e-11);
}

/// A ladder in the laboratory frame under a smooth pulse, with a gate: against differences of order 4 of whole runs at two steps.
#[test]
fn ref_whole_runs_of_a_ladder() {
    let text = "format: 1\nframe: {kind: lab}\naccuracy: {final: 1e-11}\nstart: 0\n\
        numbers: {f01: 300 MHz, bend: -60 MHz, gate: 40 ns, slope: 0.7, offset: 1 MHz, angle: 175 deg}\n\
        system: {ladder: {levels: 3, first_gap: f01, anharmonicity: bend, couplings_grow: sqrt}}\n\
        drives: {xy: {acts_on: ladder, reference_pair: [0, 1], form: linear, carrier: f01 + offset}}\n\
        envelopes: {bump: {shape: raised cosine, length: gate, turn: 180 deg, derivative: {factor: slope, against: bend}}}\n\
        sequence: [{pulse: {drive: xy, envelope: bump, turn_about: x}}]\n\
        record: {populations: all, energy: true, gate: {within: [0, 1], target: {turn: angle, about: x}, free_z: true}}\n";
    whole_runs(text, 3e-7);
}

/// Open, with a gate, a bath and an operator that moves.
#[test]
fn ref_whole_runs_of_a_damped_pair() {
    let text = "format: 1\nframe: {kind: rotating, follows: drives, drop_terms_faster_than: nothing}\naccuracy: {final: 1e-10}\nstart: g\n\
        numbers: {rabi: 5 MHz, life: 3 us, weight: 0.4, split: 50 MHz, miss: 0.3 MHz}\n\
        system: {levels: {g: 0 MHz, e: split}}\noperators: {tilted: {rows: [[1, weight], [weight, -1]]}}\n\
        drives: {line: {pair: [g, e], form: one_sided, carrier: split + miss}}\n\
        envelopes: {bump: {shape: gaussian, field_sigma: 30 ns, cut_at: 90 ns, edge: step, peak: rabi}}\n\
        sequence: [{pulse: {drive: line, envelope: bump}}]\ndecay: [{from: e, to: g, lifetime: life}]\n\
        record: {populations: all, time_in: [e], mean_of: [tilted], gate: {within: [g, e], target: {turn: 180 deg, about: x}, free_z: false}}\n";
    whole_runs(text, 3e-7);
}

/// All derivatives against differences of order 4 of runs by the program's own methods; `limit` of the largest derivative by a number is
/// what the accuracy of those runs leaves of a difference over a thousandth.
fn whole_runs(text: &str, limit: f64) {
    let found = of(text, None);
    let plan = plan(text);
    let point = plan.point().expect("the text is right");
    let columns = final_columns(plan.document(), &point);
    for (k, number) in found.numbers.iter().enumerate() {
        let mut mover = plan.mover(&[number.name.as_str()]).expect("the number is there");
        let step = 1e-3 * number.value.abs();
        let mut run = |times: f64| -> Vec<f64> {
            let point = mover.at(&[(number.value + times * step) * number.factor]).expect("it can be moved");
            compute(plan.document(), point).finals.iter().map(|last| last.finer).collect()
        };
        let [a, b, c, d] = [-2.0, -1.0, 1.0, 2.0].map(&mut run);
        for last in &found.finals {
            let j = columns.iter().position(|column| column.name == last.name).expect("it is a final number");
            let expected = (8.0 * (c[j] - b[j]) - (d[j] - a[j])) / (12.0 * step);
            let off = (last.by[k].first - expected).abs();
            // in units of what the number changes by when it doubles
            assert!(off * number.value.abs() < limit * last.scale, "{} by {}: {:e} {expected:e}", last.name, number.name, last.by[k].first);
        }
    }
}

#[test]
fn prop_what_has_no_derivative_is_said() {
    let noisy = format!("{FLIP}noise: [{{moves: rabi, spread: {{sigma: 10 kHz}}, sampling: {{rule: gauss, points: 5}}}}]\n");
    if let Ok(document) = read_str("test.yaml", &noisy, Path::new("."), &[]) {
        let plan = Plan::new(document);
        let point = plan.point().expect("the text is right");
        assert_eq!(sensitivity(&plan, &point, None), Err(NoSensitivity::Average));
    } else {
        panic!("the text is right");
    }
    let plain = plan(
        "format: 1\nframe: {kind: lab}\nrecord: {populations: all}\nstart: down\nsystem: {levels: {down: 0 MHz, up: 1 MHz}}\n\
         sequence: [{wait: 20 ns}]\n",
    );
    let point = plain.point().expect("the text is right");
    assert_eq!(sensitivity(&plain, &point, None), Err(NoSensitivity::NoNumbers));
}

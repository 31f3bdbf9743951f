//! Two levels against closed forms. Parameters, digits, formulas and sources stand in tests/reference/closed_forms.json; where a
//! formula is short it is worked out here once more.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use nutate::outcome::Outcome;
use rig::{at, close, last, run};
use serde_json::Value;

fn case(name: &str) -> Value {
    let all: Value = serde_json::from_str(include_str!("reference/closed_forms.json")).unwrap();
    assert!(all[name].is_object(), "no case {name}");
    all[name].clone()
}

fn number(value: &Value) -> f64 {
    match value.as_str() {
        Some(digits) => digits.parse().unwrap(),
        None => value.as_f64().unwrap(),
    }
}

/// I. I. Rabi, Physical Review 51, 652 (1937): P1 = R^2/W^2 sin^2(pi W t), W^2 = R^2 + D^2, in a turning field.
#[test]
fn rabi_off_resonance() {
    let case = case("rabi-detuned");
    let config = |level: &str| {
        format!(
            "format: 1
system: {{levels: {{down: 0 MHz, up: 120 MHz}}}}
drives: {{rf: {{pair: [down, up], form: {level}, carrier: 120.8 MHz}}}}
envelopes: {{flat: {{shape: square, length: 10 us, peak: 1.25 MHz}}}}
sequence: [{{pulse: {{drive: rf, envelope: flat}}}}]
start: down
record: {{at: [0.1 us, 0.2 us, 0.4 us, 0.53 us, 10 us], populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-11, method: automatic}}
"
        )
    };
    let outcome = run(&config("one_sided"));
    for (k, time_s) in [1e-7, 2e-7, 4e-7, 5.3e-7, 1e-5].into_iter().enumerate() {
        let digits = &case["expected"]["populations"][k];
        close(at(&outcome, "population_up", time_s), number(&digits[1]), 2e-13);
        close(at(&outcome, "population_down", time_s), number(&digits[0]), 2e-13);
        let (r, d) = (1.25e6f64, 0.8e6f64);
        let w = r.hypot(d);
        close(number(&digits[1]), (r / w * (std::f64::consts::PI * w * time_s).sin()).powi(2), 1e-13);
    }
    // the field that turns the other way hardly acts, so the formula is no accident of the start
    let opposite = run(&config("one_sided, sense: opposite"));
    assert!(at(&opposite, "population_up", 4e-7) < 1e-3);
}

/// Rosen-Zener, Allen-Eberly and Demkov-Kunike share one formula (W, D, B in Hz):
/// P1 = [cosh(2 pi^2 B T) - cos(2 pi^2 T sqrt(W^2 - B^2))] / [cosh(2 pi^2 B T) + cosh(2 pi^2 D T)].
struct Sech {
    peak_mhz: f64,
    static_mhz: f64,
    swing_mhz: f64,
    time_ns: f64,
    name: &'static str,
}

const SECH: [Sech; 4] = [
    // N. Rosen, C. Zener, Physical Review 40, 502 (1932)
    Sech { peak_mhz: 1.9, static_mhz: 0.6, swing_mhz: 0.0, time_ns: 200.0, name: "rosen-zener" },
    Sech { peak_mhz: 39.6, static_mhz: -1.7, swing_mhz: 0.0, time_ns: 50.0, name: "rosen-zener-4pi" },
    // L. Allen, J. H. Eberly, Optical Resonance and Two-Level Atoms (1975); F. T. Hioe, Physical Review A 30, 2100 (1984)
    Sech { peak_mhz: 4.0, static_mhz: 0.0, swing_mhz: 2.5, time_ns: 150.0, name: "allen-eberly" },
    // Yu. N. Demkov, M. Kunike, Vestnik Leningradskogo Universiteta 16, 39 (1969)
    Sech { peak_mhz: 3.0, static_mhz: 0.9, swing_mhz: 1.2, time_ns: 110.0, name: "demkov-kunike" },
];

fn check_sech(sech: &Sech, outcome: &Outcome, tolerance: f64) {
    let case = case(sech.name);
    let (middle_s, end_s) = (40e-9 * sech.time_ns, 80e-9 * sech.time_ns);
    for (k, time_s) in [middle_s, end_s].into_iter().enumerate() {
        let digits = &case["expected"]["populations"][k];
        close(at(outcome, "population_one", time_s), number(&digits[1]), tolerance);
        close(at(outcome, "population_zero", time_s), number(&digits[0]), tolerance);
    }
    let scale = 2.0 * std::f64::consts::PI.powi(2) * 1e-3 * sech.time_ns;
    let (w, d, b) = (sech.peak_mhz, sech.static_mhz, sech.swing_mhz);
    let formula = ((scale * b).cosh() - (scale * (w * w - b * b).sqrt()).cos()) / ((scale * b).cosh() + (scale * d).cosh());
    close(last(outcome, "population_one"), formula, tolerance);
}

/// Coupling and gap moved directly.
#[test]
fn sech_coupling_with_moving_gap() {
    for sech in &SECH {
        let Sech { peak_mhz, static_mhz, swing_mhz, time_ns, .. } = sech;
        let gap = if *swing_mhz == 0.0 {
            ["", "", ""].map(str::to_string)
        } else {
            [
                "\n  gap: {operator: sigma, form: direct}".to_string(),
                format!("\n  swing: {{shape: formula, length: 80 * scale, formula: tanh((t - 40 * scale) / scale), matrix_element: {swing_mhz} MHz / 2}}"),
                "\n      - pulse: {drive: gap, envelope: swing}".to_string(),
            ]
        };
        let operators = if gap[0].is_empty() { "" } else { "operators: {sigma: {rows: [[-1, 0], [0, 1]]}}\n" };
        let text = format!(
            "format: 1
numbers: {{scale: {time_ns} ns, offset: {static_mhz} MHz}}
system: {{levels: {{zero: -offset / 2, one: offset / 2}}}}
{operators}drives:
  coupling: {{pair: [zero, one], form: direct}}{}
envelopes:
  hump: {{shape: sech, sech_time: scale, cut_at: 40 * scale, edge: step, matrix_element: {peak_mhz} MHz / 2}}{}
sequence:
  - together:
      - pulse: {{drive: coupling, envelope: hump}}{}
start: zero
record: {{at: [40 * scale, 80 * scale], populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-11, method: automatic}}
",
            gap[0], gap[1], gap[2]
        );
        check_sech(sech, &run(&text), 2e-12);
    }
}

/// The same by light: a turning field whose carrier is swept around the line.
#[test]
fn sech_pulse_of_swept_light() {
    for sech in &SECH {
        let Sech { peak_mhz, static_mhz, swing_mhz, time_ns, .. } = sech;
        let sweep = if *swing_mhz == 0.0 {
            "line - offset".to_string()
        } else {
            format!("{{centre: line - offset, instantaneous: line - offset - {swing_mhz} MHz * tanh((t - 40 * scale) / scale)}}")
        };
        let text = format!(
            "format: 1
numbers: {{scale: {time_ns} ns, offset: {static_mhz} MHz, line: 60 MHz}}
system: {{levels: {{zero: 0 MHz, one: line}}}}
drives:
  light:
    pair: [zero, one]
    form: one_sided
    carrier: {sweep}
envelopes:
  hump: {{shape: sech, sech_time: scale, cut_at: 40 * scale, edge: step, peak: {peak_mhz} MHz}}
sequence: [{{pulse: {{drive: light, envelope: hump}}}}]
start: zero
record: {{at: [40 * scale, 80 * scale], populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-11, method: automatic}}
"
        );
        check_sech(sech, &run(&text), 1e-11);
    }
}

/// L. Landau, Physikalische Zeitschrift der Sowjetunion 2, 46 (1932); C. Zener, Proceedings of the Royal Society A 137, 696 (1932).
/// In a finite window by parabolic cylinder functions (N. V. Vitanov, B. M. Garraway, Physical Review A 53, 4288 (1996)).
#[test]
fn linear_crossing() {
    let sweep = |speed: f64, gap_mhz: f64, length_us: f64, times: &str, accuracy: f64| {
        run(&format!(
            "format: 1
numbers: {{length: {length_us} us}}
system:
  hamiltonian:
    names: [zero, one]
    unit: MHz
    rows: [[0, {gap_mhz} / 2], [{gap_mhz} / 2, 0]]
operators: {{tilt: {{rows: [[0.5, 0], [0, -0.5]]}}}}
drives: {{sweep: {{operator: tilt, form: direct}}}}
envelopes: {{ramp: {{shape: formula, length: length, formula: 2 * t / length - 1, matrix_element: {speed} MHz/us * length / 2}}}}
sequence: [{{pulse: {{drive: sweep, envelope: ramp}}}}]
start: zero
record: {{at: [{times}], populations: all}}
frame: {{kind: lab}}
accuracy: {{final: {accuracy:e}, method: automatic}}
"
        ))
    };
    let finite = sweep(2.0, 0.6, 8.0, "4 us, 4.5 us, 8 us", 1e-11);
    let slow = sweep(0.4, 0.65, 16.0, "7 us, 16 us", 1e-11);
    let checks = [("landau-zener-finite", &finite, vec![4e-6, 4.5e-6, 8e-6]), ("landau-zener-slow", &slow, vec![7e-6, 16e-6])];
    for (name, outcome, times_s) in checks {
        for (k, time_s) in times_s.into_iter().enumerate() {
            let digits = &case(name)["expected"]["populations"][k];
            close(at(outcome, "population_zero", time_s), number(&digits[0]), 1e-11);
            close(at(outcome, "population_one", time_s), number(&digits[1]), 1e-11);
        }
    }
    // exp(-pi^2 D^2 / v), in Hz, is reached as the window grows: what is missing swings within about D / (v t)
    let wide = sweep(2.0, 0.6, 100.0, "100 us", 1e-9);
    let asymptotic = (-std::f64::consts::PI.powi(2) * 0.36 / 2.0).exp();
    close(last(&wide, "population_zero"), asymptotic, 0.6 / 100.0);
}

/// N. F. Ramsey, Physical Review 78, 695 (1950): two quarter turns off resonance with free time between, the carrier running on.
#[test]
fn two_separated_fields() {
    let case = case("ramsey-finite-pulses");
    for (k, free) in ["0 us", "0.4 us", "1 us", "2.5 us"].iter().enumerate() {
        let outcome = run(&format!(
            "format: 1
numbers: {{rabi: 5 MHz}}
system: {{levels: {{down: 0 MHz, up: 2.87 GHz}}}}
drives: {{mw: {{pair: [down, up], form: one_sided, carrier: 2870.31 MHz, carrier_phase: runs on}}}}
envelopes: {{quarter: {{shape: square, length: 0.25 turn / rabi, peak: rabi}}}}
sequence:
  - pulse: {{drive: mw, envelope: quarter, phase: 0 deg}}
  - wait: {free}
  - pulse: {{drive: mw, envelope: quarter, phase: 0 deg}}
start: down
record: {{populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-10, method: automatic}}
"
        ));
        // 7000 turns of the line: the rounding of the energies alone leaves 1e-12
        close(last(&outcome, "population_up"), number(&case["expected"]["P1"][k]), 1e-12);
    }
}

/// F. Bloch and A. Siegert, Physical Review 57, 522 (1940): a linear field is on resonance above the line, by R^2/(4 f) at first.
/// At resonance a state that repeats itself after one period spends half of it in each level, so its time in the upper level
/// minus half a period goes through zero there; the root is found by secants. Digits by J. H. Shirley's infinite matrix
/// (Physical Review 138, B979 (1965)).
#[test]
fn resonance_of_a_linear_field_is_shifted() {
    let case = case("bloch-siegert-shift");
    let text = |share: f64, carrier: f64, start: &str, record: &str| {
        format!(
            "format: 1
numbers: {{line: 100 MHz, carrier: {carrier:e} * line}}
system: {{levels: {{down: -line / 2, up: line / 2}}}}
drives: {{rf: {{pair: [down, up], form: linear, carrier: carrier}}}}
envelopes: {{flat: {{shape: square, length: 1 turn / carrier, peak: {share} * line}}}}
sequence: [{{pulse: {{drive: rf, envelope: flat}}}}]
start: {start}
record: {{{record}}}
frame: {{kind: lab}}
accuracy: {{final: 1e-12, method: automatic}}
"
        )
    };
    // share of a period in the upper level, above one half, in the repeating state that follows the lower level far below the line
    let excess = |share: f64, carrier: f64| {
        let once = run(&text(share, carrier, "down", "propagator: true"));
        let u = &once.propagator.as_ref().unwrap().0;
        // determinant 1: eigenvalues exp(+-i angle)
        let cosine = 0.5 * (u[(0, 0)] + u[(1, 1)]).re;
        let value = num_complex::Complex64::new(cosine, (1.0 - cosine * cosine).sqrt());
        let (a, b) = (u[(0, 1)], value - u[(0, 0)]);
        let norm = (a.norm_sqr() + b.norm_sqr()).sqrt();
        let part = |z: num_complex::Complex64| format!("[{:e}, {:e} rad]", z.norm() / norm, z.arg());
        let start = format!("{{superposition: {{down: {}, up: {}}}}}", part(a), part(b));
        let period = run(&text(share, carrier, &start, "time_in: [up]"));
        last(&period, "time_in_up") * carrier * 1e8 - 0.5
    };
    for (k, share) in [0.02, 0.1, 0.25].into_iter().enumerate() {
        let (mut low, mut high) = (1.0 + 0.2 * share * share, 1.0 + 0.3 * share * share);
        let (mut at_low, mut at_high) = (excess(share, low), excess(share, high));
        for _ in 0..6 {
            if at_high == at_low {
                break;
            }
            let next = high - at_high * (high - low) / (at_high - at_low);
            (low, at_low) = (high, at_high);
            (high, at_high) = (next, excess(share, next));
        }
        close(high, number(&case["expected"]["w_res_over_w0"][k]), 2e-12);
    }
}

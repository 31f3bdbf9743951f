//! What `nutate explain` prints: its numbers against closed forms, and the facts a reviewer looks for on its page.

use std::path::PathBuf;
use std::process::{Command, Output};

use serde_json::Value;

/// Writes a config of its own and explains it.
fn explain(name: &str, config: &str, words: &[&str]) -> Output {
    let folder = std::env::temp_dir().join(format!("nutate-explain-{}", std::process::id()));
    std::fs::create_dir_all(&folder).expect("the folder for temporary files can be written");
    let path: PathBuf = folder.join(format!("{name}.yaml"));
    std::fs::write(&path, config).expect("the folder for temporary files can be written");
    Command::new(env!("CARGO_BIN_EXE_nutate"))
        .arg("explain")
        .arg(&path)
        .args(words)
        .current_dir(&folder)
        .output()
        .expect("the program was built for this test")
}

fn json(name: &str, config: &str, words: &[&str]) -> Value {
    let mut all = vec!["--json"];
    all.extend(words);
    let output = explain(name, config, &all);
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    serde_json::from_slice(&output.stdout).expect("the answer is one JSON object")
}

fn page(name: &str, config: &str) -> String {
    let output = explain(name, config, &[]);
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).expect("the page is UTF-8")
}

#[track_caller]
fn close(found: &Value, expected: f64, share: f64) {
    let found = found.as_f64().expect("a number stands here");
    assert!((found - expected).abs() <= share * expected.abs(), "{found} {expected}");
}

#[track_caller]
fn holds(page: &str, words: &str) {
    assert!(page.contains(words), "\"{words}\" is missing in\n{page}");
}

/// The object of a list that goes from one level to another.
fn between<'v>(list: &'v Value, from: &str, to: &str) -> &'v Value {
    let mut items = list.as_array().expect("a list stands here").iter();
    items.find(|item| item["from"] == from && item["to"] == to).expect("the pair is there")
}

const LADDER: &str = "
format: 1
title: Ladder with a Gaussian pulse
numbers:
  rabi: 30 MHz
  width: 4 ns
system:
  ladder: {levels: 3, first_gap: 5 GHz, anharmonicity: -250 MHz, couplings_grow: sqrt}
drives:
  xy: {acts_on: ladder, reference_pair: [0, 1], form: linear, carrier: '2 MHz above gap(0, 1)', carrier_phase: runs on}
envelopes:
  bump: {shape: gaussian, field_sigma: width, cut_at: 2 * width, edge: step, peak: rabi}
sequence:
  - repeat:
      times: 8
      steps:
        - pulse: {drive: xy, envelope: bump, turn_about: y}
        - wait: 10 ns
start: 0
";

/// Area of exp(-u^2/2) between -2 and 2 over sqrt(2 pi): erf(sqrt 2) = 0.954499736103641585.. (M. Abramowitz and I. A. Stegun,
/// Handbook of Mathematical Functions (1964), 7.1; digits by mpmath.erf(mpmath.sqrt(2)) at 30 digits).
const WITHIN_TWO_SIGMA: f64 = 0.954_499_736_103_641_6;

#[test]
fn exact_numbers_of_a_ladder() {
    let found = json("ladder", LADDER, &[]);
    let drive = &found["drives"]["xy"];
    close(&drive["carrier_Hz"], 5.002e9, 1e-15);
    close(&drive["peak_rabi_Hz"], 30e6, 1e-15);
    close(&drive["flip_s"], 0.5 / 30e6, 1e-15);
    // couplings of a ladder grow with the square root of the rung
    close(&between(&drive["pairs"], "1", "2")["rabi_Hz"], 30e6 * 2f64.sqrt(), 1e-15);
    close(&between(&found["detunings"]["xy"], "0", "1")["detuning_Hz"], 2e6, 1e-9);
    close(&between(&found["detunings"]["xy"], "1", "2")["detuning_Hz"], 252e6, 1e-9);
    assert_eq!(between(&found["detunings"]["xy"], "0", "2")["word"], "below");
    let pulses = found["pulses"].as_array().expect("a list of pulses");
    assert_eq!(pulses.len(), 8);
    let pulse = &pulses[7];
    let whole = 30e6 * 4e-9 * nutate::units::RAD_PER_TURN.sqrt();
    close(&pulse["turn"], whole * WITHIN_TWO_SIGMA, 1e-14);
    close(&pulse["missing_area"], 1.0 - WITHIN_TWO_SIGMA, 1e-13);
    close(&pulse["edge_step"], (-2f64).exp(), 1e-14);
    close(&pulse["start_s"], 7.0 * 26e-9, 1e-14);
    close(&pulse["centre_s"], 7.0 * 26e-9 + 8e-9, 1e-14);
    // turn_about y is the phase of -90 deg, three quarters of a turn
    assert_eq!((pulse["phase"].as_f64(), pulse["axis"].as_f64()), (Some(0.75), Some(0.25)));
    close(&found["end_s"], 8.0 * 26e-9, 1e-14);
    let accuracy = found["defaults"].as_array().and_then(|list| list.iter().find(|default| default["name"] == "accuracy.final"));
    assert_eq!(accuracy.map(|default| default["value"].as_f64()), Some(Some(1e-8)));
}

#[test]
fn exact_set_moves_what_leans_on_a_number() {
    let found = json("set", LADDER, &["--set", "rabi=15 MHz"]);
    close(&found["numbers"]["rabi"]["value"], 15e6, 1e-15);
    close(&found["drives"]["xy"]["flip_s"], 0.5 / 15e6, 1e-15);
}

/// |[H, x]|^2 of the ladder H = diag(0, 1, 2) f + diag(0, 0, 1) a and x = sum over rungs of sqrt(n) (|n-1><n| + adjoint) is
/// 2 (f^2 + 2 (f + a)^2), |x|^2 = 6, and |H|^2 the sum of the squares of the energies less their mean; f = 5, a = -0.25.
#[test]
fn exact_commutator_of_a_ladder() {
    let found = json("commutator", LADDER, &[]);
    let energies = [0.0, 5.0, 9.75];
    let mean = energies.iter().sum::<f64>() / 3.0;
    let static_norm = energies.iter().map(|e| (e - mean).powi(2)).sum::<f64>().sqrt();
    let commutator = (2.0 * (25.0 + 2.0 * 4.75 * 4.75f64)).sqrt();
    assert_eq!(found["commutators"][0]["name"], "static and xy");
    close(&found["commutators"][0]["size"], commutator / (2.0 * static_norm * 6f64.sqrt()), 1e-14);
}

#[test]
fn cli_page_says_what_a_reviewer_asks() {
    let page = page("page", LADDER);
    for words in [
        "Ladder with a Gaussian pulse",
        "linear: a real cosine, both rotation senses",
        "30 MHz = 188.496 rad/us on 0 to 1; a square flip takes 16.6667 ns",
        "5.002 GHz; runs on",
        "2 MHz above      0 to 1  Rabi 30 MHz       nearest line",
        "252 MHz above    1 to 2  Rabi 42.4264 MHz",
        "4.748 GHz below  0 to 2  not coupled",
        "8 pulses, 208 ns long",
        "x 8, a round every 26 ns, the first one:",
        "wait 10 ns",
        "-90 deg  y",
        // exp(-2) and 1 - erf(sqrt 2) in per cent
        "13.53 %",
        "4.55 %",
        "Frame: laboratory, nothing dropped",
        "phase +90 deg turns about -y",
        "accuracy.final: 1e-8",
        "static and xy",
    ] {
        holds(&page, words);
    }
    assert!(page.lines().all(|line| line.chars().count() <= 120));
}

const DIRECT: &str = "
format: 1
system:
  levels: {a: 0 MHz, b: 3 MHz}
drives:
  bias: {pair: [a, b], form: direct}
envelopes:
  ramp: {shape: raised cosine, length: 1 us, matrix_element: -2 MHz}
sequence:
  - pulse: {drive: bias, envelope: ramp}
  - mark: done
start: a
";

#[test]
fn exact_a_direct_drive_has_no_rabi_frequency() {
    let found = json("direct", DIRECT, &[]);
    let (drive, pulse) = (&found["drives"]["bias"], &found["pulses"][0]);
    for empty in [&drive["carrier_Hz"], &drive["peak_rabi_Hz"], &drive["flip_s"], &pulse["turn"], &pulse["phase"], &pulse["axis"]] {
        assert!(empty.is_null(), "{found}");
    }
    assert_eq!(drive["peak_element_Hz"].as_f64(), Some(2e6));
    assert!(found["detunings"].as_object().is_some_and(|detunings| detunings.is_empty()));
    assert_eq!((found["marks"][0]["name"].as_str(), found["marks"][0]["at_s"].as_f64()), (Some("done"), Some(1e-6)));
    assert_eq!(found["end_s"], found["marks"][0]["at_s"]);
    let page = page("direct-page", DIRECT);
    holds(&page, "direct: no carrier, the envelope itself multiplies the matrix");
    holds(&page, "<a|H|b> -2 MHz");
}

/// A million rounds of one pulse: the page folds them.
#[test]
fn cli_a_million_pulses_are_folded() {
    let long = LADDER.replace("times: 8", "times: 1000000");
    let page = page("million", &long);
    holds(&page, "1000000 pulses, 26 ms long");
    holds(&page, "x 1000000, a round every 26 ns, the first one:");
    assert!(page.lines().count() < 80);
}

#[test]
fn cli_a_bad_file_is_refused_with_its_line() {
    let output = explain("bad", &LADDER.replace("rabi: 30 MHz", "rabi: 30"), &[]);
    assert_eq!(output.status.code(), Some(2));
    assert!(output.stdout.is_empty());
    assert!(String::from_utf8_lossy(&output.stderr).contains("line 5"));
}

/// Lifetimes in the three words of the trade, and each coherence time beside its limit: with n = 1/(exp(4.3 GHz h/(k 70 mK)) - 1) = 0.0553409
/// the cold lifetime of 38 us is 38/(n + 1) = 36.0073 us down and 38/n = 686.653 us up; the limit is 2 over the sum of both rates.
#[test]
fn cli_page_says_lifetimes_and_coherence_times() {
    let text = page("fringe", include_str!("../configs/fringe.yaml"));
    holds(&text, "excited to ground  36.0073 us  27.7721 /ms  4.42007 kHz");
    holds(&text, "ground to excited  686.653 us  1.45634 /ms  231.784 Hz");
    holds(&text, "bath at 70 mK; the stated lifetime is the one at zero temperature");
    holds(&text, "pure time 50.3309 us, linewidth 6.32435 kHz; what a total time of 29 us on ground and excited");
    holds(&text, "ground and excited  T2 29 us  limit 68.4264 us");
    holds(&text, "expected counts of 2000 shots, read as dark, bright");
    holds(&text, "start: thermal equilibrium of the static system at 70 mK");
}

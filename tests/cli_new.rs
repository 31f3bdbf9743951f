//! `nutate new` as a person meets it, and every worked config run as written.

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use nutate::config::starters::STARTERS;

fn nutate(folder: &Path, words: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_nutate"))
        .args(words)
        .current_dir(folder)
        .output()
        .expect("the program of this package is built for its tests")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

fn empty() -> tempfile::TempDir {
    tempfile::tempdir().expect("the system has a folder for temporary files")
}

/// Runs the config of a kind in an empty folder and returns its result.
fn run_of(kind: &str) -> serde_json::Value {
    let folder = empty();
    let wrote = nutate(folder.path(), &["new", kind]);
    assert_eq!(wrote.status.code(), Some(0), "{}", text(&wrote.stderr));
    let config = format!("{kind}.yaml");
    // levels alone have no sequence to run
    let verb = if kind == "levels" { "scan" } else { "run" };
    assert!(text(&wrote.stdout).ends_with(&format!("then type: nutate {verb} {config}\n")));
    let ran = nutate(folder.path(), &[verb, &config]);
    assert_eq!(ran.status.code(), Some(0), "{kind}: {}{}", text(&ran.stdout), text(&ran.stderr));
    if kind == "strong-spin" {
        assert!(text(&ran.stderr).starts_with("warning: "), "{kind} drops what it should not, and is told so");
    } else {
        assert_eq!(text(&ran.stderr), "", "{kind} runs without a warning");
    }
    let results = folder.path().join("outputs").join(kind);
    let files = match verb {
        "scan" => ["scan.csv", "levels.csv", "levels.png", "transitions.csv", "transitions.png", "config.yaml"],
        _ => ["traces.csv", "traces.png", "traces.svg", "envelopes.png", "spectrum.png", "config.yaml"],
    };
    for file in files {
        assert!(results.join(file).is_file(), "{kind} leaves {file}");
    }
    let bytes = fs::read(results.join("result.json")).expect("a run leaves result.json");
    serde_json::from_slice(&bytes).expect("result.json is JSON")
}

fn number(result: &serde_json::Value, path: &str) -> f64 {
    result.pointer(path).and_then(serde_json::Value::as_f64).unwrap_or_else(|| panic!("{path} is a number of the result"))
}

/// What `accuracy: final` says in a config, 1e-8 where it says nothing.
fn accuracy(text: &str) -> f64 {
    let section = text.split("\naccuracy:").nth(1).unwrap_or_default();
    let written = section.split("final:").nth(1).and_then(|rest| rest.split([',', '}', '\n', '#']).next()).map(str::trim);
    written.map_or(1e-8, |word| word.parse().expect("the accuracy of a starter is a plain number"))
}

#[test]
fn cli_every_starter_runs_to_its_accuracy() {
    for starter in STARTERS {
        let result = run_of(starter.kind);
        let figure = number(&result, "/error_figure");
        assert!(figure > 0.0 && figure <= accuracy(starter.text), "{}: {figure}", starter.kind);
    }
}

// I. I. Rabi, Physical Review 51, 652 (1937): R^2/(R^2 + d^2) sin^2(pi sqrt(R^2 + d^2) T) with R = 2 MHz, d = 0.6 MHz, T = 1.25 us;
// the number from mpmath with 30 digits: `mp.dps=30; (4/mpf('4.36'))*sin(pi*sqrt(mpf('4.36'))*mpf('1.25'))**2`.
#[test]
fn exact_flip_meets_the_formula_of_rabi() {
    let up = number(&run_of("flip"), "/final/populations/up");
    assert!((up - 0.8120212189775531).abs() < 1e-12, "{up}");
}

// The state 0 lies at -2/3 D, the state -1 at D/3 - 28.03 GHz/T B: they meet at B = D/28.03 GHz/T, 67.8 mT, where half of the
// transverse moment, sqrt(2) 28.03 GHz/T 2.5 mT / 2, ties them; the third state and the rhombic term move both by a few per cent.
#[test]
fn exact_levels_of_a_spin_avoid_each_other() {
    let followed = &run_of("levels")["followed"];
    let crossings = followed["crossings"].as_array().expect("a list of crossings");
    assert_eq!(crossings.len(), 1, "{followed}");
    assert_eq!(crossings[0]["names"], serde_json::json!(["0", "-1"]));
    let (at, gap) = (number(&crossings[0], "/at"), number(&crossings[0], "/closest_Hz"));
    assert!((at - 1.9e3 / 28.03).abs() < 1.0, "{at} mT");
    let tie = 2.0 * 28.03e9 * 2.5e-3 / 2f64.sqrt();
    assert!((gap / tie - 1.0).abs() < 0.05 && followed["not_followed"].as_array().is_some_and(Vec::is_empty), "{gap} {tie}");
}

/// Compares the variants of the config of a kind in an empty folder and returns what was printed and the result.
fn compare_of(kind: &str) -> (String, serde_json::Value) {
    let folder = empty();
    assert_eq!(nutate(folder.path(), &["new", kind]).status.code(), Some(0));
    let compared = nutate(folder.path(), &["compare", &format!("{kind}.yaml")]);
    assert_eq!(compared.status.code(), Some(0), "{kind}: {}", text(&compared.stderr));
    let bytes = fs::read(folder.path().join("outputs").join(format!("{kind}-compare")).join("result.json"))
        .expect("a comparison leaves result.json");
    (text(&compared.stdout), serde_json::from_slice(&bytes).expect("result.json is JSON"))
}

// The dropped half of the gate and the level that was cut off both stay far below the tolerance; the size of both is what the
// run itself gives, here to a digit, so that a change of it is seen.
#[test]
fn cli_qubit_frame_is_good_enough() {
    let (said, result) = compare_of("qubit-frame");
    let laboratory = number(&result, "/differences/laboratory/gate_error");
    let more = number(&result, "/differences/four levels/gate_error");
    assert!((laboratory - 4.0e-7).abs() < 0.1e-7, "{laboratory}");
    assert!((more - 7.9e-6).abs() < 0.1e-6, "{more}");
    for name in ["laboratory", "four levels"] {
        assert_eq!(result["exceeds_tolerance"][name], false, "{name}");
    }
    assert!(!said.contains('?'), "every level has a name: {said}");
}

#[test]
fn cli_strong_spin_is_explained_by_one_term() {
    let (said, result) = compare_of("strong-spin");
    assert_eq!(result["exceeds_tolerance"]["nothing dropped"], true);
    let difference = number(&result, "/differences/nothing dropped/population_high").abs();
    assert!(difference > 0.05, "the difference is large: {difference}");
    let first = &result["explanation"]["nothing dropped"][0];
    assert_eq!(first["drive"], "coil");
    assert!((number(first, "/turns_at_Hz") - 12e6).abs() < 1e-3);
    assert!(number(first, "/remains/population_high").abs() < 0.3 * difference, "{first}");
    assert!(said.contains("explains most of it"), "{said}");
}

// Decay out of a level that one variant eliminates is left out there, and the comparison says so once, under its name.
#[test]
fn cli_compare_warns_of_decay_that_a_variant_leaves_out() {
    let folder = empty();
    let config = "format: 1\nsystem:\n  levels: {near: 0 MHz, far: 90 MHz, upper: 7 GHz}\ndrives:\n  pump: {pair: [near, upper], form: one_sided, carrier: \"300 MHz below gap(near, upper)\"}\n  dump: {pair: [far, upper], form: one_sided, carrier: \"300 MHz below gap(far, upper)\"}\nenvelopes:\n  on: {shape: square, length: 6 us, peak: 10 MHz}\nsequence:\n  - together:\n      - pulse: {drive: pump, envelope: on}\n      - pulse: {drive: dump, envelope: on}\nstart: near\ndecay:\n  - {from: upper, to: outside, lifetime: 30 ns}\nframe: {kind: rotating, follows: drives, drop_terms_faster_than: nothing}\nrecord: {populations: all}\ncompare:\n  - {name: short, frame: {kind: rotating, follows: drives, drop_terms_faster_than: nothing, eliminate: [upper]}}\n";
    fs::write(folder.path().join("raman.yaml"), config).expect("a folder of ours can be written to");
    let compared = nutate(folder.path(), &["compare", "raman.yaml"]);
    let said = text(&compared.stderr);
    assert_eq!(compared.status.code(), Some(0), "{said}");
    assert!(said.starts_with("short:\nwarning: raman.yaml, line 19"), "{said}");
    assert_eq!(said.matches("its decay (3.33333e7 /s) is left out with it").count(), 1, "{said}");
}

#[test]
fn cli_low_frequency_is_cross_checked() {
    let difference = number(&run_of("low-frequency"), "/cross_check/difference");
    assert!(difference < 1e-10, "{difference}");
}

// L. D. Landau (1932) and C. Zener (1932): exp(-4 pi^2 0.8^2 / 18) = 0.2457 jumps the gap of an endless sweep. The ends of
// this one, at 18 MHz from a crossing of 0.8 MHz, change the amplitude by about coupling / (span/2) = 0.044.
#[test]
fn exact_crossing_is_near_landau_and_zener() {
    let jumped = number(&run_of("crossing"), "/final/adiabatic_populations/right");
    assert!((jumped - 0.2457).abs() < 0.044, "{jumped}");
    assert!((jumped - 0.2457).abs() > 1e-4, "the ends are not in the formula: {jumped}");
}

#[test]
fn cli_without_a_kind_the_kinds_are_listed() {
    let folder = empty();
    let listed = nutate(folder.path(), &["new"]);
    assert_eq!(listed.status.code(), Some(0));
    let lines = text(&listed.stdout);
    for starter in STARTERS {
        assert!(lines.contains(&format!("  {} ", starter.kind)), "{lines}");
    }
    assert_eq!(lines.lines().count(), STARTERS.len() + 2);
}

#[test]
fn cli_an_unknown_kind_is_refused_with_the_near_one() {
    let folder = empty();
    let refused = nutate(folder.path(), &["new", "leakege"]);
    assert_eq!(refused.status.code(), Some(2));
    let said = text(&refused.stderr);
    assert!(said.starts_with("error: there is no starter \"leakege\"."), "{said}");
    assert!(said.ends_with("  Write: nutate new leakage\n"), "{said}");
    assert_eq!(fs::read_dir(folder.path()).map(Iterator::count).ok(), Some(0));
}

#[test]
fn cli_new_overwrites_nothing() {
    let folder = empty();
    fs::write(folder.path().join("flip.yaml"), "mine").expect("a temporary folder can be written");
    let refused = nutate(folder.path(), &["new", "flip"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(
        text(&refused.stderr).starts_with("error: flip.yaml is there already.\n  Nothing was overwritten."),
        "{}",
        text(&refused.stderr)
    );
    assert_eq!(fs::read_to_string(folder.path().join("flip.yaml")).ok().as_deref(), Some("mine"));
}

#[test]
fn cli_new_leaves_no_half_of_a_starter() {
    let folder = empty();
    fs::write(folder.path().join("waveform.yaml"), "mine").expect("a temporary folder can be written");
    assert_eq!(nutate(folder.path(), &["new", "waveform"]).status.code(), Some(2));
    assert!(!folder.path().join("waveform.csv").exists());
    assert_eq!(fs::read_to_string(folder.path().join("waveform.yaml")).ok().as_deref(), Some("mine"));
}

#[test]
fn cli_new_puts_what_a_config_names_beside_it() {
    let folder = empty();
    fs::create_dir(folder.path().join("my bench")).expect("a temporary folder can be written");
    let wrote = nutate(folder.path(), &["new", "Waveform", "my bench/first.yaml"]);
    assert_eq!(wrote.status.code(), Some(0), "{}", text(&wrote.stderr));
    assert!(folder.path().join("my bench/waveform.csv").is_file());
    assert!(text(&wrote.stdout).ends_with("then type: nutate run 'my bench/first.yaml'\n"));
    let checked = nutate(folder.path(), &["check", "my bench/first.yaml"]);
    assert_eq!(checked.status.code(), Some(0), "{}", text(&checked.stderr));
}

#[test]
fn cli_new_names_a_folder_that_is_not_there() {
    let folder = empty();
    let refused = nutate(folder.path(), &["new", "flip", "nowhere/flip.yaml"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(text(&refused.stderr).contains("the folder of nowhere/flip.yaml does not exist"));
}

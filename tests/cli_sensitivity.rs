//! What a person sees of `nutate run FILE --sensitivity`.

use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

fn nutate(words: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_nutate")).current_dir(env!("CARGO_MANIFEST_DIR")).args(words).output().expect("the program starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// The table and the object say the same; the tightest number comes first, one that nothing depends on is named apart.
#[test]
fn cli_sensitivity_of_a_flip() {
    let folder = tempfile::tempdir().expect("a folder");
    let place = folder.path().join("out");
    let place = place.to_string_lossy();
    let done = nutate(&["run", "configs/flip.yaml", "--sensitivity", "--tolerance", "1e-3", "--folder", &place]);
    let screen = text(&done.stdout);
    assert!(done.status.success(), "{screen}{}", text(&done.stderr));
    assert!(screen.contains("the change of each that alone costs 0.001 (from --tolerance)"), "{screen}");
    assert!(screen.contains("not moved by line"), "{screen}");
    let at = |word: &str| screen.find(word).unwrap_or_else(|| panic!("{word} in {screen}"));
    assert!(at("    length ") < at("    miss "), "{screen}");
    let json: Value =
        serde_json::from_str(&std::fs::read_to_string(Path::new(&*place).join("result.json")).expect("it is there")).expect("JSON");
    let of = &json["sensitivity"]["of"]["population_up"]["by"]["miss"];
    let (first, allowed) = (of["derivative"].as_f64().expect("a number"), of["allowed_change"].as_f64().expect("a number"));
    let second = of["second_derivative"].as_f64().expect("a number");
    assert!((first.abs() * allowed + 0.5 * second.abs() * allowed * allowed - 1e-3).abs() < 1e-12);
    assert_eq!(json["sensitivity"]["numbers"]["miss"]["unit"], "MHz");
    assert_eq!(json["sensitivity"]["tolerance_from"], "--tolerance");
}

#[test]
fn cli_sensitivity_refuses_before_work() {
    let folder = tempfile::tempdir().expect("a folder");
    let place = folder.path().join("out");
    let path = place.to_string_lossy();
    let noisy = nutate(&["run", "configs/drift.yaml", "--sensitivity", "--folder", &path]);
    assert_eq!(noisy.status.code(), Some(2));
    let said = text(&noisy.stderr);
    assert!(said.contains("configs/drift.yaml: no sensitivity: the numbers of this run are averages over noise"), "{said}");
    assert!(said.contains("Write: "), "{said}");
    assert!(!place.exists(), "nothing is left behind");
    for words in [&["--tolerance", "1e-3"][..], &["--sensitivity", "--tolerance", "0"], &["--sensitivity", "--tolerance", "much"]] {
        let refused = nutate(&[&["run", "configs/flip.yaml", "--folder", &path], words].concat());
        assert_eq!(refused.status.code(), Some(2), "{words:?}");
    }
}

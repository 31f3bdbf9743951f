//! `nutate matrices` as a person meets it: text, files, and what is refused.

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

const PAIR: &str = "format: 1
system:
  parts:
    ion: {spin: {size: 1/2, gyromagnetic: -28 GHz/T}}
    motion: {mode: {frequency: 2.75 MHz, levels: 3}}
  magnetic_field: [0 mT, 0 mT, 0.1 mT]
  interactions:
    - {between: [ion, motion], kind: product, product: [spin_up, lower], size: 61 kHz}
";

fn matrices(folder: &Path, config: &str, words: &[&str]) -> Output {
    fs::write(folder.join("pair.yaml"), config).expect("the folder can be written");
    Command::new(env!("CARGO_BIN_EXE_nutate"))
        .args(["matrices", "pair.yaml", "--folder", "out"])
        .args(words)
        .current_dir(folder)
        .output()
        .expect("the program of this package is built for its tests")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

#[test]
fn cli_matrices_need_no_sequence_and_leave_every_matrix() {
    let folder = tempfile::tempdir().expect("the system has a folder for temporary files");
    let done = matrices(folder.path(), PAIR, &[]);
    let (out, err) = (text(&done.stdout), text(&done.stderr));
    assert_eq!((done.status.code(), err.as_str()), (Some(0), ""), "{out}");
    for line in ["6 states in the basis as built", "[position, momentum] of motion is not i on 2 of 6 states", "its adjoint is added"] {
        assert!(out.contains(line), "{line} in\n{out}");
    }
    let at = folder.path().join("out");
    for file in ["result.json", "levels.csv", "transitions.csv", "matrix-operator-ion.spin_up.csv", "matrix-static.npy", "config.yaml"] {
        assert!(at.join(file).is_file(), "{file}");
    }
    let table = fs::read_to_string(at.join("matrix-operator-motion.quanta.csv")).expect("the table is there");
    assert_eq!(table.lines().nth(2), Some("\"+1/2,1\",0.0,1.0,0.0,0.0,0.0,0.0"));
}

#[test]
fn cli_matrices_refuse_what_run_would_refuse_of_the_system() {
    let folder = tempfile::tempdir().expect("the system has a folder for temporary files");
    let refused = matrices(folder.path(), &PAIR.replace("[spin_up, lower]", "[spin_up, lowr]"), &[]);
    let err = text(&refused.stderr);
    assert_eq!(refused.status.code(), Some(2));
    assert!(err.contains("pair.yaml, line 8") && err.contains("lower"), "{err}");
    assert!(!folder.path().join("out").exists(), "nothing is left");
}

//! Laws of the source itself: one direction of flow between rooms, one home of 2 pi and of unit factors, no `unsafe`, no catch-all files.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

use nutate::config::starters::STARTERS;

/// The rooms in their order; a room may use those on lines before its own, and itself.
///
/// `problem` and `units` are the common ground. `config` makes no matrices, `propagate` knows no names of a config, and `report`
/// and `cli` come after the join of all, `plan` and `outcome`.
const ROOMS: &[&[&str]] = &[
    &["units", "quadrature"],
    &["random"],
    &["problem"],
    &["config"],
    &["model"],
    &["drive"],
    &["frame"],
    &["propagate"],
    &["measure"],
    &["plan"],
    &["outcome"],
    &["bundle"],
    &["known"],
    &["noise"],
    &["compare", "matrices", "scan", "sensitivity", "design"],
    &["report"],
    &["cli"],
];

/// Uses that the order would allow and the house does not.
const FORBIDDEN: &[(&str, &str, &str)] = &[
    ("propagate", "config", "a method knows no names and no files"),
    ("propagate", "model", "a method sees a Problem and nothing else"),
    ("propagate", "drive", "a method never asks where a coefficient came from"),
];

/// Every source file with its text.
fn sources() -> Vec<(PathBuf, String)> {
    fn walk(folder: &Path, found: &mut Vec<(PathBuf, String)>) {
        for entry in fs::read_dir(folder).expect("the sources lie beside Cargo.toml") {
            let path = entry.expect("a folder of sources can be listed").path();
            if path.is_dir() {
                walk(&path, found);
            } else if path.extension().is_some_and(|extension| extension == "rs") {
                let text = fs::read_to_string(&path).expect("sources are UTF-8");
                found.push((path, text));
            }
        }
    }
    let mut found = Vec::new();
    walk(&Path::new(env!("CARGO_MANIFEST_DIR")).join("src"), &mut found);
    assert!(found.len() > 50, "all sources are found, not {}", found.len());
    found
}

/// The path below `src`, with `/`.
fn below_src(path: &Path) -> String {
    let below = path.strip_prefix(Path::new(env!("CARGO_MANIFEST_DIR")).join("src")).unwrap_or(path);
    below.to_string_lossy().replace('\\', "/")
}

/// The room of a file: its folder, or its own name where it lies in `src`.
fn room(path: &Path) -> String {
    let below = below_src(path);
    below.split('/').next().unwrap_or(&below).trim_end_matches(".rs").to_string()
}

fn rank(room: &str) -> usize {
    ROOMS
        .iter()
        .position(|row| row.contains(&room))
        .unwrap_or_else(|| panic!("{room} has no place in ROOMS of this test: write where in the flow it stands"))
}

/// Whether a whole file is for tests.
fn is_test_file(path: &Path) -> bool {
    let below = below_src(path);
    below.contains("/tests/") || below.ends_with("/tests.rs") || below.ends_with("_tests.rs")
}

/// The lines of a file that are code of the program: before its `#[cfg(test)] mod`, without comments.
fn program_lines(text: &str) -> Vec<(usize, &str)> {
    let lines: Vec<&str> = text.lines().collect();
    let tests = (0..lines.len()).find(|k| {
        lines[*k].trim() == "#[cfg(test)]"
            && lines.get(k + 1).is_some_and(|next| next.starts_with("mod ") && next.trim_end().ends_with('{'))
    });
    let end = tests.unwrap_or(lines.len());
    lines[..end].iter().enumerate().map(|(k, line)| (k + 1, line.split("//").next().unwrap_or(""))).collect()
}

/// The rooms that a file names by `crate::`, with the line.
fn used(text: &str) -> Vec<(usize, String)> {
    let mut found = Vec::new();
    for (number, line) in program_lines(text) {
        for (at, _) in line.match_indices("crate::") {
            let rest = &line[at + "crate::".len()..];
            // `use crate::{a, b}` names several rooms; this house writes one line for each
            assert!(!rest.starts_with('{'), "line {number}: write one `use` for each room");
            found.push((number, rest.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()));
        }
    }
    found
}

/// Fails with all violations at once.
fn none(violations: &[String]) {
    assert!(violations.is_empty(), "\n{}\n", violations.join("\n"));
}

#[test]
fn prop_each_room_uses_only_earlier_ones() {
    let mut wrong = Vec::new();
    for (path, text) in sources() {
        let file = below_src(&path);
        if file == "lib.rs" || file == "main.rs" || is_test_file(&path) {
            continue;
        }
        let here = room(&path);
        for (line, there) in used(&text) {
            if there != here && rank(&there) >= rank(&here) {
                wrong.push(format!("src/{file}, line {line}: {here} uses {there}, which comes later"));
            }
            if let Some((.., why)) = FORBIDDEN.iter().find(|(from, to, _)| *from == here && *to == there) {
                wrong.push(format!("src/{file}, line {line}: {here} uses {there}: {why}"));
            }
        }
    }
    none(&wrong);
}

#[test]
fn prop_two_pi_lives_in_units() {
    let words = ["TAU", "consts::PI", "2.0 * PI", "2.0*PI", "6.283", "3.14159", "FRAC_PI"];
    let mut wrong = Vec::new();
    for (path, text) in sources() {
        let file = below_src(&path);
        // tests state formulas as their sources do; two files speak of the constant pi of the arithmetic a user types
        if file == "units.rs" || is_test_file(&path) || file == "config/reader.rs" || file == "config/tape.rs" {
            continue;
        }
        for (line, code) in program_lines(&text) {
            if words.iter().any(|word| code.contains(word)) {
                wrong.push(format!("src/{file}, line {line}: {}", code.trim()));
            }
        }
    }
    none(&wrong);
}

#[test]
fn prop_constants_of_nature_live_in_units() {
    // digits of h, e, k, c, the masses and their quotients, however they are grouped
    let digits = ["6626070", "1602176", "1380649", "299792458", "9109383", "1660539", "2083661", "2417989"];
    let mut wrong = Vec::new();
    for (path, text) in sources() {
        let file = below_src(&path);
        if file == "units.rs" || is_test_file(&path) {
            continue;
        }
        for (line, code) in program_lines(&text) {
            let bare = code.replace(['_', '.'], "");
            if digits.iter().any(|constant| bare.contains(constant)) {
                wrong.push(format!("src/{file}, line {line}: {}", code.trim()));
            }
        }
    }
    none(&wrong);
}

#[test]
fn prop_no_unsafe() {
    let mut wrong = Vec::new();
    for (path, text) in sources() {
        // the one folder that calls the processor's instructions
        if below_src(&path).starts_with("propagate/lanes/") {
            continue;
        }
        for (line, code) in program_lines(&text) {
            if code.split(|c: char| !(c.is_alphanumeric() || c == '_')).any(|word| word == "unsafe") {
                wrong.push(format!("src/{}, line {line}: {}", below_src(&path), code.trim()));
            }
        }
    }
    none(&wrong);
    let lib = fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("src/lib.rs")).expect("the library has a root");
    assert!(lib.contains("#![deny(unsafe_code)]") || lib.contains("#![forbid(unsafe_code)]"));
}

#[test]
fn prop_no_file_for_odds_and_ends() {
    let wrong: Vec<String> = sources()
        .iter()
        .map(|(path, _)| below_src(path))
        .filter(|file| {
            file.trim_end_matches(".rs").split('/').any(|part| matches!(part, "util" | "utils" | "helper" | "helpers" | "common" | "misc"))
        })
        .collect();
    none(&wrong);
}

#[test]
fn prop_only_cli_prints_and_only_cli_and_report_write() {
    let prints = ["println!", "eprintln!", "print!(", "eprint!(", "stdout()", "stderr()", "dbg!("];
    let writes = ["File::create", "fs::write", "create_dir", "fs::rename"];
    let mut wrong = Vec::new();
    for (path, text) in sources() {
        let (file, here) = (below_src(&path), room(&path));
        if is_test_file(&path) || here == "cli" {
            continue;
        }
        for (line, code) in program_lines(&text) {
            if prints.iter().any(|word| code.contains(word)) {
                wrong.push(format!("src/{file}, line {line} prints: {}", code.trim()));
            }
            // the store of a scan is no result: it is written while points come, and gone when the result is there
            if here != "report" && file != "scan/store.rs" && writes.iter().any(|word| code.contains(word)) {
                wrong.push(format!("src/{file}, line {line} writes a file: {}", code.trim()));
            }
        }
    }
    none(&wrong);
}

#[test]
fn prop_every_worked_config_is_a_starter() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("configs");
    let there: BTreeSet<String> = fs::read_dir(&folder)
        .expect("the worked configs lie beside Cargo.toml")
        .map(|entry| entry.expect("a folder can be listed").file_name().to_string_lossy().into_owned())
        .filter(|name| !name.ends_with(".md"))
        .collect();
    let known: BTreeSet<String> = STARTERS
        .iter()
        .flat_map(|starter| {
            let beside = starter.beside.iter().map(|(name, _)| (*name).to_string());
            beside.chain([format!("{}.yaml", starter.kind)])
        })
        .collect();
    assert_eq!(there, known, "configs/ and the table in src/config/starters.rs hold the same");
    for starter in STARTERS {
        let on_disk = fs::read_to_string(folder.join(format!("{}.yaml", starter.kind))).expect("it is in the list above");
        assert_eq!(on_disk, starter.text, "{}", starter.kind);
        assert!(on_disk.contains("A scenario of our own; every number in it"), "{} says whose numbers it holds", starter.kind);
    }
}

#[test]
fn prop_the_readers_of_this_test_see_what_they_should() {
    let text = "use crate::units::rad_s; // crate::cli\nlet x = crate::model::dense;\n#[cfg(test)]\nmod tests {\n use crate::cli;\n}\n";
    let rooms: Vec<String> = used(text).into_iter().map(|(_, room)| room).collect();
    assert_eq!(rooms, ["units", "model"]);
    assert!(rank("config") < rank("model") && rank("measure") < rank("plan") && rank("plan") < rank("cli"));
    assert_eq!(room(Path::new("src/plan.rs")), "src");
    assert_eq!(room(&Path::new(env!("CARGO_MANIFEST_DIR")).join("src/plan.rs")), "plan");
}

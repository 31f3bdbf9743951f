//! Every case of tests/cases and every bad config of tests/bad, through the built program.
//!
//! `expect.json` of a case names its sources (author, journal, year) and how its numbers were computed. Judged is: each listed
//! value within its tolerance, an error figure no larger than `accuracy: final`, and an honest one (no listed absolute number is
//! off by more than the figure, four rounding units and the uncertainty of the expected value). Of a bad config: exit status,
//! file, line and column, the words that must be said, no more than fourteen lines a mistake, no file left.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value;

/// Seconds that a case may take.
const LONGEST_S: f64 = 120.0;
/// Lines of one message, beside four for a summary.
const LINES_A_MISTAKE: usize = 14;
/// Uncertainty of an expected value where a check does not say.
const DIGITS: f64 = 1e-13;

fn tests() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests")
}

fn json(path: &Path) -> Value {
    serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap()
}

/// Runs the program; one that takes too long is ended and reported.
fn call(words: &[&str], longest_s: f64) -> Result<Output, String> {
    let mut child = Command::new(env!("CARGO_BIN_EXE_nutate"))
        .args(words)
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let (mut out, mut err) = (child.stdout.take().unwrap(), child.stderr.take().unwrap());
    let read = |pipe: &mut dyn std::io::Read| {
        let mut bytes = Vec::new();
        pipe.read_to_end(&mut bytes).unwrap();
        bytes
    };
    let from = Instant::now();
    std::thread::scope(|scope| {
        let (out, err) = (scope.spawn(move || read(&mut out)), scope.spawn(move || read(&mut err)));
        let status = loop {
            if let Some(status) = child.try_wait().unwrap() {
                break status;
            }
            if from.elapsed().as_secs_f64() > longest_s {
                child.kill().unwrap();
                child.wait().unwrap();
                return Err(format!("not finished after {longest_s} s"));
            }
            std::thread::sleep(Duration::from_millis(2));
        };
        Ok(Output { status, stdout: out.join().unwrap(), stderr: err.join().unwrap() })
    })
}

fn first_line(text: &str) -> &str {
    text.lines().find(|line| !line.trim().is_empty()).unwrap_or("(nothing)")
}

/// `final.populations[0,1]` as `final`, `populations`, `0,1`.
fn parts(path: &str) -> Vec<String> {
    let mut parts = Vec::new();
    let mut rest = path;
    while !rest.is_empty() {
        if let Some(inner) = rest.strip_prefix('[') {
            let end = inner.find(']').unwrap();
            parts.push(inner[..end].to_string());
            rest = &inner[end + 1..];
        } else {
            rest = rest.trim_start_matches('.');
            let end = rest.find(['.', '[']).unwrap_or(rest.len());
            parts.push(rest[..end].to_string());
            rest = &rest[end..];
        }
    }
    parts
}

/// The object of a list with this `name`, or with this `from` and `to`, either way round where only one of the two is there.
fn named<'v>(items: &'v [Value], part: &str) -> Option<&'v Value> {
    [("from", "to"), ("to", "from")].iter().find_map(|(first, second)| {
        items.iter().find(|item| {
            let text = |key: &str| item.get(key).and_then(Value::as_str);
            text("name") == Some(part) || matches!((text(first), text(second)), (Some(a), Some(b)) if part == format!("{a} to {b}"))
        })
    })
}

fn at_path<'v>(tree: &'v Value, path: &str) -> Result<&'v Value, String> {
    let mut here = tree;
    for part in parts(path) {
        let next = match here {
            Value::Object(map) => map.get(&part),
            Value::Array(items) => named(items, &part).or_else(|| items.get(part.parse::<usize>().ok()?)),
            _ => None,
        };
        here = next.ok_or_else(|| format!("there is no {path} (stopped at {part})"))?;
    }
    Ok(here)
}

/// Headings and rows of a CSV file.
fn table(path: &Path) -> Result<(Vec<String>, Vec<Vec<String>>), String> {
    let mut reader =
        csv::ReaderBuilder::new().comment(Some(b'#')).from_path(path).map_err(|error| format!("{}: {error}", path.display()))?;
    let head = reader.headers().unwrap().iter().map(str::to_string).collect();
    let rows = reader.records().map(|row| row.unwrap().iter().map(str::to_string).collect()).collect();
    Ok((head, rows))
}

/// The cell under a column at a time.
fn cell(folder: &Path, check: &Value) -> Result<Value, String> {
    let file = check["file"].as_str().unwrap();
    let (head, rows) = table(&folder.join(file))?;
    let column = check["column"].as_str().unwrap();
    let place = |name: &str| head.iter().position(|heading| heading == name).ok_or(format!("{file} has no column {name}"));
    if let Some(axes) = check.get("where").and_then(Value::as_object) {
        // the one row of a scan with these values on its axes
        let column = place(column)?;
        let axes: Vec<(usize, f64)> =
            axes.iter().map(|(name, value)| Ok((place(name)?, value.as_f64().unwrap()))).collect::<Result<_, String>>()?;
        let near = |found: f64, wanted: f64| (found - wanted).abs() <= 1e-12 + 1e-9 * wanted.abs();
        let mut hits = rows.iter().filter(|row| axes.iter().all(|(k, wanted)| near(row[*k].parse().unwrap(), *wanted)));
        let (Some(row), None) = (hits.next(), hits.next()) else { return Err(format!("{file} has not one row at {axes:?}")) };
        return serde_json::from_str(&row[column]).map_err(|_| format!("{file} has no number at {axes:?}"));
    }
    let at_s = check["at_s"].as_f64().unwrap();
    let (time, column) = (place("time_s")?, place(column)?);
    let row = rows
        .iter()
        .find(|row| {
            let found: f64 = row[time].parse().unwrap();
            (found - at_s).abs() <= 1e-12 * found.abs().max(at_s.abs())
        })
        .ok_or(format!("{file} has no row at {at_s} s"))?;
    Ok(serde_json::from_str(&row[column]).unwrap())
}

/// Compares what was found with what a check wants; gives the number found where it is one.
fn judge(check: &Value, found: &Value) -> Result<f64, String> {
    let (wanted, kind) = (&check["value"], check["kind"].as_str().unwrap());
    let label = check["path"].as_str().or(check["column"].as_str()).unwrap();
    let good = |good: bool| {
        if good {
            Ok(f64::NAN)
        } else {
            Err(format!("{label} is {found}: wanted {kind} {wanted}"))
        }
    };
    let names = || -> Vec<&Value> {
        let items = found.as_array().map(Vec::as_slice).unwrap_or_default();
        items.iter().map(|item| item.get("name").unwrap_or(item)).collect()
    };
    match kind {
        "is" => return good(found == wanted),
        "count" => return good(found.as_array().map(Vec::len) == wanted.as_u64().map(|n| n as usize)),
        "holds" => return good(names().contains(&wanted)),
        "lacks" => return good(found.is_array() && !names().contains(&wanted)),
        _ => {}
    }
    let number = match found.as_array() {
        Some(pair) if check.get("abs").is_some() => pair.iter().map(|part| part.as_f64().unwrap().powi(2)).sum::<f64>().sqrt(),
        // true counts as 1
        _ => found.as_bool().map(|yes| f64::from(u8::from(yes))).or(found.as_f64()).ok_or(format!("{label} is {found}, not a number"))?,
    };
    let wanted = wanted.as_f64().unwrap();
    let tolerance = || check["tolerance"].as_f64().unwrap();
    let good = match kind {
        "at_most" => number <= wanted,
        "at_least" => number >= wanted,
        "absolute" => (number - wanted).abs() <= tolerance(),
        "relative" => (number - wanted).abs() <= tolerance() * wanted.abs(),
        other => panic!("a check of the unknown kind {other}"),
    };
    if good {
        Ok(number)
    } else {
        Err(format!("{label} is {number:e}, wanted {kind} {wanted:e} (off by {:.2e})", number - wanted))
    }
}

/// The largest `final` of the accuracy section.
fn accuracy_asked(config: &str) -> Option<f64> {
    let from = config.find("accuracy:")?;
    let at = config[from..].find("final:")? + from + "final:".len();
    let text: String = config[at..].trim_start().chars().take_while(|c| "0123456789.eE+-".contains(*c)).collect();
    text.parse().ok()
}

/// What a case falls short of.
fn faults(folder: &Path) -> Vec<String> {
    let expect = json(&folder.join("expect.json"));
    let words: Vec<&str> = expect["command"].as_array().unwrap().iter().map(|word| word.as_str().unwrap()).collect();
    let config = folder.join("config.yaml");
    let results = tempfile::tempdir().unwrap();
    let explains = words[0] == "explain";
    let mut command = vec![words[0], config.to_str().unwrap()];
    command.extend(&words[1..]);
    if !explains {
        command.extend(["--folder", results.path().to_str().unwrap()]);
    }
    let done = match call(&command, LONGEST_S) {
        Ok(done) => done,
        Err(fault) => return vec![fault],
    };
    let wanted = expect.get("exit").map_or(0, |exit| exit.as_i64().unwrap() as i32);
    if done.status.code() != Some(wanted) {
        let message = String::from_utf8_lossy(&done.stderr).into_owned();
        return vec![format!("{}, wanted {wanted}: {}", done.status, first_line(&message))];
    }
    let printed = if explains {
        String::from_utf8(done.stdout).unwrap()
    } else {
        fs::read_to_string(results.path().join("result.json")).unwrap_or_default()
    };
    let tree: Value = match serde_json::from_str(&printed) {
        Ok(tree) => tree,
        Err(error) => return vec![format!("no result to read: {error}")],
    };
    let mut faults = Vec::new();
    let mut figure = f64::INFINITY;
    if !explains {
        // of a comparison the largest of all variants
        let runs: Vec<&Value> = tree["variants"].as_object().map_or_else(|| vec![&tree], |variants| variants.values().collect());
        let figures: Option<Vec<f64>> = runs.iter().map(|run| run["error_figure"].as_f64()).collect();
        match figures {
            Some(found) => figure = found.into_iter().fold(0.0, f64::max),
            None => faults.push("a run has no error_figure".to_string()),
        }
        let asked = accuracy_asked(&fs::read_to_string(&config).unwrap()).unwrap_or(f64::INFINITY);
        if figure > asked {
            faults.push(format!("error_figure {figure:e} is larger than accuracy.final {asked:e}"));
        }
    }
    for check in expect["checks"].as_array().unwrap() {
        let found = match check.get("path") {
            Some(path) => at_path(&tree, path.as_str().unwrap()).cloned(),
            None => cell(results.path(), check),
        };
        match found.and_then(|found| judge(check, &found)) {
            Err(fault) => faults.push(fault),
            Ok(number) if check["kind"] == "absolute" => {
                let off = (number - check["value"].as_f64().unwrap()).abs();
                let digits = check.get("digits").map_or(DIGITS, |digits| digits.as_f64().unwrap());
                // a difference may be off by as much as both of its runs
                let apart = check["path"].as_str().is_some_and(|path| !path.starts_with("variants") && words[0] == "compare");
                let figure = if apart { 2.0 * figure } else { figure };
                if off > figure + 4.0 * f64::EPSILON + digits {
                    faults.push(format!("the error figure {figure:e} is not honest: {check} is off by {off:e}"));
                }
            }
            Ok(_) => {}
        }
    }
    faults
}

/// Judges all folders of tests/cases whose verb is `verb`; `least` guards against judging none.
fn judge_cases(verb: &str, least: usize) {
    let mut folders: Vec<PathBuf> = fs::read_dir(tests().join("cases")).unwrap().map(|entry| entry.unwrap().path()).collect();
    folders.retain(|folder| json(&folder.join("expect.json"))["command"][0] == verb);
    folders.sort();
    assert!(folders.len() >= least, "only {} cases of {verb}", folders.len());
    let short: Vec<String> = folders
        .iter()
        .filter_map(|folder| {
            let faults = faults(folder);
            let name = folder.file_name().unwrap().to_string_lossy();
            (!faults.is_empty()).then(|| format!("{name}: {}", faults.join("\n    ")))
        })
        .collect();
    assert!(short.is_empty(), "{} of {} fall short:\n{}", short.len(), folders.len(), short.join("\n"));
}

#[test]
fn cases_of_run() {
    judge_cases("run", 55);
}

#[test]
fn cases_of_explain() {
    // a program built before the verb came
    if call(&["explain", "--help"], LONGEST_S).unwrap().status.success() {
        judge_cases("explain", 12);
    }
}

#[test]
fn cases_of_compare() {
    judge_cases("compare", 7);
}

#[test]
fn cases_of_scan() {
    judge_cases("scan", 9);
}

/// Files below a folder.
fn files(folder: &Path) -> Vec<PathBuf> {
    let mut found = Vec::new();
    for entry in fs::read_dir(folder).into_iter().flatten().flatten() {
        let path = entry.path();
        if path.is_dir() {
            found.extend(files(&path));
        } else {
            found.push(path);
        }
    }
    found
}

/// Whether a message names a line: `line 8`, or `lines 8 and 11`, or `:8`.
fn names_line(message: &str, line: u64) -> bool {
    let number = line.to_string();
    let whole = |at: usize| {
        let after = message[at + number.len()..].chars().next();
        !after.is_some_and(|c| c.is_ascii_alphanumeric())
    };
    message.match_indices(&number).any(|(at, _)| {
        let before = &message[..at];
        // walk back over a list of lines
        let list = before.trim_end_matches(|c: char| c.is_ascii_digit() || ", ".contains(c));
        let list = list.trim_end_matches("and").trim_end_matches("to").trim_end_matches(|c: char| c.is_ascii_digit() || ", ".contains(c));
        let said = before.ends_with("line ") || before.ends_with(':') || (before.ends_with(' ') && list.ends_with("lines"));
        said && whole(at)
    })
}

fn bad_faults(entry: &Value) -> Vec<String> {
    let name = entry["file"].as_str().unwrap();
    let config = tests().join("bad").join(name);
    let place = tempfile::tempdir().unwrap();
    let taken = place.path().join("taken");
    let inside_a_file = entry["folder"] == "inside a file";
    if inside_a_file {
        fs::write(&taken, "a file\n").unwrap();
    }
    let folder = if inside_a_file { taken.join("results") } else { place.path().to_path_buf() };
    let verb = entry["verb"].as_str().unwrap();
    let mut command = vec![verb, config.to_str().unwrap()];
    if verb != "check" {
        command.extend(["--folder", folder.to_str().unwrap()]);
    }
    let done = match call(&command, entry.get("seconds").map_or(LONGEST_S, |s| s.as_f64().unwrap())) {
        Ok(done) => done,
        Err(fault) => return vec![fault],
    };
    let message = String::from_utf8_lossy(&done.stderr).into_owned();
    let lower = message.to_lowercase();
    let list = |key: &str| entry[key].as_array().cloned().unwrap_or_default();
    let says = list("says");
    let exit = entry["exit"].as_i64().unwrap();
    let mut faults = Vec::new();
    if done.status.code() != Some(exit as i32) {
        faults.push(format!("{}, wanted {exit}", done.status));
    }
    if (exit != 0 || !says.is_empty()) && !inside_a_file && !message.contains(name) {
        faults.push("the message does not name the file".to_string());
    }
    let lines: Vec<u64> = entry.get("line").into_iter().chain(&list("lines")).map(|line| line.as_u64().unwrap()).collect();
    for line in lines.iter().filter(|line| !names_line(&message, **line)) {
        faults.push(format!("the message does not name line {line}"));
    }
    if let (true, Some(line)) = (exit != 0, entry["line"].as_u64()) {
        if !message.contains(&format!("line {line}, column ")) {
            faults.push(format!("the message does not give a column in line {line}"));
        }
    }
    for word in &says {
        let word = word.as_str().unwrap();
        if !word.to_lowercase().split('|').any(|choice| lower.contains(choice)) {
            faults.push(format!("the message does not say {word}"));
        }
    }
    for word in list("says_exactly") {
        if !message.contains(word.as_str().unwrap()) {
            faults.push(format!("the message does not say {word}"));
        }
    }
    let longest = LINES_A_MISTAKE * list("lines").len().max(1) + 4;
    let count = message.lines().filter(|line| !line.trim().is_empty()).count();
    if count > longest {
        faults.push(format!("the message has {count} lines, more than {longest}"));
    }
    let left: Vec<PathBuf> = files(place.path()).into_iter().filter(|path| *path != taken).collect();
    // what was not accurate enough is written all the same
    if exit != 3 && !left.is_empty() {
        faults.push(format!("files were left: {left:?}"));
    }
    if !faults.is_empty() {
        faults.push(message);
    }
    faults
}

#[test]
fn bad_configs() {
    let index = json(&tests().join("bad/index.json"));
    let entries = index.as_array().unwrap();
    assert!(entries.len() >= 60);
    let short: Vec<String> = entries
        .iter()
        .filter_map(|entry| {
            let faults = bad_faults(entry);
            (!faults.is_empty()).then(|| format!("{}: {}", entry["file"], faults.join("\n    ")))
        })
        .collect();
    assert!(short.is_empty(), "{} of {} fall short:\n{}", short.len(), entries.len(), short.join("\n"));
}

#[test]
fn lines_named_in_a_message_are_found_and_others_are_not() {
    let message = "error: a.yaml, line 8, column 3: twice.\n  The same on line 12, line 40.\n  See lines 17 and 19.";
    for line in [8, 12, 40, 17, 19] {
        assert!(names_line(message, line), "{line}");
    }
    for line in [1, 2, 3, 4, 7, 9, 11] {
        assert!(!names_line(message, line), "{line}");
    }
}

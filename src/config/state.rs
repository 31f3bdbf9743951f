//! `start:`, and states wherever one is named.

use std::path::Path;

use super::messages::{short, Fault};
use super::npy;
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::system::parts::read_joint_level;
use super::tree::Node;
use crate::units::Dim;

/// A pure state.
#[derive(Debug, Clone)]
pub enum State {
    /// A basis state.
    Level(usize),
    /// Levels with size and phase (turns).
    Superposition(Vec<(usize, Quantity, Quantity)>, Place),
    /// Amplitudes read from a file, (re, im) in basis order, normalised.
    Amplitudes(Vec<(f64, f64)>),
}

const LATER: [&str; 5] = ["mix", "temperature", "part", "quanta", "steady"];

/// Reads `start:`.
pub fn read_start(reader: &mut Reader, node: &Node) -> Option<State> {
    if node.text() == Some("steady") && !reader.level_names().iter().any(|name| name == "steady") {
        reader.error(node.place, Fault::NotNow { key: "steady".to_string(), section: "start".to_string() });
        return None;
    }
    let Some(entries) = node.entries() else {
        return reader.level(node).map(State::Level);
    };
    let of_all = ["superposition", "state_from"].into_iter().chain(LATER);
    if !reader.parts.is_empty() && !of_all.into_iter().any(|word| entries.iter().any(|entry| entry.key == word)) {
        let parts = reader.parts.clone();
        return read_joint_level(reader, node, &parts).map(State::Level);
    }
    if let Some(later) = entries.iter().find(|entry| LATER.contains(&entry.key.as_str())) {
        reader.error(later.place, Fault::NotNow { key: later.key.clone(), section: "start".to_string() });
        return None;
    }
    reader.fields(node, "start", &["superposition", "state_from"], &[])?;
    let entry = reader.one_of(node, &["superposition", "state_from"], "start", Some("Or the name of a level alone: start: down."))?;
    if entry.key == "superposition" {
        return read_superposition(reader, &entry.value);
    }
    read_state_file(reader, &entry.value)
}

/// A level, or `{superposition: ..}` / `{level: [size, phase]}`, as `fidelity: {to: ..}` takes.
pub fn read_state(reader: &mut Reader, node: &Node, what: &str) -> Option<State> {
    if node.entries().is_none() {
        return reader.level(node).map(State::Level);
    }
    match node.get("superposition") {
        Some(inner) => {
            reader.fields(node, what, &["superposition"], &[])?;
            read_superposition(reader, inner)
        }
        None => read_superposition(reader, node),
    }
}

fn read_superposition(reader: &mut Reader, node: &Node) -> Option<State> {
    let example = "superposition: {down: [sqrt(0.5), 0 deg], up: [sqrt(0.5), 90 deg]}";
    let Some(entries) = node.entries() else {
        let fault = Fault::Shape {
            what: "superposition".to_string(),
            expected: "a block of level: [size, phase]".to_string(),
            example: example.to_string(),
        };
        reader.error(node.place, fault);
        return None;
    };
    let names = reader.level_names();
    let mut parts = Vec::new();
    let mut good = true;
    for entry in entries {
        let level = names.iter().position(|name| *name == entry.key);
        if level.is_none() {
            reader.unknown(entry.place, "level", &entry.key, &names);
        }
        let pair = match entry.value.items() {
            Some([size, phase]) => {
                let size = reader.plain(size, "the size of an amplitude");
                let phase = reader.quantity(phase, "the phase of an amplitude", Dim::ANGLE);
                size.zip(phase)
            }
            _ => {
                let expected = "a list of size and phase".to_string();
                reader.error(
                    entry.value.place,
                    Fault::Shape { what: entry.key.clone(), expected, example: format!("{}: [sqrt(0.5), 90 deg]", entry.key) },
                );
                None
            }
        };
        match level.zip(pair) {
            Some((level, (size, phase))) => parts.push((level, size, phase)),
            None => good = false,
        }
    }
    if !good {
        return None;
    }
    let values = reader.tape.as_written();
    let sum: f64 = parts.iter().map(|(_, size, _)| values[size.register as usize].powi(2)).sum();
    if !(sum.is_finite() && (sum - 1.0).abs() <= 1e-6) {
        let scaled: Vec<String> = entries
            .iter()
            .zip(&parts)
            .map(|(entry, (_, size, phase))| {
                format!("{}: [{}, {} turn]", entry.key, values[size.register as usize] / sum.sqrt(), short(values[phase.register as usize]))
            })
            .collect();
        let write = if sum > 0.0 { format!("superposition: {{{}}}", scaled.join(", ")) } else { example.to_string() };
        reader.error(node.place, Fault::NotNormalised { sum, write });
        return None;
    }
    Some(State::Superposition(parts, node.place))
}

fn read_state_file(reader: &mut Reader, node: &Node) -> Option<State> {
    let name = reader.text(node, "state_from", "state_from: ../other-run/result.json")?.to_string();
    let path = reader.beside(&name);
    let found = if path.extension().is_some_and(|end| end == "npy") {
        npy::read(&path).and_then(|array| match (array.rows, array.columns) {
            (1, _) | (_, 1) => Ok((array.bytes, array.values)),
            (rows, columns) => Err(format!("it has {rows} rows and {columns} columns, not one state")),
        })
    } else {
        end_state(&path)
    };
    let (bytes, amplitudes) = match found {
        Ok(found) => found,
        Err(reason) => {
            reader.error(node.place, Fault::CannotRead { path: name, reason });
            return None;
        }
    };
    reader.sources.add(&path, bytes, String::new());
    let wanted = reader.level_names().len();
    if amplitudes.len() != wanted {
        reader.error(
            node.place,
            Fault::CannotRead { path: name, reason: format!("it has {} amplitudes for {wanted} levels", amplitudes.len()) },
        );
        return None;
    }
    let sum: f64 = amplitudes.iter().map(|(re, im)| re * re + im * im).sum();
    if !(sum.is_finite() && (sum - 1.0).abs() <= 1e-6) {
        reader.error(node.place, Fault::NotNormalised { sum, write: "a file whose squared amplitudes add up to 1".to_string() });
        return None;
    }
    let norm = sum.sqrt();
    Some(State::Amplitudes(amplitudes.into_iter().map(|(re, im)| (re / norm, im / norm)).collect()))
}

/// A file's bytes and the amplitudes found in it.
type StateFile = (Vec<u8>, Vec<(f64, f64)>);

/// `end_state.amplitudes` of a result.json; a folder stands for the result.json in it.
fn end_state(path: &Path) -> Result<StateFile, String> {
    let path = if path.is_dir() { path.join("result.json") } else { path.to_path_buf() };
    let bytes = std::fs::read(&path).map_err(|error| {
        if error.kind() == std::io::ErrorKind::NotFound {
            "no such file exists".to_string()
        } else {
            error.to_string()
        }
    })?;
    let json: serde_json::Value = serde_json::from_slice(&bytes).map_err(|_| "it is neither a result.json nor a .npy file".to_string())?;
    let pairs = json.pointer("/end_state/amplitudes").and_then(|list| list.as_array()).ok_or("it holds no end_state")?;
    let amplitudes = pairs
        .iter()
        .map(|pair| Some((pair.get(0)?.as_f64()?, pair.get(1)?.as_f64()?)))
        .collect::<Option<Vec<_>>>()
        .ok_or("its end_state is no list of [re, im]")?;
    Ok((bytes, amplitudes))
}

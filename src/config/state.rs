//! `start:`, and states wherever one is named.

use super::decay::{read_shares, read_temperature, Shares};
use super::messages::{short, Fault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::state_file::read_state_file;
use super::system::parts::read_joint_level;
use super::tree::Node;
use crate::units::Dim;

/// A state: pure, or one of the mixtures that only `start:` takes.
#[derive(Debug, Clone)]
pub enum State {
    /// A basis state.
    Level(usize),
    /// Levels with size and phase (turns).
    Superposition(Vec<(usize, Quantity, Quantity)>, Place),
    /// Amplitudes read from a file, (re, im) in basis order, normalised.
    Amplitudes(Vec<(f64, f64)>),
    /// Density matrix read from a file, column by column, trace 1.
    Density(Vec<(f64, f64)>),
    /// Levels with shares that add up to 1.
    Mix(Shares),
    /// Thermal equilibrium of the static system, K.
    Thermal(Quantity),
    /// Steady state of the static system with its decays.
    Steady(Place),
}

const LATER: [&str; 2] = ["part", "quanta"];
const KINDS: [&str; 4] = ["superposition", "mix", "temperature", "state_from"];

/// Reads `start:`.
pub fn read_start(reader: &mut Reader, node: &Node) -> Option<State> {
    if node.text() == Some("steady") && !reader.level_names().iter().any(|name| name == "steady") {
        return Some(State::Steady(node.place));
    }
    let Some(entries) = node.entries() else {
        return reader.level(node).map(State::Level);
    };
    let of_all = KINDS.into_iter().chain(LATER);
    if !reader.parts.is_empty() && !of_all.into_iter().any(|word| entries.iter().any(|entry| entry.key == word)) {
        let parts = reader.parts.clone();
        return read_joint_level(reader, node, &parts).map(State::Level);
    }
    if let Some(later) = entries.iter().find(|entry| LATER.contains(&entry.key.as_str())) {
        reader.error(later.place, Fault::NotNow { key: later.key.clone(), section: "start".to_string() });
        return None;
    }
    let hints = [("thermal", "Thermal equilibrium is written start: {temperature: 130 mK}."), ("steady", "Written alone: start: steady.")];
    reader.fields(node, "start", &KINDS, &hints)?;
    let entry = reader.one_of(node, &KINDS, "start", Some("Or the name of a level alone: start: down."))?;
    match entry.key.as_str() {
        "superposition" => read_superposition(reader, &entry.value),
        "mix" => read_mix(reader, &entry.value),
        "temperature" => read_temperature(reader, &entry.value, "start / temperature").map(State::Thermal),
        _ => read_state_file(reader, &entry.value),
    }
}

/// `mix:` shares of levels.
fn read_mix(reader: &mut Reader, node: &Node) -> Option<State> {
    let names = reader.level_names();
    let shares = read_shares(reader, node, "mix", |reader, place, text| {
        let level = names.iter().position(|name| name == text);
        if level.is_none() {
            reader.unknown(place, "level", text, &names);
        }
        level.map(Some)
    })?;
    if let Err(fault) = shares.numbers(None, "mix", &reader.tape.as_written()) {
        reader.error(node.place, fault);
        return None;
    }
    Some(State::Mix(shares))
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

//! `start:`, and states wherever one is named.

use super::decay::{read_shares, read_temperature, Shares};
use super::messages::{short, Fault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::state_file::read_state_file;
use super::system::parts::read_joint_level;
use super::tree::{Kind, Node};
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
    /// Modes with a thermal number of quanta, all else in one level.
    Quanta {
        /// The joint level with no quanta in any of the modes.
        base: usize,
        /// The modes.
        modes: Vec<Warm>,
    },
}

/// A mode with a thermal number of quanta.
#[derive(Debug, Clone, Copy)]
pub struct Warm {
    /// Their mean in the mode without a cut.
    pub mean: Quantity,
    /// How far its next level is in the joint order.
    pub stride: usize,
    /// Number of its levels.
    pub levels: usize,
}

const KINDS: [&str; 4] = ["superposition", "mix", "temperature", "state_from"];

/// Reads `start:`.
pub fn read_start(reader: &mut Reader, node: &Node) -> Option<State> {
    if node.text() == Some("steady") && !reader.level_names().iter().any(|name| name == "steady") {
        return Some(State::Steady(node.place));
    }
    let Some(entries) = node.entries() else {
        return reader.level(node).map(State::Level);
    };
    if !reader.parts.is_empty() && !KINDS.into_iter().any(|word| entries.iter().any(|entry| entry.key == word)) {
        return read_parts(reader, node);
    }
    if let Some(quanta) = node.get("quanta") {
        reader.fields(node, "start", &["quanta"], &[])?;
        let levels = reader.level_names();
        let mean = read_thermal(reader, quanta, &levels)?;
        return Some(State::Quanta { base: 0, modes: vec![Warm { mean, stride: 1, levels: levels.len() }] });
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

/// One level of every part, or `{quanta: thermal 0.4}` for a mode among them.
fn read_parts(reader: &mut Reader, node: &Node) -> Option<State> {
    let parts = reader.parts.clone();
    let thermal: Vec<Option<Node>> = parts.iter().map(|(name, _)| node.get(name).and_then(|part| part.get("quanta")).cloned()).collect();
    if thermal.iter().all(Option::is_none) {
        return read_joint_level(reader, node, &parts).map(State::Level);
    }
    let (mut base, mut modes, mut good) = (0, Vec::new(), true);
    for (k, ((name, levels), quanta)) in parts.iter().zip(&thermal).enumerate() {
        base *= levels.len();
        match quanta {
            Some(quanta) => match read_thermal(reader, quanta, levels) {
                Some(mean) => {
                    let stride = parts[k + 1..].iter().map(|(_, levels)| levels.len()).product();
                    modes.push(Warm { mean, stride, levels: levels.len() });
                }
                None => good = false,
            },
            None => match reader.need(node, name, "start", &levels[0]).and_then(|level| reader.name_among(level, "level", levels)) {
                Some(level) => base += level,
                None => good = false,
            },
        }
    }
    let names: Vec<String> = parts.iter().map(|(name, _)| name.clone()).collect();
    for entry in node.entries().unwrap_or_default().iter().filter(|entry| !names.contains(&entry.key)) {
        reader.unknown(entry.place, "part", &entry.key, &names);
        good = false;
    }
    good.then_some(State::Quanta { base, modes })
}

/// `thermal 0.4`, the mean number of quanta of a mode without a cut.
fn read_thermal(reader: &mut Reader, node: &Node, levels: &[String]) -> Option<Quantity> {
    let is_mode = levels.iter().enumerate().all(|(n, level)| *level == n.to_string());
    let text = node.text().unwrap_or_default();
    let Some(mean) = text.strip_prefix("thermal ").filter(|_| is_mode) else {
        let expected = if is_mode { "the word thermal and the mean number of quanta" } else { "for a mode or a ladder" };
        let fault =
            Fault::Shape { what: "start / quanta".to_string(), expected: expected.to_string(), example: "quanta: thermal 0.4".to_string() };
        reader.error(node.place, fault);
        return None;
    };
    let lead = "thermal ".len() + (mean.len() - mean.trim_start().len());
    let place = node.place.part(lead, mean.trim().chars().count());
    let inner = Node { place, kind: Kind::Scalar { text: mean.trim().to_string(), quoted: false, exact: true } };
    let quantity = reader.plain(&inner, "start / quanta")?;
    let value = reader.value_now(quantity.register);
    if value < 0.0 {
        let fault =
            Fault::OutOfRange { what: "the mean number of quanta".to_string(), found: short(value), wanted: "0 or more".to_string() };
        reader.error(place, fault);
        return None;
    }
    Some(quantity)
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

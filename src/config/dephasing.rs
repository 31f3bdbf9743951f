//! `dephasing:` coherences that fade while the populations stay.

use super::decay::{leaving, plain_rate, Decay};
use super::messages::{short_with_unit, Fault, OpenFault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::system::Operator;
use super::tree::{Entry, Node};
use crate::units::{Dim, RAD_PER_TURN};

/// The weights of the levels.
#[derive(Debug, Clone)]
pub enum Weights {
    /// Of the levels named; others have 0.
    Levels(Vec<(usize, Quantity)>),
    /// The diagonal of an operator (index).
    Operator(usize),
}

/// How fast.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Fading {
    /// 1/e time for a weight difference of 1, s.
    Pure(Quantity),
    /// Full width in Hz of the line that it makes alone for a weight difference of 1: pure time = 1/(pi linewidth).
    Linewidth(Quantity),
    /// 1/e time of the coherence of a pair, decays included, s.
    Total(Quantity, [usize; 2]),
}

/// The pure time of a linewidth, s.
pub fn pure_time_s(linewidth_hz: f64) -> f64 {
    2.0 / (RAD_PER_TURN * linewidth_hz)
}

/// The linewidth of a pure time, Hz.
pub fn linewidth_hz(pure_time_s: f64) -> f64 {
    2.0 / (RAD_PER_TURN * pure_time_s)
}

/// One entry of `dephasing:`.
#[derive(Debug, Clone)]
pub struct Dephasing {
    /// Weights w: the coherence between m and n decays at (w_m - w_n)^2 / pure time.
    pub weights: Weights,
    /// How fast.
    pub fading: Fading,
    /// Where the entry stands.
    pub place: Place,
    /// Where the time or the width stands.
    pub size_place: Place,
}

impl Dephasing {
    /// The weights written by level, for every level; none where an operator has them.
    pub fn written_weights(&self, size: usize, values: &[f64]) -> Option<Vec<f64>> {
        let Weights::Levels(list) = &self.weights else { return None };
        let mut weights = vec![0.0; size];
        list.iter().for_each(|(level, weight)| weights[*level] = values[weight.register as usize]);
        Some(weights)
    }

    /// The quantity of its time or width.
    pub fn size(&self) -> Quantity {
        match self.fading {
            Fading::Pure(size) | Fading::Linewidth(size) | Fading::Total(size, _) => size,
        }
    }
}

const KEYS: [&str; 5] = ["energy_of", "pure_time", "total_time", "linewidth", "of"];
/// Words that do not say which decay was measured.
const UNSAID: [&str; 9] = ["T2", "t2", "T_2", "coherence_time", "T2_echo", "time", "T2_star", "T2star", "T2*"];
const HINTS: [(&str, &str); 5] = [
    ("T_phi", "The decay of a coherence with lifetimes taken out is called pure_time."),
    ("Tphi", "The decay of a coherence with lifetimes taken out is called pure_time."),
    ("lifetime", "The decay of populations belongs under decay."),
    ("rate", "Dephasing is stated as pure_time, total_time or linewidth; one over a rate is a pure_time."),
    ("t2_star", "A Ramsey decay is a spread of the line: it belongs under noise, as spread: {t2_star: ..}."),
];

/// Reads `dephasing:`; `decays` is for the messages, and for what they rule out.
pub fn read_dephasings(
    reader: &mut Reader,
    node: &Node,
    operators: &[Operator],
    decays: &[Decay],
    used: &mut Vec<String>,
) -> Option<Vec<Dephasing>> {
    if node.is_empty() {
        return Some(Vec::new());
    }
    let items = reader.list(node, "dephasing", "dephasing: [{energy_of: {up: 1}, pure_time: 20 us}]")?;
    let found: Vec<Option<Dephasing>> = items.iter().map(|item| read_dephasing(reader, item, operators, decays, used)).collect();
    found.into_iter().collect()
}

fn read_dephasing(reader: &mut Reader, node: &Node, operators: &[Operator], decays: &[Decay], used: &mut Vec<String>) -> Option<Dephasing> {
    let unsaid = node.entries().into_iter().flatten().find(|entry| UNSAID.contains(&entry.key.as_str()));
    let known: Vec<&str> = KEYS.iter().copied().chain(unsaid.map(|entry| entry.key.as_str())).collect();
    reader.fields(node, "dephasing", &known, &HINTS)?;
    let weights = read_weights(reader, node, operators, used);
    if let Some(entry) = unsaid {
        coherence_unsaid(reader, node, entry, decays);
        return None;
    }
    let hint = Some("pure_time has lifetimes taken out; total_time is a measured echo decay; linewidth is 1/(pi pure_time).");
    let entry = reader.one_of(node, &["pure_time", "total_time", "linewidth"], "dephasing", hint)?;
    let dim = if entry.key == "linewidth" { Dim::FREQUENCY } else { Dim::TIME };
    let size = reader.quantity(&entry.value, &format!("dephasing / {}", entry.key), dim);
    let fading = match entry.key.as_str() {
        "total_time" => {
            let pair = pair_of(reader, node, entry);
            size.zip(pair).map(|(size, pair)| Fading::Total(size, pair))
        }
        other => {
            if let Some(of) = node.get("of") {
                let known = KEYS[..4].iter().map(|key| (*key).to_string()).collect();
                let hint = Some(format!("It belongs to total_time; a {other} holds for a weight difference of 1."));
                let fault = Fault::UnknownKey { key: "of".to_string(), section: format!("dephasing ({other})"), near: None, known, hint };
                reader.error(of.place, fault);
            }
            size.map(|size| if other == "linewidth" { Fading::Linewidth(size) } else { Fading::Pure(size) })
        }
    };
    let read = Dephasing { weights: weights?, fading: fading?, place: node.place, size_place: entry.value.place };
    judge(reader, &read, decays, &entry.key)?;
    Some(read)
}

/// Weights by level, or the diagonal of a named operator.
fn read_weights(reader: &mut Reader, node: &Node, operators: &[Operator], used: &mut Vec<String>) -> Option<Weights> {
    let energy_of = reader.need(node, "energy_of", "dephasing", "{up: 1}")?;
    let names = reader.level_names();
    let Some(entries) = energy_of.entries() else {
        let text = reader.text(energy_of, "energy_of", "energy_of: {up: 1}")?.to_string();
        if names.contains(&text) && !operators.iter().any(|operator| operator.name == text) {
            let fault = Fault::Shape {
                what: "energy_of".to_string(),
                expected: "a block of levels and weights, or the name of an operator".to_string(),
                example: format!("energy_of: {{{text}: 1}}"),
            };
            reader.error(energy_of.place, fault);
            return None;
        }
        used.push(text);
        let known: Vec<String> = operators.iter().map(|operator| operator.name.clone()).collect();
        let index = reader.name_among(energy_of, "operator", &known)?;
        return Some(Weights::Operator(index));
    };
    let mut weights = Vec::new();
    let mut good = !entries.is_empty();
    if entries.is_empty() {
        reader.error(energy_of.place, Fault::Open(OpenFault::NoDephasing));
    }
    for entry in entries {
        let level = names.iter().position(|name| *name == entry.key);
        if level.is_none() {
            reader.unknown(entry.place, "level", &entry.key, &names);
        }
        let weight = reader.plain(&entry.value, &format!("the weight of {}", entry.key));
        match level.zip(weight) {
            Some(pair) => weights.push(pair),
            None => good = false,
        }
    }
    good.then_some(Weights::Levels(weights))
}

/// The pair on which a total time was measured: needed beyond two levels.
fn pair_of(reader: &mut Reader, node: &Node, entry: &Entry) -> Option<[usize; 2]> {
    match node.get("of") {
        Some(of) => reader.pair(of, "dephasing / of"),
        None if reader.level_names().len() == 2 => Some([0, 1]),
        None => {
            let names = reader.level_names();
            let example = |k: usize| names.get(k).cloned().unwrap_or_default();
            let why = Some("A total time is that of one pair; with more than two levels it must be named.".to_string());
            let write = format!("of: [{}, {}]      (the pair that was measured)", example(0), example(1));
            let fault = Fault::MissingKey { key: "of".to_string(), section: "dephasing (total_time)".to_string(), write, why };
            reader.error(entry.place, fault);
            None
        }
    }
}

/// What the numbers as written rule out.
fn judge(reader: &mut Reader, read: &Dephasing, decays: &[Decay], key: &str) -> Option<()> {
    let values = reader.tape.as_written();
    let size = values[read.size().register as usize];
    let good = if key == "linewidth" { size >= 0.0 } else { size > 0.0 };
    if !good {
        let unit = if key == "linewidth" { "Hz" } else { "s" };
        reader.error(read.size_place, Fault::NotPositive { what: format!("dephasing / {key}"), value: size, unit: unit.to_string() });
        return None;
    }
    let names = reader.level_names();
    let weights = read.written_weights(names.len(), &values);
    if weights.is_some_and(|weights| names.len() > 1 && weights.iter().all(|weight| *weight == weights[0])) {
        reader.warn(read.place, Fault::Open(OpenFault::NoDephasing));
    }
    if let Fading::Total(_, [a, b]) = read.fading {
        if let Some(fault) = impossible(&names, decays, [a, b], size, &values) {
            reader.error(read.size_place, fault);
            return None;
        }
    }
    Some(())
}

/// Why a total time is impossible beside the lifetimes, if it is and no bath or operator has a part in it.
fn impossible(names: &[String], decays: &[Decay], pair: [usize; 2], total_s: f64, values: &[f64]) -> Option<Fault> {
    let rates = [plain_rate(decays, pair[0], values)?, plain_rate(decays, pair[1], values)?];
    too_long(names, pair, rates, total_s, |level| leaving(decays, level).next().map_or(0, |decay| decay.place.line))
}

/// The fault of a total time above 2 over the sum of both rates; `line` says where a level's decay stands.
pub fn too_long(names: &[String], pair: [usize; 2], rates_per_s: [f64; 2], total_s: f64, line: impl Fn(usize) -> u32) -> Option<Fault> {
    // a sum of no rates is a negative zero
    let limit_s = 2.0 / (rates_per_s[0] + rates_per_s[1]).abs();
    if total_s <= limit_s * (1.0 + 1e-12) {
        return None;
    }
    let lives = pair.iter().zip(rates_per_s).filter(|(_, rate)| *rate > 0.0);
    let lives = lives.map(|(level, rate)| (names[*level].clone(), 1.0 / rate, line(*level))).collect();
    Some(Fault::Open(OpenFault::TooLong { total_s, pair: pair.map(|level| names[level].clone()), lives, limit_s }))
}

/// Reports a key that does not say which decay was measured, with what each reading would mean here.
fn coherence_unsaid(reader: &mut Reader, node: &Node, entry: &Entry, decays: &[Decay]) {
    let text = entry.value.text().unwrap_or("20 us").to_string();
    let names = reader.level_names();
    let pair = match node.get("of") {
        Some(of) => reader.pair(of, "dephasing / of"),
        None if names.len() == 2 => Some([0, 1]),
        // the two lowest in the order written are the pair most often meant
        None => (names.len() > 1).then_some([0, 1]),
    };
    let mut fault = OpenFault::CoherenceUnsaid {
        key: entry.key.clone(),
        text,
        of: pair.filter(|_| names.len() > 2).map(|pair| pair.map(|level| names[level].clone())),
        lifetimes: Vec::new(),
        pure_s: None,
    };
    let total = reader.quantity(&entry.value, &format!("dephasing / {}", entry.key), Dim::TIME);
    if let (Some(total), Some(pair), OpenFault::CoherenceUnsaid { lifetimes, pure_s, .. }) = (total, pair, &mut fault) {
        let values = reader.tape.as_written();
        let rates: Vec<f64> = pair.iter().filter_map(|level| plain_rate(decays, *level, &values)).filter(|rate| *rate > 0.0).collect();
        let left = 1.0 / values[total.register as usize] - 0.5 * rates.iter().sum::<f64>();
        *lifetimes = rates.iter().map(|rate| short_with_unit(1.0 / rate, "s")).collect();
        *pure_s = (left > 0.0).then(|| 1.0 / left);
    }
    reader.error(entry.place, Fault::Open(fault));
}

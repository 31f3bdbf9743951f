//! `decay:` what leaves a level, how fast, and where it goes.

use super::messages::{Fault, OpenFault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::system::Operator;
use super::tree::Node;
use crate::units::{Dim, RATE_PER_LINEWIDTH};

/// How a speed was stated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SpeedWord {
    /// 1/e time of the population, s.
    Lifetime,
    /// Its inverse, per second.
    Rate,
    /// Full width of the line, Hz: rate = 2 pi linewidth.
    Linewidth,
}

/// How fast something decays.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Speed {
    /// The word it was stated in.
    pub word: SpeedWord,
    /// Its size in the unit of the word.
    pub size: Quantity,
}

impl Speed {
    /// The rate per second; `values` are the registers of the tape.
    pub fn rate_per_s(&self, values: &[f64]) -> f64 {
        let size = values[self.size.register as usize];
        match self.word {
            SpeedWord::Lifetime => 1.0 / size,
            SpeedWord::Rate => size,
            SpeedWord::Linewidth => RATE_PER_LINEWIDTH * size,
        }
    }

    /// What is wrong with the size, if anything is: a lifetime above 0, a rate or a linewidth from 0 up.
    pub fn fault(&self, values: &[f64]) -> Option<Fault> {
        let value = values[self.size.register as usize];
        let (what, unit, good) = match self.word {
            SpeedWord::Lifetime => ("decay / lifetime", "s", value > 0.0),
            SpeedWord::Rate => ("decay / rate", "/s", value >= 0.0),
            SpeedWord::Linewidth => ("decay / linewidth", "Hz", value >= 0.0),
        };
        (!good).then(|| Fault::NotPositive { what: what.to_string(), value, unit: unit.to_string() })
    }
}

/// A share, or what the others leave.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Share {
    /// A plain number.
    Number(Quantity),
    /// What is missing to 1.
    Rest,
}

/// Shares by name.
#[derive(Debug, Clone)]
pub struct Shares {
    /// Level (none for outside), its name as written, its share.
    pub parts: Vec<(Option<usize>, String, Share)>,
    /// Where the block stands.
    pub place: Place,
}

impl Shares {
    /// The shares as numbers that add up to 1, or what is wrong; `subject` and `key` are for the message.
    pub fn numbers(&self, subject: Option<&str>, key: &'static str, values: &[f64]) -> Result<Vec<f64>, Fault> {
        let stated: Vec<Option<f64>> = self
            .parts
            .iter()
            .map(|(.., share)| match share {
                Share::Number(number) => Some(values[number.register as usize]),
                Share::Rest => None,
            })
            .collect();
        if let Some(((_, of, _), found)) =
            self.parts.iter().zip(&stated).find(|(_, share)| share.is_some_and(|s| !(-1e-12..=1.0 + 1e-12).contains(&s)))
        {
            return Err(Fault::Open(OpenFault::ShareRange { of: of.clone(), found: found.unwrap_or(f64::NAN) }));
        }
        let sum: f64 = stated.iter().flatten().sum();
        let has_rest = stated.iter().any(Option::is_none);
        if sum > 1.0 + 1e-9 || (!has_rest && sum < 1.0 - 1e-9) {
            let parts = self.parts.iter().zip(&stated).map(|((_, name, _), share)| (name.clone(), share.unwrap_or(0.0))).collect();
            return Err(Fault::Open(OpenFault::Shares { subject: subject.map(str::to_string), key, sum, parts }));
        }
        let rest = (1.0 - sum).max(0.0);
        let scale = if has_rest { 1.0 } else { sum };
        Ok(stated.iter().map(|share| share.map_or(rest, |share| share.max(0.0) / scale)).collect())
    }

    /// Whether a share depends on a register that `is` accepts.
    pub fn any(&self, is: &dyn Fn(u32) -> bool) -> bool {
        self.parts.iter().any(|(.., share)| matches!(share, Share::Number(number) if is(number.register)))
    }
}

/// What an entry of `decay:` describes.
#[derive(Debug, Clone)]
pub enum Leaves {
    /// Population leaves a level.
    Level {
        /// The level.
        from: usize,
        /// Where it goes.
        to: Shares,
    },
    /// A named matrix (index) is the jump operator, as typed.
    Operator(usize),
}

/// One entry of `decay:`.
#[derive(Debug, Clone)]
pub struct Decay {
    /// What happens.
    pub leaves: Leaves,
    /// How fast at zero temperature.
    pub speed: Speed,
    /// Temperature of the bath, K.
    pub temperature: Option<Quantity>,
    /// Where the entry stands.
    pub place: Place,
}

impl Decay {
    /// Whether anything of it goes outside.
    pub fn goes_outside(&self) -> bool {
        matches!(&self.leaves, Leaves::Level { to, .. } if to.parts.iter().any(|(level, ..)| level.is_none()))
    }
}

/// The rate at which a level is left, per second, where no bath and no operator has a part in it.
pub fn plain_rate(decays: &[Decay], level: usize, values: &[f64]) -> Option<f64> {
    if decays.iter().any(|decay| decay.temperature.is_some() || matches!(decay.leaves, Leaves::Operator(_))) {
        return None;
    }
    Some(leaving(decays, level).map(|decay| decay.speed.rate_per_s(values)).sum())
}

/// The entries under which a level is left.
pub fn leaving(decays: &[Decay], level: usize) -> impl Iterator<Item = &Decay> {
    decays.iter().filter(move |decay| matches!(&decay.leaves, Leaves::Level { from, .. } if *from == level))
}

const KEYS: [&str; 7] = ["from", "to", "operator", "lifetime", "rate", "linewidth", "temperature"];
const HINTS: [(&str, &str); 6] = [
    ("T1", "The 1/e time of a population is called lifetime."),
    ("time", "The 1/e time of a population is called lifetime."),
    ("gamma", "Say which it is: rate (1/lifetime, in /s) or linewidth (full width in Hz, rate over 2 pi)."),
    ("width", "The full width of the line in Hz is called linewidth."),
    ("T2", "Decay of coherence alone belongs under dephasing, as pure_time or total_time."),
    ("quanta", "Write the temperature of the bath, or one entry each way with its own rate."),
];

/// Reads `decay:`.
pub fn read_decays(reader: &mut Reader, node: &Node, operators: &[Operator], used: &mut Vec<String>) -> Option<Vec<Decay>> {
    if node.is_empty() {
        return Some(Vec::new());
    }
    let items = reader.list(node, "decay", "decay: [{from: up, to: down, lifetime: 30 us}]")?;
    let found: Vec<Option<Decay>> = items.iter().map(|item| read_decay(reader, item, operators, used)).collect();
    found.into_iter().collect()
}

fn read_decay(reader: &mut Reader, node: &Node, operators: &[Operator], used: &mut Vec<String>) -> Option<Decay> {
    reader.fields(node, "decay", &KEYS, &HINTS)?;
    let hint = Some("from: a level that is left; or operator: a named matrix that jumps.");
    let leaves = match reader.one_of(node, &["from", "operator"], "decay", hint) {
        Some(entry) if entry.key == "operator" => {
            let names: Vec<String> = operators.iter().map(|operator| operator.name.clone()).collect();
            used.extend(entry.value.text().map(str::to_string));
            if let Some(to) = node.get("to") {
                let lines = vec![entry.place.line, to.place.line];
                let fault = Fault::OneOf { found: vec!["operator".into(), "to".into()], lines, section: "decay".to_string() };
                reader.error(to.place, fault);
            }
            reader.name_among(&entry.value, "operator", &names).map(Leaves::Operator)
        }
        Some(entry) => {
            let from = reader.level(&entry.value);
            let to = reader.need(node, "to", "decay", "down").and_then(|to| read_targets(reader, to, from));
            from.zip(to).map(|(from, to)| Leaves::Level { from, to })
        }
        None => None,
    };
    let speed = read_speed(reader, node);
    let temperature = match node.get("temperature") {
        Some(temperature) => Some(read_temperature(reader, temperature, "decay / temperature")?),
        None => None,
    };
    Some(Decay { leaves: leaves?, speed: speed?, temperature, place: node.place })
}

fn read_speed(reader: &mut Reader, node: &Node) -> Option<Speed> {
    let hint = Some("lifetime: 1/e time of the population; rate: its inverse; linewidth: full width in Hz, rate over 2 pi.");
    let entry = reader.one_of(node, &["lifetime", "rate", "linewidth"], "decay", hint)?;
    let (word, dim) = match entry.key.as_str() {
        "lifetime" => (SpeedWord::Lifetime, Dim::TIME),
        "rate" => (SpeedWord::Rate, Dim::RATE),
        _ => (SpeedWord::Linewidth, Dim::FREQUENCY),
    };
    let size = reader.quantity(&entry.value, &format!("decay / {}", entry.key), dim)?;
    let speed = Speed { word, size };
    if let Some(fault) = speed.fault(&reader.tape.as_written()) {
        reader.error(entry.value.place, fault);
        return None;
    }
    Some(speed)
}

/// A temperature from 0 up.
pub fn read_temperature(reader: &mut Reader, node: &Node, what: &str) -> Option<Quantity> {
    let temperature = reader.quantity(node, what, Dim::TEMPERATURE)?;
    let found = reader.value_now(temperature.register);
    if found < 0.0 {
        reader.error(node.place, Fault::Open(OpenFault::BelowZeroKelvin { found }));
        return None;
    }
    Some(temperature)
}

/// `to:` a name, or shares.
fn read_targets(reader: &mut Reader, node: &Node, from: Option<usize>) -> Option<Shares> {
    if node.entries().is_none() {
        let text = reader.text(node, "decay / to", "down")?.to_string();
        let level = target(reader, node.place, &text, from)?;
        let one = Quantity { register: reader.constant(1.0, node.place), place: node.place };
        return Some(Shares { parts: vec![(level, text, Share::Number(one))], place: node.place });
    }
    let shares = read_shares(reader, node, "to", |reader, place, text| target(reader, place, text, from))?;
    let values = reader.tape.as_written();
    let name = from.map(|from| reader.level_names()[from].clone());
    if let Err(fault) = shares.numbers(Some(&name.unwrap_or_default()), "to", &values) {
        reader.error(node.place, fault);
        return None;
    }
    Some(shares)
}

/// A place that population can go to: a level, or outside.
fn target(reader: &mut Reader, place: Place, text: &str, from: Option<usize>) -> Option<Option<usize>> {
    let mut names = reader.level_names();
    if let Some(level) = names.iter().position(|name| name == text) {
        if from == Some(level) {
            reader.error(place, Fault::Open(OpenFault::IntoItself { level: text.to_string() }));
            return None;
        }
        return Some(Some(level));
    }
    if text == "outside" {
        return Some(None);
    }
    names.push("outside".to_string());
    reader.unknown(place, "level", text, &names);
    None
}

/// A block of names with their shares; `find` judges the names.
pub fn read_shares(
    reader: &mut Reader,
    node: &Node,
    key: &'static str,
    mut find: impl FnMut(&mut Reader, Place, &str) -> Option<Option<usize>>,
) -> Option<Shares> {
    let Some(entries) = node.entries().filter(|entries| !entries.is_empty()) else {
        let fault = Fault::Shape {
            what: key.to_string(),
            expected: "a block of names and shares".to_string(),
            example: format!("{key}: {{near: 0.6, far: 0.4}}"),
        };
        reader.error(node.place, fault);
        return None;
    };
    let mut parts: Vec<(Option<usize>, String, Share)> = Vec::new();
    let mut good = true;
    for entry in entries {
        let level = find(reader, entry.place, &entry.key);
        let share = if entry.value.text() == Some("rest") {
            if parts.iter().any(|(.., share)| matches!(share, Share::Rest)) {
                reader.error(entry.value.place, Fault::Open(OpenFault::TwoRests { key }));
                good = false;
            }
            Some(Share::Rest)
        } else {
            reader.plain(&entry.value, &format!("the share of {}", entry.key)).map(Share::Number)
        };
        match level.zip(share) {
            Some((level, share)) => parts.push((level, entry.key.clone(), share)),
            None => good = false,
        }
    }
    good.then_some(Shares { parts, place: node.place })
}

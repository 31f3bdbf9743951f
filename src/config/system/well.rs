//! `well:` one particle in one dimension between walls or on a ring.

use super::{Physics, System};
use crate::config::messages::Fault;
use crate::config::place::Place;
use crate::config::reader::{Quantity, Reader};
use crate::config::table;
use crate::config::tape::{Formula, Register};
use crate::config::tree::Node;
use crate::units::Dim;

/// A layer.
#[derive(Debug, Clone)]
pub struct Layer {
    /// m.
    pub length: Quantity,
    /// Hz.
    pub potential: Quantity,
    /// kg; the mass of the well where none was written.
    pub mass: Option<Quantity>,
}

/// The potential as written.
#[derive(Debug, Clone)]
pub enum Potential {
    /// From left to right, the first from x = 0.
    Layers(Vec<Layer>),
    /// A formula of x in Hz, between two ends in m.
    Formula {
        /// Of x.
        formula: Formula,
        /// Left end.
        from: Quantity,
        /// Right end.
        to: Quantity,
    },
    /// Straight lines between the rows of a file.
    Table {
        /// m, ascending.
        x_m: Vec<f64>,
        /// Hz.
        energy_hz: Vec<f64>,
    },
}

/// A field and the charge it acts on: energy -charge e F x.
#[derive(Debug, Clone, Copy)]
pub struct Tilt {
    /// V/m.
    pub field: Quantity,
    /// In units of the elementary charge.
    pub charge: Quantity,
}

/// A well.
#[derive(Debug, Clone)]
pub struct Well {
    /// Its potential.
    pub potential: Potential,
    /// Mass in kg, a formula of x where the potential is one; none where each layer has its own.
    pub mass: Option<Formula>,
    /// A field.
    pub tilt: Option<Tilt>,
    /// Whether its ends are joined; else walls stand there.
    pub ring: bool,
    /// Levels kept.
    pub keep: usize,
    /// Where it stands.
    pub place: Place,
}

impl Well {
    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        match &self.potential {
            Potential::Layers(layers) => {
                for layer in layers {
                    found.extend([layer.length.register, layer.potential.register]);
                    found.extend(layer.mass.map(|mass| mass.register));
                }
            }
            Potential::Formula { formula, from, to } => {
                found.extend([from.register, to.register]);
                found.extend(formula.registers());
            }
            Potential::Table { .. } => {}
        }
        found.extend(self.mass.iter().flat_map(Formula::registers));
        if let Some(tilt) = self.tilt {
            found.extend([tilt.field.register, tilt.charge.register]);
        }
    }
}

/// Names of the operators of a well; a ring has no position, which would jump.
pub fn operators(ring: bool) -> &'static [&'static str] {
    if ring {
        &["momentum", "kinetic"]
    } else {
        &["position", "momentum", "kinetic"]
    }
}

const KEYS: [&str; 10] = ["mass", "layers", "potential", "from", "to", "file", "field", "charge", "ends", "keep"];
const HINTS: [(&str, &str); 6] = [
    ("levels", "The number of levels is keep."),
    ("width", "The length stands in each layer, or between from and to."),
    ("depth", "The potential of each layer stands in it, or as a formula of x under potential."),
    ("table", "A table of the potential is named by file."),
    ("boundary", "What stands at both ends is said by ends: closed or ring."),
    ("walls", "Walls at both ends are ends: closed."),
];

/// Reads `well:`.
pub fn read_well(reader: &mut Reader, node: &Node, place: Place, section: &str) -> Option<System> {
    reader.fields(node, section, &KEYS, &HINTS)?;
    let potential = read_potential(reader, node, section);
    let layered = matches!(&potential, Some(Potential::Layers(layers)) if layers.iter().all(|layer| layer.mass.is_some()));
    let in_layers = node.get("layers").and_then(Node::items).is_some_and(|items| items.iter().all(|item| item.get("mass").is_some()));
    let mass = match node.get("mass") {
        Some(mass) => Some(reader.formula_in_as(mass, &format!("{section} / mass"), ("x", Dim::LENGTH), Dim::MASS)),
        None if layered || in_layers => None,
        None => {
            reader.need(node, "mass", section, "0.067 electron_mass");
            Some(None)
        }
    };
    let tilt = read_tilt(reader, node, section);
    let ends = match node.get("ends") {
        Some(ends) => reader.word(ends, &format!("{section} / ends"), &[("closed", false), ("ring", true)]),
        None => {
            let why = Some("closed: walls stand at both ends; ring: the right end is the left one again.".to_string());
            let fault = Fault::MissingKey { key: "ends".to_string(), section: section.to_string(), write: "ends: closed".to_string(), why };
            reader.error(node.place, fault);
            None
        }
    };
    if let (Some(true), Some(field)) = (ends, node.get("field")) {
        reader.error(field.place, Fault::FieldOnRing);
        return None;
    }
    let keep = reader.need(node, "keep", section, "6");
    let keep = keep.and_then(|keep| reader.whole(keep, &format!("{section} / keep"), 1.0).map(|count| (count, keep.place)));
    let (keep, keep_place) = keep?;
    if super::too_many(reader, keep_place, keep) {
        return None;
    }
    let names: Vec<String> = (1..=keep as usize).map(|n| n.to_string()).collect();
    reader.define_built_levels(names.clone());
    let mass = mass.map_or(Some(None), |mass| mass.map(Some))?;
    let well = Well { potential: potential?, mass, tilt: tilt?, ring: ends?, keep: keep as usize, place };
    Some(System { place: node.place, kind: "well", names, entries: Vec::new(), physics: Physics::Well(Box::new(well)) })
}

fn read_potential(reader: &mut Reader, node: &Node, section: &str) -> Option<Potential> {
    let hint = "layers from left to right, potential as a formula of x, or file: a table x_nm,potential_meV.";
    let entry = reader.one_of(node, &["layers", "potential", "file"], section, Some(hint))?;
    if entry.key != "potential" {
        for key in ["from", "to"] {
            if let Some(end) = node.get(key) {
                let fault = Fault::OneOf {
                    found: vec![entry.key.clone(), key.to_string()],
                    lines: vec![entry.place.line, end.place.line],
                    section: section.to_string(),
                };
                reader.error(end.place, fault);
            }
        }
    }
    match entry.key.as_str() {
        "layers" => read_layers(reader, &entry.value, section),
        "file" => table::read_table(reader, &entry.value, ("x", Dim::LENGTH), ("potential", Dim::FREQUENCY))
            .map(|(x_m, energy_hz)| Potential::Table { x_m, energy_hz }),
        _ => {
            let what = format!("{section} / potential");
            let formula = reader.formula_in_as(&entry.value, &what, ("x", Dim::LENGTH), Dim::FREQUENCY);
            let mut end = |key: &str, example: &str| {
                let value = reader.need(node, key, section, example)?;
                reader.quantity(value, &format!("{section} / {key}"), Dim::LENGTH)
            };
            let (from, to) = (end("from", "-20 nm"), end("to", "20 nm"));
            Some(Potential::Formula { formula: formula?, from: from?, to: to? })
        }
    }
}

fn read_layers(reader: &mut Reader, node: &Node, section: &str) -> Option<Potential> {
    let example = "layers: [{length: 8 nm, potential: 0 meV}]";
    let items = reader.list(node, &format!("{section} / layers"), example)?;
    if items.is_empty() {
        let expected = "at least one layer".to_string();
        reader.error(node.place, Fault::Shape { what: "layers".to_string(), expected, example: example.to_string() });
        return None;
    }
    let layers: Vec<Option<Layer>> = items
        .iter()
        .map(|item| {
            let section = format!("{section} / layers");
            reader.fields(
                item,
                &section,
                &["length", "potential", "mass"],
                &[("width", "Written length."), ("thickness", "Written length.")],
            )?;
            let length = reader.need(item, "length", &section, "8 nm");
            let length = length.and_then(|value| reader.quantity(value, &format!("{section} / length"), Dim::LENGTH));
            let potential = reader.need(item, "potential", &section, "240 meV");
            let potential = potential.and_then(|value| reader.energy(value, &format!("{section} / potential")));
            let mass = item.get("mass").map(|mass| reader.quantity(mass, &format!("{section} / mass"), Dim::MASS));
            Some(Layer { length: length?, potential: potential?, mass: mass.map_or(Some(None), |mass| mass.map(Some))? })
        })
        .collect();
    layers.into_iter().collect::<Option<_>>().map(Potential::Layers)
}

/// `field` and `charge`, which belong together; the outer option is for what could not be read.
fn read_tilt(reader: &mut Reader, node: &Node, section: &str) -> Option<Option<Tilt>> {
    match (node.get("field"), node.get("charge")) {
        (None, None) => Some(None),
        (None, Some(charge)) => {
            let why = Some("A charge alone changes nothing.".to_string());
            let fault =
                Fault::MissingKey { key: "field".to_string(), section: section.to_string(), write: "field: 20 kV/cm".to_string(), why };
            reader.error(charge.place, fault);
            None
        }
        (Some(field), charge) => {
            let quantity = reader.quantity(field, &format!("{section} / field"), Dim::ELECTRIC_FIELD);
            let Some(charge) = charge else {
                let why = Some("In units of the elementary charge; -1 for an electron, +1 for a hole. Energy -charge e F x.".to_string());
                let fault =
                    Fault::MissingKey { key: "charge".to_string(), section: section.to_string(), write: "charge: -1".to_string(), why };
                reader.error(field.place, fault);
                return None;
            };
            let charge = reader.plain(charge, &format!("{section} / charge"));
            Some(Some(Tilt { field: quantity?, charge: charge? }))
        }
    }
}

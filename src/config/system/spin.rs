//! `spin:` a moment in a field, with the splittings it has without one.

use super::{Physics, System, MOST_LEVELS};
use crate::config::messages::{short, Fault};
use crate::config::place::Place;
use crate::config::reader::{Quantity, Reader};
use crate::config::tape::Register;
use crate::config::tree::Node;
use crate::config::vector::{read_field, read_vector, Field};
use crate::units::Dim;

/// Magnetic moment of a spin.
#[derive(Debug, Clone)]
pub enum Moment {
    /// g factors along x, y, z, in Bohr or nuclear magnetons: energy g mu_B B . S, or -g mu_N B . I.
    Factor {
        /// Along x, y, z.
        g: [Quantity; 3],
        /// In nuclear magnetons.
        nuclear: bool,
    },
    /// Energy -h gyromagnetic B . I, Hz/T.
    Gyromagnetic(Quantity),
}

/// `quadrupole:`.
#[derive(Debug, Clone)]
pub enum Quadrupole {
    /// coupling/(4 I (2I - 1)) (3 Iz^2 - I(I+1) + asymmetry (Ix^2 - Iy^2)).
    Gradient {
        /// Hz.
        coupling: Quantity,
        /// No dimension.
        asymmetry: Quantity,
    },
    /// D (Iz^2 - I(I+1)/3) + E (Ix^2 - Iy^2), Hz.
    Splitting([Quantity; 2]),
}

/// A spin.
#[derive(Debug, Clone)]
pub struct Spin {
    /// Twice its size.
    pub twice: u32,
    /// Its moment.
    pub moment: Moment,
    /// Its own field.
    pub field: Option<Field>,
    /// Axial and rhombic splitting without a field, Hz.
    pub zero_field: Option<[Quantity; 2]>,
    /// Quadrupole splitting.
    pub quadrupole: Option<Quadrupole>,
    /// Where it stands.
    pub place: Place,
}

impl Spin {
    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        match &self.moment {
            Moment::Factor { g, .. } => found.extend(g.iter().map(|part| part.register)),
            Moment::Gyromagnetic(size) => found.push(size.register),
        }
        if let Some(field) = &self.field {
            field.registers(found);
        }
        for part in self.zero_field.iter().flatten() {
            found.push(part.register);
        }
        match &self.quadrupole {
            Some(Quadrupole::Gradient { coupling, asymmetry }) => found.extend([coupling.register, asymmetry.register]),
            Some(Quadrupole::Splitting(parts)) => found.extend(parts.map(|part| part.register)),
            None => {}
        }
    }
}

/// What m is called, from twice its value: `+1/2`, `0`, `-1`.
pub fn m_name(twice: i32) -> String {
    let sign = match twice.signum() {
        1 => "+",
        -1 => "-",
        _ => "",
    };
    format!("{sign}{}", j_name(twice.unsigned_abs()))
}

/// What an angular momentum is called, from twice its size: `1/2`, `1`, `3/2`.
pub fn j_name(twice: u32) -> String {
    if twice.is_multiple_of(2) {
        (twice / 2).to_string()
    } else {
        format!("{twice}/2")
    }
}

/// Names of the states of a spin, m from highest to lowest.
pub fn state_names(twice: u32) -> Vec<String> {
    (0..=twice).map(|k| m_name(twice as i32 - 2 * k as i32)).collect()
}

/// An angular momentum: 0 (where allowed), 1/2, 1, 3/2 ..; gives twice its value.
pub fn read_size(reader: &mut Reader, node: &Node, what: &str, from: u32) -> Option<u32> {
    let size = reader.plain_value(node, what)?;
    let twice = (2.0 * size).round();
    if !(size.is_finite() && (2.0 * size - twice).abs() < 1e-12 && twice >= f64::from(from)) {
        let fault = Fault::OutOfRange { what: what.to_string(), found: short(size), wanted: "1/2, 1, 3/2, 2 ..".to_string() };
        reader.error(node.place, fault);
        return None;
    }
    if twice >= MOST_LEVELS as f64 {
        super::too_many(reader, node.place, twice + 1.0);
        return None;
    }
    Some(twice as u32)
}

/// Axial and rhombic part of a splitting.
fn read_splitting(reader: &mut Reader, node: &Node, what: &str) -> Option<[Quantity; 2]> {
    reader.fields(node, what, &["axial", "rhombic"], &[("D", "Written axial."), ("E", "Written rhombic.")])?;
    let mut part = |key: &str| {
        let value = reader.need(node, key, what, "0 MHz")?;
        reader.energy(value, &format!("{what} / {key}"))
    };
    let (axial, rhombic) = (part("axial"), part("rhombic"));
    Some([axial?, rhombic?])
}

fn read_moment(reader: &mut Reader, node: &Node, section: &str) -> Option<Moment> {
    let hint = "g counts in magnetons, gyromagnetic in Hz per tesla; each gives the moment alone.";
    let entry = reader.one_of(node, &["g", "gyromagnetic"], section, Some(hint))?;
    let what = format!("{section} / {}", entry.key);
    let magneton = node.get("magneton");
    if entry.key == "gyromagnetic" {
        if let Some(magneton) = magneton {
            let fault = Fault::OneOf {
                found: vec!["gyromagnetic".to_string(), "magneton".to_string()],
                lines: vec![entry.place.line, magneton.place.line],
                section: section.to_string(),
            };
            reader.error(magneton.place, fault);
        }
        return reader.quantity(&entry.value, &what, Dim::FREQUENCY.over(Dim::MAGNETIC_FIELD)).map(Moment::Gyromagnetic);
    }
    let nuclear = match magneton {
        Some(word) => reader.word(word, &format!("{section} / magneton"), &[("Bohr", false), ("nuclear", true)]),
        None => Some(false),
    };
    let g = match entry.value.items() {
        Some(_) => read_vector(reader, &entry.value, &what, Dim::NONE),
        None => reader.plain(&entry.value, &what).map(|g| [g; 3]),
    };
    Some(Moment::Factor { g: g?, nuclear: nuclear? })
}

const HINTS: [(&str, &str); 5] = [
    ("S", "Written size."),
    ("spin", "The size of the spin stands under size."),
    ("levels", "The number of states follows from size."),
    ("D", "Written zero_field: {axial: D, rhombic: E}."),
    ("gamma", "Written gyromagnetic, with its sign, in Hz per tesla."),
];

/// Reads `spin:`.
pub fn read_spin(reader: &mut Reader, node: &Node, place: Place, section: &str) -> Option<System> {
    let known = ["size", "g", "magneton", "gyromagnetic", "field", "zero_field", "quadrupole"];
    reader.fields(node, section, &known, &HINTS)?;
    let size = reader.need(node, "size", section, "1/2");
    let twice = size.and_then(|size| read_size(reader, size, &format!("{section} / size"), 1));
    let moment = read_moment(reader, node, section);
    let field = node.get("field").map(|field| read_field(reader, field, &format!("{section} / field")));
    let zero_field = node.get("zero_field").map(|split| read_splitting(reader, split, &format!("{section} / zero_field")));
    let quadrupole = node.get("quadrupole").map(|node| read_quadrupole(reader, node, &format!("{section} / quadrupole"), twice));
    let twice = twice?;
    let names = state_names(twice);
    reader.define_built_levels(names.clone());
    let field = field.map_or(Some(None), |field| field.map(Some))?;
    let zero_field = zero_field.map_or(Some(None), |split| split.map(Some))?;
    let quadrupole = quadrupole.map_or(Some(None), |split| split.map(Some))?;
    let spin = Spin { twice, moment: moment?, field, zero_field, quadrupole, place };
    Some(System { place: node.place, kind: "spin", names, entries: Vec::new(), physics: Physics::Spin(spin) })
}

fn read_quadrupole(reader: &mut Reader, node: &Node, section: &str, twice: Option<u32>) -> Option<Quadrupole> {
    if node.get("coupling").is_none() && node.get("asymmetry").is_none() {
        return read_splitting(reader, node, section).map(Quadrupole::Splitting);
    }
    reader.fields(node, section, &["coupling", "asymmetry"], &[])?;
    let coupling =
        reader.need(node, "coupling", section, "2.1 MHz").and_then(|value| reader.energy(value, &format!("{section} / coupling")));
    let asymmetry = reader.need(node, "asymmetry", section, "0").and_then(|value| reader.plain(value, &format!("{section} / asymmetry")));
    if twice == Some(1) {
        // I(2I - 1) is 0: a spin 1/2 has no quadrupole moment
        let wanted = "a spin of at least 1; a spin 1/2 has no quadrupole moment".to_string();
        reader.error(node.place, Fault::OutOfRange { what: section.to_string(), found: "size 1/2".to_string(), wanted });
        return None;
    }
    Some(Quadrupole::Gradient { coupling: coupling?, asymmetry: asymmetry? })
}

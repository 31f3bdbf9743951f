//! `atom:` one or two manifolds of hyperfine levels, in a field.

use super::spin::{j_name, m_name, read_size};
use super::{Physics, System};
use crate::config::messages::{short, Fault};
use crate::config::place::Place;
use crate::config::reader::{Quantity, Reader};
use crate::config::tape::Register;
use crate::config::tree::Node;
use crate::config::vector::{read_field, Field};

/// The levels of one electronic state.
#[derive(Debug, Clone)]
pub struct Manifold {
    /// Twice the nuclear spin I.
    pub twice_i: u32,
    /// Twice the electronic angular momentum J.
    pub twice_j: u32,
    /// g factor of J.
    pub g_electron: Quantity,
    /// g factor of I, in Bohr magnetons, with the sign of H = magneton B . (g_electron J + g_nucleus I).
    pub g_nucleus: Quantity,
    /// A of A I . J, Hz.
    pub dipole: Quantity,
    /// B of the quadrupole term, Hz; none where I or J is 1/2 or less.
    pub quadrupole: Option<Quantity>,
}

/// An atom.
#[derive(Debug, Clone)]
pub struct Atom {
    /// The lower manifold.
    pub lower: Manifold,
    /// The upper one, and the line between their centres, Hz.
    pub upper: Option<(Manifold, Quantity)>,
    /// Its own field.
    pub field: Option<Field>,
    /// Where it stands.
    pub place: Place,
}

impl Manifold {
    fn registers(&self, found: &mut Vec<Register>) {
        found.extend([self.g_electron, self.g_nucleus, self.dipole].map(|quantity| quantity.register));
        found.extend(self.quadrupole.map(|quantity| quantity.register));
    }

    /// Doubled F and m of its states without a field: F from highest to lowest, in each m from highest to lowest.
    pub fn states(&self) -> Vec<[i32; 2]> {
        let (i, j) = (self.twice_i as i32, self.twice_j as i32);
        let sizes = ((i - j).abs()..=i + j).rev().step_by(2);
        sizes.flat_map(|f| (-f..=f).rev().step_by(2).map(move |m| [f, m])).collect()
    }

    fn names(&self, before: &str) -> Vec<String> {
        self.states().into_iter().map(|[f, m]| format!("{before}F={},m={}", j_name(f as u32), m_name(m))).collect()
    }
}

impl Atom {
    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        self.lower.registers(found);
        if let Some((upper, line)) = &self.upper {
            upper.registers(found);
            found.push(line.register);
        }
        if let Some(field) = &self.field {
            field.registers(found);
        }
    }
}

/// Reads `atom:`.
pub fn read_atom(reader: &mut Reader, node: &Node, place: Place, section: &str) -> Option<System> {
    reader.fields(node, section, &["lower", "upper", "line", "field"], &[])?;
    let example = "{nuclear_spin: 3/2, electron_total: 1/2, ..}";
    let lower = reader.need(node, "lower", section, example).and_then(|node| read_manifold(reader, node, &format!("{section} / lower")));
    let upper = node.get("upper").map(|upper| (read_manifold(reader, upper, &format!("{section} / upper")), upper.place));
    let line = match (&upper, node.get("line")) {
        (Some(_), _) => reader.need(node, "line", section, "384.2 THz").map(|line| reader.energy(line, &format!("{section} / line"))),
        (None, Some(line)) => {
            let expected = "between two manifolds; it needs upper".to_string();
            reader.error(line.place, Fault::Shape { what: "line".to_string(), expected, example: format!("upper: {example}") });
            None
        }
        (None, None) => None,
    };
    let field = node.get("field").map(|field| read_field(reader, field, &format!("{section} / field")));
    let lower = lower?;
    let upper = match upper {
        Some((upper, at)) => Some((upper?, at)),
        None => None,
    };
    if let Some((upper, at)) = &upper {
        if upper.twice_i != lower.twice_i {
            let wanted = format!("{}, that of the lower manifold: both belong to one nucleus", j_name(lower.twice_i));
            let fault = Fault::OutOfRange { what: "nuclear_spin of the upper manifold".to_string(), found: j_name(upper.twice_i), wanted };
            reader.error(*at, fault);
            return None;
        }
    }
    let names: Vec<String> = match &upper {
        None => lower.names(""),
        Some((upper, _)) => lower.names("lower ").into_iter().chain(upper.names("upper ")).collect(),
    };
    if super::too_many(reader, place, names.len() as f64) {
        return None;
    }
    reader.define_built_levels(names.clone());
    let field = field.map_or(Some(None), |field| field.map(Some))?;
    let upper = match (upper, line) {
        (Some((upper, _)), Some(line)) => Some((upper, line?)),
        (Some(_), None) => return None,
        (None, _) => None,
    };
    let atom = Atom { lower, upper, field, place };
    Some(System { physics: Physics::Atom(Box::new(atom)), ..System::typed(node.place, "atom", names, Vec::new()) })
}

const HINTS: [(&str, &str); 6] = [
    ("I", "Written nuclear_spin."),
    ("J", "Written electron_total."),
    ("A", "Written dipole_constant."),
    ("B", "Written quadrupole_constant."),
    ("g_J", "Written g_electron."),
    ("g_I", "Written g_nucleus: in Bohr magnetons, negative for a positive nuclear moment."),
];

fn read_manifold(reader: &mut Reader, node: &Node, section: &str) -> Option<Manifold> {
    let known = ["nuclear_spin", "electron_total", "g_electron", "g_nucleus", "dipole_constant", "quadrupole_constant"];
    reader.fields(node, section, &known, &HINTS)?;
    let mut size = |key: &str, example: &str| {
        let value = reader.need(node, key, section, example)?;
        read_size(reader, value, &format!("{section} / {key}"), 0)
    };
    let (twice_i, twice_j) = (size("nuclear_spin", "3/2"), size("electron_total", "1/2"));
    let mut factor = |key: &str, example: &str| {
        let value = reader.need(node, key, section, example)?;
        reader.plain(value, &format!("{section} / {key}"))
    };
    let (g_electron, g_nucleus) = (factor("g_electron", "2.0023"), factor("g_nucleus", "-0.001"));
    let dipole = reader.need(node, "dipole_constant", section, "3.4 GHz");
    let dipole = dipole.and_then(|value| reader.energy(value, &format!("{section} / dipole_constant")));
    let (twice_i, twice_j) = (twice_i?, twice_j?);
    let has_quadrupole = twice_i > 1 && twice_j > 1;
    let quadrupole = match (node.get("quadrupole_constant"), has_quadrupole) {
        (Some(value), true) => Some(reader.energy(value, &format!("{section} / quadrupole_constant"))?),
        (Some(value), false) => {
            let quantity = reader.energy(value, &format!("{section} / quadrupole_constant"))?;
            let hz = reader.value_now(quantity.register);
            if hz != 0.0 {
                let what = "quadrupole_constant of a manifold with I or J below 1".to_string();
                reader.error(
                    value.place,
                    Fault::OutOfRange { what, found: short(hz), wanted: "left out: there is no such energy".to_string() },
                );
                return None;
            }
            None
        }
        (None, true) => {
            let why = Some("With I and J of at least 1 the nucleus has a quadrupole energy; 0 MHz says that it is not known.".to_string());
            let write = "quadrupole_constant: 12.5 MHz".to_string();
            reader
                .error(node.place, Fault::MissingKey { key: "quadrupole_constant".to_string(), section: section.to_string(), write, why });
            return None;
        }
        (None, false) => None,
    };
    Some(Manifold { twice_i, twice_j, g_electron: g_electron?, g_nucleus: g_nucleus?, dipole: dipole?, quadrupole })
}

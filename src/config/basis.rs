//! `basis:` the states in which everything after it is written: those as built, the eigenstates, or expansions.

use super::messages::Fault;
use super::place::Place;
use super::reader::{ComplexQuantity, Reader};
use super::system::functions::{Orthogonalise, ORTHOGONALISE};
use super::system::System;
use super::tape::Register;
use super::tree::Node;

/// The working basis as written.
#[derive(Debug, Clone, Default)]
pub enum Basis {
    /// The states as built.
    #[default]
    AsBuilt,
    /// The eigenstates of the static Hamiltonian.
    Eigenstates {
        /// Named in ascending order; else each by the state it overlaps most.
        by_energy: bool,
        /// Where it stands.
        place: Place,
    },
    /// Expansions in the states as built.
    Expansions {
        /// The new states, in the order written.
        states: Vec<NewState>,
        /// How they are made orthonormal, if said.
        orthogonalise: Option<Orthogonalise>,
        /// Where the section stands.
        place: Place,
    },
}

/// A state of the working basis.
#[derive(Debug, Clone)]
pub struct NewState {
    /// Its name.
    pub name: String,
    /// Where the name stands.
    pub place: Place,
    /// Index of each old state and its amplitude.
    pub amplitudes: Vec<(usize, ComplexQuantity)>,
}

impl Basis {
    /// The registers it is made of.
    pub fn registers(&self) -> Vec<Register> {
        let Basis::Expansions { states, .. } = self else {
            return Vec::new();
        };
        let values = states.iter().flat_map(|state| state.amplitudes.iter().map(|(_, value)| *value));
        values.flat_map(|value| [Some(value.re), value.im]).flatten().collect()
    }
}

/// `name_states_by:` of a system: true for ascending order.
pub fn read_naming(reader: &mut Reader, system: &Node) -> Option<(bool, Place)> {
    let node = system.get("name_states_by")?;
    let words = [("largest overlap", false), ("energy", true)];
    Some((reader.word(node, "system / name_states_by", &words)?, node.place))
}

/// Reads `basis:` and gives the names of the working basis, which the reader then knows.
pub fn read_basis(reader: &mut Reader, node: Option<&Node>, system_node: &Node, system: &System) -> Option<(Basis, Vec<String>)> {
    let naming = read_naming(reader, system_node);
    let Some(node) = node else {
        if let Some((_, place)) = naming {
            reader.error(place, Fault::NamingWithoutBasis);
        }
        return Some((Basis::AsBuilt, system.names.clone()));
    };
    reader.as_built = false;
    if node.entries().is_none() {
        reader.word(node, "basis", &[("eigenstates", ())])?;
        reader.define_built_levels(system.names.clone());
        if naming.is_none() {
            reader.default("system.name_states_by", "largest overlap");
        }
        let by_energy = naming.is_some_and(|(by_energy, _)| by_energy);
        return Some((Basis::Eigenstates { by_energy, place: node.place }, system.names.clone()));
    }
    let (block, orthogonalise) = match node.get("names").filter(|names| names.entries().is_some()) {
        Some(names) if node.get("orthogonalise").is_some() => {
            reader.fields(node, "basis", &["names", "orthogonalise"], &[])?;
            let word = node.get("orthogonalise").and_then(|word| reader.word(word, "basis / orthogonalise", &ORTHOGONALISE))?;
            (names, Some(word))
        }
        _ => (node, None),
    };
    let entries = block.entries().unwrap_or_default();
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    if entries.len() > system.names.len() {
        let fault = Fault::MoreStatesThanBuilt { found: entries.len(), built: system.names.len() };
        reader.error(block.place, fault);
        return None;
    }
    super::system::warn_of_case(reader, "level", &names, block.place);
    let states: Vec<Option<NewState>> = entries
        .iter()
        .map(|entry| {
            let amplitudes = read_amplitudes(reader, &entry.value, &entry.key, &system.names);
            Some(NewState { name: entry.key.clone(), place: entry.place, amplitudes: amplitudes? })
        })
        .collect();
    reader.define_built_levels(names.clone());
    let states: Vec<NewState> = states.into_iter().collect::<Option<_>>()?;
    if let Some((place, fault)) = judge(&states, orthogonalise, &reader.tape.as_written()) {
        reader.error(place, fault);
        return None;
    }
    Some((Basis::Expansions { states, orthogonalise, place: node.place }, names))
}

fn read_amplitudes(reader: &mut Reader, node: &Node, name: &str, old: &[String]) -> Option<Vec<(usize, ComplexQuantity)>> {
    let Some(entries) = node.entries().filter(|entries| !entries.is_empty()) else {
        let expected = "a block of old state: amplitude".to_string();
        let example = "even: {left: sqrt(1/2), right: sqrt(1/2)}".to_string();
        reader.error(node.place, Fault::Shape { what: format!("basis / {name}"), expected, example });
        return None;
    };
    let read: Vec<Option<(usize, ComplexQuantity)>> = entries
        .iter()
        .map(|entry| {
            let value = reader.plain_entry(&entry.value, &format!("basis / {name} / {}", entry.key));
            let index = old.iter().position(|known| *known == entry.key);
            if index.is_none() {
                reader.unknown(entry.place, "level", &entry.key, old);
            }
            Some((index?, value?))
        })
        .collect();
    read.into_iter().collect()
}

/// How exactly the new states must be orthonormal.
pub const ORTHONORMAL: f64 = 1e-12;

/// The first pair of states that are not orthonormal at these values of the registers, where nothing makes them so.
pub fn judge(states: &[NewState], orthogonalise: Option<Orthogonalise>, values: &[f64]) -> Option<(Place, Fault)> {
    if orthogonalise.is_some() {
        return None;
    }
    let amplitude = |value: &ComplexQuantity| (values[value.re as usize], value.im.map_or(0.0, |im| values[im as usize]));
    for (k, state) in states.iter().enumerate() {
        for other in &states[..=k] {
            let (mut re, mut im) = (0.0, 0.0);
            for (index, value) in &state.amplitudes {
                for (_, partner) in other.amplitudes.iter().filter(|(partner, _)| partner == index) {
                    let ((a, b), (c, d)) = (amplitude(partner), amplitude(value));
                    re += a * c + b * d;
                    im += a * d - b * c;
                }
            }
            let same = other.name == state.name;
            let off = (re - f64::from(u8::from(same))).hypot(im);
            // a number that follows the levels is judged when they are known
            if off > ORTHONORMAL {
                let overlap = re.hypot(im);
                let (first, second) = (other.name.clone(), state.name.clone());
                let write = scaled(state, overlap, &amplitude).filter(|_| same);
                return Some((state.place, Fault::NotOrthonormal { first, second, overlap, write }));
            }
        }
    }
    None
}

/// The factor that would make the state of norm 1, to paste.
fn scaled(state: &NewState, norm: f64, amplitude: &dyn Fn(&ComplexQuantity) -> (f64, f64)) -> Option<String> {
    let whole = state.amplitudes.iter().all(|(_, value)| {
        let (re, im) = amplitude(value);
        im == 0.0 && (re == 0.0 || (re.abs() - 1.0).abs() < 1e-12)
    });
    let count = norm.round();
    (whole && count >= 1.0 && (norm - count).abs() < 1e-12).then(|| format!("each amplitude times sqrt(1/{count})"))
}

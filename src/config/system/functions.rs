//! `functions:` an expansion in functions of the user's own.

use super::{Physics, System};
use crate::config::differential::{read_differential, Differential};
use crate::config::messages::Fault;
use crate::config::place::Place;
use crate::config::reader::{Quantity, Reader};
use crate::config::tape::{Formula, Register};
use crate::config::tree::Node;
use crate::units::Dim;

/// How functions are made orthogonal, as written.
pub const ORTHOGONALISE: [(&str, Orthogonalise); 2] = [("symmetric", Orthogonalise::Symmetric), ("in order", Orthogonalise::InOrder)];

/// How states that are not orthonormal are made so.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Orthogonalise {
    /// By the inverse root of their overlap: as near to the written ones as can be.
    Symmetric,
    /// Each in turn, what lies along those before it taken out.
    InOrder,
}

/// An expansion.
#[derive(Debug, Clone)]
pub struct Functions {
    /// Name of the variable.
    pub variable: String,
    /// Its dimension.
    pub dim: Dim,
    /// Lower end.
    pub from: Quantity,
    /// Upper end.
    pub to: Quantity,
    /// The functions, in the order written.
    pub list: Vec<Formula>,
    /// How they are made orthogonal, if said.
    pub orthogonalise: Option<Orthogonalise>,
    /// The static Hamiltonian, Hz.
    pub hamiltonian: Differential,
    /// Where the list stands.
    pub place: Place,
}

impl Functions {
    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        found.extend([self.from.register, self.to.register]);
        found.extend(self.list.iter().flat_map(Formula::registers));
        found.extend(self.hamiltonian.registers());
    }
}

/// Names that a variable cannot bear.
const TAKEN: [&str; 4] = ["t", "i", "pi", "e"];

/// Reads `functions:`.
pub fn read_functions(reader: &mut Reader, node: &Node, _place: Place, section: &str) -> Option<System> {
    let hints = [("basis", "The functions stand under list."), ("operators", "Further operators stand in the section operators.")];
    reader.fields(node, section, &["variable", "from", "to", "list", "orthogonalise", "hamiltonian"], &hints)?;
    let variable = reader.need(node, "variable", section, "x").and_then(|name| read_variable(reader, name, section));
    let mut end = |key: &str, example: &str| {
        let value = reader.need(node, key, section, example)?;
        reader.quantity_of_any_dimension(value, &format!("{section} / {key}"))
    };
    let (from, to) = (end("from", "-40 nm"), end("to", "40 nm"));
    let orthogonalise = node.get("orthogonalise").map(|word| reader.word(word, &format!("{section} / orthogonalise"), &ORTHOGONALISE));
    let list = reader.need(node, "list", section, "{left: exp(-(x / 4 nm)^2)}");
    let Some(entries) = list.and_then(Node::entries).filter(|entries| !entries.is_empty()) else {
        if let Some(list) = list {
            let expected = "a block of name: formula".to_string();
            let example = "left: exp(-((x + 5 nm) / 3 nm)^2 / 2)".to_string();
            reader.error(list.place, Fault::Shape { what: format!("{section} / list"), expected, example });
        }
        return None;
    };
    if super::too_many(reader, node.place, entries.len() as f64) {
        return None;
    }
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    super::warn_of_case(reader, "level", &names, node.place);
    reader.define_built_levels(names.clone());
    let hamiltonian = reader.need(node, "hamiltonian", section, "{derivatives: {0: 30 meV * (x / 10 nm)^2}}");
    let (variable, (from, dim), (to, to_dim)) = (variable?, from?, to?);
    if dim != to_dim {
        reader.error(to.place, Fault::WrongDim { what: format!("{section} / to"), wanted: dim, found: to_dim, defined: None, write: None });
        return None;
    }
    let mut formulas: Vec<Option<(Formula, Dim)>> = Vec::new();
    for entry in entries {
        let what = format!("{section} / list / {}", entry.key);
        let formula = reader.formula_in(&entry.value, &what, &variable, dim);
        let first = formulas.iter().flatten().map(|(_, dim)| *dim).next();
        if let (Some((_, found)), Some(wanted)) = (&formula, first) {
            if *found != wanted {
                reader.error(entry.value.place, Fault::WrongDim { what, wanted, found: *found, defined: None, write: None });
            }
        }
        formulas.push(formula);
    }
    let hamiltonian = hamiltonian.and_then(|node| {
        let section = format!("{section} / hamiltonian");
        reader.fields(node, &section, &["derivatives"], &[])?;
        let derivatives = reader.need(node, "derivatives", &section, "{0: 30 meV * (x / 10 nm)^2}")?;
        read_differential(reader, derivatives, &format!("{section} / derivatives"), (&variable, dim), Some(Dim::FREQUENCY))
    });
    let list_place = list.map_or(node.place, |list| list.place);
    let functions = Functions {
        variable,
        dim,
        from,
        to,
        list: formulas.into_iter().map(|formula| formula.map(|(formula, _)| formula)).collect::<Option<_>>()?,
        orthogonalise: orthogonalise.map_or(Some(None), |word| word.map(Some))?,
        hamiltonian: hamiltonian?,
        place: list_place,
    };
    Some(System { place: node.place, kind: "functions", names, entries: Vec::new(), physics: Physics::Functions(Box::new(functions)) })
}

fn read_variable(reader: &mut Reader, node: &Node, section: &str) -> Option<String> {
    let name = reader.text(node, &format!("{section} / variable"), "variable: x")?.to_string();
    let letters = name.chars().all(|c| c.is_alphanumeric() || c == '_') && name.chars().next().is_some_and(char::is_alphabetic);
    if !letters || TAKEN.contains(&name.as_str()) || crate::units::unit(&name).is_some() || reader.number_names().contains(&name) {
        let wanted = "a name of its own, such as x: no number, unit or word of the arithmetic".to_string();
        reader.error(node.place, Fault::OutOfRange { what: format!("{section} / variable"), found: format!("\"{name}\""), wanted });
        return None;
    }
    Some(name)
}

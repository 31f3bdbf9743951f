//! `derivatives:` an operator c0(x) + c1(x) d/dx + c2(x) d^2/dx^2 .., each coefficient left of its derivative.

use super::messages::Fault;
use super::place::Place;
use super::reader::Reader;
use super::tape::{Formula, Register};
use super::tree::Node;
use crate::units::Dim;

/// One term.
#[derive(Debug, Clone)]
pub struct WrittenTerm {
    /// Order of the derivative.
    pub order: usize,
    /// Real part of the coefficient, a formula of the variable, SI (energies in Hz).
    pub coefficient: Formula,
    /// Imaginary part, if any was written.
    pub imaginary: Option<Formula>,
    /// Where its order stands.
    pub place: Place,
}

/// A differential operator as written.
#[derive(Debug, Clone)]
pub struct Differential {
    /// Its terms.
    pub terms: Vec<WrittenTerm>,
    /// Dimension of its matrix.
    pub dim: Dim,
    /// Where it stands.
    pub place: Place,
}

impl Differential {
    /// The registers it is made of.
    pub fn registers(&self) -> Vec<Register> {
        let formulas = self.terms.iter().flat_map(|term| [Some(&term.coefficient), term.imaginary.as_ref()]).flatten();
        formulas.flat_map(Formula::registers).collect()
    }
}

/// The highest order that may be typed; each side of an integral takes half.
const HIGHEST: f64 = 16.0;

/// Reads the block under `derivatives:`; `wanted` is the dimension of the operator where that is known.
pub fn read_differential(
    reader: &mut Reader,
    node: &Node,
    section: &str,
    variable: (&str, Dim),
    wanted: Option<Dim>,
) -> Option<Differential> {
    let example = "derivatives: {0: x}".to_string();
    let Some(entries) = node.entries().filter(|entries| !entries.is_empty()) else {
        let expected = "a block of order: coefficient".to_string();
        reader.error(node.place, Fault::Shape { what: section.to_string(), expected, example });
        return None;
    };
    let mut found: Vec<Option<(WrittenTerm, Dim)>> = Vec::new();
    for entry in entries {
        let order = entry.key.parse::<f64>().ok().filter(|order| *order == order.trunc() && (0.0..=HIGHEST).contains(order));
        let Some(order) = order else {
            let wanted = format!("the order of a derivative: 0, 1, 2 .. up to {HIGHEST}");
            reader.error(entry.place, Fault::OutOfRange { what: format!("a key of {section}"), found: entry.key.clone(), wanted });
            found.push(None);
            continue;
        };
        let what = format!("{section} / {}", entry.key);
        let over = (0..order as usize).fold(Dim::NONE, |dim, _| dim.times(variable.1));
        let known = wanted.or_else(|| found.iter().flatten().map(|(_, dim)| *dim).next());
        let read = reader.complex_formula_in(&entry.value, &what, variable.0, variable.1, true);
        let term = read.and_then(|(coefficient, imaginary, dim)| {
            let whole = dim.over(over);
            match known {
                Some(known) if known != whole => {
                    let write = None;
                    let fault = Fault::WrongDim { what: what.clone(), wanted: known.times(over), found: dim, defined: None, write };
                    reader.error(entry.value.place, fault);
                    None
                }
                _ => Some((WrittenTerm { order: order as usize, coefficient, imaginary, place: entry.place }, whole)),
            }
        });
        found.push(term);
    }
    let terms: Vec<(WrittenTerm, Dim)> = found.into_iter().collect::<Option<_>>()?;
    let dim = wanted.unwrap_or(terms[0].1);
    Some(Differential { terms: terms.into_iter().map(|(term, _)| term).collect(), dim, place: node.place })
}

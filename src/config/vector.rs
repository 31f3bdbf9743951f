//! Vectors of three: fields, distances, directions.

use super::messages::Fault;
use super::reader::{Quantity, Reader};
use super::tape::Register;
use super::tree::Node;
use crate::units::{sin_cos_turns, Dim};

/// A static magnetic field as written.
#[derive(Debug, Clone)]
pub enum Field {
    /// Along x, y, z, T.
    Components([Quantity; 3]),
    /// Strength in T, angle from z and angle about z from x, both in turns.
    Turned {
        /// Its strength.
        strength: Quantity,
        /// From z.
        tilt: Quantity,
        /// About z, from x.
        turned: Quantity,
    },
}

impl Field {
    /// Its components, T.
    pub fn tesla(&self, values: &[f64]) -> [f64; 3] {
        let value = |quantity: &Quantity| values[quantity.register as usize];
        match self {
            Field::Components(parts) => [0, 1, 2].map(|k| value(&parts[k])),
            Field::Turned { strength, tilt, turned } => {
                let ((sin, cos), (about_y, about_x)) = (sin_cos_turns(value(tilt)), sin_cos_turns(value(turned)));
                [sin * about_x, sin * about_y, cos].map(|share| share * value(strength))
            }
        }
    }

    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        match self {
            Field::Components(parts) => found.extend(parts.iter().map(|part| part.register)),
            Field::Turned { strength, tilt, turned } => found.extend([strength, tilt, turned].map(|quantity| quantity.register)),
        }
    }
}

/// Three values of one dimension, as `[x, y, z]`.
pub fn read_vector(reader: &mut Reader, node: &Node, what: &str, dim: Dim) -> Option<[Quantity; 3]> {
    let example = format!("[0 {unit}, 0 {unit}, 1 {unit}]", unit = dim.example()).replace(" ,", ",").replace(" ]", "]");
    let Some([x, y, z]) = node.items() else {
        let fault = Fault::Shape { what: what.to_string(), expected: "a list of three values, along x, y and z".to_string(), example };
        reader.error(node.place, fault);
        return None;
    };
    let mut read = |node: &Node| reader.quantity(node, what, dim);
    let parts = [read(x), read(y), read(z)];
    Some([parts[0]?, parts[1]?, parts[2]?])
}

/// A magnetic field: `[x, y, z]` or `{strength, tilt, turned}`.
pub fn read_field(reader: &mut Reader, node: &Node, what: &str) -> Option<Field> {
    if node.entries().is_none() {
        return read_vector(reader, node, what, Dim::MAGNETIC_FIELD).map(Field::Components);
    }
    reader.fields(node, what, &["strength", "tilt", "turned"], &[])?;
    let mut part = |key: &str, example: &str, dim: Dim| {
        let value = reader.need(node, key, what, example)?;
        reader.quantity(value, &format!("{what} / {key}"), dim)
    };
    let strength = part("strength", "24 mT", Dim::MAGNETIC_FIELD);
    let (tilt, turned) = (part("tilt", "0 deg", Dim::ANGLE), part("turned", "0 deg", Dim::ANGLE));
    Some(Field::Turned { strength: strength?, tilt: tilt?, turned: turned? })
}

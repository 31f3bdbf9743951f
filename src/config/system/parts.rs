//! `parts:`, `interactions:` and `magnetic_field:` several systems beside each other.

use super::{read_kind, too_many, Physics, System, MOST_LEVELS};
use crate::config::matrix;
use crate::config::matrix::MatrixEntry;
use crate::config::messages::Fault;
use crate::config::place::Place;
use crate::config::reader::{ComplexQuantity, Quantity, Reader};
use crate::config::tape::Register;
use crate::config::tree::Node;
use crate::config::vector::{read_field, read_vector, Field};
use crate::units::Dim;

/// One part of a joint system.
#[derive(Debug, Clone)]
pub struct Part {
    /// Its name.
    pub name: String,
    /// What it is by itself.
    pub system: System,
}

/// A joint system; the leftmost part varies slowest.
#[derive(Debug, Clone)]
pub struct Parts {
    /// Its parts, as written.
    pub parts: Vec<Part>,
    /// The field that acts on every moment without a field of its own.
    pub field: Option<Field>,
    /// What couples them.
    pub interactions: Vec<Interaction>,
}

/// What couples two parts.
#[derive(Debug, Clone)]
pub struct Interaction {
    /// The two parts, the one further left first.
    pub between: [usize; 2],
    /// How.
    pub how: How,
    /// Where it stands.
    pub place: Place,
}

/// How two parts are coupled; energies over h, Hz.
#[derive(Debug, Clone)]
pub enum How {
    /// size S . I.
    Isotropic(Quantity),
    /// along Sz Iz + across (Sx Ix + Sy Iy).
    Axial(Quantity, Quantity),
    /// S . A . I, entries of A.
    Tensor(Vec<MatrixEntry>),
    /// size Sz Iz, with the quanta of a mode or ladder in place of Sz.
    Longitudinal(Quantity),
    /// size (lower raise + raise lower).
    Exchange(Quantity),
    /// From the moments, at this distance from the first to the second, m.
    Dipolar([Quantity; 3]),
    /// size times the product of two operators, and its adjoint where that differs.
    Product([String; 2], ComplexQuantity),
}

impl Parts {
    /// The registers that it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        for part in &self.parts {
            found.extend(part.system.registers());
        }
        if let Some(field) = &self.field {
            field.registers(found);
        }
        for interaction in &self.interactions {
            match &interaction.how {
                How::Isotropic(size) | How::Longitudinal(size) | How::Exchange(size) => found.push(size.register),
                How::Axial(along, across) => found.extend([along.register, across.register]),
                How::Tensor(entries) => found.extend(entries.iter().map(|entry| entry.value.re)),
                How::Dipolar(distance) => found.extend(distance.iter().map(|component| component.register)),
                How::Product(_, size) => found.extend([Some(size.re), size.im].into_iter().flatten()),
            }
        }
    }
}

/// The name of a joint state.
fn joint_names(parts: &[Part]) -> Vec<String> {
    let mut names = vec![String::new()];
    for (k, part) in parts.iter().enumerate() {
        let comma = if k == 0 { "" } else { "," };
        names = names.iter().flat_map(|left| part.system.names.iter().map(move |own| format!("{left}{comma}{own}"))).collect();
    }
    names
}

/// Reads the section that holds `parts:`.
pub fn read_parts(reader: &mut Reader, section: &Node) -> Option<System> {
    let node = section.get("parts")?;
    let Some(entries) = node.entries().filter(|entries| !entries.is_empty()) else {
        let example = "parts: {electron: {spin: {size: 1/2, g: 2.0023}}}".to_string();
        reader.error(node.place, Fault::Shape { what: "parts".to_string(), expected: "a block of names".to_string(), example });
        return None;
    };
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    super::warn_of_case(reader, "part", &names, node.place);
    let read: Vec<Option<Part>> = entries
        .iter()
        .map(|entry| {
            if entry.key.contains(['.', ',']) {
                let reason = "a part is named without points and commas, which join names".to_string();
                reader.error(entry.place, Fault::NameNotFree { name: entry.key.clone(), reason });
            }
            let at = format!("system / parts / {}", entry.key);
            let system = read_kind(reader, &entry.value, &at, &[])?;
            Some(Part { name: entry.key.clone(), system })
        })
        .collect();
    let parts: Vec<Part> = read.into_iter().collect::<Option<_>>()?;
    let size: f64 = parts.iter().map(|part| part.system.names.len() as f64).product();
    if too_many(reader, node.place, size) {
        return None;
    }
    let joint = joint_names(&parts);
    reader.define_built_levels(joint.clone());
    let field = section.get("magnetic_field").map(|field| (read_field(reader, field, "system / magnetic_field"), field.place));
    if let Some((_, place)) = &field {
        own_fields(reader, &parts, *place);
    }
    let interactions = match section.get("interactions") {
        Some(list) => read_interactions(reader, list, &parts),
        None => Some(Vec::new()),
    };
    let field = field.map_or(Some(None), |(field, _)| field.map(Some))?;
    let parts = Parts { parts, field, interactions: interactions? };
    Some(System { place: node.place, kind: "parts", names: joint, entries: Vec::new(), physics: Physics::Parts(Box::new(parts)) })
}

/// A moment in two fields would be guessed at; a field with nothing to act on is a slip.
fn own_fields(reader: &mut Reader, parts: &[Part], place: Place) {
    let moments = parts.iter().any(|part| part.system.acting().iter().any(|(_, acting)| acting.has_moment()));
    if !moments {
        let expected = "beside a part with a magnetic moment, a spin or an atom".to_string();
        let example = "parts: {electron: {spin: {size: 1/2, g: 2.0023}}}".to_string();
        reader.error(place, Fault::Shape { what: "magnetic_field".to_string(), expected, example });
    }
    for part in parts {
        if let Some(own) = part.system.own_field() {
            let fault = Fault::OneOf {
                found: vec!["field".to_string(), "magnetic_field".to_string()],
                lines: vec![own.line, place.line],
                section: format!("the part {}", part.name),
            };
            reader.error(own, fault);
        }
    }
}

fn read_interactions(reader: &mut Reader, node: &Node, parts: &[Part]) -> Option<Vec<Interaction>> {
    let example = "- {between: [a, b], kind: isotropic, size: 117.53 MHz}";
    let read: Vec<Option<Interaction>> =
        reader.list(node, "interactions", example)?.iter().map(|item| read_interaction(reader, item, parts)).collect();
    read.into_iter().collect()
}

const WHAT: &str = "system / interactions";
const KINDS: [(&str, &[&str]); 7] = [
    ("isotropic", &["size"]),
    ("axial", &["along", "across"]),
    ("tensor", &["rows", "unit"]),
    ("longitudinal", &["size"]),
    ("exchange", &["size"]),
    ("dipolar", &["distance"]),
    ("product", &["product", "size"]),
];

fn read_interaction(reader: &mut Reader, node: &Node, parts: &[Part]) -> Option<Interaction> {
    let words: Vec<(&str, usize)> = KINDS.iter().enumerate().map(|(k, (word, _))| (*word, k)).collect();
    let kind = reader.need(node, "kind", WHAT, "isotropic").and_then(|kind| reader.word(kind, &format!("{WHAT} / kind"), &words));
    let between = reader.need(node, "between", WHAT, "[electron, nucleus]").and_then(|pair| read_between(reader, pair, parts));
    let (kind, [first, second]) = (kind?, between?);
    let (word, keys) = KINDS[kind];
    let known: Vec<&str> = ["between", "kind"].into_iter().chain(keys.iter().copied()).collect();
    reader.fields(node, &format!("an interaction that is {word}"), &known, &[])?;
    if let Some(poor) = [first, second].into_iter().find(|part| !takes_part(&parts[*part].system, word)) {
        let (name, own) = (&parts[poor].name, parts[poor].system.kind);
        let fault = Fault::UnknownWord {
            what: format!("an interaction of {name}, a {own},"),
            found: word.to_string(),
            known: KINDS.iter().map(|(word, _)| *word).filter(|word| takes_part(&parts[poor].system, word)).map(str::to_string).collect(),
            near: None,
            hint: None,
        };
        reader.error(node.get("kind").map_or(node.place, |kind| kind.place), fault);
        return None;
    }
    let mut energy = |key: &str| {
        let value = reader.need(node, key, WHAT, "2.3 MHz")?;
        reader.energy(value, &format!("{WHAT} / {key}"))
    };
    let how = match word {
        "isotropic" => How::Isotropic(energy("size")?),
        "axial" => {
            let (along, across) = (energy("along"), energy("across"));
            How::Axial(along?, across?)
        }
        "tensor" => How::Tensor(read_tensor(reader, node, first > second)?),
        "longitudinal" => How::Longitudinal(energy("size")?),
        "exchange" => How::Exchange(energy("size")?),
        "dipolar" => {
            let distance = reader.need(node, "distance", WHAT, "[0 nm, 0 nm, 2 nm]")?;
            How::Dipolar(read_vector(reader, distance, &format!("{WHAT} / distance"), Dim::LENGTH)?)
        }
        _ => read_product(reader, node, [&parts[first], &parts[second]], first > second)?,
    };
    Some(Interaction { between: [first.min(second), first.max(second)], how, place: node.place })
}

/// Whether a system has what this interaction needs.
fn takes_part(system: &System, word: &str) -> bool {
    let has = |name: &str| system.operators().iter().any(|operator| operator == name);
    match word {
        "isotropic" | "axial" | "tensor" => has("spin_x"),
        "longitudinal" => has("spin_z") || has("quanta"),
        "exchange" => has("spin_up") || has("raise"),
        "dipolar" => system.acting().iter().any(|(_, acting)| acting.has_moment()),
        _ => !system.operators().is_empty(),
    }
}

fn read_between(reader: &mut Reader, node: &Node, parts: &[Part]) -> Option<[usize; 2]> {
    let names: Vec<String> = parts.iter().map(|part| part.name.clone()).collect();
    let Some([a, b]) = reader.list(node, "between", "between: [electron, nucleus]") else {
        let example = "between: [electron, nucleus]".to_string();
        reader.error(node.place, Fault::Shape { what: "between".to_string(), expected: "a list of two parts".to_string(), example });
        return None;
    };
    let (first, second) = (reader.name_among(a, "part", &names), reader.name_among(b, "part", &names));
    let pair = [first?, second?];
    if pair[0] == pair[1] {
        reader.error(node.place, Fault::SamePair { name: names[pair[0]].clone() });
        return None;
    }
    Some(pair)
}

/// The entries of a 3 x 3 tensor, rows along the first part as written; turned over where the parts stand the other way round.
fn read_tensor(reader: &mut Reader, node: &Node, turned_over: bool) -> Option<Vec<MatrixEntry>> {
    let unit = match node.get("unit") {
        Some(unit) => Some(reader.energy_unit(unit, &format!("{WHAT} / unit"))?),
        None => None,
    };
    let rows = reader.need(node, "rows", WHAT, "[[3 MHz, 0, 0], [0, 3 MHz, 0], [0, 0, 8 MHz]]")?;
    let mut found = Vec::new();
    for row in reader.list(rows, &format!("{WHAT} / rows"), "rows: [[1 MHz, 0, 0], ..]")? {
        let cells = reader.list(row, &format!("a row of {WHAT}"), "[1 MHz, 0, 0]")?;
        found.push(matrix::Row { place: row.place, cells: cells.to_vec() });
    }
    let mut entries = Vec::new();
    for (row, column, cell) in matrix::cells(reader, &found, 3, false, rows.place)? {
        if cell.text() == Some("0") {
            continue;
        }
        let value = reader.energy_entry(cell, &format!("an entry of {WHAT}"), unit)?;
        if value.im.is_some() {
            reader.error(cell.place, Fault::ImaginaryOutside);
            return None;
        }
        let (row, column) = if turned_over { (column, row) } else { (row, column) };
        entries.push(MatrixEntry { row, column, value });
    }
    Some(entries)
}

fn read_product(reader: &mut Reader, node: &Node, parts: [&Part; 2], turned_over: bool) -> Option<How> {
    let product = reader.need(node, "product", WHAT, "[spin_up, lower]")?;
    let size = reader.need(node, "size", WHAT, "61 kHz").and_then(|size| reader.energy_entry(size, &format!("{WHAT} / size"), None));
    let Some([a, b]) = reader.list(product, "product", "product: [spin_up, lower]") else {
        let expected = "a list of an operator of each part".to_string();
        reader
            .error(product.place, Fault::Shape { what: "product".to_string(), expected, example: "product: [spin_up, lower]".to_string() });
        return None;
    };
    let mut operator = |node: &Node, part: &Part| {
        let known = part.system.operators();
        reader.name_among(node, "operator", &known).map(|index| known[index].clone())
    };
    let (first, second) = (operator(a, parts[0]), operator(b, parts[1]));
    let (first, second) = (first?, second?);
    Some(How::Product(if turned_over { [second, first] } else { [first, second] }, size?))
}

/// The joint state of one level of every part, `{electron: -1/2, nucleus: +1/2}`.
pub fn read_joint_level(reader: &mut Reader, node: &Node, parts: &[(String, Vec<String>)]) -> Option<usize> {
    let entries = node.entries()?;
    let names: Vec<String> = parts.iter().map(|(name, _)| name.clone()).collect();
    let mut good = true;
    for entry in entries.iter().filter(|entry| !names.contains(&entry.key)) {
        reader.unknown(entry.place, "part", &entry.key, &names);
        good = false;
    }
    let mut joint = Some(0);
    for (name, levels) in parts {
        let level = reader.need(node, name, "start", &levels[0]).and_then(|level| reader.name_among(level, "level", levels));
        joint = joint.zip(level).map(|(joint, level)| joint * levels.len() + level);
    }
    let joint = joint.filter(|level| good && *level < MOST_LEVELS);
    reader.named_levels.extend(joint);
    joint
}

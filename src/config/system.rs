//! `system:` and `operators:`.

use super::matrix::{self, MatrixEntry, Rows};
use super::messages::{short_with_unit, Fault};
use super::place::Place;
use super::reader::{ComplexQuantity, LevelSource, Reader, Rungs};
use super::tape::Register;
use super::tree::Node;
use crate::units::Dim;

pub mod atom;
pub mod functions;
pub mod mode;
pub mod parts;
pub mod spin;
pub mod well;

use super::differential::{read_differential, Differential};
use atom::Atom;
use functions::Functions;
use mode::Mode;
use parts::Parts;
use spin::Spin;
use well::Well;

/// Most levels accepted: a dense matrix of that size is 16 MB.
pub const MOST_LEVELS: usize = 1024;

/// The static system: names of its states, and what its matrix is made of.
#[derive(Debug, Clone)]
pub struct System {
    /// Where the section stands.
    pub place: Place,
    /// Which key described it: one of `KINDS`.
    pub kind: &'static str,
    /// Names of the states as built, in order; those of the working basis once the document is read.
    pub names: Vec<String>,
    /// Of a typed system: the written entries, both triangles, in Hz.
    pub entries: Vec<MatrixEntry>,
    /// What it is made of.
    pub physics: Physics,
}

/// What the static matrix and the operators of a system are made of; `model` builds them.
#[derive(Debug, Clone)]
pub enum Physics {
    /// The entries alone: `levels` and `hamiltonian`.
    Typed,
    /// The entries, and the relative coupling of rungs n and n + 1.
    Ladder(Vec<Register>),
    /// A spin.
    Spin(Spin),
    /// A mode.
    Mode(Mode),
    /// Several systems beside each other.
    Parts(Box<Parts>),
    /// One or two manifolds of hyperfine levels.
    Atom(Box<Atom>),
    /// One particle in one dimension.
    Well(Box<Well>),
    /// Functions of the user's own.
    Functions(Box<Functions>),
}

/// What `acts_on` may name, and how a drive acts on it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Acting {
    /// lower + raise of a mode or ladder.
    Quanta,
    /// A magnetic moment along a direction.
    Moment,
    /// A magnetic moment along a direction, or light of a polarisation on the lines between two manifolds.
    MomentOrLight,
}

impl Acting {
    /// Whether there is a magnetic moment.
    pub fn has_moment(self) -> bool {
        self != Acting::Quanta
    }
}

/// Names of the operators of a mode or ladder.
pub const MODE_OPERATORS: [&str; 5] = ["lower", "raise", "quanta", "position", "momentum"];
/// Names of the operators of an atom.
pub const ATOM_OPERATORS: [&str; 6] = ["electron_x", "electron_y", "electron_z", "nucleus_x", "nucleus_y", "nucleus_z"];
/// Names of the operators of a spin.
pub const SPIN_OPERATORS: [&str; 5] = ["spin_x", "spin_y", "spin_z", "spin_up", "spin_down"];

impl System {
    /// A system of typed entries.
    fn typed(place: Place, kind: &'static str, names: Vec<String>, entries: Vec<MatrixEntry>) -> System {
        System { place, kind, names, entries, physics: Physics::Typed }
    }

    /// Whether its level energies are on the tape as written; else they are known once it is built.
    pub fn is_typed(&self) -> bool {
        matches!(self.physics, Physics::Typed | Physics::Ladder(_))
    }

    /// Names of the operators that come with it.
    pub fn operators(&self) -> Vec<String> {
        let own = |names: &[&str]| names.iter().map(|name| (*name).to_string()).collect();
        match &self.physics {
            Physics::Typed => Vec::new(),
            Physics::Ladder(_) | Physics::Mode(_) => own(&MODE_OPERATORS),
            Physics::Spin(_) => own(&SPIN_OPERATORS),
            Physics::Atom(_) => own(&ATOM_OPERATORS),
            Physics::Parts(parts) => {
                let of = |part: &parts::Part| part.system.operators().into_iter().map(|name| format!("{}.{name}", part.name)).collect();
                parts.parts.iter().flat_map(|part| -> Vec<String> { of(part) }).collect()
            }
            Physics::Well(well) => own(well::operators(well.ring)),
            Physics::Functions(_) => Vec::new(),
        }
    }

    /// Name and levels of each part; none where there are no parts.
    pub fn parts(&self) -> Vec<(String, Vec<String>)> {
        match &self.physics {
            Physics::Parts(parts) => parts.parts.iter().map(|part| (part.name.clone(), part.system.names.clone())).collect(),
            _ => Vec::new(),
        }
    }

    /// The kind of a part; of no part the kind of the whole.
    pub fn kind_of(&self, part: &str) -> &'static str {
        match &self.physics {
            Physics::Parts(parts) => parts.parts.iter().find(|one| one.name == part).map_or(self.kind, |one| one.system.kind),
            _ => self.kind,
        }
    }

    /// Where a field of its own stands.
    fn own_field(&self) -> Option<Place> {
        match &self.physics {
            Physics::Spin(spin) => spin.field.as_ref().map(|_| spin.place),
            Physics::Atom(atom) => atom.field.as_ref().map(|_| atom.place),
            _ => None,
        }
    }

    /// The variable of its differential operators and its dimension, if it has one.
    pub fn variable(&self) -> Option<(&str, Dim)> {
        match &self.physics {
            Physics::Well(_) => Some(("x", Dim::LENGTH)),
            Physics::Functions(functions) => Some((&functions.variable, functions.dim)),
            _ => None,
        }
    }

    /// What `acts_on` may name here.
    pub fn acting(&self) -> Vec<(String, Acting)> {
        let how = match &self.physics {
            Physics::Typed | Physics::Well(_) | Physics::Functions(_) => return Vec::new(),
            Physics::Ladder(_) | Physics::Mode(_) => Acting::Quanta,
            Physics::Spin(_) => Acting::Moment,
            Physics::Atom(atom) if atom.upper.is_some() => Acting::MomentOrLight,
            Physics::Atom(_) => Acting::Moment,
            Physics::Parts(parts) => {
                let of = |part: &parts::Part| part.system.acting().into_iter().map(|(_, how)| (part.name.clone(), how)).collect();
                return parts.parts.iter().flat_map(|part| -> Vec<(String, Acting)> { of(part) }).collect();
            }
        };
        vec![(self.kind.to_string(), how)]
    }

    /// The registers that its matrices are made of.
    pub fn registers(&self) -> Vec<Register> {
        let mut found: Vec<Register> = self.entries.iter().flat_map(|entry| [Some(entry.value.re), entry.value.im]).flatten().collect();
        match &self.physics {
            Physics::Typed => {}
            Physics::Ladder(rungs) => found.extend(rungs),
            Physics::Spin(spin) => spin.registers(&mut found),
            Physics::Mode(mode) => mode.registers(&mut found),
            Physics::Atom(atom) => atom.registers(&mut found),
            Physics::Parts(parts) => parts.registers(&mut found),
            Physics::Well(well) => well.registers(&mut found),
            Physics::Functions(functions) => functions.registers(&mut found),
        }
        found
    }
}

/// A named matrix.
#[derive(Debug, Clone)]
pub struct Operator {
    /// Its name.
    pub name: String,
    /// Where the name stands; of one that comes with the system, where that stands.
    pub place: Place,
    /// What it is made of.
    pub source: OperatorSource,
}

/// What a named matrix is made of.
#[derive(Debug, Clone)]
pub enum OperatorSource {
    /// Typed entries without dimension, in the working basis.
    Typed(Vec<MatrixEntry>),
    /// The same in the basis as built, `in: as built`.
    AsBuilt(Vec<MatrixEntry>),
    /// A differential operator of the system's variable.
    Differential(Differential),
    /// Displacement of a mode, the kind or the part of this name, by an amplitude.
    Displacement {
        /// `mode`, or the part that is one.
        of: String,
        /// By how much, no dimension.
        by: ComplexQuantity,
    },
    /// It comes with the system, under the same name.
    Natural,
}

impl Operator {
    /// The written entries of a typed one.
    pub fn entries(&self) -> Option<&[MatrixEntry]> {
        match &self.source {
            OperatorSource::Typed(entries) | OperatorSource::AsBuilt(entries) => Some(entries),
            OperatorSource::Natural | OperatorSource::Differential(_) | OperatorSource::Displacement { .. } => None,
        }
    }

    /// The registers it is made of.
    pub fn registers(&self) -> Vec<Register> {
        if let OperatorSource::Differential(differential) = &self.source {
            return differential.registers();
        }
        if let OperatorSource::Displacement { by, .. } = &self.source {
            return [Some(by.re), by.im].into_iter().flatten().collect();
        }
        let entries = self.entries().unwrap_or_default();
        entries.iter().flat_map(|entry| [Some(entry.value.re), entry.value.im]).flatten().collect()
    }
}

/// Reads one kind: the node under its key, the place of the key, and the path of keys.
type Read = fn(&mut Reader, &Node, Place, &str) -> Option<System>;

/// Every kind of system and how it is read.
const KINDS: [(&str, Read); 8] = [
    ("levels", read_levels),
    ("ladder", read_ladder),
    ("hamiltonian", read_hamiltonian),
    ("spin", spin::read_spin),
    ("mode", mode::read_mode),
    ("atom", atom::read_atom),
    ("well", well::read_well),
    ("functions", functions::read_functions),
];

/// Keys that stand beside `parts` alone.
const BESIDE_PARTS: [&str; 2] = ["magnetic_field", "interactions"];

/// Reads `system:`.
pub fn read_system(reader: &mut Reader, node: &Node) -> Option<System> {
    let Some(parts) = node.get("parts") else {
        if let Some(lone) = node.entries().and_then(|keys| keys.iter().find(|key| BESIDE_PARTS.contains(&key.key.as_str()))) {
            let fault = Fault::MissingKey {
                key: "parts".to_string(),
                section: "system".to_string(),
                write: "parts: {electron: {spin: {size: 1/2, g: 2.0023}}}".to_string(),
                why: Some(format!("{} belongs to parts; the field of a spin or an atom alone is its own key: field.", lone.key)),
            };
            reader.error(lone.place, fault);
            return None;
        }
        return read_kind(reader, node, "system", &["parts", "name_states_by"]);
    };
    let known: Vec<&str> = KINDS.iter().map(|(word, _)| *word).chain(BESIDE_PARTS).chain(["parts", "name_states_by"]).collect();
    reader.fields(node, "system", &known, &[])?;
    if let Some(other) = node.entries()?.iter().find(|entry| KINDS.iter().any(|(word, _)| *word == entry.key)) {
        let mut two = [("parts".to_string(), parts.place), (other.key.clone(), other.place)];
        two.sort_by_key(|(_, place)| place.line);
        let [(first, at), (second, later)] = two;
        let fault = Fault::OneOf { found: vec![first, second], lines: vec![at.line, later.line], section: "system".to_string() };
        reader.error(later, fault);
        return None;
    }
    parts::read_parts(reader, node)
}

/// Reads the one kind that stands under `node`: the system itself, or a part of it; `beside` are other keys that may stand there.
pub fn read_kind(reader: &mut Reader, node: &Node, section: &str, beside: &[&str]) -> Option<System> {
    let words: Vec<&str> = KINDS.iter().map(|(word, _)| *word).collect();
    let known: Vec<&str> = words.iter().chain(beside).copied().collect();
    reader.fields(node, section, &known, &[])?;
    let entry = reader.one_of(node, &words, section, None)?;
    let (word, read) = KINDS.iter().find(|(word, _)| *word == entry.key)?;
    read(reader, &entry.value, entry.place, &format!("{section} / {word}"))
}

/// Refuses more levels than are accepted.
fn too_many(reader: &mut Reader, place: Place, levels: f64) -> bool {
    if levels <= MOST_LEVELS as f64 {
        return false;
    }
    let bytes = 16.0 * levels * levels * 4.0;
    reader.error(place, Fault::TooManyLevels { levels, bytes, limit: MOST_LEVELS });
    true
}

fn read_levels(reader: &mut Reader, node: &Node, _place: Place, _section: &str) -> Option<System> {
    let Some(entries) = node.entries().filter(|entries| !entries.is_empty()) else {
        reader.error(node.place, Fault::EmptySystem { what: "levels".to_string() });
        return None;
    };
    if too_many(reader, node.place, entries.len() as f64) {
        return None;
    }
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    warn_of_case(reader, "level", &names, node.place);
    let sources = entries.iter().map(|entry| LevelSource::Written(entry.value.clone(), None)).collect();
    reader.define_levels(names.clone(), sources, Rungs::default());
    let entries = diagonal(reader, names.len(), |k| entries[k].value.place)?;
    Some(System::typed(node.place, "levels", names, entries))
}

/// The diagonal entries, compiled; `None` if one cannot be.
fn diagonal(reader: &mut Reader, size: usize, place: impl Fn(usize) -> Place) -> Option<Vec<MatrixEntry>> {
    let energies: Vec<Option<Register>> = (0..size).map(|k| reader.level_energy(k)).collect();
    energies
        .into_iter()
        .enumerate()
        .map(|(k, re)| re.map(|re| MatrixEntry { row: k, column: k, value: ComplexQuantity { re, im: None, place: place(k) } }))
        .collect()
}

fn read_ladder(reader: &mut Reader, node: &Node, place: Place, section: &str) -> Option<System> {
    reader.fields(node, section, &["levels", "first_gap", "anharmonicity", "couplings_grow"], &[])?;
    let count = reader.need(node, "levels", section, "4");
    let levels = count.and_then(|count| reader.whole(count, &format!("{section} / levels"), 1.0).map(|levels| (levels, count.place)));
    let first = reader.need(node, "first_gap", section, "5.02 GHz").cloned();
    let (levels, count_place) = levels?;
    if too_many(reader, count_place, levels) {
        return None;
    }
    let size = levels as usize;
    let bend = node.get("anharmonicity").cloned();
    if size > 2 && bend.is_none() {
        let why = Some("Beyond two levels it decides every higher gap; 0 Hz makes the ladder harmonic.".to_string());
        let fault = Fault::MissingKey {
            key: "anharmonicity".to_string(),
            section: section.to_string(),
            write: "anharmonicity: -240 MHz".to_string(),
            why,
        };
        reader.error(node.place, fault);
    }
    let names: Vec<String> = (0..size).map(|n| n.to_string()).collect();
    let sources = (0..size).map(LevelSource::Rung).collect();
    let harmless = bend.is_none() && size <= 2;
    // with two levels the bend is read all the same, so that a slip in it is found
    if let (Some(bend), true) = (&bend, size <= 2) {
        reader.energy(bend, &format!("{section} / anharmonicity"));
    }
    reader.define_levels(names.clone(), sources, Rungs { first, bend: bend.clone() });
    let rungs = read_rungs(reader, node, size, section);
    if bend.is_none() && !harmless {
        return None;
    }
    let entries = diagonal(reader, size, |_| place)?;
    Some(System { place: node.place, kind: "ladder", names, entries, physics: Physics::Ladder(rungs?) })
}

/// Relative couplings of the rungs, from `couplings_grow`.
fn read_rungs(reader: &mut Reader, node: &Node, size: usize, section: &str) -> Option<Vec<Register>> {
    let grow = reader.need(node, "couplings_grow", section, "sqrt")?;
    if let Some(items) = grow.items() {
        if items.len() != size - 1 {
            let expected = format!("a list of {} relative sizes, one for each step of the ladder", size - 1);
            reader.error(
                grow.place,
                Fault::Shape { what: "couplings_grow".to_string(), expected, example: "couplings_grow: sqrt".to_string() },
            );
            return None;
        }
        return items.iter().map(|item| reader.plain(item, "a relative coupling").map(|quantity| quantity.register)).collect();
    }
    reader.word(grow, "couplings_grow", &[("sqrt", ())])?;
    Some((1..size).map(|n| reader.constant((n as f64).sqrt(), grow.place)).collect())
}

fn read_hamiltonian(reader: &mut Reader, node: &Node, _place: Place, section: &str) -> Option<System> {
    reader.fields(node, section, &["names", "unit", "rows", "rows_from", "lower"], &[])?;
    let names_node = reader.need(node, "names", section, "[left, right]");
    let unit = reader.need(node, "unit", section, "MHz").and_then(|unit| reader.energy_unit(unit, &format!("{section} / unit")));
    let mut names = Vec::new();
    for item in names_node.and_then(|names| reader.list(names, "names", "[left, right]")).unwrap_or_default() {
        let name = reader.text(item, "the name of a level", "left").unwrap_or_default().to_string();
        if names.contains(&name) {
            reader.error(item.place, Fault::SameLevel { name: name.clone() });
        }
        names.push(name);
    }
    if let (Some(names_node), true) = (names_node, names.is_empty()) {
        reader.error(names_node.place, Fault::EmptySystem { what: "names".to_string() });
    }
    let size = names.len();
    if size == 0 || too_many(reader, node.place, size as f64) {
        return None;
    }
    warn_of_case(reader, "level", &names, node.place);
    let mirror = matrix::mirrored(reader, node, section);
    let unit = unit?;
    match matrix::rows(reader, node, section)? {
        Rows::Binary(rows, place) => {
            let sources =
                (0..size).map(|k| LevelSource::Value(rows.get(k).and_then(|row| row.get(k)).map_or(0.0, |v| v.0 * unit), place)).collect();
            reader.define_levels(names.clone(), sources, Rungs::default());
            let entries = matrix::binary_entries(reader, &rows, size, unit, place)?;
            hermitian(reader, &names, &entries, unit)?;
            Some(System::typed(node.place, "hamiltonian", names, entries))
        }
        Rows::Text(rows) => {
            let rows_place = node.get("rows").map_or(node.place, |rows| rows.place);
            let cells = matrix::cells(reader, &rows, size, mirror, rows_place);
            let Some(cells) = cells else {
                // the names are known all the same, so that the other sections can be judged
                reader.define_levels(names, Vec::new(), Rungs::default());
                return None;
            };
            let sources: Vec<LevelSource> = cells
                .iter()
                .filter(|(row, column, _)| row == column)
                .map(|(.., cell)| LevelSource::Written((*cell).clone(), Some(unit)))
                .collect();
            reader.define_levels(names.clone(), sources, Rungs::default());
            let mut entries = Vec::new();
            let mut good = true;
            for (row, column, cell) in cells {
                if row != column && cell.text() == Some("0") {
                    continue;
                }
                if row == column && !cell.text().is_some_and(|text| text.contains('i')) {
                    match reader.level_energy(row) {
                        Some(re) => entries.push(MatrixEntry { row, column, value: ComplexQuantity { re, im: None, place: cell.place } }),
                        None => good = false,
                    }
                    continue;
                }
                match reader.energy_entry(cell, "an entry of the Hamiltonian", Some(unit)) {
                    Some(value) => entries.push(MatrixEntry { row, column, value }),
                    None => good = false,
                }
            }
            if !good {
                return None;
            }
            if mirror {
                matrix::mirror_entries(reader, &mut entries);
            }
            hermitian(reader, &names, &entries, unit)?;
            Some(System::typed(node.place, "hamiltonian", names, entries))
        }
    }
}

/// Reports the first pair of entries that are not complex conjugates, with the numbers as written.
fn hermitian(reader: &mut Reader, names: &[String], entries: &[MatrixEntry], unit: f64) -> Option<()> {
    let values = reader.tape.as_written();
    let value = |entry: &MatrixEntry| (values[entry.value.re as usize], entry.value.im.map_or(0.0, |im| values[im as usize]));
    let largest = entries.iter().map(|entry| value(entry).0.hypot(value(entry).1)).fold(0.0, f64::max);
    let by_cell: std::collections::HashMap<(usize, usize), &MatrixEntry> =
        entries.iter().map(|entry| ((entry.row, entry.column), entry)).collect();
    let words = |(re, im): (f64, f64)| match (re == 0.0, im == 0.0) {
        (_, true) => short_with_unit(re, "Hz"),
        (true, _) => format!("{} i", short_with_unit(im, "Hz")),
        _ => format!("{} {} {} i", short_with_unit(re, "Hz"), if im < 0.0 { '-' } else { '+' }, short_with_unit(im.abs(), "Hz")),
    };
    for entry in entries.iter().filter(|entry| entry.row <= entry.column) {
        let upper = value(entry);
        let partner = by_cell.get(&(entry.column, entry.row));
        let lower = partner.map_or((0.0, 0.0), |partner| value(partner));
        if (upper.0 - lower.0).hypot(upper.1 + lower.1) > 1e-12 * largest {
            let line = entry.value.place.line;
            // a lower entry written as 0 is not among the entries; its line is that of its row
            let lower_place = partner.map_or(entry.value.place, |partner| partner.value.place);
            let lower_line = partner.map_or(line + (entry.column - entry.row) as u32, |partner| partner.value.place.line);
            let (re, im) = (upper.0 / unit, -upper.1 / unit);
            let text = match (re == 0.0, im == 0.0) {
                (_, true) => super::messages::short(re),
                (true, _) => format!("{}i", super::messages::short(im)),
                _ => format!("{} {} {}i", super::messages::short(re), if im < 0.0 { '-' } else { '+' }, super::messages::short(im.abs())),
            };
            let write = if entry.row == entry.column {
                format!("{}      (a diagonal entry is real)", super::messages::short(re))
            } else {
                format!("{text} as entry {} of row {} (line {lower_line})", entry.row + 1, entry.column + 1)
            };
            let (row, column) = (names[entry.row].clone(), names[entry.column].clone());
            let fault = Fault::NotHermitian { row, column, upper: words(upper), lower: words(lower), lines: [line, lower_line], write };
            reader.error(if line <= lower_place.line { entry.value.place } else { lower_place }, fault);
            return None;
        }
    }
    // an entry below the diagonal without a partner above
    for entry in entries.iter().filter(|entry| entry.row > entry.column && !by_cell.contains_key(&(entry.column, entry.row))) {
        let lower = value(entry);
        if lower.0.hypot(lower.1) > 1e-12 * largest {
            let (row, column) = (names[entry.column].clone(), names[entry.row].clone());
            let line = entry.value.place.line;
            let fault = Fault::NotHermitian {
                row,
                column,
                upper: words((0.0, 0.0)),
                lower: words(lower),
                lines: [line.saturating_sub((entry.row - entry.column) as u32).max(1), line],
                write: "the complex conjugate in its place above the diagonal".to_string(),
            };
            reader.error(entry.value.place, fault);
            return None;
        }
    }
    Some(())
}

/// The operators that come with a system.
pub fn natural_operators(system: &System) -> impl Iterator<Item = Operator> + '_ {
    system.operators().into_iter().map(|name| Operator { name, place: system.place, source: OperatorSource::Natural })
}

/// Warns of two names that differ only by case.
pub fn warn_of_case(reader: &mut Reader, kind: &'static str, names: &[String], place: Place) {
    for (k, name) in names.iter().enumerate() {
        if let Some(other) = names[..k].iter().find(|other| other.to_lowercase() == name.to_lowercase()) {
            reader.warn(place, Fault::SameButForCase { kind, name: other.clone(), other: name.clone() });
        }
    }
}

/// One operator: typed rows, or a differential operator; what cannot be read has no entries.
fn read_operator(reader: &mut Reader, node: &Node, section: &str, system: &System, [built, working]: [usize; 2]) -> OperatorSource {
    let nothing = OperatorSource::Typed(Vec::new());
    if reader.fields(node, section, &["rows", "rows_from", "lower", "in", "derivatives", "displacement"], &[]).is_none() {
        return nothing;
    }
    if let Some(displacement) = node.get("displacement") {
        if reader.one_of(node, &["rows", "rows_from", "derivatives", "displacement"], section, None).is_none() {
            return nothing;
        }
        return read_displacement(reader, displacement, &format!("{section} / displacement"), system).unwrap_or(nothing);
    }
    if let Some(derivatives) = node.get("derivatives") {
        if reader.one_of(node, &["rows", "rows_from", "derivatives"], section, None).is_none() {
            return nothing;
        }
        let Some(variable) = system.variable() else {
            reader.error(derivatives.place, Fault::NoVariable { kind: system.kind });
            return nothing;
        };
        let differential = read_differential(reader, derivatives, &format!("{section} / derivatives"), variable, None);
        return differential.map_or(nothing, OperatorSource::Differential);
    }
    let as_built = match node.get("in") {
        Some(word) => reader.word(word, &format!("{section} / in"), &[("as built", true)]).unwrap_or(false),
        None => false,
    };
    let entries = matrix::plain_matrix(reader, node, section, if as_built { built } else { working }).unwrap_or_default();
    if as_built {
        OperatorSource::AsBuilt(entries)
    } else {
        OperatorSource::Typed(entries)
    }
}

/// `displacement: {of: mode, by: 0.4}`.
fn read_displacement(reader: &mut Reader, node: &Node, section: &str, system: &System) -> Option<OperatorSource> {
    reader.fields(node, section, &["of", "by"], &[])?;
    let modes: Vec<String> = system.acting().into_iter().map(|(name, _)| name).filter(|name| system.kind_of(name) == "mode").collect();
    let of = reader.need(node, "of", section, "mode").and_then(|of| reader.name_among(of, "mode", &modes));
    let by = reader.need(node, "by", section, "0.4").and_then(|by| reader.plain_entry(by, &format!("{section} / by")));
    Some(OperatorSource::Displacement { of: modes[of?].clone(), by: by? })
}

/// Reads `operators:`; an operator that cannot be read leaves its name with no entries. `sizes` are the numbers of states as built and
/// of the working basis.
pub fn read_operators(reader: &mut Reader, node: &Node, system: &System, sizes: [usize; 2]) -> Vec<Operator> {
    let Some(entries) = node.entries() else {
        let fault = Fault::Shape {
            what: "operators".to_string(),
            expected: "a block of names".to_string(),
            example: "x: {rows: [[0, 1], [1, 0]]}".to_string(),
        };
        reader.error(node.place, fault);
        return Vec::new();
    };
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    warn_of_case(reader, "operator", &names, node.place);
    let mut found = Vec::new();
    let taken = system.operators();
    for entry in entries {
        let section = format!("operators / {}", entry.key);
        if taken.contains(&entry.key) {
            let reason = format!("it is an operator of the {}", system.kind);
            reader.error(entry.place, Fault::NameNotFree { name: entry.key.clone(), reason });
            continue;
        }
        let source = read_operator(reader, &entry.value, &section, system, sizes);
        found.push(Operator { name: entry.key.clone(), place: entry.place, source });
    }
    found
}

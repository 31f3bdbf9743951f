//! What every section reader uses: keys of a block, named numbers compiled on demand, values with their dimension checked, names
//! with a near guess. Mistakes are collected, never thrown, so that one pass finds them all.

use std::collections::{HashMap, HashSet};
use std::path::PathBuf;

use super::expression::{self, Expression};
use super::messages::{Fault, Mistake, MOST_KEPT};
use super::place::{Place, Sources};
use super::tape::{Entry as TapeEntry, Formula, One, Register, Tape, Two};
use super::tree::{Entry, Kind, Node};
use crate::units::{self, Dim};

/// A value of the config: the register that holds it, and where it stands.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Quantity {
    /// Register of the tape, in SI (angles in turns, energies in Hz).
    pub register: Register,
    /// Where it stands.
    pub place: Place,
}

/// A complex entry of a matrix.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ComplexQuantity {
    /// Real part.
    pub re: Register,
    /// Imaginary part, if any was written.
    pub im: Option<Register>,
    /// Where it stands.
    pub place: Place,
}

/// A formula of the final quantities of a run and of named numbers.
#[derive(Debug, Clone)]
pub struct Derived {
    /// The formula; outer registers from [`FIRST_FINAL`] down are the `finals`.
    pub formula: Formula,
    /// The final quantities it reads, by name, and where.
    pub finals: Vec<(String, Place)>,
    /// Its dimension.
    pub dim: Dim,
}

/// The outer register that stands for the first final quantity of a [`Derived`] formula; the others follow downwards.
pub const FIRST_FINAL: Register = Register::MAX;

impl Derived {
    /// Its value in SI; `values` are the registers of the tape, `finals` the quantities it reads, in their order.
    pub fn value(&self, values: &[f64], finals: &[f64]) -> f64 {
        self.formula.value(|outer| {
            let k = (FIRST_FINAL - outer) as usize;
            finals.get(k).copied().unwrap_or_else(|| values[outer as usize])
        })
    }
}

/// A named number.
#[derive(Debug, Clone)]
pub struct NamedNumber {
    /// Its name.
    pub name: String,
    /// Where the name stands.
    pub place: Place,
    /// Register that holds its value.
    pub register: Register,
    /// Its dimension.
    pub dim: Dim,
}

/// What is known of a value before it has one.
#[derive(Debug, Clone, Copy)]
struct Known {
    re: Register,
    im: Option<Register>,
    dim: Dim,
    /// Made of the Hz family: angles are already counted in turns.
    cyclic: bool,
    /// Contains pi as a factor.
    pi: bool,
    /// A voltage that does not say peak, rms or peak_to_peak.
    bare_volts: bool,
    /// A ratio of powers in dB.
    power_ratio: bool,
    /// The number, written without a unit, that this plain value comes from.
    unitless: Option<usize>,
    /// Its value, where no named number enters.
    constant: Option<f64>,
}

#[derive(Debug, Clone, Copy)]
enum State {
    Waiting,
    Active,
    Done(Option<Known>),
}

struct Number {
    name: String,
    key: Place,
    value: Node,
    parsed: Option<Expression>,
    state: State,
    used: bool,
}

/// Where the energy of a level comes from, read when first asked for.
#[derive(Debug, Clone)]
pub enum LevelSource {
    /// An entry of `levels:` or of the diagonal of a matrix; bare numbers get the unit.
    Written(Node, Option<EnergyUnit>),
    /// Rung n of a ladder: n first + n (n - 1)/2 bend.
    Rung(usize),
    /// A plain value in Hz, from a binary file.
    Value(f64, Place),
    /// Level n of a system that `model` builds.
    Built(usize),
}

/// The unit that bare entries of a matrix get: a factor to Hz.
pub type EnergyUnit = f64;

struct Level {
    name: String,
    source: LevelSource,
    energy: Option<Option<Register>>,
    active: bool,
}

/// The bottom two values of a ladder.
#[derive(Debug, Clone, Default)]
pub struct Rungs {
    /// First gap.
    pub first: Option<Node>,
    /// Second gap minus first.
    pub bend: Option<Node>,
}

/// The state of one reading.
pub struct Reader {
    /// Files read so far.
    pub sources: Sources,
    /// Mistakes found so far.
    pub mistakes: Vec<Mistake>,
    /// Arithmetic so far.
    pub tape: Tape,
    /// Folder of the config, where the files it names lie.
    pub folder: PathBuf,
    /// Where a result folder keeps its inputs, if it is one that is read.
    pub archive: Option<PathBuf>,
    /// Defaults used: path of keys, value.
    pub defaults: Vec<(String, String)>,
    /// Whether only the system is wanted: a sequence and a start may then be left out.
    pub system_alone: bool,
    /// Levels that the file names somewhere, in the order met.
    pub named_levels: Vec<usize>,
    /// Levels of which the energies are recorded.
    pub recorded_levels: Vec<usize>,
    /// Whether nothing but levels of the static system is recorded, and nothing happens to it.
    pub levels_alone: bool,
    /// Parts of the system with the names of their levels; none where it has no parts.
    pub parts: Vec<(String, Vec<String>)>,
    /// Whether the working basis is the one as built.
    pub as_built: bool,
    /// Whether the system could be read, so that its operators are known.
    pub system_read: bool,
    /// Registers whose value shaped the reading itself: counts of levels and repeats.
    pub structural: Vec<Register>,
    numbers: Vec<Number>,
    by_name: HashMap<String, usize>,
    stack: Vec<usize>,
    levels: Vec<Level>,
    rungs: Rungs,
    rung_registers: Option<[Option<Register>; 2]>,
    reported_unitless: HashSet<usize>,
    millihertz: Vec<(Place, String)>,
    kilohertz: bool,
    /// While a derived formula is compiled: names in it that are no numbers, and so final quantities.
    finals: Option<Vec<(String, Place)>>,
}

/// What is being read: where its text stands and what it may contain.
struct Scope {
    place: Place,
    exact: bool,
    complex: bool,
    formula: Option<Tape>,
    /// What the formula is one of, where that is not the time.
    variable: Option<(String, Dim)>,
}

impl Reader {
    /// A reader of the files in `sources`, the config first.
    pub fn new(sources: Sources, folder: PathBuf) -> Reader {
        Reader {
            sources,
            mistakes: Vec::new(),
            tape: Tape::default(),
            folder,
            archive: None,
            defaults: Vec::new(),
            system_alone: false,
            named_levels: Vec::new(),
            recorded_levels: Vec::new(),
            levels_alone: false,
            parts: Vec::new(),
            as_built: true,
            system_read: true,
            structural: Vec::new(),
            numbers: Vec::new(),
            by_name: HashMap::new(),
            stack: Vec::new(),
            levels: Vec::new(),
            rungs: Rungs::default(),
            rung_registers: None,
            reported_unitless: HashSet::new(),
            millihertz: Vec::new(),
            kilohertz: false,
            finals: None,
        }
    }

    /// The path of a file that the config names: beside the config.
    pub fn beside(&self, name: &str) -> PathBuf {
        match &self.archive {
            Some(folder) => folder.join(archived(std::path::Path::new(name))),
            None => self.folder.join(name),
        }
    }

    /// Notes an error.
    pub fn error(&mut self, place: Place, fault: Fault) {
        if self.mistakes.len() < MOST_KEPT {
            self.mistakes.push(Mistake::error(place, fault));
        }
    }

    /// Notes a warning.
    pub fn warn(&mut self, place: Place, fault: Fault) {
        // half of the room is left for errors, so that none goes unseen for warnings
        if self.mistakes.len() < MOST_KEPT / 2 {
            self.mistakes.push(Mistake::warning(place, fault));
        }
    }

    /// Notes a default that was used.
    pub fn default(&mut self, path: impl Into<String>, value: impl Into<String>) {
        self.defaults.push((path.into(), value.into()));
    }

    // ---------------------------------------------------------------- keys

    /// The entries of a block whose keys are all `known`; others are reported. `hints` explains keys of other traditions.
    pub fn fields<'n>(&mut self, node: &'n Node, section: &str, known: &[&str], hints: &[(&str, &str)]) -> Option<&'n [Entry]> {
        let Some(entries) = node.entries() else {
            let example = format!("{}: value", known.first().unwrap_or(&"key"));
            self.error(node.place, Fault::Shape { what: section.to_string(), expected: "a block of keys and values".to_string(), example });
            return None;
        };
        for (k, entry) in entries.iter().enumerate() {
            if known.contains(&entry.key.as_str()) {
                continue;
            }
            if let Some(cut) = cut_before(&entries[..k], &entry.key) {
                let text = cut.text().unwrap_or_default().to_string();
                self.error(cut.place, Fault::CutAtComma { text });
                continue;
            }
            let hint = hints.iter().find(|(key, _)| *key == entry.key).map(|(_, hint)| (*hint).to_string());
            let fault = Fault::UnknownKey {
                key: entry.key.clone(),
                section: section.to_string(),
                near: near(&entry.key, known.iter().copied()),
                known: known.iter().map(|key| (*key).to_string()).collect(),
                hint,
            };
            self.error(entry.place, fault);
        }
        Some(entries)
    }

    /// The value of a key that must be there.
    pub fn need<'n>(&mut self, node: &'n Node, key: &str, section: &str, example: &str) -> Option<&'n Node> {
        match node.get(key) {
            Some(value) if !value.is_empty() => Some(value),
            Some(value) => {
                let fault = Fault::Shape {
                    what: format!("{section} / {key}"),
                    expected: "given a value".to_string(),
                    example: format!("{key}: {example}"),
                };
                self.error(value.place, fault);
                None
            }
            None => {
                let fault =
                    Fault::MissingKey { key: key.to_string(), section: section.to_string(), write: format!("{key}: {example}"), why: None };
                self.error(node.place, fault);
                None
            }
        }
    }

    /// The one entry among `keys`; none or a second is an error.
    pub fn one_of<'n>(&mut self, node: &'n Node, keys: &[&str], section: &str, hint: Option<&str>) -> Option<&'n Entry> {
        let found: Vec<&Entry> = node.entries()?.iter().filter(|entry| keys.contains(&entry.key.as_str())).collect();
        match found.as_slice() {
            [one] => Some(one),
            [] => {
                let fault = Fault::OneOfMissing {
                    keys: keys.iter().map(|key| (*key).to_string()).collect(),
                    section: section.to_string(),
                    hint: hint.map(str::to_string),
                };
                self.error(node.place, fault);
                None
            }
            [_, second, ..] => {
                let fault = Fault::OneOf {
                    found: found.iter().map(|entry| entry.key.clone()).collect(),
                    lines: found.iter().map(|entry| entry.place.line).collect(),
                    section: section.to_string(),
                };
                self.error(second.place, fault);
                None
            }
        }
    }

    /// A scalar's text; lists and blocks are reported.
    pub fn text<'n>(&mut self, node: &'n Node, what: &str, example: &str) -> Option<&'n str> {
        match node.text() {
            Some(text) if !node.is_empty() => Some(text),
            _ => {
                self.error(
                    node.place,
                    Fault::Shape { what: what.to_string(), expected: "a single value".to_string(), example: example.to_string() },
                );
                None
            }
        }
    }

    /// A list; a single value is reported.
    pub fn list<'n>(&mut self, node: &'n Node, what: &str, example: &str) -> Option<&'n [Node]> {
        let items = node.items();
        if items.is_none() {
            self.error(node.place, Fault::Shape { what: what.to_string(), expected: "a list".to_string(), example: example.to_string() });
        }
        items
    }

    /// One of a set of words.
    pub fn word<T: Copy>(&mut self, node: &Node, what: &str, words: &[(&str, T)]) -> Option<T> {
        let text = self.text(node, what, words.first().map_or("", |(word, _)| *word))?;
        let found = words.iter().find(|(word, _)| *word == text).map(|(_, value)| *value);
        if found.is_none() {
            let fault = Fault::UnknownWord {
                what: what.to_string(),
                found: text.to_string(),
                known: words.iter().map(|(word, _)| (*word).to_string()).collect(),
                near: near(text, words.iter().map(|(word, _)| *word)),
                hint: None,
            };
            self.error(node.place, fault);
        }
        found
    }

    /// `true` or `false`.
    pub fn truth(&mut self, node: &Node, what: &str) -> Option<bool> {
        self.word(node, what, &[("true", true), ("false", false)])
    }

    /// The index of a name among `known`; `kind` names the sort of thing in the message.
    pub fn name_among(&mut self, node: &Node, kind: &'static str, known: &[String]) -> Option<usize> {
        let text = self.text(node, &format!("the name of a {kind}"), "a name")?;
        let found = known.iter().position(|name| name == text);
        if found.is_none() {
            self.unknown(node.place, kind, text, known);
        }
        found
    }

    /// Reports an unknown name.
    pub fn unknown(&mut self, place: Place, kind: &'static str, text: &str, known: &[String]) {
        // an operator of a system that could not be read is no second mistake
        if kind == "operator" && !self.system_read {
            return;
        }
        let near = near(text, known.iter().map(String::as_str));
        self.error(place, Fault::UnknownName { kind, found: text.to_string(), near, known: known.to_vec() });
    }

    // ---------------------------------------------------------------- numbers

    /// Takes up the named numbers of a block; `set` replaces some by other texts.
    pub fn define_numbers(&mut self, node: &Node) {
        let Some(entries) = node.entries() else {
            if !node.is_empty() {
                let fault = Fault::Shape {
                    what: "numbers".to_string(),
                    expected: "a block of names and values".to_string(),
                    example: "rabi: 2.5 MHz".to_string(),
                };
                self.error(node.place, fault);
            }
            return;
        };
        for entry in entries {
            if let Some(reason) = not_free(&entry.key) {
                self.error(entry.place, Fault::NameNotFree { name: entry.key.clone(), reason });
            }
            if let Some(first) = self.by_name.get(&entry.key) {
                let first = self.numbers[*first].key.line;
                self.error(entry.place, Fault::DuplicateKey { key: entry.key.clone(), first });
                continue;
            }
            if let Some(other) = self.numbers.iter().find(|number| number.name.to_lowercase() == entry.key.to_lowercase()) {
                let fault = Fault::SameButForCase { kind: "number", name: entry.key.clone(), other: other.name.clone() };
                self.warn(entry.place, fault);
            }
            self.by_name.insert(entry.key.clone(), self.numbers.len());
            self.numbers.push(Number {
                name: entry.key.clone(),
                key: entry.place,
                value: entry.value.clone(),
                parsed: None,
                state: State::Waiting,
                used: false,
            });
        }
    }

    /// Replaces the written value of a number, for `--set`; false if there is none of that name.
    pub fn set_number(&mut self, name: &str, value: Node) -> bool {
        match self.by_name.get(name) {
            Some(index) => {
                self.numbers[*index].value = value;
                self.numbers[*index].used = true;
                true
            }
            None => false,
        }
    }

    /// The number that a noise entry moves, and its dimension. To be moved is no use: a number that nothing else names stays unused.
    pub fn moved(&mut self, node: &Node) -> Option<(super::noise::Moved, Dim)> {
        let name = self.text(node, "moves", "moves: drift")?.to_string();
        let Some(index) = self.by_name.get(&name).copied() else {
            let names = self.number_names();
            self.unknown(node.place, "number", &name, &names);
            return None;
        };
        let used = self.numbers[index].used;
        let known = self.number(index);
        self.numbers[index].used = used;
        known.map(|known| (super::noise::Moved { index: index as u32, name }, known.dim))
    }

    /// Names of all numbers, as written.
    pub fn number_names(&self) -> Vec<String> {
        self.numbers.iter().map(|number| number.name.clone()).collect()
    }

    /// The dimension of a number; asking for it does not count as a use.
    pub fn number_dim(&mut self, name: &str) -> Option<Dim> {
        let index = *self.by_name.get(name)?;
        let used = self.numbers[index].used;
        let known = self.number(index);
        self.numbers[index].used = used;
        known.map(|known| known.dim)
    }

    /// Compiles what no section asked for, warns of unused numbers, and hands all numbers over.
    pub fn finish_numbers(&mut self) -> Vec<NamedNumber> {
        for index in 0..self.numbers.len() {
            let used = self.numbers[index].used;
            self.number(index);
            if !used {
                let (place, name) = (self.numbers[index].key, self.numbers[index].name.clone());
                self.numbers[index].used = false;
                self.warn(place, Fault::Unused { kind: "number", name });
            }
        }
        if self.kilohertz {
            for (place, text) in std::mem::take(&mut self.millihertz) {
                self.warn(place, Fault::Milli { text });
            }
        }
        self.numbers
            .iter()
            .filter_map(|number| match number.state {
                State::Done(Some(known)) => {
                    Some(NamedNumber { name: number.name.clone(), place: number.key, register: known.re, dim: known.dim })
                }
                _ => None,
            })
            .collect()
    }

    fn number(&mut self, index: usize) -> Option<Known> {
        self.numbers[index].used = true;
        match self.numbers[index].state {
            State::Done(known) => return known,
            State::Active => {
                let from = self.stack.iter().position(|on| *on == index).unwrap_or(0);
                let ring: Vec<usize> = self.stack[from..].iter().copied().chain([index]).collect();
                let chain = ring.iter().map(|on| (self.numbers[*on].name.clone(), self.numbers[*on].key.line)).collect();
                let place = self.numbers[index].value.place;
                self.error(place, Fault::Circle { chain });
                return None;
            }
            State::Waiting => {}
        }
        self.numbers[index].state = State::Active;
        self.stack.push(index);
        let value = self.numbers[index].value.clone();
        let name = self.numbers[index].name.clone();
        let known = self.parsed(&value, &format!("numbers / {name}")).and_then(|expression| {
            let mut scope = scope_of(&value, false);
            let known = self.compile(&expression, &mut scope);
            self.numbers[index].parsed = Some(expression);
            known
        });
        self.stack.pop();
        let known = known.map(|known| {
            let register = self.tape.push(TapeEntry::Number(index as u32, known.re), value.place);
            let literal =
                self.numbers[index].parsed.as_ref().is_some_and(|e| matches!(e.kind, expression::Kind::Number { plain: true, .. }));
            Known { re: register, unitless: if literal { Some(index) } else { known.unitless }, constant: None, ..known }
        });
        self.numbers[index].state = State::Done(known);
        known
    }

    // ---------------------------------------------------------------- values

    fn parsed(&mut self, node: &Node, what: &str) -> Option<Expression> {
        let text = self.text(node, what, "a value with its unit")?;
        match expression::parse(text) {
            Ok(expression) => Some(expression),
            Err((start, length, fault)) => {
                let scope = scope_of(node, false);
                let open = text.matches('(').count() > text.matches(')').count();
                let fault = if open && matches!(fault, Fault::Syntax { .. }) && !matches!(node.kind, Kind::Scalar { quoted: true, .. }) {
                    Fault::CutAtComma { text: text.to_string() }
                } else {
                    fault
                };
                let place = if matches!(fault, Fault::CutAtComma { .. }) { node.place } else { scope.part(start, length) };
                self.error(place, fault);
                None
            }
        }
    }

    fn known(&mut self, node: &Node, what: &str) -> Option<Known> {
        let expression = self.parsed(node, what)?;
        self.compile(&expression, &mut scope_of(node, false))
    }

    /// A value of dimension `wanted`.
    pub fn quantity(&mut self, node: &Node, what: &str, wanted: Dim) -> Option<Quantity> {
        let known = self.known(node, what)?;
        self.fits(&known, node, what, wanted)?;
        Some(Quantity { register: known.re, place: node.place })
    }

    /// A value of whatever dimension, with it.
    pub fn quantity_of_any_dimension(&mut self, node: &Node, what: &str) -> Option<(Quantity, Dim)> {
        let known = self.known(node, what)?;
        Some((Quantity { register: known.re, place: node.place }, known.dim))
    }

    /// A plain number.
    pub fn plain(&mut self, node: &Node, what: &str) -> Option<Quantity> {
        self.quantity(node, what, Dim::NONE)
    }

    /// A voltage that says peak, rms or peak_to_peak.
    pub fn sine_volts(&mut self, node: &Node, what: &str) -> Option<Quantity> {
        let known = self.known(node, what)?;
        self.fits(&known, node, what, Dim::VOLTAGE)?;
        if known.bare_volts {
            let volts = self.value_now(known.re);
            let text = node.text().unwrap_or_default().to_string();
            self.error(node.place, Fault::BareVolts { text, volts });
            return None;
        }
        Some(Quantity { register: known.re, place: node.place })
    }

    /// An energy in Hz: the Hz family, eV, J, cm^-1, or kelvin; a bare number gets `unit` where there is one.
    fn energy_known(&mut self, known: Known, node: &Node, what: &str, unit: Option<EnergyUnit>) -> Option<Known> {
        let factor = match (known.dim, unit) {
            (Dim::FREQUENCY, _) => return Some(known),
            (Dim::TEMPERATURE, _) => units::HZ_PER_KELVIN,
            (Dim::NONE, Some(unit)) => unit,
            (Dim::NONE, None) if known.constant == Some(0.0) && known.im.is_none() => return Some(known),
            _ => {
                self.fits(&known, node, what, Dim::FREQUENCY)?;
                return None;
            }
        };
        let factor = self.tape.push(TapeEntry::Constant(factor), node.place);
        let re = self.tape.push(TapeEntry::Two(Two::Multiply, known.re, factor), node.place);
        let im = known.im.map(|im| self.tape.push(TapeEntry::Two(Two::Multiply, im, factor), node.place));
        Some(Known { re, im, dim: Dim::FREQUENCY, ..known })
    }

    /// A level energy or gap, in Hz.
    pub fn energy(&mut self, node: &Node, what: &str) -> Option<Quantity> {
        let known = self.known(node, what)?;
        if known.dim == Dim::NONE {
            self.fits(&known, node, what, Dim::FREQUENCY)?;
        }
        let known = self.energy_known(known, node, what, None)?;
        Some(Quantity { register: known.re, place: node.place })
    }

    /// An entry of a Hamiltonian in Hz; bare numbers get the unit of the matrix.
    pub fn energy_entry(&mut self, node: &Node, what: &str, unit: Option<EnergyUnit>) -> Option<ComplexQuantity> {
        let expression = self.parsed(node, what)?;
        let known = self.compile(&expression, &mut scope_of(node, true))?;
        let known = self.energy_known(known, node, what, unit)?;
        Some(ComplexQuantity { re: known.re, im: known.im, place: node.place })
    }

    /// An entry of a matrix without dimension.
    pub fn plain_entry(&mut self, node: &Node, what: &str) -> Option<ComplexQuantity> {
        let expression = self.parsed(node, what)?;
        let known = self.compile(&expression, &mut scope_of(node, true))?;
        self.fits(&known, node, what, Dim::NONE)?;
        Some(ComplexQuantity { re: known.re, im: known.im, place: node.place })
    }

    /// The factor of a unit of energy written alone, as in `unit: MHz`.
    pub fn energy_unit(&mut self, node: &Node, what: &str) -> Option<EnergyUnit> {
        let text = self.text(node, what, "MHz")?;
        let number = format!("1 {text}");
        let dim_and_value = match expression::parse(&number) {
            Ok(Expression { kind: expression::Kind::Number { value, dim, .. }, .. }) => Some((dim, value)),
            Ok(_) => None,
            Err((_, _, fault)) => {
                self.error(node.place, fault);
                return None;
            }
        };
        match dim_and_value {
            Some((Dim::FREQUENCY, factor)) => Some(factor),
            Some((Dim::TEMPERATURE, factor)) => Some(factor * units::HZ_PER_KELVIN),
            Some((found, _)) => {
                self.error(
                    node.place,
                    Fault::WrongDim {
                        what: what.to_string(),
                        wanted: Dim::FREQUENCY,
                        found,
                        defined: None,
                        write: Some("unit: MHz".to_string()),
                    },
                );
                None
            }
            None => {
                self.error(
                    node.place,
                    Fault::Shape { what: what.to_string(), expected: "a unit of energy".to_string(), example: "unit: MHz".to_string() },
                );
                None
            }
        }
    }

    /// A whole number from `from` up, needed while reading: a count of levels or of repeats.
    pub fn whole(&mut self, node: &Node, what: &str, from: f64) -> Option<f64> {
        let quantity = self.plain(node, what)?;
        let value = self.value_now(quantity.register);
        self.structural.push(quantity.register);
        if !(value.is_finite() && value == value.round() && value >= from) {
            self.error(node.place, Fault::NotWhole { what: what.to_string(), found: value, from });
            return None;
        }
        Some(value)
    }

    /// A plain constant known while reading.
    pub fn plain_value(&mut self, node: &Node, what: &str) -> Option<f64> {
        let quantity = self.plain(node, what)?;
        self.structural.push(quantity.register);
        Some(self.value_now(quantity.register))
    }

    /// A formula of t of dimension `wanted`.
    pub fn formula(&mut self, node: &Node, what: &str, wanted: Dim) -> Option<Formula> {
        let expression = self.parsed(node, what)?;
        let mut scope = Scope { formula: Some(Tape::default()), ..scope_of(node, false) };
        let known = self.compile(&expression, &mut scope)?;
        self.fits(&known, node, what, wanted)?;
        Some(Formula { tape: scope.formula.unwrap_or_default(), result: known.re, place: node.place })
    }

    /// A formula of another variable than the time, of any dimension, with its dimension.
    pub fn formula_in(&mut self, node: &Node, what: &str, variable: &str, dim: Dim) -> Option<(Formula, Dim)> {
        let (re, im, dim) = self.complex_formula_in(node, what, variable, dim, false)?;
        debug_assert!(im.is_none());
        Some((re, dim))
    }

    /// The same of dimension `wanted`.
    pub fn formula_in_as(&mut self, node: &Node, what: &str, variable: (&str, Dim), wanted: Dim) -> Option<Formula> {
        let expression = self.parsed(node, what)?;
        let mut scope = formula_scope(node, variable, false);
        let known = self.compile(&expression, &mut scope)?;
        self.fits(&known, node, what, wanted)?;
        Some(Formula { tape: scope.formula.unwrap_or_default(), result: known.re, place: node.place })
    }

    /// Real and imaginary part of a formula of another variable, with its dimension.
    pub fn complex_formula_in(
        &mut self,
        node: &Node,
        what: &str,
        variable: &str,
        dim: Dim,
        complex: bool,
    ) -> Option<(Formula, Option<Formula>, Dim)> {
        let expression = self.parsed(node, what)?;
        let mut scope = formula_scope(node, (variable, dim), complex);
        let known = self.compile(&expression, &mut scope)?;
        let tape = scope.formula.unwrap_or_default();
        let im = known.im.map(|im| Formula { tape: tape.clone(), result: im, place: node.place });
        Some((Formula { tape, result: known.re, place: node.place }, im, known.dim))
    }

    /// A formula of final quantities and named numbers, of any dimension; names that are no numbers are taken for final quantities.
    pub fn derived(&mut self, node: &Node, what: &str) -> Option<Derived> {
        let expression = self.parsed(node, what)?;
        let mut scope = Scope { formula: Some(Tape::default()), ..scope_of(node, false) };
        self.finals = Some(Vec::new());
        let known = self.compile(&expression, &mut scope);
        let finals = self.finals.take().unwrap_or_default();
        let known = known?;
        let formula = Formula { tape: scope.formula.unwrap_or_default(), result: known.re, place: node.place };
        Some(Derived { formula, finals, dim: known.dim })
    }

    /// The value of a register with the numbers as written.
    pub fn value_now(&self, register: Register) -> f64 {
        self.tape.as_written()[register as usize]
    }

    /// A register that holds a constant.
    pub fn constant(&mut self, value: f64, place: Place) -> Register {
        self.tape.push(TapeEntry::Constant(value), place)
    }

    /// Reports a value that is not of the dimension wanted.
    fn fits(&mut self, known: &Known, node: &Node, what: &str, wanted: Dim) -> Option<()> {
        if known.dim == wanted {
            return Some(());
        }
        let literal = node.text().is_some_and(|text| text.trim().parse::<f64>().is_ok());
        if known.dim == Dim::NONE && (known.unitless.is_some() || literal) {
            match known.unitless.filter(|_| !literal) {
                Some(index) => {
                    if self.reported_unitless.insert(index) {
                        let number = &self.numbers[index];
                        let (place, text) = (number.value.place, format!("{}: {}", number.name, number.value.text().unwrap_or_default()));
                        self.error(place, Fault::NoUnit { text, what: what.to_string(), dim: wanted, used: Some(node.place.line) });
                    }
                }
                None => {
                    let text = node.text().unwrap_or_default().to_string();
                    self.error(node.place, Fault::NoUnit { text, what: what.to_string(), dim: wanted, used: None });
                }
            }
            return None;
        }
        let defined = node.text().and_then(|text| self.by_name.get(text)).map(|index| self.numbers[*index].key.line);
        // 1.2 MHz where a time is wanted: the same figure with a unit that fits is often what was meant
        let write = node.text().and_then(|text| {
            let digits: String = text.chars().take_while(|c| c.is_ascii_digit() || *c == '.').collect();
            let rest = text[digits.len()..].trim();
            (!digits.is_empty() && !rest.is_empty() && units::unit(rest).is_some()).then(|| format!("{digits} {}", wanted.example()))
        });
        self.error(
            node.place,
            Fault::WrongDim { what: what.to_string(), wanted, found: known.dim, defined, write: write.filter(|w| !w.ends_with(' ')) },
        );
        None
    }

    // ---------------------------------------------------------------- levels

    /// Takes up the levels of the system, so that `gap(a, b)` can be read.
    pub fn define_levels(&mut self, names: Vec<String>, sources: Vec<LevelSource>, rungs: Rungs) {
        self.levels = names.into_iter().zip(sources).map(|(name, source)| Level { name, source, energy: None, active: false }).collect();
        self.rungs = rungs;
        self.rung_registers = None;
    }

    /// Takes up the names of levels whose energies are known once the system is built.
    pub fn define_built_levels(&mut self, names: Vec<String>) {
        let sources = (0..names.len()).map(LevelSource::Built).collect();
        self.define_levels(names, sources, Rungs::default());
    }

    /// Names of the levels, in basis order.
    pub fn level_names(&self) -> Vec<String> {
        self.levels.iter().map(|level| level.name.clone()).collect()
    }

    /// The index of a level by its name.
    pub fn level(&mut self, node: &Node) -> Option<usize> {
        let names = self.level_names();
        let found = self.name_among(node, "level", &names);
        self.named_levels.extend(found);
        found
    }

    /// Two different levels, as `[a, b]`.
    pub fn pair(&mut self, node: &Node, what: &str) -> Option<[usize; 2]> {
        let items = self.list(node, what, "[lower, upper]")?;
        let [a, b] = items else {
            let fault = Fault::Shape {
                what: what.to_string(),
                expected: format!("a list of two levels, not {}", items.len()),
                example: "[lower, upper]".to_string(),
            };
            self.error(node.place, fault);
            return None;
        };
        let (first, second) = (self.level(a), self.level(b));
        let pair = [first?, second?];
        if pair[0] == pair[1] {
            let name = self.levels[pair[0]].name.clone();
            self.error(node.place, Fault::SamePair { name });
            return None;
        }
        Some(pair)
    }

    /// The energy of a level (diagonal entry), in Hz.
    pub fn level_energy(&mut self, index: usize) -> Option<Register> {
        if let Some(energy) = self.levels[index].energy {
            return energy;
        }
        if self.levels[index].active {
            let place = match &self.levels[index].source {
                LevelSource::Written(node, _) => node.place,
                LevelSource::Value(_, place) => *place,
                LevelSource::Rung(_) | LevelSource::Built(_) => Place::default(),
            };
            let name = self.levels[index].name.clone();
            self.error(
                place,
                Fault::Circle { chain: vec![(format!("energy of {name}"), place.line), (format!("energy of {name}"), place.line)] },
            );
            return None;
        }
        self.levels[index].active = true;
        let name = self.levels[index].name.clone();
        let energy = match self.levels[index].source.clone() {
            LevelSource::Written(node, unit) => match unit {
                None => self.energy(&node, &format!("the energy of {name}")).map(|quantity| quantity.register),
                unit => self.energy_entry(&node, &format!("the energy of {name}"), unit).map(|entry| entry.re),
            },
            LevelSource::Value(hz, place) => Some(self.constant(hz, place)),
            LevelSource::Rung(n) => self.rung(n),
            LevelSource::Built(n) => Some(self.tape.push(TapeEntry::Level(n as u32), Place::default())),
        };
        self.levels[index].active = false;
        self.levels[index].energy = Some(energy);
        energy
    }

    fn rung(&mut self, n: usize) -> Option<Register> {
        let rungs = self.rungs.clone();
        let [first, bend] = match self.rung_registers {
            Some(registers) => registers,
            None => {
                let first = rungs.first.as_ref().and_then(|node| self.energy(node, "system / ladder / first_gap")).map(|q| q.register);
                let bend = rungs.bend.as_ref().and_then(|node| self.energy(node, "system / ladder / anharmonicity")).map(|q| q.register);
                self.rung_registers = Some([first, bend]);
                [first, bend]
            }
        };
        let place = rungs.first.as_ref().map_or(Place::default(), |node| node.place);
        let count = self.constant(n as f64, place);
        let straight = self.tape.push(TapeEntry::Two(Two::Multiply, first?, count), place);
        if n < 2 {
            return Some(straight);
        }
        let pairs = self.constant((n * (n - 1) / 2) as f64, place);
        let bent = self.tape.push(TapeEntry::Two(Two::Multiply, bend?, pairs), place);
        Some(self.tape.push(TapeEntry::Two(Two::Add, straight, bent), place))
    }

    // ---------------------------------------------------------------- compiling

    fn compile(&mut self, expression: &Expression, scope: &mut Scope) -> Option<Known> {
        use expression::Kind::*;
        let place = scope.part(expression.start, expression.length);
        match &expression.kind {
            Number { value, dim, cyclic, bare_volts, power_ratio, imaginary, .. } => {
                if *imaginary && !scope.complex {
                    self.error(place, Fault::ImaginaryOutside);
                    return None;
                }
                if *cyclic && *dim == Dim::FREQUENCY {
                    self.kilohertz |= value.abs() >= 1e3;
                    let text = self.source_text(place);
                    if text.ends_with("mHz") && value.abs() < 1.0 {
                        self.millihertz.push((place, text));
                    }
                }
                let register = self.push(scope, TapeEntry::Constant(*value), place);
                let (re, im) =
                    if *imaginary { (self.push(scope, TapeEntry::Constant(0.0), place), Some(register)) } else { (register, None) };
                Some(Known {
                    re,
                    im,
                    dim: *dim,
                    cyclic: *cyclic,
                    pi: false,
                    bare_volts: *bare_volts,
                    power_ratio: *power_ratio,
                    unitless: None,
                    constant: (!imaginary).then_some(*value),
                })
            }
            Name(name) => self.compile_name(name, place, scope),
            Negative(inner) => {
                let inner = self.compile(inner, scope)?;
                let re = self.push(scope, TapeEntry::One(One::Negative, inner.re), place);
                let im = inner.im.map(|im| self.push(scope, TapeEntry::One(One::Negative, im), place));
                Some(Known { re, im, constant: inner.constant.map(|c| -c), ..inner })
            }
            Binary(sign, left, right) => {
                let (l, r) = (self.compile(left, scope), self.compile(right, scope));
                self.compile_binary(*sign, l?, r?, place, scope, right)
            }
            Gap(a, b) => {
                let names = self.level_names();
                let energy = |reader: &mut Self, name: &String| match names.iter().position(|known| known == name) {
                    Some(index) => {
                        reader.named_levels.push(index);
                        reader.level_energy(index)
                    }
                    None => {
                        reader.unknown(place, "level", name, &names);
                        None
                    }
                };
                let (a, b) = (energy(self, a), energy(self, b));
                let (a, b) = (a?, b?);
                let gap = self.tape.push(TapeEntry::Gap(b, a), place);
                Some(self.seen_from_outside(gap, Dim::FREQUENCY, place, scope))
            }
            Call(name, arguments) => self.compile_call(name, arguments, place, scope),
        }
    }

    /// A register of the main tape, seen from where the scope compiles.
    fn seen_from_outside(&mut self, register: Register, dim: Dim, place: Place, scope: &mut Scope) -> Known {
        let re = match &mut scope.formula {
            Some(tape) => tape.push(TapeEntry::Outer(register), place),
            None => register,
        };
        Known {
            re,
            im: None,
            dim,
            cyclic: dim == Dim::FREQUENCY,
            pi: false,
            bare_volts: false,
            power_ratio: false,
            unitless: None,
            constant: None,
        }
    }

    fn push(&mut self, scope: &mut Scope, entry: TapeEntry, place: Place) -> Register {
        match &mut scope.formula {
            Some(tape) => tape.push(entry, place),
            None => self.tape.push(entry, place),
        }
    }

    fn compile_name(&mut self, name: &str, place: Place, scope: &mut Scope) -> Option<Known> {
        if name == "pi" {
            let re = self.push(scope, TapeEntry::Constant(std::f64::consts::PI), place);
            let known = self.seen_from_outside(0, Dim::NONE, place, &mut outside(scope));
            return Some(Known { re, pi: true, cyclic: false, constant: Some(std::f64::consts::PI), ..known });
        }
        if let Some((_, dim)) = scope.variable.clone().filter(|(variable, _)| variable == name) {
            let re = self.push(scope, TapeEntry::Time, place);
            return Some(Known { re, ..self.seen_from_outside(0, dim, place, &mut outside(scope)) });
        }
        if name == "t" {
            if scope.formula.is_none() || scope.variable.is_some() || self.finals.is_some() {
                self.error(place, Fault::TimeOutside);
                return None;
            }
            let re = self.push(scope, TapeEntry::Time, place);
            return Some(Known { re, ..self.seen_from_outside(0, Dim::TIME, place, &mut outside(scope)) });
        }
        if name == "i" {
            if !scope.complex {
                self.error(place, Fault::ImaginaryOutside);
                return None;
            }
            let zero = self.push(scope, TapeEntry::Constant(0.0), place);
            let one = self.push(scope, TapeEntry::Constant(1.0), place);
            return Some(Known { re: zero, im: Some(one), ..self.seen_from_outside(0, Dim::NONE, place, &mut outside(scope)) });
        }
        let Some(index) = self.by_name.get(name).copied() else {
            if let (Some(finals), Some(tape)) = (&mut self.finals, &mut scope.formula) {
                let k = finals.iter().position(|(known, _)| known == name).unwrap_or(finals.len());
                if k == finals.len() {
                    finals.push((name.to_string(), place));
                }
                let re = tape.push(TapeEntry::Outer(FIRST_FINAL - k as Register), place);
                let dim = super::scan::dim_of_final(name);
                return Some(Known { re, ..self.seen_from_outside(0, dim, place, &mut outside(scope)) });
            }
            let names = self.number_names();
            self.unknown(place, "number", name, &names);
            return None;
        };
        let known = self.number(index)?;
        match &mut scope.formula {
            Some(tape) => Some(Known { re: tape.push(TapeEntry::Outer(known.re), place), ..known }),
            None => Some(known),
        }
    }

    fn compile_binary(&mut self, sign: char, l: Known, r: Known, place: Place, scope: &mut Scope, right: &Expression) -> Option<Known> {
        let constant = |apply: fn(f64, f64) -> f64| l.constant.zip(r.constant).map(|(a, b)| apply(a, b));
        match sign {
            '+' | '-' | 'a' | 'b' => {
                if l.dim != r.dim {
                    // a number without a unit among quantities: the number is what is wrong
                    let bare = [l, r].into_iter().find(|known| known.dim == Dim::NONE).and_then(|known| known.unitless);
                    if let Some(index) = bare.filter(|index| !self.reported_unitless.contains(index)) {
                        self.reported_unitless.insert(index);
                        let dim = if l.dim == Dim::NONE { r.dim } else { l.dim };
                        let number = &self.numbers[index];
                        let text = format!("{}: {}", number.name, number.value.text().unwrap_or_default());
                        let fault = Fault::NoUnit { text, what: format!("together with {}", dim.words()), dim, used: Some(place.line) };
                        let at = number.value.place;
                        self.error(at, fault);
                    } else if bare.is_none() {
                        let operation = if sign == '-' || sign == 'b' { "this subtracts" } else { "this adds" };
                        self.error(place, Fault::Mixed { operation: operation.to_string(), left: l.dim, right: r.dim });
                    }
                    return None;
                }
                let operation = if matches!(sign, '+' | 'a') { Two::Add } else { Two::Subtract };
                // "a above b" is b + a, "a below b" is b - a
                let (first, second) = if sign == 'b' { (r, l) } else { (l, r) };
                let re = self.push(scope, TapeEntry::Two(operation, first.re, second.re), place);
                let im = match (first.im, second.im) {
                    (None, None) => None,
                    (a, b) => {
                        let zero = self.push(scope, TapeEntry::Constant(0.0), place);
                        Some(self.push(scope, TapeEntry::Two(operation, a.unwrap_or(zero), b.unwrap_or(zero)), place))
                    }
                };
                Some(Known {
                    re,
                    im,
                    dim: l.dim,
                    cyclic: l.cyclic || r.cyclic,
                    pi: l.dim == Dim::NONE && (l.pi || r.pi),
                    bare_volts: l.bare_volts || r.bare_volts,
                    power_ratio: false,
                    unitless: l.unitless.and(r.unitless),
                    constant: if operation == Two::Add { constant(|a, b| a + b) } else { constant(|a, b| a - b) },
                })
            }
            '*' | '/' => {
                if (l.cyclic && r.pi && r.dim == Dim::NONE) || (r.cyclic && l.pi && l.dim == Dim::NONE) {
                    self.cyclic_times_pi(sign, l, r, place, right);
                    return None;
                }
                let amplitude = |dim: Dim| dim == Dim::VOLTAGE || dim == Dim::MAGNETIC_FIELD || dim == Dim::ELECTRIC_FIELD;
                if (l.power_ratio && amplitude(r.dim)) || (r.power_ratio && amplitude(l.dim)) {
                    let text = self.source_text(place);
                    self.warn(place, Fault::DecibelOfPower { text });
                }
                let dim = if sign == '*' { l.dim.times(r.dim) } else { l.dim.over(r.dim) };
                let (re, im) = if sign == '*' { self.product(l, r, place, scope) } else { self.quotient(l, r, place, scope) };
                Some(Known {
                    re,
                    im,
                    dim,
                    cyclic: (l.cyclic || r.cyclic) && dim != Dim::NONE,
                    pi: if sign == '*' { l.pi || r.pi } else { l.pi != r.pi },
                    bare_volts: (l.bare_volts || r.bare_volts) && dim == Dim::VOLTAGE,
                    power_ratio: l.power_ratio && r.dim == Dim::NONE || r.power_ratio && l.dim == Dim::NONE,
                    unitless: if dim == Dim::NONE { l.unitless.or(r.unitless) } else { None },
                    constant: if sign == '*' { constant(|a, b| a * b) } else { constant(|a, b| a / b) },
                })
            }
            _ => {
                if l.im.is_some() || r.im.is_some() {
                    self.error(place, Fault::ImaginaryOutside);
                    return None;
                }
                if r.dim != Dim::NONE {
                    self.error(place, Fault::PlainWanted { function: "an exponent".to_string(), found: r.dim });
                    return None;
                }
                let dim = if l.dim == Dim::NONE { Some(Dim::NONE) } else { r.constant.and_then(|exponent| l.dim.power(exponent)) };
                let Some(dim) = dim else {
                    self.error(place, Fault::PowerOfUnit { found: l.dim });
                    return None;
                };
                let re = self.push(scope, TapeEntry::Two(Two::Power, l.re, r.re), place);
                Some(Known { re, dim, im: None, constant: constant(f64::powf), unitless: None, ..l })
            }
        }
    }

    fn product(&mut self, l: Known, r: Known, place: Place, scope: &mut Scope) -> (Register, Option<Register>) {
        let mut times = |a, b| self.push(scope, TapeEntry::Two(Two::Multiply, a, b), place);
        match (l.im, r.im) {
            (None, None) => (times(l.re, r.re), None),
            (Some(im), None) => (times(l.re, r.re), Some(times(im, r.re))),
            (None, Some(im)) => (times(l.re, r.re), Some(times(l.re, im))),
            (Some(a), Some(b)) => {
                let (rr, ii, ri, ir) = (times(l.re, r.re), times(a, b), times(l.re, b), times(a, r.re));
                let re = self.push(scope, TapeEntry::Two(Two::Subtract, rr, ii), place);
                (re, Some(self.push(scope, TapeEntry::Two(Two::Add, ri, ir), place)))
            }
        }
    }

    fn quotient(&mut self, l: Known, r: Known, place: Place, scope: &mut Scope) -> (Register, Option<Register>) {
        match r.im {
            None => {
                let re = self.push(scope, TapeEntry::Two(Two::Divide, l.re, r.re), place);
                (re, l.im.map(|im| self.push(scope, TapeEntry::Two(Two::Divide, im, r.re), place)))
            }
            Some(im) => {
                // l / r = l conj(r) / |r|^2
                let minus = self.push(scope, TapeEntry::One(One::Negative, im), place);
                let (re, im_out) = self.product(l, Known { im: Some(minus), ..r }, place, scope);
                let a = self.push(scope, TapeEntry::Two(Two::Multiply, r.re, r.re), place);
                let b = self.push(scope, TapeEntry::Two(Two::Multiply, im, im), place);
                let size = self.push(scope, TapeEntry::Two(Two::Add, a, b), place);
                let re = self.push(scope, TapeEntry::Two(Two::Divide, re, size), place);
                (re, im_out.map(|im| self.push(scope, TapeEntry::Two(Two::Divide, im, size), place)))
            }
        }
    }

    fn cyclic_times_pi(&mut self, sign: char, l: Known, r: Known, place: Place, right: &Expression) {
        let values = self.tape.as_written();
        let value = |known: Known| known.constant.or_else(|| values.get(known.re as usize).copied().filter(|_| known.constant.is_some()));
        let (hz, factor) = if r.cyclic { (r, value(l)) } else { (l, value(r).map(|f| if sign == '/' { 1.0 / f } else { f })) };
        let hz = if sign == '/' && r.cyclic { None } else { value(hz).filter(|_| hz.dim == Dim::FREQUENCY) };
        let name = self.stack.last().map_or(String::new(), |index| format!("{}: ", self.numbers[*index].name));
        let inner = if r.cyclic {
            Some(self.source_text(Place {
                column: place.column + place.length - right.length as u32,
                length: right.length as u32,
                ..place
            }))
        } else {
            None
        };
        self.error(place, Fault::CyclicTimesPi { hz, factor, name, inner });
    }

    fn compile_call(&mut self, name: &str, arguments: &[Expression], place: Place, scope: &mut Scope) -> Option<Known> {
        let one = ONES.iter().find(|(word, ..)| *word == name);
        let two = TWOS.iter().find(|(word, _)| *word == name);
        let wanted = match (one, two) {
            (Some(_), _) => 1,
            (_, Some(_)) => 2,
            _ => {
                let near = near(name, ONES.iter().map(|(word, ..)| *word).chain(TWOS.iter().map(|(word, _)| *word)).chain(["gap"]));
                self.error(place, Fault::NoFunction { name: name.to_string(), near });
                return None;
            }
        };
        if arguments.len() < wanted || (arguments.len() > wanted && !matches!(name, "min" | "max")) {
            let found = format!("{name} stands here with {} value{}", arguments.len(), if arguments.len() == 1 { "" } else { "s" });
            self.error(
                place,
                Fault::Syntax { found, expected: if wanted == 1 { "one value".to_string() } else { "two values".to_string() } },
            );
            return None;
        }
        let compiled: Vec<Option<Known>> = arguments.iter().map(|argument| self.compile(argument, scope)).collect();
        let known: Vec<Known> = compiled.into_iter().collect::<Option<_>>()?;
        if known.iter().any(|known| known.im.is_some()) {
            self.error(place, Fault::ImaginaryOutside);
            return None;
        }
        let a = known[0];
        let plain =
            Known { im: None, cyclic: false, pi: false, bare_volts: false, power_ratio: false, unitless: None, constant: None, ..a };
        if let Some((_, function, kind)) = one {
            let argument = scope.part(arguments[0].start, arguments[0].length);
            let dim = match kind {
                Takes::Root => a.dim.power(0.5)?,
                Takes::Same => a.dim,
                Takes::Angle if a.dim == Dim::ANGLE => Dim::NONE,
                Takes::Angle => {
                    let text = self.source_text(argument);
                    self.error(argument, Fault::AngleWanted { function: name.to_string(), found: a.dim, text });
                    return None;
                }
                Takes::Plain | Takes::GivesAngle if a.dim != Dim::NONE => {
                    self.error(argument, Fault::PlainWanted { function: name.to_string(), found: a.dim });
                    return None;
                }
                Takes::Plain => Dim::NONE,
                Takes::GivesAngle => Dim::ANGLE,
            };
            let re = self.push(scope, TapeEntry::One(*function, a.re), place);
            let constant = a.constant.map(|c| crate::config::tape::Real::one(c, *function));
            let keeps = matches!(kind, Takes::Same);
            return Some(Known { re, dim, cyclic: keeps && a.cyclic, unitless: if keeps { a.unitless } else { None }, constant, ..plain });
        }
        let (_, operation) = two?;
        let mut so_far = a;
        for next in &known[1..] {
            if next.dim != so_far.dim {
                self.error(place, Fault::Mixed { operation: format!("{name} compares"), left: so_far.dim, right: next.dim });
                return None;
            }
            so_far.re = self.push(scope, TapeEntry::Two(*operation, so_far.re, next.re), place);
        }
        let dim = if *operation == Two::Atan2 { Dim::ANGLE } else { a.dim };
        Some(Known { re: so_far.re, dim, cyclic: a.cyclic && dim != Dim::ANGLE, ..plain })
    }

    /// The characters of the config at a place.
    pub fn source_text(&self, place: Place) -> String {
        let line = self.sources.line(place.file, place.line).unwrap_or_default();
        line.chars().skip(place.column.saturating_sub(1) as usize).take(place.length as usize).collect()
    }
}

impl Scope {
    fn part(&self, start: usize, length: usize) -> Place {
        if self.exact {
            self.place.part(start, length)
        } else {
            self.place
        }
    }
}

/// The value of which `key` is the tail, cut off at a comma: `gap(a, b)` within braces leaves the value `gap(a` and the key `b)`.
fn cut_before<'n>(before: &'n [Entry], key: &str) -> Option<&'n Node> {
    let opens = |text: &str| text.matches('(').count() > text.matches(')').count();
    let value = &before.last()?.value;
    (key.contains(')') && !key.contains('(') && opens(value.text()?)).then_some(value)
}

/// The scope of a formula of another variable than the time.
fn formula_scope(node: &Node, variable: (&str, Dim), complex: bool) -> Scope {
    Scope { formula: Some(Tape::default()), variable: Some((variable.0.to_string(), variable.1)), ..scope_of(node, complex) }
}

/// The scope of the main tape around a formula.
fn outside(scope: &Scope) -> Scope {
    Scope { place: scope.place, exact: scope.exact, complex: scope.complex, formula: None, variable: None }
}

fn scope_of(node: &Node, complex: bool) -> Scope {
    match &node.kind {
        Kind::Scalar { exact: true, quoted, .. } => Scope {
            place: node.place.part(usize::from(*quoted), node.place.length as usize),
            exact: true,
            complex,
            formula: None,
            variable: None,
        },
        _ => Scope { place: node.place, exact: false, complex, formula: None, variable: None },
    }
}

/// What a function takes and gives.
#[derive(Clone, Copy)]
enum Takes {
    /// Any dimension; gives its root.
    Root,
    /// Any dimension; gives the same.
    Same,
    /// An angle; gives a plain number.
    Angle,
    /// A plain number; gives one.
    Plain,
    /// A plain number; gives an angle.
    GivesAngle,
}

const ONES: [(&str, One, Takes); 16] = [
    ("sqrt", One::Sqrt, Takes::Root),
    ("exp", One::Exp, Takes::Plain),
    ("log", One::Log, Takes::Plain),
    ("log10", One::Log10, Takes::Plain),
    ("sin", One::Sin, Takes::Angle),
    ("cos", One::Cos, Takes::Angle),
    ("tan", One::Tan, Takes::Angle),
    ("asin", One::Asin, Takes::GivesAngle),
    ("acos", One::Acos, Takes::GivesAngle),
    ("atan", One::Atan, Takes::GivesAngle),
    ("sinh", One::Sinh, Takes::Plain),
    ("cosh", One::Cosh, Takes::Plain),
    ("tanh", One::Tanh, Takes::Plain),
    ("abs", One::Abs, Takes::Same),
    ("floor", One::Floor, Takes::Plain),
    ("round", One::Round, Takes::Plain),
];

const TWOS: [(&str, Two); 3] = [("min", Two::Min), ("max", Two::Max), ("atan2", Two::Atan2)];

/// The name in an archive of a file that a config names: its path, without steps upwards or a root.
pub fn archived(named: &std::path::Path) -> PathBuf {
    use std::path::Component;
    named
        .components()
        .filter_map(|part| match part {
            Component::Normal(name) => Some(name.to_os_string()),
            Component::ParentDir => Some("up".into()),
            Component::CurDir | Component::RootDir | Component::Prefix(_) => None,
        })
        .collect()
}

/// Why a number cannot bear this name.
fn not_free(name: &str) -> Option<String> {
    let letters =
        name.chars().all(|c| c.is_alphanumeric() || c == '_') && name.chars().next().is_some_and(|c| c.is_alphabetic() || c == '_');
    if !letters {
        return Some("a name is made of letters, digits and underscores, a letter first".to_string());
    }
    if units::unit(name).is_some() || matches!(name, "ohm" | "vacuum" | "into" | "dBm" | "dB" | "peak_to_peak" | "rms") {
        return Some("it is a unit".to_string());
    }
    if matches!(name, "pi" | "t" | "i") {
        return Some("it has a meaning of its own in arithmetic".to_string());
    }
    if matches!(name, "above" | "below" | "gap")
        || ONES.iter().any(|(word, ..)| *word == name)
        || TWOS.iter().any(|(word, _)| *word == name)
    {
        return Some("it is a word of the arithmetic".to_string());
    }
    None
}

/// The known name that is most like `text`, if one is like it at all.
pub fn near<'k>(text: &str, known: impl Iterator<Item = &'k str>) -> Option<String> {
    let lower = text.to_lowercase();
    let scored = known.filter(|name| *name != text).map(|name| {
        let distance = strsim::osa_distance(&lower, &name.to_lowercase());
        let likeness = strsim::jaro_winkler(&lower, &name.to_lowercase());
        (distance, likeness, name)
    });
    scored
        .filter(|(distance, likeness, name)| *distance <= 1 + name.chars().count() / 6 && name.chars().count() > 1 || *likeness > 0.9)
        .min_by(|a, b| a.0.cmp(&b.0).then(b.1.total_cmp(&a.1)))
        .map(|(.., name)| name.to_string())
}

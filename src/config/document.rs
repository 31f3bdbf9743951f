//! A whole config, read and judged: what every later stage starts from.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use super::basis::{self, Basis};
use super::compare::{self, Compare, Variant};
use super::decay::{read_decays, Decay};
use super::dephasing::{read_dephasings, Dephasing};
use super::drives::{CarrierPhase, Drive, Form};
use super::envelopes::Envelope;
use super::messages::{Fault, Mistake};
use super::noise::NoiseEntry;
use super::place::{Place, Sources};
use super::reader::{near, NamedNumber, Reader};
use super::record::{Item, Record};
use super::run::Run;
use super::scan::Scan;
use super::sequence::{self, Known, Step};
use super::settings::{Accuracy, Frame, Output};
use super::state::State;
use super::system::{Operator, OperatorSource, Physics, System};
use super::tape::{Register, Tape};
use super::tree::{self, Kind, Node};

/// Sections of the language; those that this version cannot read are refused, never skipped.
const SECTIONS: [&str; 25] = [
    "format",
    "title",
    "numbers",
    "numbers_from",
    "system",
    "operators",
    "basis",
    "drives",
    "envelopes",
    "blocks",
    "sequence",
    "decay",
    "dephasing",
    "noise",
    "start",
    "frame",
    "accuracy",
    "record",
    "compare",
    "scan",
    "tune",
    "fit",
    "run",
    "hardware",
    "output",
];
const LATER: [&str; 3] = ["tune", "fit", "hardware"];

/// How long a run lasts of which the static levels alone are asked, s.
const MOMENT_S: f64 = 1e-18;

/// A config that holds no mistake.
#[derive(Debug, Clone)]
pub struct Document {
    /// The files it is made of, the config first.
    pub sources: Sources,
    /// `title:`, or the name of the file.
    pub title: String,
    /// All arithmetic.
    pub tape: Tape,
    /// Named numbers.
    pub numbers: Vec<NamedNumber>,
    /// Registers that shaped the reading: a point that moves one of them is another reading.
    pub structural: Vec<Register>,
    /// The static system.
    pub system: System,
    /// The working basis.
    pub basis: Basis,
    /// Names of the states as built.
    pub built_names: Vec<String>,
    /// Levels that the file names somewhere.
    pub named_levels: Vec<usize>,
    /// Levels of which the energies are recorded: without a scan they must be such as can be told.
    pub recorded_levels: Vec<usize>,
    /// Named matrices.
    pub operators: Vec<Operator>,
    /// Drives.
    pub drives: Vec<Drive>,
    /// Envelopes.
    pub envelopes: Vec<Envelope>,
    /// Steps in order.
    pub sequence: Vec<Step>,
    /// Where the sequence stands.
    pub sequence_place: Place,
    /// Numbers that are not the same in every shot.
    pub noise: Vec<NoiseEntry>,
    /// What leaves levels, and where it goes.
    pub decays: Vec<Decay>,
    /// What fades coherences alone.
    pub dephasings: Vec<Dephasing>,
    /// The state at time zero.
    pub start: State,
    /// What to keep.
    pub record: Record,
    /// In which frame.
    pub frame: Frame,
    /// How exactly.
    pub accuracy: Accuracy,
    /// Where to.
    pub output: Output,
    /// Defaults that were used: path of keys, value.
    pub defaults: Vec<(String, String)>,
    /// Warnings.
    pub warnings: Vec<Mistake>,
    /// Where a result folder keeps its inputs, if it was read from one.
    pub archive: Option<PathBuf>,
    /// Variants to compare, if any.
    pub compare: Option<Compare>,
    /// Points to scan, if any.
    pub scan: Option<Scan>,
    /// How a scan is run.
    pub run: Run,
    /// The tree that it was read from.
    pub root: Arc<Node>,
    /// The values given in place of written ones.
    pub set: Vec<(String, String)>,
}

/// What reading a file that cannot be used leaves: the mistakes, and the text to show them in.
#[derive(Debug, Clone)]
pub struct Refusal {
    /// Files read so far.
    pub sources: Sources,
    /// All mistakes found, warnings among them.
    pub mistakes: Vec<Mistake>,
}

impl Refusal {
    /// The messages as one text.
    pub fn text(&self) -> String {
        super::messages::render(&self.sources, &self.mistakes)
    }
}

/// Reads and judges the config at `path`; `set` puts other values in place of named numbers, as `name`, `value`.
pub fn read(path: &Path, set: &[(String, String)]) -> Result<Document, Refusal> {
    read_path(path, set, false)
}

/// The same for its system and matrices alone: a sequence and a start may be left out.
pub fn read_system_alone(path: &Path, set: &[(String, String)]) -> Result<Document, Refusal> {
    read_path(path, set, true)
}

fn read_path(path: &Path, set: &[(String, String)], system_alone: bool) -> Result<Document, Refusal> {
    let mut sources = Sources::default();
    let file = match tree::read_text(path, &mut sources) {
        Ok(file) => file,
        Err(mistake) => return Err(Refusal { sources, mistakes: vec![mistake] }),
    };
    let mut reader = Reader::new(sources, path.parent().unwrap_or(Path::new("")).to_path_buf());
    reader.system_alone = system_alone;
    read_with(reader, file, set)
}

/// Reads the config that a result folder keeps; the files it names lie in `inputs/`.
pub fn read_archived(folder: &Path, set: &[(String, String)]) -> Result<Document, Refusal> {
    let mut sources = Sources::default();
    match tree::read_text(&folder.join("config.yaml"), &mut sources) {
        Ok(file) => read_sources(sources, file, folder, Some(folder.join("inputs")), set),
        Err(mistake) => Err(Refusal { sources, mistakes: vec![mistake] }),
    }
}

/// Reads a config from the text that a store has kept; the files it names lie in `inputs/` of the folder.
pub fn read_kept(folder: &Path, text: &str, set: &[(String, String)]) -> Result<Document, Refusal> {
    let mut sources = Sources::default();
    let file = sources.add(&folder.join("config.yaml"), text.as_bytes().to_vec(), text.to_string());
    read_sources(sources, file, folder, Some(folder.join("inputs")), set)
}

/// The same from a text; files that it names lie in `folder`.
pub fn read_str(name: &str, text: &str, folder: &Path, set: &[(String, String)]) -> Result<Document, Refusal> {
    let mut sources = Sources::default();
    let file = sources.add(Path::new(name), text.as_bytes().to_vec(), text.to_string());
    read_sources(sources, file, folder, None, set)
}

fn read_sources(
    sources: Sources,
    file: u16,
    folder: &Path,
    archive: Option<PathBuf>,
    set: &[(String, String)],
) -> Result<Document, Refusal> {
    let mut reader = Reader::new(sources, folder.to_path_buf());
    reader.archive = archive;
    read_with(reader, file, set)
}

fn read_with(mut reader: Reader, file: u16, set: &[(String, String)]) -> Result<Document, Refusal> {
    let mut mistakes = Vec::new();
    let root = match tree::parse(&reader.sources, file, &mut mistakes) {
        Ok(root) => root,
        Err(mistake) => {
            mistakes.push(mistake);
            return Err(Refusal { sources: reader.sources, mistakes });
        }
    };
    reader.mistakes = mistakes;
    let document = sections(&mut reader, &root, file, set, &[]);
    if let Some(document) = &document {
        // the variants are read too, so that a slip in one is found before anything runs
        for variant in document.compare.iter().flat_map(|compare| &compare.variants) {
            if let Err(refusal) = read_variant(document, variant) {
                reader.mistakes.extend(refusal.mistakes.into_iter().filter(|mistake| !mistake.warning));
            }
        }
    }
    let refused = reader.mistakes.iter().any(|mistake| !mistake.warning);
    match document {
        Some(document) if !refused => Ok(document),
        _ => Err(Refusal { sources: reader.sources, mistakes: reader.mistakes }),
    }
}

/// Reads a variant of a document; what changes nothing is refused.
pub fn read_variant(document: &Document, variant: &Variant) -> Result<Document, Refusal> {
    let root = compare::apply(&document.root, variant);
    let folder = document.source().path.parent().unwrap_or(Path::new("")).to_path_buf();
    let mut reader = Reader::new(document.sources.clone(), folder);
    reader.archive = document.archive.clone();
    let set: Vec<(String, String)> =
        document.set.iter().filter(|(name, _)| variant.set.iter().all(|entry| entry.key != *name)).cloned().collect();
    let read = sections(&mut reader, &root, 0, &set, &variant.set);
    let same_sections = variant
        .sections
        .iter()
        .all(|section| document.root.get(&section.key).is_some_and(|written| compare::same(written, &section.value)));
    if let Some(read) = &read {
        // by their bits, as a number that follows the levels of a built system is none yet
        let values = |document: &Document| -> Vec<(String, u64)> {
            let registers = document.tape.as_written();
            document.numbers.iter().map(|number| (number.name.clone(), registers[number.register as usize].to_bits())).collect()
        };
        if same_sections && values(read) == values(document) {
            reader.error(variant.place, Fault::VariantChangesNothing { name: variant.name.clone() });
        }
    }
    match read {
        Some(mut read) if !reader.mistakes.iter().any(|mistake| !mistake.warning) => {
            read.set = set;
            Ok(read)
        }
        _ => Err(Refusal { sources: reader.sources, mistakes: reader.mistakes }),
    }
}

/// Reads a document again with named numbers at other values, in SI: for numbers that shape the reading itself.
pub fn read_moved(document: &Document, moved: &[(&str, f64)]) -> Result<Document, Refusal> {
    let folder = document.source().path.parent().unwrap_or(Path::new("")).to_path_buf();
    let mut reader = Reader::new(document.sources.clone(), folder);
    reader.archive = document.archive.clone();
    let set: Vec<(String, String)> =
        document.set.iter().filter(|(name, _)| moved.iter().all(|(other, _)| other != name)).cloned().collect();
    let entry = |(name, value): &(&str, f64)| {
        let number = document.numbers.iter().find(|number| number.name == *name)?;
        let unit = match number.dim.unit() {
            unit if unit == "1" => String::new(),
            unit if unit == "V" => "V peak".to_string(),
            unit => unit,
        };
        let kind = Kind::Scalar { text: format!("{value:?} {unit}").trim().to_string(), quoted: false, exact: false };
        Some(tree::Entry { key: (*name).to_string(), place: number.place, value: Node { place: number.place, kind } })
    };
    let entries: Vec<tree::Entry> = moved.iter().filter_map(entry).collect();
    let read = sections(&mut reader, &document.root, 0, &set, &entries);
    match read {
        Some(mut read) if !reader.mistakes.iter().any(|mistake| !mistake.warning) => {
            read.set = document.set.clone();
            Ok(read)
        }
        _ => Err(Refusal { sources: reader.sources, mistakes: reader.mistakes }),
    }
}

fn sections(reader: &mut Reader, root: &Node, file: u16, set: &[(String, String)], moved: &[super::tree::Entry]) -> Option<Document> {
    if root.entries().is_none() {
        reader.error(
            root.place,
            Fault::Shape { what: "a config".to_string(), expected: "a block of sections".to_string(), example: "format: 1".to_string() },
        );
        return None;
    }
    match root.get("format") {
        None => reader.error(Place { file, line: 1, column: 1, length: 1 }, Fault::NoFormat),
        Some(node) if node.text() == Some("1") => {}
        Some(node) => {
            let found = node.text().unwrap_or("a list or block").to_string();
            reader.error(node.place, Fault::OtherFormat { found });
            // another version may mean anything by its words
            return None;
        }
    }
    let entries = reader.fields(root, "a config", &SECTIONS, &[])?;
    for entry in entries.iter().filter(|entry| LATER.contains(&entry.key.as_str())) {
        reader.error(entry.place, Fault::NotNow { key: entry.key.clone(), section: "a section".to_string() });
    }
    let title = match root.get("title") {
        Some(title) => reader.text(title, "title", "title: what this run is for").unwrap_or_default().to_string(),
        None => {
            reader.sources.files()[usize::from(file)].path.file_stem().map_or(String::new(), |stem| stem.to_string_lossy().into_owned())
        }
    };
    numbers(reader, root, set);
    for entry in moved {
        reader.set_number(&entry.key, entry.value.clone());
    }

    let system = match root.get("system") {
        Some(node) => super::system::read_system(reader, node),
        None => {
            let why = Some("It names the levels and their energies.".to_string());
            let fault = Fault::MissingKey {
                key: "system".to_string(),
                section: "a config".to_string(),
                write: "system: {levels: {down: 0 MHz, up: 80 MHz}}".to_string(),
                why,
            };
            reader.error(Place { file, line: 1, column: 1, length: 1 }, fault);
            None
        }
    };
    // with the names of the levels known, the other sections can be judged even where an energy is wrong
    let stand_in = System { place: root.place, kind: "levels", names: reader.level_names(), entries: Vec::new(), physics: Physics::Typed };
    reader.system_read = system.is_some();
    // those of a system from its physics are not, once a part of it is wrong
    let typed = |node: &Node| ["levels", "hamiltonian", "ladder"].iter().any(|key| node.get(key).is_some());
    let readable = system.is_some() || (!stand_in.names.is_empty() && root.get("system").is_some_and(typed));
    let mut known_system = system.clone().unwrap_or(stand_in);
    let built_names = known_system.names.clone();
    let basis = match root.get("system") {
        Some(node) if readable => basis::read_basis(reader, root.get("basis"), node, &known_system),
        _ => None,
    };
    if let Some((_, names)) = &basis {
        known_system.names = names.clone();
    }
    let system = system.map(|_| known_system.clone());
    let sizes = [built_names.len(), known_system.names.len()];
    let mut operators = match root.get("operators") {
        Some(node) if readable => super::system::read_operators(reader, node, &known_system, sizes),
        _ => Vec::new(),
    };
    operators.extend(super::system::natural_operators(&known_system));
    if let Some(system) = &system {
        levels_from_themselves(reader, system);
        // an expansion in new states has no parts
        reader.parts = if system.names == built_names { system.parts() } else { Vec::new() };
    }
    let (drives, drive_names) = match root.get("drives") {
        Some(node) if readable => super::drives::read_drives(reader, node, &known_system, &operators),
        _ => (Vec::new(), Vec::new()),
    };
    let (envelopes, envelope_names) = match root.get("envelopes") {
        Some(node) => super::envelopes::read_envelopes(reader, node),
        None => (Vec::new(), Vec::new()),
    };
    let known = Known { drives: (&drive_names, &drives), envelopes: (&envelope_names, &envelopes), blocks: root.get("blocks") };
    reader.levels_alone = root.get("sequence").is_none() && super::record::is_of_levels_alone(root.get("record"));
    let sequence_node = match root.get("sequence") {
        Some(node) => Some(node),
        None if reader.system_alone || reader.levels_alone => None,
        None => {
            let fault = Fault::MissingKey {
                key: "sequence".to_string(),
                section: "a config".to_string(),
                write: "sequence: [{wait: 1 us}]".to_string(),
                why: None,
            };
            reader.error(Place { file, line: 1, column: 1, length: 1 }, fault);
            None
        }
    };
    let (steps, used) = match sequence_node {
        Some(node) if readable => sequence::read_sequence(reader, node, &known),
        None if reader.system_alone => (Some(Vec::new()), sequence::Used::default()),
        None if reader.levels_alone => {
            // the system for a moment, as levels do not ask what happens to it
            let place = root.get("record").map_or(root.place, |node| node.place);
            let register = reader.constant(MOMENT_S, place);
            (Some(vec![Step::Wait(super::reader::Quantity { register, place })]), sequence::Used::default())
        }
        _ => (None, sequence::Used::default()),
    };
    let start = match root.get("start") {
        Some(node) if readable => super::state::read_start(reader, node),
        Some(_) => None,
        None if reader.system_alone || reader.levels_alone => Some(State::Level(0)),
        None => {
            let why = Some("It names the level, or the superposition, at time zero.".to_string());
            let fault =
                Fault::MissingKey { key: "start".to_string(), section: "a config".to_string(), write: "start: down".to_string(), why };
            reader.error(Place { file, line: 1, column: 1, length: 1 }, fault);
            None
        }
    };
    let frame = super::settings::read_frame(reader, root.get("frame"));
    let mut used_operators = Vec::new();
    let surroundings = if readable { surroundings(reader, root, &operators, &mut used_operators) } else { None };
    let record = if readable { super::record::read_record(reader, root.get("record"), &operators, &mut used_operators) } else { None };
    let accuracy = super::settings::read_accuracy(reader, root.get("accuracy"));
    let output = super::settings::read_output(reader, root.get("output"));

    if let (Some(steps), Some(_)) = (&steps, sequence_node) {
        phases_said(reader, steps, &drives);
        unused(reader, root, &used, &operators, &mut used_operators);
    }
    let noise = match root.get("noise") {
        Some(node) => super::noise::read_noise(reader, node),
        None => Some(Vec::new()),
    };
    let compare = root.get("compare").map(|node| compare::read_compare(reader, node));
    let scan = root.get("scan").map(|node| super::scan::read_scan(reader, node));
    let run = super::run::read_run(reader, root.get("run"), scan.is_some());
    let numbers = reader.finish_numbers();
    finite(reader, &numbers)?;
    if let Some(record) = &record {
        free_turns(reader, record, &operators);
    }
    let compare = match compare {
        Some(compare) => Some(compare?),
        None => None,
    };
    let scan = match scan {
        Some(scan) => Some(scan?),
        None => None,
    };
    let run = run?;
    let (system, steps, start, mut record, accuracy, output, frame) = (system?, steps?, start?, record?, accuracy?, output?, frame?);
    let (decays, dephasings) = surroundings?;
    super::record::beside_surroundings(reader, &mut record, root.get("record"), (&decays, &dephasings, &start));
    let (basis, _) = basis?;
    if reader.levels_alone && scan.is_some() {
        // what a drive or a start names is not used
        let named = std::mem::take(&mut reader.named_levels);
        reader.recorded_levels.extend(named);
    }
    let mut document = Document {
        sources: reader.sources.clone(),
        title,
        tape: reader.tape.clone(),
        numbers,
        structural: reader.structural.clone(),
        system,
        basis,
        built_names,
        named_levels: std::mem::take(&mut reader.named_levels),
        recorded_levels: std::mem::take(&mut reader.recorded_levels),
        operators,
        drives,
        envelopes,
        sequence: steps,
        sequence_place: sequence_node.map_or(root.place, |node| node.place),
        noise: noise?,
        decays,
        dephasings,
        start,
        record,
        frame,
        accuracy,
        output,
        defaults: std::mem::take(&mut reader.defaults),
        warnings: Vec::new(),
        compare,
        scan,
        run,
        root: Arc::new(root.clone()),
        archive: reader.archive.clone(),
        set: set.to_vec(),
    };
    reader.mistakes.extend(super::instruments::judge(&document));
    document.warnings = reader.mistakes.iter().filter(|mistake| mistake.warning).cloned().collect();
    Some(document)
}

/// `decay:` and `dephasing:`.
fn surroundings(reader: &mut Reader, root: &Node, operators: &[Operator], used: &mut Vec<String>) -> Option<(Vec<Decay>, Vec<Dephasing>)> {
    let decays = match root.get("decay") {
        Some(node) => read_decays(reader, node, operators, used),
        None => Some(Vec::new()),
    };
    let known = decays.as_deref().unwrap_or_default();
    let dephasings = match root.get("dephasing") {
        Some(node) => read_dephasings(reader, node, operators, known, used),
        None => Some(Vec::new()),
    };
    Some((decays?, dephasings?))
}

/// `numbers:`, `numbers_from:` and the values set from outside.
fn numbers(reader: &mut Reader, root: &Node, set: &[(String, String)]) {
    if let Some(node) = root.get("numbers") {
        reader.define_numbers(node);
    }
    if let Some(node) = root.get("numbers_from") {
        if let Some(name) = reader.text(node, "numbers_from", "numbers_from: chip.yaml").map(str::to_string) {
            let path = reader.beside(&name);
            match tree::read_text(&path, &mut reader.sources) {
                Ok(file) => {
                    let mut found = Vec::new();
                    let parsed = tree::parse(&reader.sources, file, &mut found);
                    reader.mistakes.extend(found);
                    match parsed {
                        Ok(list) => reader.define_numbers(&list),
                        Err(mistake) => reader.mistakes.push(mistake),
                    }
                }
                Err(mut mistake) => {
                    if mistake.place.line == 0 {
                        mistake.place = node.place;
                    }
                    reader.mistakes.push(mistake);
                }
            }
        }
    }
    for (name, value) in set {
        let text = format!("{name}={value}");
        let file = reader.sources.add(Path::new("--set"), Vec::new(), text.clone());
        let column = name.chars().count() as u32 + 2;
        let place = Place { file, line: 1, column, length: value.chars().count().max(1) as u32 };
        let node = Node { place, kind: Kind::Scalar { text: value.clone(), quoted: false, exact: true } };
        if !reader.set_number(name, node) {
            let known = reader.number_names();
            let near = near(name, known.iter().map(String::as_str));
            reader.error(
                Place { column: 1, length: name.chars().count().max(1) as u32, ..place },
                Fault::NoSuchNumber { name: name.clone(), near, known },
            );
        }
    }
}

/// A drive used more than once must say what its phase counts from; whether a single pulse starts with the sequence is judged
/// with its time.
fn phases_said(reader: &mut Reader, steps: &[Step], drives: &[Drive]) {
    for (drive, times) in drives.iter().zip(sequence::uses(steps, drives.len())) {
        if drive.form != Form::Direct && drive.carrier_phase.is_none() && times > 1 {
            reader.error(drive.place, Fault::PhaseUnsaid { drive: drive.name.clone(), times, why_first: false });
        }
    }
}

fn unused(reader: &mut Reader, root: &Node, used: &sequence::Used, operators: &[Operator], used_operators: &mut Vec<String>) {
    for entry in root.get("drives").and_then(Node::entries).unwrap_or_default() {
        if let Some(operator) = entry.value.get("operator").and_then(Node::text) {
            used_operators.push(operator.to_string());
        }
    }
    let sections: [(&'static str, &str, &std::collections::HashSet<String>); 3] =
        [("drive", "drives", &used.drives), ("envelope", "envelopes", &used.envelopes), ("block", "blocks", &used.blocks)];
    for (kind, section, used) in sections {
        for entry in root.get(section).and_then(Node::entries).unwrap_or_default() {
            if !used.contains(&entry.key) {
                reader.warn(entry.place, Fault::Unused { kind, name: entry.key.clone() });
            }
        }
    }
    let typed = operators.iter().filter(|operator| !matches!(operator.source, OperatorSource::Natural));
    for operator in typed.filter(|operator| !used_operators.contains(&operator.name)) {
        reader.warn(operator.place, Fault::Unused { kind: "operator", name: operator.name.clone() });
    }
}

/// Every register has a finite value with the numbers as written; the first that has not is reported.
fn finite(reader: &mut Reader, _numbers: &[NamedNumber]) -> Option<()> {
    let values = reader.tape.as_written();
    // what follows the levels of a built system is judged when it is built
    let later = reader.tape.level_dependents();
    let bad = (0..values.len()).find(|register| !values[*register].is_finite() && later.binary_search(&(*register as Register)).is_err());
    match bad {
        None => Some(()),
        Some(bad) => {
            let mistake = no_number(&reader.tape, &values, &reader.sources, bad);
            reader.mistakes.push(mistake);
            None
        }
    }
}

/// A built system cannot be made of the gaps between its own levels.
fn levels_from_themselves(reader: &mut Reader, system: &System) {
    let following = reader.tape.level_dependents();
    if let Some(register) = system.registers().into_iter().find(|register| following.contains(register)) {
        let place = reader.tape.place(register);
        let chain = vec![
            (system.kind.to_string(), system.place.line),
            ("gap".to_string(), place.line),
            (system.kind.to_string(), system.place.line),
        ];
        reader.error(place, Fault::Circle { chain });
    }
}

/// The first register without a finite value, as a mistake.
pub fn not_finite(tape: &Tape, values: &[f64], sources: &Sources) -> Option<Mistake> {
    values.iter().position(|value| !value.is_finite()).map(|bad| no_number(tape, values, sources, bad))
}

fn no_number(tape: &Tape, values: &[f64], sources: &Sources, bad: usize) -> Mistake {
    use super::tape::{Entry, Two};
    let place = tape.place(bad as Register);
    let line = sources.line(place.file, place.line).unwrap_or_default();
    let text: String = line.chars().skip(place.column.saturating_sub(1) as usize).take(place.length as usize).collect();
    let fault = match tape.entries()[bad] {
        Entry::Two(Two::Divide, _, divisor) if values[divisor as usize] == 0.0 => Fault::ZeroDivision { text },
        _ => Fault::NotFinite { text },
    };
    Mistake::error(place, fault)
}

/// Operators under `free_z` must be diagonal and real.
fn free_turns(reader: &mut Reader, record: &Record, operators: &[Operator]) {
    for item in &record.items {
        let Item::Gate(gate) = item else { continue };
        let super::record::FreeZ::Operators(free) = &gate.free_z else {
            continue;
        };
        for index in free {
            let values = reader.tape.as_written();
            let off = operators[*index].entries().unwrap_or_default().iter().any(|entry| {
                let im = entry.value.im.map_or(0.0, |im| values[im as usize]);
                im != 0.0 || (entry.row != entry.column && values[entry.value.re as usize] != 0.0)
            });
            if off {
                reader.error(gate.place, Fault::NotDiagonal { operator: operators[*index].name.clone() });
            }
        }
    }
}

impl Document {
    /// How the phase of a drive's carrier counts; where it was not said both ways agree.
    pub fn carrier_phase(&self, drive: usize) -> CarrierPhase {
        self.drives[drive].carrier_phase.unwrap_or(CarrierPhase::RunsOn)
    }

    /// The file of the config itself.
    pub fn source(&self) -> &super::place::SourceFile {
        &self.sources.files()[0]
    }
}

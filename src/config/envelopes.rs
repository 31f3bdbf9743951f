//! `envelopes:`.

use std::sync::Arc;

use super::messages::Fault;
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::tape::{Formula, Register};
use super::tree::{read_text, Node};
use crate::units::Dim;

/// Which word gives the size.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SizeWord {
    /// Rabi frequency of the reference pair at envelope 1.
    Peak,
    /// Signed area in turns.
    Turn,
    /// The matrix entry itself, in Hz.
    MatrixElement,
    /// Peak volts of a sine, by the drive's calibration.
    Volts,
    /// Peak of the linear magnetic field, T, for a drive that acts on a moment.
    Field,
}

impl SizeWord {
    /// The word of the language.
    pub fn word(self) -> &'static str {
        SIZES[self as usize].0
    }
}

const SIZES: [(&str, SizeWord); 5] = [
    ("peak", SizeWord::Peak),
    ("turn", SizeWord::Turn),
    ("matrix_element", SizeWord::MatrixElement),
    ("volts", SizeWord::Volts),
    ("field", SizeWord::Field),
];

/// Values between samples.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Between {
    /// Each until the next.
    Hold,
    /// Straight lines.
    Linear,
    /// Sum of sinc functions.
    BandLimited,
}

/// What happens where a curve is cut.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Edge {
    /// The step stays.
    Step,
    /// The pedestal is taken off.
    Lift,
}

/// Where samples come from.
#[derive(Debug, Clone)]
pub enum Samples {
    /// A list in the config; each value may be moved.
    List(Vec<Register>),
    /// A file beside the config.
    File {
        /// Times from 0, s.
        times_s: Arc<[f64]>,
        /// Values.
        values: Arc<[f64]>,
    },
}

/// `derivative: {factor, against}`.
#[derive(Debug, Clone, Copy)]
pub struct Derivative {
    /// Weight of the quadrature.
    pub factor: Quantity,
    /// The anharmonicity, Hz, with its sign.
    pub against: Quantity,
}

/// An envelope.
#[derive(Debug, Clone)]
pub struct Envelope {
    /// Its name.
    pub name: String,
    /// Where the name stands.
    pub place: Place,
    /// The word under `shape`.
    pub shape: &'static str,
    /// Its times by key, s.
    pub times: Vec<(&'static str, Quantity)>,
    /// `edge`.
    pub edge: Option<Edge>,
    /// `between`.
    pub between: Option<Between>,
    /// Samples.
    pub samples: Option<Samples>,
    /// A formula of t.
    pub formula: Option<Formula>,
    /// Which word gives the size.
    pub size_word: SizeWord,
    /// The size: Hz, turns, Hz, V or T.
    pub size: Quantity,
    /// Where the key of the size stands.
    pub size_place: Place,
    /// Derivative quadrature.
    pub derivative: Option<Derivative>,
}

impl Envelope {
    /// The register of one of its times.
    pub fn time(&self, key: &str) -> Option<Quantity> {
        self.times.iter().find(|(name, _)| *name == key).map(|(_, quantity)| *quantity)
    }
}

/// A shape: its word, the times it needs, one of which it needs, whether it is cut, and what else it takes.
struct Shape {
    word: &'static str,
    needs: &'static [&'static str],
    one_of: &'static [&'static str],
    edge: bool,
    more: &'static [&'static str],
}

const GAUSSIAN_WIDTHS: [&str; 3] = ["field_sigma", "field_fwhm", "intensity_fwhm"];
const TIMES: [&str; 8] = ["length", "rise", "field_sigma", "field_fwhm", "intensity_fwhm", "sech_time", "rise_10_90", "cut_at"];

const SHAPES: [Shape; 12] = [
    Shape { word: "square", needs: &["length"], one_of: &[], edge: false, more: &[] },
    Shape { word: "raised cosine", needs: &["length"], one_of: &[], edge: false, more: &[] },
    Shape { word: "sine squared", needs: &["length"], one_of: &[], edge: false, more: &[] },
    Shape { word: "blackman", needs: &["length"], one_of: &[], edge: false, more: &[] },
    Shape { word: "cosine edges", needs: &["length", "rise"], one_of: &[], edge: false, more: &[] },
    Shape { word: "trapezoid", needs: &["length", "rise"], one_of: &[], edge: false, more: &[] },
    Shape { word: "gaussian", needs: &["cut_at"], one_of: &GAUSSIAN_WIDTHS, edge: true, more: &[] },
    Shape { word: "sech", needs: &["sech_time", "cut_at"], one_of: &[], edge: true, more: &[] },
    Shape { word: "error-function edges", needs: &["length", "rise_10_90", "cut_at"], one_of: &[], edge: true, more: &[] },
    Shape { word: "exponential edges", needs: &["length", "rise_10_90", "cut_at"], one_of: &[], edge: false, more: &["edge"] },
    Shape { word: "samples", needs: &[], one_of: &[], edge: false, more: &["samples", "file", "column", "between", "length"] },
    Shape { word: "formula", needs: &["length"], one_of: &[], edge: false, more: &["formula"] },
];

const HINTS: [(&str, &str); 4] = [
    ("amplitude", "The size is given by peak, turn, matrix_element or volts."),
    ("rabi", "The size is given by peak (the Rabi frequency at envelope 1) or turn."),
    ("area", "The area is given by turn, in turns or degrees."),
    ("duration", "The duration is called length."),
];

/// Reads `envelopes:`. An envelope that cannot be read whole is left out, but its name is in the second list.
pub fn read_envelopes(reader: &mut Reader, node: &Node) -> (Vec<Envelope>, Vec<String>) {
    let Some(entries) = node.entries() else {
        let example = "flat: {shape: square, length: 0.2 us, peak: 2.5 MHz}".to_string();
        reader.error(node.place, Fault::Shape { what: "envelopes".to_string(), expected: "a block of names".to_string(), example });
        return (Vec::new(), Vec::new());
    };
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    super::system::warn_of_case(reader, "envelope", &names, node.place);
    let envelopes = entries.iter().filter_map(|entry| read_envelope(reader, &entry.key, entry.place, &entry.value)).collect();
    (envelopes, names)
}

fn read_envelope(reader: &mut Reader, name: &str, place: Place, node: &Node) -> Option<Envelope> {
    let section = format!("envelopes / {name}");
    if node.entries().is_none() {
        reader.fields(node, &section, &["shape"], &[]);
        return None;
    }
    let shape_node = reader.need(node, "shape", &section, "raised cosine")?;
    let words: Vec<(&str, usize)> = SHAPES.iter().enumerate().map(|(k, shape)| (shape.word, k)).collect();
    let shape = &SHAPES[reader.word(shape_node, &format!("{section} / shape"), &words)?];
    let entries = node.entries()?;
    let mistakes = reader.mistakes.len();

    let mut known: Vec<&str> = vec!["shape", "derivative", "peak", "turn", "matrix_element", "field", "volts"];
    known.extend(shape.needs.iter().chain(shape.one_of).chain(shape.more));
    if shape.edge {
        known.push("edge");
    }
    for entry in entries.iter().filter(|entry| !known.contains(&entry.key.as_str())) {
        let key = entry.key.as_str();
        if matches!(key, "fwhm" | "width" | "sigma" | "full_width") {
            reader.error(entry.place, Fault::WidthWord { word: key.to_string(), shape: shape.word.to_string() });
        } else if TIMES.contains(&key) || matches!(key, "edge" | "samples" | "file" | "between" | "formula" | "column") {
            let takes = known.iter().map(|key| (*key).to_string()).collect();
            reader.error(entry.place, Fault::ShapeTakesNot { key: key.to_string(), shape: shape.word.to_string(), takes });
        }
    }
    let mut all_known: Vec<&str> = known.clone();
    all_known.extend(TIMES);
    all_known.extend(["edge", "samples", "file", "between", "formula", "column", "fwhm", "width", "sigma", "full_width"]);
    let unknown = entries.iter().any(|entry| !all_known.contains(&entry.key.as_str()));
    if unknown {
        // judged against what this shape takes, so that the guess of a slip fits
        let mut judged: Vec<&str> = all_known.iter().copied().filter(|key| known.contains(key)).collect();
        judged.dedup();
        let others: Vec<_> = entries.iter().filter(|entry| !all_known.contains(&entry.key.as_str())).cloned().collect();
        let view = Node { place: node.place, kind: super::tree::Kind::Map(others) };
        reader.fields(&view, &section, &judged, &HINTS);
    }

    let width_slip = entries.iter().any(|entry| matches!(entry.key.as_str(), "fwhm" | "width" | "sigma" | "full_width"));
    let mut times = Vec::new();
    for key in TIMES.iter().filter(|key| known.contains(*key)) {
        if let Some(value) = node.get(key) {
            if let Some(quantity) = reader.quantity(value, &format!("{section} / {key}"), Dim::TIME) {
                times.push((*key, quantity));
            }
        } else if shape.needs.contains(key) {
            reader.need(node, key, &section, "0.2 us");
        }
    }
    if !shape.one_of.is_empty() && !width_slip {
        reader.one_of(node, shape.one_of, &section, None);
    }
    let edge = match node.get("edge") {
        Some(edge) => reader.word(edge, &format!("{section} / edge"), &[("step", Edge::Step), ("lift", Edge::Lift)]),
        None => {
            if shape.edge {
                let at = entries.iter().find(|entry| entry.key == "cut_at").map_or(node.place, |entry| entry.place);
                reader.error(at, Fault::EdgeUnsaid { shape: shape.word.to_string() });
            }
            None
        }
    };
    let between = node.get("between").and_then(|between| {
        let words = [("hold", Between::Hold), ("linear", Between::Linear), ("band limited", Between::BandLimited)];
        reader.word(between, &format!("{section} / between"), &words)
    });
    let samples = if shape.word == "samples" { read_samples(reader, node, &section) } else { None };
    let formula = if shape.word == "formula" {
        reader
            .need(node, "formula", &section, "exp(-t / tau)")
            .and_then(|formula| reader.formula(formula, &format!("{section} / formula"), Dim::NONE))
    } else {
        None
    };
    let derivative = node.get("derivative").and_then(|derivative| read_derivative(reader, derivative, &section));
    let size_entry =
        reader.one_of(node, &["peak", "turn", "matrix_element", "field", "volts"], &section, Some("It says how strong the pulse is."));
    let size = size_entry.and_then(|entry| {
        let word = SIZES.iter().find(|(word, _)| *word == entry.key)?.1;
        let what = format!("{section} / {}", entry.key);
        let quantity = match word {
            SizeWord::Peak => reader.quantity(&entry.value, &what, Dim::FREQUENCY),
            SizeWord::Turn => reader.quantity(&entry.value, &what, Dim::ANGLE),
            SizeWord::MatrixElement => reader.energy(&entry.value, &what),
            SizeWord::Volts => reader.sine_volts(&entry.value, &what),
            SizeWord::Field => reader.quantity(&entry.value, &what, Dim::MAGNETIC_FIELD),
        };
        quantity.map(|quantity| (word, quantity, entry.place))
    });
    if between == Some(Between::Hold) && node.get("derivative").is_some() {
        reader.error(node.get("derivative").map_or(place, |at| at.place), Fault::DerivativeOfHeld { envelope: name.to_string() });
    }
    if reader.mistakes[mistakes..].iter().any(|mistake| !mistake.warning) {
        return None;
    }
    let (size_word, size, size_place) = size?;
    Some(Envelope {
        name: name.to_string(),
        place,
        shape: shape.word,
        times,
        edge,
        between,
        samples,
        formula,
        size_word,
        size,
        size_place,
        derivative,
    })
}

fn read_derivative(reader: &mut Reader, node: &Node, section: &str) -> Option<Derivative> {
    let section = format!("{section} / derivative");
    reader.fields(node, &section, &["factor", "against"], &[])?;
    let factor = reader.need(node, "factor", &section, "0.5").and_then(|factor| reader.plain(factor, &format!("{section} / factor")));
    let against =
        reader.need(node, "against", &section, "anharmonicity").and_then(|against| reader.energy(against, &format!("{section} / against")));
    Some(Derivative { factor: factor?, against: against? })
}

fn read_samples(reader: &mut Reader, node: &Node, section: &str) -> Option<Samples> {
    let source = reader.one_of(node, &["samples", "file"], section, None)?;
    if node.get("between").is_none() {
        let why = Some("hold: each until the next; linear: straight lines; band limited: what an ideal low-pass leaves.".to_string());
        let fault =
            Fault::MissingKey { key: "between".to_string(), section: section.to_string(), write: "between: linear".to_string(), why };
        reader.error(node.place, fault);
    }
    if source.key == "samples" {
        reader.need(node, "length", section, "0.2 us");
        let items = reader.list(&source.value, "samples", "samples: [0, 0.5, 1]")?;
        let found: Vec<Option<Quantity>> = items.iter().map(|item| reader.plain(item, "a sample")).collect();
        return found.into_iter().map(|quantity| quantity.map(|quantity| quantity.register)).collect::<Option<_>>().map(Samples::List);
    }
    let name = reader.text(&source.value, "file", "file: pulse.csv")?.to_string();
    let column = node.get("column").and_then(|column| reader.text(column, "column", "column: envelope").map(str::to_string));
    let path = reader.beside(&name);
    let file = match read_text(&path, &mut reader.sources) {
        Ok(file) => file,
        Err(mut mistake) => {
            if mistake.place.line == 0 {
                mistake.place = source.value.place;
                mistake.fault = match mistake.fault {
                    Fault::CannotRead { reason, .. } => Fault::CannotRead { path: name, reason },
                    other => other,
                };
            }
            reader.mistakes.push(mistake);
            return None;
        }
    };
    let text = reader.sources.files()[usize::from(file)].text.clone();
    match sample_table(&text, column.as_deref()) {
        Ok((times, values)) => Some(Samples::File { times_s: times.into(), values: values.into() }),
        Err((row, reason)) => {
            let length = reader.sources.line(file, row as u32).map_or(1, |line| line.chars().count().max(1));
            let place = Place { file, line: row as u32, column: 1, length: length as u32 };
            reader.error(place, Fault::FileContent { path: name, row, reason });
            None
        }
    }
}

/// Times in s and values of a CSV text with the header `time_<unit>,<column>`; a fault names its line.
fn sample_table(text: &str, column: Option<&str>) -> Result<(Vec<f64>, Vec<f64>), (usize, String)> {
    let mut table =
        csv::ReaderBuilder::new().has_headers(false).flexible(true).comment(Some(b'#')).trim(csv::Trim::All).from_reader(text.as_bytes());
    let mut records = table.records();
    let line_of = |record: &csv::StringRecord| record.position().map_or(1, |at| at.line() as usize);
    let header = match records.next() {
        Some(Ok(header)) => header,
        Some(Err(error)) => return Err((1, error.to_string())),
        None => return Err((1, "the file is empty; a header time_us,envelope is expected".to_string())),
    };
    let head_line = line_of(&header);
    let unit = header.get(0).and_then(|name| name.strip_prefix("time_")).and_then(crate::units::unit).filter(|unit| unit.dim == Dim::TIME);
    let Some(unit) = unit else {
        return Err((head_line, "the first heading must be time_us (or another unit of time after the underscore)".to_string()));
    };
    let which = match column {
        None => 1,
        Some(name) => match header.iter().position(|heading| heading == name) {
            Some(index) if index > 0 => index,
            _ => return Err((head_line, format!("no column is headed {name}"))),
        },
    };
    let (mut times, mut values) = (Vec::new(), Vec::new());
    for record in records {
        let record =
            record.map_err(|error| (error.position().map_or(1, |at| at.line() as usize), "the row is not UTF-8 text".to_string()))?;
        let line = line_of(&record);
        let number = |index: usize| -> Result<f64, (usize, String)> {
            let cell = record.get(index).ok_or_else(|| (line, format!("the row has no cell number {}", index + 1)))?;
            match cell.parse::<f64>() {
                Ok(value) if value.is_finite() => Ok(value),
                _ => Err((line, format!("\"{cell}\" is no finite number (dot as decimal sign)"))),
            }
        };
        let time = number(0)? * unit.factor;
        if times.is_empty() && time != 0.0 {
            return Err((line, "the first time must be 0".to_string()));
        }
        if times.last().is_some_and(|last| time <= *last) {
            return Err((line, "the times must increase from row to row".to_string()));
        }
        times.push(time);
        values.push(number(which)?);
    }
    if times.is_empty() {
        return Err((head_line, "there is no row below the header".to_string()));
    }
    Ok((times, values))
}

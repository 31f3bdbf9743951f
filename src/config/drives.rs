//! `drives:`.

use super::matrix::MatrixEntry;
use super::messages::Fault;
use super::place::Place;
use super::reader::{ComplexQuantity, Quantity, Reader};
use super::system::{Acting, Operator, OperatorSource, Physics, System};
use super::tape::{Formula, Register};
use super::tree::Node;
use super::vector::read_vector;
use crate::units::Dim;

/// How the envelope enters the Hamiltonian.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Form {
    /// A real cosine.
    Linear,
    /// One rotation sense only.
    OneSided,
    /// No carrier: the envelope itself multiplies the matrix.
    Direct,
}

impl Form {
    /// The word of the language.
    pub fn word(self) -> &'static str {
        FORMS[self as usize].0
    }
}

const FORMS: [(&str, Form); 3] = [("linear", Form::Linear), ("one_sided", Form::OneSided), ("direct", Form::Direct)];

/// What the phase of a carrier counts from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum CarrierPhase {
    /// The start of the sequence.
    RunsOn,
    /// The start of each pulse.
    Restarts,
}

/// A carrier frequency, with its chirp.
#[derive(Debug, Clone)]
pub struct Carrier {
    /// The frequency, or the centre of the chirp, Hz.
    pub centre: Quantity,
    /// The instantaneous frequency, Hz, as a formula of the time since the start of the pulse.
    pub instantaneous: Option<Formula>,
}

/// Rabi frequency per peak voltage.
#[derive(Debug, Clone, Copy)]
pub struct Calibration {
    /// Rabi frequency, Hz.
    pub rabi: Quantity,
    /// At this peak voltage, V.
    pub volts: Quantity,
}

/// The matrix that a drive multiplies, before it is scaled by its reference entry.
#[derive(Debug, Clone)]
pub enum DriveMatrix {
    /// Typed entries.
    Typed(Vec<MatrixEntry>),
    /// The operator of this index.
    Operator(usize),
    /// lower + raise of what `acts_on` names.
    Quanta(String),
    /// Energy of the magnetic moment of what `acts_on` names, per tesla along this direction.
    Moment(String, [Quantity; 3]),
    /// Dipole between the manifolds of the atom that `acts_on` names, in light of this polarisation.
    Light(String, Light),
}

/// Polarisation of light, by what it does to m on the way up.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Light {
    /// Raises m by one.
    Plus,
    /// Lowers m by one.
    Minus,
    /// Keeps m.
    Along,
}

const LIGHTS: [(&str, Light); 3] = [("plus", Light::Plus), ("minus", Light::Minus), ("along", Light::Along)];

/// A drive.
#[derive(Debug, Clone)]
pub struct Drive {
    /// Its name.
    pub name: String,
    /// Where the name stands.
    pub place: Place,
    /// The matrix as typed or built, not yet scaled by its reference entry.
    pub matrix: DriveMatrix,
    /// The pair to which `peak` and `turn` refer.
    pub reference: Option<[usize; 2]>,
    /// Where the reference pair stands.
    pub reference_place: Place,
    /// The pair is the operator's only one, and was not written: `matrix_element` then multiplies the operator as typed.
    pub reference_implied: bool,
    /// How the envelope enters.
    pub form: Form,
    /// The sense that cannot be resonant.
    pub opposite: bool,
    /// The carrier; none for a direct drive.
    pub carrier: Option<Carrier>,
    /// What its phase counts from, if said.
    pub carrier_phase: Option<CarrierPhase>,
    /// Volts to Rabi frequency.
    pub calibration: Option<Calibration>,
}

impl Drive {
    /// Typed entries of its matrix.
    pub fn entries(&self) -> &[MatrixEntry] {
        match &self.matrix {
            DriveMatrix::Typed(entries) => entries,
            _ => &[],
        }
    }

    /// Whether its matrix is that of a magnetic moment, so that a field may be its size.
    pub fn takes_field(&self) -> bool {
        matches!(self.matrix, DriveMatrix::Moment(..))
    }
}

const KEYS: [&str; 12] = [
    "pair",
    "operator",
    "acts_on",
    "strengths",
    "reference_pair",
    "form",
    "sense",
    "carrier",
    "carrier_phase",
    "calibration",
    "field_direction",
    "polarisation",
];

const HINTS: [(&str, &str); 8] = [
    ("detuning", "The carrier itself says it: carrier: 0.3 MHz above gap(a, b)."),
    ("frequency", "The frequency of a drive is its carrier."),
    ("rabi", "The strength stands in the envelope, as peak or turn."),
    ("peak", "The strength stands in the envelope, as peak or turn."),
    ("amplitude", "The strength stands in the envelope, as peak or turn."),
    ("phase", "The phase stands in the pulse of the sequence."),
    ("levels", "The levels that a drive couples stand under pair."),
    ("polarization", "Written polarisation."),
];

/// Reads `drives:`. A drive that cannot be read whole is left out, but its name is in the second list.
pub fn read_drives(reader: &mut Reader, node: &Node, system: &System, operators: &[Operator]) -> (Vec<Drive>, Vec<String>) {
    let Some(entries) = node.entries() else {
        let fault = Fault::Shape {
            what: "drives".to_string(),
            expected: "a block of names".to_string(),
            example: "rf: {pair: [down, up], carrier: 80 MHz}".to_string(),
        };
        reader.error(node.place, fault);
        return (Vec::new(), Vec::new());
    };
    let names: Vec<String> = entries.iter().map(|entry| entry.key.clone()).collect();
    super::system::warn_of_case(reader, "drive", &names, node.place);
    let drives = entries.iter().filter_map(|entry| read_drive(reader, &entry.key, entry.place, &entry.value, system, operators)).collect();
    (drives, names)
}

fn read_drive(reader: &mut Reader, name: &str, place: Place, node: &Node, system: &System, operators: &[Operator]) -> Option<Drive> {
    let section = format!("drives / {name}");
    let keys = reader.fields(node, &section, &KEYS, &HINTS)?;
    for lone in keys.iter().filter(|key| matches!(key.key.as_str(), "polarisation" | "field_direction") && node.get("acts_on").is_none()) {
        let expected = "beside acts_on, which names the moment or the atom that it is meant for".to_string();
        reader.error(lone.place, Fault::Shape { what: lone.key.clone(), expected, example: "acts_on: spin".to_string() });
    }
    let form = match node.get("form") {
        Some(form) => reader.word(form, &format!("{section} / form"), &FORMS),
        None => {
            reader.default(format!("{section} / form").replace(" / ", "."), "linear");
            Some(Form::Linear)
        }
    };
    let opposite = match node.get("sense") {
        Some(sense) => reader.word(sense, &format!("{section} / sense"), &[("opposite", true), ("resonant", false)]).unwrap_or(false),
        None => false,
    };
    let coupling = read_coupling(reader, name, node, &section, system, operators, form);
    let carrier = node.get("carrier").map(|carrier| read_carrier(reader, carrier, &format!("{section} / carrier")));
    let carrier_phase = node.get("carrier_phase").map(|phase| {
        let words = [("runs on", CarrierPhase::RunsOn), ("restarts", CarrierPhase::Restarts)];
        reader.word(phase, &format!("{section} / carrier_phase"), &words)
    });
    let calibration = node.get("calibration").map(|calibration| read_calibration(reader, calibration, &section));
    match (form, &carrier) {
        (Some(Form::Direct), Some(_)) => {
            let at = node.get("carrier").map_or(place, |carrier| carrier.place);
            reader.error(at, Fault::CarrierOfDirect { drive: name.to_string() });
            return None;
        }
        (Some(Form::Linear | Form::OneSided), None) => {
            reader.error(place, Fault::NeedsCarrier { drive: name.to_string() });
            return None;
        }
        _ => {}
    }
    let (matrix, reference, reference_place) = coupling?;
    Some(Drive {
        name: name.to_string(),
        place,
        matrix,
        reference,
        reference_place,
        reference_implied: node.get("operator").is_some() && node.get("reference_pair").is_none(),
        form: form?,
        opposite,
        carrier: carrier.map_or(Some(None), |carrier| carrier.map(Some))?,
        carrier_phase: carrier_phase.map_or(Some(None), |phase| phase.map(Some))?,
        calibration: calibration.map_or(Some(None), |calibration| calibration.map(Some))?,
    })
}

fn constant_entry(register: Register, row: usize, column: usize, place: Place) -> MatrixEntry {
    MatrixEntry { row, column, value: ComplexQuantity { re: register, im: None, place } }
}

/// The matrix as typed and its reference pair.
fn read_coupling(
    reader: &mut Reader,
    name: &str,
    node: &Node,
    section: &str,
    system: &System,
    operators: &[Operator],
    form: Option<Form>,
) -> Option<(DriveMatrix, Option<[usize; 2]>, Place)> {
    let hint = Some("pair: [a, b] couples two levels; operator: name a named matrix; acts_on: ladder the natural coupling.");
    let source = reader.one_of(node, &["pair", "operator", "acts_on", "strengths"], section, hint)?;
    let reference = node.get("reference_pair").map(|pair| (reader.pair(pair, "reference_pair"), pair.place));
    let place = source.value.place;
    let entries = match source.key.as_str() {
        "pair" => {
            let [a, b] = reader.pair(&source.value, &format!("{section} / pair"))?;
            let one = reader.constant(1.0, place);
            vec![constant_entry(one, a, b, place), constant_entry(one, b, a, place)]
        }
        "operator" => {
            let names: Vec<String> = operators.iter().map(|operator| operator.name.clone()).collect();
            let index = reader.name_among(&source.value, "operator", &names)?;
            match &operators[index].source {
                OperatorSource::Typed(entries) => entries.clone(),
                // a direct drive multiplies the operator as it is, so no pair is implied
                _ => return built(DriveMatrix::Operator(index), reference, place, system, form != Some(Form::Direct)),
            }
        }
        "strengths" => {
            let mut entries = Vec::new();
            for item in reader.list(&source.value, "strengths", "- {pair: [a, b], strength: 1}")? {
                reader.fields(item, &format!("{section} / strengths"), &["pair", "strength"], &[])?;
                let pair = reader.need(item, "pair", "strengths", "[a, b]").and_then(|pair| reader.pair(pair, "pair"));
                let strength = reader.need(item, "strength", "strengths", "1").and_then(|strength| reader.plain(strength, "strength"));
                let ([a, b], strength) = (pair?, strength?);
                entries.push(constant_entry(strength.register, a, b, item.place));
                entries.push(constant_entry(strength.register, b, a, item.place));
            }
            entries
        }
        _ => {
            let (name, acting) = read_acts_on(reader, &source.value, section, system)?;
            match (&system.physics, acting) {
                (Physics::Ladder(rungs), Acting::Quanta) if reader.as_built => rungs
                    .iter()
                    .enumerate()
                    .flat_map(|(n, rung)| [constant_entry(*rung, n, n + 1, place), constant_entry(*rung, n + 1, n, place)])
                    .collect(),
                (_, Acting::Quanta) => return built(DriveMatrix::Quanta(name), reference, place, system, true),
                (_, Acting::Moment | Acting::MomentOrLight) => {
                    let matrix = read_moment_or_light(reader, node, section, name, acting)?;
                    return built(matrix, reference, place, system, true);
                }
            }
        }
    };
    let mut pairs: Vec<[usize; 2]> = entries.iter().map(|e| [e.row.min(e.column), e.row.max(e.column)]).collect();
    pairs.sort_unstable();
    pairs.dedup();
    let reference = match reference {
        Some((pair, at)) => Some((pair?, at)),
        // one pair alone is its own reference, in the order written
        None if pairs.len() == 1 && pairs[0][0] != pairs[0][1] && (source.key != "operator" || form != Some(Form::Direct)) => {
            Some(([entries[0].row, entries[0].column], place))
        }
        None => None,
    };
    // a drive of several pairs needs a reference unless its sizes are matrix elements; that is judged where it is used
    if let Some((pair, at)) = reference {
        if !pairs.contains(&[pair[0].min(pair[1]), pair[0].max(pair[1])]) && !pairs.is_empty() {
            let (from, to) = (system.names[pair[0]].clone(), system.names[pair[1]].clone());
            reader.error(at, Fault::NoSuchCoupling { drive: name.to_string(), from, to });
            return None;
        }
    }
    if source.key == "operator" && form != Some(Form::OneSided) {
        hermitian(reader, name, &source.value, &entries)?;
    }
    Some((DriveMatrix::Typed(entries), reference.map(|(pair, _)| pair), reference.map_or(place, |(_, at)| at)))
}

/// A matrix that is known once the system is built; of two levels the only pair is the reference.
fn built(
    matrix: DriveMatrix,
    reference: Option<(Option<[usize; 2]>, Place)>,
    place: Place,
    system: &System,
    implied: bool,
) -> Option<(DriveMatrix, Option<[usize; 2]>, Place)> {
    match reference {
        Some((pair, at)) => Some((matrix, Some(pair?), at)),
        None if implied && system.names.len() == 2 => Some((matrix, Some([0, 1]), place)),
        None => Some((matrix, None, place)),
    }
}

/// The name under `acts_on`, and how a drive acts there.
fn read_acts_on(reader: &mut Reader, node: &Node, section: &str, system: &System) -> Option<(String, Acting)> {
    let known = system.acting();
    let what = reader.text(node, &format!("{section} / acts_on"), "ladder")?;
    if let Some(found) = known.iter().find(|(name, _)| name == what) {
        return Some(found.clone());
    }
    let known: Vec<String> = known.into_iter().map(|(name, _)| name).collect();
    let hint = known.is_empty().then(|| format!("This system is given by its {}, which has no coupling of its own.", system.kind));
    let near = super::reader::near(what, known.iter().map(String::as_str));
    let fault = Fault::UnknownWord { what: "acts_on".to_string(), found: what.to_string(), known, near, hint };
    reader.error(node.place, fault);
    None
}

/// What acts on a moment: a field along `field_direction`, or light of a `polarisation` where there are two manifolds.
fn read_moment_or_light(reader: &mut Reader, node: &Node, section: &str, name: String, acting: Acting) -> Option<DriveMatrix> {
    if acting == Acting::MomentOrLight {
        let hint = Some("field_direction drives within the manifolds, polarisation between them.");
        let entry = reader.one_of(node, &["field_direction", "polarisation"], section, hint)?;
        if entry.key == "polarisation" {
            return reader.word(&entry.value, &format!("{section} / polarisation"), &LIGHTS).map(|light| DriveMatrix::Light(name, light));
        }
    } else if let Some(light) = node.get("polarisation") {
        let expected = "for the lines between two manifolds; a field within one has a field_direction".to_string();
        reader.error(light.place, Fault::Shape { what: "polarisation".to_string(), expected, example: "field_direction: x".to_string() });
        return None;
    }
    read_direction(reader, node, section).map(|direction| DriveMatrix::Moment(name, direction))
}

/// `field_direction: x`, `y`, `z`, or three plain numbers; of no particular length.
fn read_direction(reader: &mut Reader, node: &Node, section: &str) -> Option<[Quantity; 3]> {
    let direction = reader.need(node, "field_direction", section, "x")?;
    let what = format!("{section} / field_direction");
    if direction.items().is_some() {
        return read_vector(reader, direction, &what, Dim::NONE);
    }
    let axis = reader.word(direction, &what, &[("x", 0), ("y", 1), ("z", 2)])?;
    Some([0, 1, 2].map(|k| {
        let register = reader.constant(f64::from(u8::from(k == axis)), direction.place);
        Quantity { register, place: direction.place }
    }))
}

fn hermitian(reader: &mut Reader, drive: &str, operator: &Node, entries: &[MatrixEntry]) -> Option<()> {
    let values = reader.tape.as_written();
    let value = |e: &MatrixEntry| (values[e.value.re as usize], e.value.im.map_or(0.0, |im| values[im as usize]));
    let largest = entries.iter().map(|e| value(e).0.hypot(value(e).1)).fold(0.0, f64::max);
    let cells: std::collections::HashMap<_, _> = entries.iter().map(|e| ((e.row, e.column), value(e))).collect();
    let off = cells.iter().any(|((row, column), (re, im))| {
        let (other_re, other_im) = cells.get(&(*column, *row)).copied().unwrap_or((0.0, 0.0));
        (re - other_re).hypot(im + other_im) > 1e-12 * largest
    });
    if off {
        let operator_name = operator.text().unwrap_or_default().to_string();
        reader.error(operator.place, Fault::NotHermitianDrive { drive: drive.to_string(), operator: operator_name });
        return None;
    }
    Some(())
}

/// A carrier: a frequency, or `{centre, instantaneous}`.
pub fn read_carrier(reader: &mut Reader, node: &Node, section: &str) -> Option<Carrier> {
    if node.entries().is_none() {
        let centre = reader.quantity(node, section, Dim::FREQUENCY)?;
        return Some(Carrier { centre, instantaneous: None });
    }
    reader.fields(node, section, &["centre", "instantaneous"], &[("center", "Written centre.")])?;
    let centre = reader
        .need(node, "centre", section, "80 MHz")
        .and_then(|centre| reader.quantity(centre, &format!("{section} / centre"), Dim::FREQUENCY));
    let formula = reader
        .need(node, "instantaneous", section, "line + reach * (2 * t / length - 1)")
        .and_then(|formula| reader.formula(formula, &format!("{section} / instantaneous"), Dim::FREQUENCY));
    Some(Carrier { centre: centre?, instantaneous: Some(formula?) })
}

fn read_calibration(reader: &mut Reader, node: &Node, section: &str) -> Option<Calibration> {
    let section = format!("{section} / calibration");
    reader.fields(node, &section, &["rabi", "volts"], &[])?;
    let rabi =
        reader.need(node, "rabi", &section, "100 MHz").and_then(|rabi| reader.quantity(rabi, &format!("{section} / rabi"), Dim::FREQUENCY));
    let volts =
        reader.need(node, "volts", &section, "0.31 V peak").and_then(|volts| reader.sine_volts(volts, &format!("{section} / volts")));
    Some(Calibration { rabi: rabi?, volts: volts? })
}

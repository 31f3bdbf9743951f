//! The facts as one JSON object. It is written piece by piece, one line per object of a list, so that a million pulses need
//! no memory.

use std::io::{self, Write};

use serde_json::{json, Map, Value};

use super::facts::{Facts, PulseFact};
use crate::drive::detuning::detuning;
use crate::drive::strength::flip_s;
use crate::report::number::number;

/// Writes the object.
pub fn write(facts: &Facts, out: &mut dyn Write) -> io::Result<()> {
    let (document, point) = (facts.document, facts.point);
    let names = &document.system.names;
    let mut object = Object { out, first: true };
    object.value("title", &json!(document.title))?;
    object.value("numbers", &numbers(facts))?;
    let levels = names.iter().zip(&point.energies_hz);
    object.list("levels", levels.map(|(name, hz)| json!({"name": name, "energy_Hz": number(*hz)})))?;
    let gap = |gap: &crate::model::gaps::Gap| {
        json!({
            "from": names[gap.lower],
            "to": names[gap.upper],
            "gap_Hz": number(gap.hz),
            "gap_eV": number(gap.ev()),
            "gap_K": number(gap.kelvin()),
            "gap_per_cm": number(gap.per_cm()),
            "wavelength_m": maybe(gap.wavelength_m()),
        })
    };
    object.list("gaps", facts.gaps.iter().map(gap))?;
    object.value("drives", &drives(facts))?;
    object.list("pulses", facts.pulses().map(|fact| pulse(facts, &fact)))?;
    let marks = point.timeline.marks.iter();
    object.list("marks", marks.map(|(name, at)| json!({"name": name, "at_s": number(at.seconds())})))?;
    object.value("end_s", &number(point.timeline.end.seconds()))?;
    detunings(facts, &mut object)?;
    let two = facts.two_photon.iter().map(|(a, b, hz)| {
        let name = format!("{} and {}", document.drives[*a].name, document.drives[*b].name);
        json!({"name": name, "detuning_Hz": number(*hz)})
    });
    object.list("two_photon", two)?;
    for (key, list) in super::surroundings::json(facts) {
        object.list(key, list.into_iter())?;
    }
    let commutators = facts.commutators.iter();
    object.list("commutators", commutators.map(|(a, b, size)| json!({"name": format!("{a} and {b}"), "size": number(*size)})))?;
    object.value("noise", &super::noise::json(facts))?;
    object.value("frame", &crate::report::frame_json::frame(document, point))?;
    object.value("ledger", &crate::report::frame_json::ledger(document, point))?;
    object.value("memory_bytes", &number(crate::outcome::run_bytes(document, point)))?;
    let defaults = document.defaults.iter();
    object.list("defaults", defaults.map(|(name, value)| json!({"name": name, "value": as_written(value)})))?;
    object.list("warnings", facts.warnings.iter().map(|text| json!(text)))?;
    object.end()
}

/// The object being written, a key a line.
struct Object<'w> {
    out: &'w mut dyn Write,
    first: bool,
}

impl Object<'_> {
    fn key(&mut self, key: &str) -> io::Result<()> {
        let before = if self.first { "{\n" } else { ",\n" };
        self.first = false;
        write!(self.out, "{before}{}: ", Value::from(key))
    }

    fn value(&mut self, key: &str, value: &Value) -> io::Result<()> {
        self.key(key)?;
        write!(self.out, "{value}")
    }

    fn list(&mut self, key: &str, items: impl Iterator<Item = Value>) -> io::Result<()> {
        self.key(key)?;
        self.items(items)
    }

    fn items(&mut self, items: impl Iterator<Item = Value>) -> io::Result<()> {
        let mut before = "[\n  ";
        for item in items {
            write!(self.out, "{before}{item}")?;
            before = ",\n  ";
        }
        self.out.write_all(if before.starts_with('[') { b"[]" } else { b"\n]" })
    }

    fn end(self) -> io::Result<()> {
        self.out.write_all(b"\n}\n")
    }
}

fn maybe(value: Option<f64>) -> Value {
    value.map_or(Value::Null, number)
}

/// A default as a number where it is one.
fn as_written(value: &str) -> Value {
    value.parse().map_or_else(|_| json!(value), number)
}

fn numbers(facts: &Facts) -> Value {
    let each = |n: &crate::config::reader::NamedNumber| {
        let value = number(facts.point.values[n.register as usize]);
        (n.name.clone(), json!({"value": value, "unit": n.dim.unit()}))
    };
    Value::Object(facts.document.numbers.iter().map(each).collect())
}

fn drives(facts: &Facts) -> Value {
    let names = &facts.document.system.names;
    let mut found = Map::new();
    for (index, (drive, fact)) in facts.document.drives.iter().zip(&facts.drives).enumerate() {
        // without a reference pair nothing has a Rabi frequency by itself; the matrix as typed is multiplied
        let rabi = fact.peak_hz.filter(|_| fact.carrier_hz.is_some() && fact.reference.is_some());
        let pairs: Vec<Value> = fact
            .pairs
            .iter()
            .map(|(gap, entry)| {
                let size = maybe(fact.peak_hz.map(|peak| peak * entry));
                let key = if facts.is_direct(index) { "element_Hz" } else { "rabi_Hz" };
                json!({"from": names[gap.lower], "to": names[gap.upper], key: size})
            })
            .collect();
        let mut object = json!({
            "form": drive.form.word(),
            "carrier_Hz": maybe(fact.carrier_hz),
            "peak_rabi_Hz": maybe(rabi),
            "flip_s": maybe(rabi.and_then(flip_s)),
            "pairs": pairs,
        });
        if rabi.is_none() {
            object["peak_element_Hz"] = maybe(fact.peak_hz);
        }
        found.insert(drive.name.clone(), object);
    }
    Value::Object(found)
}

fn pulse(facts: &Facts, fact: &PulseFact) -> Value {
    let strength = &fact.strength;
    let referred = fact.axis_turns.is_some();
    let mut object = json!({
        "drive": facts.document.drives[fact.drive].name,
        "envelope": facts.document.envelopes[fact.envelope].name,
        "start_s": number(fact.times_s[0]),
        "centre_s": number(fact.times_s[1]),
        "end_s": number(fact.times_s[2]),
        "peak_rabi_Hz": maybe(referred.then_some(strength.peak_hz)),
        "turn": maybe(referred.then_some(strength.turns)),
        "phase": maybe(fact.phase_turns),
        "axis": maybe(fact.axis_turns),
        "edge_step": number(strength.start_step),
        "missing_area": number(strength.missing_area),
    });
    if !referred {
        object["peak_element_Hz"] = number(strength.peak_hz);
    }
    object
}

/// Each carrier against each line; a drive without carrier has no entry.
fn detunings(facts: &Facts, object: &mut Object) -> io::Result<()> {
    let names = &facts.document.system.names;
    object.key("detunings")?;
    let mut before = "{";
    for (drive, fact) in facts.document.drives.iter().zip(&facts.drives) {
        let Some(carrier_hz) = fact.carrier_hz else { continue };
        write!(object.out, "{before}\n{}: ", Value::from(drive.name.as_str()))?;
        before = ",";
        object.items(facts.gaps.iter().filter(|gap| gap.hz > 0.0).map(|gap| {
            let (hz, side) = detuning(carrier_hz, *gap);
            json!({"from": names[gap.lower], "to": names[gap.upper], "detuning_Hz": number(hz), "word": side.word()})
        }))?;
    }
    object.out.write_all(if before == "{" { b"{}" } else { b"}" })
}

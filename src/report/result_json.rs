//! result.json: the numbers of a run with method, error and warnings, for programs to read.

use num_complex::Complex64;
use serde_json::{json, Map, Value};

use super::number::number;
use crate::config::document::Document;
use crate::config::messages::one_line;
use crate::outcome::Outcome;
use crate::plan::Point;
use crate::problem::Start;

/// Name and version of the program.
pub fn program() -> Value {
    json!({"name": "nutate", "version": env!("CARGO_PKG_VERSION")})
}

/// Title, fingerprint and replaced numbers of a config.
pub fn config(document: &Document) -> Value {
    let set: Map<String, Value> = document.set.iter().map(|(name, value)| (name.clone(), json!(value))).collect();
    json!({"title": document.title, "fingerprint": super::fingerprint::fingerprint(document), "set": set})
}

/// Warnings of the config and of the run.
pub fn warnings(document: &Document, point: &Point, outcome: &Outcome) -> Vec<String> {
    let mut texts: Vec<String> = document
        .warnings
        .iter()
        .chain(&point.warnings)
        .chain(outcome.warnings())
        .map(|warning| one_line(&document.sources, warning))
        .collect();
    if !outcome.reached {
        texts.push(super::summary::not_reached(document, outcome));
    }
    if let Some((method, reason)) = outcome.cross_check.as_ref().and_then(|check| Some((&check.method, check.difference.as_ref().err()?))) {
        texts.push(format!("the cross-check ({method}) was not made: {reason}"));
    }
    texts
}

/// The whole object.
pub fn result(document: &Document, point: &Point, outcome: &Outcome) -> Value {
    let method = json!({
        "name": outcome.method.word(),
        "reason": outcome.reason,
        "steps": outcome.steps,
        "refinement": {
            "resolutions": outcome.resolutions,
            "results": [
                outcome.finals.iter().map(|f| (f.name.clone(), number(f.value))).collect::<Map<_, _>>(),
                outcome.finals.iter().map(|f| (f.name.clone(), number(f.finer))).collect::<Map<_, _>>(),
            ],
        },
        "rounding_floor": number(outcome.floor),
    });
    let mut errors: Map<String, Value> = outcome.finals.iter().map(|f| (f.name.clone(), number(f.error))).collect();
    if let Some((_, error)) = &outcome.propagator {
        errors.insert("propagator".to_string(), number(*error));
    }
    if let Some((period_s, _, error)) = &outcome.quasi_energies {
        errors.insert("quasi_energies_Hz".to_string(), number(error / period_s));
    }
    for share in &outcome.budget {
        errors.insert(format!("error_budget_{}", share.name), number(share.error));
    }
    let mut result = Map::new();
    let mut put = |key: &str, value: Value| result.insert(key.to_string(), value);
    put("program", program());
    put("config", config(document));
    put("frame", super::frame_json::frame(document, point));
    put("method", method);
    put("error_figure", number(outcome.error_figure));
    if let Some(error) = outcome.sampling_error() {
        put("sampling_error", number(error));
    }
    put("accuracy", json!({"final": document.accuracy.last, "reached": outcome.reached}));
    put("errors", Value::Object(errors));
    if let Some(average) = &outcome.average {
        if average.sampling_error.is_some() {
            let of = |f: &crate::outcome::Final| (f.name.clone(), f.sampling_error.map_or(Value::Null, number));
            let mut errors: Map<String, Value> = outcome.finals.iter().map(of).collect();
            let shares = outcome.budget.iter().filter_map(|share| share.sampling_error.map(|error| (share.name, error)));
            errors.extend(shares.map(|(name, error)| (format!("error_budget_{name}"), number(error))));
            put("sampling_errors", Value::Object(errors));
        }
        put("average", json!({"over": average.words, "runs": average.runs, "draws": average.draws}));
    }
    if let Some(check) = &outcome.cross_check {
        let found = match &check.difference {
            Ok(difference) => json!({"method": check.method, "difference": number(*difference)}),
            Err(reason) => json!({"method": check.method, "difference": null, "reason": reason}),
        };
        put("cross_check", found);
    }
    put("final", finals(document, outcome));
    if !outcome.budget.is_empty() {
        put("error_budget", outcome.budget.iter().map(|share| (share.name.to_string(), number(share.value))).collect::<Map<_, _>>().into());
    }
    if let Some(sensitivity) = &outcome.sensitivity {
        put("sensitivity", super::sensitivity_json::sensitivity(sensitivity));
    }
    put("end_state", end_state(document, &outcome.end_state));
    put("ledger", super::frame_json::ledger(document, point));
    put("ledger_by_pair", super::frame_json::by_pair(document, point));
    if let Some(elimination) = super::frame_json::elimination(document, point) {
        put("elimination", elimination);
    }
    put("warnings", json!(warnings(document, point, outcome)));
    put("seconds", number(outcome.seconds));
    Value::Object(result)
}

/// The state at the end: amplitudes, or the rows of the density matrix; numbers as [re, im].
fn end_state(document: &Document, state: &Start) -> Value {
    let pair = |z: &Complex64| json!([number(z.re), number(z.im)]);
    match state {
        Start::Pure(amplitudes) => json!({"levels": document.system.names, "amplitudes": amplitudes.iter().map(pair).collect::<Vec<_>>()}),
        Start::Mixed(density) => {
            let rows: Vec<Vec<Value>> = density.row_iter().map(|row| row.iter().map(pair).collect()).collect();
            json!({"levels": document.system.names, "density": rows})
        }
    }
}

/// Everything recorded, at the last time.
fn finals(document: &Document, outcome: &Outcome) -> Value {
    let mut found = Map::new();
    found.insert("time_s".to_string(), number(outcome.times_s.last().copied().unwrap_or(0.0)));
    for (column, value) in outcome.columns.iter().zip(&outcome.finals) {
        insert(&mut found, &column.path, number(value.value));
    }
    if let Some((period_s, levels, _)) = &outcome.quasi_energies {
        let level = |level: &crate::measure::QuasiEnergy| {
            let weights: Map<String, Value> =
                document.system.names.iter().cloned().zip(level.weights.iter().map(|weight| number(*weight))).collect();
            json!({"energy_Hz": number(level.turns / period_s), "weights": weights})
        };
        found.insert("quasi_energies".to_string(), levels.iter().map(level).collect());
    }
    if let Some((propagator, _)) = &outcome.propagator {
        let rows: Vec<Value> = propagator.row_iter().map(|row| row.iter().map(|z| json!([number(z.re), number(z.im)])).collect()).collect();
        found.insert("propagator".to_string(), Value::Array(rows));
    }
    if let Some(steady) = &outcome.steady {
        let levels = document.system.names.iter().enumerate();
        let populations: Map<String, Value> = levels.map(|(k, name)| (name.clone(), number(steady.state[(k, k)].re))).collect();
        found.insert("steady".to_string(), json!({"populations": populations, "unique": steady.unique}));
    }
    if !outcome.counts.is_empty() {
        let count = |count: &crate::measure::Count| {
            (count.read.clone(), json!({"expected": number(count.expected), "spread": number(count.spread)}))
        };
        found.insert("shots".to_string(), Value::Object(outcome.counts.iter().map(count).collect()));
    }
    if let Some(gate) = &outcome.gate {
        found.insert("gate_error".to_string(), number(gate.error));
        found.insert("gate_leakage".to_string(), number(gate.leakage));
        match gate.free_z_turns.as_slice() {
            [] => {}
            [one] => {
                found.insert("gate_free_z".to_string(), number(*one));
            }
            several => {
                found.insert("gate_free_z".to_string(), several.iter().map(|turns| number(*turns)).collect());
            }
        }
        if let Some(incoherent) = gate.incoherent {
            found.insert("gate_coherent".to_string(), number(gate.error - incoherent));
            found.insert("gate_incoherent".to_string(), number(incoherent));
        }
        if let Some((turn, axis)) = gate.residual {
            found.insert("gate_residual".to_string(), json!({"turn": number(turn), "axis": axis.map(number)}));
        }
    }
    Value::Object(found)
}

/// Puts a number at its path; the second number of one path makes a list.
fn insert(into: &mut Map<String, Value>, path: &[String], value: Value) {
    let Some((first, rest)) = path.split_first() else { return };
    if rest.is_empty() {
        match into.get_mut(first) {
            None => {
                into.insert(first.clone(), value);
            }
            Some(Value::Array(list)) => list.push(value),
            Some(other) => *other = json!([other.take(), value]),
        }
        return;
    }
    let inner = into.entry(first.clone()).or_insert_with(|| Value::Object(Map::new()));
    if let Value::Object(inner) = inner {
        insert(inner, rest, value);
    }
}

//! The frame of a run, its ledger and what was eliminated, as JSON.

use serde_json::{json, Map, Value};

use super::number::number;
use crate::config::document::Document;
use crate::config::settings::{Follows, Frame};
use crate::frame::ledger::LedgerLine;
use crate::plan::{source_name, Point};

/// `frame`: kind, what it follows, the limit, and how fast each level turns at time zero.
pub fn frame(document: &Document, point: &Point) -> Value {
    let (Frame::Rotating(frame), Some(rotated)) = (&document.frame, point.in_frame()) else {
        return json!({"kind": "lab"});
    };
    let rotated = &rotated.rotated;
    let names = &document.system.names;
    let levels: Map<String, Value> = names.iter().cloned().zip(rotated.level_hz.iter().map(|hz| number(*hz))).collect();
    let beats: Vec<Value> = rotated
        .beats
        .iter()
        .map(|beat| json!({"drive": document.drives[beat.drive].name, "levels": [names[beat.levels[1]], names[beat.levels[0]]], "turns_at_Hz": number(beat.turns_hz.abs())}))
        .collect();
    json!({
        "kind": "rotating",
        "follows": match frame.follows { Follows::Drives => "drives", Follows::Table(_) => "table" },
        "drop_terms_faster_than_Hz": if rotated.ledger.limit_hz.is_finite() { number(rotated.ledger.limit_hz) } else { json!("nothing") },
        "level_frequencies_Hz": levels,
        "beats": beats,
    })
}

/// One line of the ledger.
pub fn line(document: &Document, line: &LedgerLine) -> Value {
    let names = &document.system.names;
    let or_null = |value: Option<f64>| value.map_or(Value::Null, number);
    json!({
        "drive": source_name(document, line.key.source),
        "levels": line.levels().map(|level| names[level].clone()),
        "size_Hz": number(line.size_hz),
        "turns_at_Hz": number(line.turns_at_hz),
        "kept": line.kept,
        "predicted_shift_Hz": or_null(line.predicted_shift_hz()),
        "predicted_ripple": or_null(line.predicted_ripple()),
    })
}

/// `ledger`: every turning term.
pub fn ledger(document: &Document, point: &Point) -> Value {
    point.in_frame().map_or_else(|| json!([]), |frame| frame.rotated.ledger.lines.iter().map(|entry| line(document, entry)).collect())
}

/// `ledger_by_pair`: what the dropped terms of each pair do together.
pub fn by_pair(document: &Document, point: &Point) -> Value {
    let names = &document.system.names;
    let sum = |sum: &crate::frame::ledger::PairSum| {
        json!({
            "levels": sum.levels.map(|level| names[level].clone()),
            "predicted_shift_Hz": number(sum.shift_hz),
            "predicted_ripple": number(sum.ripple),
        })
    };
    point.in_frame().map_or_else(|| json!([]), |frame| frame.rotated.ledger.by_pair().iter().map(sum).collect())
}

/// `elimination`: added shifts and couplings, and the validity figure.
pub fn elimination(document: &Document, point: &Point) -> Option<Value> {
    let done = point.in_frame()?.elimination.as_ref()?;
    let names = &document.system.names;
    let shifts: Map<String, Value> = done.shifts_hz.iter().map(|(level, hz)| (names[*level].clone(), number(*hz))).collect();
    let couplings: Map<String, Value> = done
        .couplings_hz
        .iter()
        .map(|(a, b, hz)| (format!("{},{}", names[*a], names[*b]), json!([number(hz.re), number(hz.im)])))
        .collect();
    let levels: Vec<&String> = done.levels.iter().map(|level| &names[*level]).collect();
    Some(json!({"levels": levels, "shifts_Hz": shifts, "couplings_Hz": couplings, "validity": number(done.validity)}))
}

//! result.json of `nutate matrices`: levels, operators, drives and lines, in the working basis.

use num_complex::Complex64;
use serde_json::{json, Map, Value};

use super::number::number;
use super::result_json::{config, program};
use crate::config::document::Document;
use crate::config::messages::one_line;
use crate::matrices::{strength, Matrices, Named, MOST_IN_DETAIL};
use crate::problem::Matrix;

/// A matrix as rows of [re, im].
fn rows(matrix: &Matrix) -> Value {
    matrix.row_iter().map(|row| row.iter().map(|z: &Complex64| json!([number(z.re), number(z.im)])).collect::<Vec<_>>()).collect()
}

/// A strength that is nothing but rounding beside the largest one of its operator.
pub(super) fn is_forbidden(strength: f64, largest: f64) -> bool {
    strength <= 1e-24 * largest
}

/// The largest strength of an operator over all lines.
pub(super) fn largest_strength(found: &Matrices, operator: &Named) -> f64 {
    found.lines.iter().map(|line| strength(&operator.matrix, *line)).fold(0.0, f64::max)
}

fn levels(document: &Document, found: &Matrices) -> Value {
    let built = &found.still.built;
    let weight = |k: usize| built.weights.get(k).copied().unwrap_or(1.0);
    let level =
        |(k, name): (usize, &String)| json!({"name": name, "energy_Hz": number(found.still.energies_hz[k]), "weight": number(weight(k))});
    document.system.names.iter().enumerate().map(level).collect()
}

fn transitions(document: &Document, found: &Matrices) -> Value {
    let names = &document.system.names;
    let all: Vec<(&Named, f64)> =
        found.operators.iter().chain(&found.drives).map(|named| (named, largest_strength(found, named))).collect();
    let line = |line: &crate::matrices::Line| {
        let strengths: Map<String, Value> =
            all.iter().map(|(named, _)| (named.name.clone(), number(strength(&named.matrix, *line)))).collect();
        let allowed: Vec<&str> = all
            .iter()
            .filter(|(named, largest)| !is_forbidden(strength(&named.matrix, *line), *largest))
            .map(|(named, _)| named.name.as_str())
            .collect();
        json!({"from": names[line.from], "to": names[line.to], "gap_Hz": number(line.gap_hz), "strength": strengths, "allowed_by": allowed})
    };
    found.lines.iter().map(line).collect()
}

/// The whole object.
pub fn result(document: &Document, found: &Matrices) -> Value {
    let built = &found.still.built;
    let small = built.size() <= MOST_IN_DETAIL;
    let by_name = |list: &[Named], value: &dyn Fn(&Named) -> Value| -> Value {
        Value::Object(list.iter().map(|named| (named.name.clone(), value(named))).collect())
    };
    let mut result = Map::new();
    let mut put = |key: &str, value: Value| result.insert(key.to_string(), value);
    put("program", program());
    put("config", config(document));
    put("levels", levels(document, found));
    put("energies_Hz", found.eigenvalues_hz.iter().map(|level| number(*level)).collect());
    put("error_figure", number(found.error_figure));
    if small {
        put("static_Hz", rows(&built.statics_hz));
        put("operators", by_name(&found.operators, &|named| rows(&named.matrix)));
        put("drives", by_name(&found.drives, &|named| rows(&named.matrix)));
        put("transitions", transitions(document, found));
        put("commutators", found.commutators.iter().map(|(name, size)| json!({"name": name, "size": number(*size)})).collect());
    }
    put("operator_units", by_name(&found.operators, &|named| json!(named.unit)));
    put("operator_errors", by_name(&found.operators, &|named| number(named.error)));
    let canonical = found.canonical.iter().map(|(part, diagonal)| {
        let key = if part.is_empty() { "system".to_string() } else { part.clone() };
        (key, diagonal.iter().map(|value| number(*value)).collect::<Value>())
    });
    put("position_momentum", Value::Object(canonical.collect()));
    let names = &document.system.names;
    let shares = |shares: &[f64]| -> Value {
        let hit = names.iter().zip(shares).filter(|(_, share)| **share > 0.0);
        Value::Object(hit.map(|(name, share)| (name.clone(), number(*share))).collect())
    };
    put("leads_out", Value::Object(found.leaving.iter().map(|(name, list)| (name.clone(), shares(list))).collect()));
    put("lost_Hz", number(built.lost_hz));
    put("operators_left_out", json!(found.left_out));
    if let Some(overlap) = &built.overlap {
        put("overlap", rows(overlap));
    }
    if !built.sum_rule.is_empty() {
        put(
            "sum_rule",
            document.system.names.iter().cloned().zip(built.sum_rule.iter().map(|sum| number(*sum))).collect::<Map<_, _>>().into(),
        );
    }
    put("notes", json!(built.notes));
    let warnings = document.warnings.iter().chain(built.doubtful.iter().map(|(_, mistake)| mistake));
    put("warnings", warnings.map(|warning| one_line(&document.sources, warning)).collect());
    Value::Object(result)
}

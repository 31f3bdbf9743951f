//! result.json of a comparison: the object of a run for each variant, the differences, and what explains them.

use serde_json::{json, Map, Value};

use super::frame_json;
use super::number::number;
use super::result_json::{config, program, result};
use crate::compare::{sentences, Comparison};
use crate::config::document::Document;

/// The whole object.
pub fn comparison(document: &Document, comparison: &Comparison, seconds: f64) -> Value {
    let mut variants = Map::new();
    for computed in &comparison.computed {
        if let Ok(point) = computed.plan.point() {
            variants.insert(computed.name.clone(), result(computed.plan.document(), &point, &computed.outcome));
        }
    }
    let (mut differences, mut exceeds, mut explanation) = (Map::new(), Map::new(), Map::new());
    for held in &comparison.held {
        let mut own = Map::new();
        for difference in &held.differences {
            own.insert(difference.quantity.clone(), number(difference.value));
            own.insert(format!("{}_error", difference.quantity), number(difference.error));
            if let Some(sampling) = difference.sampling_error {
                own.insert(format!("{}_sampling_error", difference.quantity), number(sampling));
            }
        }
        differences.insert(held.name.clone(), Value::Object(own));
        if let Some(is) = held.exceeds {
            exceeds.insert(held.name.clone(), json!(is));
        }
        if !held.explanation.is_empty() {
            let puts = held.explanation.iter().map(|put| {
                let by = if put.in_reference { &comparison.against } else { &held.name };
                let names =
                    comparison.computed.iter().find(|computed| computed.name == *by).map_or(document, |computed| computed.plan.document());
                let remains: Map<String, Value> = put.remains.iter().map(|(name, value)| (name.clone(), number(*value))).collect();
                let mut line = frame_json::line(names, &put.line);
                if let Value::Object(line) = &mut line {
                    line.insert("dropped_by".to_string(), json!(by));
                    line.insert("remains".to_string(), Value::Object(remains));
                }
                line
            });
            explanation.insert(held.name.clone(), puts.collect());
        }
    }
    json!({
        "program": program(),
        "config": config(document),
        "against": comparison.against,
        "tolerance": comparison.tolerance.map_or(Value::Null, number),
        "variants": variants,
        "differences": differences,
        "exceeds_tolerance": exceeds,
        "explanation": explanation,
        "findings": sentences(document, comparison),
        "warnings": document.warnings.iter().map(|warning| crate::config::messages::one_line(&document.sources, warning)).collect::<Vec<_>>(),
        "seconds": number(seconds),
    })
}

//! `sensitivity` of result.json.

use serde_json::{json, Map, Value};

use super::number::number;
use crate::outcome::sensitivity::{Derivative, FinalSensitivity, MovedNumber, Sensitivity};

/// The object; derivatives per the unit that stands with each number, an allowed change that has no limit is null.
pub fn sensitivity(found: &Sensitivity) -> Value {
    let numbers: Map<String, Value> =
        found.numbers.iter().map(|n| (n.name.clone(), json!({"value": number(n.value), "unit": n.unit}))).collect();
    let derivative = |(n, d): (&MovedNumber, &Derivative)| {
        let all = json!({
            "derivative": number(d.first),
            "error": number(d.error),
            "second_derivative": number(d.second),
            "allowed_change": number(d.allowed),
        });
        (n.name.clone(), all)
    };
    let of = |f: &FinalSensitivity| {
        let by: Map<String, Value> = found.numbers.iter().zip(&f.by).map(derivative).collect();
        (f.name.clone(), json!({"value": number(f.value), "unit": f.unit, "tolerance": number(found.tolerance * f.scale), "by": by}))
    };
    let pairs = |list: &[(String, String)]| -> Map<String, Value> { list.iter().map(|(name, why)| (name.clone(), json!(why))).collect() };
    json!({
        "tolerance": number(found.tolerance),
        "tolerance_from": if found.tolerance_given { "--tolerance" } else { "accuracy" },
        "numbers": numbers,
        "of": found.finals.iter().map(of).collect::<Map<_, _>>(),
        "left_out": pairs(&found.left_out),
        "without_derivative": pairs(&found.without),
        "seconds": number(found.seconds),
    })
}

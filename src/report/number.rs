//! Numbers in JSON.

use serde_json::Value;

/// A number; what is not finite becomes null.
pub fn number(value: f64) -> Value {
    serde_json::Number::from_f64(value).map_or(Value::Null, Value::Number)
}

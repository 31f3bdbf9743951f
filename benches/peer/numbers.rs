//! The numbers of a workload file.

use serde_json::Value;

/// A workload's numbers by name.
pub struct Numbers(Value);

impl Numbers {
    pub fn new(json: Value) -> Numbers {
        Numbers(json)
    }

    /// A number; NaN where there is none.
    pub fn of(&self, key: &str) -> f64 {
        self.0[key].as_f64().unwrap_or(f64::NAN)
    }

    /// A count.
    pub fn count(&self, key: &str) -> usize {
        self.0[key].as_u64().unwrap_or(0) as usize
    }

    /// Nested lists, flattened.
    pub fn list(&self, key: &str) -> Vec<f64> {
        fn walk(json: &Value, into: &mut Vec<f64>) {
            match json {
                Value::Array(items) => items.iter().for_each(|item| walk(item, into)),
                other => into.extend(other.as_f64()),
            }
        }
        let mut found = Vec::new();
        walk(&self.0[key], &mut found);
        found
    }
}

/// b(t) = exp(-(t - T/2)^2/(2 s^2)) and its derivative over t, s = T/(2 half_width_sigmas).
pub fn bell(t: f64, length: f64, half_width_sigmas: f64) -> (f64, f64) {
    let s = length / (2.0 * half_width_sigmas);
    let x = (t - length / 2.0) / s;
    let value = (-0.5 * x * x).exp();
    (value, -x / s * value)
}

/// A list as the language writes it.
pub fn written(values: impl Iterator<Item = f64>) -> String {
    let all: Vec<String> = values.map(|value| format!("{value:e}")).collect();
    format!("[{}]", all.join(", "))
}

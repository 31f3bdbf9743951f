//! What left the system: what is missing to 1 in the sum of the populations.

use super::{Column, Quantity, Seen};

/// Population lost so far.
pub struct Lost;

impl Quantity for Lost {
    fn columns(&self) -> Vec<Column> {
        vec![Column::plain("lost".to_string(), &["lost"], "outside", "lost".to_string())]
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.push(1.0 - seen.state.trace());
    }
}

//! State fidelity with a given pure state, <to|rho|to>, in the frame of the run.

use super::{Column, Quantity, Seen};
use crate::problem::Vector;

/// Squared overlap with one state.
pub struct Fidelity {
    to: Vector,
}

impl Fidelity {
    /// With `to`, norm 1.
    pub fn new(to: Vector) -> Fidelity {
        Fidelity { to }
    }
}

impl Quantity for Fidelity {
    fn columns(&self) -> Vec<Column> {
        vec![Column::plain("fidelity".to_string(), &["fidelity"], "fidelity", "fidelity".to_string())]
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.push(seen.state.weight(&self.to));
    }
}

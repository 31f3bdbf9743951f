//! Leakage: everything that is not in the levels named, formed as a sum of what is outside so that small leakage keeps its digits.

use super::{Column, Quantity, Seen};

/// The population outside some levels.
pub struct Outside {
    inside: Vec<usize>,
}

impl Outside {
    /// Outside `inside`.
    pub fn new(inside: Vec<usize>) -> Outside {
        Outside { inside }
    }
}

impl Quantity for Outside {
    fn columns(&self) -> Vec<Column> {
        vec![Column::plain("outside".to_string(), &["outside"], "outside", "outside".to_string())]
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        let outside = (0..seen.state.dim()).filter(|level| !self.inside.contains(level));
        row.push(outside.map(|level| seen.state.population(level)).sum());
    }
}

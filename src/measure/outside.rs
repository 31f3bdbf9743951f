//! Leakage: everything that is not in the levels named, formed as a sum of what is outside so that small leakage keeps its digits;
//! what left the system is part of it.

use super::{Column, Quantity, Seen};

/// The population outside some levels.
pub struct Outside {
    inside: Vec<usize>,
    /// Whether something can have left the system.
    loses: bool,
}

impl Outside {
    /// Outside `inside`; where nothing leaves the system, the rounding of its trace is kept out.
    pub fn new(inside: Vec<usize>, loses: bool) -> Outside {
        Outside { inside, loses }
    }
}

impl Quantity for Outside {
    fn columns(&self) -> Vec<Column> {
        vec![Column::plain("outside".to_string(), &["outside"], "outside", "outside".to_string())]
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        let outside = (0..seen.state.dim()).filter(|level| !self.inside.contains(level));
        let within: f64 = outside.map(|level| seen.state.population(level)).sum();
        row.push(if self.loses { within + (1.0 - seen.state.trace()) } else { within });
    }
}

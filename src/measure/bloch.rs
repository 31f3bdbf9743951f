//! Bloch vectors of pairs [a, b]: x + i y = 2 rho_ba, z = population of a minus population of b, in the frame of the run
//! (F. Bloch, Physical Review 70, 460 (1946); R. P. Feynman, F. L. Vernon, R. W. Hellwarth, J. Appl. Phys. 28, 49 (1957)).

use super::{Column, Quantity, Seen};

/// Bloch vectors of some pairs.
pub struct BlochVectors {
    pairs: Vec<([usize; 2], String)>,
}

impl BlochVectors {
    /// Those of `pairs`; with one pair alone the columns bear no names.
    pub fn new(names: &[String], pairs: &[[usize; 2]]) -> BlochVectors {
        let name = |[a, b]: &[usize; 2]| {
            if pairs.len() == 1 {
                String::new()
            } else {
                format!("_{}_{}", names[*a], names[*b])
            }
        };
        BlochVectors { pairs: pairs.iter().map(|pair| (*pair, name(pair))).collect() }
    }
}

impl Quantity for BlochVectors {
    fn columns(&self) -> Vec<Column> {
        let column = |name: &str, axis: &str| {
            let path = if name.is_empty() { vec!["bloch"] } else { vec!["bloch", &name[1..]] };
            Column::plain(format!("bloch{name}_{axis}"), &path, "Bloch vector", format!("{axis}{}", name.replace('_', " ")))
        };
        self.pairs.iter().flat_map(|(_, name)| ["x", "y", "z"].map(|axis| column(name, axis))).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        for ([a, b], _) in &self.pairs {
            let across = 2.0 * seen.state.coherence(*b, *a);
            row.extend([across.re, across.im, seen.state.population(*a) - seen.state.population(*b)]);
        }
    }
}

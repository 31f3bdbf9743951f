//! Populations of basis states: squared modulus of the amplitude, or diagonal of the density matrix.

use super::{Column, Quantity, Seen};

/// Populations of some levels.
pub struct Populations {
    levels: Vec<(usize, String)>,
}

impl Populations {
    /// Those of `levels`.
    pub fn new(names: &[String], levels: &[usize]) -> Populations {
        Populations { levels: levels.iter().map(|level| (*level, names[*level].clone())).collect() }
    }
}

impl Quantity for Populations {
    fn columns(&self) -> Vec<Column> {
        let column =
            |(_, name): &(usize, String)| Column::plain(format!("population_{name}"), &["populations", name], "population", name.clone());
        self.levels.iter().map(column).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.extend(self.levels.iter().map(|(level, _)| seen.state.population(*level)));
    }
}

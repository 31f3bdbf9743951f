//! Levels of the static system over h, Hz, in the working basis, and gaps E_b - E_a of pairs as written. They do not change with time.

use super::{binary_scale, Column, Quantity, Seen};
use crate::config::tape::Wide;
use crate::model::built::Built;

/// Levels, then gaps.
pub struct StaticLevels {
    columns: Vec<Column>,
    numbers: Vec<f64>,
}

impl StaticLevels {
    /// The levels of these indices.
    pub fn levels(names: &[String], built: &Built, levels: &[usize]) -> StaticLevels {
        let numbers: Vec<f64> = levels.iter().map(|level| built.energies[*level].value()).collect();
        let titles = levels.iter().map(|level| (format!("level_{}_Hz", names[*level]), ["levels".to_string(), names[*level].clone()]));
        StaticLevels::new(titles, numbers, "levels")
    }

    /// The gaps of these pairs, b less a.
    pub fn gaps(names: &[String], built: &Built, pairs: &[[usize; 2]]) -> StaticLevels {
        let minus = |level: Wide| Wide { high: -level.high, low: -level.low };
        // with the digits that the levels have beyond a double
        let gap = |[a, b]: &[usize; 2]| built.energies[*b].plus(minus(built.energies[*a])).value();
        let title = |[a, b]: &[usize; 2]| {
            let (a, b) = (&names[*a], &names[*b]);
            (format!("gap_{a}_{b}_Hz"), ["transitions".to_string(), format!("{a} to {b}")])
        };
        StaticLevels::new(pairs.iter().map(title), pairs.iter().map(gap).collect(), "gaps")
    }

    fn new(titles: impl Iterator<Item = (String, [String; 2])>, numbers: Vec<f64>, panel: &'static str) -> StaticLevels {
        let scale = binary_scale(numbers.iter().fold(0.0, |most, number| most.max(number.abs())));
        let column = |(name, path): (String, [String; 2])| {
            let label = path[1].clone();
            Column { name, unit: "Hz", scale, path: path.to_vec(), panel, label }
        };
        StaticLevels { columns: titles.map(column).collect(), numbers }
    }
}

impl Quantity for StaticLevels {
    fn columns(&self) -> Vec<Column> {
        self.columns.clone()
    }

    fn see(&self, _seen: &Seen, row: &mut Vec<f64>) {
        row.extend(&self.numbers);
    }
}

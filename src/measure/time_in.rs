//! Time spent in a level since time zero: the integral of its population, s.

use super::{binary_scale, Column, Quantity, Seen};

/// Time spent in some levels.
pub struct TimeIn {
    levels: Vec<(usize, String)>,
    length_s: f64,
}

impl TimeIn {
    /// Of `levels`, in a run of `length_s`.
    pub fn new(names: &[String], levels: &[usize], length_s: f64) -> TimeIn {
        TimeIn { levels: levels.iter().map(|level| (*level, names[*level].clone())).collect(), length_s }
    }
}

impl Quantity for TimeIn {
    fn columns(&self) -> Vec<Column> {
        let column = |(_, name): &(usize, String)| Column {
            name: format!("time_in_{name}"),
            unit: "s",
            scale: binary_scale(self.length_s),
            path: vec!["time_in".to_string(), name.clone()],
            panel: "time in",
            label: name.clone(),
        };
        self.levels.iter().map(column).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.extend(self.levels.iter().map(|(level, _)| seen.time_in_s.get(*level).copied().unwrap_or(f64::NAN)));
    }
}

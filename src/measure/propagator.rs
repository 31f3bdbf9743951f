//! The propagator of the whole sequence, written out: row by row, real and imaginary part of each entry.

use super::Last;
use crate::problem::Matrix;

/// All entries of the propagator.
pub struct WholePropagator {
    size: usize,
}

impl WholePropagator {
    /// Of `size` levels.
    pub fn new(size: usize) -> WholePropagator {
        WholePropagator { size }
    }
}

impl Last for WholePropagator {
    fn names(&self) -> Vec<String> {
        let entry = |row: usize, column: usize| ["re", "im"].map(|part| format!("propagator_{row}_{column}_{part}"));
        (0..self.size).flat_map(|row| (0..self.size).flat_map(move |column| entry(row, column))).collect()
    }

    fn see(&self, propagator: &Matrix, numbers: &mut Vec<f64>) {
        for row in propagator.row_iter() {
            numbers.extend(row.iter().flat_map(|entry| [entry.re, entry.im]));
        }
    }
}

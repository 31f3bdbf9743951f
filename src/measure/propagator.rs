//! The propagator of the whole sequence, written out: row by row, real and imaginary part of each entry.

use super::{Last, Whole};

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

    fn see(&self, whole: Whole, numbers: &mut Vec<f64>) {
        // a channel has no propagator: it is refused beside decay and dephasing, and missing where only the start is mixed
        let Whole::Propagator(propagator) = whole else {
            numbers.extend(std::iter::repeat_n(f64::NAN, 2 * self.size * self.size));
            return;
        };
        for row in propagator.row_iter() {
            numbers.extend(row.iter().flat_map(|entry| [entry.re, entry.im]));
        }
    }
}

//! One part of a joint system by itself: its reduced density matrix rho_A = Tr_B rho, in the names of the working basis and in the
//! frame of the run.
//!
//! Recorded are its populations, the Bloch vector of a part of two levels (x + i y = 2 rho_ba, z = rho_aa - rho_bb, a its first
//! level) and its purity Tr rho_A^2, from 1 for a pure state down to 1 over the number of levels (J. von Neumann, Goettinger
//! Nachrichten 1927, 245). Errors: those of the state, and roundings.

use num_complex::Complex64;

use super::{Column, Quantity, Seen};
use crate::problem::Matrix;

/// Populations, Bloch vector and purity of one part.
pub struct PartAlone {
    name: String,
    levels: Vec<String>,
    before: usize,
    after: usize,
    purity: bool,
}

impl PartAlone {
    /// For the part `which` of `parts` (name and levels, the leftmost slowest); without the purity where it could not be averaged.
    pub fn new(parts: &[(String, Vec<String>)], which: usize, purity: bool) -> PartAlone {
        let size = |parts: &[(String, Vec<String>)]| parts.iter().map(|(_, levels)| levels.len()).product();
        let (name, levels) = parts[which].clone();
        PartAlone { name, levels, before: size(&parts[..which]), after: size(&parts[which + 1..]), purity }
    }

    fn reduced(&self, seen: &Seen) -> Matrix {
        let inner = self.levels.len();
        Matrix::from_fn(inner, inner, |row, column| {
            let mut sum = Complex64::from(0.0);
            for outer in 0..self.before {
                for last in 0..self.after {
                    let at = |k: usize| (outer * inner + k) * self.after + last;
                    sum += if row == column { seen.state.population(at(row)).into() } else { seen.state.coherence(at(row), at(column)) };
                }
            }
            sum
        })
    }
}

impl Quantity for PartAlone {
    fn columns(&self) -> Vec<Column> {
        let name = &self.name;
        let column = |column: String, path: &[&str], panel: &'static str, label: String| Column::plain(column, path, panel, label);
        let mut columns: Vec<Column> = self
            .levels
            .iter()
            .map(|level| {
                let path = ["part", name, "populations", level];
                column(format!("part_{name}_population_{level}"), &path, "population", format!("{name} {level}"))
            })
            .collect();
        if self.levels.len() == 2 {
            columns.extend(["x", "y", "z"].map(|axis| {
                column(format!("part_{name}_bloch_{axis}"), &["part", name, "bloch"], "Bloch vector", format!("{axis} {name}"))
            }));
        }
        if self.purity {
            columns.push(column(format!("part_{name}_purity"), &["part", name, "purity"], "purity", name.clone()));
        }
        columns
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        let reduced = self.reduced(seen);
        row.extend(reduced.diagonal().iter().map(|entry| entry.re));
        if self.levels.len() == 2 {
            let across = 2.0 * reduced[(1, 0)];
            row.extend([across.re, across.im, reduced[(0, 0)].re - reduced[(1, 1)].re]);
        }
        if self.purity {
            row.push(reduced.norm_squared());
        }
    }
}

//! Means of operators, Tr(A rho); of an operator that is not Hermitian the real part.

use super::{binary_scale, Column, Quantity, Seen};
use crate::config::document::Document;
use crate::model;
use crate::model::built::Built;
use crate::problem::Matrix;

/// Means of some operators, in SI units.
pub struct Means {
    operators: Vec<(String, &'static str, Matrix)>,
}

impl Means {
    /// Those of the operators with these indices.
    pub fn new(document: &Document, built: &Built, values: &[f64], operators: &[usize]) -> Means {
        let made = operators.iter().map(|index| {
            let name = &document.operators[*index].name;
            (name.clone(), built.unit(name), model::operator(document, built, *index, values))
        });
        Means { operators: made.collect() }
    }
}

impl Quantity for Means {
    fn columns(&self) -> Vec<Column> {
        let column = |(name, unit, matrix): &(String, &'static str, Matrix)| {
            let plain = Column::plain(format!("mean_{name}"), &["mean", name], "mean", name.clone());
            let largest = matrix.iter().map(|entry| entry.norm()).fold(0.0, f64::max);
            Column { unit, scale: if *unit == "1" { 1.0 } else { binary_scale(largest) }, ..plain }
        };
        self.operators.iter().map(column).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.extend(self.operators.iter().map(|(.., matrix)| seen.state.mean(matrix)));
    }
}

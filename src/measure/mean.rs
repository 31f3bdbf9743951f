//! Means of operators, Tr(A rho); of an operator that is not Hermitian the real part.

use super::{Column, Quantity, Seen};
use crate::config::document::Document;
use crate::model;
use crate::problem::Matrix;

/// Means of some operators without dimension.
pub struct Means {
    operators: Vec<(String, Matrix)>,
}

impl Means {
    /// Those of the operators with these indices.
    pub fn new(document: &Document, values: &[f64], operators: &[usize]) -> Means {
        let size = document.system.names.len();
        let made = operators.iter().map(|index| {
            let operator = &document.operators[*index];
            (operator.name.clone(), model::dense(size, &operator.entries, values))
        });
        Means { operators: made.collect() }
    }
}

impl Quantity for Means {
    fn columns(&self) -> Vec<Column> {
        self.operators.iter().map(|(name, _)| Column::plain(format!("mean_{name}"), &["mean", name], "mean", name.clone())).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        row.extend(self.operators.iter().map(|(_, matrix)| seen.state.mean(matrix)));
    }
}

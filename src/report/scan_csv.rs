//! scan.csv: one row for each point, in the order of the grid: the axes in their units, then the columns of the table. A failed
//! point keeps its row, with empty cells. Each double survives the round trip.

use std::fmt::Write as _;
use std::io::{self, Write};

use crate::scan::row::Found;
use crate::scan::setup::Setup;
use crate::scan::shelf::Shelf;

/// The headings.
pub fn headings(setup: &Setup) -> Vec<String> {
    let axes = setup.grid.axes().iter().map(|axis| axis.heading());
    axes.chain(setup.columns.iter().map(|column| column.name.clone())).collect()
}

/// Writes the table, row by row as the stores give them.
pub fn write(setup: &Setup, shelf: &Shelf, to: &mut impl Write) -> io::Result<()> {
    let mut line = headings(setup).iter().map(|heading| quoted(heading)).collect::<Vec<_>>().join(",");
    line.push('\n');
    to.write_all(line.as_bytes())?;
    shelf.rows(|row| {
        line.clear();
        for (k, value) in setup.grid.shown(row.point).into_iter().enumerate() {
            cell(&mut line, k, Some(value));
        }
        let axes = setup.grid.axes().len();
        for k in 0..setup.columns.len() {
            let value = match &row.found {
                Found::Numbers { numbers, .. } => numbers.get(k).copied(),
                Found::Failed(_) => None,
            };
            cell(&mut line, axes + k, value.filter(|value| value.is_finite()));
        }
        line.push('\n');
        to.write_all(line.as_bytes())
    })
}

fn cell(line: &mut String, k: usize, value: Option<f64>) {
    if k > 0 {
        line.push(',');
    }
    if let Some(value) = value {
        // the shortest text that reads back as the same double
        let _ = write!(line, "{value:?}");
    }
}

/// A heading as CSV has it.
fn quoted(heading: &str) -> String {
    if heading.contains([',', '"', '\n']) {
        format!("\"{}\"", heading.replace('"', "\"\""))
    } else {
        heading.to_string()
    }
}

//! scan.csv: one row for each point, in the order of the grid: the axes in their units, then the columns of the table. A failed
//! point keeps its row, with empty cells. Each double survives the round trip.

use std::fmt::Write as _;
use std::io::{self, Write};
use std::path::PathBuf;

use crate::scan::row::{Found, Row};
use crate::scan::setup::Setup;
use crate::scan::shelf::{Rows, Shelf};

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
    shelf.each(&mut |row| {
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
pub fn quoted(heading: &str) -> String {
    if heading.contains([',', '"', '\n']) {
        format!("\"{}\"", heading.replace('"', "\"\""))
    } else {
        heading.to_string()
    }
}

/// A table written earlier. What its rows say of errors is in result.json alone.
pub struct Table<'a> {
    /// The scan that wrote it.
    pub setup: &'a Setup,
    /// The file.
    pub path: PathBuf,
}

impl Rows for Table<'_> {
    fn each(&self, take: &mut dyn FnMut(Row) -> io::Result<()>) -> io::Result<()> {
        let wrong = |reason: String| io::Error::new(io::ErrorKind::InvalidData, reason);
        let mut table = csv::Reader::from_path(&self.path).map_err(io::Error::other)?;
        let found: Vec<String> = table.headers().map_err(io::Error::other)?.iter().map(str::to_string).collect();
        if found != headings(self.setup) {
            return Err(wrong("it has other columns than its config makes".to_string()));
        }
        let axes = self.setup.grid.axes().len();
        for (point, record) in table.records().enumerate() {
            let record = record.map_err(io::Error::other)?;
            let number = |cell: &str| {
                if cell.is_empty() {
                    Ok(f64::NAN)
                } else {
                    cell.parse().map_err(|_| wrong(format!("\"{cell}\" is no number")))
                }
            };
            let numbers: Vec<f64> = record.iter().skip(axes).map(number).collect::<io::Result<_>>()?;
            let failed = numbers.iter().all(|value| value.is_nan());
            let found = if failed { Found::Failed(String::new()) } else { Found::Numbers { numbers, checked: None, trace: None } };
            take(Row { point: point as u64, found })?;
        }
        Ok(())
    }
}

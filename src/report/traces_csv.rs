//! traces.csv: `time_s` first, then one column per recorded quantity, then their standard errors where draws were averaged; each double
//! survives the round trip.

use std::io::{self, Write};

use crate::outcome::Outcome;

/// What is added to the heading of a column for its standard error, where the numbers are means over random draws.
pub const SAMPLING_ERROR: &str = "_sampling_error";

/// Writes the table.
pub fn write(outcome: &Outcome, to: impl Write) -> io::Result<()> {
    let mut table = csv::Writer::from_writer(to);
    table.write_field("time_s")?;
    for column in &outcome.columns {
        table.write_field(&column.name)?;
    }
    let drawn = !outcome.row_errors.is_empty();
    for column in outcome.columns.iter().filter(|_| drawn) {
        table.write_field(format!("{}{SAMPLING_ERROR}", column.name))?;
    }
    table.write_record(None::<&[u8]>)?;
    let wide = outcome.columns.len();
    let mut text = String::new();
    for (k, time) in outcome.times_s.iter().enumerate() {
        let row = &outcome.rows[k * wide..(k + 1) * wide];
        let errors = outcome.row_errors.iter().skip(k * wide).take(wide);
        for value in std::iter::once(time).chain(row).chain(errors) {
            text.clear();
            // the shortest text that reads back as the same double
            let _ = std::fmt::Write::write_fmt(&mut text, format_args!("{value:?}"));
            table.write_field(&text)?;
        }
        table.write_record(None::<&[u8]>)?;
    }
    table.flush()
}

/// Reads a table back: headings and columns.
pub fn read(path: &std::path::Path) -> Result<(Vec<String>, Vec<Vec<f64>>), String> {
    let mut table = csv::Reader::from_path(path).map_err(|error| error.to_string())?;
    let headings: Vec<String> = table.headers().map_err(|error| error.to_string())?.iter().map(str::to_string).collect();
    let mut columns = vec![Vec::new(); headings.len()];
    for record in table.records() {
        let record = record.map_err(|error| error.to_string())?;
        for (column, cell) in columns.iter_mut().zip(&record) {
            column.push(cell.parse().map_err(|_| format!("\"{cell}\" is no number"))?);
        }
    }
    Ok((headings, columns))
}

//! Matrices as typed: rows of entries, the upper triangle with `lower: mirror`, or a CSV or .npy file beside the config.

use super::messages::Fault;
use super::npy;
use super::place::Place;
use super::reader::{ComplexQuantity, Reader};
use super::tape::{Entry as TapeEntry, One};
use super::tree::{read_text, Kind, Node};

/// An entry of a matrix that was written and is not a plain 0.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MatrixEntry {
    /// Row, from 0.
    pub row: usize,
    /// Column, from 0.
    pub column: usize,
    /// Its value.
    pub value: ComplexQuantity,
}

/// One row as nodes, and the column of its first entry.
pub struct Row {
    /// Where the row stands.
    pub place: Place,
    /// Its entries.
    pub cells: Vec<Node>,
}

/// What a matrix was read from.
pub enum Rows {
    /// Text, entry by entry.
    Text(Vec<Row>),
    /// Numbers of a binary file: rows of (re, im).
    Binary(Vec<Vec<(f64, f64)>>, Place),
}

/// The rows under `rows:` or in the file of `rows_from:`.
pub fn rows(reader: &mut Reader, node: &Node, section: &str) -> Option<Rows> {
    let entry = reader.one_of(node, &["rows", "rows_from"], section, None)?;
    if entry.key == "rows" {
        let mut found = Vec::new();
        for row in reader.list(&entry.value, &format!("{section} / rows"), "rows: [[0, 1], [1, 0]]")? {
            let cells = reader.list(row, &format!("a row of {section}"), "[0, 1]")?;
            found.push(Row { place: row.place, cells: cells.to_vec() });
        }
        return Some(Rows::Text(found));
    }
    let name = reader.text(&entry.value, &format!("{section} / rows_from"), "rows_from: matrix.csv")?.to_string();
    let path = reader.beside(&name);
    if path.extension().is_some_and(|end| end == "npy") {
        return match npy::read(&path) {
            Ok(npy::Array { rows, columns, values, bytes }) => {
                reader.sources.add(&path, bytes, String::new());
                let found = (0..rows).map(|row| values[row * columns..(row + 1) * columns].to_vec()).collect();
                Some(Rows::Binary(found, entry.value.place))
            }
            Err(reason) => {
                reader.error(entry.value.place, Fault::CannotRead { path: name, reason });
                None
            }
        };
    }
    let file = match read_text(&path, &mut reader.sources) {
        Ok(file) => file,
        Err(mut mistake) => {
            // a file that is not there is a mistake of the line that names it
            if mistake.place.line == 0 {
                mistake.place = entry.value.place;
            }
            reader.mistakes.push(mistake);
            return None;
        }
    };
    let text = reader.sources.files()[usize::from(file)].text.clone();
    let mut found = Vec::new();
    for (number, line) in super::place::lines(&text).enumerate() {
        if line.trim().is_empty() || line.trim_start().starts_with('#') {
            continue;
        }
        let mut cells = Vec::new();
        let mut column = 1;
        for cell in line.split(',') {
            let lead = cell.chars().take_while(|c| c.is_whitespace()).count();
            let trimmed = cell.trim();
            let length = trimmed.chars().count();
            let place = Place { file, line: number as u32 + 1, column: (column + lead) as u32, length: length.max(1) as u32 };
            cells.push(Node { place, kind: Kind::Scalar { text: trimmed.to_string(), quoted: false, exact: true } });
            column += cell.chars().count() + 1;
        }
        found.push(Row { place: Place { file, line: number as u32 + 1, column: 1, length: line.chars().count().max(1) as u32 }, cells });
    }
    Some(Rows::Text(found))
}

/// `lower: mirror`.
pub fn mirrored(reader: &mut Reader, node: &Node, section: &str) -> bool {
    match node.get("lower") {
        Some(lower) => reader.word(lower, &format!("{section} / lower"), &[("mirror", true)]).unwrap_or(false),
        None => false,
    }
}

/// Checks the shape of typed rows and gives every written entry by row and column; with `mirror` a row starts at its diagonal.
pub fn cells<'r>(reader: &mut Reader, rows: &'r [Row], size: usize, mirror: bool, place: Place) -> Option<Vec<(usize, usize, &'r Node)>> {
    if rows.len() != size {
        reader.error(place, Fault::RowCount { found: rows.len(), wanted: size });
        return None;
    }
    let mut found = Vec::new();
    let mut good = true;
    for (index, row) in rows.iter().enumerate() {
        let first = if mirror { index } else { 0 };
        if row.cells.len() != size - first {
            reader.error(row.place, Fault::RowLength { row: index + 1, found: row.cells.len(), wanted: size - first, mirror });
            good = false;
            continue;
        }
        found.extend(row.cells.iter().enumerate().map(|(k, cell)| (index, first + k, cell)));
    }
    good.then_some(found)
}

/// A matrix without dimension under a block with `rows` or `rows_from`, `size` x `size`.
pub fn plain_matrix(reader: &mut Reader, node: &Node, section: &str, size: usize) -> Option<Vec<MatrixEntry>> {
    let mirror = mirrored(reader, node, section);
    match rows(reader, node, section)? {
        Rows::Text(rows) => {
            let cells = cells(reader, &rows, size, mirror, node.place)?;
            let mut entries = Vec::new();
            let mut good = true;
            for (row, column, cell) in cells {
                if cell.text() == Some("0") {
                    continue;
                }
                match reader.plain_entry(cell, &format!("an entry of {section}")) {
                    Some(value) => entries.push(MatrixEntry { row, column, value }),
                    None => good = false,
                }
            }
            if mirror {
                mirror_entries(reader, &mut entries);
            }
            good.then_some(entries)
        }
        Rows::Binary(rows, place) => binary_entries(reader, &rows, size, 1.0, place),
    }
}

/// Adds the complex conjugates below the diagonal.
pub fn mirror_entries(reader: &mut Reader, entries: &mut Vec<MatrixEntry>) {
    for k in 0..entries.len() {
        let entry = entries[k];
        if entry.row != entry.column {
            let im = entry.value.im.map(|im| reader.tape.push(TapeEntry::One(One::Negative, im), entry.value.place));
            entries.push(MatrixEntry { row: entry.column, column: entry.row, value: ComplexQuantity { im, ..entry.value } });
        }
    }
}

/// The entries of a binary matrix, each times `factor`.
pub fn binary_entries(reader: &mut Reader, rows: &[Vec<(f64, f64)>], size: usize, factor: f64, place: Place) -> Option<Vec<MatrixEntry>> {
    if rows.len() != size {
        reader.error(place, Fault::RowCount { found: rows.len(), wanted: size });
        return None;
    }
    if let Some(bad) = rows.iter().position(|row| row.len() != size) {
        reader.error(place, Fault::RowLength { row: bad + 1, found: rows[bad].len(), wanted: size, mirror: false });
        return None;
    }
    let mut entries = Vec::new();
    for (row, values) in rows.iter().enumerate() {
        for (column, (re, im)) in values.iter().enumerate() {
            if *re != 0.0 || *im != 0.0 {
                let re = reader.constant(re * factor, place);
                let im = (*im != 0.0).then(|| reader.constant(im * factor, place));
                entries.push(MatrixEntry { row, column, value: ComplexQuantity { re, im, place } });
            }
        }
    }
    Some(entries)
}

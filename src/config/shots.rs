//! `record: shots:` counts behind a read-out: how many shots, and what each level is read as.

use super::messages::{Fault, OpenFault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::tree::Node;

/// Counts that a number of shots would show.
#[derive(Debug, Clone)]
pub struct Shots {
    /// How many shots.
    pub number: Quantity,
    /// Name of each read, and its probability for each level in basis order.
    pub reads: Vec<(String, Vec<Quantity>)>,
    /// Where the reads stand.
    pub place: Place,
}

impl Shots {
    /// Probability of each read for each level, by read; the reads of a level must add up to 1 within 1e-9.
    pub fn probabilities(&self, names: &[String], values: &[f64]) -> Result<Vec<Vec<f64>>, Fault> {
        let rows: Vec<Vec<f64>> = self.reads.iter().map(|(_, row)| row.iter().map(|p| values[p.register as usize]).collect()).collect();
        for (level, name) in names.iter().enumerate() {
            let column: Vec<f64> = rows.iter().map(|row| row[level]).collect();
            if let Some(found) = column.iter().find(|p| !(0.0..=1.0).contains(*p)) {
                let what = format!("a probability among the reads of {name}");
                return Err(Fault::OutOfRange { what, found: super::messages::short(*found), wanted: "from 0 to 1".to_string() });
            }
            let sum: f64 = column.iter().sum();
            if (sum - 1.0).abs() > 1e-9 {
                let (row, last) = (self.reads.len() - 1, column[column.len() - 1]);
                let missing = Some(last + 1.0 - sum).filter(|p| (0.0..=1.0).contains(p));
                return Err(Fault::Open(OpenFault::ReadsColumn { level: name.clone(), sum, row: self.reads[row].0.clone(), missing }));
            }
        }
        Ok(rows)
    }
}

/// Reads `shots:`.
pub fn read_shots(reader: &mut Reader, node: &Node) -> Option<Shots> {
    reader.fields(node, "record / shots", &["number", "reads"], &[("read_out", "The read-out matrix is called reads.")])?;
    let number = reader.need(node, "number", "record / shots", "500").and_then(|number| {
        let quantity = reader.plain(number, "record / shots / number")?;
        let found = reader.value_now(quantity.register);
        if !(found.is_finite() && found == found.round() && found >= 1.0) {
            reader.error(number.place, Fault::NotWhole { what: "record / shots / number".to_string(), found, from: 1.0 });
            return None;
        }
        Some(quantity)
    });
    let names = reader.level_names();
    let (reads, place) = match node.get("reads") {
        Some(reads) => (read_rows(reader, reads, &names), reads.place),
        None => {
            reader.default("record.shots.reads", "perfect: each level is read as itself");
            let entry = |reader: &mut Reader, on: bool| Quantity {
                register: reader.constant(if on { 1.0 } else { 0.0 }, node.place),
                place: node.place,
            };
            let rows = names.iter().enumerate();
            let rows = rows.map(|(k, name)| (name.clone(), (0..names.len()).map(|level| entry(reader, level == k)).collect())).collect();
            (Some(rows), node.place)
        }
    };
    let shots = Shots { number: number?, reads: reads?, place };
    if let Err(fault) = shots.probabilities(&names, &reader.tape.as_written()) {
        reader.error(place, fault);
        return None;
    }
    Some(shots)
}

/// Rows named like the levels, or by name.
fn read_rows(reader: &mut Reader, node: &Node, names: &[String]) -> Option<Vec<(String, Vec<Quantity>)>> {
    let rows: Vec<(String, &Node)> = match (node.entries(), node.items()) {
        (Some(entries), _) => entries.iter().map(|entry| (entry.key.clone(), &entry.value)).collect(),
        (_, Some(items)) if items.len() == names.len() => names.iter().cloned().zip(items).collect(),
        (_, Some(items)) => {
            let fault = OpenFault::ReadCount { found: items.len(), wanted: names.len() };
            reader.error(node.place, Fault::Open(fault));
            return None;
        }
        _ => Vec::new(),
    };
    if rows.is_empty() {
        let fault = Fault::Shape {
            what: "record / shots / reads".to_string(),
            expected: "rows, one for each read".to_string(),
            example: "reads: [[0.98, 0.04], [0.02, 0.96]]".to_string(),
        };
        reader.error(node.place, fault);
        return None;
    }
    let mut found = Vec::new();
    for (read, row) in &rows {
        let cells = reader.list(row, &format!("the row of the read {read}"), "[0.98, 0.04]")?;
        if cells.len() != names.len() {
            let fault = OpenFault::ReadLength { read: read.clone(), found: cells.len(), wanted: names.len() };
            reader.error(row.place, Fault::Open(fault));
            continue;
        }
        let cells: Vec<Option<Quantity>> = cells.iter().map(|cell| reader.plain(cell, "a probability of the read-out")).collect();
        if let Some(cells) = cells.into_iter().collect::<Option<Vec<_>>>() {
            found.push((read.clone(), cells));
        }
    }
    (found.len() == rows.len()).then_some(found)
}

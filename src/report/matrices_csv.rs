//! Tables of `nutate matrices`: levels.csv, transitions.csv, and for each matrix a CSV with the names of the states and a .npy.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use num_complex::Complex64;

use super::matrices_json::{is_forbidden, largest_strength};
use super::npy::{head_complex, numbers};
use crate::config::document::Document;
use crate::matrices::{strength, Matrices, MOST_IN_DETAIL};
use crate::problem::Matrix;

/// Writes every table into `side`; gives the names of the files.
pub fn write(side: &Path, document: &Document, found: &Matrices) -> io::Result<Vec<String>> {
    let names = &document.system.names;
    let mut files = vec!["levels.csv".to_string()];
    levels(side, names, found)?;
    let small = names.len() <= MOST_IN_DETAIL;
    if small {
        transitions(side, names, found)?;
        files.push("transitions.csv".to_string());
    }
    let statics = &found.still.built.statics_hz;
    let mut all = vec![("static".to_string(), statics)];
    all.extend(found.operators.iter().map(|named| (format!("operator-{}", named.name), &named.matrix)));
    all.extend(found.drives.iter().map(|named| (format!("drive-{}", named.name), &named.matrix)));
    let mut taken: Vec<String> = Vec::new();
    for (name, matrix) in all {
        let mut word: String = name.chars().map(|c| if c.is_alphanumeric() || ".-_+".contains(c) { c } else { '-' }).collect();
        while taken.contains(&word.to_lowercase()) {
            word.push('-');
        }
        taken.push(word.to_lowercase());
        if small {
            table(&side.join(format!("matrix-{word}.csv")), names, matrix)?;
        }
        npy(&side.join(format!("matrix-{word}.npy")), matrix)?;
    }
    files.push(format!("{} matrices (.npy{})", taken.len(), if small { ", .csv" } else { "" }));
    Ok(files)
}

fn levels(side: &Path, names: &[String], found: &Matrices) -> io::Result<()> {
    let mut table = csv::Writer::from_path(side.join("levels.csv"))?;
    table.write_record(["state", "energy_Hz", "weight"])?;
    for (k, name) in names.iter().enumerate() {
        let weight = found.still.built.weights.get(k).copied().unwrap_or(1.0);
        table.write_record([name.clone(), format!("{:?}", found.still.energies_hz[k]), format!("{weight:?}")])?;
    }
    table.flush()
}

fn transitions(side: &Path, names: &[String], found: &Matrices) -> io::Result<()> {
    let mut table = csv::Writer::from_path(side.join("transitions.csv"))?;
    let all: Vec<_> = found.operators.iter().chain(&found.drives).map(|named| (named, largest_strength(found, named))).collect();
    let headings = all.iter().map(|(named, _)| format!("strength_{}", named.name));
    table.write_record(["from", "to", "gap_Hz"].map(str::to_string).into_iter().chain(headings).chain(["allowed_by".to_string()]))?;
    for line in &found.lines {
        let strengths: Vec<f64> = all.iter().map(|(named, _)| strength(&named.matrix, *line)).collect();
        let allowed: Vec<&str> = all
            .iter()
            .zip(&strengths)
            .filter(|((_, largest), size)| !is_forbidden(**size, *largest))
            .map(|((named, _), _)| named.name.as_str())
            .collect();
        let cells = [names[line.from].clone(), names[line.to].clone(), format!("{:?}", line.gap_hz)];
        table.write_record(cells.into_iter().chain(strengths.iter().map(|size| format!("{size:?}"))).chain([allowed.join(" ")]))?;
    }
    table.flush()
}

/// An entry as the config would write it.
fn entry(z: &Complex64) -> String {
    match (z.re == 0.0, z.im == 0.0) {
        (_, true) => format!("{:?}", z.re),
        (true, false) => format!("{:?}i", z.im),
        _ => format!("{:?} {} {:?}i", z.re, if z.im < 0.0 { '-' } else { '+' }, z.im.abs()),
    }
}

fn table(path: &Path, names: &[String], matrix: &Matrix) -> io::Result<()> {
    let mut table = csv::Writer::from_path(path)?;
    table.write_record(std::iter::once("row").chain(names.iter().map(String::as_str)))?;
    for (name, row) in names.iter().zip(matrix.row_iter()) {
        table.write_record(std::iter::once(name.clone()).chain(row.iter().map(entry)))?;
    }
    table.flush()
}

fn npy(path: &Path, matrix: &Matrix) -> io::Result<()> {
    let mut file = BufWriter::new(File::create(path)?);
    head_complex(&mut file, &[matrix.nrows() as u64, matrix.ncols() as u64])?;
    for row in matrix.row_iter() {
        row.iter().try_for_each(|z| numbers(&mut file, &[z.re, z.im]))?;
    }
    file.flush()
}

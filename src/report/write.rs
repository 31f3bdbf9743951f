//! All files of a result, written to the side and moved into place together.

use std::fs::File;
use std::io::{self, BufWriter};
use std::path::Path;

use serde_json::Value;

use super::figures::{self, Named};
use super::folder::Staging;
use super::{compare_json, matrices_csv, matrices_json, result_json, traces_csv};
use crate::compare::Comparison;
use crate::config::document::Document;
use crate::matrices::Matrices;
use crate::outcome::Outcome;
use crate::plan::Point;

/// What was written where, and what could not be drawn.
pub struct Written {
    /// File names and folder, in words.
    pub place: String,
    /// Plots that could not be drawn, and why.
    pub not_drawn: Vec<(String, String)>,
}

/// Writes the files of a run.
pub fn run(staging: Staging, document: &Document, point: &Point, outcome: &Outcome) -> io::Result<Written> {
    let tables = [("traces.csv".to_string(), outcome)];
    whole(staging, document, &tables, figures::of_run(document, point, outcome), &result_json::result(document, point, outcome))
}

/// Writes the files of a comparison.
pub fn comparison(staging: Staging, document: &Document, comparison: &Comparison, seconds: f64) -> io::Result<Written> {
    let tables: Vec<(String, &Outcome)> =
        comparison.computed.iter().map(|computed| (format!("traces-{}.csv", file_word(&computed.name)), &computed.outcome)).collect();
    let json = compare_json::comparison(document, comparison, seconds);
    whole(staging, document, &tables, figures::of_comparison(document, comparison), &json)
}

/// Writes the files of `nutate matrices`.
pub fn matrices(staging: Staging, document: &Document, found: &Matrices) -> io::Result<Written> {
    let side = staging.side().to_path_buf();
    staging.archive(document)?;
    let mut names = matrices_csv::write(&side, document, found)?;
    names.push("result.json".to_string());
    write_json(&side, &matrices_json::result(document, found))?;
    let mut not_drawn = Vec::new();
    for (name, figure) in figures::of_matrices(document, found) {
        match figure {
            Ok(drawn) => names.extend(figures::save(&side, name, &drawn)?.into_iter().take(1)),
            Err(reason) => not_drawn.push((name.to_string(), reason.to_string())),
        }
    }
    let folder = staging.finish()?;
    Ok(Written { place: format!("{} in {}", names.join(", "), folder.display()), not_drawn })
}

/// A name as part of a file name.
fn file_word(name: &str) -> String {
    name.chars().map(|c| if c.is_alphanumeric() { c } else { '-' }).collect()
}

fn whole(staging: Staging, document: &Document, tables: &[(String, &Outcome)], plots: Vec<Named>, json: &Value) -> io::Result<Written> {
    let side = staging.side().to_path_buf();
    staging.archive(document)?;
    let mut names = Vec::new();
    for (name, outcome) in tables {
        traces_csv::write(outcome, BufWriter::new(File::create(side.join(name))?))?;
        names.push(name.clone());
    }
    names.push("result.json".to_string());
    let mut not_drawn = Vec::new();
    for (name, figure) in plots {
        match figure {
            Ok(drawn) => names.extend(figures::save(&side, name, &drawn)?.into_iter().take(1)),
            Err(reason) => not_drawn.push((name.to_string(), reason.to_string())),
        }
    }
    write_json(&side, json)?;
    let folder = staging.finish()?;
    Ok(Written { place: format!("{} in {}", names.join(", "), folder.display()), not_drawn })
}

fn write_json(side: &Path, json: &Value) -> io::Result<()> {
    std::fs::write(side.join("result.json"), serde_json::to_string_pretty(json)? + "\n")
}

//! All files of a finished scan, written to the side and moved into place together; the stores go last.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use serde_json::{json, Value};

use super::fingerprint::sum_of;
use super::folder::Staging;
use super::scan_figures::{of_scan, Points};
use super::scan_json::{result, Finished};
use super::write::Written;
use super::{figures, followed_figures, npy, scan_csv};
use crate::scan::row::Found;
use crate::scan::shelf::{Rows, Shelf};

/// Writes table, traces, plots and result.json; gives the object too.
pub fn write(staging: Staging, shelf: &Shelf, finished: &Finished, points: &Points) -> io::Result<(Written, Value)> {
    let setup = finished.setup;
    let side = staging.side().to_path_buf();
    staging.archive(setup.document())?;
    let mut json = result(finished);
    let mut names = vec!["scan.csv".to_string()];
    let table = side.join("scan.csv");
    let mut to = BufWriter::with_capacity(1 << 16, File::create(&table)?);
    scan_csv::write(setup, shelf, &mut to)?;
    let file = to.into_inner().map_err(io::IntoInnerError::into_error)?;
    file.sync_all()?;
    json.insert("table".to_string(), json!({"file": "scan.csv", "sha256": sum_of(File::open(&table)?)?}));
    if !setup.traced.is_empty() {
        json.insert("traces".to_string(), traces(&side, shelf, finished)?);
        names.push("traces.npy".to_string());
    }
    if let Some(found) = &points.followed {
        names.extend(followed_figures::tables(setup, found, &side)?);
        json.insert("followed".to_string(), followed_figures::json(setup, found));
    }
    names.push("result.json".to_string());
    let mut not_drawn = Vec::new();
    for (name, figure) in of_scan(points) {
        match figure {
            Ok(drawn) => names.extend(figures::save(&side, &name, &drawn)?.into_iter().take(1)),
            Err(reason) => not_drawn.push((name, reason.to_string())),
        }
    }
    let json = Value::Object(json);
    let path = side.join("result.json");
    let mut to = File::create(&path)?;
    to.write_all((serde_json::to_string_pretty(&json)? + "\n").as_bytes())?;
    to.sync_all()?;
    let folder = staging.finish()?;
    // the renames too must be on the disk before the stores go
    if let Ok(folder) = File::open(&folder) {
        let _ = folder.sync_all();
    }
    super::scan_folder::tidy(&folder);
    Ok((Written { place: format!("{} in {}", names.join(", "), folder.display()), not_drawn }, json))
}

/// traces.npy: points by moments by columns, the time first; NaN where a point has fewer moments, or failed.
fn traces(side: &Path, shelf: &Shelf, finished: &Finished) -> io::Result<Value> {
    let (setup, moments) = (finished.setup, finished.summary.moments);
    let wide = setup.traced.len();
    let mut to = BufWriter::with_capacity(1 << 16, File::create(side.join("traces.npy"))?);
    npy::head(&mut to, &[finished.summary.points, moments as u64, wide as u64 + 1])?;
    let mut block = Vec::new();
    shelf.each(&mut |row| {
        block.clear();
        if let Found::Numbers { trace: Some(trace), .. } = &row.found {
            for (time, numbers) in trace.times_s.iter().zip(trace.rows.chunks(wide)) {
                block.push(*time);
                block.extend_from_slice(numbers);
            }
        }
        block.resize(moments * (wide + 1), f64::NAN);
        npy::numbers(&mut to, &block)
    })?;
    to.into_inner().map_err(io::IntoInnerError::into_error)?.sync_all()?;
    let columns: Vec<String> = std::iter::once("time_s".to_string()).chain(setup.traced.iter().cloned()).collect();
    Ok(json!({"file": "traces.npy", "shape": [finished.summary.points, moments, wide + 1], "columns": columns}))
}

//! `state_from:` the end state of another run, or a .npy file: amplitudes, or a density matrix.

use std::path::Path;

use super::messages::Fault;
use super::npy;
use super::reader::Reader;
use super::state::State;
use super::tree::Node;

/// Numbers as (re, im), with rows and columns; a state is one row or one column, a density matrix is square.
struct Found {
    bytes: Vec<u8>,
    rows: usize,
    columns: usize,
    /// Row by row.
    values: Vec<(f64, f64)>,
}

/// Reads the state that the file holds.
pub fn read_state_file(reader: &mut Reader, node: &Node) -> Option<State> {
    let name = reader.text(node, "state_from", "state_from: ../other-run/result.json")?.to_string();
    let path = reader.beside(&name);
    let read = if path.extension().is_some_and(|end| end == "npy") {
        npy::read(&path).map(|array| Found { bytes: array.bytes, rows: array.rows, columns: array.columns, values: array.values })
    } else {
        end_state(&path)
    };
    let wanted = reader.level_names().len();
    let state = match read {
        Ok(found) => {
            reader.sources.add(&path, found.bytes.clone(), String::new());
            state_of(&found, wanted)
        }
        Err(reason) => Err(Fault::CannotRead { path: name.clone(), reason }),
    };
    match state {
        Ok(state) => Some(state),
        Err(Fault::CannotRead { reason, .. }) => {
            reader.error(node.place, Fault::CannotRead { path: name, reason });
            None
        }
        Err(fault) => {
            reader.error(node.place, fault);
            None
        }
    }
}

fn state_of(found: &Found, wanted: usize) -> Result<State, Fault> {
    let no = |reason: String| Fault::CannotRead { path: String::new(), reason };
    if found.rows == found.columns && found.rows > 1 {
        return density(found, wanted);
    }
    if found.rows != 1 && found.columns != 1 {
        return Err(no(format!(
            "it has {} rows and {} columns, which is neither one state nor a density matrix",
            found.rows, found.columns
        )));
    }
    let amplitudes = &found.values;
    if amplitudes.len() != wanted {
        return Err(no(format!("it has {} amplitudes for {wanted} levels", amplitudes.len())));
    }
    let sum: f64 = amplitudes.iter().map(|(re, im)| re * re + im * im).sum();
    if !(sum.is_finite() && (sum - 1.0).abs() <= 1e-6) {
        return Err(Fault::NotNormalised { sum, write: "a file whose squared amplitudes add up to 1".to_string() });
    }
    let norm = sum.sqrt();
    Ok(State::Amplitudes(amplitudes.iter().map(|(re, im)| (re / norm, im / norm)).collect()))
}

/// A density matrix: Hermitian, no population below zero, trace 1 or less where something has been lost.
fn density(found: &Found, wanted: usize) -> Result<State, Fault> {
    const ROOM: f64 = 1e-9;
    let no = |reason: String| Err(Fault::CannotRead { path: String::new(), reason });
    let n = found.rows;
    if n != wanted {
        return no(format!("it is a density matrix of {n} levels, and there are {wanted}"));
    }
    let at = |row: usize, column: usize| found.values[row * n + column];
    for row in 0..n {
        for column in 0..=row {
            let (a, b) = (at(row, column), at(column, row));
            if !((a.0 - b.0).hypot(a.1 + b.1) <= ROOM) {
                return no(format!(
                    "its entries {row}, {column} and {column}, {row} are not complex conjugates, so it is no density matrix"
                ));
            }
            if !(a.0 * a.0 + a.1 * a.1 <= at(row, row).0 * at(column, column).0 + ROOM) {
                return no(format!("its entry {row}, {column} is larger than the populations allow, so it is no density matrix"));
            }
        }
        if at(row, row).0 < -ROOM {
            return no(format!("the population in its row {row} is below zero"));
        }
    }
    let trace: f64 = (0..n).map(|k| at(k, k).0).sum();
    if !(trace <= 1.0 + 1e-6) {
        return no(format!("its populations add up to {}", super::messages::short(trace)));
    }
    Ok(State::Density((0..n).flat_map(|column| (0..n).map(move |row| (row, column))).map(|(row, column)| at(row, column)).collect()))
}

/// `end_state` of a result.json: amplitudes, or rows of a density matrix; a folder stands for the result.json in it.
fn end_state(path: &Path) -> Result<Found, String> {
    let path = if path.is_dir() { path.join("result.json") } else { path.to_path_buf() };
    let bytes = std::fs::read(&path).map_err(|error| {
        if error.kind() == std::io::ErrorKind::NotFound {
            "no such file exists".to_string()
        } else {
            error.to_string()
        }
    })?;
    let json: serde_json::Value = serde_json::from_slice(&bytes).map_err(|_| "it is neither a result.json nor a .npy file".to_string())?;
    let pairs = |list: &serde_json::Value| -> Option<Vec<(f64, f64)>> {
        list.as_array()?.iter().map(|pair| Some((pair.get(0)?.as_f64()?, pair.get(1)?.as_f64()?))).collect()
    };
    let wrong = || "its end_state is no list of [re, im]".to_string();
    if let Some(rows) = json.pointer("/end_state/density").and_then(|rows| rows.as_array()) {
        let found = rows.iter().map(pairs).collect::<Option<Vec<_>>>().ok_or_else(wrong)?;
        if found.iter().any(|row| row.len() != found.len()) {
            return Err(wrong());
        }
        return Ok(Found { bytes, rows: found.len(), columns: found.len(), values: found.concat() });
    }
    let list = json.pointer("/end_state/amplitudes").ok_or("it holds no end_state")?;
    let values = pairs(list).ok_or_else(wrong)?;
    Ok(Found { bytes, rows: 1, columns: values.len(), values })
}

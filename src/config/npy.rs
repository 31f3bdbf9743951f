//! The .npy form of one array (NumPy Enhancement Proposal 1): doubles or complex doubles, little end first, one or two axes.

use std::path::Path;

/// Largest file read, bytes.
const LARGEST: u64 = 256 << 20;

/// An array as rows of (re, im); a list is one row.
pub struct Array {
    /// Number of rows.
    pub rows: usize,
    /// Number of columns.
    pub columns: usize,
    /// Row by row.
    pub values: Vec<(f64, f64)>,
    /// The file, byte for byte.
    pub bytes: Vec<u8>,
}

/// Reads a file; the error is a reason in words.
pub fn read(path: &Path) -> Result<Array, String> {
    let size = std::fs::metadata(path).map_err(|error| words(&error))?.len();
    if size > LARGEST {
        return Err(format!("it has {size} bytes, more than a matrix can need"));
    }
    let bytes = std::fs::read(path).map_err(|error| words(&error))?;
    let (rows, columns, values) = parse(&bytes).ok_or("it is no .npy file of doubles or complex doubles with one or two axes")?;
    Ok(Array { rows, columns, values, bytes })
}

fn words(error: &std::io::Error) -> String {
    if error.kind() == std::io::ErrorKind::NotFound {
        "no such file exists".to_string()
    } else {
        error.to_string()
    }
}

/// Rows, columns and the entries (re, im), row after row.
type Parsed = (usize, usize, Vec<(f64, f64)>);

fn parse(bytes: &[u8]) -> Option<Parsed> {
    let rest = bytes.strip_prefix(b"\x93NUMPY")?;
    let (length, start): (usize, usize) = match rest.first()? {
        1 => (usize::from(u16::from_le_bytes(rest.get(2..4)?.try_into().ok()?)), 4),
        2 | 3 => (u32::from_le_bytes(rest.get(2..6)?.try_into().ok()?) as usize, 6),
        _ => return None,
    };
    let header = std::str::from_utf8(rest.get(start..start.checked_add(length)?)?).ok()?;
    let data = rest.get(start + length..)?;
    let after = |key: &str| header.split_once(key).map(|(_, rest)| rest.trim_start_matches([':', ' ']));
    let complex = match after("'descr'")?.get(..5)? {
        "'<c16" => true,
        "'<f8'" => false,
        _ => return None,
    };
    let by_columns = after("'fortran_order'")?.starts_with("True");
    let shape = after("'shape'")?.trim_start_matches('(').split_once(')')?.0;
    let axes: Vec<usize> =
        shape.split(',').filter(|part| !part.trim().is_empty()).map(|part| part.trim().parse().ok()).collect::<Option<_>>()?;
    let (rows, columns) = match axes[..] {
        [n] => (1, n),
        [rows, columns] => (rows, columns),
        _ => return None,
    };
    let wide = if complex { 16 } else { 8 };
    let count = rows.checked_mul(columns)?;
    if data.len() < count.checked_mul(wide)? {
        return None;
    }
    let double = |at: usize| data.get(at..at + 8).and_then(|eight| eight.try_into().ok()).map_or(f64::NAN, f64::from_le_bytes);
    let value = |index: usize| (double(index * wide), if complex { double(index * wide + 8) } else { 0.0 });
    let order = |k: usize| if by_columns { (k % columns) * rows + k / columns } else { k };
    Some((rows, columns, (0..count).map(|k| value(order(k))).collect()))
}

//! One point computed, and its form in the store.
//!
//! Numbers are little end first. A row is: point u64, kind u8, then
//! for kind 0 its numbers, one f64 for each column; for kind 1 the same, then the error figure and one error for each column;
//! for kind 2 the length of the reason u32 and its text. Kinds 0 and 1 of a scan that keeps traces go on with the number of
//! moments u32, their times, and the rows of the traces, all f64. NaN stands for a number that this point does not have.

use std::io::{self, Read};

/// What a point came to.
#[derive(Debug, Clone, PartialEq)]
pub enum Found {
    /// Its numbers.
    Numbers {
        /// One for each column of the table.
        numbers: Vec<f64>,
        /// Its error figure and the errors of its numbers, where it was computed at two resolutions.
        checked: Option<(f64, Vec<f64>)>,
        /// Its traces, where they are kept.
        trace: Option<Trace>,
    },
    /// Why it has none.
    Failed(String),
}

/// Whole traces of a point.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Trace {
    /// Moments, s.
    pub times_s: Vec<f64>,
    /// One row for each moment, one after another.
    pub rows: Vec<f64>,
}

/// A point with what it came to.
#[derive(Debug, Clone, PartialEq)]
pub struct Row {
    /// Its number in the grid.
    pub point: u64,
    /// What it came to.
    pub found: Found,
}

/// How many numbers a row has.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Width {
    /// Columns of the table.
    pub columns: usize,
    /// Columns of the traces; 0 where none are kept.
    pub traced: usize,
}

impl Row {
    /// Whether it was computed at two resolutions, or could not be computed at all: such a row counts more than a plain one.
    pub fn is_settled(&self) -> bool {
        !matches!(self.found, Found::Numbers { checked: None, .. })
    }

    /// Appends its bytes.
    pub fn write(&self, width: Width, bytes: &mut Vec<u8>) {
        let put = |numbers: &[f64], bytes: &mut Vec<u8>| numbers.iter().for_each(|n| bytes.extend_from_slice(&n.to_le_bytes()));
        bytes.extend_from_slice(&self.point.to_le_bytes());
        match &self.found {
            Found::Numbers { numbers, checked, trace } => {
                bytes.push(u8::from(checked.is_some()));
                put(numbers, bytes);
                if let Some((figure, errors)) = checked {
                    put(&[*figure], bytes);
                    put(errors, bytes);
                }
                if width.traced > 0 {
                    let trace = trace.clone().unwrap_or_default();
                    bytes.extend_from_slice(&(trace.times_s.len() as u32).to_le_bytes());
                    put(&trace.times_s, bytes);
                    put(&trace.rows, bytes);
                }
            }
            Found::Failed(reason) => {
                bytes.push(2);
                bytes.extend_from_slice(&(reason.len() as u32).to_le_bytes());
                bytes.extend_from_slice(reason.as_bytes());
            }
        }
    }

    /// Reads one row; an error where there is none.
    pub fn read(width: Width, from: &mut impl Read) -> io::Result<Row> {
        let point = u64::from_le_bytes(take(from)?);
        let [kind] = take(from)?;
        let found = match kind {
            0 | 1 => {
                let numbers = read_numbers(from, width.columns)?;
                let checked = match kind {
                    1 => Some((read_numbers(from, 1)?[0], read_numbers(from, width.columns)?)),
                    _ => None,
                };
                let trace = if width.traced > 0 {
                    let moments = read_count(from)?;
                    let times_s = read_numbers(from, moments)?;
                    Some(Trace { times_s, rows: read_numbers(from, moments.saturating_mul(width.traced))? })
                } else {
                    None
                };
                Found::Numbers { numbers, checked, trace }
            }
            2 => {
                let mut text = Vec::new();
                let length = read_count(from)?;
                from.take(length as u64).read_to_end(&mut text)?;
                let text = String::from_utf8(text).map_err(|_| no_row())?;
                if text.len() != length {
                    return Err(no_row());
                }
                Found::Failed(text)
            }
            _ => return Err(no_row()),
        };
        Ok(Row { point, found })
    }
}

fn no_row() -> io::Error {
    io::Error::new(io::ErrorKind::InvalidData, "these bytes are no row")
}

fn take<const N: usize>(from: &mut impl Read) -> io::Result<[u8; N]> {
    let mut bytes = [0; N];
    from.read_exact(&mut bytes)?;
    Ok(bytes)
}

fn read_count(from: &mut impl Read) -> io::Result<usize> {
    Ok(u32::from_le_bytes(take(from)?) as usize)
}

fn read_numbers(from: &mut impl Read, count: usize) -> io::Result<Vec<f64>> {
    // grows with what is there, not with what a damaged count says
    let mut numbers = Vec::with_capacity(count.min(4096));
    for _ in 0..count {
        numbers.push(f64::from_le_bytes(take(from)?));
    }
    Ok(numbers)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_rows_come_back_as_they_were() {
        let width = Width { columns: 2, traced: 1 };
        let trace = Some(Trace { times_s: vec![0.0, 1e-9], rows: vec![0.5, f64::MIN_POSITIVE] });
        let numbers = vec![0.1, -0.0];
        let rows = [
            Row { point: 7, found: Found::Numbers { numbers: numbers.clone(), checked: None, trace: trace.clone() } },
            Row { point: u64::MAX, found: Found::Numbers { numbers, checked: Some((1e-9, vec![1e-9, 2e-10])), trace } },
            Row { point: 0, found: Found::Failed("a pulse of length zero".to_string()) },
        ];
        let mut bytes = Vec::new();
        rows.iter().for_each(|row| row.write(width, &mut bytes));
        let mut left = &bytes[..];
        for row in &rows {
            let before = left;
            let read = Row::read(width, &mut left).expect("what was written is a row");
            assert_eq!(&read, row);
            let taken = before.len() - left.len();
            assert!(Row::read(width, &mut &before[..taken - 1]).is_err(), "a cut row is no row");
        }
        assert!(left.is_empty());
    }
}

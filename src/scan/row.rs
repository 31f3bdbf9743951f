//! One point computed, and its form in the store.
//!
//! Numbers are little end first. A row is: point u64, kind u8, then
//! for kind 0 its numbers, one f64 for each column; for kind 1 the same, then the error figure and one error for each column; for kind
//! 3 that of kind 1, then at which resolution it was solved: method u8, tolerance f64, pieces u32, doublings u32, share f64; for
//! kind 2 the length of the reason u32 and its text. Kinds 4 and 6 are 1 and 3 of a point that was averaged over random draws: one
//! sampling error for each column follows the errors. All but kind 2 go on, in a scan that keeps traces, with the number of
//! moments u32, their times, and the rows of the traces, all f64. NaN stands for a number that this point does not have.

use std::io::{self, Read};

use crate::propagate::{Resolved, METHODS};

/// What a point came to.
#[derive(Debug, Clone, PartialEq)]
pub enum Found {
    /// Its numbers.
    Numbers {
        /// One for each column of the table.
        numbers: Vec<f64>,
        /// What is known of their error, where it was computed at two resolutions.
        checked: Option<Checked>,
        /// Its traces, where they are kept.
        trace: Option<Trace>,
    },
    /// Why it has none.
    Failed(String),
}

/// What two resolutions say.
#[derive(Debug, Clone, PartialEq)]
pub struct Checked {
    /// Largest error of any number, over its scale.
    pub figure: f64,
    /// Errors of the numbers.
    pub errors: Vec<f64>,
    /// One standard error of each number, where it is a mean over random draws; else empty.
    pub sampling: Vec<f64>,
    /// Where it was solved by itself, or the resolution of the others was not fine enough for it: the one that was.
    pub alone: Option<Resolved>,
}

/// What the kind of a row with sampling errors is larger by.
const SAMPLED: u8 = 3;

/// How much a row counts: of several rows of a point the one of the highest rank is used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Rank {
    /// Computed once, at the resolution of all.
    Plain,
    /// Computed at two, of which the coarser is that of all.
    Checked,
    /// Solved by itself, or not to be computed.
    Alone,
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
    /// How much it counts.
    pub fn rank(&self) -> Rank {
        match &self.found {
            Found::Numbers { checked: None, .. } => Rank::Plain,
            Found::Numbers { checked: Some(Checked { alone: None, .. }), .. } => Rank::Checked,
            _ => Rank::Alone,
        }
    }

    /// Appends its bytes.
    pub fn write(&self, width: Width, bytes: &mut Vec<u8>) {
        let put = |numbers: &[f64], bytes: &mut Vec<u8>| numbers.iter().for_each(|n| bytes.extend_from_slice(&n.to_le_bytes()));
        bytes.extend_from_slice(&self.point.to_le_bytes());
        match &self.found {
            Found::Numbers { numbers, checked, trace } => {
                bytes.push(match checked {
                    None => 0,
                    Some(checked) => (if checked.alone.is_some() { 3 } else { 1 }) + if checked.sampling.is_empty() { 0 } else { SAMPLED },
                });
                put(numbers, bytes);
                if let Some(Checked { figure, errors, sampling, alone }) = checked {
                    put(&[*figure], bytes);
                    put(errors, bytes);
                    put(sampling, bytes);
                    if let Some(alone) = alone {
                        bytes.push(METHODS.iter().position(|row| row.method == alone.method).unwrap_or(0) as u8);
                        put(&[alone.tolerance], bytes);
                        bytes.extend_from_slice(&alone.pieces.to_le_bytes());
                        bytes.extend_from_slice(&alone.doublings.to_le_bytes());
                        put(&[alone.share], bytes);
                    }
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
            0 | 1 | 3 | 4 | 6 => {
                let numbers = read_numbers(from, width.columns)?;
                let checked = match kind {
                    0 => None,
                    _ => {
                        let (figure, errors) = (read_numbers(from, 1)?[0], read_numbers(from, width.columns)?);
                        let sampling = if kind > SAMPLED { read_numbers(from, width.columns)? } else { Vec::new() };
                        let alone = if kind % SAMPLED == 0 { Some(read_resolved(from)?) } else { None };
                        Some(Checked { figure, errors, sampling, alone })
                    }
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

fn read_resolved(from: &mut impl Read) -> io::Result<Resolved> {
    let [method] = take(from)?;
    let method = METHODS.get(usize::from(method)).ok_or_else(no_row)?.method;
    let tolerance = read_numbers(from, 1)?[0];
    let (pieces, doublings) = (u32::from_le_bytes(take(from)?), u32::from_le_bytes(take(from)?));
    Ok(Resolved { method, tolerance, pieces, doublings, share: read_numbers(from, 1)?[0] })
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
        let alone = Resolved { method: METHODS[2].method, tolerance: 3e-9, pieces: 3, doublings: 2, share: 0.7 };
        let checked = |alone| Some(Checked { figure: 1e-9, errors: vec![1e-9, 2e-10], sampling: Vec::new(), alone });
        let sampled = |alone| Some(Checked { figure: 1e-9, errors: vec![1e-9, 2e-10], sampling: vec![0.1, 0.2], alone });
        let rows = [
            Row { point: 7, found: Found::Numbers { numbers: numbers.clone(), checked: None, trace: trace.clone() } },
            Row { point: u64::MAX, found: Found::Numbers { numbers: numbers.clone(), checked: checked(None), trace: trace.clone() } },
            Row { point: 8, found: Found::Numbers { numbers: numbers.clone(), checked: checked(Some(alone)), trace: trace.clone() } },
            Row { point: 9, found: Found::Numbers { numbers: numbers.clone(), checked: sampled(None), trace: trace.clone() } },
            Row { point: 10, found: Found::Numbers { numbers, checked: sampled(Some(alone)), trace } },
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

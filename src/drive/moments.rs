//! The moments to record, each found in its segment.

use crate::config::document::Document;
use crate::config::messages::{short_with_unit, Fault, Mistake};
use crate::config::record::Rows;
use crate::problem::{Instant, Moment, Segment};

/// Rows of the traces where the config does not say.
const USUAL_ROWS: usize = 500;
/// Most rows of the traces.
const MOST_ROWS: f64 = 1e7;

/// The numbers that `record: every` or `at` come to.
pub fn rows_of(document: &Document, values: &[f64]) -> Vec<f64> {
    match &document.record.rows {
        Rows::Unsaid => Vec::new(),
        Rows::Every(every) => vec![values[every.register as usize]],
        Rows::At(list) => list.iter().map(|at| values[at.register as usize]).collect(),
    }
}

/// The moments to record: those asked for, and the end of the sequence.
pub fn moments(document: &Document, values: &[f64], segments: &[Segment], end_s: f64) -> Result<Vec<Moment>, Mistake> {
    let close = 1e-12 * end_s;
    let steps = |step: f64, count: usize| {
        let mut times: Vec<f64> = (0..=count).map(|k| k as f64 * step).collect();
        match times.last_mut() {
            Some(last) if *last >= end_s - close => *last = end_s,
            _ => times.push(end_s),
        }
        times
    };
    let mut times = match &document.record.rows {
        Rows::Unsaid => steps(end_s / USUAL_ROWS as f64, USUAL_ROWS),
        Rows::Every(every) => {
            let step = values[every.register as usize];
            if !(step > 0.0) {
                return Err(Mistake::error(
                    every.place,
                    Fault::NotPositive { what: "record / every".to_string(), value: step, unit: "s".to_string() },
                ));
            }
            let rows = (end_s + close) / step;
            if rows > MOST_ROWS {
                return Err(Mistake::error(every.place, Fault::TooManyRows { rows, limit: MOST_ROWS }));
            }
            steps(step, rows.floor() as usize)
        }
        Rows::At(list) => {
            let mut times = Vec::new();
            for at in list {
                let time_s = values[at.register as usize];
                if time_s < 0.0 {
                    let found = short_with_unit(time_s, "s");
                    return Err(Mistake::error(
                        at.place,
                        Fault::OutOfRange { what: "a recorded time".to_string(), found, wanted: "0 or later".to_string() },
                    ));
                }
                if time_s > end_s + close {
                    return Err(Mistake::error(at.place, Fault::AfterEnd { time_s, end_s }));
                }
                times.push(time_s);
            }
            times.sort_by(f64::total_cmp);
            times.dedup();
            times
        }
    };
    match times.last() {
        Some(last) if *last >= end_s - close => {}
        _ => times.push(end_s),
    }
    let mut segment = 0;
    let last = segments.len() - 1;
    Ok(times
        .into_iter()
        .map(|time_s| {
            let at = Instant::at(time_s);
            while segment < last && at.since(segments[segment].start) > segments[segment].length_s - close {
                segment += 1;
            }
            // at the very end the exact length counts, not the rounded time
            let here = &segments[segment];
            let offset = at.since(here.start).clamp(0.0, here.length_s);
            let offset_s = if segment == last && here.length_s - offset <= close { here.length_s } else { offset };
            Moment { segment, offset_s, time_s }
        })
        .collect())
}

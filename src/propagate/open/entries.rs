//! Entries of a jump operator in the picture of a segment, each with how it turns there.

use num_complex::Complex64;

use super::super::picture::Picture;
use crate::problem::Jump;

/// An entry of a jump operator in a picture.
#[derive(Debug, Clone, Copy)]
pub(in super::super) struct Entry {
    pub row: usize,
    pub column: usize,
    pub value: Complex64,
    pub turns_hz: f64,
    pub phase_turns: f64,
    pub lab_hz: f64,
}

/// Entries of sqrt(rate) L.
pub(in super::super) fn entries(jump: &Jump, picture: &Picture) -> Vec<Entry> {
    let dim = picture.dim;
    let scale = jump.rate_per_s.sqrt();
    let mut found = Vec::new();
    let parts = std::iter::once((&jump.matrix, 0.0, 0.0)).chain(jump.turning.iter().map(|p| (&p.matrix, p.turns_hz, p.phase_turns)));
    for (matrix, lab_hz, phase_turns) in parts {
        for column in 0..dim {
            for row in 0..dim {
                let value = matrix[(row, column)] * scale;
                if value != Complex64::default() {
                    let turns_hz = lab_hz - (picture.turns_hz[row] - picture.turns_hz[column]);
                    found.push(Entry { row, column, value, turns_hz, phase_turns, lab_hz });
                }
            }
        }
    }
    found
}

/// Frequency differences below this are rounding.
pub(in super::super) fn grain(a: &Entry, b: &Entry, picture: &Picture) -> f64 {
    let most =
        [a, b].iter().flat_map(|e| [picture.turns_hz[e.row], picture.turns_hz[e.column], e.lab_hz]).fold(0.0, |m: f64, f| m.max(f.abs()));
    8.0 * f64::EPSILON * most
}

/// Whether all entries turn alike, so that what they do stands still.
pub(in super::super) fn alike(entries: &[Entry], picture: &Picture) -> bool {
    let Some(first) = entries.first() else { return true };
    let same = |e: &Entry| {
        e.phase_turns == first.phase_turns && e.lab_hz == first.lab_hz && (e.turns_hz - first.turns_hz).abs() <= grain(e, first, picture)
    };
    entries.iter().all(same)
}

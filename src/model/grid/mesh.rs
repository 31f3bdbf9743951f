//! The elements into which the axis is cut: ends at every jump and kink, then halved where the wave functions ask for it.

use super::piece::Piece;

/// Fewest elements over the whole axis, so that no feature hides between the nodes of a first look.
const FEWEST: f64 = 10.0;

/// Elements side by side from left to right.
#[derive(Debug, Clone)]
pub struct Mesh {
    /// Ends of the elements, m, one more than there are elements.
    pub ends: Vec<f64>,
    /// The piece in which each element lies.
    pub piece: Vec<usize>,
    /// Whether the last end is the first one again.
    pub ring: bool,
}

impl Mesh {
    /// Every piece in equal elements, none longer than a tenth of the whole.
    pub fn coarse(pieces: &[Piece], ring: bool) -> Mesh {
        let (first, last) = (pieces[0].from_m, pieces[pieces.len() - 1].to_m);
        let longest = (last - first) / FEWEST;
        let (mut ends, mut piece) = (vec![first], Vec::new());
        for (index, part) in pieces.iter().enumerate() {
            let count = (((part.to_m - part.from_m) / longest) * (1.0 - 1e-9)).ceil().max(1.0) as usize;
            for k in 1..=count {
                let share = k as f64 / count as f64;
                ends.push(if k == count { part.to_m } else { part.from_m + share * (part.to_m - part.from_m) });
                piece.push(index);
            }
        }
        Mesh { ends, piece, ring }
    }

    /// Number of elements.
    pub fn count(&self) -> usize {
        self.piece.len()
    }

    /// The elements for which `asks` is true in halves, the others as they are.
    pub fn halved(&self, asks: &[bool]) -> Mesh {
        let (mut ends, mut piece) = (vec![self.ends[0]], Vec::new());
        for (k, asks) in asks.iter().enumerate() {
            if *asks {
                ends.push(0.5 * (self.ends[k] + self.ends[k + 1]));
                piece.push(self.piece[k]);
            }
            ends.push(self.ends[k + 1]);
            piece.push(self.piece[k]);
        }
        Mesh { ends, piece, ring: self.ring }
    }
}

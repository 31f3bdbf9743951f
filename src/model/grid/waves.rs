//! The kept states on a mesh that follows them, at two polynomial degrees.

use super::mesh::Mesh;
use super::piece::Piece;
use super::states::{states, GridFault, States};

/// Degree of the first look, by which the mesh is cut, and of the answer.
const DEGREES: [usize; 2] = [20, 26];
/// The largest Legendre coefficient that may be missing, relative to the largest value of a function.
const TAIL: f64 = 1e-12;
/// Most halvings of an element.
const ROUNDS: usize = 16;
/// Most elements.
const MOST_ELEMENTS: usize = 1500;

/// The same states at two resolutions.
#[derive(Debug, Clone)]
pub struct Waves {
    /// At the higher degree: the answer.
    pub fine: States,
    /// At the lower degree, on the same elements.
    pub coarse: States,
}

/// The lowest `keep` states; elements are halved until each function is carried to 1e-12 by the lower degree.
pub fn waves(pieces: &[Piece], ring: bool, keep: usize) -> Result<Waves, GridFault> {
    let mut mesh = Mesh::coarse(pieces, ring).carrying(pieces, keep, MOST_ELEMENTS);
    // eight unknowns for each half wave of the highest kept state, were it spread evenly
    while mesh.count() * DEGREES[0] < 8 * keep {
        mesh = mesh.halved(&vec![true; mesh.count()]);
    }
    let mut coarse = states(pieces, &mesh, DEGREES[0], keep)?;
    for _ in 0..ROUNDS {
        let asks = coarse.unresolved(TAIL);
        if !asks.contains(&true) || mesh.count() > MOST_ELEMENTS {
            break;
        }
        mesh = mesh.halved(&asks);
        coarse = states(pieces, &mesh, DEGREES[0], keep)?;
    }
    Ok(Waves { fine: states(pieces, &mesh, DEGREES[1], keep)?, coarse })
}

impl Waves {
    /// The largest change of a level from the lower to the higher degree, Hz.
    pub fn level_error_hz(&self) -> f64 {
        self.fine.levels_hz.iter().zip(&self.coarse.levels_hz).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
    }
}

//! Jumps: what the surroundings do to the system, without memory,
//!
//! ```text
//! d(rho)/dt = -i [H, rho] + sum over jumps of rate (L rho L+ - (L+ L rho + rho L+ L)/2)
//! ```
//!
//! (G. Lindblad, Communications in Mathematical Physics 48, 119 (1976); V. Gorini, A. Kossakowski, E. C. G. Sudarshan, Journal
//! of Mathematical Physics 17, 821 (1976)). A jump to somewhere outside the basis has no L rho L+, so the trace falls.

use num_complex::Complex64;

use super::{Instant, Matrix};
use crate::units::cis_turns;

/// One jump operator L with its rate.
#[derive(Debug, Clone, PartialEq)]
pub struct Jump {
    /// L, no dimension, `dim` x `dim`: what of it stands still in the frame of the problem.
    pub matrix: Matrix,
    /// Its rate, 1/s, at least 0.
    pub rate_per_s: f64,
    /// Whether what jumps arrives within the basis; else it is lost, and only L+ L counts.
    pub keeps: bool,
    /// Parts of L that turn in the frame of the problem; mostly none.
    pub turning: Vec<TurningPart>,
}

/// A part `exp(-2 pi i (p + f t)) matrix` of a jump operator, t from the start of the sequence.
#[derive(Debug, Clone, PartialEq)]
pub struct TurningPart {
    /// No dimension, `dim` x `dim`.
    pub matrix: Matrix,
    /// f, in turns per second, not 0.
    pub turns_hz: f64,
    /// p, in turns.
    pub phase_turns: f64,
}

impl Jump {
    /// A jump whose target lies within the basis.
    pub fn new(matrix: Matrix, rate_per_s: f64) -> Jump {
        Jump { matrix, rate_per_s, keeps: true, turning: Vec::new() }
    }

    /// Loss of what `matrix` (any L with this L+ L) takes away.
    pub fn loss(matrix: Matrix, rate_per_s: f64) -> Jump {
        Jump { keeps: false, ..Jump::new(matrix, rate_per_s) }
    }

    /// |to><from| among `dim` levels.
    pub fn between(dim: usize, from: usize, to: usize, rate_per_s: f64) -> Jump {
        let mut matrix = Matrix::zeros(dim, dim);
        matrix[(to, from)] = Complex64::from(1.0);
        Jump::new(matrix, rate_per_s)
    }

    /// Population of `level` lost at this rate.
    pub fn out_of(dim: usize, level: usize, rate_per_s: f64) -> Jump {
        Jump { keeps: false, ..Jump::between(dim, level, level, rate_per_s) }
    }

    /// sqrt(rate) L at a moment, in 1/sqrt(s).
    pub fn at(&self, t: Instant) -> Matrix {
        let mut l = self.matrix.clone();
        for part in &self.turning {
            l += &part.matrix * cis_turns(-(part.phase_turns + t.turns(part.turns_hz)));
        }
        l * Complex64::from(self.rate_per_s.sqrt())
    }
}

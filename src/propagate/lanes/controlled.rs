//! [`Conjugation`]: slices packed for the kernels of `conjugation.rs`, for each number of levels that has one.

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::conjugation::{Backwards, Forwards, Part, Slices, Square, SPREADS};
use super::lane::{Eight, Kernel};
use super::width::Width;

/// Slices of H = A + sum_c u_c C_c (matrices without trace; rad/s, s), ready for eight sets of u at a time.
#[derive(Debug)]
pub struct Conjugation {
    statics: Vec<Part>,
    controls: Vec<Vec<Part>>,
    lengths_s: Vec<f64>,
    room: Room,
}

/// Propagators of the slices, for each number of levels.
#[derive(Debug)]
enum Room {
    Two(Vec<Square<2>>),
    Three(Vec<Square<3>>),
    Four(Vec<Square<4>>),
    None,
}

/// The upper half of a Hermitian matrix, without zeros.
fn parts(matrix: &DMatrix<Complex64>) -> Vec<Part> {
    let dim = matrix.nrows();
    let places = (0..dim).flat_map(|row| (row..dim).map(move |column| (row, column)));
    let both = places.flat_map(|(row, column)| {
        let entry = matrix[(row, column)];
        [(0, entry.re), (1, if row == column { 0.0 } else { entry.im })].map(|(which, value)| Part { row, column, which, value })
    });
    both.filter(|part| part.value != 0.0).collect()
}

impl Conjugation {
    /// Whether there is a kernel for so many levels.
    pub fn has(dim: usize) -> bool {
        (2..=4).contains(&dim)
    }

    /// For A and the C_c, without trace; `lengths_s` are those of the slices.
    pub fn new(statics: &DMatrix<Complex64>, controls: &[DMatrix<Complex64>], lengths_s: &[f64]) -> Conjugation {
        let room = match statics.nrows() {
            2 => Room::Two(Vec::new()),
            3 => Room::Three(Vec::new()),
            4 => Room::Four(Vec::new()),
            _ => Room::None,
        };
        Conjugation { statics: parts(statics), controls: controls.iter().map(parts).collect(), lengths_s: lengths_s.to_vec(), room }
    }

    /// How often slices must be halved whose eigenvalues of H h are up to `spread` apart.
    pub fn halvings(&self, spread: f64) -> u32 {
        if spread > SPREADS[1] {
            (spread / SPREADS[1]).log2().ceil() as u32
        } else {
            0
        }
    }

    /// The propagators of eight sets of samples (those of a slice together, slice after slice), without the common phase of the
    /// traces. `finer` more halvings than are needed, and then the longer series.
    pub fn forwards(&mut self, width: Width, samples: &[Eight], spread: f64, finer: u32) -> Vec<DMatrix<Complex64>> {
        let halvings = self.halvings(spread) + finer;
        let Conjugation { statics, controls, lengths_s, room } = self;
        let slices = Slices { statics, controls, lengths_s, samples, halvings, short: finer == 0 && spread <= SPREADS[0] };
        match room {
            Room::Two(parts) => forwards(width, slices, parts),
            Room::Three(parts) => forwards(width, slices, parts),
            Room::Four(parts) => forwards(width, slices, parts),
            Room::None => Vec::new(),
        }
    }

    /// After [`Conjugation::forwards`] of the same samples: the derivatives by them, s, from the Hermitian matrices at the end of up to
    /// eight sets.
    pub fn backwards(
        &self,
        width: Width,
        samples: &[Eight],
        spread: f64,
        finer: u32,
        ends: &[DMatrix<Complex64>],
        by_samples: &mut [Eight],
    ) {
        let halvings = self.halvings(spread) + finer;
        let Conjugation { statics, controls, lengths_s, room } = self;
        let slices = Slices { statics, controls, lengths_s, samples, halvings, short: finer == 0 && spread <= SPREADS[0] };
        match room {
            Room::Two(parts) => backwards(width, slices, parts, ends, by_samples),
            Room::Three(parts) => backwards(width, slices, parts, ends, by_samples),
            Room::Four(parts) => backwards(width, slices, parts, ends, by_samples),
            Room::None => {}
        }
    }
}

const fn empty<const N: usize>() -> Square<N> {
    [[[Eight::all(0.0); 2]; N]; N]
}

fn forwards<const N: usize>(width: Width, slices: Slices, parts: &mut Vec<Square<N>>) -> Vec<DMatrix<Complex64>>
where
    for<'a> Forwards<'a, N>: Kernel<Output = ()>,
{
    parts.resize(slices.lengths_s.len(), empty());
    let mut whole = empty();
    width.run(Forwards { slices, parts, whole: &mut whole });
    let entry = |lane: usize, j: usize, k: usize| Complex64::new(whole[j][k][0].0[lane], whole[j][k][1].0[lane]);
    (0..8).map(|lane| DMatrix::from_fn(N, N, |j, k| entry(lane, j, k))).collect()
}

fn backwards<const N: usize>(width: Width, slices: Slices, parts: &[Square<N>], ends: &[DMatrix<Complex64>], by_samples: &mut [Eight]) {
    let mut end = empty();
    for (lane, matrix) in ends.iter().enumerate() {
        for j in 0..N {
            for k in 0..N {
                end[j][k][0].0[lane] = matrix[(j, k)].re;
                end[j][k][1].0[lane] = matrix[(j, k)].im;
            }
        }
    }
    width.run(Backwards { slices, parts, end: &end, by_samples });
}

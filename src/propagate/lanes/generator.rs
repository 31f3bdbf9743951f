//! y' = G y with a real sparse G for eight points at once: what states of more than three levels and density matrices are carried by.
//!
//! States: y holds real and imaginary part of each amplitude, and G is -i H. Density matrices: y holds the diagonal, then real and imaginary part
//! of each entry above it (as a packed matrix does), and G is d(rho)/dt = -i [H, rho] + sum of rate (L rho L+ - (L+ L rho + rho L+ L)/2).
//! H in rad/s.

use num_complex::Complex64;

use super::carry::{place_of, Packed};
use super::lane::Eight;
use crate::problem::Matrix;

/// One real entry of G made of one entry of the packed H: `factor` times it at (row, column).
#[derive(Debug, Clone, Copy)]
struct Piece {
    row: usize,
    column: usize,
    place: usize,
    factor: f64,
}

/// How G is made of the packed H, and what is in it beside.
#[derive(Debug, Clone)]
pub struct Recipe {
    size: usize,
    density: bool,
    pieces: Vec<Piece>,
    /// What jumps do, the same for all points: row after row, empty for a closed system.
    jumps: Vec<f64>,
}

/// G of eight points, its entries row after row.
#[derive(Debug, Clone)]
pub(super) struct Generator {
    /// Length of y.
    pub size: usize,
    /// Where each row's entries begin, and the end.
    pub rows: Vec<usize>,
    /// Their columns.
    pub columns: Vec<usize>,
    /// Their parts of A and the jumps, 1/s.
    pub statics: Vec<Eight>,
    /// Their parts of each C: which entry, and the part.
    pub channels: Vec<Vec<(usize, Eight)>>,
}

impl Recipe {
    /// For amplitudes.
    pub fn of_states(dim: usize) -> Recipe {
        let mut pieces = Vec::new();
        let mut complex = |j: usize, k: usize, place: usize, re: f64, im: f64| {
            // entry re h[place] or i im h[place] of H at (j, k); y' = -i H y
            for (row, column, factor) in [(2 * j, 2 * k, im), (2 * j, 2 * k + 1, re), (2 * j + 1, 2 * k, -re), (2 * j + 1, 2 * k + 1, im)] {
                if factor != 0.0 {
                    pieces.push(Piece { row, column, place, factor });
                }
            }
        };
        for j in 0..dim {
            complex(j, j, j, 1.0, 0.0);
            for k in j + 1..dim {
                let place = place_of(dim, j, k);
                complex(j, k, place, 1.0, 0.0);
                complex(k, j, place, 1.0, 0.0);
                complex(j, k, place + 1, 0.0, 1.0);
                complex(k, j, place + 1, 0.0, -1.0);
            }
        }
        Recipe { size: 2 * dim, density: false, pieces, jumps: Vec::new() }
    }

    /// For density matrices; each jump is sqrt(rate) L, and whether what jumps arrives within the basis.
    pub fn of_densities(dim: usize, jumps: &[(Matrix, bool)]) -> Recipe {
        let size = dim * dim;
        let i = Complex64::i();
        let mut pieces = Vec::new();
        let mut beside = vec![0.0; size * size];
        for column in 0..size {
            let rho = unpacked(dim, column);
            for place in 0..size {
                let h = unpacked(dim, place);
                let image = (&h * &rho - &rho * &h) * -i;
                for (row, factor) in packed(&image).into_iter().enumerate().filter(|(_, factor)| *factor != 0.0) {
                    pieces.push(Piece { row, column, place, factor });
                }
            }
            let mut image = Matrix::zeros(dim, dim);
            for (l, arrives) in jumps {
                let half = l.adjoint() * l * Complex64::from(0.5);
                image -= &half * &rho + &rho * &half;
                if *arrives {
                    image += l * &rho * l.adjoint();
                }
            }
            for (row, value) in packed(&image).into_iter().enumerate() {
                beside[row * size + column] = value;
            }
        }
        Recipe { size, density: true, pieces, jumps: if jumps.is_empty() { Vec::new() } else { beside } }
    }

    /// Length of y.
    pub fn size(&self) -> usize {
        self.size
    }

    /// G of these eight points.
    pub(super) fn generator(&self, statics: &Packed, channels: &[Packed]) -> Generator {
        let there = |packed: &Packed, place: usize| packed[place].0.iter().any(|x| *x != 0.0);
        let mut used = vec![false; self.size * self.size];
        for (used, jump) in used.iter_mut().zip(&self.jumps) {
            *used = *jump != 0.0;
        }
        for piece in &self.pieces {
            if there(statics, piece.place) || channels.iter().any(|c| there(c, piece.place)) {
                used[piece.row * self.size + piece.column] = true;
            }
        }
        let mut number = vec![usize::MAX; self.size * self.size];
        let (mut rows, mut columns) = (Vec::with_capacity(self.size + 1), Vec::new());
        for row in 0..self.size {
            rows.push(columns.len());
            for column in (0..self.size).filter(|column| used[row * self.size + column]) {
                number[row * self.size + column] = columns.len();
                columns.push(column);
            }
        }
        rows.push(columns.len());
        let add = |packed: &Packed| {
            let mut sums = vec![Eight::all(0.0); columns.len()];
            for piece in self.pieces.iter().filter(|piece| there(packed, piece.place)) {
                let sum = &mut sums[number[piece.row * self.size + piece.column]];
                for (sum, h) in sum.0.iter_mut().zip(&packed[piece.place].0) {
                    *sum += piece.factor * h;
                }
            }
            sums
        };
        let mut of_statics = add(statics);
        for (at, jump) in self.jumps.iter().enumerate().filter(|(_, jump)| **jump != 0.0) {
            of_statics[number[at]].0.iter_mut().for_each(|sum| *sum += jump);
        }
        let channels = channels.iter().map(|c| {
            let all = add(c).into_iter().enumerate();
            all.filter(|(_, part)| part.0.iter().any(|x| *x != 0.0)).collect()
        });
        let channels = channels.collect();
        Generator { size: self.size, rows, columns, statics: of_statics, channels }
    }

    /// Whether y is a density matrix.
    pub fn is_density(&self) -> bool {
        self.density
    }
}

/// The Hermitian matrix whose packed form is 1 at one place.
fn unpacked(dim: usize, place: usize) -> Matrix {
    let mut matrix = Matrix::zeros(dim, dim);
    for j in 0..dim {
        if place == j {
            matrix[(j, j)] = 1.0.into();
        }
        for k in j + 1..dim {
            let at = place_of(dim, j, k);
            if place == at || place == at + 1 {
                let entry = if place == at { Complex64::from(1.0) } else { Complex64::i() };
                matrix[(j, k)] = entry;
                matrix[(k, j)] = entry.conj();
            }
        }
    }
    matrix
}

fn packed(matrix: &Matrix) -> Vec<f64> {
    let dim = matrix.nrows();
    let mut all = vec![0.0; dim * dim];
    for j in 0..dim {
        all[j] = matrix[(j, j)].re;
        for k in j + 1..dim {
            let at = place_of(dim, j, k);
            (all[at], all[at + 1]) = (matrix[(j, k)].re, matrix[(j, k)].im);
        }
    }
    all
}

//! Steady states: the null space of a constant generator, all of it.
//!
//! A generator of this kind has no growing part, and what neither grows nor decays is not defective (E. B. Davies, Quantum Theory
//! of Open Systems, Academic Press (1976)), so with R and L bases of the right and left null space the state x runs into
//! R (L+ R)^-1 L+ x: what decays is gone, and what turns without decaying is left out, as its mean over time is.
//!
//! The generator falls into blocks that nothing joins (without drives each coherence is its own); each is solved by itself, so
//! that optical frequencies of coherences cost the populations no digits. The null spaces come from a QR decomposition with column
//! pivoting; the same from an LU decomposition with full pivoting is the second resolution.

use nalgebra::{ColPivQR, DMatrix, DVector, FullPivLU};

use super::super::picture::{Kind, Pictures};
use super::coordinates;
use super::generator::Generators;
use crate::problem::{Matrix, Problem};

/// A steady state.
#[derive(Debug, Clone, PartialEq)]
pub struct Steady {
    /// Density matrix in the frame of the problem; its trace is what is not lost.
    pub state: Matrix,
    /// Whether every start runs into it.
    pub unique: bool,
    /// Error figure of any of its entries: the difference of two decompositions, at least rounding.
    pub error: f64,
}

/// Why there is no steady state to give.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum NotSteady {
    /// The generator of the last stretch changes in the frame of the problem.
    Changes,
    /// There are several, and no state was given that runs into one of them: so many free numbers.
    NotUnique(usize),
    /// More coordinates hang together than can be decomposed.
    TooLarge(usize),
}

/// Largest block that is decomposed.
const LARGEST: usize = 1300;
/// A pivot below this share of the largest is rounding, times the size of the block.
const ZERO: f64 = 8.0 * f64::EPSILON;

/// The steady state of the last stretch, into which `end` runs where there are several.
pub fn steady(problem: &Problem, end: Option<&Matrix>) -> Result<Steady, NotSteady> {
    let Some(segment) = problem.segments.last() else { return Err(NotSteady::Changes) };
    let terms = problem.terms_of(segment);
    let picture = Pictures::new(problem).of(segment, Kind::Rest);
    let generator = Generators::new(problem, None).of(&picture);
    if !generator.constant(terms) || generator.knows_the_clock() {
        return Err(NotSteady::Changes);
    }
    let n = generator.size;
    let mut values = Vec::new();
    generator.at(terms, segment.start, 0.0, &mut values);
    let keeps = problem.jumps.iter().all(|jump| jump.keeps || jump.rate_per_s == 0.0);
    let mut x = vec![0.0; n];
    if let Some(end) = end {
        coordinates::real(end, &mut x);
    }
    let (mut one, mut other) = (vec![0.0; n], vec![0.0; n]);
    let mut free = 0;
    for block in generator.blocks() {
        if block.len() > LARGEST {
            return Err(NotSteady::TooLarge(block.len()));
        }
        let g = generator.block(&values, &block);
        let [by_qr, by_lu] = [null_space_qr, null_space_lu].map(|null| null(&g).zip_left(&g, null));
        if by_qr.right.ncols() == 0 {
            continue;
        }
        free += by_qr.right.ncols();
        let inside = DVector::from_iterator(block.len(), block.iter().map(|at| x[*at]));
        let populations: Vec<bool> = block.iter().map(|at| *at < problem.dim()).collect();
        for (found, null) in [(&mut one, by_qr), (&mut other, by_lu)] {
            let state = if end.is_none() && keeps { null.normed(&populations) } else { null.run_into(&inside) };
            block.iter().zip(state.iter()).for_each(|(at, value)| found[*at] = *value);
        }
    }
    let unique = free == 0 || (free == 1 && keeps);
    if !unique && end.is_none() {
        return Err(NotSteady::NotUnique(free));
    }
    let difference = one.iter().zip(&other).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
    let mut state = Matrix::zeros(problem.dim(), problem.dim());
    coordinates::matrix(&one, &mut state);
    let error = if difference.is_nan() { f64::INFINITY } else { (2.0 * difference).max(4.0 * f64::EPSILON) };
    Ok(Steady { state, unique, error })
}

/// Bases of both null spaces, as columns.
struct Null {
    right: DMatrix<f64>,
    left: DMatrix<f64>,
}

/// A basis of the right null space.
struct Right(DMatrix<f64>);

impl Right {
    /// With that of the transpose.
    fn zip_left(self, g: &DMatrix<f64>, null: fn(&DMatrix<f64>) -> Right) -> Null {
        Null { right: self.0, left: null(&g.transpose()).0 }
    }
}

impl Null {
    /// Where `x` runs.
    fn run_into(&self, x: &DVector<f64>) -> DVector<f64> {
        let overlap = self.left.transpose() * &self.right;
        match overlap.lu().solve(&(self.left.transpose() * x)) {
            Some(shares) => &self.right * shares,
            None => DVector::from_element(x.len(), f64::NAN),
        }
    }

    /// The first of the basis, its populations with sum 1.
    fn normed(&self, populations: &[bool]) -> DVector<f64> {
        let first = self.right.column(0);
        let sum: f64 = first.iter().zip(populations).filter(|(_, is)| **is).map(|(value, _)| value).sum();
        first / sum
    }
}

/// Rows scaled to sum norm 1, which leaves the right null space; all zero rows stay.
fn scaled(g: &DMatrix<f64>) -> DMatrix<f64> {
    let mut g = g.clone();
    for mut row in g.row_iter_mut() {
        let sum: f64 = row.iter().map(|entry| entry.abs()).sum();
        if sum > 0.0 {
            row /= sum;
        }
    }
    g
}

fn rank(pivots: impl Iterator<Item = f64>, size: usize) -> usize {
    let pivots: Vec<f64> = pivots.map(f64::abs).collect();
    let largest = pivots.iter().fold(0.0, |most: f64, pivot| most.max(*pivot));
    pivots.iter().filter(|pivot| **pivot > ZERO * size as f64 * largest).count()
}

fn null_space_qr(g: &DMatrix<f64>) -> Right {
    let n = g.nrows();
    let qr = ColPivQR::new(scaled(g).transpose());
    let rank = rank(qr.r().diagonal().iter().copied(), n);
    Right(qr.q().columns(rank, n - rank).into_owned())
}

fn null_space_lu(g: &DMatrix<f64>) -> Right {
    let n = g.nrows();
    let lu = FullPivLU::new(scaled(g));
    let u = lu.u();
    let rank = rank(u.diagonal().iter().copied(), n);
    let mut basis = DMatrix::zeros(n, n - rank);
    for free in 0..n - rank {
        basis[(rank + free, free)] = 1.0;
        for row in (0..rank).rev() {
            let sum: f64 = (row + 1..n).map(|k| u[(row, k)] * basis[(k, free)]).sum();
            basis[(row, free)] = -sum / u[(row, row)];
        }
    }
    lu.q().inv_permute_rows(&mut basis);
    Right(basis)
}

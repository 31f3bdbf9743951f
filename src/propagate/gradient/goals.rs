//! Goals: real functions f of the columns X at the end of a run, with the seed of their gradient, df = Re Tr(seed+ dX).

use num_complex::Complex64;

use crate::problem::{Matrix, Vector};

/// A number made of the columns at the end.
pub trait Goal: Sync {
    /// Number of levels.
    fn dim(&self) -> usize;
    /// The columns at the start, `dim` x any number.
    fn start(&self) -> Matrix;
    /// The number.
    fn value(&self, end: &Matrix) -> f64;
    /// The size that its terms may have, whatever they leave: rounding is judged by it.
    fn size(&self) -> f64 {
        1.0
    }
    /// G with df = Re Tr(G+ dX), of the shape of the columns.
    fn seed(&self, end: &Matrix) -> Matrix;
}

/// Sum over the columns x of the real part of <x|O|x>: populations, expectation values, fidelities with a state, leakage.
#[derive(Debug, Clone)]
pub struct Mean {
    start: Matrix,
    operator: Matrix,
}

impl Mean {
    /// Of a Hermitian `operator` in the state that `start` becomes; the unit is that of the operator.
    pub fn new(start: Vector, operator: Matrix) -> Mean {
        Mean { start: Matrix::from_columns(&[start]), operator }
    }

    /// The population of a level at the end.
    pub fn population(start: Vector, level: usize) -> Mean {
        let mut operator = Matrix::zeros(start.len(), start.len());
        operator[(level, level)] = Complex64::from(1.0);
        Mean::new(start, operator)
    }

    /// The fidelity |<to|x>|^2 with a state of norm 1.
    pub fn fidelity(start: Vector, to: &Vector) -> Mean {
        Mean::new(start, to * to.adjoint())
    }

    /// What has left the levels `within` at the end, averaged over all that start in them.
    pub fn leakage(dim: usize, within: &[usize]) -> Mean {
        let share = Complex64::from(1.0 / within.len().max(1) as f64);
        let mut operator = Matrix::zeros(dim, dim);
        (0..dim).filter(|level| !within.contains(level)).for_each(|level| operator[(level, level)] = share);
        Mean { start: columns(dim, within), operator }
    }
}

/// The unit vectors of some levels.
fn columns(dim: usize, within: &[usize]) -> Matrix {
    let mut start = Matrix::zeros(dim, within.len());
    within.iter().enumerate().for_each(|(column, level)| start[(*level, column)] = Complex64::from(1.0));
    start
}

impl Goal for Mean {
    fn dim(&self) -> usize {
        self.start.nrows()
    }

    fn start(&self) -> Matrix {
        self.start.clone()
    }

    fn value(&self, end: &Matrix) -> f64 {
        end.dotc(&(&self.operator * end)).re
    }

    fn size(&self) -> f64 {
        self.operator.iter().map(|entry| entry.norm()).fold(0.0, f64::max) * self.start.ncols() as f64
    }

    fn seed(&self, end: &Matrix) -> Matrix {
        (&self.operator + self.operator.adjoint()) * end
    }
}

/// 1 - |Tr(V+ U)|^2/d^2 of the propagator U and a target V on all d levels, blind to a common phase.
#[derive(Debug, Clone)]
pub struct GateOverlap {
    target: Matrix,
}

impl GateOverlap {
    /// For a unitary target.
    pub fn new(target: Matrix) -> GateOverlap {
        GateOverlap { target }
    }
}

impl Goal for GateOverlap {
    fn dim(&self) -> usize {
        self.target.nrows()
    }

    fn start(&self) -> Matrix {
        Matrix::identity(self.target.nrows(), self.target.nrows())
    }

    fn value(&self, end: &Matrix) -> f64 {
        1.0 - self.target.dotc(end).norm_sqr() / (self.target.nrows() as f64).powi(2)
    }

    fn seed(&self, end: &Matrix) -> Matrix {
        let factor = self.target.dotc(end) * (-2.0 / (self.target.nrows() as f64).powi(2));
        &self.target * factor
    }
}

/// 1 - F of the levels `within`, F averaged over all pure states of them: with M what the propagator makes of them and of d levels,
/// F = (Tr(M M+) + |Tr(V+ M)|^2)/(d (d + 1)) (L. H. Pedersen, N. M. Moller, K. Molmer, Physics Letters A 367, 47 (2007)).
#[derive(Debug, Clone)]
pub struct AverageGateError {
    dim: usize,
    within: Vec<usize>,
    target: Matrix,
}

impl AverageGateError {
    /// For a unitary target on `within`, levels of `dim`.
    pub fn new(dim: usize, within: &[usize], target: Matrix) -> AverageGateError {
        AverageGateError { dim, within: within.to_vec(), target }
    }

    fn cut(&self, end: &Matrix) -> Matrix {
        Matrix::from_fn(self.within.len(), end.ncols(), |j, k| end[(self.within[j], k)])
    }

    fn scale(&self) -> f64 {
        let d = self.within.len() as f64;
        1.0 / (d * (d + 1.0))
    }
}

impl Goal for AverageGateError {
    fn dim(&self) -> usize {
        self.dim
    }

    fn start(&self) -> Matrix {
        columns(self.dim, &self.within)
    }

    fn value(&self, end: &Matrix) -> f64 {
        let m = self.cut(end);
        1.0 - (m.norm_squared() + self.target.dotc(&m).norm_sqr()) * self.scale()
    }

    fn seed(&self, end: &Matrix) -> Matrix {
        let m = self.cut(end);
        let overlap = self.target.dotc(&m);
        let mut seed = Matrix::zeros(self.dim, end.ncols());
        for (j, level) in self.within.iter().enumerate() {
            for k in 0..end.ncols() {
                seed[(*level, k)] = (m[(j, k)] + self.target[(j, k)] * overlap) * (-2.0 * self.scale());
            }
        }
        seed
    }
}

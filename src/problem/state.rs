//! States of a system: amplitudes where it is pure, a density matrix where it is mixed; owned ([`Start`]) and seen ([`State`]).

use num_complex::Complex64;

use super::{Matrix, Vector};

/// A state that is kept: at time zero, or at the end.
#[derive(Debug, Clone, PartialEq)]
pub enum Start {
    /// Amplitudes, norm 1.
    Pure(Vector),
    /// Density matrix, Hermitian, no eigenvalue below zero, trace 1 (less where population has been lost).
    Mixed(Matrix),
}

impl Start {
    /// Number of basis states.
    pub fn dim(&self) -> usize {
        match self {
            Start::Pure(amplitudes) => amplitudes.len(),
            Start::Mixed(density) => density.nrows(),
        }
    }

    /// The state to look at.
    pub fn state(&self) -> State<'_> {
        match self {
            Start::Pure(amplitudes) => State::Pure(amplitudes),
            Start::Mixed(density) => State::Mixed(density),
        }
    }

    /// The amplitudes, if the state is kept as such.
    pub fn amplitudes(&self) -> Option<&Vector> {
        match self {
            Start::Pure(amplitudes) => Some(amplitudes),
            Start::Mixed(_) => None,
        }
    }

    /// The same state with each level's amplitude multiplied by a phase factor.
    pub fn turned(&self, factors: &[Complex64]) -> Start {
        match self {
            Start::Pure(amplitudes) => {
                Start::Pure(Vector::from_iterator(amplitudes.len(), amplitudes.iter().zip(factors).map(|(a, z)| a * z)))
            }
            Start::Mixed(density) => {
                Start::Mixed(Matrix::from_fn(density.nrows(), density.ncols(), |j, k| density[(j, k)] * factors[j] * factors[k].conj()))
            }
        }
    }

    /// The density matrix.
    pub fn density(&self) -> Matrix {
        self.state().density()
    }
}

/// A state that is looked at, in the frame of the problem.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum State<'a> {
    /// Amplitudes.
    Pure(&'a Vector),
    /// Density matrix.
    Mixed(&'a Matrix),
}

impl State<'_> {
    /// Number of basis states.
    pub fn dim(&self) -> usize {
        match self {
            State::Pure(amplitudes) => amplitudes.len(),
            State::Mixed(density) => density.nrows(),
        }
    }

    /// Population of a basis state: |c_j|^2, or rho_jj.
    pub fn population(&self, level: usize) -> f64 {
        match self {
            State::Pure(amplitudes) => amplitudes[level].norm_sqr(),
            State::Mixed(density) => density[(level, level)].re,
        }
    }

    /// Element a, b of the density matrix: c_a conj(c_b).
    pub fn coherence(&self, a: usize, b: usize) -> Complex64 {
        match self {
            State::Pure(amplitudes) => amplitudes[a] * amplitudes[b].conj(),
            State::Mixed(density) => density[(a, b)],
        }
    }

    /// Real part of Tr(A rho), in the unit of A.
    pub fn mean(&self, operator: &Matrix) -> f64 {
        match self {
            State::Pure(amplitudes) => amplitudes.dotc(&(operator * *amplitudes)).re,
            State::Mixed(density) => {
                let n = density.nrows();
                (0..n).map(|k| (0..n).map(|j| (operator[(k, j)] * density[(j, k)]).re).sum::<f64>()).sum()
            }
        }
    }

    /// Weight of a pure state `other`: |<other|psi>|^2, or <other|rho|other>.
    pub fn weight(&self, other: &Vector) -> f64 {
        match self {
            State::Pure(amplitudes) => other.dotc(amplitudes).norm_sqr(),
            State::Mixed(density) => other.dotc(&(*density * other)).re,
        }
    }

    /// Sum of the populations; what is missing to 1 has been lost.
    pub fn trace(&self) -> f64 {
        (0..self.dim()).map(|level| self.population(level)).sum()
    }

    /// The density matrix, copied or formed.
    pub fn density(&self) -> Matrix {
        match self {
            State::Pure(amplitudes) => *amplitudes * amplitudes.adjoint(),
            State::Mixed(density) => (*density).clone(),
        }
    }

    /// A copy to keep.
    pub fn keep(&self) -> Start {
        match self {
            State::Pure(amplitudes) => Start::Pure((*amplitudes).clone()),
            State::Mixed(density) => Start::Mixed((*density).clone()),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A pure state and its projector are the same state (J. von Neumann, Goettinger Nachrichten 1927, 245).
    #[test]
    fn prop_pure_and_projector_agree() {
        let psi = Vector::from_vec(vec![Complex64::new(0.6, 0.0), Complex64::new(0.0, 0.48), Complex64::new(-0.64, 0.0)]);
        let rho = Start::Mixed(Start::Pure(psi.clone()).density());
        let (pure, mixed) = (State::Pure(&psi), rho.state());
        let a = Matrix::from_fn(3, 3, |j, k| Complex64::new((j + k) as f64, j as f64 - k as f64));
        let other = Vector::from_vec(vec![Complex64::new(0.0, 0.8), Complex64::new(0.6, 0.0), Complex64::default()]);
        assert!((pure.mean(&a) - mixed.mean(&a)).abs() < 1e-15);
        assert!((pure.weight(&other) - mixed.weight(&other)).abs() < 1e-15);
        assert!((mixed.trace() - 1.0).abs() < 1e-15 && (pure.trace() - 1.0).abs() < 1e-15);
        assert!((pure.coherence(0, 1) - Complex64::new(0.0, -0.288)).norm() < 1e-16);
        assert_eq!(pure.coherence(2, 1), mixed.coherence(2, 1));
    }
}

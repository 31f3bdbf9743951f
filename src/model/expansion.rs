//! An expansion in functions of the user's own: real functions f_a(x) between two ends, made orthonormal.
//!
//! S_ab = integral of f_a f_b, A_ab = integral of f_a (A f_b). New functions are g = f X with X^T S X = 1: X = S^(-1/2) for the symmetric
//! choice (P.-O. Lowdin, Journal of Chemical Physics 18, 365 (1950)), which stays as near to the f as can be, or the upper
//! triangular one of Gram and Schmidt, which takes them in order; a matrix then is X^T A X. Errors: those of the integrals, over the
//! least eigenvalue of S; measured by carrying both resolutions to the end.

use nalgebra::{DMatrix, SymmetricEigen};

use super::differential::{Family, ORDERS};
use crate::config::system::functions::Orthogonalise;
use crate::config::tape::BoundFormula;
use crate::config::taylor::Taylor;

/// Fewest stretches into which the range is cut, so that no function hides between the nodes of a first look.
const FEWEST: usize = 24;

/// Typed functions between two ends.
#[derive(Debug, Clone)]
pub struct Expansion {
    functions: Vec<BoundFormula>,
    panels: Vec<[f64; 2]>,
    continuous: usize,
}

impl Expansion {
    /// The functions between `from` and `to`, in the unit of their variable.
    pub fn new(functions: Vec<BoundFormula>, from: f64, to: f64) -> Expansion {
        let mut ends: Vec<f64> = (0..=FEWEST).map(|k| from + (to - from) * k as f64 / FEWEST as f64).collect();
        let mut continuous = usize::MAX / 4;
        for function in &functions {
            for kink in function.kinks_between(from, to) {
                continuous = 0;
                ends.push(kink);
            }
        }
        ends.sort_by(f64::total_cmp);
        ends.dedup_by(|later, earlier| *later - *earlier <= 1e-13 * (to - from));
        Expansion { functions, panels: ends.windows(2).map(|two| [two[0], two[1]]).collect(), continuous }
    }

    /// The first function that has no finite value somewhere on a comb, and where.
    pub fn without_value(&self) -> Option<(usize, f64)> {
        let middles = self.panels.iter().flat_map(|[from, to]| (0..16).map(move |k| from + (to - from) * (f64::from(k) + 0.5) / 16.0));
        middles
            .flat_map(|x| self.functions.iter().enumerate().map(move |(k, f)| (k, x, f.at(x))))
            .find(|(.., y)| !y.is_finite())
            .map(|(k, x, _)| (k, x))
    }
}

impl Family for Expansion {
    fn count(&self) -> usize {
        self.functions.len()
    }

    fn panels(&self) -> Vec<[f64; 2]> {
        self.panels.clone()
    }

    fn jets(&self, _panel: usize, x: f64, _orders: usize) -> Vec<Taylor<ORDERS>> {
        self.functions.iter().map(|function| function.jet(x)).collect()
    }

    fn is_ring(&self) -> bool {
        false
    }

    fn continuous(&self) -> usize {
        self.continuous
    }
}

/// The least share of itself that a function must add to those before it, or the least eigenvalue of the scaled overlap.
pub const LEAST: f64 = 1e-10;

/// How far the scaled overlap is from 1: its largest off-diagonal entry, with its place.
pub fn skewness(overlap: &DMatrix<f64>) -> (f64, [usize; 2]) {
    let mut worst = (0.0, [0, 0]);
    for b in 0..overlap.ncols() {
        for a in 0..b {
            let share = (overlap[(a, b)] / (overlap[(a, a)] * overlap[(b, b)]).sqrt()).abs();
            if share > worst.0 {
                worst = (share, [a, b]);
            }
        }
    }
    worst
}

/// The least eigenvalue of the overlap of the functions scaled to norm 1.
pub fn independence(overlap: &DMatrix<f64>) -> f64 {
    let scale = |k: usize| overlap[(k, k)].sqrt();
    let scaled = DMatrix::from_fn(overlap.nrows(), overlap.ncols(), |a, b| overlap[(a, b)] / (scale(a) * scale(b)));
    SymmetricEigen::new(scaled).eigenvalues.min()
}

/// X with X^T S X = 1: column k holds the shares of the functions as written in the new function k.
pub fn orthonormal(overlap: &DMatrix<f64>, how: Orthogonalise) -> DMatrix<f64> {
    let size = overlap.nrows();
    let mut shares = match how {
        Orthogonalise::Symmetric => {
            let eigen = SymmetricEigen::new(overlap.clone());
            let inverse = DMatrix::from_diagonal(&eigen.eigenvalues.map(|value| 1.0 / value.sqrt()));
            &eigen.eigenvectors * inverse * eigen.eigenvectors.transpose()
        }
        Orthogonalise::InOrder => {
            let mut shares = DMatrix::identity(size, size);
            for k in 0..size {
                // twice, as one pass leaves the rounding of what it takes out
                for _ in 0..2 {
                    for j in 0..k {
                        let part = (shares.column(j).transpose() * overlap * shares.column(k))[(0, 0)];
                        let other = shares.column(j).clone_owned();
                        shares.column_mut(k).axpy(-part, &other, 1.0);
                    }
                }
                let norm = (shares.column(k).transpose() * overlap * shares.column(k))[(0, 0)].sqrt();
                shares.column_mut(k).scale_mut(1.0 / norm);
            }
            shares
        }
    };
    // functions of very different norm lose digits in S^(-1/2); X (1 - (X^T S X - 1)/2) squares what is left
    for _ in 0..2 {
        let off = shares.transpose() * overlap * &shares - DMatrix::identity(size, size);
        shares -= &shares * off * 0.5;
    }
    shares
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Two normalised functions that overlap by s: the symmetric choice is ((1 + s)^(-1/2) +- (1 - s)^(-1/2))/2 (Lowdin, equation 24);
    /// in order (f2 - s f1)/sqrt(1 - s^2).
    #[test]
    fn exact_two_functions() {
        let s = 0.37;
        let overlap = DMatrix::from_row_slice(2, 2, &[1.0, s, s, 1.0]);
        let (plus, minus) = ((1.0f64 + s).powf(-0.5), (1.0f64 - s).powf(-0.5));
        let both = orthonormal(&overlap, Orthogonalise::Symmetric);
        let want = DMatrix::from_row_slice(2, 2, &[plus + minus, plus - minus, plus - minus, plus + minus]) * 0.5;
        assert!((both - want).amax() < 1e-15);
        let order = orthonormal(&overlap, Orthogonalise::InOrder);
        let root = (1.0 - s * s).sqrt();
        assert!((order - DMatrix::from_row_slice(2, 2, &[1.0, -s / root, 0.0, 1.0 / root])).amax() < 1e-15);
        assert!((independence(&overlap) - (1.0 - s)).abs() < 1e-15);
        assert_eq!(skewness(&overlap), (s, [0, 1]));
    }

    /// X^T S X = 1 for functions of very different norm that nearly coincide.
    #[test]
    fn prop_both_choices_are_orthonormal() {
        let raw = DMatrix::from_row_slice(3, 3, &[4.0, 1.9e-4, 0.3, 1.9e-4, 1e-8, 1e-5, 0.3, 1e-5, 7.0]);
        for how in [Orthogonalise::Symmetric, Orthogonalise::InOrder] {
            let shares = orthonormal(&raw, how);
            let off = (shares.transpose() * &raw * &shares - DMatrix::<f64>::identity(3, 3)).amax();
            assert!(off < 1e-13, "{how:?}: {off:e}");
        }
    }
}

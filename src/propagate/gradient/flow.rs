//! The generator of a problem at a moment, acting on columns, in units of its segment: with t = t0 + s length, s from 0 to 1,
//!
//! ```text
//! closed    dX/ds = -i length H X                                                       X: states side by side
//! open      dX/ds = length (-i [H, X] + sum (L X L+ - (L+ L X + X L+ L)/2))              X: density matrices side by side
//! ```
//!
//! and its adjoint. In these units a segment may change its length without moving anything else, so that the derivative by a time is a
//! derivative of the generator like any other. The trace of H is taken off: a common phase is in no recorded number.

use num_complex::Complex64;

use crate::problem::{Matrix, Problem};

/// The generator at a moment.
pub(super) struct Local {
    /// -i length H; of an open problem -i length H - length sum L+ L/2.
    pub left: Matrix,
    /// sqrt(length rate) L of jumps that arrive; none where the problem is closed.
    jumps: Option<Vec<Matrix>>,
}

impl Local {
    /// At `s` of a segment; `open` says what X is.
    pub fn new(problem: &Problem, segment: usize, s: f64, open: bool) -> Local {
        let of = &problem.segments[segment];
        let tau_s = s * of.length_s;
        let h = problem.hamiltonian(of, tau_s);
        let mean = h.trace() / Complex64::from(h.nrows() as f64);
        let mut left = h * Complex64::new(0.0, -of.length_s);
        for k in 0..left.nrows() {
            left[(k, k)] += mean * Complex64::new(0.0, of.length_s);
        }
        if !open {
            return Local { left, jumps: None };
        }
        let root = Complex64::from(of.length_s.max(0.0).sqrt());
        let mut arriving = Vec::new();
        for jump in problem.jumps.iter().filter(|jump| jump.rate_per_s > 0.0) {
            let l = jump.at(of.start.after(tau_s)) * root;
            left -= l.ad_mul(&l) * Complex64::from(0.5);
            if jump.keeps {
                arriving.push(l);
            }
        }
        Local { left, jumps: Some(arriving) }
    }

    /// The largest rate at which anything changes, over the segment: the Frobenius norm.
    pub fn size(&self) -> f64 {
        let jumps: f64 = self.jumps.iter().flatten().map(|l| l.norm_squared()).sum();
        self.left.norm() * if self.jumps.is_some() { 2.0 } else { 1.0 } + jumps
    }

    /// Adds `factor` times the generator acting on `x` to `sum`.
    pub fn act(&self, factor: f64, x: &Matrix, sum: &mut Matrix) {
        self.apply(factor, x, sum, false);
    }

    /// Adds `factor` times its adjoint, with respect to Re Tr(x+ y), acting on `x` to `sum`.
    pub fn act_adjoint(&self, factor: f64, x: &Matrix, sum: &mut Matrix) {
        self.apply(factor, x, sum, true);
    }

    fn apply(&self, factor: f64, x: &Matrix, sum: &mut Matrix, adjoint: bool) {
        let (factor, one) = (Complex64::from(factor), Complex64::from(1.0));
        let Some(jumps) = &self.jumps else {
            if adjoint {
                sum.gemm_ad(factor, &self.left, x, one);
            } else {
                sum.gemm(factor, &self.left, x, one);
            }
            return;
        };
        let dim = self.left.nrows();
        for block in 0..x.ncols() / dim {
            let x = x.columns(block * dim, dim);
            let mut to = sum.columns_mut(block * dim, dim);
            if adjoint {
                to.gemm_ad(factor, &self.left, &x, one);
                to.gemm(factor, &x, &self.left, one);
                jumps.iter().for_each(|l| to.gemm(factor, &l.ad_mul(&x), l, one));
            } else {
                to.gemm(factor, &self.left, &x, one);
                to.gemm(factor, &x, &self.left.adjoint(), one);
                jumps.iter().for_each(|l| to.gemm(factor, &(l * x), &l.adjoint(), one));
            }
        }
    }
}

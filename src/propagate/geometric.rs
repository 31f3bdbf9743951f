//! Magnus expansion of order 6 with three Gauss-Legendre nodes; every step is exactly unitary.
//!
//! S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics Reports 470, 151 (2009), section 5: with h1, h2, h3 the Hermitian H at the nodes,
//! a1 = h h2, a2 = sqrt(15)/3 h (h3 - h1), a3 = 10/3 h (h3 - 2 h2 + h1), {x, y} = -i (x y - y x),
//! c1 = {a1, a2}, c2 = -{a1, 2 a3 + c1}/60, K = a1 + a3/12 + {-20 a1 - a3 + c1, a2 + c2}/240, and the step is exp(-i K).
//! (The paper's Omega is -i K; the bracket above keeps all of it Hermitian.) H in rad/s, h in s, K in rad.
//!
//! Error order 6 in the step; it grows with how fast H turns and changes, and only through commutators with its size. It
//! gives states at the ends of steps alone, so no integral of populations over time.

use num_complex::Complex64;

use super::even_steps;
use super::exponential::Flow;
use super::run::{Eye, State, Stretch, Work};

/// sqrt(15)/10: distance of the outer nodes from the middle, in steps.
const OUTER: f64 = 0.387_298_334_620_741_7;
/// sqrt(15)/3.
const SLOPE: f64 = 1.290_994_448_735_805_6;

/// Carries the state through the stretch.
pub(super) fn pass(stretch: &Stretch, doublings: u32, state: &mut State, eye: &mut Eye, work: &mut Work) {
    let dim = state.dim;
    let zero = Complex64::default();
    let mut nodes = [vec![zero; dim * dim], vec![zero; dim * dim], vec![zero; dim * dim]];
    let (mut k, mut psi, mut room) = (vec![zero; dim * dim], vec![zero; dim], Vec::new());
    let mut magnus = Magnus::new(dim);
    even_steps::pass(stretch, doublings, state, eye, work, |tau_s, step_s, state| {
        for (node, h) in nodes.iter_mut().enumerate() {
            stretch.picture.fill(stretch.terms, tau_s + step_s * (0.5 + OUTER * (node as f64 - 1.0)), h);
        }
        if dim == 2 {
            two_levels(&nodes, step_s, &mut k);
        } else {
            magnus.exponent(&nodes, step_s, &mut k);
        }
        let flow = Flow::new(&k, dim, 1.0, false);
        let mut products = 3 * dim as u64;
        for column in state.amplitudes.chunks_exact_mut(dim) {
            products += flow.act(1.0, column, &mut psi, &mut room);
            column.copy_from_slice(&psi);
        }
        products
    });
}

/// K of two levels through real vectors: {x.sigma, y.sigma} = 2 (x cross y).sigma.
fn two_levels(nodes: &[Vec<Complex64>; 3], h: f64, k: &mut [Complex64]) {
    let split = |m: &[Complex64]| ([m[2].re, -m[2].im, 0.5 * (m[0].re - m[3].re)], 0.5 * (m[0].re + m[3].re));
    let [(x1, t1), (x2, t2), (x3, t3)] = [split(&nodes[0]), split(&nodes[1]), split(&nodes[2])];
    let combine = |f: &dyn Fn(usize) -> f64| [f(0), f(1), f(2)];
    let bracket = |x: &[f64; 3], y: &[f64; 3]| combine(&|i| 2.0 * (x[(i + 1) % 3] * y[(i + 2) % 3] - x[(i + 2) % 3] * y[(i + 1) % 3]));
    let a1 = combine(&|i| h * x2[i]);
    let a2 = combine(&|i| SLOPE * h * (x3[i] - x1[i]));
    let a3 = combine(&|i| 10.0 / 3.0 * h * (x3[i] - 2.0 * x2[i] + x1[i]));
    let c1 = bracket(&a1, &a2);
    let c2 = bracket(&a1, &combine(&|i| -(2.0 * a3[i] + c1[i]) / 60.0));
    let last = bracket(&combine(&|i| -20.0 * a1[i] - a3[i] + c1[i]), &combine(&|i| a2[i] + c2[i]));
    let v = combine(&|i| a1[i] + a3[i] / 12.0 + last[i] / 240.0);
    let mean = h * (t2 + (t3 - 2.0 * t2 + t1) * (10.0 / 36.0));
    k[0] = Complex64::new(mean + v[2], 0.0);
    k[3] = Complex64::new(mean - v[2], 0.0);
    k[2] = Complex64::new(v[0], -v[1]);
    k[1] = k[2].conj();
}

/// Scratch for the exponent of any number of levels.
struct Magnus {
    dim: usize,
    a: [Vec<Complex64>; 3],
    c1: Vec<Complex64>,
    c2: Vec<Complex64>,
    left: Vec<Complex64>,
    right: Vec<Complex64>,
    product: Vec<Complex64>,
}

impl Magnus {
    fn new(dim: usize) -> Self {
        let zero = || vec![Complex64::default(); dim * dim];
        Magnus { dim, a: [zero(), zero(), zero()], c1: zero(), c2: zero(), left: zero(), right: zero(), product: zero() }
    }

    fn exponent(&mut self, nodes: &[Vec<Complex64>; 3], h: f64, k: &mut [Complex64]) {
        let n = self.dim;
        let [a1, a2, a3] = &mut self.a;
        for (i, curvature) in a3.iter_mut().enumerate() {
            let (h1, h2, h3) = (nodes[0][i], nodes[1][i], nodes[2][i]);
            a1[i] = h2 * h;
            a2[i] = (h3 - h1) * (SLOPE * h);
            *curvature = (h3 - h2 * 2.0 + h1) * (10.0 / 3.0 * h);
        }
        bracket(n, a1, a2, &mut self.product, &mut self.c1);
        for (i, curvature) in a3.iter().enumerate() {
            self.left[i] = -(curvature * 2.0 + self.c1[i]) / 60.0;
        }
        bracket(n, a1, &self.left, &mut self.product, &mut self.c2);
        for i in 0..n * n {
            self.left[i] = a1[i] * -20.0 - a3[i] + self.c1[i];
            self.right[i] = a2[i] + self.c2[i];
        }
        bracket(n, &self.left, &self.right, &mut self.product, &mut self.c1);
        for i in 0..n * n {
            k[i] = a1[i] + a3[i] / 12.0 + self.c1[i] / 240.0;
        }
    }
}

/// -i (x y - y x) of Hermitian x and y, for which y x is the adjoint of x y.
fn bracket(n: usize, x: &[Complex64], y: &[Complex64], product: &mut [Complex64], into: &mut [Complex64]) {
    product.fill(Complex64::default());
    for (out, y_column) in product.chunks_exact_mut(n).zip(y.chunks_exact(n)) {
        for (x_column, factor) in x.chunks_exact(n).zip(y_column) {
            for (o, entry) in out.iter_mut().zip(x_column) {
                *o += entry * factor;
            }
        }
    }
    for column in 0..n {
        for row in 0..n {
            let difference = product[row + n * column] - product[column + n * row].conj();
            into[row + n * column] = Complex64::new(difference.im, -difference.re);
        }
    }
}

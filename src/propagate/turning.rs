//! What a diagonal entry does within an element, exactly: i du/dx = z u + f, z any real number, f a polynomial of degree 7.
//!
//! ```text
//! u(x) = exp(-i z x) u(0) - i integral from 0 to x of exp(-i z (x - s)) f(s) ds
//! ```
//!
//! x runs from 0 to 1 over the element, z is the diagonal entry times its length in rad, f the rest of H psi in the same units. With
//! f in Legendre polynomials the integrals M_k obey (by parts, as P'_(k+1) - P'_(k-1) = 2 (2k + 1) P_k)
//!
//! ```text
//! 2 (2k + 1) M_k + i z (M_(k+1) - M_(k-1)) = P_(k+1)(x) - P_(k-1)(x),   M_0 = (1 - exp(-i z x)) / (i z),
//! ```
//!
//! upward where z is large, downward where it is small (F. W. J. Olver, Journal of Research of the National Bureau of Standards 71B,
//! 111 (1967)). Error: some hundred units of rounding of the largest M_k at worst, near z = 5.
//!
//! Where u is known to follow f without turning by itself, |z| large, the same equation has one polynomial solution,
//! u = -f/z - i f'/z^2 + ..: [`following`].

use num_complex::Complex64;

use super::gauss::{legendre, DEGREES, NODES, RULE};
use super::lanes::{sin_cos, Eight, Lane, Simd};
use crate::units::{cis_turns, RAD_PER_TURN};

/// Below this z counts as 0.
const NOTHING: f64 = 1e-15;
/// Below this the recurrence goes downward.
const UPWARD_FROM: f64 = 5.5;

/// Eight complex numbers, one for each node.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Block {
    pub re: Eight,
    pub im: Eight,
}

impl Default for Block {
    fn default() -> Self {
        Block { re: Eight::all(0.0), im: Eight::all(0.0) }
    }
}

impl Block {
    #[cfg(test)]
    pub fn at(&self, i: usize) -> Complex64 {
        Complex64::new(self.re.0[i], self.im.0[i])
    }

    pub fn set(&mut self, i: usize, value: Complex64) {
        (self.re.0[i], self.im.0[i]) = (value.re, value.im);
    }
}

/// A complex matrix that acts on values at the nodes, column after column.
pub(super) type Square = [Block; NODES];

/// One diagonal entry within an element of a given length: u at the nodes = `phases` u(0) + `response` f, and the same at the end.
#[derive(Debug, Clone)]
pub(super) struct Turning {
    pub phases: Block,
    pub response: Square,
    pub end_phase: Complex64,
    pub end_response: Block,
}

impl Default for Turning {
    fn default() -> Self {
        Turning {
            phases: Block::default(),
            response: [Block::default(); NODES],
            end_phase: Complex64::new(1.0, 0.0),
            end_response: Block::default(),
        }
    }
}

/// exp(-i rad).
fn turned(rad: f64) -> Complex64 {
    cis_turns(-rad / RAD_PER_TURN)
}

/// exp(-i z x) and M_0 = x exp(-i z x/2) sin(z x/2)/(z x/2).
fn first(z: f64, x: f64) -> (Complex64, Complex64) {
    let angle = 0.5 * z * x;
    let half = turned(angle);
    let share = if angle.abs() < 1e-8 { 1.0 } else { -half.im / angle };
    (half * half, half * (x * share))
}

/// Where the downward recurrence starts: M beyond it is below rounding.
fn highest(z: f64) -> usize {
    (11.0 + 2.0 * z.abs()).min((DEGREES - 2) as f64) as usize
}

impl Turning {
    /// For z rad over the element.
    #[inline(always)]
    pub fn fill<S: Simd>(&mut self, simd: S, z: f64) {
        let rule = &*RULE;
        let zero = simd.splat(0.0);
        if z.abs() < NOTHING {
            self.phases = Block { re: Eight::all(1.0), im: Eight::all(0.0) };
            for (out, column) in self.response.iter_mut().zip(&rule.integral) {
                zero.store(&mut out.re);
                (-simd.load(column)).store(&mut out.im);
            }
            self.end_phase = Complex64::new(1.0, 0.0);
            self.end_response = Block { re: Eight::all(0.0), im: Eight(rule.weights.0.map(|w| -w)) };
            return;
        }
        let m = node_moments(simd, z, &mut self.phases);
        // -i M Q, Q from values to Legendre coefficients
        for (out, q) in self.response.iter_mut().zip(&rule.to_legendre) {
            let (mut re, mut im) = (zero, zero);
            for k in 0..NODES {
                let q = simd.splat(q.0[k]);
                re = re.plus(q, m[k].1);
                im = im.minus(q, m[k].0);
            }
            re.store(&mut out.re);
            im.store(&mut out.im);
        }
        let (end_phase, ends) = end_moments(z);
        self.end_phase = end_phase;
        let (mut re, mut im) = (zero, zero);
        for (end, row) in ends.iter().zip(&rule.legendre_rows) {
            let row = simd.load(row);
            re = re.plus(simd.splat(end.im), row);
            im = im.minus(simd.splat(end.re), row);
        }
        re.store(&mut self.end_response.re);
        im.store(&mut self.end_response.im);
    }
}

/// M_0 .. M_7 at all nodes, real and imaginary parts, and the phases there.
#[inline(always)]
fn node_moments<S: Simd>(simd: S, z: f64, phases: &mut Block) -> [(S::V, S::V); NODES] {
    let rule = &*RULE;
    let nodes = simd.load(&rule.nodes);
    let angle = simd.splat(0.5 * z) * nodes;
    let (sine, cosine) = sin_cos(simd, angle);
    let double = sine + sine;
    (cosine * cosine).minus(sine, sine).store(&mut phases.re);
    (-(double * cosine)).store(&mut phases.im);
    let share = nodes * sine.over(angle);
    let p = &rule.legendre;
    let zero = simd.splat(0.0);
    let mut m = [(zero, zero); NODES];
    m[0] = (share * cosine, -(share * sine));
    if z.abs() >= UPWARD_FROM {
        let over = simd.splat(1.0 / z);
        let two = simd.splat(2.0);
        let known = (simd.load(&p[1]) + simd.load(&phases.re), simd.load(&phases.im));
        m[1] = (known.1.minus(two, m[0].1) * over, -(known.0.minus(two, m[0].0) * over));
        for k in 1..NODES - 1 {
            let twice = simd.splat((2 * (2 * k + 1)) as f64);
            m[k + 1] = (m[k - 1].0.minus(twice * m[k].1, over), m[k - 1].1.minus(gain(simd, p, k).minus(twice, m[k].0), over));
        }
        return m;
    }
    let last = highest(z);
    let mut pivot = (2 * (2 * last + 1)) as f64;
    let mut rest = (gain(simd, p, last), zero);
    let mut pivots = [0.0; NODES];
    for k in (1..last).rev() {
        let share = z / pivot;
        let v = simd.splat(share);
        rest = (gain(simd, p, k).plus(v, rest.1), -(v * rest.0));
        pivot = (2 * (2 * k + 1)) as f64 - z * share;
        if k < NODES {
            pivots[k] = pivot;
            m[k] = rest;
        }
    }
    let v = simd.splat(z);
    for k in 1..NODES {
        let over = simd.splat(1.0 / pivots[k]);
        m[k] = (m[k].0.minus(v, m[k - 1].1) * over, m[k].1.plus(v, m[k - 1].0) * over);
    }
    m
}

/// P_(k+1) - P_(k-1) at the nodes; a function, since closures do not take over the instructions of their caller.
#[inline(always)]
fn gain<S: Simd>(simd: S, p: &[Eight], k: usize) -> S::V {
    simd.load(&p[k + 1]) - simd.load(&p[k - 1])
}

/// exp(-i z) and M_0 .. M_7 at x = 1, where P_(k+1) = P_(k-1).
fn end_moments(z: f64) -> (Complex64, [Complex64; NODES]) {
    let (phase, zeroth) = first(z, 1.0);
    let mut m = [zeroth; NODES];
    if z.abs() >= UPWARD_FROM {
        let known = phase + 1.0 - zeroth * 2.0;
        m[1] = Complex64::new(known.im, -known.re) / z;
        for k in 1..NODES - 1 {
            let over = (2 * (2 * k + 1)) as f64 / z;
            m[k + 1] = m[k - 1] + Complex64::new(-m[k].im * over, m[k].re * over);
        }
        return (phase, m);
    }
    let mut pivots = [0.0; DEGREES];
    let last = highest(z);
    for k in (1..=last).rev() {
        let twice = (2 * (2 * k + 1)) as f64;
        pivots[k] = if k == last { twice } else { twice - z * z / pivots[k + 1] };
    }
    for k in 1..NODES {
        let over = z / pivots[k];
        m[k] = Complex64::new(-m[k - 1].im * over, m[k - 1].re * over);
    }
    (phase, m)
}

/// exp(-i z x) and M_0 .. M_7 at one x.
pub(super) fn moments_at(z: f64, x: f64) -> (Complex64, [Complex64; NODES]) {
    let mut p = [0.0; DEGREES];
    legendre(x, &mut p);
    let (phase, zeroth) = first(z, x);
    let mut m = [zeroth; NODES];
    if z.abs() >= UPWARD_FROM {
        // k = 0: 2 M_0 + i z M_1 = P_1(x) + exp(-i z x)
        let known = p[1] + phase - zeroth * 2.0;
        m[1] = Complex64::new(known.im, -known.re) / z;
        for k in 1..NODES - 1 {
            let known = (p[k + 1] - p[k - 1]) - m[k] * (2 * (2 * k + 1)) as f64;
            m[k + 1] = Complex64::new(known.im, -known.re) / z + m[k - 1];
        }
        return (phase, m);
    }
    let last = highest(z);
    let mut pivots = [0.0; DEGREES];
    let mut rest = [Complex64::default(); DEGREES];
    for k in (1..=last).rev() {
        let twice = (2 * (2 * k + 1)) as f64;
        let gain = p[k + 1] - p[k - 1];
        if k == last {
            (pivots[k], rest[k]) = (twice, Complex64::new(gain, 0.0));
        } else {
            pivots[k] = twice - z * z / pivots[k + 1];
            rest[k] = Complex64::new(gain, 0.0) - Complex64::new(0.0, z / pivots[k + 1]) * rest[k + 1];
        }
    }
    for k in 1..NODES {
        m[k] = (rest[k] + Complex64::new(0.0, z) * m[k - 1]) / pivots[k];
    }
    (phase, m)
}

/// The polynomial solution of i du/dx = z u + f without a part that turns by itself: the sum of -(i d/dx)^m f / z^(m+1) over m from 0 to
/// `orders` - 1; with 8 of them it ends for polynomials of degree 7.
#[inline(always)]
pub(super) fn following<S: Simd>(simd: S, z: f64, orders: usize, square: &mut Square) {
    let rule = &*RULE;
    let mut scales = [0.0; NODES];
    let mut scale = -1.0 / z;
    for (m, out) in scales.iter_mut().enumerate() {
        // real, imaginary, real, ..; the sign of i^m changes at every second
        *out = scale;
        scale *= if m % 2 == 0 { 1.0 / z } else { -1.0 / z };
    }
    for (j, out) in square.iter_mut().enumerate() {
        let (mut re, mut im) = (simd.splat(0.0), simd.splat(0.0));
        for m in (0..orders).step_by(2) {
            re = re.plus(simd.splat(scales[m]), simd.load(&rule.derivatives[m][j]));
        }
        for m in (1..orders).step_by(2) {
            im = im.plus(simd.splat(scales[m]), simd.load(&rule.derivatives[m][j]));
        }
        re.store(&mut out.re);
        im.store(&mut out.im);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::propagate::lanes::{Kernel, WIDTHS};
    use crate::quadrature;

    struct Fill(f64);

    impl Kernel for Fill {
        type Output = (Turning, Square);

        #[inline(always)]
        fn run<S: Simd>(self, simd: S) -> (Turning, Square) {
            let (mut turning, mut square) = (Turning::default(), [Block::default(); NODES]);
            turning.fill(simd, self.0);
            following(simd, self.0, NODES, &mut square);
            (turning, square)
        }
    }

    fn apply(matrix: &Square, values: &Block) -> Block {
        let mut out = Block::default();
        for i in 0..NODES {
            out.set(i, (0..NODES).map(|j| matrix[j].at(i) * values.at(j)).sum());
        }
        out
    }

    /// The integrals against Gauss's rule on many pieces, for every kind of z, at the nodes, at the end and between.
    #[test]
    fn exact_integrals_for_any_turning() {
        let f = |s: f64| 1.0 - 3.0 * s + s.powi(4) - 2.0 * s.powi(7);
        let rule = &*RULE;
        let mut values = Block::default();
        for i in 0..NODES {
            values.set(i, Complex64::new(1.0, 0.5) * f(rule.nodes.0[i]));
        }
        for width in WIDTHS {
            for z in [0.0, 1e-9, -1e-3, 0.4, 1.7, -3.0, 4.4, 5.4, 5.6, -6.3, 9.0, 25.0, 130.0, -2000.0] {
                let (turning, _) = width.run(Fill(z));
                let found = apply(&turning.response, &values);
                let exact = |x: f64| -> Complex64 {
                    let pieces = 1 + (z.abs() / 4.0) as usize;
                    let mut sum = Complex64::default();
                    for piece in 0..pieces {
                        let (from, to) = (x * piece as f64 / pieces as f64, x * (piece + 1) as f64 / pieces as f64);
                        let re = quadrature::integral(from, to, |s| f(s) * turned(z * (x - s)).re);
                        let im = quadrature::integral(from, to, |s| f(s) * turned(z * (x - s)).im);
                        sum += Complex64::new(re, im);
                    }
                    sum * Complex64::new(1.0, 0.5) * Complex64::new(0.0, -1.0)
                };
                for i in 0..NODES {
                    let error = (found.at(i) - exact(rule.nodes.0[i])).norm();
                    assert!(error < 4e-14, "z = {z}, node {i}: {error:e}");
                    assert!((turning.phases.at(i) - turned(z * rule.nodes.0[i])).norm() < 1e-15 * (2.0 + z.abs()));
                }
                let end: Complex64 = (0..NODES).map(|j| turning.end_response.at(j) * values.at(j)).sum();
                assert!((end - exact(1.0)).norm() < 4e-14, "z = {z}, end: {:e}", (end - exact(1.0)).norm());
                let (_, moments) = moments_at(z, 0.37);
                let between: Complex64 =
                    (0..NODES).map(|k| moments[k] * (0..NODES).map(|j| values.at(j) * rule.to_legendre[j].0[k]).sum::<Complex64>()).sum();
                assert!((between * Complex64::new(0.0, -1.0) - exact(0.37)).norm() < 4e-14, "z = {z}, between");
            }
        }
    }

    /// What follows solves the equation: i u' = z u + f.
    #[test]
    fn exact_following() {
        let rule = &*RULE;
        let mut f = Block::default();
        for i in 0..NODES {
            f.set(i, Complex64::new(rule.nodes.0[i].powi(5), 1.0 - rule.nodes.0[i]));
        }
        for width in WIDTHS {
            for z in [60.0, -400.0] {
                let u = apply(&width.run(Fill(z)).1, &f);
                for i in 0..NODES {
                    let slope: Complex64 = (0..NODES).map(|j| u.at(j) * rule.derivatives[1][j].0[i]).sum();
                    let rest = Complex64::new(0.0, 1.0) * slope - u.at(i) * z - f.at(i);
                    assert!(rest.norm() < 1e-12, "z = {z}: {rest}");
                }
            }
        }
    }
}

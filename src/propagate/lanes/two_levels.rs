//! Two levels, eight points at a time: the propagator of H(t) = w(t).sigma/2 over many steps.
//!
//! Comes in: the vectors A and C_k of each point (rad/s; H less its trace half), and steps with weights (s, see `steps`). Leaves: the
//! first column (x, y) of the propagator, whose second is (-conj y, conj x); the phase of the trace is not in it.
//!
//! Each step is exp(-i W.sigma/2) in closed form, cos|W/2| - i (W.sigma/2) sin|W/2|/|W/2|, with W = a1 where the step is bare (H constant in
//! it: exact), else the Magnus expansion of order 6 in the integrals of H (S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics Reports 470, 151
//! (2009), section 5.4; the bracket of H is the cross product of vectors):
//! c1 = a1 x a2, c2 = -a1 x (2 a3 + c1)/60, W = a1 + a3/12 + (-20 a1 - a3 + c1) x (a2 + c2)/240.
//! Both functions of |W/2| are series in its square where that is small in all steps, with the first term left out below 1e-17.

use super::elementary::{series, sin_cos};
use super::lane::{Eight, Kernel, Lane, Simd};
use super::steps::Weights;

/// One group of eight points.
#[derive(Debug, Clone, Copy)]
pub(crate) struct TwoLevels<'a, W> {
    /// A: x, y, z.
    pub statics: &'a [Eight; 3],
    /// C of each channel.
    pub channels: &'a [[Eight; 3]],
    /// The steps.
    pub steps: W,
    /// Whether H is constant in every step, so that only the first weights count.
    pub bare: bool,
    /// Whether no vector has a y.
    pub flat: bool,
    /// Largest |W/2|^2 of any step and point.
    pub largest: f64,
    /// Real and imaginary part of x, then of y.
    pub start: &'a [Eight; 4],
}

impl<W: Weights> Kernel for TwoLevels<'_, W> {
    type Output = [Eight; 4];

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) -> [Eight; 4] {
        // the first term left out of the cosine, z^(n + 1)/(2 n + 2)!, is 1e-17 at these limits
        match self.largest {
            z if z < 7.9e-4 => self.of_terms::<S, 3>(simd),
            z if z < 0.13 => self.of_terms::<S, 6>(simd),
            _ => self.of_terms::<S, 0>(simd),
        }
    }
}

impl<W: Weights> TwoLevels<'_, W> {
    #[inline(always)]
    fn of_terms<S: Simd, const TERMS: usize>(self, simd: S) -> [Eight; 4] {
        match (self.flat && self.channels.len() == 1, self.bare) {
            (true, true) => self.all_steps::<S, TERMS, true, true>(simd),
            (true, false) => self.all_steps::<S, TERMS, false, true>(simd),
            (false, true) => self.all_steps::<S, TERMS, true, false>(simd),
            (false, false) => self.all_steps::<S, TERMS, false, false>(simd),
        }
    }

    /// `FLAT`: there is one channel, and no vector has a y.
    #[inline(always)]
    fn all_steps<S: Simd, const TERMS: usize, const BARE: bool, const FLAT: bool>(self, simd: S) -> [Eight; 4] {
        let zero = simd.splat(0.0);
        let statics = vector(simd, self.statics);
        let first = if FLAT { vector(simd, &self.channels[0]) } else { [zero; 3] };
        let (mut xr, mut xi) = (simd.load(&self.start[0]), simd.load(&self.start[1]));
        let (mut yr, mut yi) = (simd.load(&self.start[2]), simd.load(&self.start[3]));
        let channels = if FLAT { 1 } else { self.channels.len() };
        for step in 0..self.steps.count() {
            let h = self.steps.length(simd, step);
            let mut a = [[h * statics[0], h * statics[1], h * statics[2]], [zero; 3], [zero; 3]];
            for channel in 0..channels {
                let c = if FLAT { first } else { vector(simd, &self.channels[channel]) };
                for order in 0..if BARE { 1 } else { 3 } {
                    let weight = self.steps.weight(simd, step, channel, order);
                    for i in 0..3 {
                        if !(FLAT && i == 1) {
                            a[order][i] = a[order][i].plus(weight, c[i]);
                        }
                    }
                }
            }
            let w = if BARE { a[0] } else { magnus::<S, FLAT>(simd, &a) };
            let half = simd.splat(0.5);
            let v = [w[0] * half, w[1] * half, w[2] * half];
            let z = if FLAT && BARE { (v[0] * v[0]).plus(v[2], v[2]) } else { (v[0] * v[0]).plus(v[1], v[1]).plus(v[2], v[2]) };
            let (c, f) = cos_sinc::<S, TERMS>(simd, z);
            let u = [v[0] * f, v[1] * f, v[2] * f];
            let (r, i, s, j) = (xr, xi, yr, yi);
            xr = (c * r).plus(u[2], i).plus(u[0], j);
            xi = (c * i).minus(u[2], r).minus(u[0], s);
            yr = (c * s).plus(u[0], i).minus(u[2], j);
            yi = (c * j).minus(u[0], r).plus(u[2], s);
            // with the second half of the y component, which a flat bare step has not
            if !(FLAT && BARE) {
                xr = xr.minus(u[1], s);
                xi = xi.minus(u[1], j);
                yr = yr.plus(u[1], r);
                yi = yi.plus(u[1], i);
            }
        }
        let mut end = *self.start;
        xr.store(&mut end[0]);
        xi.store(&mut end[1]);
        yr.store(&mut end[2]);
        yi.store(&mut end[3]);
        end
    }
}

#[inline(always)]
fn vector<S: Simd>(simd: S, from: &[Eight; 3]) -> [S::V; 3] {
    [simd.load(&from[0]), simd.load(&from[1]), simd.load(&from[2])]
}

/// W of a step.
#[inline(always)]
fn magnus<S: Simd, const FLAT: bool>(simd: S, a: &[[S::V; 3]; 3]) -> [S::V; 3] {
    if FLAT {
        return flat_magnus(simd, a);
    }
    let c1 = cross(&a[0], &a[1]);
    let c2 = cross(&a[0], &[c1[0] + a[2][0] + a[2][0], c1[1] + a[2][1] + a[2][1], c1[2] + a[2][2] + a[2][2]]);
    let (mut p, mut q) = (c1, a[1]);
    for i in 0..3 {
        p[i] = (p[i] - a[2][i]).minus(simd.splat(20.0), a[0][i]);
        q[i] = q[i].minus(simd.splat(1.0 / 60.0), c2[i]);
    }
    let last = cross(&p, &q);
    let mut w = a[0];
    for i in 0..3 {
        w[i] = w[i].plus(simd.splat(1.0 / 12.0), a[2][i]).plus(simd.splat(1.0 / 240.0), last[i]);
    }
    w
}

/// The same where a1, a2 and a3 have no y: c2 has none either, and c1 nothing else.
#[inline(always)]
fn flat_magnus<S: Simd>(simd: S, a: &[[S::V; 3]; 3]) -> [S::V; 3] {
    let [[x1, _, z1], [x2, _, z2], [x3, _, z3]] = *a;
    let c1 = (z1 * x2).minus(x1, z2);
    let (part, twenty) = (simd.splat(1.0 / 60.0), simd.splat(20.0));
    let qx = x2.plus(z1 * c1, part);
    let qy = (x1 * z3).minus(z1, x3) * simd.splat(2.0 / 60.0);
    let qz = z2.minus(x1 * c1, part);
    // p = -20 a1 - a3 + c1, with its signs taken into the sums
    let (px, pz) = (x3.plus(twenty, x1), z3.plus(twenty, z1));
    let (twelfth, share) = (simd.splat(1.0 / 12.0), simd.splat(1.0 / 240.0));
    let lx = (c1 * qz).plus(pz, qy);
    let ly = (px * qz).minus(pz, qx);
    let lz = (px * qy).plus(c1, qx);
    [x1.plus(twelfth, x3).plus(share, lx), share * ly, z1.plus(twelfth, z3).minus(share, lz)]
}

#[inline(always)]
fn cross<V: Lane>(a: &[V; 3], b: &[V; 3]) -> [V; 3] {
    [(a[1] * b[2]).minus(a[2], b[1]), (a[2] * b[0]).minus(a[0], b[2]), (a[0] * b[1]).minus(a[1], b[0])]
}

/// cos(sqrt z) and sin(sqrt z)/sqrt z.
#[inline(always)]
fn cos_sinc<S: Simd, const TERMS: usize>(simd: S, z: S::V) -> (S::V, S::V) {
    if TERMS > 0 {
        let cosine: [f64; TERMS] = std::array::from_fn(|k| COSINE[k]);
        let sinc: [f64; TERMS] = std::array::from_fn(|k| SINC[k]);
        let one = simd.splat(1.0);
        return (one.plus(z, series(simd, z, &cosine)), one.plus(z, series(simd, z, &sinc)));
    }
    let angle = z.sqrt();
    let (sine, cosine) = sin_cos(simd, angle);
    // below 1e-8 rad the quotient is 1 to rounding, and 0/0 must not come in
    let tiny = simd.splat(1e-8);
    let safe = S::V::where_less(angle, tiny, tiny, angle);
    (cosine, S::V::where_less(angle, tiny, simd.splat(1.0), sine.over(safe)))
}

/// Coefficients of z, z^2 .. in cos(sqrt z).
const COSINE: [f64; 6] = [-1.0 / 2.0, 1.0 / 24.0, -1.0 / 720.0, 1.0 / 40_320.0, -1.0 / 3_628_800.0, 1.0 / 479_001_600.0];

/// Coefficients of z, z^2 .. in sin(sqrt z)/sqrt z.
const SINC: [f64; 6] = [-1.0 / 6.0, 1.0 / 120.0, -1.0 / 5_040.0, 1.0 / 362_880.0, -1.0 / 39_916_800.0, 1.0 / 6_227_020_800.0];

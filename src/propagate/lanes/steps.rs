//! The steps of a block of points: lengths, and how much of each channel each step has.
//!
//! H(t) = A + sum_k u_k(t) C_k with A and C_k of each point and real u_k. In a step of length h around its middle, with
//! x = (t - middle)/h and g0 + g1 x + g2 x^2 the parabola that has the same integrals of u x^j for j = 0, 1, 2, the weights of a channel are
//! h (g0, g1, g2): a1 = h A + sum of the first times C, a2 and a3 the sums of the second and third (S. Blanes, F. Casas,
//! J. A. Oteo, J. Ros, Physics Reports 470, 151 (2009), section 5.4). Times in s, A and C in rad/s.

use super::lane::{Eight, Simd};

/// Where a kernel finds lengths and weights of step after step for one group of eight points.
pub(crate) trait Weights: Copy {
    /// Number of steps.
    fn count(&self) -> usize;
    /// Length of a step, s.
    fn length<S: Simd>(&self, simd: S, step: usize) -> S::V;
    /// Weight `order` (0, 1, 2) of a channel in a step, s.
    fn weight<S: Simd>(&self, simd: S, step: usize, channel: usize, order: usize) -> S::V;
}

/// Steps that all points share.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Shared<'a> {
    /// Lengths, s.
    pub lengths_s: &'a [f64],
    /// Weights, s: those of one step together, channel after channel.
    pub weights_s: &'a [[f64; 3]],
    /// Number of channels.
    pub channels: usize,
}

impl Weights for Shared<'_> {
    #[inline(always)]
    fn count(&self) -> usize {
        self.lengths_s.len()
    }

    #[inline(always)]
    fn length<S: Simd>(&self, simd: S, step: usize) -> S::V {
        simd.splat(self.lengths_s[step])
    }

    #[inline(always)]
    fn weight<S: Simd>(&self, simd: S, step: usize, channel: usize, order: usize) -> S::V {
        simd.splat(self.weights_s[step * self.channels + channel][order])
    }
}

/// Steps of which every point has its own.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Apart<'a> {
    /// Lengths, s.
    pub lengths_s: &'a [Eight],
    /// Weights, s: those of one step together, channel after channel.
    pub weights_s: &'a [[Eight; 3]],
    /// Number of channels.
    pub channels: usize,
}

impl Weights for Apart<'_> {
    #[inline(always)]
    fn count(&self) -> usize {
        self.lengths_s.len()
    }

    #[inline(always)]
    fn length<S: Simd>(&self, simd: S, step: usize) -> S::V {
        simd.load(&self.lengths_s[step])
    }

    #[inline(always)]
    fn weight<S: Simd>(&self, simd: S, step: usize, channel: usize, order: usize) -> S::V {
        simd.load(&self.weights_s[step * self.channels + channel][order])
    }
}

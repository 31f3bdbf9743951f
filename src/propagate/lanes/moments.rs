//! From the profiles of the channels of a stretch to the lengths and weights of its steps, at any fineness.
//!
//! A profile is u_k(t), real, shared by all points (no dimension): held in slices, or smooth. Of a step of length h around its middle, with
//! x = (t - middle)/h and m_j the integral of u x^j over x from -1/2 to 1/2, the parabola g0 + g1 x + g2 x^2 with the same m_0, m_1, m_2 has
//! g0 = 9/4 m_0 - 15 m_2, g1 = 12 m_1, g2 = 180 m_2 - 15 m_0; the weights are h (g0, g1, g2) (S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics
//! Reports 470, 151 (2009), section 5.4). Integrals of slices are exact however many lie in a step; smooth ones are taken with four
//! Gauss nodes. A step that holds one slice is bare: H is constant in it.

use std::fmt;
use std::sync::Arc;

/// All channels at a moment, s from the start of the stretch, into a slice as long.
pub type Channels = Arc<dyn Fn(f64, &mut [f64]) + Send + Sync>;

/// u_k(t) of all channels of a stretch.
#[derive(Clone)]
pub enum Profile {
    /// Held in slices.
    Held {
        /// Starts of the slices and the end, s, from 0.
        bounds_s: Vec<f64>,
        /// Values, slice after slice, those of one slice together.
        values: Vec<f64>,
    },
    /// Smooth.
    Smooth {
        /// Length, s.
        length_s: f64,
        /// All channels at a moment, s from the start of the stretch, into a slice as long.
        at: Channels,
    },
}

impl fmt::Debug for Profile {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Profile::Held { bounds_s, .. } => write!(f, "Held({} slices)", bounds_s.len().saturating_sub(1)),
            Profile::Smooth { length_s, .. } => write!(f, "Smooth({length_s} s)"),
        }
    }
}

/// The steps of a stretch.
#[derive(Debug, Clone, Default)]
pub struct Steps {
    /// Length of each, s.
    pub lengths_s: Vec<f64>,
    /// Weights, s: those of one step together, channel after channel.
    pub weights_s: Vec<[f64; 3]>,
    /// Whether H is constant in every step.
    pub bare: bool,
    /// Largest modulus of the first weight of each channel, s.
    pub largest_s: Vec<f64>,
    /// Integral of each channel, s.
    pub areas_s: Vec<f64>,
    /// Longest step, s.
    pub longest_s: f64,
    /// All steps together, s.
    pub length_s: f64,
}

/// Nodes and weights of Gauss's rule with four points on (-1/2, 1/2): 1/2 sqrt(3/7 -+ 2/7 sqrt(6/5)) and (18 +- sqrt 30)/72
/// (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964), 25.4.29).
pub const GAUSS: [(f64, f64); 4] = [
    (-0.430_568_155_797_026_3, 0.173_927_422_568_726_92),
    (-0.169_990_521_792_428_13, 0.326_072_577_431_273_05),
    (0.169_990_521_792_428_13, 0.326_072_577_431_273_05),
    (0.430_568_155_797_026_3, 0.173_927_422_568_726_92),
];

impl Profile {
    /// Length, s.
    pub fn length_s(&self) -> f64 {
        match self {
            Profile::Held { bounds_s, .. } => bounds_s.last().copied().unwrap_or(0.0),
            Profile::Smooth { length_s, .. } => *length_s,
        }
    }

    /// Most steps that make a difference: the slices, where it is held.
    pub fn most_steps(&self) -> Option<usize> {
        match self {
            Profile::Held { bounds_s, .. } => Some(bounds_s.len().saturating_sub(1)),
            Profile::Smooth { .. } => None,
        }
    }

    /// About `count` steps of `channels` channels. A held profile has whole slices in each step, or as many equal steps in each slice.
    pub fn steps(&self, channels: usize, count: f64) -> Steps {
        let mut steps = Steps { bare: true, largest_s: vec![0.0; channels], areas_s: vec![0.0; channels], ..Steps::default() };
        match self {
            Profile::Held { bounds_s, values } => {
                let slices = bounds_s.len().saturating_sub(1);
                let together = (slices as f64 / count.max(1.0)).floor();
                if together >= 2.0 {
                    steps.bare = false;
                    held_together(bounds_s, values, channels, together as usize, &mut steps);
                } else {
                    let pieces = (count / slices.max(1) as f64).round().clamp(1.0, 64.0);
                    for (k, pair) in bounds_s.windows(2).enumerate() {
                        let h = (pair[1] - pair[0]) / pieces;
                        for _ in 0..pieces as usize {
                            let of_slice = &values[k * channels..(k + 1) * channels];
                            steps.push(h, of_slice.iter().map(|u| [u * h, 0.0, 0.0]));
                        }
                    }
                }
            }
            Profile::Smooth { length_s, at } => {
                steps.bare = false;
                let count = count.ceil().max(1.0);
                let h = length_s / count;
                let mut values = vec![0.0; channels];
                let mut moments = vec![[0.0; 3]; channels];
                for step in 0..count as usize {
                    let middle = length_s * ((step as f64 + 0.5) / count);
                    moments.fill([0.0; 3]);
                    for (x, weight) in GAUSS {
                        at(middle + x * h, &mut values);
                        for (m, u) in moments.iter_mut().zip(&values) {
                            let w = weight * u;
                            *m = [m[0] + w, m[1] + w * x, m[2] + w * x * x];
                        }
                    }
                    steps.push(h, moments.iter().map(|m| parabola(*m, h)));
                }
            }
        }
        steps
    }
}

impl Steps {
    fn push(&mut self, h: f64, weights: impl Iterator<Item = [f64; 3]>) {
        self.lengths_s.push(h);
        self.longest_s = self.longest_s.max(h);
        self.length_s += h;
        for (k, weight) in weights.enumerate() {
            self.largest_s[k] = self.largest_s[k].max(weight[0].abs());
            self.areas_s[k] += weight[0] + weight[2] / 12.0;
            self.weights_s.push(weight);
        }
    }
}

/// Steps of `together` slices each; the last one may have fewer.
fn held_together(bounds_s: &[f64], values: &[f64], channels: usize, together: usize, steps: &mut Steps) {
    let slices = bounds_s.len() - 1;
    let mut moments = vec![[0.0; 3]; channels];
    for first in (0..slices).step_by(together) {
        let last = (first + together).min(slices);
        let (from, to) = (bounds_s[first], bounds_s[last]);
        let (h, middle) = (to - from, 0.5 * (from + to));
        moments.fill([0.0; 3]);
        for slice in first..last {
            let (a, b) = ((bounds_s[slice] - middle) / h, (bounds_s[slice + 1] - middle) / h);
            // integrals of 1, x, x^2, as differences without cancellation
            let d = b - a;
            let parts = [d, 0.5 * d * (a + b), d * (a * a + a * b + b * b) / 3.0];
            for (m, u) in moments.iter_mut().zip(&values[slice * channels..]) {
                *m = [m[0] + u * parts[0], m[1] + u * parts[1], m[2] + u * parts[2]];
            }
        }
        steps.push(h, moments.iter().map(|m| parabola(*m, h)));
    }
}

/// The weights of a step of length `h` with the moments `m` of its channel.
pub fn parabola(m: [f64; 3], h: f64) -> [f64; 3] {
    [h * (2.25 * m[0] - 15.0 * m[2]), h * 12.0 * m[1], h * (180.0 * m[2] - 15.0 * m[0])]
}

//! Stretches of the timeline: which channels act, and their steps, which eight points share or have each for itself.

use super::carry::Group;
use super::lane::Eight;
use super::moments::Steps;
use super::steps::{Apart, Shared, Weights};

/// A stretch whose steps all points share.
#[derive(Debug, Clone)]
pub struct Stretch {
    /// Which of the C_k, in the order of the weights.
    pub channels: Vec<usize>,
    /// Steps.
    pub steps: Steps,
}

/// A stretch of which every point has its own length and weights; the number of steps is one.
#[derive(Debug, Clone, Default)]
pub struct OwnStretch {
    /// Which of the C_k, in the order of the weights.
    pub channels: Vec<usize>,
    /// Length of each step, s.
    pub lengths_s: Vec<Eight>,
    /// Weights, s: those of one step together, channel after channel.
    pub weights_s: Vec<[Eight; 3]>,
    /// Whether H is constant in every step.
    pub bare: bool,
}

impl OwnStretch {
    /// With its sums, ready to be carried.
    pub fn summed(self) -> Summed {
        let channels = self.channels.len();
        let (mut largest_s, mut areas_s) = (vec![0.0f64; channels], vec![Eight::all(0.0); channels]);
        for weights in self.weights_s.chunks_exact(channels.max(1)) {
            for (k, [first, _, third]) in weights.iter().enumerate() {
                for lane in 0..8 {
                    largest_s[k] = largest_s[k].max(first.0[lane].abs());
                    areas_s[k].0[lane] += first.0[lane] + third.0[lane] / 12.0;
                }
            }
        }
        let mut length_s = Eight::all(0.0);
        let mut longest_s = 0.0f64;
        for length in &self.lengths_s {
            for lane in 0..8 {
                length_s.0[lane] += length.0[lane];
                longest_s = longest_s.max(length.0[lane]);
            }
        }
        Summed { own: self, largest_s, areas_s, length_s, longest_s }
    }
}

/// An [`OwnStretch`] with its sums.
#[derive(Debug, Clone)]
pub struct Summed {
    own: OwnStretch,
    largest_s: Vec<f64>,
    areas_s: Vec<Eight>,
    length_s: Eight,
    longest_s: f64,
}

/// What the kernels ask of a stretch.
pub(crate) trait Timed {
    /// Which of the C_k act.
    fn channels(&self) -> &[usize];
    /// The steps.
    fn weights(&self) -> impl Weights;
    /// Whether H is constant in every step.
    fn is_bare(&self) -> bool;
    /// Largest modulus of the first weight of each channel, s.
    fn largest_s(&self) -> &[f64];
    /// Longest step of any point, s.
    fn longest_s(&self) -> f64;
    /// All steps of a point together, s.
    fn length_s(&self, lane: usize) -> f64;
    /// Integral of a channel of a point, s.
    fn area_s(&self, channel: usize, lane: usize) -> f64;
}

impl Timed for Stretch {
    fn channels(&self) -> &[usize] {
        &self.channels
    }

    fn weights(&self) -> impl Weights {
        Shared { lengths_s: &self.steps.lengths_s, weights_s: &self.steps.weights_s, channels: self.channels.len() }
    }

    fn is_bare(&self) -> bool {
        self.steps.bare
    }

    fn largest_s(&self) -> &[f64] {
        &self.steps.largest_s
    }

    fn longest_s(&self) -> f64 {
        self.steps.longest_s
    }

    fn length_s(&self, _: usize) -> f64 {
        self.steps.length_s
    }

    fn area_s(&self, channel: usize, _: usize) -> f64 {
        self.steps.areas_s[channel]
    }
}

impl Timed for Summed {
    fn channels(&self) -> &[usize] {
        &self.own.channels
    }

    fn weights(&self) -> impl Weights {
        Apart { lengths_s: &self.own.lengths_s, weights_s: &self.own.weights_s, channels: self.own.channels.len() }
    }

    fn is_bare(&self) -> bool {
        self.own.bare
    }

    fn largest_s(&self) -> &[f64] {
        &self.largest_s
    }

    fn longest_s(&self) -> f64 {
        self.longest_s
    }

    fn length_s(&self, lane: usize) -> f64 {
        self.length_s.0[lane]
    }

    fn area_s(&self, channel: usize, lane: usize) -> f64 {
        self.areas_s[channel].0[lane]
    }
}

impl Group {
    /// Largest size of H among the eight points times the length of a stretch, rad: sums of the sizes of A and of the C_k.
    pub fn angle(&self, stretch: &Stretch) -> f64 {
        let sizes: Vec<f64> = self.channels.iter().map(|p| self.size(p)).collect();
        let weights = stretch.steps.weights_s.chunks_exact(stretch.channels.len().max(1));
        let driven: f64 = weights.flat_map(|of| of.iter().zip(&stretch.channels)).map(|(w, k)| w[0].abs() * sizes[*k]).sum();
        self.size(&self.statics) * stretch.steps.length_s + driven
    }
}

//! Straight lines between samples; a kink at each inner one.

use std::sync::Arc;

use super::{Curve, Pieces};

/// `values[k]` at `times_s[k]`, ascending from 0, at least two; the last one stands at the end.
#[derive(Debug)]
pub(super) struct Linear {
    pub times_s: Arc<[f64]>,
    pub values: Arc<[f64]>,
}

impl Linear {
    /// The sample at which the line at `t_s` begins.
    fn segment(&self, t_s: f64) -> usize {
        self.times_s.partition_point(|time| *time <= t_s).clamp(1, self.times_s.len() - 1) - 1
    }
}

impl Curve for Linear {
    fn at(&self, t_s: f64) -> f64 {
        let k = self.segment(t_s);
        let (from_s, to_s) = (self.times_s[k], self.times_s[k + 1]);
        (self.values[k] * (to_s - t_s) + self.values[k + 1] * (t_s - from_s)) / (to_s - from_s)
    }

    fn slope(&self, t_s: f64) -> f64 {
        let k = self.segment(t_s);
        (self.values[k + 1] - self.values[k]) / (self.times_s[k + 1] - self.times_s[k])
    }

    fn length_s(&self) -> f64 {
        self.times_s[self.times_s.len() - 1]
    }

    fn area_s(&self) -> f64 {
        let lines = self.times_s.windows(2).zip(self.values.windows(2));
        lines.map(|(times, values)| 0.5 * (times[1] - times[0]) * (values[0] + values[1])).sum()
    }

    fn largest(&self) -> f64 {
        self.values.iter().fold(0.0, |largest, value| value.abs().max(largest))
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from(&self.times_s[1..self.times_s.len() - 1]) }
    }
}

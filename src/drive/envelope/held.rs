//! Values held from their start to the next start, the last one to the end.

use std::sync::Arc;

use super::{Curve, Pieces};

/// `values[k]` from `starts_s[k]`, ascending from 0; `length_s` is later than the last start.
#[derive(Debug)]
pub(super) struct Held {
    pub starts_s: Arc<[f64]>,
    pub values: Arc<[f64]>,
    pub length_s: f64,
}

impl Curve for Held {
    fn at(&self, t_s: f64) -> f64 {
        let later = self.starts_s.partition_point(|start| *start <= t_s);
        self.values[later.saturating_sub(1)]
    }

    fn slope(&self, _t_s: f64) -> f64 {
        0.0
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        let ends_s = self.starts_s[1..].iter().chain(std::iter::once(&self.length_s));
        self.starts_s.iter().zip(ends_s).zip(self.values.iter()).map(|((start, end), value)| value * (end - start)).sum()
    }

    fn largest(&self) -> f64 {
        self.values.iter().fold(0.0, |largest, value| value.abs().max(largest))
    }

    fn pieces(&self) -> Pieces {
        Pieces::Held { starts_s: self.starts_s.clone(), values: self.values.clone() }
    }
}

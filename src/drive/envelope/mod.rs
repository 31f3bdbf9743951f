//! Envelopes: real functions of the time since the start of their pulse, whose largest value is 1 where the formula has no
//! size of its own. One file per family; [`build`] is the table.

use std::fmt::Debug;
use std::sync::Arc;

/// How a curve is cut into stretches that a method can take whole.
#[derive(Debug, Clone, PartialEq)]
pub enum Pieces {
    /// One value from start to end.
    Constant(f64),
    /// Held values: `values[k]` from `starts_s[k]` to the next start (the last one to the end); `starts_s[0]` is 0.
    Held {
        /// Start of each value, s.
        starts_s: Arc<[f64]>,
        /// The values.
        values: Arc<[f64]>,
    },
    /// Smooth between the kinks, which are ascending times strictly inside the pulse, s.
    Smooth {
        /// Times at which the curve or one of its derivatives jumps.
        kinks_s: Arc<[f64]>,
    },
}

/// A real envelope; `t_s` runs from 0 to [`Curve::length_s`], outside it is not asked for.
pub trait Curve: Debug + Send + Sync {
    /// Value at `t_s` (no dimension).
    fn at(&self, t_s: f64) -> f64;
    /// d/dt of the value, 1/s; at a kink the one-sided value from the right.
    fn slope(&self, t_s: f64) -> f64;
    /// How long the pulse lasts, s.
    fn length_s(&self) -> f64;
    /// Signed integral of the value from start to end, s.
    fn area_s(&self) -> f64;
    /// Integral of the same curve and peak without the cut, s (the same as the area where nothing is cut).
    fn uncut_area_s(&self) -> f64 {
        self.area_s()
    }
    /// Largest modulus of the value.
    fn largest(&self) -> f64;
    /// Where it is constant, held or smooth.
    fn pieces(&self) -> Pieces;
}

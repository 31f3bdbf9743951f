//! (1 - cos(2 pi t/L))/2 = sin^2(pi t/L), written as the square of a sine of the time from the nearer end: it keeps its
//! digits where it goes to 0.

use std::sync::Arc;

use super::{Curve, Parameters, Pieces, ShapeFault};
use crate::units::{sin_cos_turns, RAD_PER_TURN};

#[derive(Debug)]
struct RaisedCosine {
    length_s: f64,
}

/// Reads `length`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    Ok(Arc::new(RaisedCosine { length_s: parameters.length()? }))
}

/// sin^2(pi t/L) and its slope in 1/s.
pub(super) fn sine_squared(t_s: f64, length_s: f64) -> (f64, f64) {
    let from_end_s = length_s - t_s;
    let (near_s, sign) = if t_s <= from_end_s { (t_s, 1.0) } else { (from_end_s, -1.0) };
    let (sin, cos) = sin_cos_turns(0.5 * near_s / length_s);
    (sin * sin, sign * RAD_PER_TURN / length_s * sin * cos)
}

impl Curve for RaisedCosine {
    fn at(&self, t_s: f64) -> f64 {
        sine_squared(t_s, self.length_s).0
    }

    fn slope(&self, t_s: f64) -> f64 {
        sine_squared(t_s, self.length_s).1
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        0.5 * self.length_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

//! Flat, with edges (1 - cos(pi t/rise))/2 = sin^2(pi t/(2 rise)) inside L. The second derivative jumps where an edge meets
//! the flat; edges that fill the pulse make a raised cosine, without a kink.

use std::sync::Arc;

use super::raised_cosine::sine_squared;
use super::{Curve, Parameters, Pieces, ShapeFault};

#[derive(Debug)]
struct CosineEdges {
    length_s: f64,
    rise_s: f64,
}

/// Reads `length` and `rise`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let (length_s, rise_s) = parameters.length_and_rise()?;
    Ok(Arc::new(CosineEdges { length_s, rise_s }))
}

impl CosineEdges {
    /// Value and slope (1/s).
    fn both(&self, t_s: f64) -> (f64, f64) {
        let from_end_s = self.length_s - t_s;
        let (near_s, sign) = if t_s <= from_end_s { (t_s, 1.0) } else { (from_end_s, -1.0) };
        if near_s >= self.rise_s {
            return (1.0, 0.0);
        }
        let (value, slope) = sine_squared(near_s, 2.0 * self.rise_s);
        (value, sign * slope)
    }
}

impl Curve for CosineEdges {
    fn at(&self, t_s: f64) -> f64 {
        self.both(t_s).0
    }

    fn slope(&self, t_s: f64) -> f64 {
        self.both(t_s).1
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        self.length_s - self.rise_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        let far_s = self.length_s - self.rise_s;
        let kinks_s = if far_s > self.rise_s { Arc::from([self.rise_s, far_s]) } else { Arc::from([]) };
        Pieces::Smooth { kinks_s }
    }
}

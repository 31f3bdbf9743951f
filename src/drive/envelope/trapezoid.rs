//! Flat, with straight edges t/rise inside L; a triangle where they fill it.

use std::sync::Arc;

use super::{Curve, Parameters, Pieces, ShapeFault};

#[derive(Debug)]
struct Trapezoid {
    length_s: f64,
    rise_s: f64,
    /// Start of the falling edge, s.
    fall_s: f64,
}

/// Reads `length` and `rise`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let (length_s, rise_s) = parameters.length_and_rise()?;
    Ok(Arc::new(Trapezoid { length_s, rise_s, fall_s: length_s - rise_s }))
}

impl Curve for Trapezoid {
    fn at(&self, t_s: f64) -> f64 {
        (t_s.min(self.length_s - t_s) / self.rise_s).min(1.0)
    }

    fn slope(&self, t_s: f64) -> f64 {
        if t_s >= self.fall_s {
            -1.0 / self.rise_s
        } else if t_s < self.rise_s {
            1.0 / self.rise_s
        } else {
            0.0
        }
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        self.fall_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        let kinks_s = if self.fall_s > self.rise_s { Arc::from([self.rise_s, self.fall_s]) } else { Arc::from([self.rise_s]) };
        Pieces::Smooth { kinks_s }
    }
}

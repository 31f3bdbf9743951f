//! 0.42 - 0.5 cos(2 pi t/L) + 0.08 cos(4 pi t/L) (R. B. Blackman and J. W. Tukey, The Measurement of Power Spectra (1958)).
//!
//! With s = sin^2(pi t/L) this is 0.36 s + 0.64 s^2: no digits are lost at the ends, where it is 0.

use std::sync::Arc;

use super::raised_cosine::sine_squared;
use super::{Curve, Parameters, Pieces, ShapeFault};

#[derive(Debug)]
struct Blackman {
    length_s: f64,
}

/// Reads `length`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    Ok(Arc::new(Blackman { length_s: parameters.length()? }))
}

impl Curve for Blackman {
    fn at(&self, t_s: f64) -> f64 {
        let (s, _) = sine_squared(t_s, self.length_s);
        s * (0.36 + 0.64 * s)
    }

    fn slope(&self, t_s: f64) -> f64 {
        let (s, slope) = sine_squared(t_s, self.length_s);
        slope * (0.36 + 1.28 * s)
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        0.42 * self.length_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

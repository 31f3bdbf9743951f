//! The slow complex envelope of a pulse with a carrier: in-phase curve and derivative quadrature in one.
//!
//! The lab term X cos(theta) + Y sin(theta), theta = 2 pi f t + phase, is the real part of (X + i Y) exp(-i theta); with
//! Y = -factor dX/dt / (2 pi against) the envelope of [`crate::problem`] is (X + i Y)/2 times 2 pi, here without its size.

use std::sync::Arc;

use num_complex::Complex64;

use super::envelope::Curve;
use crate::problem::Slow;

/// One pulse shape with what rides on it.
#[derive(Debug, Clone)]
pub struct Signal {
    /// The in-phase curve.
    pub curve: Arc<dyn Curve>,
    /// Y = quadrature_s * dX/dt, s; 0 for none.
    pub quadrature_s: f64,
}

impl Slow for Signal {
    fn at(&self, t_s: f64) -> Complex64 {
        // rounding may put the end of the last segment a bit past the end of the pulse
        let t = t_s.clamp(0.0, self.curve.length_s());
        let quadrature = if self.quadrature_s == 0.0 { 0.0 } else { self.quadrature_s * self.curve.slope(t) };
        Complex64::new(self.curve.at(t), quadrature)
    }
}

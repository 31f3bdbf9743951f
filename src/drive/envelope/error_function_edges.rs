//! (erf((u + L/2)/w) - erf((u - L/2)/w))/2 with u = t - c, L between the points of half height, w = rise_10_90/(2 erfinv 0.8);
//! cut at c on both sides, so that the pulse lasts 2 c.
//!
//! Area: with G(x) = exp(-x^2)/sqrt(pi) - x erfc(x), the integral of erf from 0 to x is x + G(x) - 1/sqrt(pi)
//! (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964), 7.2), so the area is
//! min(L, 2 c) + w (G((c + L/2)/w) - G(abs(c - L/2)/w)). A lifted value is a plain difference:
//! it is off by about 1e-16 of peak/(peak - pedestal), also where it is near 0.

use std::sync::Arc;

use super::lift::refuse_flat;
use super::parameters::positive;
use super::{Curve, Edge, Parameters, Pieces, ShapeFault};
use crate::units::RAD_PER_TURN;

/// The inverse error function at 0.8 (mpmath, 40 digits).
const ERFINV_0_8: f64 = 0.906_193_802_436_823_2;

#[derive(Debug)]
struct ErrorFunctionEdges {
    half_s: f64,
    w_s: f64,
    cut_s: f64,
    /// What is taken off: the value at the cut where the edge is lifted, else 0.
    pedestal: f64,
    /// What the rest is divided by: peak - pedestal where the edge is lifted, else 1.
    lifted: f64,
}

/// Reads `length`, `rise_10_90`, `cut_at` and `edge`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let half_s = 0.5 * parameters.length()?;
    let w_s = positive("rise_10_90", parameters.rise_10_90_s)? / (2.0 * ERFINV_0_8);
    let cut_s = parameters.cut_at()?;
    let mut curve = ErrorFunctionEdges { half_s, w_s, cut_s, pedestal: 0.0, lifted: 1.0 };
    if parameters.edge()? == Edge::Lift {
        let (peak, pedestal) = (curve.plain(0.0), curve.plain(cut_s));
        refuse_flat(peak - pedestal, peak)?;
        curve.pedestal = pedestal;
        curve.lifted = peak - pedestal;
    }
    Ok(Arc::new(curve))
}

/// exp(-x^2)/sqrt(pi) - x erfc(x): the integral of erfc from x on.
fn tail(x: f64) -> f64 {
    (-x * x).exp() / (0.5 * RAD_PER_TURN).sqrt() - x * libm::erfc(x)
}

impl ErrorFunctionEdges {
    /// The curve before it is lifted, `u_s` from its centre; far out by erfc, where two erf would cancel.
    fn plain(&self, u_s: f64) -> f64 {
        let inner = (u_s.abs() - self.half_s) / self.w_s;
        let outer = (u_s.abs() + self.half_s) / self.w_s;
        if inner > 0.0 {
            0.5 * (libm::erfc(inner) - libm::erfc(outer))
        } else {
            0.5 * (libm::erf(outer) - libm::erf(inner))
        }
    }
}

impl Curve for ErrorFunctionEdges {
    fn at(&self, t_s: f64) -> f64 {
        (self.plain(t_s - self.cut_s) - self.pedestal) / self.lifted
    }

    fn slope(&self, t_s: f64) -> f64 {
        let u_s = t_s - self.cut_s;
        let (outer, inner) = ((u_s + self.half_s) / self.w_s, (u_s - self.half_s) / self.w_s);
        ((-outer * outer).exp() - (-inner * inner).exp()) / (0.5 * RAD_PER_TURN).sqrt() / self.w_s / self.lifted
    }

    fn length_s(&self) -> f64 {
        2.0 * self.cut_s
    }

    fn area_s(&self) -> f64 {
        let corner = tail((self.cut_s + self.half_s) / self.w_s) - tail((self.cut_s - self.half_s).abs() / self.w_s);
        let plain = 2.0 * self.half_s.min(self.cut_s) + self.w_s * corner;
        (plain - self.length_s() * self.pedestal) / self.lifted
    }

    /// L; for a lifted curve, whose peak is 1, L over the peak that the curve had before.
    fn uncut_area_s(&self) -> f64 {
        2.0 * self.half_s / (self.plain(0.0) / self.largest())
    }

    fn largest(&self) -> f64 {
        (self.plain(0.0) - self.pedestal) / self.lifted
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

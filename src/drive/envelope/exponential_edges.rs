//! A source that is on for L behind a filter of first order: 1 - exp(-t/tau), then (1 - exp(-L/tau)) exp(-(t - L)/tau), with
//! tau = rise_10_90/ln 9. It ends at L/2 + c, the cut being counted from the middle of L.
//!
//! `edge` may be left out or be `step`: what is left of the tail at the end stays. There is nothing to lift at the start, and
//! lifting the end alone would put a step there.

use std::sync::Arc;

use super::parameters::positive;
use super::{Curve, Edge, Parameters, Pieces, ShapeFault};

#[derive(Debug)]
struct ExponentialEdges {
    tau_s: f64,
    on_s: f64,
    end_s: f64,
}

/// Reads `length`, `rise_10_90`, `cut_at` and, where it stands, `edge`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let on_s = parameters.length()?;
    let tau_s = positive("rise_10_90", parameters.rise_10_90_s)? / 9f64.ln();
    let end_s = 0.5 * on_s + parameters.cut_at()?;
    if parameters.edge == Some(Edge::Lift) {
        return Err(ShapeFault::NothingToLift);
    }
    // A cut at the end of the source but for rounding is one there, and leaves no sliver of a tail.
    let end_s = if (end_s - on_s).abs() < 1e-12 * on_s { on_s } else { end_s };
    Ok(Arc::new(ExponentialEdges { tau_s, on_s, end_s }))
}

/// x - (1 - exp(-x)), the integral of 1 - exp(-x) from 0; by its series where the two terms would cancel.
fn rising_area(x: f64) -> f64 {
    if x > 0.5 {
        return x + (-x).exp_m1();
    }
    let mut term = 0.5 * x * x;
    let mut sum = term;
    for n in 3..16 {
        term *= -x / n as f64;
        sum += term;
    }
    sum
}

impl Curve for ExponentialEdges {
    fn at(&self, t_s: f64) -> f64 {
        if t_s < self.on_s {
            -(-t_s / self.tau_s).exp_m1()
        } else {
            -(-self.on_s / self.tau_s).exp_m1() * ((self.on_s - t_s) / self.tau_s).exp()
        }
    }

    fn slope(&self, t_s: f64) -> f64 {
        // Without a tail the end has no right side.
        if t_s < self.on_s || self.end_s == self.on_s {
            (-t_s / self.tau_s).exp() / self.tau_s
        } else {
            -self.at(t_s) / self.tau_s
        }
    }

    fn length_s(&self) -> f64 {
        self.end_s
    }

    fn area_s(&self) -> f64 {
        let rising = self.tau_s * rising_area(self.on_s.min(self.end_s) / self.tau_s);
        let tail = self.tau_s * self.largest() * -((self.on_s - self.end_s).min(0.0) / self.tau_s).exp_m1();
        rising + tail
    }

    /// L, whatever tau.
    fn uncut_area_s(&self) -> f64 {
        self.on_s
    }

    fn largest(&self) -> f64 {
        -(-self.on_s.min(self.end_s) / self.tau_s).exp_m1()
    }

    fn pieces(&self) -> Pieces {
        let kinks_s = if self.end_s > self.on_s { Arc::from([self.on_s]) } else { Arc::from([]) };
        Pieces::Smooth { kinks_s }
    }
}

//! 1/cosh(u/T) with u = t - c, cut at c on both sides.
//!
//! Lifted, (g(t) - g(0))/(1 - g(0)): the two differences are products of sines hyperbolic, whose large factors cancel, and
//! what is left is (1 - exp(-t/T)) (1 - exp(-(L - t)/T)) / ((1 - exp(-c/T))^2 cosh(u/T)), all by expm1.
//! Area 4 T atan(tanh(c/(2 T))), the Gudermannian (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964),
//! 4.3.117).

use std::sync::Arc;

use super::lift::refuse_flat;
use super::parameters::positive;
use super::{Curve, Edge, Parameters, Pieces, ShapeFault};
use crate::quadrature::integral;
use crate::units::RAD_PER_TURN;

#[derive(Debug)]
struct Sech {
    time_s: f64,
    cut_s: f64,
    /// 1 - g(0) where the edge is lifted.
    lifted: Option<f64>,
}

/// Reads `sech_time`, `cut_at` and `edge`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let time_s = positive("sech_time", parameters.sech_time_s)?;
    let cut_s = parameters.cut_at()?;
    let lifted = match parameters.edge()? {
        Edge::Step => None,
        Edge::Lift => Some(lifted(cut_s / time_s)),
    };
    if let Some(lifted) = lifted {
        refuse_flat(lifted, 1.0)?;
    }
    Ok(Arc::new(Sech { time_s, cut_s, lifted }))
}

/// 1 - 1/cosh(b) = (1 - exp(-b))^2/(1 + exp(-2 b)).
fn lifted(b: f64) -> f64 {
    (-b).exp_m1().powi(2) / (1.0 + (-2.0 * b).exp())
}

impl Curve for Sech {
    fn at(&self, t_s: f64) -> f64 {
        let value = 1.0 / ((t_s - self.cut_s) / self.time_s).cosh();
        if self.lifted.is_none() {
            return value;
        }
        let start = (-t_s / self.time_s).exp_m1();
        let end = ((t_s - self.length_s()) / self.time_s).exp_m1();
        let whole = (-self.cut_s / self.time_s).exp_m1();
        value * (start / whole) * (end / whole)
    }

    fn slope(&self, t_s: f64) -> f64 {
        let share = (t_s - self.cut_s) / self.time_s;
        -share.tanh() / share.cosh() / self.time_s / self.lifted.unwrap_or(1.0)
    }

    fn length_s(&self) -> f64 {
        2.0 * self.cut_s
    }

    fn area_s(&self) -> f64 {
        let share = self.cut_s / self.time_s;
        let step = 4.0 * self.time_s * (0.5 * share).tanh().atan();
        match self.lifted {
            None => step,
            // The closed form takes a pedestal off that is most of the area; the curve is one smooth arch there.
            Some(lifted) if lifted < 0.5 => integral(0.0, self.length_s(), |t| self.at(t)),
            Some(lifted) => (step - self.length_s() / share.cosh()) / lifted,
        }
    }

    /// pi T; the lifted curve has the same peak.
    fn uncut_area_s(&self) -> f64 {
        0.5 * RAD_PER_TURN * self.time_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

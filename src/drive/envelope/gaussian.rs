//! exp(-u^2/(2 sigma^2)) with u = t - c, cut at c on both sides.
//!
//! Lifted, (g(t) - g(0))/(1 - g(0)), with c^2 - u^2 = t (L - t): g(t) (1 - exp(-t (L - t)/(2 sigma^2))) over
//! 1 - exp(-c^2/(2 sigma^2)), each difference from 1 by expm1, so that it goes to 0 at the ends with all its digits.
//! Area sigma sqrt(2 pi) erf(c/(sigma sqrt 2)) (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964), 7.1).

use std::sync::Arc;

use super::lift::refuse_flat;
use super::parameters::positive;
use super::{Curve, Edge, Parameters, Pieces, ShapeFault};
use crate::quadrature::integral;
use crate::units::RAD_PER_TURN;

#[derive(Debug)]
struct Gaussian {
    sigma_s: f64,
    cut_s: f64,
    /// 1 - g(0) where the edge is lifted.
    lifted: Option<f64>,
}

/// Reads one width, `cut_at` and `edge`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let sigma_s = sigma_s(parameters)?;
    let cut_s = parameters.cut_at()?;
    let share = cut_s / sigma_s;
    let lifted = match parameters.edge()? {
        Edge::Step => None,
        Edge::Lift => Some(-(-0.5 * share * share).exp_m1()),
    };
    if let Some(lifted) = lifted {
        refuse_flat(lifted, 1.0)?;
    }
    Ok(Arc::new(Gaussian { sigma_s, cut_s, lifted }))
}

/// The standard deviation of the field, s: `field_fwhm` = 2 sqrt(2 ln 2) sigma; the squared curve has sigma/sqrt 2, so
/// `intensity_fwhm` = 2 sqrt(ln 2) sigma.
fn sigma_s(parameters: &Parameters) -> Result<f64, ShapeFault> {
    const KEYS: &[&str] = &["field_sigma", "field_fwhm", "intensity_fwhm"];
    let ln_2 = std::f64::consts::LN_2;
    let widths = [
        (KEYS[0], parameters.field_sigma_s, 1.0),
        (KEYS[1], parameters.field_fwhm_s, 2.0 * (2.0 * ln_2).sqrt()),
        (KEYS[2], parameters.intensity_fwhm_s, 2.0 * ln_2.sqrt()),
    ];
    let mut given = widths.iter().filter(|(_, width, _)| width.is_some());
    match (given.next(), given.next()) {
        (Some((key, width, in_sigmas)), None) => Ok(positive(key, *width)? / in_sigmas),
        _ => {
            let given = widths.iter().filter(|(_, width, _)| width.is_some()).map(|(key, ..)| *key).collect();
            Err(ShapeFault::NotOneOf { keys: KEYS, given })
        }
    }
}

impl Gaussian {
    fn uncut(&self, t_s: f64) -> f64 {
        let share = (t_s - self.cut_s) / self.sigma_s;
        (-0.5 * share * share).exp()
    }
}

impl Curve for Gaussian {
    fn at(&self, t_s: f64) -> f64 {
        let value = self.uncut(t_s);
        match self.lifted {
            None => value,
            Some(lifted) => {
                let from_cut = (t_s / self.sigma_s) * ((self.length_s() - t_s) / self.sigma_s);
                value * -(-0.5 * from_cut).exp_m1() / lifted
            }
        }
    }

    fn slope(&self, t_s: f64) -> f64 {
        let slope = -(t_s - self.cut_s) / self.sigma_s * self.uncut(t_s) / self.sigma_s;
        slope / self.lifted.unwrap_or(1.0)
    }

    fn length_s(&self) -> f64 {
        2.0 * self.cut_s
    }

    fn area_s(&self) -> f64 {
        let step = self.uncut_area_s() * libm::erf(self.cut_s / (self.sigma_s * std::f64::consts::SQRT_2));
        match self.lifted {
            None => step,
            // The closed form takes a pedestal off that is most of the area; the curve is one smooth arch there.
            Some(lifted) if lifted < 0.5 => integral(0.0, self.length_s(), |t| self.at(t)),
            Some(lifted) => (step - self.length_s() * self.uncut(0.0)) / lifted,
        }
    }

    /// sigma sqrt(2 pi); the lifted curve has the same peak.
    fn uncut_area_s(&self) -> f64 {
        self.sigma_s * RAD_PER_TURN.sqrt()
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

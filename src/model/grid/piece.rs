//! A stretch of the axis in which potential and mass are smooth.

use super::profile::Profile;
use crate::config::taylor::Taylor;

/// A stretch of the axis.
#[derive(Debug, Clone)]
pub struct Piece {
    /// Left end, m.
    pub from_m: f64,
    /// Right end, m.
    pub to_m: f64,
    /// Potential energy over h, Hz.
    pub potential_hz: Profile,
    /// What a field adds to it at each x, Hz/m.
    pub tilt_hz_per_m: f64,
    /// Mass, kg.
    pub mass_kg: Profile,
}

impl Piece {
    /// Potential energy at `x`, the field included, Hz.
    pub fn energy_hz(&self, x: f64) -> f64 {
        self.potential_hz.value(x) + self.tilt_hz_per_m * x
    }

    /// Its Taylor coefficients.
    pub fn energy_jet<const N: usize>(&self, x: f64) -> Taylor<N> {
        let mut jet = self.potential_hz.jet::<N>(x);
        jet.0[0] += self.tilt_hz_per_m * x;
        jet.0[1] += self.tilt_hz_per_m;
        jet
    }
}

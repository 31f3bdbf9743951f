//! The lines of a system: every pair of levels with its gap, in the energy units of the trades.

use crate::units::{HZ_PER_CM, HZ_PER_EV, HZ_PER_KELVIN, WAVELENGTH_M_HZ};

/// The gap between two levels.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gap {
    /// Index of the lower level; of equal energies the one written first.
    pub lower: usize,
    /// Index of the upper level.
    pub upper: usize,
    /// Energy of the upper minus that of the lower level over h, Hz, never negative.
    pub hz: f64,
}

impl Gap {
    /// The gap between levels `a` and `b`; `energies_hz` is the diagonal of the static Hamiltonian.
    pub fn between(energies_hz: &[f64], a: usize, b: usize) -> Gap {
        let (first, second) = (a.min(b), a.max(b));
        let (lower, upper) = if energies_hz[second] < energies_hz[first] { (second, first) } else { (first, second) };
        Gap { lower, upper, hz: energies_hz[upper] - energies_hz[lower] }
    }

    /// In eV.
    pub fn ev(self) -> f64 {
        self.hz / HZ_PER_EV
    }

    /// As a temperature, K.
    pub fn kelvin(self) -> f64 {
        self.hz / HZ_PER_KELVIN
    }

    /// As a wavenumber, 1/cm.
    pub fn per_cm(self) -> f64 {
        self.hz / HZ_PER_CM
    }

    /// As a wavelength in vacuum, m; none where both levels have the same energy.
    pub fn wavelength_m(self) -> Option<f64> {
        (self.hz > 0.0).then(|| WAVELENGTH_M_HZ / self.hz)
    }
}

/// Every pair of levels, in basis order; `energies_hz` is the diagonal of the static Hamiltonian.
pub fn gaps(energies_hz: &[f64]) -> Vec<Gap> {
    let size = energies_hz.len();
    (0..size).flat_map(|a| (a + 1..size).map(move |b| (a, b))).map(|(a, b)| Gap::between(energies_hz, a, b)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 1 eV is 2.417989242e14 Hz, 11604.51812 K, 8065.543937 /cm and 1.239841984 um (CODATA 2022, exact by h, e, k and c).
    #[test]
    fn exact_one_electronvolt() {
        let gap = gaps(&[HZ_PER_EV, 0.0])[0];
        assert_eq!((gap.lower, gap.upper, gap.ev()), (1, 0, 1.0));
        assert!((gap.kelvin() / 11_604.518_12 - 1.0).abs() < 1e-9, "{}", gap.kelvin());
        assert!((gap.per_cm() / 8_065.543_937 - 1.0).abs() < 1e-9, "{}", gap.per_cm());
        let wavelength = gap.wavelength_m().unwrap_or(0.0);
        assert!((wavelength / 1.239_841_984e-6 - 1.0).abs() < 1e-9, "{wavelength}");
    }

    #[test]
    fn exact_equal_energies_stand_as_written() {
        let gap = Gap::between(&[5.0, 5.0], 1, 0);
        assert_eq!((gap.lower, gap.upper, gap.wavelength_m()), (0, 1, None));
    }
}

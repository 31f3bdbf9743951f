//! Carriers against the lines of the system: drive minus transition, positive where the carrier is above.

use crate::model::gaps::Gap;

/// A detuning this small beside its carrier is rounding of the two frequencies.
const ROUNDING: f64 = 2.0 * f64::EPSILON;

/// On which side of a line a carrier stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// Higher than the gap.
    Above,
    /// Lower than the gap.
    Below,
    /// Equal but for rounding.
    On,
}

impl Side {
    /// The word of the language.
    pub fn word(self) -> &'static str {
        match self {
            Side::Above => "above",
            Side::Below => "below",
            Side::On => "on",
        }
    }
}

/// Carrier minus gap, Hz, and the side. The error is that of the two frequencies: half a unit in their last place each.
pub fn detuning(carrier_hz: f64, gap: Gap) -> (f64, Side) {
    let hz = carrier_hz - gap.hz;
    (hz, side(hz, carrier_hz))
}

/// On which side a detuning of `hz` puts a carrier of `carrier_hz`.
pub fn side(hz: f64, carrier_hz: f64) -> Side {
    if hz.abs() <= ROUNDING * carrier_hz.abs() {
        Side::On
    } else if hz > 0.0 {
        Side::Above
    } else {
        Side::Below
    }
}

/// Carrier of a minus carrier of b minus gap(lower of a, lower of b), Hz, where both reference pairs (lower, upper) share their
/// upper level; none where they do not, or have the lower one in common too.
pub fn two_photon(energies_hz: &[f64], a: (f64, [usize; 2]), b: (f64, [usize; 2])) -> Option<f64> {
    let ((carrier_a, [lower_a, upper_a]), (carrier_b, [lower_b, upper_b])) = (a, b);
    if upper_a != upper_b || lower_a == lower_b {
        return None;
    }
    Some((carrier_a - carrier_b) - (energies_hz[lower_b] - energies_hz[lower_a]))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_sides() {
        let gap = Gap::between(&[0.0, 5e9], 0, 1);
        assert_eq!(detuning(5e9 + 3e6, gap), (3e6, Side::Above));
        assert_eq!(detuning(5e9 - 3e6, gap), (-3e6, Side::Below));
        assert_eq!(detuning(5e9 * (1.0 + f64::EPSILON), gap).1, Side::On);
    }

    /// Pump 48 MHz and dump 48.3 MHz above their lines: the pair is 0.3 MHz below the two-photon line, in whatever order of legs.
    #[test]
    fn exact_two_photon() {
        let energies = [0.0, 6e9, 400e9];
        let (pump, dump) = ((400e9 + 48e6, [0, 2]), (394e9 + 48.3e6, [1, 2]));
        assert_eq!(two_photon(&energies, pump, dump), Some(-300e3));
        assert_eq!(two_photon(&energies, dump, pump), Some(300e3));
        assert_eq!(two_photon(&energies, pump, pump), None);
        assert_eq!(two_photon(&energies, (1.0, [0, 1]), dump), None);
    }
}

//! What one envelope does on one drive: peak, area, steps at its ends and area lost by the cut.

use super::coupling::Coupling;
use super::envelope::Curve;
use crate::model::gaps::Gap;

/// An envelope on a drive. Everything refers to the in-phase quadrature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Strength {
    /// Size at envelope 1 with its sign, Hz.
    pub size_hz: f64,
    /// Largest modulus, Hz: of the Rabi frequency on the reference pair, or of the entry of a direct drive.
    pub peak_hz: f64,
    /// Signed integral, turns.
    pub turns: f64,
    /// How long it lasts, s.
    pub length_s: f64,
    /// What it jumps at its start, as a share of the peak.
    pub start_step: f64,
    /// What it jumps at its end, as a share of the peak.
    pub end_step: f64,
    /// 1 minus its area over that of the same curve and peak without cut.
    pub missing_area: f64,
}

impl Strength {
    /// The peak with the sign of the size, Hz.
    pub fn signed_peak_hz(&self) -> f64 {
        self.peak_hz.copysign(self.size_hz)
    }
}

/// The strength of `curve` whose size at envelope 1 is `size_hz`.
pub fn strength(curve: &dyn Curve, size_hz: f64) -> Strength {
    let (largest, length_s) = (curve.largest(), curve.length_s());
    let (area, uncut) = (curve.area_s(), curve.uncut_area_s());
    let share = |value: f64| if largest > 0.0 { value.abs() / largest } else { 0.0 };
    Strength {
        size_hz,
        peak_hz: (size_hz * largest).abs(),
        turns: size_hz * area,
        length_s,
        start_step: share(curve.at(0.0)),
        end_step: share(curve.at(length_s)),
        missing_area: if area == uncut || uncut == 0.0 { 0.0 } else { 1.0 - area / uncut },
    }
}

/// The pairs that a drive's matrix couples, in basis order, each with the modulus of its entry (1 on the reference pair).
pub fn coupled_pairs(coupling: &Coupling, energies_hz: &[f64]) -> Vec<(Gap, f64)> {
    let size = energies_hz.len();
    let mut pairs = Vec::new();
    for a in 0..size {
        for b in a + 1..size {
            // a one-sided drive may couple one way alone
            let entry = coupling.matrix[(a, b)].norm().max(coupling.matrix[(b, a)].norm());
            if entry > 0.0 {
                pairs.push((Gap::between(energies_hz, a, b), entry));
            }
        }
    }
    pairs
}

/// Length of a square pulse that flips the reference pair, s; none where the peak is 0.
pub fn flip_s(peak_rabi_hz: f64) -> Option<f64> {
    (peak_rabi_hz > 0.0).then(|| 0.5 / peak_rabi_hz)
}

//! The spectrum of one pulse: modulus of the Fourier transform of its complex envelope, against the offset from its carrier.

use num_complex::Complex64;

use super::envelope::Curve;
use crate::problem::Sweep;
use crate::units::cis_turns;

/// What is below the largest by more than this is noise of the sum, dB.
const FLOOR_DB: f64 = -120.0;

/// Offsets in Hz (from -`range_hz` to `range_hz`, `points` on each side) and amplitudes in dB below the largest. `quadrature_s` is
/// that of the derivative (Y = quadrature_s dX/dt), `sweep` a chirp. By the midpoint rule, which converges fast for a pulse that
/// is 0 outside.
pub fn spectrum(curve: &dyn Curve, quadrature_s: f64, sweep: Option<&dyn Sweep>, range_hz: f64, points: usize) -> (Vec<f64>, Vec<f64>) {
    let length_s = curve.length_s();
    let samples = 2048usize.max((8.0 * range_hz * length_s) as usize).min(16_384);
    let step = length_s / samples as f64;
    // X - i Y turns with exp(+2 pi i f t)
    let values: Vec<Complex64> = (0..samples)
        .map(|k| {
            let t = (k as f64 + 0.5) * step;
            let quadrature = if quadrature_s == 0.0 { 0.0 } else { -quadrature_s * curve.slope(t) };
            Complex64::new(curve.at(t), quadrature) * cis_turns(sweep.map_or(0.0, |sweep| sweep.turns(t)))
        })
        .collect();
    let offsets: Vec<f64> = (0..=2 * points).map(|k| range_hz * (k as f64 / points as f64 - 1.0)).collect();
    let sizes: Vec<f64> = offsets
        .iter()
        .map(|offset| {
            // one rotation per sample in place of one sine per sample
            let turn = cis_turns(-offset * step);
            let mut phase = cis_turns(-offset * step / 2.0);
            let mut sum = Complex64::from(0.0);
            for value in &values {
                sum += value * phase;
                phase *= turn;
            }
            sum.norm()
        })
        .collect();
    let largest = sizes.iter().copied().fold(f64::MIN_POSITIVE, f64::max);
    let decibels = sizes.iter().map(|size| (20.0 * (size / largest).log10()).max(FLOOR_DB)).collect();
    (offsets, decibels)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::drive::envelope::{build, Parameters};

    /// A square pulse of length L has the spectrum sin(pi f L)/(pi f L) (R. N. Bracewell, The Fourier Transform and Its
    /// Applications, 1965): its first side lobe, at f L = 1.4303, is 13.26 dB down.
    #[test]
    fn exact_square_pulse_has_a_sinc_spectrum() {
        let curve = build("square", &Parameters { length_s: Some(1e-6), ..Parameters::default() }).unwrap();
        let (offsets, decibels) = spectrum(&*curve, 0.0, None, 3e6, 3000);
        let at = |hz: f64| decibels[offsets.iter().position(|offset| (offset - hz).abs() < 501.0).unwrap()];
        assert!((at(1.4303e6) + 13.26).abs() < 0.01, "{}", at(1.4303e6));
        assert!((at(0.5e6) - 20.0 * (2.0 / std::f64::consts::PI).log10()).abs() < 0.01, "{}", at(0.5e6));
    }
}

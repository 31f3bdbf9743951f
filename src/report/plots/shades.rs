//! The colours of a map, those of dusk: from a dark blue over plum and coral to cream. Lightness rises all the way, so that it
//! reads in grey too, and equal steps of the value are equal distances in the colour space L*a*b* (CIE 1976), where the eye judges
//! them so.

use super::palette::Rgb;
use crate::units::sin_cos_turns;

/// Number of shades.
pub const SHADES: usize = 256;
/// Points along the path before it is cut into equal lengths.
const FINE: usize = 4096;

/// L*, a*, b* at `t` from 0 to 1 of the path: the hue goes from blue over red to yellow, the chroma is largest in the middle.
fn path(t: f64) -> [f64; 3] {
    let lightness = 16.0 + 76.0 * t;
    let chroma = 20.0 - 2.0 * t + 34.0 * sin_cos_turns(t / 2.0).0;
    let (sin, cos) = sin_cos_turns((285.0 + 165.0 * t) / 360.0);
    [lightness, chroma * cos, chroma * sin]
}

/// Red, green and blue from 0 to 1 of a colour in L*a*b* under D65, gamma included; outside that range where there is none.
fn srgb([l, a, b]: [f64; 3]) -> [f64; 3] {
    let fy = (l + 16.0) / 116.0;
    let back = |f: f64| if f > 6.0 / 29.0 { f * f * f } else { 3.0 * (6.0f64 / 29.0).powi(2) * (f - 4.0 / 29.0) };
    let (x, y, z) = (0.95047 * back(fy + a / 500.0), back(fy), 1.08883 * back(fy - b / 200.0));
    // IEC 61966-2-1 (1999)
    let linear = [3.2406 * x - 1.5372 * y - 0.4986 * z, -0.9689 * x + 1.8758 * y + 0.0415 * z, 0.0557 * x - 0.2040 * y + 1.0570 * z];
    linear.map(|c| if c <= 0.003_130_8 { 12.92 * c } else { 1.055 * c.powf(1.0 / 2.4) - 0.055 })
}

/// All shades, the darkest first.
pub fn shades() -> Vec<Rgb> {
    let points: Vec<[f64; 3]> = (0..=FINE).map(|k| path(k as f64 / FINE as f64)).collect();
    let apart = |p: &[f64; 3], q: &[f64; 3]| p.iter().zip(q).map(|(a, b)| (a - b).powi(2)).sum::<f64>().sqrt();
    let mut lengths = vec![0.0];
    for pair in points.windows(2) {
        lengths.push(lengths[lengths.len() - 1] + apart(&pair[0], &pair[1]));
    }
    let whole = lengths[FINE];
    (0..SHADES)
        .map(|k| {
            let wanted = whole * k as f64 / (SHADES - 1) as f64;
            let at = lengths.partition_point(|length| *length < wanted).min(FINE);
            let byte = |c: f64| (c.clamp(0.0, 1.0) * 255.0).round() as u8;
            let [red, green, blue] = srgb(points[at]);
            (byte(red), byte(green), byte(blue))
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Back from bytes to L*a*b*.
    fn lab((red, green, blue): Rgb) -> [f64; 3] {
        let [r, g, b] = [red, green, blue].map(|byte| {
            let c = f64::from(byte) / 255.0;
            if c <= 0.04045 {
                c / 12.92
            } else {
                ((c + 0.055) / 1.055).powf(2.4)
            }
        });
        let (x, y, z) = (0.4124 * r + 0.3576 * g + 0.1805 * b, 0.2126 * r + 0.7152 * g + 0.0722 * b, 0.0193 * r + 0.1192 * g + 0.9505 * b);
        let f = |t: f64| if t > (6.0f64 / 29.0).powi(3) { t.cbrt() } else { t / (3.0 * (6.0f64 / 29.0).powi(2)) + 4.0 / 29.0 };
        let (fx, fy, fz) = (f(x / 0.95047), f(y), f(z / 1.08883));
        [116.0 * fy - 16.0, 500.0 * (fx - fy), 200.0 * (fy - fz)]
    }

    #[test]
    fn prop_every_shade_is_a_colour_that_a_screen_has() {
        for k in 0..=200 {
            let color = srgb(path(f64::from(k) / 200.0));
            assert!(color.iter().all(|c| (-1e-3..=1.001).contains(c)), "{k}: {color:?}");
        }
    }

    #[test]
    fn prop_lightness_rises_and_steps_are_equal() {
        let all: Vec<[f64; 3]> = shades().into_iter().map(lab).collect();
        assert!(all[0][0] < 20.0 && all[SHADES - 1][0] > 90.0);
        // over eight shades at a time, since a byte is coarse
        let steps: Vec<f64> = all
            .iter()
            .zip(&all[8..])
            .map(|(p, q)| {
                assert!(q[0] > p[0] + 0.5, "lightness falls: {p:?} {q:?}");
                p.iter().zip(q).map(|(a, b)| (a - b).powi(2)).sum::<f64>().sqrt()
            })
            .collect();
        let mean = steps.iter().sum::<f64>() / steps.len() as f64;
        assert!(steps.iter().all(|step| (step / mean - 1.0).abs() < 0.15), "{mean}: {steps:?}");
    }
}

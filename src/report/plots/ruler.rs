//! An axis of a scan: places of its points in the unit as written, spaced evenly or in equal ratios, true to scale in either case.

use super::frame::with_unit;
use super::scale::{short_number, superscript, ticks};

/// An axis of a scan.
#[derive(Clone, Debug, Default)]
pub struct Ruler {
    /// Name of the number.
    pub name: String,
    /// Its unit; empty for none.
    pub unit: String,
    /// Where its points are, in the order of the scan.
    pub places: Vec<f64>,
    /// Whether equal ratios are equal lengths.
    pub logarithmic: bool,
}

/// A ruler between two pixels.
#[derive(Clone, Debug)]
pub struct Laid {
    low: f64,
    high: f64,
    logarithmic: bool,
    from: f64,
    to: f64,
}

impl Ruler {
    /// "name (unit)".
    pub fn label(&self) -> String {
        with_unit(&self.name, &self.unit)
    }

    fn bent(&self, value: f64) -> f64 {
        if self.logarithmic {
            value.abs().max(1e-300).log10()
        } else {
            value
        }
    }

    /// Edges of the cells around the places: halfway to the neighbours, and as far beyond the ends. In the bent measure.
    pub fn edges(&self) -> Vec<f64> {
        let at: Vec<f64> = self.places.iter().map(|value| self.bent(*value)).collect();
        let Some((first, last)) = at.first().zip(at.last()) else { return Vec::new() };
        if at.len() == 1 {
            let half = if self.logarithmic || *first == 0.0 { 0.5 } else { 0.5 * first.abs() };
            return vec![first - half, first + half];
        }
        let between: Vec<f64> = at.windows(2).map(|pair| 0.5 * (pair[0] + pair[1])).collect();
        let (head, tail) = (2.0 * first - between[0], 2.0 * last - between[between.len() - 1]);
        std::iter::once(head).chain(between).chain(std::iter::once(tail)).collect()
    }

    /// From pixel `from` (lowest value) to pixel `to`; with the whole cells of the end points, or without.
    pub fn between(&self, from: f64, to: f64, whole_cells: bool) -> Laid {
        let all: Vec<f64> = if whole_cells { self.edges() } else { self.places.iter().map(|value| self.bent(*value)).collect() };
        let low = all.iter().copied().fold(f64::INFINITY, f64::min);
        let high = all.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let (low, high) = if low < high { (low, high) } else { (low - 0.5, low + 0.5) };
        Laid { low, high, logarithmic: self.logarithmic, from, to }
    }
}

impl Laid {
    /// Pixel of a value.
    pub fn pixel(&self, value: f64) -> f64 {
        let bent = if self.logarithmic { value.abs().max(1e-300).log10() } else { value };
        self.pixel_of_bent(bent)
    }

    /// Pixel of a value in the bent measure.
    pub fn pixel_of_bent(&self, bent: f64) -> f64 {
        self.from + (self.to - self.from) * ((bent - self.low) / (self.high - self.low)).clamp(0.0, 1.0)
    }

    /// Value in the bent measure at a pixel.
    pub fn bent_at(&self, pixel: f64) -> f64 {
        self.low + (self.high - self.low) * (pixel - self.from) / (self.to - self.from)
    }

    /// Ticks with their numbers, about `wanted` of them; small ticks of a logarithmic axis have none.
    pub fn ticks(&self, wanted: usize) -> Vec<(f64, Option<String>)> {
        if !self.logarithmic {
            return ticks(self.low, self.high, wanted).into_iter().map(|(value, text)| (self.pixel(value), Some(text))).collect();
        }
        let span = self.high - self.low;
        let stride = (span / wanted.max(1) as f64).ceil().max(1.0) as i32;
        let mut found = Vec::new();
        for decade in self.low.floor() as i32..=self.high.floor() as i32 {
            for digit in 1..=if stride == 1 { 9 } else { 1 } {
                let power = f64::from(decade) + f64::from(digit).log10();
                if power < self.low - 1e-9 || power > self.high + 1e-9 {
                    continue;
                }
                let named = if span < 2.2 { matches!(digit, 1 | 2 | 5) } else { digit == 1 && decade.rem_euclid(stride) == 0 };
                found.push((self.pixel_of_bent(power), named.then(|| wording(digit, decade))));
            }
        }
        found
    }
}

/// A digit times ten to `power`.
fn wording(digit: i32, power: i32) -> String {
    match (power, digit) {
        (-3..=4, _) => short_number(f64::from(digit) * 10f64.powi(power)),
        (_, 1) => format!("10{}", superscript(power)),
        _ => format!("{digit}×10{}", superscript(power)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_cells_meet_halfway_in_the_measure_of_the_axis() {
        let even = Ruler { places: vec![1.0, 2.0, 4.0], ..Ruler::default() };
        assert_eq!(even.edges(), [0.5, 1.5, 3.0, 5.0]);
        let ratio = Ruler { places: vec![0.1, 1.0, 10.0], logarithmic: true, ..Ruler::default() };
        assert_eq!(ratio.edges(), [-1.5, -0.5, 0.5, 1.5]);
        let laid = ratio.between(0.0, 300.0, true);
        assert_eq!(laid.pixel(1.0), 150.0);
        let named: Vec<String> = laid.ticks(5).into_iter().filter_map(|tick| tick.1).collect();
        assert_eq!(named, ["0.1", "1", "10"]);
        let falling = Ruler { places: vec![3.0, 1.0], ..Ruler::default() }.between(0.0, 100.0, false);
        assert_eq!((falling.pixel(1.0), falling.pixel(3.0)), (0.0, 100.0));
    }
}

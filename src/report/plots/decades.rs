//! A logarithmic axis of frequencies in one unit, for either direction.
use super::frame::with_unit;
use super::scale::{engineering, short_number, superscript, Display};

/// Decades between the lowest and the highest value that one axis can hold.
pub const LONGEST: f64 = 16.0;

/// A logarithmic axis from `low` to `high` (powers of ten of values in Hz) between pixels `from` and `to`.
#[derive(Clone, Debug)]
pub struct Decades {
    /// Power of ten of the lowest value.
    pub low: f64,
    /// Power of ten of the highest value.
    pub high: f64,
    /// Pixel of the lowest value.
    pub from: f64,
    /// Pixel of the highest value.
    pub to: f64,
    display: Display,
}

/// A tick: pixel, and its number where it has one.
pub type DecadeTick = (f64, Option<String>);

impl Decades {
    /// An axis around `values` (Hz, positive) with `room` decades on both sides, at least one decade long; none without a value.
    pub fn around(values: impl IntoIterator<Item = f64>, room: f64) -> Option<Self> {
        let mut powers = values.into_iter().map(f64::log10).filter(|power| power.is_finite());
        let first = powers.next()?;
        let (low, high) = powers.fold((first, first), |(low, high), power| (low.min(power), high.max(power)));
        let display = engineering(10f64.powf(high), "Hz");
        let short = ((1.0 - (high - low)) / 2.0 - room).max(0.0);
        Some(Decades { low: low - room - short, high: high + room + short, from: 0.0, to: 1.0, display })
    }

    /// The axis between two pixels.
    pub fn between(mut self, from: f64, to: f64) -> Self {
        (self.from, self.to) = (from, to);
        self
    }

    /// Pixel of a value in Hz, kept inside the plot.
    pub fn pixel(&self, value: f64) -> f64 {
        self.pixel_of_power(value.max(1e-200).log10())
    }

    /// Pixel of ten to `power` Hz, kept inside the plot.
    pub fn pixel_of_power(&self, power: f64) -> f64 {
        self.from + (self.to - self.from) * ((power - self.low) / (self.high - self.low)).clamp(0.0, 1.0)
    }

    /// "name (unit)".
    pub fn label(&self, name: &str) -> String {
        with_unit(name, &self.display.unit)
    }

    /// Ticks: numbers at 1, 2, 5 on short axes, else at whole decades (`most` at most); the other digits without a number.
    pub fn ticks(&self, most: usize) -> Vec<DecadeTick> {
        let span = self.high - self.low;
        let stride = (span / most.max(1) as f64).ceil().max(1.0) as i32;
        let mut ticks = Vec::new();
        for decade in (self.low.floor() as i32)..=(self.high.floor() as i32) {
            for digit in 1..=if stride == 1 { 9 } else { 1 } {
                let power = f64::from(decade) + f64::from(digit).log10();
                if power < self.low - 1e-9 || power > self.high + 1e-9 {
                    continue;
                }
                let shown = decade - self.display.exponent;
                let named = if span < 2.2 { matches!(digit, 1 | 2 | 5) } else { digit == 1 && shown.rem_euclid(stride) == 0 };
                ticks.push((self.pixel_of_power(power), named.then(|| wording(digit, shown))));
            }
        }
        ticks
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

    fn numbers(values: &[f64]) -> Vec<String> {
        Decades::around(values.iter().copied(), 0.1)
            .map_or(Vec::new(), |axis| axis.ticks(9).into_iter().filter_map(|tick| tick.1).collect())
    }

    #[test]
    fn exact_numbers_stand_at_decades_or_at_1_2_5() {
        assert_eq!(numbers(&[1e6, 1e9]), ["0.001", "0.01", "0.1", "1"]);
        assert_eq!(numbers(&[5e6]), ["2", "5", "10"]);
        assert_eq!(numbers(&[1.0, 1e16]), ["10⁻¹²", "10⁻¹⁰", "10⁻⁸", "10⁻⁶", "10⁻⁴", "0.01", "1", "100", "10000"]);
        assert!(numbers(&[]).is_empty());
    }

    #[test]
    fn exact_decades_are_evenly_spaced() {
        let axis = Decades { low: 6.0, high: 9.0, from: 100.0, to: 400.0, display: engineering(1e9, "Hz") };
        assert!((axis.pixel(1e7) - 200.0).abs() < 1e-9 && (axis.pixel(1e12) - 400.0).abs() < 1e-9);
        assert_eq!(axis.label("turning frequency"), "turning frequency (GHz)");
    }
}

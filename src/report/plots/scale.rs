//! Numbers for people: unit prefixes, ticks in steps of 1, 2 or 5, and the text of a number.

/// SI prefixes by power of ten, from femto to tera.
const PREFIXES: [(i32, &str); 10] =
    [(-15, "f"), (-12, "p"), (-9, "n"), (-6, "µ"), (-3, "m"), (0, ""), (3, "k"), (6, "M"), (9, "G"), (12, "T")];

/// How values are shown: divided by ten to `exponent`, with `unit`.
#[derive(Clone, Debug, PartialEq)]
pub struct Display {
    /// Power of ten that is divided out.
    pub exponent: i32,
    /// Unit with its prefix, empty for a plain number.
    pub unit: String,
}

impl Display {
    /// `value` (SI) as shown.
    pub fn shown(&self, value: f64) -> f64 {
        // Dividing by an exact power is correctly rounded; multiplying by 1e-6 is not.
        if self.exponent >= 0 {
            value / 10f64.powi(self.exponent)
        } else {
            value * 10f64.powi(-self.exponent)
        }
    }

    /// A shown number back in SI.
    pub fn si(&self, shown: f64) -> f64 {
        if self.exponent >= 0 {
            shown * 10f64.powi(self.exponent)
        } else {
            shown / 10f64.powi(-self.exponent)
        }
    }
}

/// The prefix that shows `largest` (absolute value, SI) as 1 to 1000. Units other than s and Hz take no prefix: a power of ten
/// stands before them where the numbers would be shorter than 0.01 or longer than 10 000.
pub fn engineering(largest: f64, unit: &str) -> Display {
    let size = largest.abs();
    if !size.is_finite() || size < 1e-200 {
        return Display { exponent: 0, unit: unit.to_string() };
    }
    // The small allowance keeps 1e-6 s from being shown as 1000 ns.
    let decade = (size * (1.0 + 1e-9)).log10().floor() as i32;
    // No kiloseconds: 3600 s is read at once.
    let top = if unit == "s" { 0 } else { 12 };
    if (unit == "s" || unit == "Hz") && (-18..top + 5).contains(&decade) {
        let fitting = PREFIXES.iter().rev().find(|(power, _)| *power <= decade && *power <= top);
        let (exponent, prefix) = *fitting.unwrap_or(&PREFIXES[0]);
        return Display { exponent, unit: format!("{prefix}{unit}") };
    }
    if (-2..5).contains(&decade) {
        return Display { exponent: 0, unit: unit.to_string() };
    }
    let power = format!("10{}", superscript(decade));
    Display { exponent: decade, unit: if unit.is_empty() { power } else { format!("{power} {unit}") } }
}

/// An integer in raised digits.
pub fn superscript(number: i32) -> String {
    let raise = |digit| match digit {
        '-' => '⁻',
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        '4' => '⁴',
        '5' => '⁵',
        '6' => '⁶',
        '7' => '⁷',
        '8' => '⁸',
        '9' => '⁹',
        _ => '⁰',
    };
    number.to_string().chars().map(raise).collect()
}

/// `value` (SI) with a fitting prefix and at most four significant digits, for example "20 ms".
pub fn quantity(value: f64, unit: &str) -> String {
    with_digits(value, unit, 4)
}

/// `value` (SI) with a fitting prefix and at most `digits` significant digits.
pub fn with_digits(value: f64, unit: &str, digits: i32) -> String {
    let display = engineering(value, unit);
    let number = number(display.shown(value), digits);
    if display.unit.is_empty() {
        number
    } else if unit.is_empty() {
        format!("{number}×{}", display.unit)
    } else {
        format!("{number} {}", display.unit)
    }
}

/// At most four significant digits, no trailing zeros, a true minus sign.
pub fn short_number(value: f64) -> String {
    number(value, 4)
}

/// At most `digits` significant digits, no trailing zeros, a true minus sign.
pub fn number(value: f64, digits: i32) -> String {
    if !value.is_finite() {
        return value.to_string();
    }
    let decade = if value == 0.0 { 0 } else { value.abs().log10().floor() as i32 };
    trimmed(fixed(value, (digits - 1 - decade).clamp(0, 12) as usize))
}

fn trimmed(text: String) -> String {
    if !text.contains('.') {
        return text;
    }
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "−0" { "0" } else { text }.to_string()
}

fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    let zero = text.chars().all(|digit| matches!(digit, '-' | '0' | '.'));
    if zero {
        text.replace('-', "")
    } else {
        text.replace('-', "−")
    }
}

/// Ticks of a linear axis from `low` to `high` (as shown), about `wanted` of them, each with its text.
pub fn ticks(low: f64, high: f64, wanted: usize) -> Vec<(f64, String)> {
    let span = high - low;
    if !span.is_finite() || span <= 0.0 || span < 1e-200 {
        return vec![(low, short_number(low))];
    }
    let step = round_step(span / wanted.max(1) as f64);
    let decimals = (-(step * (1.0 + 1e-9)).log10().floor()).clamp(0.0, 15.0) as usize;
    let (first, last) = ((low / step - 1e-6).ceil(), (high / step + 1e-6).floor());
    if first.abs() > 1e15 || last - first > 200.0 {
        return vec![(low, short_number(low))];
    }
    let count = (last - first) as usize;
    (0..=count).map(|k| (first + k as f64) * step).map(|value| (value, fixed(value, decimals))).collect()
}

/// The smallest of 1, 2, 5 times a power of ten that is not below `raw`.
fn round_step(raw: f64) -> f64 {
    let power = 10f64.powf(raw.log10().floor());
    let factor = [1.0, 2.0, 5.0].into_iter().find(|factor| raw <= factor * power * (1.0 + 1e-9));
    factor.unwrap_or(10.0) * power
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(low: f64, high: f64, wanted: usize) -> Vec<String> {
        ticks(low, high, wanted).into_iter().map(|tick| tick.1).collect()
    }

    #[test]
    fn exact_prefix_shows_one_to_a_thousand() {
        for (value, text) in
            [(2e-2, "20 ms"), (1e-6, "1 µs"), (999e-9, "999 ns"), (4e-8, "40 ns"), (3600.0, "3600 s"), (0.0, "0 s"), (-5e-9, "−5 ns")]
        {
            assert_eq!(quantity(value, "s"), text);
        }
        assert_eq!(quantity(5.2e9, "Hz"), "5.2 GHz");
        assert_eq!(quantity(1.2e-5, ""), "1.2×10⁻⁵");
        assert_eq!(quantity(0.25, ""), "0.25");
    }

    #[test]
    fn exact_ticks_step_by_one_two_or_five() {
        assert_eq!(texts(0.0, 1.0, 5), ["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"]);
        assert_eq!(texts(0.0, 100.0, 8), ["0", "20", "40", "60", "80", "100"]);
        assert_eq!(texts(-1.0, 1.0, 4), ["−1.0", "−0.5", "0.0", "0.5", "1.0"]);
        assert_eq!(texts(3.0, 3.0, 4), ["3"]);
    }

    #[test]
    fn regress_odd_ranges_give_few_ticks() {
        for (low, high) in [(f64::NAN, 1.0), (0.0, f64::INFINITY), (1.0, 1.0 + 1e-15), (-1e300, 1e300), (0.0, 1e-300), (5.0, 1.0)] {
            assert!(ticks(low, high, 6).len() < 20);
        }
    }
}

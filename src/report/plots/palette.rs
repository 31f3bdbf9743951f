//! Colours and markers: neighbours differ in lightness, so that they stay apart in grey print and for colour-blind readers.

/// Red, green, blue.
pub type Rgb = (u8, u8, u8);

/// Text and axes.
pub const INK: Rgb = (34, 34, 34);
/// Text of lesser rank.
pub const SOFT_INK: Rgb = (96, 96, 96);
/// Grid lines.
pub const GRID: Rgb = (226, 226, 226);
/// Axis lines and ticks.
pub const AXIS: Rgb = (120, 120, 120);
/// Curves that get no label.
pub const REST: Rgb = (190, 190, 190);

/// Curve colours in order of use: dark blue, orange, light blue, plum, teal, gold, brown, black, grey, light green.
pub const CURVES: [Rgb; 10] = [
    (6, 40, 96),
    (226, 98, 0),
    (92, 184, 230),
    (142, 36, 104),
    (0, 126, 108),
    (214, 168, 0),
    (140, 84, 40),
    (20, 20, 20),
    (140, 140, 150),
    (132, 200, 110),
];

/// A sign drawn on a curve now and then.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Marker {
    /// Filled or open disc.
    Disc(bool),
    /// Filled or open square.
    Square(bool),
    /// Filled or open triangle.
    Triangle(bool),
    /// Filled or open diamond.
    Diamond(bool),
    /// Upright cross.
    Plus,
    /// Slanted cross.
    Cross,
}

const MARKERS: [Marker; 10] = [
    Marker::Disc(true),
    Marker::Square(false),
    Marker::Triangle(true),
    Marker::Diamond(false),
    Marker::Plus,
    Marker::Square(true),
    Marker::Disc(false),
    Marker::Cross,
    Marker::Diamond(true),
    Marker::Triangle(false),
];

/// Look of one curve.
#[derive(Clone, Copy, Debug)]
pub struct Look {
    /// Colour.
    pub color: Rgb,
    /// Marker, where colour alone might not do.
    pub marker: Option<Marker>,
    /// Lengths in pixels of dash and gap; none for a solid line.
    pub dash: Option<(f64, f64)>,
}

/// Look of curve `index` of `count`; markers come in with the fifth curve.
pub fn look(index: usize, count: usize) -> Look {
    // Past ten the markers shift by one a round, so that no pair of colour and marker comes back within a hundred curves.
    let marker = (count > 4).then(|| MARKERS[(index + index / CURVES.len()) % MARKERS.len()]);
    Look { color: CURVES[index % CURVES.len()], marker, dash: None }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Lightness L* (0 to 100) of an sRGB colour, CIE 1976.
    fn lightness((red, green, blue): Rgb) -> f64 {
        let linear = |byte: u8| {
            let value = f64::from(byte) / 255.0;
            if value <= 0.04045 {
                value / 12.92
            } else {
                ((value + 0.055) / 1.055).powf(2.4)
            }
        };
        let luminance = 0.2126 * linear(red) + 0.7152 * linear(green) + 0.0722 * linear(blue);
        116.0 * luminance.cbrt() - 16.0
    }

    #[test]
    fn prop_curves_without_markers_differ_in_grey() {
        let mut levels: Vec<f64> = CURVES[..4].iter().map(|color| lightness(*color)).collect();
        levels.sort_by(f64::total_cmp);
        assert!(levels.windows(2).all(|pair| pair[1] - pair[0] > 12.0), "{levels:?}");
    }

    #[test]
    fn prop_no_look_comes_twice() {
        let looks: Vec<_> = (0..100).map(|k| look(k, 100)).collect();
        for (k, one) in looks.iter().enumerate() {
            assert!(looks[..k].iter().all(|other| other.color != one.color || other.marker != one.marker));
        }
    }
}

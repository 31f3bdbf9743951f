//! What all figures share: sizes, title, fingerprint, the horizontal axis.
use super::font;
use super::palette::{AXIS, GRID, INK, SOFT_INK};
use super::scale::{ticks, Display};
use super::scene::{Anchor, Scene};

/// Canvas width in pixels.
pub const WIDTH: f64 = 1600.0;
/// Canvas height in pixels, unless many rows need more.
pub const HEIGHT: f64 = 900.0;
/// Free border in pixels.
pub const EDGE: f64 = 28.0;
/// Font size of the title in pixels.
pub const TITLE: f64 = 30.0;
/// Font size of labels in pixels.
pub const LABEL: f64 = 21.0;
/// Font size of tick numbers in pixels.
pub const TICK: f64 = 19.0;
/// Font size of small print in pixels.
pub const SMALL: f64 = 15.0;
/// Height of a line of labels in pixels.
pub const LINE: f64 = 27.0;
/// Width in pixels of the sample of a curve that stands before its name.
pub const KEY: f64 = 52.0;

/// Space in pixels under a plot for ticks, axis label and fingerprint.
pub const FOOT: f64 = 104.0;

/// Part of the horizontal axis: from `low` to `high` (s or Hz) between pixels `left` and `right`.
#[derive(Clone, Copy, Debug)]
pub struct Window {
    /// Lowest axis value.
    pub low: f64,
    /// Highest axis value.
    pub high: f64,
    /// Pixel of the lowest value.
    pub left: f64,
    /// Pixel of the highest value.
    pub right: f64,
}

impl Window {
    /// Pixel of an axis value, kept inside the window.
    pub fn x(&self, value: f64) -> f64 {
        let share = (value - self.low) / (self.high - self.low);
        self.left + (self.right - self.left) * share.clamp(0.0, 1.0)
    }

    /// Whether an axis value lies in the window, with an allowance for rounding.
    pub fn holds(&self, value: f64) -> bool {
        let slack = 1e-9 * (self.high - self.low);
        value >= self.low - slack && value <= self.high + slack
    }
}

/// Draws the title (one line, or two smaller ones) and gives the y below it.
pub fn title(scene: &mut Scene, text: &str) -> f64 {
    let limit = WIDTH - 2.0 * EDGE;
    let shown = font::fit(text, TITLE, f64::INFINITY);
    if font::width(&shown, TITLE) <= limit && shown.ends_with('…') == text.trim_end().ends_with('…') {
        scene.text(&shown, (EDGE, 42.0), TITLE, INK, Anchor::Start);
        return 70.0;
    }
    let size = TITLE * 0.8;
    let lines = font::two_lines(text, size, limit);
    for (k, line) in lines.iter().enumerate() {
        scene.text(line, (EDGE, 36.0 + 32.0 * k as f64), size, INK, Anchor::Start);
    }
    30.0 + 32.0 * lines.len() as f64 + 12.0
}

/// Draws the fingerprint in the bottom right corner of a canvas of the scene's height.
pub fn fingerprint(scene: &mut Scene, text: &str) {
    let shown = font::fit(text, SMALL, 300.0);
    let corner = (WIDTH - EDGE, scene.height - 20.0);
    scene.text(&shown, corner, SMALL, SOFT_INK, Anchor::End);
}

/// Right edge of the plot that leaves room for the widest of the names (each at most `limit` pixels) behind its key.
pub fn right_edge<'a>(names: impl IntoIterator<Item = &'a str>, limit: f64) -> f64 {
    let widest = names.into_iter().map(|name| font::width(&font::fit(name, LABEL, limit), LABEL)).fold(0.0, f64::max);
    let key = if widest > 0.0 { KEY } else { 30.0 };
    WIDTH - EDGE - widest - key
}

/// Vertical grid lines of a window between two heights, and the ticks they stand on (pixel, text).
pub fn x_grid(scene: &mut Scene, window: &Window, display: &Display, offset: f64, top: f64, bottom: f64) -> Vec<(f64, String)> {
    let wanted = ((window.right - window.left) / 130.0).round().max(1.0) as usize;
    let (low, high) = (display.shown(window.low - offset), display.shown(window.high - offset));
    let mut places = Vec::new();
    for (value, text) in ticks(low, high, wanted) {
        let x = window.x(display.si(value) + offset).floor() + 0.5;
        scene.line(vec![(x, top), (x, bottom)], 1.0, GRID);
        places.push((x, text));
    }
    places
}

/// Tick marks and numbers under a plot whose lower edge is `y`; numbers that would touch their neighbour are left out.
pub fn x_numbers(scene: &mut Scene, window: &Window, places: &[(f64, String)], y: f64) {
    scene.line(vec![(window.left, y), (window.right, y)], 1.4, AXIS);
    let mut free = f64::NEG_INFINITY;
    for (x, text) in places {
        scene.line(vec![(*x, y), (*x, y + 6.0)], 1.4, AXIS);
        let half = font::width(text, TICK) / 2.0;
        if x - half > free {
            scene.text(text, (*x, y + 22.0), TICK, INK, Anchor::Middle);
            free = x + half + 14.0;
        }
    }
}

/// "name (unit)", or the name alone.
pub fn with_unit(name: &str, unit: &str) -> String {
    if unit.is_empty() {
        name.to_string()
    } else {
        format!("{name} ({unit})")
    }
}

//! One plot area: its vertical axis, its curves, and their names at the right end.
use super::font;
use super::frame::{with_unit, Window, EDGE, KEY, LABEL, LINE, TICK, WIDTH};
use super::palette::{Look, AXIS, GRID, INK, SOFT_INK};
use super::place::apart;
use super::scale::{engineering, superscript, ticks, Display};
use super::scene::{Anchor, Scene};
use super::thin::Run;

/// Usual width of curves in pixels.
pub const STROKE: f64 = 2.2;
/// Pixels between markers on a curve.
const MARKER_SPACING: f64 = 230.0;

/// The vertical axis, from `low` at pixel `bottom` to `high` at pixel `top`.
#[derive(Clone, Debug)]
pub struct Vertical {
    /// Lowest value.
    pub low: f64,
    /// Highest value.
    pub high: f64,
    /// Whether decades are evenly spaced.
    pub log: bool,
    /// Upper pixel.
    pub top: f64,
    /// Lower pixel.
    pub bottom: f64,
    display: Display,
}

impl Vertical {
    /// A linear axis: over `range` where given, else over `extent` (lowest, highest value) with room around it.
    pub fn linear(range: Option<(f64, f64)>, extent: Option<(f64, f64)>, unit: &str) -> Self {
        let given = range.filter(|(low, high)| (high - low).is_finite() && low < high);
        let (low, high) = given.or(extent).unwrap_or((0.0, 1.0));
        let size = low.abs().max(high.abs());
        let (low, high) = if high - low <= 1e-6 * size || high == low {
            // A flat curve: the axis shows its value, not its rounding.
            let half = if size > 1e-200 { 0.2 * size } else { 0.5 };
            (low.min(high) - half, low.max(high) + half)
        } else {
            let room = if given.is_some() { 0.03 } else { 0.06 } * (high - low);
            (low - room, high + room)
        };
        Vertical { low, high, log: false, top: 0.0, bottom: 1.0, display: engineering(size, unit) }
    }

    /// An axis of even decades from below `floor` to above `highest`, both above zero.
    pub fn decades(floor: f64, highest: f64, unit: &str) -> Self {
        let low = floor.log10().floor().max(-200.0);
        let high = (highest.log10() + 0.05).max(low + 1.0);
        let display = Display { exponent: 0, unit: unit.to_string() };
        Vertical { low, high, log: true, top: 0.0, bottom: 1.0, display }
    }

    /// The axis between two pixels.
    pub fn between(mut self, top: f64, bottom: f64) -> Self {
        (self.top, self.bottom) = (top, bottom);
        self
    }

    /// Pixel of a value, kept inside the plot.
    pub fn y(&self, value: f64) -> f64 {
        let value = if self.log { value.max(1e-200).log10() } else { value };
        let share = (value - self.low) / (self.high - self.low);
        self.bottom - (self.bottom - self.top) * share.clamp(0.0, 1.0)
    }

    fn marks(&self) -> Vec<(f64, String)> {
        let wanted = ((self.bottom - self.top) / 62.0).round().clamp(2.0, 10.0) as usize;
        if self.log {
            let decades = ticks(self.low, self.high, wanted).into_iter().map(|tick| tick.0).filter(|decade| decade.fract().abs() < 1e-6);
            return decades.map(|decade| (10f64.powf(decade), format!("10{}", superscript(decade.round() as i32)))).collect();
        }
        let (low, high) = (self.display.shown(self.low), self.display.shown(self.high));
        // One tick tells no scale: finer steps until there are three.
        let shown = (wanted..wanted + 4).map(|wanted| ticks(low, high, wanted)).find(|shown| shown.len() >= 3);
        let shown = shown.unwrap_or_else(|| ticks(low, high, wanted));
        shown.into_iter().map(|(value, text)| (self.display.si(value), text)).collect()
    }

    /// Width in pixels of the widest tick number.
    pub fn number_width(&self) -> f64 {
        self.marks().iter().map(|mark| font::width(&mark.1, TICK)).fold(0.0, f64::max)
    }

    /// Draws grid lines in all windows, tick numbers left of the first, and the label above it, `lift` pixels higher than usual.
    pub fn draw(&self, scene: &mut Scene, windows: &[Window], label: &str, lift: f64) {
        let Some(first) = windows.first() else { return };
        for (value, text) in self.marks() {
            let y = self.y(value).floor() + 0.5;
            for window in windows {
                scene.line(vec![(window.left, y), (window.right, y)], 1.0, GRID);
            }
            scene.text(&text, (first.left - 12.0, y), TICK, INK, Anchor::End);
        }
        for window in windows {
            scene.line(vec![(window.left, self.top), (window.left, self.bottom)], 1.4, AXIS);
        }
        if !self.log && self.low < 0.0 && self.high > 0.0 {
            let y = self.y(0.0).floor() + 0.5;
            for window in windows {
                scene.line(vec![(window.left, y), (window.right, y)], 1.0, AXIS);
            }
        }
        let unit = &self.display.unit;
        let room = WIDTH - EDGE - first.left - font::width(&with_unit("", unit), LABEL);
        let label = with_unit(&font::fit(label, LABEL, room), unit);
        scene.text(&label, (first.left, self.top - 17.0 - lift), LABEL, INK, Anchor::Start);
    }
}

/// A curve ready to be drawn.
pub struct Curve {
    /// Its name at the right end; empty for none.
    pub name: String,
    /// Its stretches in axis values.
    pub runs: Vec<Run>,
    /// Outlines of its error band in axis values: upper and lower edge of each stretch.
    pub bands: Vec<(Run, Run)>,
    /// How it looks.
    pub look: Look,
    /// Width of its line in pixels.
    pub width: f64,
}

/// Draws curves in one window: bands first, then curves (the first on top).
pub fn curves(scene: &mut Scene, window: &Window, vertical: &Vertical, curves: &[Curve]) {
    let place = |point: &(f64, f64)| (window.x(point.0), vertical.y(point.1));
    for curve in curves {
        for (upper, lower) in &curve.bands {
            let outline: Vec<_> = upper.iter().chain(lower.iter().rev()).map(place).collect();
            scene.area(outline, curve.look.color, 0.18);
        }
    }
    let count = curves.len();
    for (index, curve) in curves.iter().enumerate().rev() {
        let mut next = window.left + MARKER_SPACING * (0.3 + index as f64 / count as f64);
        for run in &curve.runs {
            let points: Vec<_> = run.iter().map(place).collect();
            let spots = marker_spots(&points, &mut next);
            if let [only] = points[..] {
                // A lone point would be invisible as a line.
                scene.line(vec![only, only], 3.0 * curve.width, curve.look.color);
            } else {
                scene.curve(straightened(points), curve.width, curve.look);
            }
            if let Some(marker) = curve.look.marker {
                for spot in spots {
                    scene.marker(spot, marker, curve.look.color);
                }
            }
        }
    }
}

/// Points on the curve at which markers stand, at least a spacing apart.
fn marker_spots(points: &[(f64, f64)], next: &mut f64) -> Vec<(f64, f64)> {
    let mut spots = Vec::new();
    for pair in points.windows(2) {
        let ((x0, y0), (x1, y1)) = (pair[0], pair[1]);
        while *next <= x1 {
            if *next >= x0 && x1 > x0 {
                spots.push((*next, y0 + (y1 - y0) * (*next - x0) / (x1 - x0)));
            }
            *next += MARKER_SPACING;
        }
    }
    spots
}

/// Leaves out points that move the line by less than a fraction of a pixel: equal ones, those inside flat stretches, and those
/// of a rise or fall that lie within a pixel of their predecessor.
fn straightened(points: Vec<(f64, f64)>) -> Vec<(f64, f64)> {
    let near = |a: f64, b: f64| (a - b).abs() < 0.05;
    let mut kept: Vec<(f64, f64)> = Vec::with_capacity(points.len());
    for point in points {
        if let [.., before, last] = kept[..] {
            let level = near(before.1, last.1) && near(last.1, point.1);
            let upright = near(before.0, last.0) && near(last.0, point.0) && (last.1 - before.1) * (point.1 - last.1) >= 0.0;
            let (rise, next) = (last.1 - before.1, point.1 - last.1);
            let close = rise * next > 0.0 && (last.0 - before.0).hypot(rise) + (point.0 - last.0).hypot(next) < 1.0;
            if level || upright || close {
                kept.pop();
            }
        }
        kept.push(point);
    }
    kept
}

/// Draws the names of curves at the right of a plot that ends at pixel `edge`, each with a sample of its curve that leads
/// from its last value to its name.
pub fn names(scene: &mut Scene, edge: f64, vertical: &Vertical, curves: &[Curve], limit: f64) {
    let last = |curve: &Curve| curve.runs.last().and_then(|run| run.last()).map(|point| vertical.y(point.1));
    let named: Vec<(&Curve, f64)> =
        curves.iter().filter(|curve| !curve.name.is_empty()).filter_map(|curve| Some((curve, last(curve)?))).collect();
    let wished: Vec<f64> = named.iter().map(|pair| pair.1).collect();
    let room = (vertical.top + 4.0, vertical.bottom - 4.0);
    for ((curve, from), to) in named.iter().zip(apart(&wished, LINE, room.0, room.1)) {
        let end = edge + KEY - 10.0;
        scene.curve(vec![(edge + 3.0, *from), (edge + 16.0, to), (end, to)], curve.width.min(STROKE), curve.look);
        if curve.width > STROKE {
            scene.curve(vec![(edge + 18.0, to), (end, to)], curve.width, curve.look);
        }
        if let Some(marker) = curve.look.marker {
            scene.marker((end - 11.0, to), marker, curve.look.color);
        }
        let name = font::fit(&curve.name, LABEL, limit);
        scene.text(&name, (edge + KEY, to), LABEL, INK, Anchor::Start);
    }
}

/// A remark in small grey letters, cut to `limit` pixels.
pub fn remark(scene: &mut Scene, text: &str, place: (f64, f64), anchor: Anchor, limit: f64) {
    let shown = font::fit(text, TICK, limit);
    scene.text(&shown, place, TICK, SOFT_INK, anchor);
}

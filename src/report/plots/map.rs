//! A quantity of a scan over two axes, as colours with a bar, contours, failed points hatched, and the best point.
use super::contour::contour;
use super::frame::{self, with_unit, EDGE, FOOT, HEIGHT, LABEL, TICK, WIDTH};
use super::palette::{Look, Marker, Rgb, AXIS, INK, SOFT_INK};
use super::ruler::{Laid, Ruler};
use super::scale::{engineering, short_number, ticks, Display};
use super::scene::{Anchor, Drawn, Scene, Underlay};
use super::shades::{shades, SHADES};
use super::{font, PlotError};

/// A map.
#[derive(Clone, Debug, Default)]
pub struct MapFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// The axis to the right.
    pub across: Ruler,
    /// The axis upwards.
    pub up: Ruler,
    /// What is shown.
    pub quantity: String,
    /// Its unit; empty for none.
    pub unit: String,
    /// Values, one for each cell; rows along `across`, one row after the other along `up`. NaN for none.
    pub values: Vec<f64>,
    /// Cells with a failed point.
    pub failed: Vec<bool>,
    /// Levels at which a line is drawn.
    pub contours: Vec<f64>,
    /// Best point: its places on both axes, and the level up to which its tolerance is met.
    pub best: Option<((f64, f64), Option<f64>)>,
    /// Said under the title, such as where further axes stand.
    pub remark: String,
}

/// Width in pixels of the colour bar.
const BAR: f64 = 34.0;
/// Space between the map and its bar.
const GAP: f64 = 46.0;
/// Contours shorter than this, in pixels, are specks.
const SHORTEST: f64 = 24.0;
/// Cells with a failed point.
const FAILED: [Rgb; 2] = [(150, 150, 150), (244, 244, 244)];

/// Draws a map. Errors: lengths that differ, nothing to draw.
pub fn map(figure: &MapFigure) -> Result<Drawn, PlotError> {
    let (wide, high) = (figure.across.places.len(), figure.up.places.len());
    if figure.values.len() != wide * high || figure.failed.len() != wide * high {
        return Err(PlotError::Length { column: figure.quantity.clone(), found: figure.values.len(), expected: wide * high });
    }
    let finite = || figure.values.iter().copied().filter(|value| value.is_finite());
    let any_failed = figure.failed.iter().any(|failed| *failed);
    let (low, top) = match (finite().reduce(f64::min), finite().reduce(f64::max)) {
        (Some(low), Some(top)) => (low, top),
        _ if any_failed => (0.0, 1.0),
        _ => return Err(PlotError::Nothing { title: figure.title.clone() }),
    };
    // one value alone is a colour in the middle
    let (low, top) = if top - low > 1e-12 * low.abs().max(top.abs()) {
        (low, top)
    } else {
        (low - 0.5 * low.abs().max(1.0), low + 0.5 * low.abs().max(1.0))
    };
    let display = engineering(low.abs().max(top.abs()), &figure.unit);
    let marks = ticks(display.shown(low), display.shown(top), 7);
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let head = frame::title(&mut scene, &figure.title);
    let start = head + if figure.remark.is_empty() { 14.0 } else { 40.0 } + 26.0;
    if !figure.remark.is_empty() {
        scene.text(&font::fit(&figure.remark, TICK, WIDTH - 2.0 * EDGE), (EDGE, head + 12.0), TICK, SOFT_INK, Anchor::Start);
    }
    let bottom = (HEIGHT - FOOT).floor();
    let probe = figure.up.between(bottom, start, true).ticks(8);
    let numbers = probe.iter().filter_map(|tick| tick.1.as_deref()).map(|text| font::width(text, TICK)).fold(0.0, f64::max);
    let bar_numbers = marks.iter().map(|mark| font::width(&mark.1, TICK)).fold(0.0, f64::max);
    let left = (EDGE + 18.0 + numbers.max(40.0)).ceil();
    let right = (WIDTH - EDGE - bar_numbers.max(60.0) - 16.0 - BAR - GAP).floor();
    let start = start.ceil();
    let (across, up) = (figure.across.between(left, right, true), figure.up.between(bottom, start, true));
    let colors = shades();
    let shade = |value: f64| colors[(((value - low) / (top - low) * (SHADES - 1) as f64).round().clamp(0.0, (SHADES - 1) as f64)) as usize];
    scene.underlay(cells(figure, (&across, left, right), (&up, start, bottom), &shade));
    axes(&mut scene, figure, (&across, left, right), (&up, start, bottom));
    lines(&mut scene, figure, &across, &up, &display);
    bar(&mut scene, (right + GAP, start, bottom), (low, top), &marks, &display, &colors);
    let name = with_unit(&font::fit(&figure.quantity, LABEL, 460.0), &display.unit);
    scene.text(&name, (WIDTH - EDGE, start - 20.0), LABEL, INK, Anchor::End);
    if any_failed {
        legend_of_failed(&mut scene, left);
    }
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

/// Which cell each pixel of an axis lies in, by the edges of the cells: first and one past the last.
fn cells_of_pixels(laid: &Laid, edges: &[f64], from: f64, count: usize) -> Vec<(usize, usize)> {
    let cells = edges.len() - 1;
    let rising = edges[cells] >= edges[0];
    // cells whose edges lie before a place
    let before = |place: f64| {
        if rising {
            edges.partition_point(|edge| *edge <= place)
        } else {
            edges.partition_point(|edge| *edge >= place)
        }
    };
    (0..count)
        .map(|k| {
            let ends = [laid.bent_at(from + k as f64), laid.bent_at(from + k as f64 + 1.0)];
            let middle = before(0.5 * (ends[0] + ends[1])).saturating_sub(1).min(cells - 1);
            let (a, b) = (before(ends[0]), before(ends[1]));
            // where cells are finer than pixels, all whose middle part lies within
            let (low, high) = (a.min(b), a.max(b));
            if high > low + 1 {
                (low.min(cells - 1), (high - 1).clamp(low + 1, cells))
            } else {
                (middle, middle + 1)
            }
        })
        .collect()
}

/// The coloured cells, pixel by pixel; where several cells fall on one, their mean.
fn cells(
    figure: &MapFigure,
    (across, left, right): (&Laid, f64, f64),
    (up, top, bottom): (&Laid, f64, f64),
    shade: &dyn Fn(f64) -> Rgb,
) -> Underlay {
    let (width, height) = ((right - left) as usize, (bottom - top) as usize);
    let columns = cells_of_pixels(across, &figure.across.edges(), left, width);
    let rows = cells_of_pixels(up, &figure.up.edges(), top, height);
    let wide = figure.across.places.len();
    let mut pixels = Vec::with_capacity(3 * width * height);
    for (y, (row, past_row)) in rows.iter().enumerate() {
        for (x, (column, past_column)) in columns.iter().enumerate() {
            let (mut sum, mut count, mut failed) = (0.0, 0, false);
            for r in *row..*past_row {
                for c in *column..*past_column {
                    let value = figure.values[r * wide + c];
                    failed |= figure.failed[r * wide + c];
                    if value.is_finite() {
                        sum += value;
                        count += 1;
                    }
                }
            }
            let color = if failed {
                FAILED[usize::from((x + y) % 8 >= 2)]
            } else if count > 0 {
                shade(sum / f64::from(count))
            } else {
                (255, 255, 255)
            };
            pixels.extend([color.0, color.1, color.2]);
        }
    }
    Underlay { corner: (left as usize, top as usize), width, pixels }
}

fn axes(scene: &mut Scene, figure: &MapFigure, (across, left, right): (&Laid, f64, f64), (up, top, bottom): (&Laid, f64, f64)) {
    scene.line(vec![(left, top), (right, top), (right, bottom), (left, bottom), (left, top)], 1.4, AXIS);
    let mut free = f64::NEG_INFINITY;
    for (x, text) in across.ticks(9) {
        let long = if text.is_some() { 7.0 } else { 4.0 };
        scene.line(vec![(x, bottom), (x, bottom + long)], 1.4, AXIS);
        if let Some(text) = text.filter(|text| x - font::width(text, TICK) / 2.0 > free) {
            scene.text(&text, (x, bottom + 23.0), TICK, INK, Anchor::Middle);
            free = x + font::width(&text, TICK) / 2.0 + 14.0;
        }
    }
    for (y, text) in up.ticks(8) {
        let long = if text.is_some() { 7.0 } else { 4.0 };
        scene.line(vec![(left - long, y), (left, y)], 1.4, AXIS);
        if let Some(text) = text {
            scene.text(&text, (left - 13.0, y), TICK, INK, Anchor::End);
        }
    }
    scene.text(&figure.across.label(), ((left + right) / 2.0, bottom + 60.0), LABEL, INK, Anchor::Middle);
    scene.text(&figure.up.label(), (left, top - 20.0), LABEL, INK, Anchor::Start);
}

/// Contours with their numbers, the region of the best point, and the point itself.
fn lines(scene: &mut Scene, figure: &MapFigure, across: &Laid, up: &Laid, display: &Display) {
    let wide = figure.across.places.len();
    let between = |places: &[f64], at: f64, laid: &Laid| {
        let k = (at.floor() as usize).min(places.len() - 1);
        let next = (k + 1).min(places.len() - 1);
        let (a, b) = (laid.pixel(places[k]), laid.pixel(places[next]));
        a + (b - a) * (at - k as f64)
    };
    let tolerance = figure.best.as_ref().and_then(|(_, level)| *level);
    let asked = figure.contours.iter().map(|level| (*level, None));
    for (level, dash) in asked.chain(tolerance.map(|level| (level, Some((9.0, 6.0))))) {
        let mut longest: Option<Vec<(f64, f64)>> = None;
        for line in contour(&figure.values, wide, level) {
            let points: Vec<(f64, f64)> =
                line.iter().map(|(x, y)| (between(&figure.across.places, *x, across), between(&figure.up.places, *y, up))).collect();
            let length: f64 = points.windows(2).map(|pair| (pair[1].0 - pair[0].0).hypot(pair[1].1 - pair[0].1)).sum();
            if length < SHORTEST {
                continue;
            }
            // dark on a light rim is seen on every shade
            scene.line(points.clone(), 4.4, (255, 255, 255));
            scene.curve(points.clone(), 2.0, Look { color: INK, marker: None, dash });
            if longest.as_ref().is_none_or(|other| points.len() > other.len()) {
                longest = Some(points);
            }
        }
        if let Some(points) = longest.filter(|points| points.len() > 8) {
            let text = short_number(display.shown(level));
            let half = font::width(&text, TICK) / 2.0 + 5.0;
            let (low, high) = (across.pixel_of_bent(f64::NEG_INFINITY), across.pixel_of_bent(f64::INFINITY));
            let (top, foot) = (up.pixel_of_bent(f64::INFINITY), up.pixel_of_bent(f64::NEG_INFINITY));
            let (x, y) = points[points.len() / 2];
            let (x, y) = (x.clamp(low + half, high - half), y.clamp(top + 14.0, foot - 14.0));
            scene.rectangle((x - half, y - 13.0), (x + half, y + 13.0), (255, 255, 255), 0.85);
            scene.text(&text, (x, y), TICK, INK, Anchor::Middle);
        }
    }
    if let Some(((x, y), _)) = figure.best {
        let at = (across.pixel(x), up.pixel(y));
        scene.marker(at, Marker::Diamond(false), INK);
    }
}

fn bar(
    scene: &mut Scene,
    (left, top, bottom): (f64, f64, f64),
    (low, high): (f64, f64),
    marks: &[(f64, String)],
    display: &Display,
    colors: &[Rgb],
) {
    let step = (bottom - top) / colors.len() as f64;
    for (k, color) in colors.iter().enumerate() {
        let y = bottom - step * k as f64;
        // each a little longer than its step, so that no seam shows
        let upper = if k + 1 == colors.len() { y - step } else { y - step - 0.7 };
        scene.rectangle((left, upper), (left + BAR, y), *color, 1.0);
    }
    scene.line(vec![(left, top), (left + BAR, top), (left + BAR, bottom), (left, bottom), (left, top)], 1.4, AXIS);
    for (value, text) in marks {
        let y = bottom - (bottom - top) * ((display.si(*value) - low) / (high - low)).clamp(0.0, 1.0);
        scene.line(vec![(left + BAR, y), (left + BAR + 7.0, y)], 1.4, AXIS);
        scene.text(text, (left + BAR + 12.0, y), TICK, INK, Anchor::Start);
    }
}

fn legend_of_failed(scene: &mut Scene, left: f64) {
    let y = HEIGHT - 20.0;
    for k in 0..5 {
        let x = left + 6.0 * f64::from(k);
        scene.line(vec![(x, y + 7.0), (x + 8.0, y - 7.0)], 1.6, FAILED[0]);
    }
    scene.text("failed points", (left + 44.0, y), TICK, SOFT_INK, Anchor::Start);
}

//! Quantities of a scan along one axis, or along several axes through one point, side by side.
use super::frame::{self, with_unit, EDGE, FOOT, HEIGHT, KEY, LABEL, LINE, TICK, WIDTH};
use super::palette::{look, Marker, AXIS, GRID, INK, SOFT_INK};
use super::place::apart;
use super::ruler::Ruler;
use super::scale::{engineering, ticks, Display};
use super::scene::{Anchor, Drawn, Scene};
use super::{font, PlotError};

/// Curves over one or several axes.
#[derive(Clone, Debug, Default)]
pub struct LinesFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// What is shown.
    pub quantity: String,
    /// Its unit; empty for none.
    pub unit: String,
    /// Side by side, with one vertical axis.
    pub panels: Vec<LinesPanel>,
    /// Values between which a band is drawn: the tolerance of a best value.
    pub band: Option<(f64, f64)>,
    /// Said under the title.
    pub remark: String,
}

/// Curves over one axis.
#[derive(Clone, Debug, Default)]
pub struct LinesPanel {
    /// The axis.
    pub across: Ruler,
    /// Name and values of each curve, one for each place of the axis; NaN where a point failed.
    pub curves: Vec<(String, Vec<f64>)>,
    /// Place of the point through which it goes.
    pub at: Option<f64>,
}

/// Up to so many points each has a disc.
const DISCS: usize = 60;
const NAME_LIMIT: f64 = 330.0;

/// Draws curves. Errors: lengths that differ, nothing to draw.
pub fn lines(figure: &LinesFigure) -> Result<Drawn, PlotError> {
    for (panel, (name, values)) in figure.panels.iter().flat_map(|panel| panel.curves.iter().map(move |curve| (panel, curve))) {
        if values.len() != panel.across.places.len() {
            return Err(PlotError::Length { column: name.clone(), found: values.len(), expected: panel.across.places.len() });
        }
    }
    let all = || figure.panels.iter().flat_map(|panel| &panel.curves).flat_map(|curve| curve.1.iter().copied()).filter(|v| v.is_finite());
    let (low, high) = all().reduce(f64::min).zip(all().reduce(f64::max)).ok_or(PlotError::Nothing { title: figure.title.clone() })?;
    let room = if high - low > 1e-9 * low.abs().max(high.abs()) { 0.05 * (high - low) } else { 0.2 * low.abs().max(0.5) };
    let (low, high) = (low - room, high + room);
    let display = engineering(low.abs().max(high.abs()), &figure.unit);
    let marks = ticks(display.shown(low), display.shown(high), 9);
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let head = frame::title(&mut scene, &figure.title);
    if !figure.remark.is_empty() {
        scene.text(&font::fit(&figure.remark, TICK, WIDTH - 2.0 * EDGE), (EDGE, head + 12.0), TICK, SOFT_INK, Anchor::Start);
    }
    let top = head + if figure.remark.is_empty() { 40.0 } else { 68.0 };
    let bottom = HEIGHT - FOOT;
    let numbers = marks.iter().map(|mark| font::width(&mark.1, TICK)).fold(0.0, f64::max);
    let left = EDGE + 18.0 + numbers.max(40.0);
    let named = figure.panels.iter().any(|panel| panel.curves.len() > 1);
    let names = figure.panels.iter().flat_map(|panel| panel.curves.iter().map(|curve| curve.0.as_str()));
    let right = if named { frame::right_edge(names, NAME_LIMIT) } else { WIDTH - EDGE - 8.0 };
    let count = figure.panels.len().max(1) as f64;
    let each = (right - left - 60.0 * (count - 1.0)) / count;
    for (k, panel) in figure.panels.iter().enumerate() {
        let from = left + k as f64 * (each + 60.0);
        let area = Area { left: from, right: from + each, top, bottom, low, high };
        area.draw(&mut scene, figure, panel, &display, &marks, k == 0);
    }
    scene.text(&with_unit(&font::fit(&figure.quantity, LABEL, 900.0), &display.unit), (left, top - 20.0), LABEL, INK, Anchor::Start);
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

/// One plot area.
struct Area {
    left: f64,
    right: f64,
    top: f64,
    bottom: f64,
    low: f64,
    high: f64,
}

impl Area {
    fn y(&self, value: f64) -> f64 {
        self.bottom - (self.bottom - self.top) * ((value - self.low) / (self.high - self.low)).clamp(0.0, 1.0)
    }

    fn draw(&self, scene: &mut Scene, figure: &LinesFigure, panel: &LinesPanel, display: &Display, marks: &[(f64, String)], first: bool) {
        if let Some((from, to)) = figure.band {
            scene.rectangle((self.left, self.y(to)), (self.right, self.y(from)), (236, 232, 214), 1.0);
        }
        for (value, text) in marks {
            let y = self.y(display.si(*value)).floor() + 0.5;
            scene.line(vec![(self.left, y), (self.right, y)], 1.0, GRID);
            if first {
                scene.text(text, (self.left - 12.0, y), TICK, INK, Anchor::End);
            }
        }
        let laid = panel.across.between(self.left, self.right, false);
        let wanted = ((self.right - self.left) / 105.0).round().max(2.0) as usize;
        let mut free = f64::NEG_INFINITY;
        for (x, text) in laid.ticks(wanted) {
            scene.line(vec![(x.floor() + 0.5, self.top), (x.floor() + 0.5, self.bottom)], 1.0, GRID);
            scene.line(vec![(x, self.bottom), (x, self.bottom + if text.is_some() { 7.0 } else { 4.0 })], 1.4, AXIS);
            if let Some(text) = text.filter(|text| x - font::width(text, TICK) / 2.0 > free) {
                scene.text(&text, (x, self.bottom + 23.0), TICK, INK, Anchor::Middle);
                free = x + font::width(&text, TICK) / 2.0 + 14.0;
            }
        }
        scene.line(vec![(self.left, self.top), (self.left, self.bottom), (self.right, self.bottom)], 1.4, AXIS);
        let label = font::fit(&panel.across.label(), LABEL, self.right - self.left);
        scene.text(&label, ((self.left + self.right) / 2.0, self.bottom + 60.0), LABEL, INK, Anchor::Middle);
        self.curves(scene, panel, &laid);
        if let Some(at) = panel.at {
            let x = laid.pixel(at);
            scene.curve(
                vec![(x, self.top), (x, self.bottom)],
                1.6,
                super::palette::Look { color: SOFT_INK, marker: None, dash: Some((7.0, 5.0)) },
            );
        }
    }

    fn curves(&self, scene: &mut Scene, panel: &LinesPanel, laid: &super::ruler::Laid) {
        let count = panel.curves.len();
        let mut ends = Vec::new();
        for (index, (_, values)) in panel.curves.iter().enumerate() {
            let look = look(index, count);
            // from left to right, whichever way the axis was scanned
            let mut points: Vec<(f64, Option<f64>)> = panel
                .across
                .places
                .iter()
                .zip(values)
                .map(|(place, value)| (laid.pixel(*place), value.is_finite().then(|| self.y(*value))))
                .collect();
            points.sort_by(|a, b| a.0.total_cmp(&b.0));
            for run in points.split(|point| point.1.is_none()) {
                let line: Vec<(f64, f64)> = run.iter().filter_map(|(x, y)| Some((*x, (*y)?))).collect();
                if line.len() == 1 {
                    scene.marker(line[0], Marker::Disc(true), look.color);
                } else if !line.is_empty() {
                    scene.curve(line.clone(), 2.2, look);
                }
                if points.len() <= DISCS {
                    let marker = look.marker.unwrap_or(Marker::Disc(true));
                    line.iter().for_each(|point| scene.marker(*point, marker, look.color));
                }
            }
            // a failed point stands as a cross at the foot, or where there are many as a stroke
            for (x, _) in points.iter().filter(|point| point.1.is_none()) {
                if points.len() <= DISCS {
                    scene.marker((*x, self.bottom - 10.0), Marker::Cross, SOFT_INK);
                } else {
                    scene.line(vec![(*x, self.bottom - 16.0), (*x, self.bottom - 4.0)], 1.2, SOFT_INK);
                }
            }
            ends.push(points.iter().rev().find_map(|point| point.1).unwrap_or(self.bottom));
        }
        if count < 2 {
            return;
        }
        for ((index, (name, _)), to) in panel.curves.iter().enumerate().zip(apart(&ends, LINE, self.top + 4.0, self.bottom - 4.0)) {
            let look = look(index, count);
            let end = self.right + KEY - 10.0;
            scene.curve(vec![(self.right + 3.0, ends[index]), (self.right + 16.0, to), (end, to)], 2.2, look);
            if let Some(marker) = look.marker {
                scene.marker((end - 11.0, to), marker, look.color);
            }
            scene.text(&font::fit(name, LABEL, NAME_LIMIT), (self.right + KEY, to), LABEL, INK, Anchor::Start);
        }
    }
}

//! States against time: panels of curves over a strip of pulses.
use super::frame::{self, right_edge, with_unit, x_grid, x_numbers, Window, EDGE, FOOT, HEIGHT, KEY, LABEL, LINE, TICK, WIDTH};
use super::marks::Marks;
use super::palette::{look, Look, Rgb, CURVES, GRID, INK, REST};
use super::panel::{curves, names, remark, Curve, Vertical, STROKE};
use super::scale::{engineering, quantity, Display};
use super::scene::{Anchor, Drawn, Scene};
use super::thin::{check_axis, check_length, column_count, columns, drawable, extent, thin, Run};
use super::{font, PlotError};

/// States against time.
#[derive(Clone, Debug, Default)]
pub struct TracesFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// Times in s of all curves, not decreasing.
    pub time_s: Vec<f64>,
    /// Plot areas, from top to bottom.
    pub panels: Vec<Panel>,
    /// Pulses of all drives.
    pub pulses: Vec<PulseBar>,
    /// Named moments (name, time in s).
    pub marks: Vec<(String, f64)>,
    /// Length of the sequence in s.
    pub end_s: f64,
}

/// One plot area of a `TracesFigure`.
#[derive(Clone, Debug, Default)]
pub struct Panel {
    /// What the values are, without unit.
    pub y_label: String,
    /// Their unit ("Hz" takes prefixes), empty for plain numbers.
    pub unit: String,
    /// Curves, the first drawn on top.
    pub series: Vec<Series>,
    /// Lowest and highest value of the axis. None: taken from the values; small positive ones over many decades get a
    /// logarithmic axis.
    pub range: Option<(f64, f64)>,
}

/// One curve of a `Panel`.
#[derive(Clone, Debug, Default)]
pub struct Series {
    /// Name at the end of the curve.
    pub name: String,
    /// One value a time; values that are not finite leave a hole.
    pub values: Vec<f64>,
    /// Half width of an error band around each value.
    pub band: Option<Vec<f64>>,
}

/// A pulse in the strip under the panels.
#[derive(Clone, Debug, Default)]
pub struct PulseBar {
    /// Name of the drive; each drive has a row, in order of first appearance.
    pub drive: String,
    /// Short name of the pulse.
    pub label: String,
    /// Start in s.
    pub start_s: f64,
    /// End in s.
    pub end_s: f64,
}

/// Panels in one figure; further ones are counted.
const PANELS: usize = 12;
/// Named curves in one panel; the others are drawn in grey.
const NAMED: usize = 16;
/// Rows of the strip; further drives are counted.
const ROWS: usize = 24;
/// Pixels of a name at most.
const NAME_LIMIT: f64 = 330.0;
/// Height of a row of the strip in pixels.
const ROW: f64 = 36.0;

/// Draws states against time. Errors: lengths that differ, times that decrease, nothing to draw.
pub fn traces(figure: &TracesFigure) -> Result<Drawn, PlotError> {
    check(figure)?;
    let window = time_window(figure).ok_or_else(|| PlotError::Nothing { title: figure.title.clone() })?;
    let mut panels: Vec<Prepared> = prepare(figure, &window);
    let drives = drives(figure);

    let all = panels.iter().flat_map(|panel| &panel.curves).map(|curve| curve.name.clone());
    let all: Vec<String> = all.chain(panels.iter().filter_map(|panel| panel.remark())).collect();
    let right = right_edge(all.iter().map(String::as_str), NAME_LIMIT);
    let drive_width = drives.iter().take(ROWS).map(|drive| font::width(&font::fit(drive, LABEL, 220.0), LABEL)).fold(0.0, f64::max);
    let number_width = panels.iter().map(|panel| panel.vertical.number_width()).fold(0.0, f64::max);
    let left = EDGE + 14.0 + drive_width.max(number_width).max(60.0);
    let window = Window { left, right, ..window };

    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    let marks = Marks::lay(&figure.marks, &[window]);
    let strip = ROW * drives.len().min(ROWS) as f64 + if drives.len() > ROWS { LINE } else { 0.0 } + marks.height();
    scene.height = heights(&mut panels, top, strip);

    let last_panel = panels.last().map_or(top + 20.0, |panel| panel.vertical.bottom);
    let bottom = last_panel + if strip > 0.0 { 12.0 + strip } else { 0.0 };
    let display = engineering(window.low.abs().max(window.high.abs()), "s");
    let first = panels.first().map_or(top, |panel| panel.vertical.top);
    let numbers = x_grid(&mut scene, &window, &display, 0.0, first, bottom);
    marks.guides(&mut scene, first, last_panel);
    for pair in panels.windows(2) {
        // White between the panels, so that the grid belongs to them alone.
        let corners = ((left - 2.0, pair[0].vertical.bottom), (right + 2.0, pair[1].vertical.top));
        scene.rectangle(corners.0, corners.1, (255, 255, 255), 1.0);
    }
    for panel in &panels {
        panel.draw(&mut scene, &window);
    }
    let below = last_panel + 12.0;
    marks.draw(&mut scene, below);
    bars(&mut scene, figure, &drives, &window, below + marks.height());
    x_numbers(&mut scene, &window, &numbers, bottom);
    foot(&mut scene, &window, &display, &figure.fingerprint);
    if figure.panels.len() > PANELS {
        let text = format!("… {} more panels", figure.panels.len() - PANELS);
        let place = (EDGE, scene.height - 20.0);
        remark(&mut scene, &text, place, Anchor::Start, 300.0);
    }
    scene.finish()
}

/// The label of the time axis and the fingerprint.
pub fn foot(scene: &mut Scene, window: &Window, display: &Display, fingerprint: &str) {
    let middle = ((window.left + window.right) / 2.0, scene.height - FOOT + 60.0);
    scene.text(&with_unit("time", &display.unit), middle, LABEL, INK, Anchor::Middle);
    frame::fingerprint(scene, fingerprint);
}

fn check(figure: &TracesFigure) -> Result<(), PlotError> {
    check_axis("time", &figure.time_s)?;
    let rows = figure.time_s.len();
    for series in figure.panels.iter().flat_map(|panel| &panel.series) {
        check_length(&series.name, series.values.len(), rows)?;
        if let Some(band) = &series.band {
            check_length(&format!("{} (band)", series.name), band.len(), rows)?;
        }
    }
    Ok(())
}

/// The span of time to show; none where no time is known.
fn time_window(figure: &TracesFigure) -> Option<Window> {
    let curves = figure.time_s.iter().take(1).chain(figure.time_s.last());
    let pulses = figure.pulses.iter().flat_map(|pulse| [&pulse.start_s, &pulse.end_s]);
    let marks = figure.marks.iter().map(|mark| &mark.1);
    let known: Vec<f64> = curves.chain(pulses).chain(marks).copied().filter(|time| drawable(*time)).collect();
    let low = known.iter().copied().reduce(f64::min)?;
    let high = known.into_iter().reduce(f64::max)?;
    let (low, high) = (low.min(0.0), if drawable(figure.end_s) { high.max(figure.end_s) } else { high });
    let (low, high) = widened(low, high);
    Some(Window { low, high, left: 0.0, right: 1.0 })
}

/// A span of some length, also where all happens in one moment.
pub fn widened(low: f64, high: f64) -> (f64, f64) {
    if high - low > 1e-12 * low.abs().max(high.abs()) && high - low > 1e-100 {
        return (low, high);
    }
    let half = if high == 0.0 { 0.5 } else { 0.1 * high.abs().max(1e-90) };
    (low - half, high + half)
}

struct Prepared<'a> {
    source: &'a Panel,
    curves: Vec<Curve>,
    vertical: Vertical,
    unnamed: usize,
}

impl Prepared<'_> {
    fn named(&self) -> usize {
        self.curves.iter().filter(|curve| !curve.name.is_empty()).count()
    }

    /// What is said about curves without a name.
    fn remark(&self) -> Option<String> {
        (self.unnamed > 0).then(|| format!("… {} more, in grey", self.unnamed))
    }

    fn draw(&self, scene: &mut Scene, window: &Window) {
        self.vertical.draw(scene, std::slice::from_ref(window), &self.source.y_label, 0.0);
        curves(scene, window, &self.vertical, &self.curves);
        names(scene, window.right, &self.vertical, &self.curves, NAME_LIMIT);
        if let Some(text) = self.remark() {
            let place = (window.right + KEY, self.vertical.bottom + 21.0);
            remark(scene, &text, place, Anchor::Start, WIDTH - EDGE - place.0);
        }
    }
}

/// Thins all curves and settles the axes; pixels are settled by `heights`.
fn prepare<'a>(figure: &'a TracesFigure, window: &Window) -> Vec<Prepared<'a>> {
    let shown = &figure.panels[..figure.panels.len().min(PANELS)];
    let count = shown.iter().flat_map(|panel| &panel.series).map(|series| if series.band.is_some() { 2 } else { 1 }).sum();
    let bounds = columns(&figure.time_s, window.low, window.high, column_count(figure.time_s.len(), count, 1400.0));
    shown.iter().map(|panel| prepare_panel(panel, &figure.time_s, &bounds)).collect()
}

fn prepare_panel<'a>(panel: &'a Panel, time: &[f64], bounds: &[usize]) -> Prepared<'a> {
    let mut curves: Vec<Curve> = Vec::new();
    let total = panel.series.len();
    for (index, series) in panel.series.iter().enumerate() {
        let runs = thin(time, &series.values, bounds);
        let bands = series.band.as_ref().map_or_else(Vec::new, |band| band_edges(time, &series.values, band, bounds));
        curves.push(Curve { name: shown_name(&series.name, index), runs, bands, look: look(index, total), width: STROKE });
    }
    let edges = curves.iter().flat_map(|curve| curve.bands.iter().flat_map(|band| [&band.0, &band.1]));
    let whole = extent(curves.iter().flat_map(|curve| &curve.runs).chain(edges));
    let unnamed = rest_in_grey(&mut curves);
    let vertical = match log_floor(panel, &curves, whole) {
        Some((floor, highest)) => Vertical::decades(floor, highest, &panel.unit),
        None => Vertical::linear(panel.range, whole, &panel.unit),
    };
    if vertical.log {
        // what lies below the axis is left out: drawn along its edge it would look like data
        let floor = 10f64.powf(vertical.low);
        for curve in &mut curves {
            curve.runs = curve
                .runs
                .iter()
                .flat_map(|run| run.split(|point| point.1 < floor))
                .filter(|run| !run.is_empty())
                .map(<[_]>::to_vec)
                .collect();
        }
    } else {
        name_the_tiny(&mut curves, &vertical, &panel.unit);
    }
    Prepared { source: panel, curves, vertical, unnamed }
}

/// `name` on one line, or a number for it.
pub fn shown_name(name: &str, index: usize) -> String {
    let name = font::clean(name.trim());
    if name.is_empty() {
        format!("curve {}", index + 1)
    } else {
        name
    }
}

/// A curve that lies flat on the axis gets its peak into its name, for the eye cannot tell it from zero.
fn name_the_tiny(curves: &mut [Curve], vertical: &Vertical, unit: &str) {
    for curve in curves.iter_mut().filter(|curve| !curve.name.is_empty()) {
        let Some((low, high)) = extent(&curve.runs) else { continue };
        let peak = low.abs().max(high.abs());
        if peak > 0.0 && peak < 0.004 * (vertical.high - vertical.low) && vertical.low < 0.0 {
            let size = format!(" ≤ {}", quantity(round_up(peak), unit));
            curve.name = font::fit(&curve.name, LABEL, NAME_LIMIT - font::width(&size, LABEL)) + &size;
        }
    }
}

/// The next number of two digits that is not below `value` (positive).
pub fn round_up(value: f64) -> f64 {
    let unit = 10f64.powf(value.log10().floor() - 1.0);
    let steps = (value / unit - 1e-9).ceil();
    if unit > 0.0 && steps.is_finite() {
        steps * unit
    } else {
        value
    }
}

/// Where there are too many curves to name, keeps the names of those with the largest values.
fn rest_in_grey(curves: &mut [Curve]) -> usize {
    if curves.len() <= NAMED {
        return 0;
    }
    let size = |curve: &Curve| extent(&curve.runs).map_or(-1.0, |(low, high)| low.abs().max(high.abs()));
    let mut order: Vec<usize> = (0..curves.len()).collect();
    order.sort_by(|a, b| size(&curves[*b]).total_cmp(&size(&curves[*a])));
    for &index in &order[NAMED..] {
        curves[index].name.clear();
        curves[index].look = Look { color: REST, marker: None, dash: None };
    }
    curves.len() - NAMED
}

/// Lowest and highest value of a logarithmic axis, where one is due: no range given, no value below zero, none above 0.1,
/// and a quarter of the values more than two decades below the largest.
fn log_floor(panel: &Panel, curves: &[Curve], whole: Option<(f64, f64)>) -> Option<(f64, f64)> {
    let (low, high) = whole?;
    if panel.range.is_some() || !panel.unit.is_empty() || low < 0.0 || !(1e-190..=0.1).contains(&high) {
        return None;
    }
    let mut positive: Vec<f64> =
        curves.iter().flat_map(|curve| &curve.runs).flatten().map(|point| point.1).filter(|value| *value > 0.0).collect();
    positive.sort_by(f64::total_cmp);
    if *positive.get(positive.len() / 4)? > high / 100.0 {
        return None;
    }
    // Rounding noise below a hundred-millionth of the peak must not fill the plot.
    Some((positive[positive.len() / 50].max(high * 1e-8), high))
}

/// Upper and lower edge of an error band, thinned; stretches are those of the curve.
fn band_edges(time: &[f64], values: &[f64], band: &[f64], bounds: &[usize]) -> Vec<(Run, Run)> {
    let mut pieces = Vec::new();
    let (mut upper, mut lower) = (Run::new(), Run::new());
    for pair in bounds.windows(2) {
        let (begin, past) = (pair[0], pair[1]);
        let both = |row: usize| (values[row] + band[row].abs(), values[row] - band[row].abs());
        let solid: Vec<usize> = (begin..past).filter(|row| drawable(both(*row).0) && drawable(both(*row).1)).collect();
        let (Some(first), Some(last)) = (solid.first(), solid.last()) else {
            if past > begin {
                pieces.push((std::mem::take(&mut upper), std::mem::take(&mut lower)));
            }
            continue;
        };
        let high = solid.iter().map(|row| both(*row).0).fold(f64::NEG_INFINITY, f64::max);
        let low = solid.iter().map(|row| both(*row).1).fold(f64::INFINITY, f64::min);
        let middle = time[*first] / 2.0 + time[*last] / 2.0;
        upper.push((middle, high));
        lower.push((middle, low));
    }
    pieces.push((upper, lower));
    pieces.retain(|piece| piece.0.len() > 1);
    pieces
}

/// Shares the height among the panels (the first gets double) and gives the height of the canvas.
fn heights(panels: &mut [Prepared], top: f64, strip: f64) -> f64 {
    let head = |panel: &Prepared| LINE + 12.0 + if panel.unnamed > 0 { 14.0 } else { 0.0 };
    let least = |panel: &Prepared| (panel.named() as f64 * LINE).max(130.0);
    let heads: f64 = panels.iter().map(head).sum();
    let fixed = top + heads - 8.0 + FOOT + if strip > 0.0 { strip + 12.0 } else { 0.0 };
    let free = (HEIGHT - fixed).max(0.0);
    let share = free / (panels.len() + 1) as f64;
    let mut y = top;
    let count = panels.len();
    for (index, panel) in panels.iter_mut().enumerate() {
        let wished = if count == 1 {
            free
        } else if index == 0 {
            2.0 * share
        } else {
            share
        };
        let height = wished.max(least(panel)).floor();
        let start = y + LINE + 4.0;
        panel.vertical = panel.vertical.clone().between(start, start + height);
        y = start + height + head(panel) - LINE - 4.0;
    }
    let end = panels.last().map_or(top + 20.0, |panel| panel.vertical.bottom);
    (end + if strip > 0.0 { strip + 12.0 } else { 0.0 } + FOOT).ceil().max(HEIGHT)
}

fn drives(figure: &TracesFigure) -> Vec<&str> {
    let mut seen = std::collections::HashSet::new();
    figure.pulses.iter().map(|pulse| pulse.drive.as_str()).filter(|drive| seen.insert(*drive)).collect()
}

/// Draws the strip from `y` on.
fn bars(scene: &mut Scene, figure: &TracesFigure, drives: &[&str], window: &Window, mut y: f64) {
    for (index, drive) in drives.iter().take(ROWS).enumerate() {
        let middle = y + ROW / 2.0;
        scene.line(vec![(window.left, middle), (window.right, middle)], 1.0, GRID);
        let name = font::fit(drive, LABEL, 220.0);
        scene.text(&name, (window.left - 12.0, middle), LABEL, INK, Anchor::End);
        row_of_bars(scene, figure, drive, CURVES[index % CURVES.len()], window, middle);
        y += ROW;
    }
    if drives.len() > ROWS {
        let text = format!("… {} more drives", drives.len() - ROWS);
        remark(scene, &text, (window.left, y + LINE / 2.0), Anchor::Start, window.right - window.left);
    }
}

/// A bar on the canvas: pulses closer together than half a pixel share one.
struct Bar<'a> {
    left: f64,
    right: f64,
    pulses: usize,
    label: &'a str,
}

fn row_of_bars(scene: &mut Scene, figure: &TracesFigure, drive: &str, color: Rgb, window: &Window, middle: f64) {
    let mine = figure.pulses.iter().filter(|pulse| pulse.drive == drive && drawable(pulse.start_s) && drawable(pulse.end_s));
    let mut pulses: Vec<&PulseBar> = mine.collect();
    pulses.sort_by(|a, b| a.start_s.total_cmp(&b.start_s));
    let mut row: Vec<Bar> = Vec::new();
    for pulse in pulses {
        let (left, right) = (window.x(pulse.start_s), window.x(pulse.end_s.max(pulse.start_s)));
        match row.last_mut() {
            // Pulses that touch stay apart as long as each is wide enough to be seen.
            Some(last) if left - last.right < 0.5 && (right - left < 3.0 || last.right - last.left < 3.0) => {
                last.right = last.right.max(right);
                last.pulses += 1;
            }
            _ => row.push(Bar { left, right, pulses: 1, label: &pulse.label }),
        }
    }
    // Right end of the last text that stands beside its bar.
    let mut taken = f64::NEG_INFINITY;
    for (index, bar) in row.iter().enumerate() {
        let half = ((bar.right - bar.left) / 2.0).max(1.3);
        let centre = (bar.left + bar.right) / 2.0;
        scene.rectangle((centre - half, middle - 13.0), (centre + half, middle + 13.0), color, 0.3);
        scene.line(vec![(centre - half, middle + 13.0), (centre - half, middle - 13.0)], 1.4, color);
        scene.line(vec![(centre + half, middle + 13.0), (centre + half, middle - 13.0)], 1.4, color);
        let label = if bar.pulses > 1 { format!("{} pulses", bar.pulses) } else { font::clean(bar.label.trim()) };
        let width = font::width(&label, TICK);
        let (before, after) = (index.checked_sub(1).map(|k| row[k].right), row.get(index + 1).map(|next| next.left));
        let overlapped = before.is_some_and(|end| end > bar.left + 1.0) || after.is_some_and(|start| start < bar.right - 1.0);
        if width + 12.0 <= bar.right - bar.left && !overlapped {
            scene.text(&label, (centre, middle), TICK, INK, Anchor::Middle);
        } else if centre + half + width + 16.0 <= after.unwrap_or(window.right) {
            scene.text(&label, (centre + half + 7.0, middle), TICK, INK, Anchor::Start);
            taken = centre + half + width + 16.0;
        } else if centre - half - width - 16.0 >= before.unwrap_or(window.left).max(taken) {
            scene.text(&label, (centre - half - 7.0, middle), TICK, INK, Anchor::End);
        }
    }
}

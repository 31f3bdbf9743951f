//! Variants of one calculation against time: for each quantity the curves over each other, and below them variant minus reference.
use super::frame::{self, right_edge, x_grid, x_numbers, Window, EDGE, FOOT, HEIGHT, LINE, WIDTH};
use super::palette::{Look, Marker, Rgb, AXIS, CURVES};
use super::panel::{curves, names, remark, Curve, Vertical, STROKE};
use super::scale::{engineering, quantity};
use super::scene::{Anchor, Drawn, Scene};
use super::thin::{check_axis, check_length, column_count, columns, drawable, extent, thin, Run};
use super::traces::{foot, round_up, shown_name, widened};
use super::{font, PlotError};

/// Variants of one calculation against time, and what sets them apart from a reference.
#[derive(Clone, Debug, Default)]
pub struct CompareFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// Name of the reference.
    pub reference: String,
    /// Times in s of all curves that have none of their own, not decreasing.
    pub time_s: Vec<f64>,
    /// Quantities, from top to bottom.
    pub panels: Vec<ComparePanel>,
    /// Difference that is tolerated, in the units of the quantities.
    pub tolerance: Option<f64>,
    /// Length of the sequence in s.
    pub end_s: f64,
}

/// One quantity of a `CompareFigure`.
#[derive(Clone, Debug, Default)]
pub struct ComparePanel {
    /// What the values are, without unit, for example "population".
    pub y_label: String,
    /// Their unit ("Hz" takes prefixes), empty for plain numbers.
    pub unit: String,
    /// Which one it is, for example "|1⟩"; may be empty.
    pub quantity: String,
    /// The quantity in all variants, the reference first.
    pub variants: Vec<CompareSeries>,
    /// Variant minus reference, each named as its variant (else in the order of the variants behind the reference).
    pub differences: Vec<CompareSeries>,
    /// Lowest and highest value of the upper axis; taken from the values where none.
    pub range: Option<(f64, f64)>,
}

/// One curve of a `ComparePanel`.
#[derive(Clone, Debug, Default)]
pub struct CompareSeries {
    /// Name at the end of the curve.
    pub name: String,
    /// Its times in s, not decreasing; none for those of the figure.
    pub time_s: Option<Vec<f64>>,
    /// One value a time; values that are not finite leave a hole.
    pub values: Vec<f64>,
}

impl CompareSeries {
    fn times<'a>(&'a self, figure: &'a CompareFigure) -> &'a [f64] {
        self.time_s.as_ref().unwrap_or(&figure.time_s)
    }
}

/// Quantities in one figure, and curves in one panel; further ones are counted.
const PANELS: usize = 4;
const CURVES_SHOWN: usize = 7;
/// Curves of a figure up to which variants are dashed.
const DASHED: usize = 40;
/// Pixels of a name at most.
const NAME_LIMIT: f64 = 330.0;
/// Width in pixels of the reference, which lies under the variants.
const STRONG: f64 = 5.0;
/// Least heights in pixels of the two panels of a quantity.
const LEAST: (f64, f64) = (170.0, 120.0);
/// Dashes and markers of the variants, in order.
const DASHES: [Option<(f64, f64)>; 4] = [Some((14.0, 8.0)), Some((4.0, 8.0)), Some((24.0, 7.0)), Some((9.0, 5.0))];
const MARKERS: [Marker; 8] = [
    Marker::Disc(false),
    Marker::Triangle(true),
    Marker::Square(false),
    Marker::Diamond(true),
    Marker::Plus,
    Marker::Cross,
    Marker::Triangle(false),
    Marker::Disc(true),
];

/// Draws variants and their differences. Errors: lengths that differ, times that decrease, no finite value at all.
pub fn compare(figure: &CompareFigure) -> Result<Drawn, PlotError> {
    check(figure)?;
    let nothing = || PlotError::Nothing { title: figure.title.clone() };
    let (low, high) = time_span(figure).ok_or_else(nothing)?;
    let window = Window { low, high, left: 0.0, right: 1.0 };
    let mut panels = prepare(figure, &window);
    if panels.iter().all(|panel| panel.curves.iter().all(|curve| curve.runs.is_empty())) {
        return Err(nothing());
    }
    let right = right_edge(panels.iter().flat_map(|panel| &panel.curves).map(|curve| curve.name.as_str()), NAME_LIMIT);
    let numbers = panels.iter().map(|panel| panel.vertical.number_width()).fold(0.0, f64::max);
    let window = Window { left: EDGE + 14.0 + numbers.max(60.0), right, ..window };

    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    scene.height = heights(&mut panels, top);
    let display = engineering(window.low.abs().max(window.high.abs()), "s");
    let mut ticks = Vec::new();
    for panel in &panels {
        let (top, bottom) = (panel.vertical.top, panel.vertical.bottom);
        ticks = x_grid(&mut scene, &window, &display, 0.0, top, bottom);
        scene.line(vec![(window.left, bottom), (window.right, bottom)], 1.0, AXIS);
        panel.draw(&mut scene, &window);
    }
    x_numbers(&mut scene, &window, &ticks, panels.last().map_or(top, |panel| panel.vertical.bottom));
    foot(&mut scene, &window, &display, &figure.fingerprint);
    let text = left_out(figure);
    let place = (EDGE, scene.height - 20.0);
    remark(&mut scene, &text, place, Anchor::Start, 700.0);
    scene.finish()
}

fn check(figure: &CompareFigure) -> Result<(), PlotError> {
    check_axis("time", &figure.time_s)?;
    for series in figure.panels.iter().flat_map(|panel| panel.variants.iter().chain(&panel.differences)) {
        if let Some(own) = &series.time_s {
            check_axis(&series.name, own)?;
        }
        check_length(&series.name, series.values.len(), series.times(figure).len())?;
    }
    Ok(())
}

/// The span of time to show; none where no time is known.
fn time_span(figure: &CompareFigure) -> Option<(f64, f64)> {
    let series = figure.panels.iter().flat_map(|panel| panel.variants.iter().chain(&panel.differences));
    let ends = series.filter_map(|series| series.times(figure).first().copied().zip(series.times(figure).last().copied()));
    let (low, high) = ends.reduce(|one, other| (one.0.min(other.0), one.1.max(other.1)))?;
    let end = if drawable(figure.end_s) { high.max(figure.end_s) } else { high };
    Some(widened(low.min(0.0), end))
}

/// One panel: the variants of a quantity, or their differences.
struct Prepared {
    label: String,
    /// What is said at the right above the panel.
    said: String,
    curves: Vec<Curve>,
    vertical: Vertical,
    /// Whether it is a panel of differences, which belongs to the panel above.
    lower: bool,
}

impl Prepared {
    fn named(&self) -> usize {
        self.curves.iter().filter(|curve| !curve.name.is_empty()).count()
    }

    fn draw(&self, scene: &mut Scene, window: &Window) {
        self.vertical.draw(scene, std::slice::from_ref(window), &self.label, 0.0);
        curves(scene, window, &self.vertical, &self.curves);
        names(scene, window.right, &self.vertical, &self.curves, NAME_LIMIT);
        let place = (window.right, self.vertical.top - 17.0);
        remark(scene, &self.said, place, Anchor::End, (window.right - window.left) / 2.0);
    }
}

fn prepare(figure: &CompareFigure, window: &Window) -> Vec<Prepared> {
    let shown = &figure.panels[..figure.panels.len().min(PANELS)];
    let count = |panel: &ComparePanel| panel.variants.len().min(CURVES_SHOWN) + panel.differences.len().min(CURVES_SHOWN - 1);
    let all = shown.iter().map(count).sum();
    let mut panels = Vec::new();
    for panel in shown {
        panels.push(upper(figure, panel, window, all));
        panels.extend(lower(figure, panel, window, all));
    }
    panels
}

/// The stretches of a curve that is one of `count`.
fn runs(figure: &CompareFigure, series: &CompareSeries, window: &Window, count: usize) -> Vec<Run> {
    let times = series.times(figure);
    thin(times, &series.values, &columns(times, window.low, window.high, column_count(times.len(), count, 1400.0)))
}

fn upper(figure: &CompareFigure, panel: &ComparePanel, window: &Window, count: usize) -> Prepared {
    let shown = panel.variants.iter().take(CURVES_SHOWN).enumerate();
    let mut drawn: Vec<Curve> = shown
        .map(|(index, series)| {
            let width = if index == 0 { STRONG } else { STROKE };
            let name = shown_name(&series.name, index);
            let look = variant_look(index);
            // Every dash is a path of its own in the SVG; among many curves colour and marker must do.
            let look = Look { dash: look.dash.filter(|_| count <= DASHED), ..look };
            Curve { name, runs: runs(figure, series, window, count), bands: Vec::new(), look, width }
        })
        .collect();
    let vertical = Vertical::linear(panel.range, extent(drawn.iter().flat_map(|curve| &curve.runs)), &panel.unit);
    // The first is drawn on top, so the strong reference must be last.
    let reference = usize::from(!drawn.is_empty());
    drawn.rotate_left(reference);
    Prepared { label: upper_label(panel), said: String::new(), curves: drawn, vertical, lower: false }
}

/// Look of variant `index`; 0 is the reference.
fn variant_look(index: usize) -> Look {
    let color: Rgb = if index == 0 { (132, 144, 166) } else { VARIANTS[(index - 1) % VARIANTS.len()] };
    let Some(variant) = index.checked_sub(1) else { return Look { color, marker: None, dash: None } };
    let marker = (variant > 0).then(|| MARKERS[(variant - 1) % MARKERS.len()]);
    Look { color, marker, dash: DASHES[variant % DASHES.len()] }
}

/// Colours of the variants.
const VARIANTS: [Rgb; 8] = [CURVES[1], CURVES[0], CURVES[3], CURVES[4], CURVES[6], CURVES[5], CURVES[7], CURVES[2]];

fn upper_label(panel: &ComparePanel) -> String {
    let parts = [panel.quantity.trim(), panel.y_label.trim()];
    parts.into_iter().filter(|part| !part.is_empty()).collect::<Vec<_>>().join(": ")
}

/// The panel of differences; none where there is no difference to draw.
fn lower(figure: &CompareFigure, panel: &ComparePanel, window: &Window, count: usize) -> Option<Prepared> {
    let mut drawn = Vec::new();
    for (index, series) in panel.differences.iter().take(CURVES_SHOWN - 1).enumerate() {
        let same = |variant: &CompareSeries| variant.name == series.name;
        let owner = panel.variants.iter().skip(1).position(same).map_or(index, |found| found);
        let runs = runs(figure, series, window, count);
        // Differences lie apart, so that colour and marker do.
        let look = Look { dash: None, ..variant_look(owner + 1) };
        let largest = extent(&runs).map(|(low, high)| low.abs().max(high.abs()));
        let size = largest.map_or(String::new(), |largest| {
            format!(" ≤ {}", if largest > 0.0 { quantity(round_up(largest), &panel.unit) } else { "0".into() })
        });
        let name = font::fit(&shown_name(&series.name, index), frame::LABEL, NAME_LIMIT - font::width(&size, frame::LABEL)) + &size;
        drawn.push(Curve { name, runs, bands: Vec::new(), look, width: STROKE });
    }
    let (low, high) = extent(drawn.iter().flat_map(|curve| &curve.runs))?;
    let largest = low.abs().max(high.abs());
    let (mut low, mut high) = (low.min(0.0), high.max(0.0));
    let mut said = String::new();
    if let Some(tolerance) = figure.tolerance.map(f64::abs).filter(|tolerance| drawable(*tolerance) && *tolerance > 0.0) {
        let size = quantity(tolerance, &panel.unit);
        if tolerance > 2.5 * largest {
            said = format!("all within the tolerance of {size}");
        } else if tolerance < 0.06 * largest {
            said = format!("tolerance {size}: too small to show here");
        } else {
            (low, high) = (low.min(-tolerance), high.max(tolerance));
            // First, so that they lie on top.
            drawn.splice(0..0, tolerance_lines(tolerance, &size, window));
        }
    }
    let vertical = Vertical::linear(None, Some((low, high)), &panel.unit);
    let reference = figure.reference.trim();
    let label = format!("minus {}", if reference.is_empty() { "reference" } else { reference });
    Some(Prepared { label, said, curves: drawn, vertical, lower: true })
}

/// Two thin lines; the upper one carries the name.
fn tolerance_lines(tolerance: f64, size: &str, window: &Window) -> [Curve; 2] {
    let look = Look { color: (70, 70, 70), marker: None, dash: Some((2.0, 4.0)) };
    let line = |value: f64, name: String| {
        let runs = vec![vec![(window.low, value), (window.high, value)]];
        Curve { name, runs, bands: Vec::new(), look, width: 1.2 }
    };
    [line(tolerance, format!("tolerance ±{size}")), line(-tolerance, String::new())]
}

/// Shares the height, two parts for curves and one for differences, and gives the height of the canvas.
fn heights(panels: &mut [Prepared], top: f64) -> f64 {
    let head = |panel: &Prepared| if panel.lower { LINE + 8.0 } else { LINE + 16.0 };
    let least = |panel: &Prepared| (panel.named() as f64 * LINE + 6.0).max(if panel.lower { LEAST.1 } else { LEAST.0 });
    let weight = |panel: &Prepared| if panel.lower { 1.0 } else { 1.7 };
    let fixed = top + panels.iter().map(head).sum::<f64>() + FOOT;
    let share = (HEIGHT - fixed).max(0.0) / panels.iter().map(weight).sum::<f64>().max(1.0);
    let mut y = top - 8.0;
    for panel in panels.iter_mut() {
        let start = y + head(panel);
        let end = start + (share * weight(panel)).max(least(panel)).floor();
        panel.vertical = panel.vertical.clone().between(start, end);
        y = end;
    }
    (y + FOOT).ceil().max(HEIGHT)
}

/// Says what was left out.
fn left_out(figure: &CompareFigure) -> String {
    let mut said = Vec::new();
    let quantities = figure.panels.len().saturating_sub(PANELS);
    if quantities > 0 {
        said.push(format!("… {quantities} more {}", if quantities == 1 { "quantity" } else { "quantities" }));
    }
    let most = figure.panels.iter().take(PANELS).map(|panel| panel.variants.len()).max().unwrap_or(0);
    if most > CURVES_SHOWN {
        said.push(format!("… {} more variants", most - CURVES_SHOWN));
    }
    said.join("; ")
}

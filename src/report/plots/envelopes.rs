//! Pulses against time: one row per drive, and one below it where the carrier is swept.
use super::frame::{self, right_edge, with_unit, x_grid, x_numbers, Window, EDGE, FOOT, HEIGHT, LABEL, LINE, SMALL, TICK, WIDTH};
use super::marks::Marks;
use super::palette::{Look, AXIS, CURVES, INK, REST, SOFT_INK};
use super::panel::{curves, names, remark, Curve, Vertical, STROKE};
use super::place::Lanes;
use super::scale::{engineering, number, with_digits};
use super::scene::{Anchor, Drawn, Scene};
use super::thin::{check_axis, check_length, column_count, columns, drawable, extent, thin, Run};
use super::windows::{view, Span, View, GAP};
use super::{font, PlotError};

/// Pulses against time.
#[derive(Clone, Debug, Default)]
pub struct EnvelopesFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// All pulses, in any order.
    pub pulses: Vec<EnvelopeCurve>,
    /// Named moments (name, time in s).
    pub marks: Vec<(String, f64)>,
    /// Length of the sequence in s.
    pub end_s: f64,
}

/// One pulse.
#[derive(Clone, Debug, Default)]
pub struct EnvelopeCurve {
    /// Name of the drive; each drive has a row, in order of first appearance.
    pub drive: String,
    /// Name of the envelope.
    pub envelope: String,
    /// What the size of this drive is, without unit: "Rabi frequency", or "matrix element" for a direct drive.
    pub size_label: String,
    /// Start in s.
    pub start_s: f64,
    /// Times in s counted from the start, not decreasing, the last one the length of the pulse.
    pub time_s: Vec<f64>,
    /// Size in Hz at each time, in phase with the carrier.
    pub in_phase_hz: Vec<f64>,
    /// Size in Hz at each time, a quarter turn ahead (derivative correction).
    pub quadrature_hz: Option<Vec<f64>>,
    /// Frequency in Hz at each time, less that at the centre (chirp).
    pub instantaneous_hz: Option<Vec<f64>>,
}

impl EnvelopeCurve {
    fn end_s(&self) -> f64 {
        self.start_s + self.time_s.last().copied().unwrap_or(0.0)
    }
}

/// Rows at most; further drives are counted.
const ROWS: usize = 16;
const NAME_LIMIT: f64 = 240.0;

/// Draws pulses. Errors: lengths that differ, times that decrease, nothing to draw.
pub fn envelopes(figure: &EnvelopesFigure) -> Result<Drawn, PlotError> {
    for pulse in &figure.pulses {
        check_pulse(pulse)?;
    }
    let mut pulses: Vec<&EnvelopeCurve> =
        figure.pulses.iter().filter(|pulse| drawable(pulse.start_s) && !pulse.time_s.is_empty()).collect();
    pulses.sort_by(|a, b| a.start_s.total_cmp(&b.start_s));
    if pulses.is_empty() {
        return Err(PlotError::Nothing { title: figure.title.clone() });
    }
    let spans: Vec<Span> = pulses.iter().map(|pulse| span(pulse)).collect();
    let last = spans.iter().map(|span| span.end).fold(if drawable(figure.end_s) { figure.end_s } else { 0.0 }, f64::max);
    let low = spans[0].start.min(0.0);

    let drives = drives(figure);
    // The axis is settled twice: what it shows decides how wide its numbers are.
    let right = right_edge(names_of(&pulses), NAME_LIMIT);
    let draft = view(&spans, (low, last), 130.0, right);
    let drafted = rows(&pulses, &drives, &draft);
    let width = drafted.iter().map(|row| row.vertical.clone().between(0.0, 300.0).number_width()).fold(60.0, f64::max);
    let view = view(&spans, (low, last), EDGE + 14.0 + width, right);
    let mut rows = rows(&pulses, &drives, &view);

    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    let marks = Marks::lay(&figure.marks, &view.windows);
    let lift = if marks.height() > 0.0 { marks.height() + 14.0 } else { 0.0 };
    scene.height = heights(&mut rows, top, lift, drives.len() > ROWS);
    let bottom = rows[rows.len() - 1].vertical.bottom;
    for row in &rows {
        marks.guides(&mut scene, row.vertical.top, row.vertical.bottom);
        row.draw(&mut scene, &view, right);
    }
    name_gaps(&mut scene, &view, &rows[0].vertical);
    marks.draw(&mut scene, bottom + 8.0);
    time_axis(&mut scene, &view, bottom + lift);
    foot(&mut scene, figure, &view, drives.len());
    scene.finish()
}

fn check_pulse(pulse: &EnvelopeCurve) -> Result<(), PlotError> {
    let name = format!("{}, {}", pulse.drive, pulse.envelope);
    let points = pulse.time_s.len();
    check_axis(&name, &pulse.time_s)?;
    check_length(&name, pulse.in_phase_hz.len(), points)?;
    for (part, values) in [("quadrature", &pulse.quadrature_hz), ("instantaneous frequency", &pulse.instantaneous_hz)] {
        if let Some(values) = values {
            check_length(&format!("{name}, {part}"), values.len(), points)?;
        }
    }
    Ok(())
}

fn drives(figure: &EnvelopesFigure) -> Vec<&str> {
    let mut seen = std::collections::HashSet::new();
    figure.pulses.iter().map(|pulse| pulse.drive.as_str()).filter(|drive| seen.insert(*drive)).collect()
}

fn names_of<'a>(pulses: &[&EnvelopeCurve]) -> Vec<&'a str> {
    if pulses.iter().any(|pulse| pulse.quadrature_hz.is_some()) {
        vec!["in phase", "quadrature"]
    } else {
        Vec::new()
    }
}

fn span(pulse: &EnvelopeCurve) -> Span {
    let sums = |values: &[f64]| {
        let drawn = values.iter().copied().filter(|value| drawable(*value));
        [drawn.clone().sum::<f64>(), drawn.map(f64::abs).fold(0.0, f64::max)]
    };
    let parts = [Some(&pulse.in_phase_hz), pulse.quadrature_hz.as_ref(), pulse.instantaneous_hz.as_ref()];
    let shape = parts.into_iter().flatten().flat_map(|values| sums(values)).collect();
    Span { start: pulse.start_s, end: pulse.end_s(), names: (pulse.drive.clone(), pulse.envelope.clone()), shape }
}

/// One plot area across all windows.
struct Row {
    label: String,
    vertical: Vertical,
    /// Curves of each window.
    curves: Vec<Vec<Curve>>,
    timings: Vec<Timing>,
    lanes: usize,
}

/// Start, centre and end of a pulse, and the text that says so.
struct Timing {
    at: [f64; 3],
    text: Option<(usize, f64, String)>,
}

fn rows(pulses: &[&EnvelopeCurve], drives: &[&str], view: &View) -> Vec<Row> {
    let mut rows = Vec::new();
    let inside: Vec<(usize, &EnvelopeCurve)> = pulses.iter().filter_map(|pulse| Some((holder(view, pulse)?, *pulse))).collect();
    let parts =
        inside.iter().map(|(_, pulse)| 1 + usize::from(pulse.quadrature_hz.is_some()) + usize::from(pulse.instantaneous_hz.is_some()));
    let budget = parts.sum();
    for drive in drives.iter().take(ROWS) {
        let mine: Vec<(usize, &EnvelopeCurve)> = inside.iter().filter(|(_, pulse)| pulse.drive == *drive).copied().collect();
        rows.push(size_row(drive, &mine, view, budget));
        if mine.iter().any(|(_, pulse)| pulse.instantaneous_hz.is_some()) {
            rows.push(sweep_row(drive, &mine, view, budget));
        }
    }
    rows
}

/// The window that shows a pulse.
fn holder(view: &View, pulse: &EnvelopeCurve) -> Option<usize> {
    view.windows.iter().position(|window| window.holds(pulse.start_s) && window.holds(pulse.end_s()))
}

fn stretches(pulse: &EnvelopeCurve, values: &[f64], window: &Window, budget: usize, from_zero: bool) -> Vec<Run> {
    let length = pulse.time_s[pulse.time_s.len() - 1];
    let width = (window.x(pulse.end_s()) - window.x(pulse.start_s)).max(8.0);
    let bounds = columns(&pulse.time_s, f64::MIN, f64::MAX, 1);
    let bounds = match column_count(pulse.time_s.len(), budget, width) {
        count if length > 0.0 => columns(&pulse.time_s, pulse.time_s[0].min(0.0), length, count),
        _ => bounds,
    };
    let mut runs = thin(&pulse.time_s, values, &bounds);
    for point in runs.iter_mut().flatten() {
        point.0 += pulse.start_s;
    }
    if from_zero {
        if let Some(first) = runs.first_mut().and_then(|run| run.first().copied().map(|point| (run, point))) {
            first.0.insert(0, (first.1 .0, 0.0));
        }
        if let Some(last) = runs.last_mut().and_then(|run| run.last().copied().map(|point| (run, point))) {
            last.0.push((last.1 .0, 0.0));
        }
    }
    runs
}

fn size_row(drive: &str, mine: &[(usize, &EnvelopeCurve)], view: &View, budget: usize) -> Row {
    let quadrature = mine.iter().any(|(_, pulse)| pulse.quadrature_hz.is_some());
    let mut in_windows = Vec::new();
    for (index, window) in view.windows.iter().enumerate() {
        let here = || mine.iter().filter(move |(holder, _)| *holder == index).map(|pair| pair.1);
        let runs: Vec<Run> = here().flat_map(|pulse| stretches(pulse, &pulse.in_phase_hz, window, budget, true)).collect();
        let bands = runs.iter().map(|run| (run.clone(), run.iter().map(|point| (point.0, 0.0)).collect())).collect();
        let name = if quadrature { "in phase" } else { "" };
        let mut here_curves =
            vec![Curve { name: name.into(), runs, bands, look: Look { color: CURVES[0], marker: None, dash: None }, width: STROKE }];
        if quadrature {
            let part = |pulse: &EnvelopeCurve| pulse.quadrature_hz.as_ref().map(|values| stretches(pulse, values, window, budget, true));
            let runs = here().filter_map(part).flatten().collect();
            let look = Look { color: CURVES[1], marker: None, dash: Some((10.0, 6.0)) };
            here_curves.push(Curve { name: "quadrature".into(), runs, bands: Vec::new(), look, width: STROKE });
        }
        in_windows.push(here_curves);
    }
    let whole = extent(in_windows.iter().flatten().flat_map(|curve| &curve.runs)).map(|(low, high)| (low.min(0.0), high.max(0.0)));
    let what = mine.iter().map(|(_, pulse)| pulse.size_label.as_str()).find(|label| !label.is_empty()).unwrap_or("size");
    let (timings, lanes) = timings(mine, view);
    let label = format!("{}: {what}", font::fit(drive, LABEL, 500.0));
    Row { label, vertical: Vertical::linear(None, whole, "Hz"), curves: in_windows, timings, lanes }
}

fn sweep_row(drive: &str, mine: &[(usize, &EnvelopeCurve)], view: &View, budget: usize) -> Row {
    let mut in_windows = Vec::new();
    for (index, window) in view.windows.iter().enumerate() {
        let here = mine.iter().filter(|(holder, _)| *holder == index).map(|pair| pair.1);
        let part = |pulse: &EnvelopeCurve| pulse.instantaneous_hz.as_ref().map(|values| stretches(pulse, values, window, budget, false));
        let runs = here.filter_map(part).flatten().collect();
        let look = Look { color: CURVES[3], marker: None, dash: None };
        in_windows.push(vec![Curve { name: String::new(), runs, bands: Vec::new(), look, width: STROKE }]);
    }
    let whole = extent(in_windows.iter().flatten().flat_map(|curve| &curve.runs));
    let label = format!("{}: carrier sweep", font::fit(drive, LABEL, 500.0));
    Row { label, vertical: Vertical::linear(None, whole, "Hz"), curves: in_windows, timings: Vec::new(), lanes: 0 }
}

/// Where start, centre and end of each pulse lie, and as much text about them as there is room for.
fn timings(mine: &[(usize, &EnvelopeCurve)], view: &View) -> (Vec<Timing>, usize) {
    let (left, right) = (view.windows[0].left, view.windows[view.windows.len() - 1].right + if view.after.is_some() { GAP } else { 0.0 });
    // The longest form for which all pulses of the row have room; the shortest is written where it can be.
    for form in 0..FORMS {
        let mut lanes = Lanes::new(2, 16.0);
        let mut timings = Vec::new();
        for (holder, pulse) in mine {
            let (window, origin) = (&view.windows[*holder], view.origins[*holder]);
            let (start, end) = (pulse.start_s, pulse.end_s());
            let at = [start, start / 2.0 + end / 2.0, end].map(|time| window.x(time));
            let text = wording(pulse, start - origin, end - origin, form);
            let width = font::width(&text, TICK);
            let begin = (at[1] - width / 2.0).clamp(left, (right - width).max(left));
            let text = lanes.take(begin, begin + width).map(|lane| (lane, begin, text));
            timings.push(Timing { at, text });
        }
        if form + 1 == FORMS || timings.iter().all(|timing| timing.text.is_some()) {
            return (timings, lanes.used());
        }
    }
    (Vec::new(), 0)
}

/// Forms of the text about a pulse.
const FORMS: usize = 4;

/// What to say about a pulse from `start` to `end` (s), in a form from long (0) to short.
fn wording(pulse: &EnvelopeCurve, start: f64, end: f64, form: usize) -> String {
    let display = engineering(start.abs().max(end.abs()), "s");
    let text = |time: f64| number(display.shown(time), 7);
    let name = font::fit(&pulse.envelope, TICK, 300.0);
    let range = format!("{} to {} {}", text(start), text(end), display.unit);
    match form {
        0 => format!("{name}: {range}, centre {} {}", text(start / 2.0 + end / 2.0), display.unit),
        1 => format!("{name}: {range}"),
        2 => range,
        _ => with_digits(end - start, "s", 4),
    }
}

fn heights(rows: &mut [Row], top: f64, marks: f64, more: bool) -> f64 {
    let head = |row: &Row| LINE + 12.0 + LINE * row.lanes as f64;
    let fixed = top - 6.0 + rows.iter().map(head).sum::<f64>() + FOOT + marks + if more { LINE } else { 0.0 };
    let height = ((HEIGHT - fixed) / rows.len() as f64).max(120.0).floor();
    let mut y = top;
    for row in rows.iter_mut() {
        let start = y + head(row) - 6.0;
        row.vertical = row.vertical.clone().between(start, start + height);
        y = start + height + 6.0;
    }
    (y - 6.0 + FOOT + marks + if more { LINE } else { 0.0 }).max(HEIGHT)
}

impl Row {
    fn draw(&self, scene: &mut Scene, view: &View, right: f64) {
        let (top, bottom) = (self.vertical.top, self.vertical.bottom);
        for (window, origin) in view.windows.iter().zip(&view.origins) {
            let display = engineering((window.high - origin).abs().max((window.low - origin).abs()), "s");
            x_grid(scene, window, &display, *origin, top, bottom);
        }
        // The label stands above the texts about timing.
        self.vertical.draw(scene, &view.windows, &self.label, LINE * self.lanes as f64);
        for timing in &self.timings {
            self.draw_timing(scene, timing);
        }
        for (window, here) in view.windows.iter().zip(&self.curves) {
            curves(scene, window, &self.vertical, here);
        }
        if let Some(last) = self.curves.last() {
            names(scene, right, &self.vertical, last, NAME_LIMIT);
        }
    }

    fn draw_timing(&self, scene: &mut Scene, timing: &Timing) {
        let (top, bottom) = (self.vertical.top, self.vertical.bottom);
        let [start, centre, end] = timing.at;
        for edge in [start, end] {
            scene.line(vec![(edge, top), (edge, bottom)], 1.0, REST);
        }
        if end - start > 12.0 {
            let look = Look { color: AXIS, marker: None, dash: Some((2.0, 5.0)) };
            scene.curve(vec![(centre, top), (centre, bottom)], 1.4, look);
        }
        if let Some((lane, begin, text)) = &timing.text {
            let middle = top - 14.0 - LINE * *lane as f64;
            scene.text(text, (*begin, middle), TICK, SOFT_INK, Anchor::Start);
        }
    }
}

/// Says in the first row how much time, or how many windows, lie between the windows.
fn name_gaps(scene: &mut Scene, view: &View, vertical: &Vertical) {
    let gaps = view.gaps.iter().chain(view.after.iter());
    for (window, gap) in view.windows.iter().zip(gaps) {
        let middle = (window.right + GAP / 2.0, (vertical.top + vertical.bottom) / 2.0);
        scene.text(&font::fit(gap, TICK, GAP - 12.0), middle, TICK, INK, Anchor::Middle);
        if !gap.starts_with('…') {
            let y = middle.1 + 22.0;
            for (tip, way) in [(window.right + 14.0, 8.0), (window.right + GAP - 14.0, -8.0)] {
                scene.line(vec![(tip + way, y - 5.0), (tip, y), (tip + way, y + 5.0)], 1.4, AXIS);
            }
            scene.line(vec![(window.right + 14.0, y), (window.right + GAP - 14.0, y)], 1.4, AXIS);
        }
    }
}

fn time_axis(scene: &mut Scene, view: &View, y: f64) {
    for (window, origin) in view.windows.iter().zip(&view.origins) {
        let display = engineering((window.high - origin).abs().max((window.low - origin).abs()), "s");
        let numbers = x_grid(scene, window, &display, *origin, y, y);
        x_numbers(scene, window, &numbers, y);
        let middle = ((window.left + window.right) / 2.0, y + 52.0);
        let label = if view.broken && *origin != 0.0 {
            format!("{} after {}", display.unit, with_digits(*origin, "s", 9))
        } else {
            with_unit("time", &display.unit)
        };
        let room = window.right - window.left + if view.broken { GAP - 16.0 } else { 0.0 };
        let room = room.min(2.0 * (WIDTH - 4.0 - middle.0));
        scene.text(&font::fit(&label, LABEL, room), middle, LABEL, INK, Anchor::Middle);
    }
}

/// Small print: how the axis is broken, and what was left out.
fn foot(scene: &mut Scene, figure: &EnvelopesFigure, view: &View, drives: usize) {
    let mut said = Vec::new();
    if view.broken {
        said.push("only the time around pulses is shown".to_string());
    }
    if !view.one_scale {
        said.push("windows have their own time scales".to_string());
    }
    if view.broken && drawable(figure.end_s) && figure.end_s > 0.0 {
        said.push(format!("the sequence ends at {}", with_digits(figure.end_s, "s", 9)));
    }
    let place = (EDGE, scene.height - 20.0);
    let text = font::fit(&said.join("; "), SMALL, WIDTH - 2.0 * EDGE - 340.0);
    scene.text(&text, place, SMALL, SOFT_INK, Anchor::Start);
    if drives > ROWS {
        let text = format!("… {} more drives", drives - ROWS);
        remark(scene, &text, (EDGE, scene.height - 46.0), Anchor::Start, 400.0);
    }
    frame::fingerprint(scene, &figure.fingerprint);
}

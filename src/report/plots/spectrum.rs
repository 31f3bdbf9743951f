//! Spectra of pulses against the offset from their carrier, with the transitions of the system.
use super::frame::{self, right_edge, with_unit, x_grid, x_numbers, Window, EDGE, FOOT, HEIGHT, LABEL, LINE, TICK, WIDTH};
use super::palette::{look, Look, INK, SOFT_INK};
use super::panel::{curves, names, remark, Curve, Vertical};
use super::place::Lanes;
use super::scale::engineering;
use super::scene::{Anchor, Drawn, Scene};
use super::thin::{check_axis, check_length, column_count, columns, extent, thin};
use super::traces::widened;
use super::{font, PlotError};

/// Spectra of pulses.
#[derive(Clone, Debug, Default)]
pub struct SpectrumFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// One spectrum a pulse.
    pub pulses: Vec<PulseSpectrum>,
    /// Transitions of the system (name, offset in Hz from the carrier).
    pub lines: Vec<(String, f64)>,
}

/// Spectrum of one pulse.
#[derive(Clone, Debug, Default)]
pub struct PulseSpectrum {
    /// Name of the pulse.
    pub label: String,
    /// Offsets in Hz from its carrier, not decreasing.
    pub offset_hz: Vec<f64>,
    /// Amplitude in dB, 0 at its largest; minus infinity is drawn at the lower edge.
    pub amplitude_db: Vec<f64>,
}

/// Lowest amplitude shown, in dB.
const FLOOR_DB: f64 = -120.0;
/// Spectra in one figure; further ones are counted.
const SHOWN: usize = 16;
const NAME_LIMIT: f64 = 330.0;

/// Draws spectra. Errors: lengths that differ, offsets that decrease, nothing to draw.
pub fn spectrum(figure: &SpectrumFigure) -> Result<Drawn, PlotError> {
    for pulse in &figure.pulses {
        check_axis(&pulse.label, &pulse.offset_hz)?;
        check_length(&pulse.label, pulse.amplitude_db.len(), pulse.offset_hz.len())?;
    }
    let nothing = || PlotError::Nothing {
        title: figure.title.clone(),
    };
    let shown = &figure.pulses[..figure.pulses.len().min(SHOWN)];
    let offsets = || {
        shown
            .iter()
            .flat_map(|pulse| pulse.offset_hz.first().into_iter().chain(pulse.offset_hz.last()))
            .copied()
    };
    let (low, high) = offsets().reduce(f64::min).zip(offsets().reduce(f64::max)).ok_or_else(nothing)?;
    let (low, high) = widened(low, high);

    let drawn: Vec<Curve> = shown
        .iter()
        .enumerate()
        .map(|(index, pulse)| curve(pulse, index, shown.len(), low, high))
        .collect();
    let (lowest, highest) = extent(drawn.iter().flat_map(|curve| &curve.runs)).ok_or_else(nothing)?;
    let range = (lowest.clamp(FLOOR_DB, -20.0), highest.max(0.0));

    let right = right_edge(drawn.iter().map(|curve| curve.name.as_str()), NAME_LIMIT);
    let vertical = Vertical::linear(Some(range), None, "dB");
    let left = EDGE + 14.0 + vertical.number_width().max(60.0);
    let window = Window { low, high, left, right };
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    let named = name_lines(figure, &window);
    let lanes = named
        .iter()
        .filter_map(|line| line.1.as_ref().map(|place| place.0 + 1))
        .max()
        .unwrap_or(0);
    let start = top + LINE + 4.0 + LINE * lanes as f64 + if lanes > 0 { 8.0 } else { 0.0 };
    let bottom = HEIGHT - FOOT;
    let vertical = vertical.between(start, bottom);

    let display = engineering(low.abs().max(high.abs()), "Hz");
    let numbers = x_grid(&mut scene, &window, &display, 0.0, start, bottom);
    // The axis label stands above the names of the lines.
    vertical.draw(&mut scene, &[window], "amplitude, 0 at its largest", start - top - 29.0);
    draw_lines(&mut scene, &named, start, bottom);
    curves(&mut scene, &window, &vertical, &drawn);
    names(&mut scene, right, &vertical, &drawn, NAME_LIMIT);
    x_numbers(&mut scene, &window, &numbers, bottom);
    let middle = ((left + right) / 2.0, HEIGHT - FOOT + 60.0);
    scene.text(
        &with_unit("offset from the carrier", &display.unit),
        middle,
        LABEL,
        INK,
        Anchor::Middle,
    );
    remarks(&mut scene, figure, named.iter().filter(|line| line.1.is_none()).count());
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

fn curve(pulse: &PulseSpectrum, index: usize, count: usize, low: f64, high: f64) -> Curve {
    let bounds = columns(&pulse.offset_hz, low, high, column_count(pulse.offset_hz.len(), count, 1400.0));
    // A zero of the spectrum is minus infinity in dB: the lower edge of the plot, not a hole.
    let amplitude: Vec<f64> = pulse
        .amplitude_db
        .iter()
        .map(|value| if *value < FLOOR_DB { FLOOR_DB } else { *value })
        .collect();
    let label = font::clean(pulse.label.trim());
    let name = if label.is_empty() { format!("pulse {}", index + 1) } else { label };
    Curve {
        name,
        runs: thin(&pulse.offset_hz, &amplitude, &bounds),
        bands: Vec::new(),
        look: look(index, count),
    }
}

/// A line of the system: its pixel, and where its name stands (lane, start, text) if there is room.
type NamedLine = (f64, Option<(usize, f64, String)>);

fn name_lines(figure: &SpectrumFigure, window: &Window) -> Vec<NamedLine> {
    let mut inside: Vec<&(String, f64)> = figure.lines.iter().filter(|line| window.holds(line.1)).collect();
    inside.sort_by(|a, b| a.1.total_cmp(&b.1));
    let mut lanes = Lanes::new(4, 12.0);
    let place = |(name, offset): &(String, f64)| {
        let x = window.x(*offset);
        let text = font::fit(name, TICK, 260.0);
        let width = font::width(&text, TICK);
        let start = (x - width / 2.0).clamp(window.left, (window.right - width).max(window.left));
        (x, lanes.take(start, start + width).map(|lane| (lane, start, text)))
    };
    inside.into_iter().map(place).collect()
}

fn draw_lines(scene: &mut Scene, named: &[NamedLine], top: f64, bottom: f64) {
    for (x, name) in named {
        // Lane 0 is the lowest, next to the plot.
        let lane = name.as_ref().map_or(0, |name| name.0);
        let reach = top - 8.0 - LINE * lane as f64;
        let look = Look {
            color: SOFT_INK,
            marker: None,
            dash: Some((7.0, 5.0)),
        };
        scene.curve(vec![(*x, reach.min(top)), (*x, bottom)], 1.4, look);
    }
    for (lane, start, text) in named.iter().filter_map(|line| line.1.as_ref()) {
        let middle = top - 8.0 - LINE * (*lane as f64 + 0.5);
        let width = font::width(text, TICK);
        scene.rectangle(
            (start - 3.0, middle - LINE / 2.0),
            (start + width + 3.0, middle + LINE / 2.0),
            (255, 255, 255),
            1.0,
        );
        scene.text(text, (*start, middle), TICK, SOFT_INK, Anchor::Start);
    }
}

/// Says what was left out.
fn remarks(scene: &mut Scene, figure: &SpectrumFigure, unnamed: usize) {
    let mut said = Vec::new();
    if figure.pulses.len() > SHOWN {
        said.push(format!("… {} more pulses", figure.pulses.len() - SHOWN));
    }
    if unnamed > 0 {
        said.push(format!("{unnamed} lines without a name: no room"));
    }
    let place = (EDGE, HEIGHT - 20.0);
    remark(scene, &said.join("; "), place, Anchor::Start, 500.0);
}

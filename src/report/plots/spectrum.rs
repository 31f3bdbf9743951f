//! Spectra of pulses against the offset from their carrier, with the transitions of the system.
use super::frame::{self, right_edge, with_unit, x_grid, x_numbers, Window, EDGE, FOOT, HEIGHT, LABEL, LINE, WIDTH};
use super::marks::{in_lanes, Tick};
use super::palette::{look, Look, INK, SOFT_INK};
use super::panel::{curves, names, remark, Curve, Vertical, STROKE};
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
    /// Whether the offsets count from zero, because no pulse has a carrier.
    pub from_zero: bool,
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
    let nothing = || PlotError::Nothing { title: figure.title.clone() };
    let shown = &figure.pulses[..figure.pulses.len().min(SHOWN)];
    let offsets = || shown.iter().flat_map(|pulse| pulse.offset_hz.first().into_iter().chain(pulse.offset_hz.last())).copied();
    let (low, high) = offsets().reduce(f64::min).zip(offsets().reduce(f64::max)).ok_or_else(nothing)?;
    let (low, high) = widened(low, high);

    let drawn: Vec<Curve> = shown.iter().enumerate().map(|(index, pulse)| curve(pulse, index, shown.len(), low, high)).collect();
    let (lowest, highest) = extent(drawn.iter().flat_map(|curve| &curve.runs)).ok_or_else(nothing)?;
    let range = (lowest.clamp(FLOOR_DB, -20.0), highest.max(0.0));

    let right = right_edge(drawn.iter().map(|curve| curve.name.as_str()), NAME_LIMIT);
    let vertical = Vertical::linear(Some(range), None, "dB");
    let left = EDGE + 14.0 + vertical.number_width().max(60.0);
    let window = Window { low, high, left, right };
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    let named = in_lanes(&figure.lines, &[window], 4);
    let lanes = named.iter().filter_map(|line| line.name.as_ref().map(|name| name.lane + 1)).max().unwrap_or(0);
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
    let counted = if figure.from_zero { "frequency" } else { "offset from the carrier" };
    scene.text(&with_unit(counted, &display.unit), middle, LABEL, INK, Anchor::Middle);
    remarks(&mut scene, figure, named.iter().filter(|line| line.name.is_none()).count());
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

fn curve(pulse: &PulseSpectrum, index: usize, count: usize, low: f64, high: f64) -> Curve {
    let bounds = columns(&pulse.offset_hz, low, high, column_count(pulse.offset_hz.len(), count, 1400.0));
    // A zero of the spectrum is minus infinity in dB: the lower edge of the plot, not a hole.
    let amplitude: Vec<f64> = pulse.amplitude_db.iter().map(|value| if *value < FLOOR_DB { FLOOR_DB } else { *value }).collect();
    let label = font::clean(pulse.label.trim());
    let name = if label.is_empty() { format!("pulse {}", index + 1) } else { label };
    Curve { name, runs: thin(&pulse.offset_hz, &amplitude, &bounds), bands: Vec::new(), look: look(index, count), width: STROKE }
}

fn draw_lines(scene: &mut Scene, lines: &[Tick], top: f64, bottom: f64) {
    let lane = |line: &Tick| line.name.as_ref().map_or(0, |name| name.lane) as f64;
    for line in lines {
        let look = Look { color: SOFT_INK, marker: None, dash: Some((7.0, 5.0)) };
        scene.curve(vec![(line.x, top - 8.0 - LINE * lane(line)), (line.x, bottom)], 1.4, look);
    }
    for line in lines {
        if let Some(name) = &line.name {
            name.draw(scene, top - 8.0 - LINE * (lane(line) + 0.5));
        }
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

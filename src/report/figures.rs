//! What a run or an old result folder shows as plots: recorded numbers, pulses and marks put into the plain data of `plots`.

use crate::compare::Comparison;
use crate::config::document::Document;
use crate::config::drives::Form;
use crate::config::settings::Plot;
use crate::drive::envelope::Pieces;
use crate::measure::Column;
use crate::outcome::Outcome;
use crate::plan::Point;
use crate::problem::Sweep;
use crate::report::fingerprint::fingerprint;
use crate::report::heading::heading;
use crate::report::plots::{
    envelopes, spectrum, traces, Drawn, EnvelopeCurve, EnvelopesFigure, Panel, PlotError, PulseBar, PulseSpectrum, Series, SpectrumFigure,
    TracesFigure,
};
use crate::units::cis_turns;

/// A plot by its file name, or why it could not be drawn.
pub type Named = (&'static str, Result<Drawn, PlotError>);

/// Most pulses handed to a plot; what repeats beyond them is counted there.
const MOST_PULSES: usize = 20_000;
/// Points on the curve of one envelope.
const CURVE_POINTS: usize = 257;
/// Points on the spectrum of one pulse, on each side.
const SPECTRUM_POINTS: usize = 400;
/// The same for a pulse that is much longer than another in its plot.
const MOST_SPECTRUM_POINTS: usize = 1600;

/// The plots of a run.
pub fn of_run(document: &Document, point: &Point, outcome: &Outcome) -> Vec<Named> {
    let wide = outcome.columns.len();
    let columns = (0..wide).map(|k| outcome.rows.iter().skip(k).step_by(wide.max(1)).copied().collect()).collect();
    of_columns(document, point, &outcome.columns, &outcome.times_s, columns)
}

/// The plots of columns recorded earlier.
pub fn of_columns(document: &Document, point: &Point, columns: &[Column], times_s: &[f64], values: Vec<Vec<f64>>) -> Vec<Named> {
    let mut drawn = Vec::new();
    for plot in &document.output.plots {
        match plot {
            Plot::Traces if !columns.is_empty() => {
                drawn.push(("traces", traces(&traces_figure(document, point, columns, times_s, &values))))
            }
            Plot::Envelopes if !point.timeline.pulses.is_empty() => {
                drawn.push(("envelopes", envelopes(&envelopes_figure(document, point))))
            }
            Plot::Spectrum if !point.timeline.pulses.is_empty() => drawn.push(("spectrum", spectrum(&spectrum_figure(document, point)))),
            _ => {}
        }
    }
    drawn
}

/// The plots of a comparison: those of the file as written.
pub fn of_comparison(document: &Document, comparison: &Comparison) -> Vec<Named> {
    let written = comparison.computed.first();
    let point = written.and_then(|computed| computed.plan.point().ok());
    written.zip(point).map_or_else(Vec::new, |(computed, point)| of_run(document, &point, &computed.outcome))
}

/// Writes a plot in both forms, each to the side first and then renamed; gives the file names.
pub fn save(folder: &std::path::Path, name: &str, drawn: &Drawn) -> std::io::Result<[String; 2]> {
    let names = [format!("{name}.png"), format!("{name}.svg")];
    for (name, bytes) in names.iter().zip([drawn.png.as_slice(), drawn.svg.as_bytes()]) {
        let side = folder.join(format!(".{name}.unfinished"));
        std::fs::write(&side, bytes)?;
        std::fs::rename(&side, folder.join(name))?;
    }
    Ok(names)
}

fn marks(point: &Point) -> Vec<(String, f64)> {
    point.timeline.marks.iter().map(|(name, at)| (name.clone(), at.seconds())).collect()
}

fn traces_figure(document: &Document, point: &Point, columns: &[Column], times_s: &[f64], values: &[Vec<f64>]) -> TracesFigure {
    let mut panels: Vec<(&str, Panel)> = Vec::new();
    for (column, values) in columns.iter().zip(values) {
        let series = Series { name: column.label.clone(), values: values.clone(), band: None };
        match panels.iter_mut().find(|(name, _)| *name == column.panel) {
            Some((_, panel)) => panel.series.push(series),
            None => {
                let range = match column.panel {
                    "population" | "adiabatic population" | "fidelity" => Some((0.0, 1.0)),
                    "Bloch vector" => Some((-1.0, 1.0)),
                    _ => None,
                };
                let unit = if column.unit == "1" { String::new() } else { column.unit.to_string() };
                panels.push((column.panel, Panel { y_label: column.panel.to_string(), unit, series: vec![series], range }));
            }
        }
    }
    let bar = |pulse: &crate::drive::timeline::PlacedPulse| PulseBar {
        drive: document.drives[pulse.drive].name.clone(),
        label: document.envelopes[pulse.envelope].name.clone(),
        start_s: pulse.start.seconds(),
        end_s: pulse.start.after(pulse.length_s).seconds(),
    };
    TracesFigure {
        title: heading(document),
        fingerprint: fingerprint(document),
        time_s: times_s.to_vec(),
        panels: panels.into_iter().map(|(_, panel)| panel).collect(),
        pulses: point.timeline.pulses.iter().take(MOST_PULSES).map(bar).collect(),
        marks: marks(point),
        end_s: point.timeline.end.seconds(),
    }
}

/// Times at which an envelope is drawn: an even grid, and both sides of every step.
fn curve_times(pieces: &Pieces, length_s: f64) -> Vec<f64> {
    let mut times: Vec<f64> = (0..CURVE_POINTS).map(|k| length_s * k as f64 / (CURVE_POINTS - 1) as f64).collect();
    match pieces {
        Pieces::Held { starts_s, .. } if starts_s.len() < 4 * CURVE_POINTS => {
            times.extend(starts_s.iter().skip(1).flat_map(|start| [start - 1e-9 * length_s, *start]));
        }
        Pieces::Smooth { kinks_s } if kinks_s.len() < 4 * CURVE_POINTS => times.extend(kinks_s.iter()),
        _ => {}
    }
    times.sort_by(f64::total_cmp);
    times
}

fn envelopes_figure(document: &Document, point: &Point) -> EnvelopesFigure {
    let curve = |pulse: &crate::drive::timeline::PlacedPulse| {
        let (drive, envelope) = (&document.drives[pulse.drive], &document.envelopes[pulse.envelope]);
        let curve = &point.curves[pulse.envelope];
        let peak = point.peak_hz(document, pulse.drive, pulse.envelope).unwrap_or(f64::NAN);
        let times = curve_times(&curve.pieces(), pulse.length_s);
        let weight = envelope.derivative.map(|derivative| {
            let value = |quantity: crate::config::reader::Quantity| point.values[quantity.register as usize];
            -value(derivative.factor) / (crate::units::RAD_PER_TURN * value(derivative.against))
        });
        let chirp = pulse.carrier.and_then(|index| {
            let carrier = &point.timeline.carriers[index];
            let formula = carrier.written.instantaneous.as_ref()?.bind(&point.values);
            Some(times.iter().map(|t| formula.at(*t) - carrier.centre_hz).collect())
        });
        EnvelopeCurve {
            drive: drive.name.clone(),
            envelope: envelope.name.clone(),
            size_label: if drive.form == Form::Direct { "matrix element".to_string() } else { "Rabi frequency".to_string() },
            start_s: pulse.start.seconds(),
            in_phase_hz: times.iter().map(|t| peak * curve.at(*t)).collect(),
            quadrature_hz: weight.map(|weight| times.iter().map(|t| weight * peak * curve.slope(*t)).collect()),
            instantaneous_hz: chirp,
            time_s: times,
        }
    };
    EnvelopesFigure {
        title: heading(document),
        fingerprint: fingerprint(document),
        pulses: point.timeline.pulses.iter().take(MOST_PULSES / 10).map(curve).collect(),
        marks: marks(point),
        end_s: point.timeline.end.seconds(),
    }
}

/// Spectrum of each different pulse, in dB below its largest, against the offset from the carrier (from zero for a direct drive).
fn spectrum_figure(document: &Document, point: &Point) -> SpectrumFigure {
    let mut seen: Vec<(usize, usize)> = Vec::new();
    let mut shown = Vec::new();
    let mut carrier_hz = None;
    for pulse in &point.timeline.pulses {
        if seen.contains(&(pulse.drive, pulse.envelope)) || seen.len() >= 6 {
            continue;
        }
        seen.push((pulse.drive, pulse.envelope));
        if let Some(carrier) = pulse.carrier {
            carrier_hz.get_or_insert(point.timeline.carriers[carrier].centre_hz);
        }
        shown.push(pulse);
    }
    // one range for all, so that no curve ends inside the plot
    let widths: Vec<f64> = shown.iter().map(|pulse| spectrum_width_hz(point, pulse)).collect();
    let range = widths.iter().copied().fold(0.0, f64::max);
    let one = |(pulse, width): (&&crate::drive::timeline::PlacedPulse, &f64)| {
        let (drive, envelope) = (&document.drives[pulse.drive].name, &document.envelopes[pulse.envelope].name);
        let points = ((SPECTRUM_POINTS as f64 * range / width) as usize).min(MOST_SPECTRUM_POINTS);
        let (offset_hz, amplitude_db) = pulse_spectrum(document, point, pulse, range, points);
        PulseSpectrum { label: format!("{envelope} on {drive}"), offset_hz, amplitude_db }
    };
    let pulses = shown.iter().zip(&widths).map(one).collect();
    // the lines of the system, as offsets from the first carrier
    let names = &document.system.names;
    let lines = carrier_hz.map_or(Vec::new(), |carrier| {
        let size = names.len().min(12);
        let pairs = (0..size).flat_map(|a| (a + 1..size).map(move |b| (a, b)));
        pairs
            .map(|(a, b)| (format!("{} to {}", names[a], names[b]), (point.energies_hz[b] - point.energies_hz[a]).abs() - carrier))
            .collect()
    });
    SpectrumFigure { title: heading(document), fingerprint: fingerprint(document), from_zero: carrier_hz.is_none(), pulses, lines }
}

/// The sweep of a pulse, if its carrier has one.
fn chirp_of(point: &Point, pulse: &crate::drive::timeline::PlacedPulse) -> Option<crate::drive::chirp::Chirp> {
    let carrier = &point.timeline.carriers[pulse.carrier?];
    let formula = carrier.written.instantaneous.as_ref()?.bind(&point.values);
    Some(crate::drive::chirp::Chirp::new(formula, carrier.centre_hz, pulse.length_s))
}

/// Half the range in Hz in which the spectrum of a pulse is worth seeing: its first lobes and the whole chirp.
///
/// It is no whole number over the length, so that the grid does not fall on the zeros of a square pulse, which dip without end.
fn spectrum_width_hz(point: &Point, pulse: &crate::drive::timeline::PlacedPulse) -> f64 {
    let offsets = |chirp: crate::drive::chirp::Chirp| {
        (0..=64).map(|k| chirp.offset_hz(pulse.length_s * f64::from(k) / 64.0).abs()).fold(0.0, f64::max)
    };
    1.5 * chirp_of(point, pulse).map_or(0.0, offsets) + 12.47 / pulse.length_s
}

/// Fourier transform of the complex envelope by the trapezium rule, which for a pulse that is 0 outside converges fast.
fn pulse_spectrum(
    document: &Document,
    point: &Point,
    pulse: &crate::drive::timeline::PlacedPulse,
    range: f64,
    points: usize,
) -> (Vec<f64>, Vec<f64>) {
    let envelope = &document.envelopes[pulse.envelope];
    let curve = &point.curves[pulse.envelope];
    let weight = envelope.derivative.map_or(0.0, |derivative| {
        let value = |quantity: crate::config::reader::Quantity| point.values[quantity.register as usize];
        -value(derivative.factor) / (crate::units::RAD_PER_TURN * value(derivative.against))
    });
    let chirp = chirp_of(point, pulse);
    let samples = 2048usize.max((8.0 * range * pulse.length_s) as usize).min(16_384);
    let step = pulse.length_s / samples as f64;
    // X - i Y turns with exp(+2 pi i f t)
    let values: Vec<num_complex::Complex64> = (0..samples)
        .map(|k| {
            let t = (k as f64 + 0.5) * step;
            let turns = chirp.as_ref().map_or(0.0, |chirp| chirp.turns(t));
            num_complex::Complex64::new(curve.at(t), if weight == 0.0 { 0.0 } else { -weight * curve.slope(t) }) * cis_turns(turns)
        })
        .collect();
    let offsets: Vec<f64> = (0..=2 * points).map(|k| range * (k as f64 / points as f64 - 1.0)).collect();
    let sizes: Vec<f64> = offsets
        .iter()
        .map(|offset| {
            // one rotation per sample in place of one sine per sample
            let turn = cis_turns(-offset * step);
            let mut phase = cis_turns(-offset * step / 2.0);
            let mut sum = num_complex::Complex64::from(0.0);
            for value in &values {
                sum += value * phase;
                phase *= turn;
            }
            sum.norm()
        })
        .collect();
    let largest = sizes.iter().copied().fold(f64::MIN_POSITIVE, f64::max);
    let decibels = sizes.iter().map(|size| (20.0 * (size / largest).log10()).max(-120.0)).collect();
    (offsets, decibels)
}

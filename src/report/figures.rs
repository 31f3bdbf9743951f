//! What a run or an old result folder shows as plots: recorded numbers, pulses and marks put into the plain data of `plots`.

use crate::compare::Comparison;
use crate::config::document::Document;
use crate::config::drives::Form;
use crate::config::settings::Plot;
use crate::drive::envelope::Pieces;
use crate::drive::spectrum::spectrum as pulse_spectrum;
use crate::drive::timeline::PlacedPulse;
use crate::matrices::{strength, Line, Matrices};
use crate::measure::Column;
use crate::outcome::Outcome;
use crate::plan::Point;
use crate::problem::Sweep;
use crate::report::fingerprint::fingerprint;
use crate::report::heading::heading;
use crate::report::plots::{
    compare, envelopes, ledger, levels, spectrum, traces, CompareFigure, ComparePanel, CompareSeries, Drawn, EnvelopeCurve,
    EnvelopesFigure, LedgerFigure, LedgerTerm, LevelsFigure, Panel, PlotError, PulseBar, PulseSpectrum, Series, SpectrumFigure,
    TracesFigure, TransitionLine,
};

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
    let drawn = if outcome.row_errors.is_empty() { 0 } else { wide };
    let bands = (0..drawn).map(|k| outcome.row_errors.iter().skip(k).step_by(wide.max(1)).copied().collect()).collect();
    of_columns(document, point, &outcome.columns, &outcome.times_s, columns, bands)
}

/// The level diagram of a system, its lines as strong as the first drive, or else the first operator that joins levels, makes them.
pub fn of_matrices(document: &Document, found: &Matrices) -> Vec<Named> {
    if document.output.plots.is_empty() {
        return Vec::new();
    }
    let strongest = |named: &crate::matrices::Named| found.lines.iter().map(|line| strength(&named.matrix, *line)).fold(0.0, f64::max);
    let seen = found.drives.iter().chain(&found.operators).find(|named| strongest(named) > 0.0);
    let line =
        |line: &Line| TransitionLine { levels: [line.from, line.to], strength: seen.map_or(0.0, |named| strength(&named.matrix, *line)) };
    let figure = LevelsFigure {
        title: heading(document),
        fingerprint: fingerprint(document),
        levels: document.system.names.iter().cloned().zip(found.still.energies_hz.iter().copied()).collect(),
        lines: found.lines.iter().map(line).collect(),
        strengths_of: seen.map_or(String::new(), |named| named.name.clone()),
    };
    vec![("levels", levels(&figure))]
}

/// The plots of columns recorded earlier; `bands` are their standard errors, none where nothing was drawn.
pub fn of_columns(
    document: &Document,
    point: &Point,
    columns: &[Column],
    times_s: &[f64],
    values: Vec<Vec<f64>>,
    bands: Vec<Vec<f64>>,
) -> Vec<Named> {
    let mut drawn = Vec::new();
    for plot in &document.output.plots {
        match plot {
            Plot::Traces if !columns.is_empty() => {
                drawn.push(("traces", traces(&traces_figure(document, point, columns, times_s, (&values, &bands)))))
            }
            Plot::Envelopes if !point.timeline.pulses.is_empty() => {
                drawn.push(("envelopes", envelopes(&envelopes_figure(document, point))))
            }
            Plot::Spectrum if !point.timeline.pulses.is_empty() => drawn.push(("spectrum", spectrum(&spectrum_figure(document, point)))),
            Plot::Ledger if point.in_frame().is_some_and(|frame| !frame.rotated.ledger.lines.is_empty()) => {
                drawn.push(("ledger", ledger(&ledger_figure(document, point))));
            }
            _ => {}
        }
    }
    drawn
}

/// The plots of a comparison: variants over each other with their differences, and those of the file as written.
pub fn of_comparison(document: &Document, comparison: &Comparison) -> Vec<Named> {
    let figure = compare_figure(document, comparison);
    let mut drawn = Vec::new();
    if !figure.panels.is_empty() {
        drawn.push(("compare", compare(&figure)));
    }
    if let Some(written) = comparison.computed.first() {
        if let Ok(point) = written.plan.point() {
            drawn.extend(of_run(document, &point, &written.outcome));
        }
    }
    drawn
}

/// The quantities that a comparison shows: those under `record: final`, or all of the reference.
fn compare_figure(document: &Document, comparison: &Comparison) -> CompareFigure {
    let reference = comparison.computed.iter().find(|computed| computed.name == comparison.against);
    let mut figure = CompareFigure {
        title: heading(document),
        fingerprint: fingerprint(document),
        reference: comparison.against.clone(),
        tolerance: comparison.tolerance,
        end_s: comparison.computed.iter().filter_map(|computed| computed.outcome.times_s.last().copied()).fold(0.0, f64::max),
        ..CompareFigure::default()
    };
    let Some(reference) = reference else { return figure };
    figure.time_s = reference.outcome.times_s.clone();
    let compared: Vec<&str> =
        comparison.held.iter().flat_map(|held| &held.differences).map(|difference| difference.quantity.as_str()).collect();
    // what depends on the frame is compared at the end alone, in one frame; over time each has its own
    let kinds: Vec<Vec<f64>> = comparison.computed.iter().filter_map(|computed| Some(computed.plan.point().ok()?.end_turns())).collect();
    let one_frame = kinds.windows(2).all(|pair| pair[0] == pair[1]);
    let shown = |column: &&Column| {
        let framed = ["coherence", "Bloch vector", "fidelity", "mean"].contains(&column.panel);
        compared.contains(&column.name.as_str()) && (one_frame || !framed)
    };
    for column in reference.outcome.columns.iter().filter(shown) {
        let of = |computed: &crate::compare::Computed| -> Option<Vec<f64>> {
            let k = computed.outcome.columns.iter().position(|other| other.name == column.name)?;
            Some(computed.outcome.rows.iter().skip(k).step_by(computed.outcome.columns.len()).copied().collect())
        };
        let Some(base) = of(reference) else { continue };
        let mut variants = vec![CompareSeries { name: reference.name.clone(), time_s: None, values: base.clone() }];
        let mut differences = Vec::new();
        for computed in comparison.computed.iter().filter(|computed| computed.name != reference.name) {
            let Some(values) = of(computed) else { continue };
            let same = computed.outcome.times_s == reference.outcome.times_s;
            if same {
                let values = values.iter().zip(&base).map(|(a, b)| a - b).collect();
                differences.push(CompareSeries { name: computed.name.clone(), time_s: None, values });
            }
            let time_s = (!same).then(|| computed.outcome.times_s.clone());
            variants.push(CompareSeries { name: computed.name.clone(), time_s, values });
        }
        let unit = if column.unit == "1" { String::new() } else { column.unit.to_string() };
        let range = (column.panel == "population").then_some((0.0, 1.0));
        figure.panels.push(ComparePanel {
            y_label: column.panel.to_string(),
            unit,
            quantity: column.name.clone(),
            variants,
            differences,
            range,
        });
    }
    figure
}

fn ledger_figure(document: &Document, point: &Point) -> LedgerFigure {
    let names = &document.system.names;
    let mut figure = LedgerFigure { title: heading(document), fingerprint: fingerprint(document), ..LedgerFigure::default() };
    if let Some(frame) = point.in_frame() {
        let ledger = &frame.rotated.ledger;
        figure.limit_hz = ledger.limit_hz.is_finite().then_some(ledger.limit_hz);
        figure.terms = ledger
            .lines
            .iter()
            .map(|line| {
                let [a, b] = line.levels();
                LedgerTerm {
                    label: format!("{}: {} to {}", crate::plan::source_name(document, line.key.source), names[a], names[b]),
                    size_hz: line.size_hz,
                    turns_at_hz: line.turns_at_hz,
                    kept: line.kept,
                    shift_hz: line.predicted_shift_hz(),
                    ripple: line.predicted_ripple(),
                }
            })
            .collect();
    }
    figure
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

fn traces_figure(
    document: &Document,
    point: &Point,
    columns: &[Column],
    times_s: &[f64],
    (values, bands): (&[Vec<f64>], &[Vec<f64>]),
) -> TracesFigure {
    let mut panels: Vec<(&str, Panel)> = Vec::new();
    for (k, (column, values)) in columns.iter().zip(values).enumerate() {
        let series = Series { name: column.label.clone(), values: values.clone(), band: bands.get(k).cloned() };
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
    let bar = |pulse: &PlacedPulse| PulseBar {
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
    let curve = |pulse: &PlacedPulse| {
        let (drive, envelope) = (&document.drives[pulse.drive], &document.envelopes[pulse.envelope]);
        let curve = &point.curves[pulse.envelope];
        let peak = point.peak_hz(document, pulse.drive, pulse.envelope).unwrap_or(f64::NAN);
        let times = curve_times(&curve.pieces(), pulse.length_s);
        let weight = envelope.derivative.map(|_| point.quadrature_s(document, pulse.envelope));
        let chirp = point.sweep(pulse).map(|sweep| times.iter().map(|t| sweep.offset_hz(*t)).collect());
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
    for pulse in &point.timeline.pulses {
        if seen.contains(&(pulse.drive, pulse.envelope)) || seen.len() >= 6 {
            continue;
        }
        seen.push((pulse.drive, pulse.envelope));
        shown.push(pulse);
    }
    // one range for all, so that no curve ends inside the plot
    let widths: Vec<f64> = shown.iter().map(|pulse| spectrum_width_hz(point, pulse)).collect();
    let range = widths.iter().copied().fold(0.0, f64::max);
    let one = |(pulse, width): (&&PlacedPulse, &f64)| {
        let (drive, envelope) = (&document.drives[pulse.drive].name, &document.envelopes[pulse.envelope].name);
        let points = ((SPECTRUM_POINTS as f64 * range / width) as usize).min(MOST_SPECTRUM_POINTS);
        let sweep = point.sweep(pulse);
        let sweep = sweep.as_ref().map(|sweep| sweep as &dyn Sweep);
        let (offset_hz, amplitude_db) =
            pulse_spectrum(&*point.curves[pulse.envelope], point.quadrature_s(document, pulse.envelope), sweep, range, points);
        PulseSpectrum { label: format!("{envelope} on {drive}"), offset_hz, amplitude_db }
    };
    let pulses = shown.iter().zip(&widths).map(one).collect();
    let from_zero = shown.iter().all(|pulse| pulse.carrier.is_none());
    SpectrumFigure {
        title: heading(document),
        fingerprint: fingerprint(document),
        from_zero,
        pulses,
        lines: lines(document, point, &shown),
    }
}

/// The lines of the system as offsets from the carrier: all of them where there is one carrier, else those that each drive couples.
fn lines(document: &Document, point: &Point, shown: &[&PlacedPulse]) -> Vec<(String, f64)> {
    let names = &document.system.names;
    let size = names.len().min(12);
    let mut carriers: Vec<(usize, f64)> = Vec::new();
    for pulse in shown {
        if let Some(carrier) = pulse.carrier.map(|carrier| point.timeline.carriers[carrier].centre_hz) {
            if !carriers.contains(&(pulse.drive, carrier)) {
                carriers.push((pulse.drive, carrier));
            }
        }
    }
    let one = carriers.windows(2).all(|pair| pair[0].1 == pair[1].1);
    let mut lines = Vec::new();
    for (drive, carrier) in carriers.iter().take(if one { 1 } else { carriers.len() }) {
        for (a, b) in (0..size).flat_map(|a| (a + 1..size).map(move |b| (a, b))) {
            if one || point.couplings[*drive].matrix[(a, b)].norm() > 0.0 {
                let owner = if one { String::new() } else { format!(" ({})", document.drives[*drive].name) };
                lines.push((format!("{} to {}{owner}", names[a], names[b]), (point.energies_hz[b] - point.energies_hz[a]).abs() - carrier));
            }
        }
    }
    lines
}

/// Half the range in Hz in which the spectrum of a pulse is worth seeing: its first lobes and the whole chirp.
///
/// It is no whole number over the length, so that the grid does not fall on the zeros of a square pulse, which dip without end.
fn spectrum_width_hz(point: &Point, pulse: &PlacedPulse) -> f64 {
    let offsets = |chirp: crate::drive::chirp::Chirp| {
        (0..=64).map(|k| chirp.offset_hz(pulse.length_s * f64::from(k) / 64.0).abs()).fold(0.0, f64::max)
    };
    1.5 * point.sweep(pulse).map_or(0.0, offsets) + 12.47 / pulse.length_s
}

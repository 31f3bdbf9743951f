//! The one screen a run prints: what was computed, the headline numbers with error, how, and where the files are.

use crate::config::document::Document;
use crate::config::messages::{short, short_with_unit};
use crate::outcome::Outcome;
use crate::plan::{source_name, Point};
use crate::report::heading::heading;

/// Final numbers shown; the rest is in the files.
const SHOWN: usize = 16;

/// A value with its error: digits down to the error's second digit, and the error with two.
pub fn with_error(value: f64, error: f64) -> String {
    with_errors(value, error, error)
}

/// The same with the digits of another, larger uncertainty.
fn with_errors(value: f64, error: f64, shown: f64) -> String {
    if !value.is_finite() {
        return "no number".to_string();
    }
    if !(error.is_finite() && error > 0.0) {
        return format!("{value}");
    }
    let first = error.log10().floor() as i32;
    let decimals = (1 - first).clamp(0, 17) as usize;
    if value != 0.0 && value.abs() < 1e-4 {
        // small numbers keep their power of ten; as many digits as the error leaves meaning
        let digits = (value.abs().log10().floor() as i32 - first + 1).clamp(1, 15) as usize;
        return format!("{value:.digits$e} +- {shown:.1e}");
    }
    format!("{value:.decimals$} +- {shown:.1e}")
}

/// Why the accuracy was not reached and what to do.
pub fn not_reached(document: &Document, outcome: &Outcome) -> String {
    let asked = document.accuracy.last;
    if !outcome.error_figure.is_finite() {
        return format!("the accuracy of {} that was asked for is not reached, and no number could be given: {}; ask for less, shorten the sequence, or turn the frame with the drives", short(asked), outcome.reason);
    }
    let of_rule = outcome.average.as_ref().map_or(0.0, |average| average.besides.iter().copied().fold(0.0, f64::max));
    let sampling = outcome.average.as_ref().filter(|average| average.until_accurate).and_then(|average| average.sampling_error);
    if let Some(error) = sampling.filter(|error| *error > asked && outcome.error_figure <= asked) {
        return format!("the accuracy of {} that was asked for is not reached: the sampling error is {}", short(asked), short(error));
    }
    let advice = if of_rule > 0.5 * outcome.error_figure {
        format!(
            "most of it is the average itself; take more points, draw at random, or ask for accuracy: {{final: {}}}",
            short(10f64.powf(outcome.error_figure.log10().ceil()))
        )
    } else if outcome.floor > asked {
        format!(
            "rounding alone leaves about {} here; ask for accuracy: {{final: {}}} or shorten the sequence",
            short(outcome.floor),
            short(10f64.powf(outcome.floor.log10().ceil()))
        )
    } else if document.accuracy.method != crate::config::settings::MethodWord::Automatic {
        "let the program choose with method: automatic, or ask for less".to_string()
    } else {
        format!(
            "ask for accuracy: {{final: {}}}, or cut the sequence into parts with start: {{state_from: ..}}",
            short(10f64.powf(outcome.error_figure.log10().ceil()))
        )
    };
    format!(
        "the accuracy of {} that was asked for is not reached: the error figure is {}; {advice}",
        short(asked),
        short(outcome.error_figure)
    )
}

/// The frame, and the largest approximation in it.
fn frame_words(document: &Document, point: &Point) -> String {
    let Some(frame) = point.in_frame() else {
        return "laboratory frame, nothing dropped".to_string();
    };
    let names = &document.system.names;
    let ledger = &frame.rotated.ledger;
    let dropped = ledger.dropped();
    let mut words = match dropped.first() {
        None => "rotating frame, nothing dropped".to_string(),
        Some(largest) => {
            let [a, b] = largest.levels();
            format!(
                "rotating frame, {} of {} terms dropped; the largest, of {} on {} and {}, shifts each of them by {} (the line by {}) and ripples by {}",
                dropped.len(),
                ledger.lines.len(),
                source_name(document, largest.key.source),
                names[a],
                names[b],
                short_with_unit(largest.predicted_shift_hz().unwrap_or(0.0), "Hz"),
                short_with_unit(2.0 * largest.predicted_shift_hz().unwrap_or(0.0), "Hz"),
                short(largest.predicted_ripple().unwrap_or(0.0))
            )
        }
    };
    if let Some(done) = &frame.elimination {
        let gone: Vec<&str> = done.levels.iter().map(|level| names[*level].as_str()).collect();
        words.push_str(&format!("; {} eliminated (coupling over detuning up to {})", gone.join(", "), short(done.validity)));
    }
    words
}

/// A component of a unit vector, with three decimals and no minus before zero.
fn component(value: f64) -> String {
    format!("{:.3}", (value * 1e3).round() / 1e3 + 0.0)
}

/// The error budget of a gate, the steady state, and the counts behind a read-out.
fn surroundings(outcome: &Outcome) -> String {
    let mut text = String::new();
    if !outcome.budget.is_empty() {
        text.push_str("  error budget of the gate (they add up to it):\n");
        for share in &outcome.budget {
            let sampling = share.sampling_error.map_or(String::new(), |error| format!(", sampling error {error:.1e}"));
            let digits = share.sampling_error.map_or(share.error, |sampling| sampling.max(share.error));
            text.push_str(&format!("    {:<9}  {}{sampling}\n", share.name, with_errors(share.value, digits, share.error)));
        }
    }
    if let Some(steady) = &outcome.steady {
        let kind = if steady.unique { "the only one there is" } else { "one of several: the one that the end of the sequence runs into" };
        text.push_str(&format!("  steady state of the last stretch: {kind}\n"));
    }
    if !outcome.counts.is_empty() {
        let counts: Vec<String> =
            outcome.counts.iter().take(SHOWN).map(|count| format!("{} {:.1} +- {:.1}", count.read, count.expected, count.spread)).collect();
        text.push_str(&format!("  counts expected, with the spread of chance: {}\n", counts.join(", ")));
    }
    text
}

/// The screen.
pub fn summary(document: &Document, point: &Point, outcome: &Outcome, place: Option<&str>) -> String {
    let mut text = format!("{}\n", heading(document));
    let end = outcome.times_s.last().copied().unwrap_or(0.0);
    text.push_str(&format!("at the end of the sequence, {}, {}:\n", short_with_unit(end, "s"), frame_words(document, point)));
    let wide = outcome.finals.iter().take(SHOWN).map(|f| f.name.chars().count()).max().unwrap_or(0);
    for f in outcome.finals.iter().take(SHOWN) {
        let unit = if f.unit == "1" || f.name.ends_with(f.unit) { String::new() } else { format!(" {}", f.unit) };
        let sampling = f.sampling_error.map_or(String::new(), |error| format!(", sampling error {error:.1e}"));
        let digits = f.sampling_error.map_or(f.error, |sampling| sampling.max(f.error));
        text.push_str(&format!("  {:<wide$}  {}{unit}{sampling}\n", f.name, with_errors(f.value, digits, f.error)));
    }
    if outcome.finals.len() > SHOWN {
        text.push_str(&format!("  and {} more in result.json\n", outcome.finals.len() - SHOWN));
    }
    if let Some((period_s, levels, error)) = &outcome.quasi_energies {
        text.push_str(&format!("  quasi-energies over {}:\n", short_with_unit(*period_s, "s")));
        for level in levels.iter().take(SHOWN) {
            text.push_str(&format!(
                "    {} +- {}\n",
                short_with_unit(level.turns / period_s, "Hz"),
                short_with_unit(error / period_s, "Hz")
            ));
        }
    }
    if let Some(gate) = &outcome.gate {
        for turns in &gate.free_z_turns {
            text.push_str(&format!("  free turn about z after the target: {} deg\n", short(turns * 360.0)));
        }
        if let Some((turn, [x, y, z])) = gate.residual {
            let [x, y, z] = [x, y, z].map(component);
            text.push_str(&format!("  residual turn: {} deg about ({x}, {y}, {z})\n", short(turn * 360.0)));
        }
    }
    text.push_str(&surroundings(outcome));
    text.push_str(&format!("method {}: {}\n", outcome.method.word(), outcome.reason));
    text.push_str(&format!(
        "error figure {:.1e} ({} asked), measured by two runs: {}; {}\n",
        outcome.error_figure,
        short(document.accuracy.last),
        outcome.resolutions[0],
        outcome.resolutions[1]
    ));
    if let Some(average) = &outcome.average {
        let sampling = match average.sampling_error {
            Some(error) => format!("; largest sampling error {error:.1e} (one standard error)"),
            None => String::new(),
        };
        text.push_str(&format!("average over {}: {} runs{sampling}\n", average.words, average.runs));
    }
    if let Some(check) = &outcome.cross_check {
        text.push_str(&match &check.difference {
            Ok(difference) => format!("cross-check by {}: differs by {difference:.1e}\n", check.method),
            Err(reason) => format!("cross-check by {} was not made: {reason}\n", check.method),
        });
    }
    if let Some(sensitivity) = &outcome.sensitivity {
        text.push_str(&super::sensitivity_text::text(sensitivity));
    }
    if let Some(place) = place {
        text.push_str(&format!("files: {place}\n"));
    }
    text
}

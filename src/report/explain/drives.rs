//! The sections about drives: carrier, every line against it, strength; and what each envelope does on its drive.

use std::collections::HashMap;

use super::facts::{DriveFact, Facts};
use super::page::{count, degrees, digits, quantity, short, Page};
use super::words;
use crate::config::messages;
use crate::drive::detuning::{detuning, side, Side};
use crate::drive::strength::{flip_s, Strength};
use crate::model::gaps::Gap;
use crate::units::rad_s;

/// Lines, entries and kinds of pulses shown.
const MOST: usize = 12;
/// Lines shown for each drive.
const LINES: usize = 6;

/// One section per drive, and the two-photon detunings.
pub fn drives(page: &mut Page, facts: &Facts) {
    for (index, fact) in facts.drives.iter().enumerate() {
        drive(page, facts, index, fact);
    }
    if facts.two_photon.is_empty() {
        return;
    }
    page.heading("two-photon detuning");
    for (a, b, hz) in facts.two_photon.iter().take(MOST) {
        let drives = &facts.document.drives;
        let carrier = facts.drives[*a].carrier_hz.unwrap_or(0.0).max(facts.drives[*b].carrier_hz.unwrap_or(0.0));
        // carriers that cancel leave their rounding
        let size = match side(0.5 * hz, carrier) {
            Side::On => "on resonance".to_string(),
            side => format!("{} {}", size_of(*hz), side.word()),
        };
        let lower = |drive: usize| facts.drives[drive].reference.map_or("", |[lower, _]| facts.document.system.names[lower].as_str());
        page.line(
            2,
            &format!(
                "{} and {}: {size} (first carrier minus second, minus the gap from {} to {})",
                drives[*a].name,
                drives[*b].name,
                lower(*a),
                lower(*b)
            ),
        );
    }
    more(page, facts.two_photon.len(), MOST, "pairs of drives");
}

fn more(page: &mut Page, all: usize, shown: usize, what: &str) {
    if all > shown {
        page.line(4, &format!("and {} more {what}; --json lists all", all - shown));
    }
}

/// A detuning without sign, with the digits that the difference of two large numbers still has.
fn size_of(hz: f64) -> String {
    quantity(hz.abs(), "Hz", 7)
}

fn pair(facts: &Facts, gap: Gap) -> String {
    let names = &facts.document.system.names;
    format!("{} to {}", names[gap.lower], names[gap.upper])
}

fn drive(page: &mut Page, facts: &Facts, index: usize, fact: &DriveFact) {
    let written = &facts.document.drives[index];
    page.heading(&format!("drive {}", written.name));
    page.labelled("form", words::form(facts.document, index));
    let names = &facts.document.system.names;
    let reference = fact.reference.map(|[lower, upper]| format!("{} to {}", names[lower], names[upper]));
    let Some(carrier_hz) = fact.carrier_hz else {
        match (fact.peak_hz, &reference) {
            (Some(peak), Some(pair)) => page.labelled("peak entry", &format!("{} on {pair}", short(peak, "Hz"))),
            (Some(peak), None) => page.labelled("peak entry", &format!("{} times the matrix as typed", short(peak, "Hz"))),
            (None, _) => page.labelled("peak entry", "no pulse uses this drive"),
        }
        entries(page, facts, index);
        return;
    };
    page.labelled("carrier", &carrier(facts, index, carrier_hz));
    match (fact.peak_hz, &reference) {
        (Some(peak), Some(pair)) => {
            let flip = flip_s(peak).map_or(String::new(), |flip| format!("; a square flip takes {}", short(flip, "s")));
            let text = format!("{} = {} rad/us on {pair}{flip}", short(peak, "Hz"), digits(rad_s(peak) * 1e-6, 6));
            page.labelled("peak Rabi", &text);
        }
        (Some(peak), None) => page.labelled("peak", &format!("{} times the matrix as typed (no reference pair)", short(peak, "Hz"))),
        (None, _) => page.labelled("peak Rabi", "no pulse uses this drive"),
    }
    lines(page, facts, fact, carrier_hz);
    set_carriers(page, facts, index);
    shaken(page, facts, index, fact);
}

/// The carrier, what it sweeps over, and what its phase counts from.
fn carrier(facts: &Facts, index: usize, carrier_hz: f64) -> String {
    let written = &facts.document.drives[index];
    let timeline = &facts.point.timeline;
    let mut text = quantity(carrier_hz, "Hz", 12);
    if let Some(formula) = written.carrier.as_ref().and_then(|carrier| carrier.instantaneous.as_ref()) {
        text = format!("centre {text}");
        if let Some(pulse) = timeline.pulses.iter().find(|pulse| pulse.drive == index) {
            let formula = formula.bind(&facts.point.values);
            let at = |t: f64| {
                let off = formula.at(t) - carrier_hz;
                format!("{}{}", if off < 0.0 { "-" } else { "+" }, size_of(off))
            };
            text.push_str(&format!(", swept from {} at the start to {} at the end of its first pulse", at(0.0), at(pulse.length_s)));
        }
    }
    text.push_str(&format!("; {}", words::carrier_phase(facts.document, index)));
    text
}

/// Carriers that the sequence sets later, each with its nearest line.
fn set_carriers(page: &mut Page, facts: &Facts, index: usize) {
    let own = facts.document.drives[index].carrier.as_ref();
    let timeline = &facts.point.timeline;
    let mut used: Vec<usize> = timeline.pulses.iter().filter(|pulse| pulse.drive == index).filter_map(|pulse| pulse.carrier).collect();
    used.sort_unstable();
    used.dedup();
    used.retain(|k| own.is_some_and(|own| !std::ptr::eq(own, timeline.carriers[*k].written)));
    for carrier in used.iter().take(LINES).map(|k| timeline.carriers[*k].centre_hz) {
        let nearest = facts.gaps.iter().filter(|gap| gap.hz > 0.0).map(|gap| (*gap, detuning(carrier, *gap)));
        let nearest = nearest.min_by(|a, b| a.1 .0.abs().total_cmp(&b.1 .0.abs()));
        let against = nearest.map_or(String::new(), |(gap, (hz, side))| {
            let off = match side {
                Side::On => "on".to_string(),
                side => format!("{} {}", size_of(hz), side.word()),
            };
            format!(", {off} its nearest line {}", pair(facts, gap))
        });
        page.labelled("later", &format!("{}{against}", quantity(carrier, "Hz", 12)));
    }
    if used.len() > LINES {
        page.labelled("", &format!("and {} more carriers", used.len() - LINES));
    }
}

/// The lines of the system, the nearest first.
fn lines(page: &mut Page, facts: &Facts, fact: &DriveFact, carrier_hz: f64) {
    let mut lines: Vec<(Gap, f64, Side)> = facts
        .gaps
        .iter()
        .filter(|gap| gap.hz > 0.0)
        .map(|gap| {
            let (hz, side) = detuning(carrier_hz, *gap);
            (*gap, hz, side)
        })
        .collect();
    let coupled: HashMap<(usize, usize), f64> = fact.pairs.iter().map(|(gap, entry)| ((gap.lower, gap.upper), *entry)).collect();
    let is_coupled = |gap: &Gap| coupled.get(&(gap.lower, gap.upper)).copied();
    lines.sort_by(|a, b| a.1.abs().total_cmp(&b.1.abs()).then(is_coupled(&b.0).is_some().cmp(&is_coupled(&a.0).is_some())));
    if lines.is_empty() {
        page.labelled("lines", "none: all levels have the same energy");
        return;
    }
    let row = |(k, (gap, hz, side)): (usize, &(Gap, f64, Side))| {
        let off = match side {
            Side::On => "on the line".to_string(),
            side => format!("{} {}", size_of(*hz), side.word()),
        };
        let rabi = match (is_coupled(gap), fact.peak_hz) {
            (Some(entry), Some(peak)) => format!("Rabi {}", short(peak * entry, "Hz")),
            (Some(_), None) => "coupled".to_string(),
            (None, _) => "not coupled".to_string(),
        };
        let nearest = if k == 0 { "nearest line" } else { "" };
        vec![off, pair(facts, *gap), rabi, nearest.to_string()]
    };
    page.labelled("detuning", "carrier minus gap, and the peak Rabi frequency on that line:");
    let rows: Vec<Vec<String>> = lines.iter().take(LINES).enumerate().map(row).collect();
    page.table(15, &[], &rows);
    if lines.len() > LINES {
        let coupled = lines.iter().skip(LINES).filter(|(gap, ..)| is_coupled(gap).is_some()).count();
        page.line(15, &format!("and {} farther away, {coupled} of them coupled; --json lists all", count(lines.len() - LINES, "line")));
    }
}

/// Diagonal entries of a drive that has a carrier: it shakes these levels.
fn shaken(page: &mut Page, facts: &Facts, index: usize, fact: &DriveFact) {
    let matrix = &facts.point.couplings[index].matrix;
    let names = &facts.document.system.names;
    let diagonal = (0..names.len()).filter(|k| matrix[(*k, *k)].norm() > 0.0);
    let moved: Vec<String> =
        diagonal.map(|k| format!("{} by {}", names[k], short(matrix[(k, k)].re * fact.peak_hz.unwrap_or(0.0), "Hz"))).collect();
    if !moved.is_empty() {
        let shown = moved.iter().take(MOST).cloned().collect::<Vec<_>>().join(", ");
        let rest = moved.len().saturating_sub(MOST);
        let rest = if rest > 0 { format!(", and {rest} more levels") } else { String::new() };
        page.labelled("shakes", &format!("at its peak it also moves the levels {shown}{rest}"));
    }
}

/// The entries of a direct drive at its peak.
fn entries(page: &mut Page, facts: &Facts, index: usize) {
    let matrix = &facts.point.couplings[index].matrix;
    let names = &facts.document.system.names;
    // of several pulses the largest, with its sign
    let mine = facts.strengths.iter().filter(|((drive, _), _)| *drive == index);
    let strongest = mine.map(|(_, (strength, _))| strength.signed_peak_hz());
    let Some(peak) = strongest.max_by(|a, b| a.abs().total_cmp(&b.abs()).then(a.total_cmp(b))) else {
        return;
    };
    let mut found = Vec::new();
    for row in 0..names.len() {
        for column in row..names.len() {
            let entry = matrix[(row, column)] * peak;
            if entry.norm() > 0.0 {
                let phase = entry.arg() / rad_s(1.0);
                let size =
                    if entry.im == 0.0 { short(entry.re, "Hz") } else { format!("{} at {}", short(entry.norm(), "Hz"), degrees(phase)) };
                found.push(format!("<{}|H|{}> {size}", names[row], names[column]));
            }
        }
    }
    let rest = found.len().saturating_sub(MOST);
    let rest = if rest > 0 { format!(", and {rest} more") } else { String::new() };
    found.truncate(MOST);
    page.labelled("at its peak", &format!("{}{rest}", found.join(", ")));
}

/// What each envelope does on its drive.
pub fn pulses(page: &mut Page, facts: &Facts) {
    if facts.strengths.is_empty() {
        return;
    }
    let document = facts.document;
    let mut keys: Vec<(usize, usize)> = facts.strengths.keys().copied().collect();
    keys.sort_unstable();
    page.heading("pulses by kind");
    let row = |key: &(usize, usize)| {
        let (strength, times) = &facts.strengths[key];
        let (drive, envelope) = (&document.drives[key.0], &document.envelopes[key.1]);
        let direct = facts.is_direct(key.0) || facts.drives[key.0].reference.is_none();
        let area =
            if direct { "-".to_string() } else { format!("{} = {} deg", count_turns(strength.turns), digits(strength.turns * 360.0, 6)) };
        vec![
            format!("{} on {}", envelope.name, drive.name),
            format!("{times} x"),
            envelope.shape.to_string(),
            short(strength.length_s, "s"),
            short(strength.signed_peak_hz(), "Hz"),
            area,
            steps(strength),
            share(strength.missing_area),
        ]
    };
    let rows: Vec<Vec<String>> = keys.iter().take(2 * MOST).map(row).collect();
    let heads = ["pulse", "used", "shape", "length", "peak", "turn", "step at ends", "area cut"];
    page.table(2, &heads, &rows);
    more(page, keys.len(), 2 * MOST, "kinds of pulses");
    let mut shaped: Vec<usize> = keys.iter().map(|key| key.1).collect();
    shaped.sort_unstable();
    shaped.dedup();
    for envelope in shaped.into_iter().map(|k| &document.envelopes[k]).take(2 * MOST) {
        if let Some(derivative) = envelope.derivative {
            let value = |quantity: crate::config::reader::Quantity| facts.point.values[quantity.register as usize];
            page.line(
                2,
                &format!(
                    "{}: derivative quadrature, factor {} against {}",
                    envelope.name,
                    digits(value(derivative.factor), 6),
                    short(value(derivative.against), "Hz")
                ),
            );
        }
    }
}

/// `0.5 turn`, `2 turns`.
pub fn count_turns(turns: f64) -> String {
    format!("{} {}", digits(turns, 6), if turns.abs() <= 1.0 { "turn" } else { "turns" })
}

/// The steps at both ends as shares of the peak.
fn steps(strength: &Strength) -> String {
    let (start, end) = (strength.start_step, strength.end_step);
    if (start - end).abs() <= 1e-9 {
        return share(start);
    }
    format!("{}, {}", share(start), share(end))
}

/// A share in per cent; what rounding leaves is none.
fn share(value: f64) -> String {
    if value.abs() < 1e-12 {
        "none".to_string()
    } else {
        format!("{} %", messages::short(digits(value * 100.0, 4).parse().unwrap_or(value * 100.0)))
    }
}

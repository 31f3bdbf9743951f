//! The facts as a page for a reviewer: what five minutes of reading must show, in the words and units of the trade.

use super::drives;
use super::facts::Facts;
use super::frame;
use super::noise;
use super::page::{count, digits, prefix, quantity, Page};
use super::surroundings::surroundings;
use super::timetable::timetable;
use super::words;
use crate::config::messages::memory;
use crate::outcome::run_bytes;

/// Levels shown.
const LEVELS: usize = 12;
/// Gaps shown.
const GAPS: usize = 10;

/// The page.
pub fn text(facts: &Facts) -> String {
    let mut page = Page::default();
    page.heading(&facts.document.title);
    numbers(&mut page, facts);
    levels(&mut page, facts);
    gaps(&mut page, facts);
    drives::drives(&mut page, facts);
    drives::pulses(&mut page, facts);
    timetable(&mut page, facts);
    surroundings(&mut page, facts);
    noise::noise(&mut page, facts);
    frame::frame(&mut page, facts);
    kept(&mut page, facts);
    terms(&mut page, facts);
    page.heading("conventions");
    for convention in words::conventions(facts) {
        page.line(2, &convention);
    }
    page.heading("defaults used");
    let defaults: Vec<String> = facts.document.defaults.iter().map(|(name, value)| format!("{name}: {value}")).collect();
    page.line(2, &if defaults.is_empty() { "none".to_string() } else { defaults.join("; ") });
    page.heading("warnings");
    for warning in &facts.warnings {
        page.line(2, warning);
    }
    if facts.warnings.is_empty() {
        page.line(2, "none");
    }
    page.text()
}

fn numbers(page: &mut Page, facts: &Facts) {
    let document = facts.document;
    if document.numbers.is_empty() {
        return;
    }
    page.heading("numbers");
    let row = |number: &crate::config::reader::NamedNumber| {
        let unit = number.dim.unit();
        let value = facts.point.values[number.register as usize];
        // a prefix goes with a plain unit only
        let shown = if unit == "1" {
            digits(value, 10)
        } else if unit.starts_with('/') {
            format!("{} {unit}", digits(value, 10))
        } else if unit == "turn" {
            format!("{} turn = {} deg", digits(value, 10), digits(value * 360.0, 10))
        } else if unit.contains(['/', '*', '^']) || unit == "kg" {
            format!("{} {unit}", digits(value, 10))
        } else {
            quantity(value, &unit, 10)
        };
        let set = document.set.iter().any(|(name, _)| *name == number.name);
        format!("{} = {shown}{}", number.name, if set { " (--set)" } else { "" })
    };
    let all: Vec<String> = document.numbers.iter().map(row).collect();
    // two or three beside each other where they are short
    let widest = all.iter().map(|text| text.chars().count()).max().unwrap_or(0);
    let beside = (116 / (widest + 2)).clamp(1, 4);
    let rows: Vec<Vec<String>> = all.chunks(beside).map(<[String]>::to_vec).collect();
    page.table(2, &[], &rows);
}

fn levels(page: &mut Page, facts: &Facts) {
    let names = &facts.document.system.names;
    page.heading(&format!("{}, energies over h", count(names.len(), "level")));
    let levels = names.iter().zip(&facts.point.energies_hz);
    let rows: Vec<Vec<String>> = levels.take(LEVELS).map(|(name, hz)| vec![name.clone(), quantity(*hz, "Hz", 15)]).collect();
    page.table(2, &[], &rows);
    if names.len() > LEVELS {
        let last = facts.point.energies_hz.last().copied().unwrap_or(0.0);
        page.line(
            2,
            &format!(
                "and {} more, the last one {} at {}; --json lists all",
                names.len() - LEVELS,
                names[names.len() - 1],
                quantity(last, "Hz", 15)
            ),
        );
    }
    page.line(2, &format!("start: {}", words::state(facts, &facts.document.start)));
}

/// All gaps; of many those that a drive couples first.
fn gaps(page: &mut Page, facts: &Facts) {
    let names = &facts.document.system.names;
    if facts.gaps.is_empty() {
        return;
    }
    let mut shown: Vec<crate::model::gaps::Gap> = facts.gaps.clone();
    let folded = shown.len() > GAPS;
    if folded {
        let coupled: std::collections::HashSet<(usize, usize)> =
            facts.drives.iter().flat_map(|drive| drive.pairs.iter().map(|(gap, _)| (gap.lower, gap.upper))).collect();
        // stable: basis order among those that are coupled, then among the others
        shown.sort_by_key(|gap| !coupled.contains(&(gap.lower, gap.upper)));
        shown.truncate(GAPS);
    }
    page.heading("gaps");
    let row = |gap: &crate::model::gaps::Gap| {
        vec![
            format!("{} to {}", names[gap.lower], names[gap.upper]),
            quantity(gap.hz, "Hz", 15),
            quantity(gap.ev(), "eV", 6),
            quantity(gap.kelvin(), "K", 6),
            format!("{} /cm", digits(gap.per_cm(), 6)),
            gap.wavelength_m().map_or("-".to_string(), wavelength),
        ]
    };
    let rows: Vec<Vec<String>> = shown.iter().map(row).collect();
    page.table(2, &["line", "frequency", "energy", "temperature", "wavenumber", "wavelength"], &rows);
    if folded {
        page.line(2, &format!("and {} more, coupled ones stand first; --json lists all", facts.gaps.len() - GAPS));
    }
}

/// A wavelength in vacuum, below a micrometre in nm, else with the prefix that fits.
fn wavelength(metres: f64) -> String {
    let (factor, prefix) = prefix(metres, "m");
    format!("{} {prefix}m", digits(metres / factor, 7))
}

fn kept(page: &mut Page, facts: &Facts) {
    page.heading("recorded");
    page.labelled("when", &words::rows(facts));
    for (k, item) in words::records(facts).iter().enumerate() {
        page.labelled(if k == 0 { "what" } else { "" }, item);
    }
    page.labelled("accuracy", &words::accuracy(facts.document));
    page.labelled("memory", &format!("a run takes about {}", memory(run_bytes(facts.document, facts.point))));
}

fn terms(page: &mut Page, facts: &Facts) {
    if facts.commutators.is_empty() {
        return;
    }
    page.heading("terms that commute");
    let apart: Vec<String> = facts
        .commutators
        .iter()
        .map(|(a, b, size)| {
            // a few roundings are none
            if *size < 1e-14 {
                format!("{a} and {b}: they commute")
            } else {
                format!("{a} and {b}: {}", digits(*size, 4))
            }
        })
        .collect();
    let rest = apart.len().saturating_sub(12);
    let rest = if rest > 0 { format!("; and {rest} more") } else { String::new() };
    page.line(2, &format!("{}{rest}", apart.into_iter().take(12).collect::<Vec<_>>().join("; ")));
    page.line(2, "(norm of AB - BA over twice the product of the norms: 0 commute, 0.7071 at most)");
}

//! Noise for a reviewer: how far each number spreads, in the three words of the trade, how it moves in time, how it is averaged.

use serde_json::{json, Map, Value};

use super::facts::Facts;
use super::page::{digits, quantity, Page};
use crate::config::noise::{Memory, NoiseEntry, Rule, Spread};
use crate::config::reader::Quantity;
use crate::noise::figures;
use crate::report::number::number;

/// `noise.<number>`: standard deviation, full width at half maximum, T2-star; null where an entry has none.
pub fn json(facts: &Facts) -> Value {
    let maybe = |value: Option<f64>| value.map_or(Value::Null, number);
    let mut found = Map::new();
    for entry in &facts.document.noise {
        let [sigma, fwhm, t2_star_s] = figures(entry, &facts.point.values).map(maybe);
        for moved in &entry.moves {
            found.insert(moved.name.clone(), json!({"sigma": sigma, "fwhm": fwhm, "t2_star_s": t2_star_s}));
        }
    }
    Value::Object(found)
}

/// The section of the page; none where there is no noise.
pub fn noise(page: &mut Page, facts: &Facts) {
    let entries = &facts.document.noise;
    if entries.is_empty() {
        return;
    }
    page.heading("noise");
    let row = |entry: &NoiseEntry| {
        let unit = entry.dim.unit();
        let shown = |value: Option<f64>, unit: &str| match value {
            Some(value) if unit == "1" => digits(value, 6),
            Some(value) => quantity(value, unit, 6),
            None => "-".to_string(),
        };
        let [sigma, fwhm, t2_star_s] = figures(entry, &facts.point.values);
        let names: Vec<&str> = entry.moves.iter().map(|moved| moved.name.as_str()).collect();
        let together = entry.together.as_ref().map_or(String::new(), |label| format!(" (with {label})"));
        vec![
            format!("{}{together}", names.join(", ")),
            spread(entry).to_string(),
            shown(sigma, &unit),
            shown(fwhm, &unit),
            shown(t2_star_s, "s"),
            memory(facts, entry),
            rule(&entry.rule),
        ]
    };
    let rows: Vec<Vec<String>> = entries.iter().map(row).collect();
    page.table(2, &["number", "spread", "sigma", "FWHM", "T2-star", "within a shot", "average"], &rows);
    if entries.iter().any(|entry| figures(entry, &facts.point.values)[2].is_some()) {
        page.line(2, "T2-star is the 1/e time of the coherence of a pair whose gap the number moves one to one: exp(-(t/T2*)^2).");
    }
    page.line(2, "Probabilities are averaged, never amplitudes; gap() does not follow the noise.");
}

fn spread(entry: &NoiseEntry) -> &'static str {
    match entry.spread {
        Spread::Gaussian(_) => "normal",
        Spread::Lorentzian { .. } => "Lorentzian",
        Spread::Histogram { .. } => "histogram",
        Spread::Values { .. } => "listed values",
        Spread::BySpectrum => "by its spectrum",
    }
}

fn memory(facts: &Facts, entry: &NoiseEntry) -> String {
    let now = |of: &Quantity, unit: &str| quantity(facts.point.values[of.register as usize], unit, 6);
    match &entry.memory {
        Memory::Slow => "fixed".to_string(),
        Memory::Exponential(time) => format!("memory of {}", now(time, "s")),
        Memory::OneOver { from, to, .. } => format!("1/f from {} to {}", now(from, "Hz"), now(to, "Hz")),
        Memory::Table { file, .. } => format!("spectrum {file}"),
    }
}

fn rule(rule: &Rule) -> String {
    match rule {
        Rule::Gauss { points } => format!("{points} Gauss nodes"),
        Rule::Random { draws, seed } => format!("{draws} draws, seed {seed}"),
        Rule::UntilAccurate { seed } => format!("draws until accurate, seed {seed}"),
        Rule::Listed => "all values".to_string(),
    }
}

//! `noise:`: named numbers that are not the same in every shot, or not even within one.
//!
//! An entry names what it moves, how far the number spreads around its written value, how the average is taken, and whether the
//! number stands still within a shot or wanders with a memory or a spectrum.

use std::path::Path;

use super::messages::{short, Fault};
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::tape::Register;
use super::tree::{read_text, Node};
use crate::units::Dim;

/// The size of a Gaussian.
#[derive(Debug, Clone, Copy)]
pub enum Width {
    /// Standard deviation.
    Sigma(Quantity),
    /// Full width at half maximum.
    Fwhm(Quantity),
    /// 1/e time of the coherence of a pair whose gap the number moves one to one, s.
    T2Star(Quantity),
}

/// How far a number spreads; all but `Values` and `Histogram` lie evenly around the written value.
#[derive(Debug, Clone)]
pub enum Spread {
    /// A normal distribution.
    Gaussian(Width),
    /// A Lorentzian that ends at a cut on both sides.
    Lorentzian {
        /// Full width at half maximum.
        fwhm: Quantity,
        /// Where it ends.
        cut_at: Quantity,
    },
    /// Uniform inside each bin.
    Histogram {
        /// One more than counts, ascending.
        edges: Vec<Quantity>,
        /// Of each bin.
        counts: Vec<Quantity>,
    },
    /// Some values with weights that add up to 1.
    Values {
        /// The values.
        values: Vec<Quantity>,
        /// Their weights.
        weights: Vec<Quantity>,
    },
    /// As far as its spectrum says.
    BySpectrum,
}

impl Spread {
    /// Registers of the numbers that set it.
    pub fn registers(&self) -> Vec<Register> {
        let of = |list: &[Quantity]| list.iter().map(|quantity| quantity.register).collect::<Vec<_>>();
        match self {
            Spread::Gaussian(Width::Sigma(size) | Width::Fwhm(size) | Width::T2Star(size)) => vec![size.register],
            Spread::Lorentzian { fwhm, cut_at } => vec![fwhm.register, cut_at.register],
            Spread::Histogram { edges, counts } => [of(edges), of(counts)].concat(),
            Spread::Values { values, weights } => [of(values), of(weights)].concat(),
            Spread::BySpectrum => Vec::new(),
        }
    }
}

/// How the number moves in time.
#[derive(Debug, Clone)]
pub enum Memory {
    /// Not within a shot.
    Slow,
    /// A stationary Gaussian process whose correlation falls off exponentially with this time, s.
    Exponential(Quantity),
    /// One-sided spectrum a^2/f between two frequencies.
    OneOver {
        /// Lower limit, Hz.
        from: Quantity,
        /// Upper limit, Hz.
        to: Quantity,
        /// a, in the unit of the number.
        at_1_hz: Quantity,
    },
    /// One-sided spectrum, straight between the rows, nothing outside: frequencies in Hz, density in unit^2/Hz.
    Table {
        /// The file as named in the config.
        file: String,
        /// Rows, ascending in frequency.
        rows: Vec<(f64, f64)>,
    },
}

/// How the average is taken.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Rule {
    /// Nodes of a Gauss rule, so many for each number (for each bin of a histogram).
    Gauss {
        /// Nodes.
        points: usize,
    },
    /// Random draws.
    Random {
        /// How many.
        draws: usize,
        /// Seed.
        seed: u64,
    },
    /// As many random draws as the accuracy takes.
    UntilAccurate {
        /// Seed.
        seed: u64,
    },
    /// All of the listed values.
    Listed,
}

/// A number that is moved.
#[derive(Debug, Clone, PartialEq)]
pub struct Moved {
    /// Its index among the named numbers as the tape counts them.
    pub index: u32,
    /// Its name.
    pub name: String,
}

/// One entry.
#[derive(Debug, Clone)]
pub struct NoiseEntry {
    /// What it moves, all by the same amount.
    pub moves: Vec<Moved>,
    /// Dimension of the numbers.
    pub dim: Dim,
    /// How far.
    pub spread: Spread,
    /// How in time.
    pub memory: Memory,
    /// How the average is taken.
    pub rule: Rule,
    /// Entries of one label share their draw.
    pub together: Option<String>,
    /// Where it stands.
    pub place: Place,
    /// Where its rule stands.
    pub rule_place: Place,
}

const KEYS: [&str; 6] = ["moves", "spread", "sampling", "together", "slow", "correlated"];
/// Most nodes of one rule.
const MOST_POINTS: f64 = 2000.0;
/// Most draws.
const MOST_DRAWS: f64 = 1e7;

/// Reads `noise:`.
pub fn read_noise(reader: &mut Reader, node: &Node) -> Option<Vec<NoiseEntry>> {
    let items = reader.list(node, "noise", "- {moves: drift, spread: {sigma: 40 kHz}, sampling: {rule: gauss, points: 15}}")?;
    let found: Vec<Option<NoiseEntry>> = items.iter().map(|item| read_entry(reader, item)).collect();
    let entries = found.into_iter().collect::<Option<Vec<_>>>()?;
    let mut good = true;
    for (k, entry) in entries.iter().enumerate() {
        for moved in &entry.moves {
            if let Some(first) = entries[..k].iter().find(|earlier| earlier.moves.contains(moved)) {
                reader.error(entry.place, Fault::MovedTwice { name: moved.name.clone(), first: first.place.line });
                good = false;
            }
        }
        if let Some(first) = entry.together.as_ref().and_then(|label| entries[..k].iter().find(|e| e.together.as_ref() == Some(label))) {
            good &= fits_together(reader, first, entry);
        }
    }
    good.then_some(entries)
}

/// Whether two entries can share a draw: the same kind of spread, memory and rule, the sizes free.
fn fits_together(reader: &mut Reader, first: &NoiseEntry, entry: &NoiseEntry) -> bool {
    let now = |reader: &Reader, quantities: &[Quantity]| -> Vec<f64> { quantities.iter().map(|q| reader.value_now(q.register)).collect() };
    let share = |list: Vec<f64>| -> Vec<f64> {
        let sum: f64 = list.iter().sum();
        list.into_iter().map(|count| count / sum).collect()
    };
    let near = |a: &[f64], b: &[f64]| a.len() == b.len() && a.iter().zip(b).all(|(a, b)| (a - b).abs() <= 1e-9 * a.abs().max(b.abs()));
    let same_spread = match (&first.spread, &entry.spread) {
        (Spread::Gaussian(_), Spread::Gaussian(_)) | (Spread::BySpectrum, Spread::BySpectrum) => true,
        (Spread::Lorentzian { fwhm: a, cut_at: b }, Spread::Lorentzian { fwhm: c, cut_at: d }) => {
            let v = now(reader, &[*a, *b, *c, *d]);
            near(&[v[1] / v[0]], &[v[3] / v[2]])
        }
        (Spread::Histogram { counts: a, .. }, Spread::Histogram { counts: b, .. }) => near(&share(now(reader, a)), &share(now(reader, b))),
        (Spread::Values { weights: a, .. }, Spread::Values { weights: b, .. }) => near(&share(now(reader, a)), &share(now(reader, b))),
        _ => false,
    };
    let same_memory = match (&first.memory, &entry.memory) {
        (Memory::Slow, Memory::Slow) => true,
        (Memory::Exponential(a), Memory::Exponential(b)) => near(&now(reader, &[*a]), &now(reader, &[*b])),
        (Memory::OneOver { from: a, to: b, .. }, Memory::OneOver { from: c, to: d, .. }) => {
            near(&now(reader, &[*a, *b]), &now(reader, &[*c, *d]))
        }
        (Memory::Table { rows: a, .. }, Memory::Table { rows: b, .. }) => a == b,
        _ => false,
    };
    let differs = if !same_spread {
        "spread"
    } else if !same_memory {
        "memory in time"
    } else if first.rule != entry.rule {
        "sampling"
    } else {
        return true;
    };
    let label = entry.together.clone().unwrap_or_default();
    reader.error(entry.place, Fault::TogetherDiffers { label, first: first.place.line, what: differs });
    false
}

fn read_entry(reader: &mut Reader, node: &Node) -> Option<NoiseEntry> {
    let hints = [
        ("number", "The number is named by moves."),
        ("sigma", "The size stands under spread: {sigma: ..}."),
        ("t2_star", "The size stands under spread: {t2_star: ..}."),
        ("seed", "The seed stands under sampling."),
    ];
    reader.fields(node, "an entry of noise", &KEYS, &hints)?;
    let (moves, dim) = read_moves(reader, node)?;
    let section = format!("noise / {}", moves[0].name);
    let memory = read_memory(reader, node, &section, dim);
    let by_spectrum = matches!(memory, Some(Memory::OneOver { .. } | Memory::Table { .. }));
    let spread = match node.get("spread") {
        Some(spread) if by_spectrum => {
            let lines = vec![spread.place.line, node.get("correlated").map_or(0, |c| c.place.line)];
            let found = vec!["spread".to_string(), "a spectrum under correlated".to_string()];
            reader.error(spread.place, Fault::OneOf { found, lines, section: section.clone() });
            None
        }
        None if by_spectrum => Some(Spread::BySpectrum),
        // a spectrum that could not be read says how far all the same
        None if node.get("correlated").is_some_and(|c| c.get("spectrum").is_some() || c.get("one_over").is_some()) => None,
        _ => reader.need(node, "spread", &section, "{sigma: 40 kHz}").and_then(|spread| read_spread(reader, spread, &section, dim)),
    };
    if let (Some(Memory::Exponential(_)), Some(spread)) = (&memory, &spread) {
        if !matches!(spread, Spread::Gaussian(_)) {
            reader.error(node.place, Fault::CorrelatedForm { name: moves[0].name.clone() });
            return None;
        }
    }
    let listed = matches!(spread, Some(Spread::Values { .. }));
    let rule = read_rule(reader, node, &section, listed, spread.is_none());
    let together = match node.get("together") {
        Some(label) => Some(reader.text(label, &format!("{section} / together"), "together: field")?.to_string()),
        None => None,
    };
    let (spread, memory, (rule, rule_place)) = (spread?, memory?, rule?);
    if !matches!(memory, Memory::Slow) && matches!(rule, Rule::Gauss { .. } | Rule::Listed) {
        reader.error(rule_place, Fault::GaussCorrelated { name: moves[0].name.clone() });
        return None;
    }
    let place = node.get("moves").map_or(node.place, |moves| moves.place);
    Some(NoiseEntry { moves, dim, spread, memory, rule, together, place, rule_place })
}

/// `moves:`, the name of a number or a list of names of one dimension.
fn read_moves(reader: &mut Reader, node: &Node) -> Option<(Vec<Moved>, Dim)> {
    let moves = reader.need(node, "moves", "an entry of noise", "drift")?;
    let one = std::slice::from_ref(moves);
    let named = moves.items().unwrap_or(one);
    let found: Vec<Option<(Moved, Dim)>> = named.iter().map(|node| reader.moved(node)).collect();
    let found: Vec<(Moved, Dim)> = found.into_iter().collect::<Option<_>>()?;
    let Some((_, dim)) = found.first().cloned() else {
        let fault = Fault::Shape {
            what: "moves".to_string(),
            expected: "the name of a number, or several".to_string(),
            example: "moves: drift".to_string(),
        };
        reader.error(moves.place, fault);
        return None;
    };
    if let Some((other, found)) = found.iter().find(|(_, other)| *other != dim) {
        let fault = Fault::WrongDim { what: format!("noise / {}", other.name), wanted: dim, found: *found, defined: None, write: None };
        reader.error(moves.place, fault);
        return None;
    }
    Some((found.into_iter().map(|(moved, _)| moved).collect(), dim))
}

fn read_spread(reader: &mut Reader, node: &Node, section: &str, dim: Dim) -> Option<Spread> {
    let section = format!("{section} / spread");
    let hints = [
        ("width", "A width is sigma (standard deviation) or fwhm (full width at half maximum)."),
        ("std", "The standard deviation is called sigma."),
        ("samples", "Listed values are called values, with weights."),
    ];
    reader.fields(node, &section, &["sigma", "fwhm", "t2_star", "histogram", "values", "weights", "form", "cut_at"], &hints)?;
    let size = reader.one_of(node, &["sigma", "fwhm", "t2_star", "histogram", "values"], &section, None)?;
    let form = match node.get("form") {
        Some(form) => Some(reader.word(form, &format!("{section} / form"), &[("gaussian", false), ("lorentzian", true)])?),
        None => None,
    };
    let lorentzian = form == Some(true);
    let positive = |reader: &mut Reader, node: &Node, key: &str, dim: Dim, zero: bool| {
        let quantity = reader.quantity(node, &format!("{section} / {key}"), dim)?;
        let value = reader.value_now(quantity.register);
        if value.is_nan() {
            // reported where it is computed
            return None;
        }
        if !(value > 0.0 || zero && value == 0.0) {
            let fault = Fault::NotPositive { what: format!("{section} / {key}"), value, unit: dim.unit() };
            reader.error(node.place, fault);
            return None;
        }
        Some(quantity)
    };
    if let (Some(extra), true) = (node.get("form").or(node.get("cut_at")), matches!(size.key.as_str(), "histogram" | "values" | "t2_star"))
    {
        if size.key != "t2_star" || lorentzian || node.get("cut_at").is_some() {
            let found = vec![size.key.clone(), if node.get("form").is_some() { "form" } else { "cut_at" }.to_string()];
            reader.error(extra.place, Fault::OneOf { found, lines: vec![size.place.line, extra.place.line], section });
            return None;
        }
    }
    if let (Some(weights), true) = (node.get("weights"), size.key != "values") {
        let found = vec![size.key.clone(), "weights".to_string()];
        reader.error(weights.place, Fault::OneOf { found, lines: vec![size.place.line, weights.place.line], section });
        return None;
    }
    match size.key.as_str() {
        "histogram" => return read_histogram(reader, &size.value, &section, dim),
        "values" => return read_values(reader, node, &size.value, &section, dim),
        _ => {}
    }
    if lorentzian {
        if size.key != "fwhm" {
            reader.error(size.place, Fault::LorentzianSize { key: size.key.clone() });
            return None;
        }
        let Some(cut) = node.get("cut_at") else {
            let why = Some("Without an end a Lorentzian has no standard deviation, and a rule of nodes no nodes.".to_string());
            let write = "cut_at: 20 MHz".to_string();
            reader.error(node.place, Fault::MissingKey { key: "cut_at".to_string(), section, write, why });
            return None;
        };
        let fwhm = positive(reader, &size.value, "fwhm", dim, false);
        let cut_at = positive(reader, cut, "cut_at", dim, false);
        return Some(Spread::Lorentzian { fwhm: fwhm?, cut_at: cut_at? });
    }
    if let Some(cut) = node.get("cut_at") {
        let found = vec!["form: gaussian".to_string(), "cut_at".to_string()];
        reader.error(cut.place, Fault::OneOf { found, lines: vec![size.place.line, cut.place.line], section });
        return None;
    }
    if form.is_none() && size.key != "t2_star" {
        let path = section.replace(" / ", ".");
        reader.default(format!("{path}.form"), "gaussian");
    }
    match size.key.as_str() {
        "sigma" => positive(reader, &size.value, "sigma", dim, true).map(|sigma| Spread::Gaussian(Width::Sigma(sigma))),
        "fwhm" => positive(reader, &size.value, "fwhm", dim, true).map(|fwhm| Spread::Gaussian(Width::Fwhm(fwhm))),
        _ if dim != Dim::FREQUENCY => {
            reader.error(size.place, Fault::T2StarOf { unit: dim.unit() });
            None
        }
        _ => positive(reader, &size.value, "t2_star", Dim::TIME, false).map(|time| Spread::Gaussian(Width::T2Star(time))),
    }
}

fn quantities(reader: &mut Reader, node: &Node, what: &str, dim: Dim, example: &str) -> Option<(Vec<Quantity>, Vec<f64>)> {
    let items = reader.list(node, what, example)?;
    let found: Vec<Option<Quantity>> = items.iter().map(|item| reader.quantity(item, what, dim)).collect();
    let found = found.into_iter().collect::<Option<Vec<_>>>()?;
    let values = reader.tape.as_written();
    let now = found.iter().map(|quantity| values[quantity.register as usize]).collect();
    Some((found, now))
}

fn read_histogram(reader: &mut Reader, node: &Node, section: &str, dim: Dim) -> Option<Spread> {
    let section = format!("{section} / histogram");
    reader.fields(node, &section, &["edges", "counts"], &[])?;
    let edges_node = reader.need(node, "edges", &section, "[-40 kHz, 0 kHz, 40 kHz]");
    let counts_node = reader.need(node, "counts", &section, "[12, 9]");
    let (edges_node, counts_node) = (edges_node?, counts_node?);
    let edges = quantities(reader, edges_node, &format!("{section} / edges"), dim, "edges: [-40 kHz, 0 kHz, 40 kHz]");
    let counts = quantities(reader, counts_node, &format!("{section} / counts"), Dim::NONE, "counts: [12, 9]");
    let ((edges, at), (counts, numbers)) = (edges?, counts?);
    if edges.len() != counts.len() + 1 || counts.is_empty() {
        reader.error(counts_node.place, Fault::HistogramLength { edges: edges.len(), counts: counts.len() });
        return None;
    }
    if let Some(k) = (1..at.len()).find(|k| !(at[*k] > at[k - 1])) {
        let fault = Fault::OutOfRange {
            what: format!("edge number {} of the histogram", k + 1),
            found: super::messages::short_with_unit(at[k], &dim.unit()),
            wanted: format!("above the one before it, {}", super::messages::short_with_unit(at[k - 1], &dim.unit())),
        };
        reader.error(edges[k].place, fault);
        return None;
    }
    let bad = numbers.iter().position(|count| !(*count >= 0.0));
    if bad.is_some() || !(numbers.iter().sum::<f64>() > 0.0) {
        let fault = Fault::OutOfRange {
            what: "a count of the histogram".to_string(),
            found: short(bad.map_or(0.0, |k| numbers[k])),
            wanted: "0 or more, and above 0 in one bin at least".to_string(),
        };
        reader.error(counts_node.place, fault);
        return None;
    }
    Some(Spread::Histogram { edges, counts })
}

fn read_values(reader: &mut Reader, node: &Node, values_node: &Node, section: &str, dim: Dim) -> Option<Spread> {
    let values = quantities(reader, values_node, &format!("{section} / values"), dim, "values: [-1 MHz, 1 MHz]");
    let weights_node = reader.need(node, "weights", section, "[0.5, 0.5]")?;
    let weights = quantities(reader, weights_node, &format!("{section} / weights"), Dim::NONE, "weights: [0.5, 0.5]");
    let ((values, _), (weights, shares)) = (values?, weights?);
    let sum: f64 = shares.iter().sum();
    if values.len() != weights.len() || values.is_empty() {
        reader.error(weights_node.place, Fault::WeightsCount { values: values.len(), weights: weights.len() });
        return None;
    }
    if shares.iter().any(|share| !(*share >= 0.0)) || !((sum - 1.0).abs() <= 1e-6) {
        let scaled: Vec<String> =
            shares.iter().map(|share| short(share.max(0.0) / shares.iter().map(|s| s.max(0.0)).sum::<f64>())).collect();
        let negative = shares.iter().any(|share| *share < 0.0);
        reader.error(weights_node.place, Fault::WeightsSum { sum, negative, write: format!("weights: [{}]", scaled.join(", ")) });
        return None;
    }
    Some(Spread::Values { values, weights })
}

fn read_memory(reader: &mut Reader, node: &Node, section: &str, dim: Dim) -> Option<Memory> {
    let slow = match node.get("slow") {
        Some(slow) => Some(reader.truth(slow, &format!("{section} / slow"))?),
        None => None,
    };
    let Some(correlated) = node.get("correlated") else {
        match slow {
            None => reader.default(format!("{}.slow", section.replace(" / ", ".")), "true"),
            Some(true) => {}
            Some(false) => {
                reader.need(node, "correlated", section, "{time: 3 us}")?;
            }
        }
        return Some(Memory::Slow);
    };
    if slow == Some(true) {
        let lines = vec![node.get("slow").map_or(0, |slow| slow.place.line), correlated.place.line];
        let found = vec!["slow".to_string(), "correlated".to_string()];
        reader.error(correlated.place, Fault::OneOf { found, lines, section: section.to_string() });
        return None;
    }
    let section = format!("{section} / correlated");
    reader.fields(correlated, &section, &["time", "spectrum", "one_over"], &[])?;
    let entry = reader.one_of(correlated, &["time", "spectrum", "one_over"], &section, None)?;
    let above = |reader: &mut Reader, node: &Node, key: &str, dim: Dim| {
        let quantity = reader.quantity(node, &format!("{section} / {key}"), dim)?;
        let value = reader.value_now(quantity.register);
        if !(value > 0.0) {
            reader.error(node.place, Fault::NotPositive { what: format!("{section} / {key}"), value, unit: dim.unit() });
            return None;
        }
        Some(quantity)
    };
    match entry.key.as_str() {
        "time" => above(reader, &entry.value, "time", Dim::TIME).map(Memory::Exponential),
        "spectrum" => read_spectrum(reader, &entry.value),
        _ => {
            let inner = format!("{section} / one_over");
            reader.fields(&entry.value, &inner, &["from", "to", "at_1_Hz"], &[])?;
            let from = reader.need(&entry.value, "from", &inner, "1 kHz").and_then(|from| above(reader, from, "from", Dim::FREQUENCY));
            let to_node = reader.need(&entry.value, "to", &inner, "1 MHz");
            let to = to_node.and_then(|to| above(reader, to, "to", Dim::FREQUENCY));
            let at = reader.need(&entry.value, "at_1_Hz", &inner, "60 kHz").and_then(|at| above(reader, at, "at_1_Hz", dim));
            let (from, to, at_1_hz) = (from?, to?, at?);
            let (low, high) = (reader.value_now(from.register), reader.value_now(to.register));
            if !(high > low) {
                let fault = Fault::OutOfRange {
                    what: "the upper limit of the spectrum".to_string(),
                    found: super::messages::short_with_unit(high, "Hz"),
                    wanted: format!("above the lower one, {}", super::messages::short_with_unit(low, "Hz")),
                };
                reader.error(to.place, fault);
                return None;
            }
            Some(Memory::OneOver { from, to, at_1_hz })
        }
    }
}

/// A table `frequency_<unit>,density`, beside the config.
fn read_spectrum(reader: &mut Reader, node: &Node) -> Option<Memory> {
    let name = reader.text(node, "spectrum", "spectrum: drift.csv")?.to_string();
    let path = reader.beside(&name);
    let file = match read_text(&path, &mut reader.sources) {
        Ok(file) => file,
        Err(mut mistake) => {
            if mistake.place.line == 0 {
                mistake.place = node.place;
                if let Fault::CannotRead { reason, .. } = mistake.fault {
                    mistake.fault = Fault::CannotRead { path: name, reason };
                }
            }
            reader.mistakes.push(mistake);
            return None;
        }
    };
    let text = reader.sources.files()[usize::from(file)].text.clone();
    match spectrum_table(&text) {
        Ok(rows) => Some(Memory::Table { file: Path::new(&name).display().to_string(), rows }),
        Err((row, reason)) => {
            let length = reader.sources.line(file, row as u32).map_or(1, |line| line.chars().count().max(1));
            let place = Place { file, line: row as u32, column: 1, length: length as u32 };
            reader.error(place, Fault::FileContent { path: name, row, reason });
            None
        }
    }
}

/// Frequencies in Hz and densities of a CSV text; a fault names its line.
fn spectrum_table(text: &str) -> Result<Vec<(f64, f64)>, (usize, String)> {
    let mut table =
        csv::ReaderBuilder::new().has_headers(false).flexible(true).comment(Some(b'#')).trim(csv::Trim::All).from_reader(text.as_bytes());
    let mut rows: Vec<(f64, f64)> = Vec::new();
    let mut unit = None;
    let mut line = 1;
    for record in table.records() {
        let record =
            record.map_err(|error| (error.position().map_or(1, |at| at.line() as usize), "the row is not UTF-8 text".to_string()))?;
        line = record.position().map_or(1, |at| at.line() as usize);
        let Some(factor) = unit else {
            let head = record.get(0).and_then(|name| name.strip_prefix("frequency_")).and_then(crate::units::unit);
            let Some(head) = head.filter(|unit| unit.dim == Dim::FREQUENCY && record.get(1) == Some("density")) else {
                return Err((line, "the headings must be frequency_kHz (or another unit of frequency) and density".to_string()));
            };
            unit = Some(head.factor);
            continue;
        };
        let number = |index: usize| match record.get(index).map(str::parse::<f64>) {
            Some(Ok(value)) if value.is_finite() && value >= 0.0 => Ok(value),
            _ => Err((line, format!("\"{}\" is no number from 0 up (dot as decimal sign)", record.get(index).unwrap_or("")))),
        };
        let row = (number(0)? * factor, number(1)?);
        if rows.last().is_some_and(|last| row.0 <= last.0) {
            return Err((line, "the frequencies must increase from row to row".to_string()));
        }
        rows.push(row);
    }
    if rows.len() >= 2 && rows.iter().all(|row| row.1 == 0.0) {
        return Err((line, "every density is 0, so nothing would move; one row at least needs a larger one".to_string()));
    }
    if rows.len() < 2 {
        return Err((line, "a spectrum needs two rows at least below the headings frequency_kHz,density".to_string()));
    }
    Ok(rows)
}

fn read_rule(reader: &mut Reader, node: &Node, section: &str, listed: bool, broken: bool) -> Option<(Rule, Place)> {
    let section = format!("{section} / sampling");
    let Some(sampling) = node.get("sampling") else {
        if listed || broken {
            return Some((Rule::Listed, node.place));
        }
        let why =
            Some("gauss takes nodes of a rule, random takes draws, until accurate takes as many draws as the accuracy needs.".to_string());
        let write = "sampling: {rule: gauss, points: 15}".to_string();
        reader
            .error(node.place, Fault::MissingKey { key: "sampling".to_string(), section: section.replace(" / sampling", ""), write, why });
        return None;
    };
    reader.fields(sampling, &section, &["rule", "points", "draws", "seed"], &[])?;
    let rule_node = reader.need(sampling, "rule", &section, "gauss")?;
    let rule = reader.word(rule_node, &format!("{section} / rule"), &[("gauss", 0u8), ("random", 1), ("until accurate", 2)])?;
    let takes: &[&str] = [&["points"][..], &["draws", "seed"], &["seed"]][usize::from(rule)];
    let mut good = true;
    for entry in sampling.entries().unwrap_or_default() {
        if entry.key != "rule" && ["points", "draws", "seed"].contains(&entry.key.as_str()) && !takes.contains(&entry.key.as_str()) {
            let hint = Some(format!("It belongs to another rule; {} takes {}.", rule_node.text().unwrap_or_default(), takes.join(" and ")));
            let known = std::iter::once("rule").chain(takes.iter().copied()).map(str::to_string).collect();
            reader.error(entry.place, Fault::UnknownKey { key: entry.key.clone(), section: section.clone(), near: None, known, hint });
            good = false;
        }
    }
    let count = |reader: &mut Reader, key: &str, example: &str, from: f64, most: f64| {
        let value_node = reader.need(sampling, key, &section, example)?;
        let value = reader.whole(value_node, &format!("{section} / {key}"), from)?;
        if value > most {
            let fault =
                Fault::OutOfRange { what: format!("{section} / {key}"), found: short(value), wanted: format!("at most {}", short(most)) };
            reader.error(value_node.place, fault);
            return None;
        }
        Some(value)
    };
    let rule = match rule {
        0 if listed => {
            good &= sampling.get("points").is_none() || count(reader, "points", "15", 1.0, MOST_POINTS).is_some();
            Rule::Listed
        }
        0 => Rule::Gauss { points: count(reader, "points", "15", 1.0, MOST_POINTS)? as usize },
        1 => {
            let draws = count(reader, "draws", "400", 2.0, MOST_DRAWS);
            let seed = count(reader, "seed", "20417", 0.0, 9e15);
            Rule::Random { draws: draws? as usize, seed: seed? as u64 }
        }
        _ => Rule::UntilAccurate { seed: count(reader, "seed", "20417", 0.0, 9e15)? as u64 },
    };
    good.then_some((rule, rule_place(sampling)))
}

fn rule_place(sampling: &Node) -> Place {
    sampling.get("rule").map_or(sampling.place, |rule| rule.place)
}

//! `accuracy:`, `frame:` and `output:`.

use super::messages::Fault;
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::tree::Node;
use crate::units::Dim;

/// Below this, rounding alone exceeds what is asked.
pub const FINEST: f64 = 1e-13;
/// Accuracy where none is said.
pub const USUAL_ACCURACY: f64 = 1e-8;

/// A method that the user may name.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum MethodWord {
    /// Chosen by the program.
    Automatic,
    /// Matrix exponentials.
    ConstantSteps,
    /// Runge-Kutta.
    Smooth,
    /// Magnus type.
    Geometric,
    /// Collocation on adaptive elements.
    Collocation,
    /// Harmonics of the carriers.
    Carrier,
}

/// `accuracy:`.
#[derive(Debug, Clone, Copy)]
pub struct Accuracy {
    /// Largest allowed error of any recorded number.
    pub last: f64,
    /// The method.
    pub method: MethodWord,
    /// Whether a second, independent route is taken too.
    pub cross_check: bool,
    /// Seed of quantum trajectories.
    pub seed: u64,
}

/// Reads `accuracy:`.
pub fn read_accuracy(reader: &mut Reader, node: Option<&Node>) -> Option<Accuracy> {
    let mut accuracy = Accuracy { last: USUAL_ACCURACY, method: MethodWord::Automatic, cross_check: false, seed: 0 };
    let words = [
        ("automatic", MethodWord::Automatic),
        ("constant steps", MethodWord::ConstantSteps),
        ("smooth", MethodWord::Smooth),
        ("geometric", MethodWord::Geometric),
        ("collocation", MethodWord::Collocation),
        ("fast carrier", MethodWord::Carrier),
    ];
    if let Some(node) = node {
        reader.fields(
            node,
            "accuracy",
            &["final", "method", "cross_check", "seed"],
            &[("tolerance", "The largest allowed error is called final.")],
        )?;
        if let Some(seed) = node.get("seed") {
            accuracy.seed = read_seed(reader, seed, "accuracy / seed")?;
        }
    }
    match node.and_then(|node| node.get("final")) {
        Some(wanted) => {
            let found = reader.plain_value(wanted, "accuracy / final")?;
            if !(found > 0.0) {
                reader.error(wanted.place, Fault::AccuracyNotPositive { found });
                return None;
            }
            if found < FINEST {
                reader.error(wanted.place, Fault::AccuracyTooFine { found, floor: FINEST });
                return None;
            }
            accuracy.last = found;
        }
        None => reader.default("accuracy.final", format!("{USUAL_ACCURACY:e}")),
    }
    match node.and_then(|node| node.get("method")) {
        Some(method) => accuracy.method = reader.word(method, "accuracy / method", &words)?,
        None => reader.default("accuracy.method", "automatic"),
    }
    if let Some(check) = node.and_then(|node| node.get("cross_check")) {
        accuracy.cross_check = reader.truth(check, "accuracy / cross_check")?;
    }
    Some(accuracy)
}

/// A seed: a whole number from 0 to 2^53, which doubles hold exactly.
pub fn read_seed(reader: &mut Reader, node: &Node, what: &str) -> Option<u64> {
    let value = reader.whole(node, what, 0.0)?;
    if value > 9_007_199_254_740_992.0 {
        let fault = Fault::OutOfRange { what: what.to_string(), found: super::messages::short(value), wanted: "at most 2^53".to_string() };
        reader.error(node.place, fault);
        return None;
    }
    Some(value as u64)
}

/// What a rotating frame follows.
#[derive(Debug, Clone)]
pub enum Follows {
    /// The drives: each ties the pairs that it couples.
    Drives,
    /// A table: level, frequency in Hz; levels left out stand still.
    Table(Vec<(usize, Quantity)>),
}

/// The rotating frame.
#[derive(Debug, Clone)]
pub struct Rotating {
    /// What it follows.
    pub follows: Follows,
    /// Terms that turn faster are dropped, Hz; none keeps every term.
    pub limit: Option<Quantity>,
    /// Levels to eliminate.
    pub eliminate: Vec<usize>,
    /// A kept resonant half that still turns is allowed.
    pub allow_beat: bool,
    /// Where the section stands.
    pub place: Place,
}

/// `frame:`.
#[derive(Debug, Clone)]
pub enum Frame {
    /// Nothing rewritten, nothing dropped.
    Lab,
    /// A rotating frame.
    Rotating(Box<Rotating>),
}

impl Frame {
    /// Levels that are eliminated.
    pub fn eliminated(&self) -> &[usize] {
        match self {
            Frame::Lab => &[],
            Frame::Rotating(frame) => &frame.eliminate,
        }
    }
}

/// Reads `frame:`.
pub fn read_frame(reader: &mut Reader, node: Option<&Node>) -> Option<Frame> {
    let Some(node) = node else {
        reader.default("frame.kind", "lab");
        return Some(Frame::Lab);
    };
    let known = ["kind", "follows", "drop_terms_faster_than", "eliminate", "allow_beat"];
    let entries = reader.fields(node, "frame", &known, &[])?;
    let kind = reader.need(node, "kind", "frame", "lab")?;
    let rotating = reader.word(kind, "frame / kind", &[("lab", false), ("rotating", true)])?;
    if !rotating {
        if let Some(entry) = entries.iter().find(|entry| known[1..].contains(&entry.key.as_str())) {
            let known = vec!["kind".to_string()];
            let hint = Some("It belongs to a rotating frame; in the laboratory frame nothing is dropped.".to_string());
            let fault = Fault::UnknownKey { key: entry.key.clone(), section: "frame (kind: lab)".to_string(), near: None, known, hint };
            reader.error(entry.place, fault);
            return None;
        }
        return Some(Frame::Lab);
    }
    let follows = reader.need(node, "follows", "frame", "drives").and_then(|follows| read_follows(reader, follows));
    let limit = match node.get("drop_terms_faster_than") {
        None => {
            let why = Some("Terms that turn faster are dropped and listed; nothing keeps every term.".to_string());
            let fault = Fault::MissingKey {
                key: "drop_terms_faster_than".to_string(),
                section: "frame".to_string(),
                write: "drop_terms_faster_than: 1 GHz".to_string(),
                why,
            };
            reader.error(kind.place, fault);
            None
        }
        Some(limit) if limit.text() == Some("nothing") => Some(None),
        Some(limit) => reader.quantity(limit, "drop_terms_faster_than", Dim::FREQUENCY).map(Some),
    };
    let eliminate = match node.get("eliminate") {
        None => Some(Vec::new()),
        Some(list) => {
            let found: Vec<Option<usize>> =
                reader.list(list, "eliminate", "eliminate: [upper]")?.iter().map(|level| reader.level(level)).collect();
            found.into_iter().collect()
        }
    };
    let allow_beat = match node.get("allow_beat") {
        None => false,
        Some(truth) => reader.truth(truth, "allow_beat")?,
    };
    let frame = Rotating { follows: follows?, limit: limit?, eliminate: eliminate?, allow_beat, place: node.place };
    Some(Frame::Rotating(Box::new(frame)))
}

fn read_follows(reader: &mut Reader, node: &Node) -> Option<Follows> {
    let Some(entries) = node.entries() else {
        return reader.word(node, "frame / follows", &[("drives", ())]).map(|()| Follows::Drives);
    };
    let names = reader.level_names();
    let mut table = Vec::new();
    let mut good = true;
    for entry in entries {
        let frequency = reader.quantity(&entry.value, "a frequency of the frame", Dim::FREQUENCY);
        match (names.iter().position(|name| *name == entry.key), frequency) {
            (Some(level), Some(frequency)) => table.push((level, frequency)),
            (None, _) => {
                reader.unknown(entry.place, "level", &entry.key, &names);
                good = false;
            }
            _ => good = false,
        }
    }
    good.then_some(Follows::Table(table))
}

/// A plot that a run can draw.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Plot {
    /// Recorded numbers over time.
    Traces,
    /// Envelopes and their timing.
    Envelopes,
    /// Spectrum of each pulse.
    Spectrum,
    /// Turning terms of a rotating frame.
    Ledger,
    /// A final quantity of a scan over two axes.
    Map,
    /// Final quantities of a scan along one axis.
    ScanLines,
}

/// `output:`.
#[derive(Debug, Clone)]
pub struct Output {
    /// Folder, from where the command was given; none where the default is used.
    pub folder: Option<String>,
    /// Plots to draw.
    pub plots: Vec<Plot>,
}

/// Reads `output:`.
pub fn read_output(reader: &mut Reader, node: Option<&Node>) -> Option<Output> {
    let all = vec![Plot::Traces, Plot::Envelopes, Plot::Spectrum, Plot::Ledger, Plot::Map, Plot::ScanLines];
    let mut output = Output { folder: None, plots: all };
    if let Some(node) = node {
        let entries = reader.fields(node, "output", &["folder", "plots", "tables", "waveform_files", "report"], &[])?;
        for later in entries.iter().filter(|entry| matches!(entry.key.as_str(), "waveform_files" | "report")) {
            reader.error(later.place, Fault::NotNow { key: later.key.clone(), section: "output".to_string() });
        }
        if let Some(folder) = node.get("folder") {
            output.folder = Some(reader.text(folder, "output / folder", "folder: outputs/first-run")?.to_string());
        }
        if let Some(tables) = node.get("tables") {
            for table in reader.list(tables, "output / tables", "tables: [csv]")? {
                reader.word(table, "a table", &[("csv", ())])?;
            }
        }
        if let Some(plots) = node.get("plots") {
            output.plots.clear();
            for plot in reader.list(plots, "output / plots", "plots: [traces, envelopes]")? {
                let later = ["level diagram"];
                if let Some(key) = plot.text().filter(|text| later.contains(text)) {
                    reader.error(plot.place, Fault::NotNow { key: key.to_string(), section: "output / plots".to_string() });
                    return None;
                }
                let words = [
                    ("traces", Plot::Traces),
                    ("envelopes", Plot::Envelopes),
                    ("timing", Plot::Envelopes),
                    ("spectrum", Plot::Spectrum),
                    ("ledger", Plot::Ledger),
                    ("map", Plot::Map),
                    ("scan lines", Plot::ScanLines),
                ];
                let plot = reader.word(plot, "a plot", &words)?;
                if !output.plots.contains(&plot) {
                    output.plots.push(plot);
                }
            }
        }
    }
    if output.folder.is_none() {
        reader.default("output.folder", "outputs/<name of the file>");
    }
    Some(output)
}

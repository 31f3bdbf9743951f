//! `accuracy:`, `frame:` and `output:`.

use super::messages::Fault;
use super::reader::Reader;
use super::tree::Node;

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
}

/// Reads `accuracy:`.
pub fn read_accuracy(reader: &mut Reader, node: Option<&Node>) -> Option<Accuracy> {
    let mut accuracy = Accuracy { last: USUAL_ACCURACY, method: MethodWord::Automatic, cross_check: false };
    let words = [
        ("automatic", MethodWord::Automatic),
        ("constant steps", MethodWord::ConstantSteps),
        ("smooth", MethodWord::Smooth),
        ("geometric", MethodWord::Geometric),
    ];
    if let Some(node) = node {
        let entries = reader.fields(
            node,
            "accuracy",
            &["final", "method", "cross_check", "seed"],
            &[("tolerance", "The largest allowed error is called final.")],
        )?;
        if let Some(seed) = entries.iter().find(|entry| entry.key == "seed") {
            reader.error(seed.place, Fault::NotNow { key: "seed".to_string(), section: "accuracy".to_string() });
            return None;
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

/// Reads `frame:`; so far the laboratory frame alone.
pub fn read_frame(reader: &mut Reader, node: Option<&Node>) -> Option<()> {
    let Some(node) = node else {
        reader.default("frame.kind", "lab");
        return Some(());
    };
    let known = ["kind", "follows", "drop_terms_faster_than", "eliminate", "allow_beat"];
    reader.fields(node, "frame", &known, &[])?;
    let kind = reader.need(node, "kind", "frame", "lab")?;
    let rotating = reader.word(kind, "frame / kind", &[("lab", false), ("rotating", true)])?;
    if rotating {
        reader.error(kind.place, Fault::NotNow { key: "rotating".to_string(), section: "frame / kind".to_string() });
        return None;
    }
    if let Some(entry) = node.entries()?.iter().find(|entry| known[1..].contains(&entry.key.as_str())) {
        let known = vec!["kind".to_string()];
        let hint = Some("It belongs to a rotating frame; in the laboratory frame nothing is dropped.".to_string());
        reader.error(
            entry.place,
            Fault::UnknownKey { key: entry.key.clone(), section: "frame (kind: lab)".to_string(), near: None, known, hint },
        );
        return None;
    }
    Some(())
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
    let all = vec![Plot::Traces, Plot::Envelopes, Plot::Spectrum];
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
                let later = ["ledger", "level diagram", "map", "scan lines"];
                if let Some(key) = plot.text().filter(|text| later.contains(text)) {
                    reader.error(plot.place, Fault::NotNow { key: key.to_string(), section: "output / plots".to_string() });
                    return None;
                }
                let words =
                    [("traces", Plot::Traces), ("envelopes", Plot::Envelopes), ("timing", Plot::Envelopes), ("spectrum", Plot::Spectrum)];
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

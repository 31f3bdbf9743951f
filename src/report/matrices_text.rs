//! The screen of `nutate matrices`: levels, the strongest lines, what the terms do to each other, and where the files are.

use crate::config::document::Document;
use crate::config::messages::short;
use crate::matrices::{strength, Line, Matrices, Named, MOST_IN_DETAIL};
use crate::report::heading::heading;

/// Levels and lines shown; the rest is in the files.
const SHOWN: usize = 16;

/// The text.
pub fn summary(document: &Document, found: &Matrices, place: &str) -> String {
    let built = &found.still.built;
    let mut text = format!("{}\n\n", heading(document));
    let size = built.size();
    text.push_str(&format!("{size} state{} in the {}\n", if size == 1 { "" } else { "s" }, basis_words(found)));
    levels(document, found, &mut text);
    eigenvalues(found, &mut text);
    lines(document, found, &mut text);
    if size > MOST_IN_DETAIL {
        text.push_str(&format!(
            "\nBeyond {MOST_IN_DETAIL} states lines and commutators are left out, and matrices stand in the .npy files alone.\n"
        ));
    }
    commutators(found, &mut text);
    truncation(document, found, &mut text);
    for (part, diagonal) in &found.canonical {
        canonical(document, part, diagonal, &mut text);
    }
    for note in &built.notes {
        text.push_str(&format!("\nnote: {note}"));
    }
    text.push_str(&format!("\nerror of the levels over the largest: {}\n", short(found.error_figure)));
    text.push_str(&format!("wrote {place}\n"));
    text
}

fn basis_words(found: &Matrices) -> &'static str {
    if found.still.built.basis.is_some() {
        "working basis"
    } else {
        "basis as built"
    }
}

fn levels(document: &Document, found: &Matrices, text: &mut String) {
    let names = &document.system.names;
    let wide = names.iter().take(SHOWN).map(|name| name.chars().count()).max().unwrap_or(4).max(5);
    let weights = &found.still.built.weights;
    text.push_str(&format!("  {:wide$}  {:>24}{}\n", "state", "energy over h", if weights.is_empty() { "" } else { "    weight" }));
    for (k, name) in names.iter().take(SHOWN).enumerate() {
        let weight = weights.get(k).map_or(String::new(), |weight| format!("    {weight:.4}"));
        text.push_str(&format!("  {name:wide$}  {:>24}{weight}\n", with_unit(found.still.energies_hz[k])));
    }
    if names.len() > SHOWN {
        text.push_str(&format!("  .. and {} more in levels.csv\n", names.len() - SHOWN));
    }
}

/// Eigenvalues, where they are not the diagonal.
fn eigenvalues(found: &Matrices, text: &mut String) {
    let statics = &found.still.built.statics_hz;
    let diagonal = (0..statics.ncols()).all(|column| (0..column).all(|row| statics[(row, column)].norm() == 0.0));
    if diagonal {
        return;
    }
    text.push_str("the static matrix is not diagonal in this basis; its eigenvalues\n");
    for level in found.eigenvalues_hz.iter().take(SHOWN) {
        text.push_str(&format!("  {:>24}\n", with_unit(*level)));
    }
    if found.eigenvalues_hz.len() > SHOWN {
        text.push_str(&format!("  .. and {} more in result.json\n", found.eigenvalues_hz.len() - SHOWN));
    }
}

/// An energy with ten digits in the unit that fits.
fn with_unit(hz: f64) -> String {
    let (factor, unit) = match hz.abs() {
        size if size >= 1e12 => (1e-12, "THz"),
        size if size >= 1e9 => (1e-9, "GHz"),
        size if size >= 1e6 => (1e-6, "MHz"),
        size if size >= 1e3 => (1e-3, "kHz"),
        _ => (1.0, "Hz"),
    };
    format!("{:.9} {unit}", hz * factor)
}

fn lines(document: &Document, found: &Matrices, text: &mut String) {
    let names = &document.system.names;
    // a drive is what a person sees lines with; without one every operator is
    let seen: &[Named] = if found.drives.is_empty() { &found.operators } else { &found.drives };
    for named in seen {
        let mut strong: Vec<(Line, f64)> = found.lines.iter().map(|line| (*line, strength(&named.matrix, *line))).collect();
        let largest = strong.iter().map(|(_, size)| *size).fold(0.0, f64::max);
        strong.retain(|(_, size)| !super::matrices_json::is_forbidden(*size, largest));
        if strong.is_empty() || found.drives.is_empty() && !named.name.ends_with("spin_x") && !named.name.ends_with("position") {
            continue;
        }
        strong.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.gap_hz.total_cmp(&b.0.gap_hz)));
        text.push_str(&format!("\nlines of {}: {} of {} pairs\n", named.name, strong.len(), found.lines.len()));
        for (line, size) in strong.iter().take(SHOWN) {
            text.push_str(&format!(
                "  {} to {}: {}, strength {}\n",
                names[line.from],
                names[line.to],
                with_unit(line.gap_hz),
                short(*size)
            ));
        }
        if strong.len() > SHOWN {
            text.push_str(&format!("  .. and {} more in transitions.csv\n", strong.len() - SHOWN));
        }
    }
}

fn commutators(found: &Matrices, text: &mut String) {
    if found.commutators.is_empty() {
        return;
    }
    text.push_str("\ncommutators, |AB - BA| over twice |A| |B|\n");
    for (name, size) in &found.commutators {
        let words = if *size < 1e-14 { "commute".to_string() } else { short(*size) };
        text.push_str(&format!("  {name}: {words}\n"));
    }
}

/// Says what leads out of the kept states: the static matrix, and operators state by state.
fn truncation(document: &Document, found: &Matrices, text: &mut String) {
    let names = &document.system.names;
    let lost = found.still.built.lost_hz;
    if lost > 0.0 {
        text.push_str(&format!(
            "\nthe static matrix couples the kept states to those left out by {}: levels are off by about its square over their distance\n",
            with_unit(lost)
        ));
    }
    if found.left_out > 0 {
        text.push_str(&format!(
            "\n{} operators of the system that nothing uses are left out, as all would need {:.1} GB; record the mean of one to see it\n",
            found.left_out,
            ((found.left_out + found.operators.len()) * names.len() * names.len() * 16) as f64 / 1e9
        ));
    }
    if found.leaving.is_empty() {
        return;
    }
    text.push_str("\noperators that lead out of the kept states (share of what they make of a state that is cut off, in norm)\n");
    for (operator, shares) in found.leaving.iter().take(SHOWN) {
        let hit: Vec<usize> = (0..shares.len()).filter(|k| shares[*k] > 0.0).collect();
        let of = |k: usize| format!("{:.4} on {}", shares[k], names[k]);
        let words = match hit.as_slice() {
            list if list.len() <= 4 => list.iter().map(|k| of(*k)).collect::<Vec<_>>().join(", "),
            list => {
                let most = list.iter().copied().fold(list[0], |most, k| if shares[k] > shares[most] { k } else { most });
                format!("{} of {} states, most: {}", list.len(), shares.len(), of(most))
            }
        };
        text.push_str(&format!("  {operator}: {words}\n"));
    }
    if found.leaving.len() > SHOWN {
        text.push_str(&format!("  .. and {} more in result.json\n", found.leaving.len() - SHOWN));
    }
    text.push_str("there the product of two matrices is not the matrix of the product\n");
}

/// Says on which levels the cut basis breaks [position, momentum] = i.
fn canonical(document: &Document, part: &str, diagonal: &[f64], text: &mut String) {
    let broken: Vec<usize> = (0..diagonal.len()).filter(|k| (diagonal[*k] - 1.0).abs() > 1e-6).collect();
    let of = if part.is_empty() { String::new() } else { format!(" of {part}") };
    let unit = if found_in_si(part, document) { "i hbar" } else { "i" };
    match broken.as_slice() {
        [] => {}
        [one] => text.push_str(&format!(
            "\n[position, momentum]{of} is {unit} on every state but {}, where the cut makes it {} times that\n",
            document.system.names[*one],
            short(diagonal[*one])
        )),
        several => text.push_str(&format!(
            "\n[position, momentum]{of} is not {unit} on {} of {} states: the cut leaves out what they couple to\n",
            several.len(),
            diagonal.len()
        )),
    }
}

fn found_in_si(part: &str, document: &Document) -> bool {
    let kind = document.system.kind_of(part);
    kind == "well" || kind == "functions"
}

//! The frame of the run and its ledger, for the page.

use super::facts::Facts;
use super::page::{digits, quantity, Page};
use crate::plan::source_name;

/// Lines of the ledger shown.
const LINES: usize = 16;

/// The section; nothing in the laboratory frame.
pub fn frame(page: &mut Page, facts: &Facts) {
    let Some(frame) = facts.point.in_frame() else { return };
    let (rotated, names) = (&frame.rotated, &facts.document.system.names);
    page.heading("rotating frame");
    let levels: Vec<String> =
        names.iter().zip(&rotated.level_hz).take(12).map(|(name, hz)| format!("{name} {}", quantity(*hz, "Hz", 12))).collect();
    page.line(2, &format!("levels turn at: {}", levels.join(", ")));
    let ledger = &rotated.ledger;
    let limit = if ledger.limit_hz.is_finite() {
        format!("dropped beyond {}", quantity(ledger.limit_hz, "Hz", 6))
    } else {
        "nothing dropped".to_string()
    };
    page.line(2, &format!("turning terms, size of the entry <a|H|b> at the largest envelope value; {limit}:"));
    let line = |line: &crate::frame::ledger::LedgerLine| {
        let [a, b] = line.levels();
        let dash = || "-".to_string();
        vec![
            source_name(facts.document, line.key.source),
            format!("{} to {}", names[a], names[b]),
            quantity(line.size_hz, "Hz", 6),
            quantity(line.turns_at_hz, "Hz", 6),
            if line.kept { "kept" } else { "dropped" }.to_string(),
            line.predicted_shift_hz().map_or_else(dash, |hz| quantity(hz, "Hz", 4)),
            line.predicted_ripple().map_or_else(dash, |ripple| digits(ripple, 3)),
        ]
    };
    let rows: Vec<Vec<String>> = ledger.lines.iter().take(LINES).map(line).collect();
    page.table(4, &["drive", "pair", "size", "turns at", "", "level shift", "ripple"], &rows);
    if ledger.lines.len() > LINES {
        page.line(4, &format!("and {} more terms", ledger.lines.len() - LINES));
    }
    for sum in ledger.by_pair().iter().take(LINES) {
        let [a, b] = sum.levels;
        page.line(
            2,
            &format!(
                "dropped on {} and {} together: shift {}, ripple {}",
                names[a],
                names[b],
                quantity(sum.shift_hz, "Hz", 4),
                digits(sum.ripple, 3)
            ),
        );
    }
    for beat in &rotated.beats {
        let [upper, lower] = beat.levels.map(|level| &names[level]);
        page.line(
            2,
            &format!(
                "beat: the term of {} on {lower} and {upper} is kept and turns at {}",
                facts.document.drives[beat.drive].name,
                quantity(beat.turns_hz.abs(), "Hz", 6)
            ),
        );
    }
    if let Some(done) = &frame.elimination {
        let gone: Vec<&str> = done.levels.iter().map(|level| names[*level].as_str()).collect();
        page.line(
            2,
            &format!("eliminated to second order: {}; coupling over detuning up to {}", gone.join(", "), digits(done.validity, 3)),
        );
        for (level, hz) in &done.shifts_hz {
            page.line(4, &format!("{} is shifted by {}", names[*level], quantity(*hz, "Hz", 6)));
        }
        for (a, b, hz) in done.couplings_hz.iter().filter(|(.., hz)| hz.norm() > 0.0) {
            page.line(4, &format!("{} and {} are coupled by {}", names[*a], names[*b], quantity(hz.norm(), "Hz", 6)));
        }
    }
}

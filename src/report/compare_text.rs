//! The one table of a comparison: final quantities of every variant, their differences from the reference with error, and time.

use super::summary::with_error;
use crate::compare::{sentences, Comparison};
use crate::config::document::Document;
use crate::config::messages::short_with_unit;

/// Quantities shown for each variant; the rest is in result.json.
const SHOWN: usize = 12;

/// The screen.
pub fn table(document: &Document, comparison: &Comparison, place: Option<&str>) -> String {
    let mut text = format!("{}\n", document.title);
    let wide = comparison
        .computed
        .iter()
        .flat_map(|computed| &computed.outcome.finals)
        .map(|last| last.name.chars().count())
        .max()
        .unwrap_or(8)
        .max(8);
    for computed in &comparison.computed {
        let held = comparison.held.iter().find(|held| held.name == computed.name);
        let role = if held.is_none() { "the reference" } else { "" };
        let method = computed.outcome.method.word();
        text.push_str(&format!(
            "\n{}{}{role}   ({method}, {})\n",
            computed.name,
            if role.is_empty() { "" } else { ": " },
            short_with_unit(computed.outcome.seconds, "s")
        ));
        text.push_str(&format!(
            "  {:<wide$}  {:<30}  {}\n",
            "quantity",
            "value",
            if held.is_some() { format!("minus {} (in its frame)", comparison.against) } else { String::new() }
        ));
        for last in computed.outcome.finals.iter().take(SHOWN) {
            let difference = held.and_then(|held| held.differences.iter().find(|difference| difference.quantity == last.name));
            let difference = difference.map_or(String::new(), |difference| {
                let sampling = difference.sampling_error.map_or(String::new(), |error| format!(", sampling error {error:.1e}"));
                with_error(difference.value, difference.error) + &sampling
            });
            text.push_str(format!("  {:<wide$}  {:<30}  {difference}", last.name, with_error(last.value, last.error)).trim_end());
            text.push('\n');
        }
        if computed.outcome.finals.len() > SHOWN {
            text.push_str(&format!("  and {} more in result.json\n", computed.outcome.finals.len() - SHOWN));
        }
    }
    text.push('\n');
    for sentence in sentences(document, comparison) {
        text.push_str(&format!("{sentence}\n"));
    }
    if let Some(place) = place {
        text.push_str(&format!("files: {place}\n"));
    }
    text
}

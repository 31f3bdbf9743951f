//! The runs behind an error budget: the gate judged again with causes switched off.

use super::average::{plain, Draws};
use crate::config::document::Document;
use crate::config::messages::Mistake;
use crate::config::record::{Cause, Item};
use crate::outcome::budget::{budget, Acting, Figure, Judged, Share};
use crate::outcome::Outcome;
use crate::plan::Point;

/// The shares of the gate error of an outcome; none where no budget is recorded.
pub fn shares<'p>(document: &'p Document, point: &Point<'p>, draws: &Draws, outcome: &Outcome) -> Result<Vec<Share>, Mistake> {
    let asked = document.record.items.iter().find_map(|item| if let Item::ErrorBudget(causes) = item { Some(causes) } else { None });
    let level = document.record.items.iter().find_map(|item| if let Item::Gate(gate) = item { gate.within.first() } else { None });
    let (Some(asked), Some(level)) = (asked, level) else { return Ok(Vec::new()) };
    let mut known: Vec<(Acting, Judged)> = Vec::new();
    budget(asked, figure(outcome, "gate_error"), |acting| {
        // a cause that the file does not have changes nothing
        let acting = Acting {
            decay: acting.decay && !document.decays.is_empty(),
            dephasing: acting.dephasing && !document.dephasings.is_empty(),
            noise: acting.noise && !document.noise.is_empty(),
        };
        if let Some((_, judged)) = known.iter().find(|(other, _)| *other == acting) {
            return Ok(*judged);
        }
        let off: Vec<Cause> = [Cause::Decay, Cause::Dephasing].into_iter().filter(|cause| !acting.has(*cause)).collect();
        let point = point.without(document, &off, *level)?;
        let outcome = plain(document, &point, draws, acting.noise)?;
        let judged = Judged { error: figure(&outcome, "gate_error"), leakage: figure(&outcome, "gate_leakage") };
        known.push((acting, judged));
        Ok(judged)
    })
}

/// A final number with its error.
fn figure(outcome: &Outcome, name: &str) -> Figure {
    let found = outcome.finals.iter().find(|last| last.name == name);
    found.map_or(Figure { value: f64::NAN, error: f64::NAN, sampling: 0.0 }, |last| Figure {
        value: last.value,
        error: last.error,
        sampling: last.sampling_error.unwrap_or(0.0),
    })
}

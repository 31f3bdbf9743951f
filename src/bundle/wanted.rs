//! What is recorded, and the columns that must be carried for it.

use crate::config::document::Document;
use crate::config::record::{FreeZ, Item, Target};
use crate::config::state::State;
use crate::plan::Plan;

/// The columns that are carried.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Wanted {
    /// Whether the start state is one of them, the first.
    pub state: bool,
    /// Columns of the propagator, by basis state.
    pub columns: Vec<usize>,
}

/// The columns for what `plan` records; the reason, where a quantity needs more than the end, or moves by itself with `names`.
pub(super) fn wanted(plan: &Plan, names: &[&str]) -> Result<Wanted, String> {
    let document = plan.document();
    for item in &document.record.items {
        if let Item::Gate(gate) = item {
            let quantities = match &gate.target {
                Target::Equator(turn, axis) => vec![turn.register, axis.register],
                Target::AboutZ(turn, _) => vec![turn.register],
                Target::Rows(entries) => entries.iter().flat_map(|e| std::iter::once(e.value.re).chain(e.value.im)).collect(),
            };
            if plan.moves(names, &quantities) {
                return Err("the target of the gate moves".to_string());
            }
        }
    }
    wanted_of(document)
}

/// The same where no number is moved but by noise, which leaves targets alone.
pub(super) fn wanted_of(document: &Document) -> Result<Wanted, String> {
    let mut wanted = Wanted { state: false, columns: Vec::new() };
    for item in &document.record.items {
        match item {
            Item::Populations(_) | Item::OutsideOf(_) | Item::Coherence(_) | Item::Bloch(_) | Item::Lost => wanted.state = true,
            Item::Fidelity(State::Level(_)) => wanted.state = true,
            Item::Gate(gate) => {
                if matches!(gate.free_z, FreeZ::Operators(_)) {
                    return Err("the free turns of the gate are operators of their own".to_string());
                }
                if wanted.columns.len() < document.system.names.len() {
                    wanted.columns.clone_from(&gate.within);
                }
            }
            Item::Propagator => wanted.columns = (0..document.system.names.len()).collect(),
            _ => return Err("it records what needs more than the end state or the propagator".to_string()),
        }
    }
    if gates(document) > 1 {
        return Err("it records several gates".to_string());
    }
    Ok(wanted)
}

fn gates(document: &Document) -> usize {
    document.record.items.iter().filter(|item| matches!(item, Item::Gate(_))).count()
}

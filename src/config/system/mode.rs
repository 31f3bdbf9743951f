//! `mode:` a harmonic or slightly anharmonic oscillator, cut at a number of levels.

use super::{Physics, System};
use crate::config::place::Place;
use crate::config::reader::{Quantity, Reader};
use crate::config::tape::Register;
use crate::config::tree::Node;

/// A mode.
#[derive(Debug, Clone)]
pub struct Mode {
    /// Number of states kept, from 0 quanta up.
    pub levels: usize,
    /// Gap of the lowest two, Hz.
    pub frequency: Quantity,
    /// Second gap minus first, Hz.
    pub anharmonicity: Option<Quantity>,
}

impl Mode {
    /// The registers it is made of.
    pub fn registers(&self, found: &mut Vec<Register>) {
        found.push(self.frequency.register);
        found.extend(self.anharmonicity.map(|bend| bend.register));
    }
}

/// Reads `mode:`.
pub fn read_mode(reader: &mut Reader, node: &Node, _place: Place, section: &str) -> Option<System> {
    let hints = [("first_gap", "Of a mode it is the frequency."), ("couplings_grow", "Those of a mode grow with the square root.")];
    reader.fields(node, section, &["frequency", "levels", "anharmonicity"], &hints)?;
    let frequency =
        reader.need(node, "frequency", section, "3.1 MHz").and_then(|value| reader.energy(value, &format!("{section} / frequency")));
    let levels = reader.need(node, "levels", section, "20");
    let levels = levels.and_then(|levels| reader.whole(levels, &format!("{section} / levels"), 1.0).map(|count| (count, levels.place)));
    let anharmonicity = node.get("anharmonicity").map(|bend| reader.energy(bend, &format!("{section} / anharmonicity")));
    let (levels, place) = levels?;
    if super::too_many(reader, place, levels) {
        return None;
    }
    let levels = levels as usize;
    let names: Vec<String> = (0..levels).map(|n| n.to_string()).collect();
    reader.define_built_levels(names.clone());
    let anharmonicity = anharmonicity.map_or(Some(None), |bend| bend.map(Some))?;
    let mode = Mode { levels, frequency: frequency?, anharmonicity };
    Some(System { place: node.place, kind: "mode", names, entries: Vec::new(), physics: Physics::Mode(mode) })
}

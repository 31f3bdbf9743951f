//! Worked configs by kind of question, as files to begin with: the files of `configs/`, word for word.

/// A worked config.
#[derive(Debug, Clone, Copy)]
pub struct Starter {
    /// Its kind, as a user types it; the file is called by it.
    pub kind: &'static str,
    /// What it shows, in one line.
    pub about: &'static str,
    /// The config.
    pub text: &'static str,
    /// Files it names: name and content.
    pub beside: &'static [(&'static str, &'static str)],
}

/// All kinds, in the order to learn from.
pub const STARTERS: &[Starter] = &[
    Starter {
        kind: "flip",
        about: "two levels, a square pulse a little off the line: Rabi oscillation and what the detuning costs",
        text: include_str!("../../configs/flip.yaml"),
        beside: &[],
    },
    Starter {
        kind: "leakage",
        about: "a ladder of levels, a short shaped pulse with derivative quadrature: leakage and gate error",
        text: include_str!("../../configs/leakage.yaml"),
        beside: &[],
    },
    Starter {
        kind: "low-frequency",
        about: "a real cosine drive as strong as its frequency nearly is: Bloch vector, checked by a second method",
        text: include_str!("../../configs/low-frequency.yaml"),
        beside: &[],
    },
    Starter {
        kind: "drift",
        about: "a line that drifts from shot to shot and wanders within each: what an echo remembers, averaged over random draws",
        text: include_str!("../../configs/drift.yaml"),
        beside: &[],
    },
    Starter {
        kind: "crossing",
        about: "a typed matrix, its gap swept through zero by a formula: branches followed and jumped",
        text: include_str!("../../configs/crossing.yaml"),
        beside: &[],
    },
    Starter {
        kind: "waveform",
        about: "a measured pulse from a CSV file, sized in volts: inversion, and time spent in the upper level",
        text: include_str!("../../configs/waveform.yaml"),
        beside: &[("waveform.csv", include_str!("../../configs/waveform.csv"))],
    },
    Starter {
        kind: "echo",
        about: "blocks, repeats, waits and marks: refocusing pulses that are too strong, on a spin off its line",
        text: include_str!("../../configs/echo.yaml"),
        beside: &[],
    },
    Starter {
        kind: "transfer",
        about: "two overlapping pulses on three levels: passage over an upper level that stays empty",
        text: include_str!("../../configs/transfer.yaml"),
        beside: &[],
    },
    Starter {
        kind: "qubit-frame",
        about: "a gate in the frame of its drive, compared with the laboratory frame and with one level more",
        text: include_str!("../../configs/qubit-frame.yaml"),
        beside: &[],
    },
    Starter {
        kind: "spin-pair",
        about: "an electron and a nucleus with hyperfine coupling: a microwave flips one where the other points up",
        text: include_str!("../../configs/spin-pair.yaml"),
        beside: &[],
    },
    Starter {
        kind: "clock",
        about: "an atom from its constants in a field: a microwave pulse on its clock line, and what leaks to the neighbours",
        text: include_str!("../../configs/clock.yaml"),
        beside: &[],
    },
    Starter {
        kind: "cavity",
        about: "a mode coupled to a ladder of levels: one quantum passes from one to the other and back",
        text: include_str!("../../configs/cavity.yaml"),
        beside: &[],
    },
    Starter {
        kind: "strong-spin",
        about: "a slow spin driven hard: dropped terms that matter, named one by one",
        text: include_str!("../../configs/strong-spin.yaml"),
        beside: &[],
    },
    Starter {
        kind: "chirped-map",
        about: "a swept pulse, ten thousand settings of it: which inverts, and how tightly each number must be held",
        text: include_str!("../../configs/chirped-map.yaml"),
        beside: &[],
    },
    Starter {
        kind: "fringe",
        about: "two quarter turns with a wait between, lifetime and dephasing, a warm start: fringe, and counts of shots",
        text: include_str!("../../configs/fringe.yaml"),
        beside: &[],
    },
    Starter {
        kind: "pumping",
        about: "light over a leaky upper level into a dark one: branching, photons scattered, what is lost",
        text: include_str!("../../configs/pumping.yaml"),
        beside: &[],
    },
    Starter {
        kind: "budget",
        about: "the error of a short gate split by cause: decay, dephasing, noise, leakage, the pulse itself",
        text: include_str!("../../configs/budget.yaml"),
        beside: &[],
    },
    Starter {
        kind: "double-well",
        about: "an electron in a double well, its potential as a formula: moved across by a ramp of the field",
        text: include_str!("../../configs/double-well.yaml"),
        beside: &[],
    },
    Starter {
        kind: "levels",
        about: "a spin against the field: its levels and lines followed through an avoided crossing",
        text: include_str!("../../configs/levels.yaml"),
        beside: &[],
    },
];

/// The starter of a kind; blanks and underscores count as dashes, large letters as small ones.
pub fn starter(kind: &str) -> Option<&'static Starter> {
    let kind = kind.trim().to_lowercase().replace([' ', '_'], "-");
    STARTERS.iter().find(|starter| starter.kind == kind)
}

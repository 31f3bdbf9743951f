//! What is said in words: forms, states, records and the conventions that apply to a config.

use super::facts::Facts;
use super::page::{count, degrees, digits, short};
use crate::config::document::Document;
use crate::config::drives::{CarrierPhase, Form};
use crate::config::record::{FreeZ, Gate, Item, Rows, Target};
use crate::config::settings::{Frame, MethodWord};
use crate::config::state::State;

/// Parts of a superposition shown.
const PARTS: usize = 6;

/// How a drive enters, in words.
pub fn form(document: &Document, drive: usize) -> &'static str {
    let drive = &document.drives[drive];
    match (drive.form, drive.opposite) {
        (Form::Linear, _) => "linear: a real cosine, both rotation senses",
        (Form::OneSided, false) => "one_sided: one rotation sense only, the one that can be resonant",
        (Form::OneSided, true) => "one_sided: one rotation sense only, the one that cannot be resonant (opposite)",
        (Form::Direct, _) => "direct: no carrier, the envelope itself multiplies the matrix",
    }
}

/// What the phase of a drive counts from.
pub fn carrier_phase(document: &Document, drive: usize) -> &'static str {
    match document.carrier_phase(drive) {
        CarrierPhase::RunsOn => "runs on: its phase counts from the start of the sequence",
        CarrierPhase::Restarts => "restarts: its phase counts from the start of each pulse",
    }
}

/// An axis of turn from x towards y.
pub fn axis(turns: f64) -> String {
    for (exact, word) in [(0.0, "x"), (0.25, "y"), (0.5, "-x"), (0.75, "-y")] {
        if (turns - exact).abs() < 1e-9 {
            return word.to_string();
        }
    }
    format!("{} from x to y", degrees(turns))
}

/// A state.
pub fn state(facts: &Facts, state: &State) -> String {
    let names = &facts.document.system.names;
    match state {
        State::Level(level) => names[*level].clone(),
        State::Superposition(parts, _) => {
            let value = |register| facts.point.values[register as usize];
            let part = |(level, size, phase): &(usize, crate::config::reader::Quantity, crate::config::reader::Quantity)| {
                let (size, phase) = (digits(value(size.register), 6), degrees(value(phase.register)));
                format!("{size} of {} at {phase}", names[*level])
            };
            let mut words: Vec<String> = parts.iter().take(PARTS).map(part).collect();
            if parts.len() > PARTS {
                words.push(format!("and {} more", parts.len() - PARTS));
            }
            format!("superposition: {}", words.join(", "))
        }
        State::Amplitudes(list) => format!("{} amplitudes from a file", list.len()),
        State::Density(_) => "density matrix from a file".to_string(),
        State::Mix(shares) => {
            let numbers = shares.numbers(None, "mix", &facts.point.values).unwrap_or_default();
            let part = |((_, name, _), share): (&(Option<usize>, String, _), f64)| format!("{} of {name}", digits(share, 6));
            let words: Vec<String> = shares.parts.iter().zip(numbers).take(PARTS).map(part).collect();
            let more = shares.parts.len().saturating_sub(PARTS);
            format!("mixture: {}{}", words.join(", "), if more > 0 { format!(", and {more} more") } else { String::new() })
        }
        State::Quanta { modes, .. } => {
            let means: Vec<String> = modes.iter().map(|warm| digits(facts.point.values[warm.mean.register as usize], 9)).collect();
            format!("a thermal number of quanta, {} in the mean, as far as the levels go", means.join(" and "))
        }
        State::Thermal(temperature) => {
            let kelvin = facts.point.values[temperature.register as usize];
            format!("thermal equilibrium of the static system at {}", short(kelvin, "K"))
        }
        State::Steady(_) => "steady state of the static system with its decays".to_string(),
    }
}

/// When something is recorded.
pub fn rows(facts: &Facts) -> String {
    let rows = count(facts.point.problem().moments.len(), "row");
    match &facts.document.record.rows {
        Rows::Unsaid => format!("{rows} in equal steps"),
        Rows::Every(every) => format!("{rows}, every {} and at the end", short(facts.point.values[every.register as usize], "s")),
        Rows::At(_) => format!("{rows}, at the times written and at the end"),
    }
}

/// What is recorded, one text per quantity.
pub fn records(facts: &Facts) -> Vec<String> {
    let document = facts.document;
    let names = &document.system.names;
    let levels = |list: &[usize]| {
        if list.len() == names.len() && names.len() > 1 {
            return "all levels".to_string();
        }
        let mut words: Vec<&str> = list.iter().take(12).map(|level| names[*level].as_str()).collect();
        let more = format!("and {} more", list.len().saturating_sub(12));
        if list.len() > 12 {
            words.push(&more);
        }
        words.join(", ")
    };
    let pairs = |list: &[[usize; 2]]| {
        let words: Vec<String> = list.iter().map(|[a, b]| format!("{} and {}", names[*a], names[*b])).collect();
        words.join("; ")
    };
    let item = |item: &Item| match item {
        Item::Populations(list) => format!("populations of {}", levels(list)),
        Item::OutsideOf(list) => format!("population outside of {}", levels(list)),
        Item::Coherence(list) => format!("coherence of {}", pairs(list)),
        Item::Bloch(list) => format!("Bloch vector of {} (the first at +z)", pairs(list)),
        Item::MeanOf(list) => {
            let words: Vec<&str> = list.iter().map(|k| document.operators[*k].name.as_str()).collect();
            format!("mean of {}", words.join(", "))
        }
        Item::Levels(list) => format!("levels of the static system of {}", levels(list)),
        Item::Transitions(list) => format!("gaps of the static system of {}", pairs(list)),
        Item::Energy => "mean energy over h".to_string(),
        Item::TimeIn(list) => format!("time spent in {}", levels(list)),
        Item::AdiabaticPopulations => "populations of the instantaneous eigenstates".to_string(),
        Item::Fidelity(to) => format!("fidelity, the squared overlap with {}", state(facts, to)),
        Item::QuasiEnergies(period) => format!("quasi-energies over {}", short(facts.point.values[period.register as usize], "s")),
        Item::Part(part) => {
            let parts = document.system.parts();
            let name = parts.get(*part).map_or("", |(name, _)| name.as_str());
            format!("{name} alone: populations, Bloch vector, purity")
        }
        Item::Lost => "population that left the system".to_string(),
        Item::Steady(_) => "steady state of the last stretch".to_string(),
        Item::Shots(shots) => {
            let number = facts.point.values[shots.number.register as usize];
            let reads: Vec<&str> = shots.reads.iter().map(|(name, _)| name.as_str()).collect();
            format!("expected counts of {} shots, read as {}", digits(number, 9), reads.join(", "))
        }
        Item::ErrorBudget(causes) => {
            let words: Vec<&str> = causes.iter().map(|cause| cause.word()).collect();
            format!("error budget of the gate: {}, pulse, interplay", words.join(", "))
        }
        Item::Propagator => "propagator of the whole sequence".to_string(),
        Item::Gate(gate) => gate_words(facts, gate, &levels(&gate.within)),
    };
    document.record.items.iter().map(item).collect()
}

fn gate_words(facts: &Facts, gate: &Gate, within: &str) -> String {
    let value = |quantity: &crate::config::reader::Quantity| facts.point.values[quantity.register as usize];
    let target = match &gate.target {
        Target::Equator(turn, about) => {
            let about = value(about);
            format!("a turn by {} deg about {}", digits(value(turn) * 360.0, 6), axis(about - about.floor()))
        }
        Target::AboutZ(turn, sign) => format!("a turn by {} deg about z", digits(value(turn) * sign * 360.0, 6)),
        Target::Rows(_) => "the matrix that is written".to_string(),
    };
    let free = match &gate.free_z {
        FreeZ::No => "no turn about z is free".to_string(),
        FreeZ::Yes => "a turn about z after it is free".to_string(),
        FreeZ::Operators(list) => {
            let words: Vec<&str> = list.iter().map(|k| facts.document.operators[*k].name.as_str()).collect();
            format!("turns by {} after it are free", words.join(", "))
        }
    };
    format!("gate error within {within} against {target}, averaged over all pure states; leakage counts; {free}")
}

/// Accuracy and method.
pub fn accuracy(document: &Document) -> String {
    let method = match document.accuracy.method {
        MethodWord::Automatic => "automatic",
        MethodWord::ConstantSteps => "constant steps",
        MethodWord::Smooth => "smooth",
        MethodWord::Geometric => "geometric",
        MethodWord::Collocation => "collocation",
        MethodWord::Carrier => "fast carrier",
    };
    let check = if document.accuracy.cross_check { ", checked by a second method" } else { "" };
    format!("at most {} on every recorded number; method {method}{check}", digits(document.accuracy.last, 6))
}

/// The conventions that this config leans on.
pub fn conventions(facts: &Facts) -> Vec<String> {
    let document = facts.document;
    let mut said = vec!["Hz counts turns per second; an energy in Hz is energy over h.".to_string()];
    let carried = facts.drives.iter().any(|drive| drive.carrier_hz.is_some());
    if carried {
        said.push(
            "Rabi frequency R: that of the full population oscillation on resonance. A linear drive puts h R cos(2 pi f t + phase) on its \
             reference pair (one_sided: h R/2, one sense); a square flip takes 1/(2R); turn is the signed integral of R(t), in phase alone."
                .to_string(),
        );
        said.push(
            "Axis of turn, the lower level drawn at +z: cos(phase) x - sin(phase) y, so phase +90 deg turns about -y. \
             Frame turns are included in both."
                .to_string(),
        );
        for (drive, fact) in document.drives.iter().zip(&facts.drives).filter(|(_, fact)| fact.carrier_hz.is_some()) {
            if let Some([lower, upper]) = fact.reference.filter(|_| fact.reference_turns.abs() > 1e-12) {
                let names = &document.system.names;
                said.push(format!(
                    "{}: the reference entry <{}|M|{}> has the phase {chi}, so the axis is {chi} - phase; turn_about allows for it, phase does not.",
                    drive.name,
                    names[upper],
                    names[lower],
                    chi = degrees(fact.reference_turns),
                ));
            }
        }
        said.push("Detuning: carrier minus gap; above means that the carrier is higher.".to_string());
    }
    let shaped = |key: &(usize, usize)| document.envelopes[key.1].derivative.is_some();
    if facts.strengths.keys().any(shaped) {
        said.push(
            "Derivative quadrature: X(t) cos(2 pi f t + phase) + Y(t) sin(2 pi f t + phase), Y = -factor dX/dt / (2 pi against)."
                .to_string(),
        );
    }
    if facts.mixed {
        said.push("The static matrix has off-diagonal entries: levels and gaps are its diagonal, not its eigenvalues.".to_string());
    }
    if !facts.point.surroundings.jumps.is_empty() {
        said.push(
            "Lifetime: 1/e time of a population; rate its inverse; linewidth the full width rate/(2 pi). T2: 1/e time of a coherence, \
             1/T2 = half the sum of both rates + (w_a - w_b)^2 / pure time."
                .to_string(),
        );
    }
    let frame = match &document.frame {
        Frame::Lab => "laboratory, nothing dropped",
        Frame::Rotating(_) => "rotating, psi_lab = exp(-2 pi i F t) psi, H = exp(2 pi i F t) H_lab exp(-2 pi i F t) - F",
    };
    said.push(format!("Frame: {frame}; coherences, Bloch vectors, propagators and gates are those of this frame."));
    said
}

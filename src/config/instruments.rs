//! What noise may move, judged when a whole config has been read: an instrument is set once and knows nothing of the noise, a
//! count is settled with the reading, and what an average does not have cannot be recorded.

use super::document::Document;
use super::drives::{Carrier, DriveMatrix};
use super::messages::{Fault, Mistake};
use super::noise::{Memory, NoiseEntry};
use super::record::{Item, Target};
use super::sequence::{Align, Pulse, PulsePhase, Step};
use super::settings::{Follows, Frame};
use super::state::State;
use super::system::OperatorSource;
use super::tape::{Entry, Formula, Register};

/// Mistakes and warnings about the noise section of a document.
pub fn judge(document: &Document) -> Vec<Mistake> {
    let mut found = Vec::new();
    if document.noise.is_empty() {
        return found;
    }
    for item in &document.record.items {
        let without = match item {
            Item::Propagator => Some(("propagator", "gate: {within: [..], target: {..}, free_z: false}")),
            Item::QuasiEnergies(_) => Some(("quasi-energy", "record: without quasi_energies, or the file without noise")),
            Item::Steady(_) => Some(("one steady state", "record: without steady, or the file without noise")),
            _ => None,
        };
        if let Some((what, instead)) = without {
            found.push(Mistake::error(document.record.place, Fault::NoiseWithout { what, instead }));
        }
    }
    for entry in &document.noise {
        for moved in &entry.moves {
            let mut reached = vec![false; document.tape.entries().len()];
            for register in document.tape.shaken(&[moved.index]) {
                reached[register as usize] = true;
            }
            let is = |register: Register| reached[register as usize];
            if document.structural.iter().any(|register| is(*register)) {
                found.push(Mistake::error(entry.place, Fault::NoiseMovesStructure { name: moved.name.clone() }));
                continue;
            }
            if let Some(other) = document.noise.iter().find(|other| other.spread.registers().into_iter().any(is)) {
                let fault = Fault::NoiseOnNoise { name: moved.name.clone(), other: other.moves[0].name.clone() };
                found.push(Mistake::error(entry.place, fault));
                continue;
            }
            let users = users(document, &is);
            if matches!(entry.memory, Memory::Slow) {
                found.extend(warning(entry, &moved.name, &users));
            } else if let Some(user) = users.iter().find(|user| !user.within_a_shot) {
                let fault = Fault::CorrelatedMoves { name: moved.name.clone(), what: user.what.clone() };
                found.push(Mistake::error(entry.place, fault));
            } else {
                found.extend(warning(entry, &moved.name, &users));
            }
        }
    }
    found
}

/// The one thing that noise does not reach though its number stands there.
const TARGET: &str = "the target of the gate";

/// Something that a moved number sets.
struct User {
    what: String,
    /// Whether it is the setting of an instrument, of which the reader is warned.
    instrument: bool,
    /// Whether it can move within a shot.
    within_a_shot: bool,
}

fn warning(entry: &NoiseEntry, name: &str, users: &[User]) -> Option<Mistake> {
    let user = users.iter().find(|user| user.instrument)?;
    let name = name.to_string();
    let fault = if user.what == TARGET { Fault::TargetStays { name } } else { Fault::NoiseOnInstrument { name, user: user.what.clone() } };
    Some(Mistake::warning(entry.place, fault))
}

fn formula(formula: &Formula, is: &dyn Fn(Register) -> bool) -> bool {
    formula.tape.entries().iter().any(|entry| matches!(entry, Entry::Outer(from) if is(*from)))
}

/// Everything but energies and matrix entries that a moved number reaches, carriers first.
fn users(document: &Document, is: &dyn Fn(Register) -> bool) -> Vec<User> {
    let mut users = Vec::new();
    let carrier = |carrier: &Carrier| is(carrier.centre.register) || carrier.instantaneous.as_ref().is_some_and(|f| formula(f, is));
    let set = |what: String, instrument: bool| User { what, instrument, within_a_shot: false };
    for drive in &document.drives {
        if drive.carrier.as_ref().is_some_and(carrier) {
            users.push(set(format!("the carrier of {}", drive.name), true));
        }
        if drive.calibration.is_some_and(|calibration| is(calibration.rabi.register) || is(calibration.volts.register)) {
            users.push(User { what: format!("the calibration of {}", drive.name), instrument: false, within_a_shot: true });
        }
    }
    for envelope in &document.envelopes {
        let curve = envelope.times.iter().any(|(_, time)| is(time.register))
            || envelope.formula.as_ref().is_some_and(|f| formula(f, is))
            || matches!(&envelope.samples, Some(super::envelopes::Samples::List(list)) if list.iter().any(|register| is(*register)))
            || envelope.derivative.is_some_and(|derivative| is(derivative.factor.register) || is(derivative.against.register));
        if curve || is(envelope.size.register) {
            let what = if curve { "the shape" } else { "the size" };
            users.push(User { what: format!("{what} of the envelope {}", envelope.name), instrument: true, within_a_shot: !curve });
        }
    }
    for item in &document.record.items {
        if let Item::Gate(gate) = item {
            let moved = match &gate.target {
                Target::Equator(turn, axis) => is(turn.register) || is(axis.register),
                Target::AboutZ(turn, _) => is(turn.register),
                Target::Rows(entries) => entries.iter().any(|entry| is(entry.value.re) || entry.value.im.is_some_and(is)),
            };
            if moved {
                users.push(User { what: TARGET.to_string(), instrument: true, within_a_shot: true });
            }
        }
    }
    let entries = |entries: &[super::matrix::MatrixEntry]| entries.iter().any(|entry| is(entry.value.re) || entry.value.im.is_some_and(is));
    for drive in document.drives.iter().filter(|drive| matches!(&drive.matrix, DriveMatrix::Typed(typed) if entries(typed))) {
        users.push(set(format!("the matrix of the drive {}", drive.name), false));
    }
    for operator in document.operators.iter().filter(|operator| matches!(&operator.source, OperatorSource::Typed(typed) if entries(typed)))
    {
        users.push(set(format!("the operator {}", operator.name), false));
    }
    if let Frame::Rotating(frame) = &document.frame {
        if !frame.eliminate.is_empty() {
            users.push(set("energies of a frame that eliminates levels".to_string(), false));
        }
        let table = matches!(&frame.follows, Follows::Table(table) if table.iter().any(|(_, frequency)| is(frequency.register)));
        if table || frame.limit.is_some_and(|limit| is(limit.register)) {
            users.push(set("the frame".to_string(), true));
        }
    }
    steps(&document.sequence, is, &carrier, &mut users);
    let start = match &document.start {
        State::Superposition(parts, _) => parts.iter().any(|(_, size, phase)| is(size.register) || is(phase.register)),
        _ => false,
    };
    if start {
        users.push(set("the start".to_string(), false));
    }
    users
}

/// Times, phases and carriers of the sequence.
fn steps(list: &[Step], is: &dyn Fn(Register) -> bool, carrier: &dyn Fn(&Carrier) -> bool, users: &mut Vec<User>) {
    let set = |what: &str, instrument: bool| User { what: what.to_string(), instrument, within_a_shot: false };
    let pulse = |pulse: &Pulse| {
        let phase = matches!(&pulse.phase, PulsePhase::Phase(q) | PulsePhase::Axis(q) if is(q.register));
        phase || matches!(&pulse.align, Align::CentreAt(at) if is(at.register))
    };
    for step in list {
        match step {
            Step::Pulse(one) if pulse(one) => users.push(set("the phase of a pulse", false)),
            Step::Together(pulses) if pulses.iter().any(pulse) => users.push(set("a pulse of a group", false)),
            Step::Wait(time) | Step::WaitBetweenCentres(time) if is(time.register) => users.push(set("a wait", false)),
            Step::TurnFrame(_, angle) if is(angle.register) => users.push(set("a turn of the frame", false)),
            Step::SetCarrier(_, new, _) if carrier(new) => users.push(set("a carrier that is set anew", true)),
            Step::Repeat(_, inner) | Step::Block(inner) => steps(inner, is, carrier, users),
            _ => {}
        }
    }
}

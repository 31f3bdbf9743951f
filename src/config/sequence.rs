//! `sequence:` and `blocks:`.

use super::drives::{read_carrier, Carrier, CarrierPhase, Drive, Form};
use super::envelopes::{Envelope, SizeWord};
use super::messages::Fault;
use super::place::Place;
use super::reader::{Quantity, Reader};
use super::tree::Node;
use crate::units::Dim;

/// Most steps a sequence may unroll to.
pub const MOST_STEPS: usize = 5_000_000;

/// Phase of a pulse as written.
#[derive(Debug, Clone, Copy)]
pub enum PulsePhase {
    /// Phase 0.
    Unsaid,
    /// `phase:`, turns.
    Phase(Quantity),
    /// `turn_about:`, the axis from x towards y, turns.
    Axis(Quantity),
}

/// Where a pulse stands in its group.
#[derive(Debug, Clone, Copy)]
pub enum Align {
    /// Starts with the group.
    Start,
    /// Its middle at the middle of the group.
    Centre,
    /// Ends with the group.
    End,
    /// Its middle so long after the start of the group, s.
    CentreAt(Quantity),
}

/// A pulse as written.
#[derive(Debug, Clone, Copy)]
pub struct Pulse {
    /// Index of the drive.
    pub drive: usize,
    /// Index of the envelope.
    pub envelope: usize,
    /// Its phase.
    pub phase: PulsePhase,
    /// Its place in a group.
    pub align: Align,
    /// Where it stands.
    pub place: Place,
}

/// What happens to the phase of a running carrier when it is set anew.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Change {
    /// No jump.
    Continues,
    /// As if the new carrier had run from the start.
    AlwaysOn,
}

/// A step.
#[derive(Debug, Clone)]
pub enum Step {
    /// One pulse.
    Pulse(Pulse),
    /// Pulses that overlap.
    Together(Vec<Pulse>),
    /// Nothing, edge to edge.
    Wait(Quantity),
    /// Nothing, from the middle of the pulse before to the middle of the pulse after.
    WaitBetweenCentres(Quantity),
    /// Steps several times over.
    Repeat(usize, Vec<Step>),
    /// The steps of a block.
    Block(Vec<Step>),
    /// Later pulses of a drive turn about an axis so much further, turns.
    TurnFrame(usize, Quantity),
    /// Later pulses of a drive have this carrier.
    SetCarrier(usize, Carrier, Option<Change>),
    /// A name for this moment.
    Mark(String),
}

/// Names that a sequence may use, and what they stand for; a name whose section had a mistake is known but not there.
pub struct Known<'a> {
    /// Names of all drives, and those that could be read.
    pub drives: (&'a [String], &'a [Drive]),
    /// Names of all envelopes, and those that could be read.
    pub envelopes: (&'a [String], &'a [Envelope]),
    /// `blocks:`.
    pub blocks: Option<&'a Node>,
}

/// Which names were used, by index.
#[derive(Default)]
pub struct Used {
    /// Names of drives.
    pub drives: std::collections::HashSet<String>,
    /// Names of envelopes.
    pub envelopes: std::collections::HashSet<String>,
    /// Names of blocks.
    pub blocks: std::collections::HashSet<String>,
}

struct Steps<'a> {
    reader: &'a mut Reader,
    known: &'a Known<'a>,
    used: Used,
    open_blocks: Vec<String>,
}

const STEP_KEYS: [&str; 9] = ["pulse", "wait", "wait_between_centres", "together", "repeat", "use", "turn_frame", "set_carrier", "mark"];

/// Reads `sequence:` and the blocks it uses.
pub fn read_sequence(reader: &mut Reader, node: &Node, known: &Known) -> (Option<Vec<Step>>, Used) {
    let mut steps = Steps { reader, known, used: Used::default(), open_blocks: Vec::new() };
    let sequence = steps.steps(node, "sequence");
    let mut used = std::mem::take(&mut steps.used);
    // unused blocks are read all the same, so that a slip in them is found
    for block in known.blocks.and_then(Node::entries).unwrap_or_default() {
        if !used.blocks.contains(&block.key) {
            steps.steps(&block.value, &format!("blocks / {}", block.key));
        }
    }
    // what only an unused block names is no use; what it names counts as known
    used.drives.extend(steps.used.drives);
    used.envelopes.extend(steps.used.envelopes);
    if let Some(sequence) = &sequence {
        let count = unrolled(sequence);
        if count > MOST_STEPS as f64 {
            reader.error(node.place, Fault::TooManySteps { steps: count, limit: MOST_STEPS });
            return (None, used);
        }
    }
    (sequence, used)
}

/// Steps after unrolling.
fn unrolled(steps: &[Step]) -> f64 {
    steps
        .iter()
        .map(|step| match step {
            Step::Repeat(times, inner) => *times as f64 * unrolled(inner),
            Step::Block(inner) => unrolled(inner),
            Step::Together(pulses) => pulses.len() as f64,
            _ => 1.0,
        })
        .sum()
}

impl Steps<'_> {
    fn steps(&mut self, node: &Node, section: &str) -> Option<Vec<Step>> {
        let items = self.reader.list(node, section, "- wait: 1 us")?;
        let steps: Vec<Option<Step>> = items.iter().map(|item| self.step(item)).collect();
        steps.into_iter().collect()
    }

    fn step(&mut self, node: &Node) -> Option<Step> {
        let entries = self.reader.fields(node, "a step of the sequence", &STEP_KEYS, &[("delay", "A pause is called wait.")])?;
        let entry = entries.iter().find(|entry| STEP_KEYS.contains(&entry.key.as_str()))?;
        if let Some(second) = entries.iter().filter(|entry| STEP_KEYS.contains(&entry.key.as_str())).nth(1) {
            let fault = Fault::OneOf {
                found: vec![entry.key.clone(), second.key.clone()],
                lines: vec![entry.place.line, second.place.line],
                section: "a step of the sequence".to_string(),
            };
            self.reader.error(second.place, fault);
            return None;
        }
        let value = &entry.value;
        match entry.key.as_str() {
            "pulse" => self.pulse(value, false).map(Step::Pulse),
            "wait" => self.reader.quantity(value, "wait", Dim::TIME).map(Step::Wait),
            "wait_between_centres" => self.reader.quantity(value, "wait_between_centres", Dim::TIME).map(Step::WaitBetweenCentres),
            "together" => self.together(value),
            "repeat" => self.repeat(value),
            "use" => self.block(value),
            "turn_frame" => self.turn_frame(value),
            "set_carrier" => self.set_carrier(value),
            _ => self.reader.text(value, "mark", "mark: half way").map(|text| Step::Mark(text.to_string())),
        }
    }

    fn pulse(&mut self, node: &Node, grouped: bool) -> Option<Pulse> {
        let known: &[&str] = if grouped {
            &["drive", "envelope", "phase", "turn_about", "centre_at", "align"]
        } else {
            &["drive", "envelope", "phase", "turn_about"]
        };
        let hints = [
            ("centre_at", "centre_at belongs to a pulse of a together group."),
            ("align", "align belongs to a pulse of a together group."),
        ];
        self.reader.fields(node, "pulse", known, &hints)?;
        let drive_node = self.reader.need(node, "drive", "pulse", "the name of a drive");
        let envelope_node = self.reader.need(node, "envelope", "pulse", "the name of an envelope");
        let drive = drive_node.and_then(|node| self.drive(node));
        let envelope = envelope_node.and_then(|node| {
            let index = self.reader.name_among(node, "envelope", self.known.envelopes.0)?;
            let name = &self.known.envelopes.0[index];
            self.used.envelopes.insert(name.clone());
            self.known.envelopes.1.iter().position(|envelope| envelope.name == *name)
        });
        let phase = match (node.get("phase"), node.get("turn_about")) {
            (Some(_), Some(second)) => {
                self.reader.error(second.place, Fault::BothPhases);
                None
            }
            (Some(phase), None) => self.reader.quantity(phase, "phase", Dim::ANGLE).map(PulsePhase::Phase),
            (None, Some(axis)) => self.axis(axis).map(PulsePhase::Axis),
            (None, None) => Some(PulsePhase::Unsaid),
        };
        let align = match (node.get("centre_at").filter(|_| grouped), node.get("align").filter(|_| grouped)) {
            (Some(a), Some(b)) => {
                let fault = Fault::OneOf {
                    found: vec!["centre_at".into(), "align".into()],
                    lines: vec![a.place.line, b.place.line],
                    section: "pulse".into(),
                };
                self.reader.error(b.place, fault);
                None
            }
            (Some(at), None) => self.reader.quantity(at, "centre_at", Dim::TIME).map(Align::CentreAt),
            (None, Some(word)) => {
                self.reader.word(word, "align", &[("start", Align::Start), ("centre", Align::Centre), ("end", Align::End)])
            }
            (None, None) => Some(Align::Start),
        };
        let (drive, envelope) = (drive?, envelope?);
        self.judge(drive, envelope, node)?;
        Some(Pulse { drive, envelope, phase: phase?, align: align?, place: node.place })
    }

    /// A drive by name; `None` too where its own section had a mistake.
    fn drive(&mut self, node: &Node) -> Option<usize> {
        let index = self.reader.name_among(node, "drive", self.known.drives.0)?;
        let name = &self.known.drives.0[index];
        self.used.drives.insert(name.clone());
        self.known.drives.1.iter().position(|drive| drive.name == *name)
    }

    /// An axis of turn: x, y, -x, -y or an angle.
    fn axis(&mut self, node: &Node) -> Option<Quantity> {
        let text = self.reader.text(node, "turn_about", "x")?.trim().to_string();
        let angle = match text.as_str() {
            "x" => 0.0,
            "y" => 0.25,
            "-x" => 0.5,
            "-y" => 0.75,
            "z" | "-z" => {
                let hint = Some("A pulse turns about an axis of the equator; for a turn about z there is turn_frame.".to_string());
                let known = ["x", "y", "-x", "-y", "an angle"].map(str::to_string).to_vec();
                self.reader.error(node.place, Fault::UnknownWord { what: "turn_about".to_string(), found: text, known, near: None, hint });
                return None;
            }
            _ => return self.reader.quantity(node, "turn_about", Dim::ANGLE),
        };
        Some(Quantity { register: self.reader.constant(angle, node.place), place: node.place })
    }

    /// Whether this envelope can drive this drive.
    fn judge(&mut self, drive: usize, envelope: usize, node: &Node) -> Option<()> {
        let (drive, envelope) = (&self.known.drives.1[drive], &self.known.envelopes.1[envelope]);
        let names = (envelope.name.clone(), drive.name.clone());
        if envelope.size_word == SizeWord::Field && !drive.takes_field() {
            self.reader.error(envelope.size_place, Fault::FieldWithoutMoment { envelope: names.0, drive: names.1 });
            return None;
        }
        if envelope.size_word == SizeWord::MatrixElement && drive.takes_field() && drive.reference.is_none() {
            self.reader.error(drive.place, Fault::NeedsReference { drive: names.1, pairs: None });
            return None;
        }
        if drive.form == Form::Direct {
            if !matches!(envelope.size_word, SizeWord::MatrixElement | SizeWord::Field) {
                let fault = Fault::SizeOfDirect { envelope: names.0, drive: names.1, key: envelope.size_word.word().to_string() };
                self.reader.error(envelope.size_place, fault);
                return None;
            }
            if envelope.derivative.is_some() {
                self.reader.error(envelope.place, Fault::DerivativeOfDirect { envelope: names.0, drive: names.1 });
                return None;
            }
            if let Some(phase) = node.get("phase").or(node.get("turn_about")) {
                self.reader.error(phase.place, Fault::PhaseOfDirect { drive: names.1 });
                return None;
            }
            return Some(());
        }
        if drive.reference.is_none() && !matches!(envelope.size_word, SizeWord::MatrixElement | SizeWord::Field) {
            let typed = drive.entries();
            let pairs = (!typed.is_empty()).then(|| typed.iter().filter(|entry| entry.row < entry.column).count());
            self.reader.error(drive.place, Fault::NeedsReference { drive: names.1, pairs });
            return None;
        }
        if envelope.size_word == SizeWord::Volts && drive.calibration.is_none() {
            self.reader.error(envelope.size_place, Fault::NoCalibration { envelope: names.0, drive: names.1 });
            return None;
        }
        Some(())
    }

    fn together(&mut self, node: &Node) -> Option<Step> {
        let mut pulses = Vec::new();
        let mut good = true;
        for item in self.reader.list(node, "together", "- pulse: {drive: a, envelope: b}")? {
            let pulse = match self.reader.fields(
                item,
                "a step of a together group",
                &["pulse"],
                &[("wait", "Inside a group a pulse is moved with centre_at.")],
            ) {
                Some(_) => self
                    .reader
                    .need(item, "pulse", "a step of a together group", "{drive: a, envelope: b}")
                    .and_then(|pulse| self.pulse(pulse, true)),
                None => None,
            };
            match pulse {
                Some(pulse) => pulses.push(pulse),
                None => good = false,
            }
        }
        good.then_some(Step::Together(pulses))
    }

    fn repeat(&mut self, node: &Node) -> Option<Step> {
        self.reader.fields(node, "repeat", &["times", "steps"], &[])?;
        let times = self.reader.need(node, "times", "repeat", "8").and_then(|times| self.reader.whole(times, "repeat / times", 0.0));
        let steps = self.reader.need(node, "steps", "repeat", "[{wait: 1 us}]").and_then(|steps| self.steps(steps, "repeat / steps"));
        let (times, steps) = (times?, steps?);
        if times > MOST_STEPS as f64 {
            self.reader.error(node.place, Fault::TooManySteps { steps: times, limit: MOST_STEPS });
            return None;
        }
        Some(Step::Repeat(times as usize, steps))
    }

    fn block(&mut self, node: &Node) -> Option<Step> {
        let name = self.reader.text(node, "use", "use: the name of a block")?.to_string();
        let names: Vec<String> =
            self.known.blocks.and_then(Node::entries).unwrap_or_default().iter().map(|entry| entry.key.clone()).collect();
        let Some(block) = self.known.blocks.and_then(|blocks| blocks.get(&name)) else {
            self.reader.unknown(node.place, "block", &name, &names);
            return None;
        };
        if self.open_blocks.contains(&name) {
            self.reader.error(node.place, Fault::BlockInItself { name });
            return None;
        }
        self.used.blocks.insert(name.clone());
        self.open_blocks.push(name.clone());
        // a mistake inside a block used several times is one mistake: the renderer joins equal ones
        let steps = self.steps(block, &format!("blocks / {name}"));
        self.open_blocks.pop();
        steps.map(Step::Block)
    }

    fn turn_frame(&mut self, node: &Node) -> Option<Step> {
        if node.entries().is_none() {
            let drive = match self.known.drives.0 {
                [only] => {
                    self.used.drives.insert(only.clone());
                    self.known.drives.1.iter().position(|drive| drive.name == *only)
                }
                _ => {
                    self.reader.error(node.place, Fault::AmbiguousDrive { key: "turn_frame" });
                    None
                }
            };
            let angle = self.reader.quantity(node, "turn_frame", Dim::ANGLE);
            return Some(Step::TurnFrame(drive?, angle?));
        }
        self.reader.fields(node, "turn_frame", &["drive", "angle"], &[])?;
        let drive = self.reader.need(node, "drive", "turn_frame", "the name of a drive").and_then(|drive| self.drive(drive));
        let angle = self
            .reader
            .need(node, "angle", "turn_frame", "90 deg")
            .and_then(|angle| self.reader.quantity(angle, "turn_frame / angle", Dim::ANGLE));
        let drive = drive?;
        if self.known.drives.1[drive].form == Form::Direct {
            let name = self.known.drives.1[drive].name.clone();
            self.reader.error(node.place, Fault::PhaseOfDirect { drive: name });
            return None;
        }
        Some(Step::TurnFrame(drive, angle?))
    }

    fn set_carrier(&mut self, node: &Node) -> Option<Step> {
        self.reader.fields(node, "set_carrier", &["drive", "carrier", "phase"], &[])?;
        let drive = self.reader.need(node, "drive", "set_carrier", "the name of a drive").and_then(|drive| self.drive(drive));
        let carrier = self
            .reader
            .need(node, "carrier", "set_carrier", "80 MHz")
            .and_then(|carrier| read_carrier(self.reader, carrier, "set_carrier / carrier"));
        let change = match node.get("phase") {
            Some(phase) => Some(self.reader.word(
                phase,
                "set_carrier / phase",
                &[("continues", Change::Continues), ("as if always on", Change::AlwaysOn)],
            )?),
            None => None,
        };
        let (drive, carrier) = (drive?, carrier?);
        let written = &self.known.drives.1[drive];
        if written.form == Form::Direct {
            self.reader.error(node.place, Fault::CarrierOfDirect { drive: written.name.clone() });
            return None;
        }
        if change.is_none() && written.carrier_phase != Some(CarrierPhase::Restarts) {
            self.reader.error(node.place, Fault::PhaseChangeUnsaid { drive: written.name.clone() });
            return None;
        }
        Some(Step::SetCarrier(drive, carrier, change))
    }
}

/// How often each drive is used.
pub fn uses(steps: &[Step], drives: usize) -> Vec<usize> {
    let mut found = vec![0; drives];
    count(steps, 1, &mut found);
    found
}

fn count(steps: &[Step], times: usize, found: &mut [usize]) {
    for step in steps {
        let pulses = match step {
            Step::Pulse(pulse) => std::slice::from_ref(pulse),
            Step::Together(pulses) => pulses,
            Step::Repeat(repeats, inner) => {
                count(inner, times.saturating_mul(*repeats), found);
                continue;
            }
            Step::Block(inner) => {
                count(inner, times, found);
                continue;
            }
            _ => continue,
        };
        pulses.iter().for_each(|pulse| found[pulse.drive] = found[pulse.drive].saturating_add(times));
    }
}

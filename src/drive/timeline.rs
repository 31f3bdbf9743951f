//! The sequence laid out in time: every pulse with its start, phase, axis and carrier, every mark, and the end.

use crate::config::document::Document;
use crate::config::drives::{Carrier, CarrierPhase, Form};
use crate::config::messages::{Fault, Mistake};
use crate::config::place::Place;
use crate::config::sequence::{Align, Change, Pulse, PulsePhase, Step};
use crate::problem::Instant;

/// A pulse at its place.
#[derive(Debug, Clone)]
pub struct PlacedPulse {
    /// Index of the drive.
    pub drive: usize,
    /// Index of the envelope.
    pub envelope: usize,
    /// When it starts.
    pub start: Instant,
    /// Its start counted from the start of its group, s.
    pub offset_s: f64,
    /// How long it lasts, s.
    pub length_s: f64,
    /// Which of [`Timeline::carriers`]; none for a direct drive.
    pub carrier: Option<usize>,
    /// Phase of the carrier as the user means it, frame turns included, turns.
    pub phase_turns: f64,
    /// Axis of turn from x towards y, frame turns included, turns.
    pub axis_turns: f64,
    /// Turns that the carrier has made at the start of the pulse, reduced.
    pub turned: f64,
}

/// A stretch in which the same step of the sequence lasts.
#[derive(Debug, Clone)]
pub struct Group {
    /// When it starts.
    pub start: Instant,
    /// How long it lasts, s.
    pub length_s: f64,
    /// Its pulses, as a range of [`Timeline::pulses`].
    pub pulses: std::ops::Range<usize>,
}

/// A carrier at one point: the drive's own, or one that was set.
#[derive(Debug, Clone)]
pub struct PlacedCarrier<'d> {
    /// Frequency, or centre of the chirp, Hz.
    pub centre_hz: f64,
    /// As written.
    pub written: &'d Carrier,
}

/// A carrier set anew.
#[derive(Debug, Clone, Copy)]
pub struct CarrierChange {
    /// When.
    pub at: Instant,
    /// Index of the drive.
    pub drive: usize,
    /// Which of [`Timeline::carriers`] it has from then on.
    pub carrier: usize,
}

/// The sequence of one point.
#[derive(Debug, Clone, Default)]
pub struct Timeline<'d> {
    /// Pulses in the order written, repeats and blocks unrolled.
    pub pulses: Vec<PlacedPulse>,
    /// Consecutive stretches that take time.
    pub groups: Vec<Group>,
    /// Carriers in use.
    pub carriers: Vec<PlacedCarrier<'d>>,
    /// Carriers that drives have at the start, by drive; none for a direct one.
    pub first_carriers: Vec<Option<usize>>,
    /// Carriers set anew, in order.
    pub changes: Vec<CarrierChange>,
    /// Marks.
    pub marks: Vec<(String, Instant)>,
    /// The end.
    pub end: Instant,
}

/// Phase of a carrier since it was last set.
#[derive(Clone, Copy)]
struct Running {
    carrier: usize,
    since: Instant,
    turns: f64,
}

struct Walk<'d, 'v> {
    document: &'d Document,
    values: &'v [f64],
    /// Phase of <upper|M|lower> of each drive, turns.
    reference_turns: &'v [f64],
    lengths: &'v [f64],
    timeline: Timeline<'d>,
    now: Instant,
    frame_turns: Vec<f64>,
    running: Vec<Option<Running>>,
    /// Half the length of the step before, if it was a pulse or group.
    half_before: Option<f64>,
    waiting: Option<(f64, Place)>,
}

/// Lays out the sequence; `lengths_s` are the lengths of the envelopes, `reference_turns` the phases of the drives' reference entries.
pub fn lay_out<'d>(document: &'d Document, values: &[f64], reference_turns: &[f64], lengths_s: &[f64]) -> Result<Timeline<'d>, Mistake> {
    let mut walk = Walk {
        document,
        values,
        reference_turns,
        lengths: lengths_s,
        timeline: Timeline::default(),
        now: Instant::default(),
        frame_turns: vec![0.0; document.drives.len()],
        running: Vec::new(),
        half_before: None,
        waiting: None,
    };
    for drive in &document.drives {
        let running = drive.carrier.as_ref().map(|written| {
            walk.timeline.carriers.push(PlacedCarrier { centre_hz: values[written.centre.register as usize], written });
            Running { carrier: walk.timeline.carriers.len() - 1, since: Instant::default(), turns: 0.0 }
        });
        walk.timeline.first_carriers.push(running.map(|running| running.carrier));
        walk.running.push(running);
    }
    walk.steps(&document.sequence)?;
    if let Some((_, place)) = walk.waiting {
        return Err(Mistake::error(place, Fault::NoPulseAfter));
    }
    walk.timeline.end = walk.now;
    if walk.now.seconds() <= 0.0 {
        return Err(Mistake::error(document.sequence_place, Fault::EmptySequence));
    }
    Ok(walk.timeline)
}

impl<'d> Walk<'d, '_> {
    fn steps(&mut self, steps: &'d [Step]) -> Result<(), Mistake> {
        for step in steps {
            match step {
                Step::Pulse(pulse) => self.group(std::slice::from_ref(pulse))?,
                Step::Together(pulses) => self.group(pulses)?,
                Step::Wait(time) => {
                    let wait = self.values[time.register as usize];
                    self.no_wait_between_centres()?;
                    self.wait(wait, time.place)?;
                    self.half_before = None;
                }
                Step::WaitBetweenCentres(time) => {
                    self.no_wait_between_centres()?;
                    let Some(half) = self.half_before else {
                        return Err(Mistake::error(time.place, Fault::NoPulseBefore));
                    };
                    self.waiting = Some((self.values[time.register as usize] - half, time.place));
                }
                Step::Repeat(times, inner) => {
                    for _ in 0..*times {
                        self.steps(inner)?;
                    }
                }
                Step::Block(inner) => self.steps(inner)?,
                Step::TurnFrame(drive, angle) => self.frame_turns[*drive] += self.values[angle.register as usize],
                Step::SetCarrier(drive, carrier, change) => self.set_carrier(*drive, carrier, *change),
                Step::Mark(name) => self.timeline.marks.push((name.clone(), self.now)),
            }
        }
        Ok(())
    }

    fn no_wait_between_centres(&self) -> Result<(), Mistake> {
        match self.waiting {
            Some((_, place)) => Err(Mistake::error(place, Fault::NoPulseAfter)),
            None => Ok(()),
        }
    }

    fn wait(&mut self, wait_s: f64, place: Place) -> Result<(), Mistake> {
        if wait_s < 0.0 {
            let found = crate::config::messages::short_with_unit(wait_s, "s");
            return Err(Mistake::error(place, Fault::OutOfRange { what: "a wait".to_string(), found, wanted: "0 or longer".to_string() }));
        }
        if wait_s > 0.0 {
            let none = self.timeline.pulses.len();
            self.timeline.groups.push(Group { start: self.now, length_s: wait_s, pulses: none..none });
            self.now = self.now.after(wait_s);
        }
        Ok(())
    }

    fn group(&mut self, pulses: &[Pulse]) -> Result<(), Mistake> {
        let longest = pulses.iter().map(|pulse| self.lengths[pulse.envelope]).fold(0.0, f64::max);
        if let Some((wait, place)) = self.waiting.take() {
            let wait = wait - 0.5 * longest;
            // rounding of the three lengths may leave a wait of zero slightly negative
            if wait < -1e-12 * longest {
                return Err(Mistake::error(place, Fault::Overlap { gap_s: wait }));
            }
            self.wait(wait.max(0.0), place)?;
        }
        let first = self.timeline.pulses.len();
        let mut end = 0.0f64;
        for pulse in pulses {
            let length = self.lengths[pulse.envelope];
            let offset = match pulse.align {
                Align::Start => 0.0,
                Align::Centre => 0.5 * (longest - length),
                Align::End => longest - length,
                Align::CentreAt(at) => {
                    let centre = self.values[at.register as usize];
                    let offset = centre - 0.5 * length;
                    if offset < -1e-12 * length {
                        let from_zero = self.now.seconds() == 0.0;
                        let write = format!("centre_at: {} or later", crate::config::messages::short_with_unit(0.5 * length, "s"));
                        return Err(Mistake::error(at.place, Fault::BeforeStart { start_s: offset, from_zero, write: Some(write) }));
                    }
                    offset.max(0.0)
                }
            };
            end = end.max(offset + length);
            let placed = self.place(pulse, offset, length);
            let written = &self.document.drives[pulse.drive];
            // what runs on and what restarts is the same only at time zero
            if written.form != Form::Direct && written.carrier_phase.is_none() && placed.start.seconds() > 0.0 {
                return Err(Mistake::error(written.place, Fault::PhaseUnsaid { drive: written.name.clone(), times: 1, why_first: true }));
            }
            self.timeline.pulses.push(placed);
        }
        let range = first..self.timeline.pulses.len();
        if end > 0.0 {
            self.timeline.groups.push(Group { start: self.now, length_s: end, pulses: range });
            self.now = self.now.after(end);
        }
        self.half_before = Some(0.5 * end);
        Ok(())
    }

    fn place(&self, pulse: &Pulse, offset_s: f64, length_s: f64) -> PlacedPulse {
        let start = self.now.after(offset_s);
        let written = &self.document.drives[pulse.drive];
        let mut placed = PlacedPulse {
            drive: pulse.drive,
            envelope: pulse.envelope,
            start,
            offset_s,
            length_s,
            carrier: None,
            phase_turns: 0.0,
            axis_turns: 0.0,
            turned: 0.0,
        };
        if written.form == Form::Direct {
            return placed;
        }
        let chi = self.reference_turns[pulse.drive];
        let phase = match pulse.phase {
            PulsePhase::Unsaid => 0.0,
            PulsePhase::Phase(phase) => self.values[phase.register as usize],
            PulsePhase::Axis(axis) => chi - self.values[axis.register as usize],
        };
        // a frame turned by an angle puts the axis so much further from x to y, that is the phase so much back
        placed.phase_turns = phase - self.frame_turns[pulse.drive];
        placed.axis_turns = chi - placed.phase_turns;
        if let Some(running) = self.running[pulse.drive] {
            placed.carrier = Some(running.carrier);
            if self.document.carrier_phase(pulse.drive) == CarrierPhase::RunsOn {
                placed.turned = running.turns + start.minus(running.since).turns(self.timeline.carriers[running.carrier].centre_hz);
            }
        }
        placed
    }

    fn set_carrier(&mut self, drive: usize, written: &'d Carrier, change: Option<Change>) {
        let centre_hz = self.values[written.centre.register as usize];
        // the same step of a repeat sets the same carrier again
        let known = self.timeline.carriers.iter().position(|carrier| std::ptr::eq(carrier.written, written));
        let carrier = known.unwrap_or_else(|| {
            self.timeline.carriers.push(PlacedCarrier { centre_hz, written });
            self.timeline.carriers.len() - 1
        });
        let (since, turns) = match (change, self.running[drive]) {
            (Some(Change::Continues), Some(before)) => {
                let turned = before.turns + self.now.minus(before.since).turns(self.timeline.carriers[before.carrier].centre_hz);
                (self.now, turned - turned.round())
            }
            _ => (Instant::default(), 0.0),
        };
        self.timeline.changes.push(CarrierChange { at: self.now, drive, carrier });
        self.running[drive] = Some(Running { carrier, since, turns });
    }
}

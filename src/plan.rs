//! The only file that knows all stages: a checked [`Document`] becomes a [`Problem`], and its answer an outcome.
//!
//! The text is read, checked and laid out once, into a [`Plan`]. A point of a scan, a draw of noise and a step of a tune are
//! then the same act: some named numbers get other values. [`Plan::mover`] finds out once which registers, matrices and curves
//! these numbers touch; [`Mover::at`] replays those alone and keeps everything else.

use std::collections::hash_map::Entry as MapEntry;
use std::collections::HashMap;
use std::sync::Arc;

mod open;
pub mod shaken;
pub mod wander;

use crate::config::decay::{Decay, Leaves};
use crate::config::dephasing::{Dephasing, Weights};
use crate::config::document::{not_finite, Document};
use crate::config::drives::{Drive, DriveMatrix, Form};
use crate::config::envelopes::{Derivative, Samples, SizeWord};
use crate::config::messages::{short_with_unit, Fault, Mistake, OpenFault};
use crate::config::record::{Cause, Item};
use crate::config::settings::{Follows, Frame, Rotating};
use crate::config::state::State;
use crate::config::tape::{Entry, Formula, Register, Wide};
use crate::drive::chirp::Chirp;
use crate::drive::coupling::{coupling, Coupling, CouplingFault};
use crate::drive::curve::curve;
use crate::drive::envelope::{Curve, Flat, Pieces};
use crate::drive::moments::{moments, rows_of};
use crate::drive::segments::{cut, PulseParts};
use crate::drive::signal::Signal;
use crate::drive::timeline::{lay_out, PlacedPulse, Timeline};
use crate::frame::eliminate::{eliminate, Elimination, LARGEST_VALIDITY};
use crate::frame::follow::level_turning;
use crate::frame::jumps::JumpBeat;
use crate::frame::ledger::{Source, TermKey};
use crate::frame::rotating::{rotate, Beat, Rotated, Setting};
use crate::measure::breaks_period;
use crate::model;
use crate::model::built::Built;
use crate::model::surroundings::Surroundings;
use crate::problem::{Matrix, Problem};
use crate::units::{rad_s, RAD_PER_TURN};

/// A config laid out once, ready for any number of points.
#[derive(Debug)]
pub struct Plan {
    document: Document,
}

/// Everything that is known of one point before it is computed.
#[derive(Debug, Clone)]
pub struct Point<'p> {
    /// Registers of the tape.
    pub values: Vec<f64>,
    /// Moved numbers, by index.
    set: Vec<Option<f64>>,
    /// The system: its static matrix and its operators.
    pub built: Arc<Built>,
    /// The system as the instruments see it: without noise.
    set_by: Arc<Built>,
    /// What noise adds to each number, by index; empty without noise.
    shift: Vec<f64>,
    /// Terms kept that the frame would drop.
    put_back: Vec<TermKey>,
    /// Whether only the end of the sequence is recorded.
    end_only: bool,
    /// Causes that are switched off.
    off: Vec<Cause>,
    /// Diagonal of the static Hamiltonian, Hz.
    pub energies_hz: Vec<f64>,
    /// Matrices of the drives.
    pub couplings: Vec<Coupling>,
    /// Curves of the envelopes.
    pub curves: Vec<Arc<dyn Curve>>,
    /// What surrounds the system.
    pub surroundings: Surroundings,
    /// The sequence in time.
    pub timeline: Timeline<'p>,
    /// The laboratory frame.
    lab: Problem,
    /// The times of `record:` for which the moments were found.
    rows: Vec<f64>,
    /// The frame of the run, where it is another.
    frame: Option<InFrame>,
    /// Warnings that depend on the numbers.
    pub warnings: Vec<Mistake>,
}

/// What is known of a point before anything is laid out in time.
#[derive(Debug, Clone)]
pub struct Still {
    /// Registers of the tape.
    pub values: Vec<f64>,
    /// The system: its static matrix and its operators.
    pub built: Arc<Built>,
    /// Diagonal of the static Hamiltonian, Hz.
    pub energies_hz: Vec<f64>,
    /// Matrices of the drives.
    pub couplings: Vec<Coupling>,
}

/// A point in a rotating frame.
#[derive(Debug, Clone)]
pub struct InFrame {
    /// The problem in the frame, the ledger, and how the levels turn.
    pub rotated: Rotated,
    /// What was eliminated, if anything.
    pub elimination: Option<Elimination>,
}

/// Which parts of a point the moved numbers touch.
#[derive(Debug, Clone)]
struct Touched {
    registers: Vec<Register>,
    statics: bool,
    /// Registers that follow the levels of a built system.
    following: Vec<Register>,
    couplings: bool,
    curves: Vec<bool>,
    /// Weights of derivative quadratures.
    quadratures: bool,
    start: bool,
    surroundings: bool,
}

/// A point whose numbers can be moved again and again.
#[derive(Debug)]
pub struct Mover<'p> {
    document: &'p Document,
    numbers: Vec<u32>,
    touched: Touched,
    point: Point<'p>,
}

impl Plan {
    /// Lays out a document.
    pub fn new(document: Document) -> Plan {
        Plan { document }
    }

    /// The document it was made from.
    pub fn document(&self) -> &Document {
        &self.document
    }

    /// The system and the matrices of the drives with the numbers as written, before anything is laid out in time.
    pub fn still(&self) -> Result<Still, Mistake> {
        self.still_at(&[])
    }

    fn still_at(&self, set: &[Option<f64>]) -> Result<Still, Mistake> {
        let document = &self.document;
        let mut values = document.tape.evaluate::<f64>(set, &[]);
        let ready = document.system.registers().iter().all(|register| values[*register as usize].is_finite());
        if let (false, Some(mistake)) = (ready, not_finite(&document.tape, &values, &document.sources)) {
            return Err(mistake);
        }
        let built = Arc::new(model::build(document, &values)?);
        document.tape.replay(&document.tape.level_dependents(), set, &built.energies, &mut values);
        if let Some(mistake) = not_finite(&document.tape, &values, &document.sources) {
            return Err(mistake);
        }
        let (_, energies_hz) = statics(&built);
        let couplings = couplings(document, &built, &energies_hz, &values)?;
        Ok(Still { values, built, energies_hz, couplings })
    }

    /// The point with the numbers as written.
    pub fn point(&self) -> Result<Point<'_>, Mistake> {
        Ok(self.mover(&[])?.point)
    }

    /// The same with some terms kept that the frame would drop.
    pub fn point_with(&self, put_back: &[TermKey]) -> Result<Point<'_>, Mistake> {
        Ok(self.mover_with(&[], put_back)?.point)
    }

    /// A point in which the numbers of these names will be moved; a name that does not exist is refused.
    pub fn mover(&self, names: &[&str]) -> Result<Mover<'_>, Mistake> {
        self.mover_with(names, &[])
    }

    fn mover_with(&self, names: &[&str], put_back: &[TermKey]) -> Result<Mover<'_>, Mistake> {
        self.laid_out(names, None, put_back)
    }

    fn laid_out(&self, names: &[&str], start: Option<&[f64]>, put_back: &[TermKey]) -> Result<Mover<'_>, Mistake> {
        let document = &self.document;
        let mut numbers = Vec::new();
        for name in names {
            match document.numbers.iter().find(|number| number.name == *name) {
                Some(number) => numbers.push(number_of(document, number.register)),
                None => {
                    let known: Vec<String> = document.numbers.iter().map(|number| number.name.clone()).collect();
                    let near = crate::config::reader::near(name, known.iter().map(String::as_str));
                    let fault = Fault::NoSuchNumber { name: (*name).to_string(), near, known };
                    return Err(Mistake::error(Default::default(), fault));
                }
            }
        }
        let size = document
            .tape
            .entries()
            .iter()
            .filter_map(|entry| if let Entry::Number(index, _) = entry { Some(index + 1) } else { None })
            .max()
            .unwrap_or(0);
        let mut set = vec![None; size as usize];
        for (number, value) in numbers.iter().zip(start.unwrap_or_default()) {
            set[*number as usize] = Some(*value);
        }
        let Still { values, built, energies_hz, couplings } = self.still_at(&set)?;
        let following = document.tape.level_dependents();
        let (statics, _) = statics(&built);
        let curves: Vec<Arc<dyn Curve>> = document.envelopes.iter().map(|envelope| curve(envelope, &values)).collect::<Result<_, _>>()?;
        let surroundings = Surroundings::new(document, &built, &values, &energies_hz)?;
        let lab = Problem {
            start: open::start_state(document, &values, &statics, &surroundings)?,
            statics: Arc::new(statics),
            matrices: Arc::new(couplings.iter().map(|coupling| coupling.turning.clone()).collect()),
            segments: Vec::new(),
            terms: Vec::new(),
            jumps: Arc::new(surroundings.jumps.clone()),
            moments: Vec::new(),
        };
        let timeline = timeline(document, &values, &couplings, &curves)?;
        let mut point = Point {
            values,
            set,
            set_by: built.clone(),
            built,
            shift: Vec::new(),
            put_back: put_back.to_vec(),
            end_only: false,
            off: Vec::new(),
            energies_hz,
            couplings,
            curves,
            surroundings,
            timeline,
            lab,
            rows: Vec::new(),
            frame: None,
            warnings: Vec::new(),
        };
        point.segment(document)?;
        let touched = Touched::by(document, document.tape.dependents(&numbers), following);
        Ok(Mover { document, numbers, touched, point })
    }

    /// The same laid out with the numbers at `values` (SI, in the order of the names) from the start: for configs whose numbers as
    /// written make no run.
    pub fn mover_from(&self, names: &[&str], values: &[f64]) -> Result<Mover<'_>, Mistake> {
        self.laid_out(names, Some(values), &[])
    }

    /// Whether moving these numbers moves any of these registers.
    pub fn moves(&self, names: &[&str], registers: &[Register]) -> bool {
        let numbers: Vec<u32> = self
            .document
            .numbers
            .iter()
            .filter(|n| names.contains(&n.name.as_str()))
            .map(|n| number_of(&self.document, n.register))
            .collect();
        let moved = self.document.tape.dependents(&numbers);
        registers.iter().any(|register| moved.contains(register))
    }

    /// Whether moving these numbers changes the structure (a count of levels or of repeats), so that the file must be read anew.
    pub fn is_structural(&self, names: &[&str]) -> bool {
        let numbers: Vec<u32> = self
            .document
            .numbers
            .iter()
            .filter(|n| names.contains(&n.name.as_str()))
            .map(|n| number_of(&self.document, n.register))
            .collect();
        let moved = self.document.tape.dependents(&numbers);
        self.document.structural.iter().any(|register| moved.contains(register))
    }
}

fn number_of(document: &Document, register: Register) -> u32 {
    match document.tape.entries()[register as usize] {
        Entry::Number(index, _) => index,
        _ => u32::MAX,
    }
}

impl<'p> Mover<'p> {
    /// The point as it stands.
    pub fn point(&self) -> &Point<'p> {
        &self.point
    }

    /// Moves the numbers to `values` (SI, in the order of the names) and replays what they touch.
    pub fn at(&mut self, values: &[f64]) -> Result<&Point<'p>, Mistake> {
        for (number, value) in self.numbers.iter().zip(values) {
            self.point.set[*number as usize] = Some(*value);
        }
        let (document, point, touched) = (self.document, &mut self.point, &self.touched);
        document.tape.replay(&touched.registers, &point.set, &point.built.energies, &mut point.values);
        point.refresh(document, touched)?;
        Ok(point)
    }

    /// Moves the numbers as [`at`](Mover::at) does, but replays the registers alone: where no formula follows the levels of a built
    /// system. Nothing where one of them is not finite; the point then is refused by `at`.
    pub fn registers_at(&mut self, values: &[f64]) -> Option<&[f64]> {
        for (number, value) in self.numbers.iter().zip(values) {
            self.point.set[*number as usize] = Some(*value);
        }
        let (document, point, touched) = (self.document, &mut self.point, &self.touched);
        document.tape.replay(&touched.registers, &point.set, &point.built.energies, &mut point.values);
        touched.registers.iter().all(|register| point.values[*register as usize].is_finite()).then_some(point.values.as_slice())
    }

    /// Whether a moved number touches the start or the surroundings.
    pub fn moves_more_than_pulses(&self) -> bool {
        self.touched.surroundings || self.touched.start
    }

    /// Whether [`registers_at`](Mover::registers_at) tells all registers.
    pub fn has_no_followers(&self) -> bool {
        self.touched.following.is_empty()
    }

    /// The same with every envelope held at 1 all through its pulse, so that the terms of its problem hold the sizes of the drives alone;
    /// nothing where a moved number touches the shape of an envelope, the surroundings or the start.
    pub fn flattened(mut self) -> Result<Option<Mover<'p>>, Mistake> {
        let touched = &self.touched;
        if touched.curves.contains(&true) || touched.quadratures || touched.surroundings || touched.start {
            return Ok(None);
        }
        for curve in &mut self.point.curves {
            *curve = Arc::new(Flat(curve.clone()));
        }
        self.point.refresh(self.document, &self.touched)?;
        Ok(Some(self))
    }
}

impl Touched {
    fn by(document: &Document, registers: Vec<Register>, following: Vec<Register>) -> Touched {
        let mut moved = vec![false; document.tape.entries().len()];
        for register in &registers {
            moved[*register as usize] = true;
        }
        let statics = document.system.registers().into_iter().any(|register| moved[register as usize]);
        // with the levels of a built system everything moves that follows them
        let following = if statics { following } else { Vec::new() };
        for register in &following {
            moved[*register as usize] = true;
        }
        let is = |register: Register| moved[register as usize];
        let formula = |formula: &Formula| formula.tape.entries().iter().any(|entry| matches!(entry, Entry::Outer(from) if is(*from)));
        let curves = document
            .envelopes
            .iter()
            .map(|envelope| {
                envelope.times.iter().any(|(_, time)| is(time.register))
                    || envelope.formula.as_ref().is_some_and(formula)
                    || matches!(&envelope.samples, Some(Samples::List(list)) if list.iter().any(|register| is(*register)))
            })
            .collect();
        let quadrature = |derivative: Derivative| is(derivative.factor.register) || is(derivative.against.register);
        // what comes with the system moves with it
        let operator = |index: usize| {
            let entries = document.operators[index].entries();
            entries.map_or(statics, |list| list.iter().any(|e| is(e.value.re) || e.value.im.is_some_and(is)))
        };
        let decay = |decay: &Decay| {
            let leaves = match &decay.leaves {
                Leaves::Level { to, .. } => to.any(&is),
                Leaves::Operator(index) => operator(*index),
            };
            // a bath looks at the gaps
            leaves || is(decay.speed.size.register) || decay.temperature.is_some_and(|bath| statics || is(bath.register))
        };
        let dephasing = |dephasing: &Dephasing| {
            let weights = match &dephasing.weights {
                Weights::Levels(list) => list.iter().any(|(_, weight)| is(weight.register)),
                Weights::Operator(index) => operator(*index),
            };
            weights || is(dephasing.size().register)
        };
        let surroundings = document.decays.iter().any(decay) || document.dephasings.iter().any(dephasing);
        let start = match &document.start {
            State::Superposition(parts, _) => parts.iter().any(|(_, size, phase)| is(size.register) || is(phase.register)),
            State::Mix(shares) => shares.any(&is),
            State::Quanta { modes, .. } => modes.iter().any(|warm| is(warm.mean.register)),
            State::Thermal(temperature) => statics || is(temperature.register),
            State::Steady(_) => statics || surroundings,
            State::Level(_) | State::Amplitudes(_) | State::Density(_) => false,
        };
        Touched {
            statics,
            following,
            couplings: document.drives.iter().any(|drive| drive_registers(document, drive).into_iter().any(is)),
            curves,
            quadratures: document.envelopes.iter().filter_map(|envelope| envelope.derivative).any(quadrature),
            start,
            surroundings,
            registers,
        }
    }
}

/// How a source of terms is called.
pub fn source_name(document: &Document, source: Source) -> String {
    match source {
        Source::Drive(drive) => document.drives[drive].name.clone(),
        Source::Static => "static".to_string(),
    }
}

/// The carriers that do not close, as a mistake at the carrier of the drive whose term beats.
fn beat_mistake(document: &Document, beat: &Beat, carrier_hz: &dyn Fn(usize) -> f64) -> Mistake {
    let drive = &document.drives[beat.drive];
    let place = drive.carrier.as_ref().map_or(drive.place, |carrier| carrier.centre.place);
    let mut sum = String::new();
    for (d, count) in beat.counts.iter().enumerate().filter(|(_, count)| **count != 0) {
        let sign = match (count.signum(), sum.is_empty()) {
            (1, true) => "",
            (1, false) => " + ",
            (_, true) => "-",
            (_, false) => " - ",
        };
        let times = if count.abs() == 1 { String::new() } else { format!("{} x ", count.abs()) };
        sum.push_str(&format!("{sign}{times}{} ({})", short_with_unit(carrier_hz(d), "Hz"), document.drives[d].name));
    }
    let [upper, lower] = beat.levels.map(|level| document.system.names[level].clone());
    let closes_hz = carrier_hz(beat.drive) - beat.turns_hz;
    Mistake::error(place, Fault::Beat { drive: drive.name.clone(), levels: [lower, upper], turns_hz: beat.turns_hz.abs(), sum, closes_hz })
}

/// Drive, envelope and carrier of a pulse.
type PartKey = (usize, usize, Option<usize>);

fn part_key(pulse: &PlacedPulse) -> PartKey {
    (pulse.drive, pulse.envelope, pulse.carrier)
}

impl<'p> Point<'p> {
    /// Forms anew what the replayed registers feed. Noise leaves the order of the levels, by which drives and frames tell up from
    /// down, as it is without it: that belongs to the instruments.
    fn refresh(&mut self, document: &'p Document, touched: &Touched) -> Result<(), Mistake> {
        let noise = !self.shift.is_empty();
        if touched.statics {
            self.built = Arc::new(model::build(document, &self.values)?);
            if !noise {
                self.set_by = self.built.clone();
                document.tape.replay(&touched.following, &self.set, &self.built.energies, &mut self.values);
            }
        }
        if touched.registers.iter().chain(&touched.following).any(|register| !self.values[*register as usize].is_finite()) {
            if let Some(mistake) = not_finite(&document.tape, &self.values, &document.sources) {
                return Err(mistake);
            }
        }
        if touched.statics {
            let (statics, energies) = statics(&self.built);
            self.lab.statics = Arc::new(statics);
            if !noise {
                self.energies_hz = energies;
            }
        }
        // typed matrices do not depend on the levels, but their order tells which half of a drive is which
        let typed = document.system.is_typed() && self.built.basis.is_none();
        if touched.couplings || (touched.statics && !(noise && typed)) {
            self.couplings = couplings(document, &self.built, &self.energies_hz, &self.values)?;
            self.lab.matrices = Arc::new(self.couplings.iter().map(|coupling| coupling.turning.clone()).collect());
        }
        for (k, envelope) in document.envelopes.iter().enumerate().filter(|(k, _)| touched.curves[*k]) {
            self.curves[k] = curve(envelope, &self.values)?;
        }
        if touched.surroundings {
            // a bath looks at the gaps of this very shot
            let moved = (noise && touched.statics).then(|| statics(&self.built).1);
            let energies_hz = moved.as_ref().unwrap_or(&self.energies_hz);
            self.surroundings = Surroundings::new(document, &self.built, &self.values, energies_hz)?;
            self.lab.jumps = open::jumps(&self.surroundings, &self.off);
        }
        if touched.start {
            self.lab.start = open::start_state(document, &self.values, &self.lab.statics, &self.surroundings)?;
        }
        self.timeline = timeline(document, &self.values, &self.couplings, &self.curves)?;
        self.segment(document)
    }

    /// What the methods see.
    pub fn problem(&self) -> &Problem {
        self.frame.as_ref().map_or(&self.lab, |frame| &frame.rotated.problem)
    }

    /// The rotating frame, if the run is in one.
    pub fn in_frame(&self) -> Option<&InFrame> {
        self.frame.as_ref()
    }

    /// Turns that each level's frame has made at the end of the sequence; 0 in the laboratory frame.
    pub fn end_turns(&self) -> Vec<f64> {
        self.frame.as_ref().map_or_else(|| vec![0.0; self.energies_hz.len()], |frame| frame.rotated.end_turns.clone())
    }

    /// The problem of the laboratory frame.
    pub fn lab(&self) -> &Problem {
        &self.lab
    }

    /// Cuts the timeline into segments, finds the moments to record, and goes to the frame of the run.
    fn segment(&mut self, document: &Document) -> Result<(), Mistake> {
        let parts = self.parts(document)?;
        let (segments, terms) = cut(&self.timeline, &|pulse| parts[&part_key(pulse)].clone());
        let same_times = segments.len() == self.lab.segments.len()
            && segments.iter().zip(&self.lab.segments).all(|(a, b)| a.start == b.start && a.length_s == b.length_s);
        let asked = rows_of(document, &self.values);
        if !same_times || self.lab.moments.is_empty() || asked != self.rows {
            self.lab.moments = moments(document, &self.values, &segments, self.timeline.end.seconds())?;
            if self.end_only {
                self.lab.moments.drain(..self.lab.moments.len() - 1);
            }
            self.rows = asked;
        }
        self.lab.segments = segments;
        self.lab.terms = terms;
        self.warnings.clear();
        for (level, mistake) in &self.built.doubtful {
            // a state that the file speaks of must be one that can be told; along a scan levels pass through each other
            let recorded = document.scan.is_none() && document.recorded_levels.contains(level);
            if recorded || document.named_levels.contains(level) {
                return Err(mistake.clone());
            }
            self.warnings.push(Mistake { warning: true, ..mistake.clone() });
        }
        for (drive, first) in document.drives.iter().zip(&self.timeline.first_carriers) {
            if let Some(carrier) = first.map(|carrier| &self.timeline.carriers[carrier]).filter(|carrier| carrier.centre_hz < 0.0) {
                let fault = Fault::NegativeCarrier { drive: drive.name.clone(), hz: carrier.centre_hz };
                self.warnings.push(Mistake::warning(carrier.written.centre.place, fault));
            }
        }
        self.frame = match &document.frame {
            Frame::Lab => None,
            Frame::Rotating(frame) => Some(self.rotate(document, frame, &parts)?),
        };
        self.judge_periods(document)?;
        self.judge_surroundings(document)
    }

    /// Quasi-energies need a drive that repeats, in the frame of the run.
    fn judge_periods(&self, document: &Document) -> Result<(), Mistake> {
        for item in &document.record.items {
            let Item::QuasiEnergies(period) = item else { continue };
            let period_s = self.values[period.register as usize];
            let end_s = self.timeline.end.seconds();
            if !(period_s > 0.0) {
                let fault = Fault::NotPositive { what: "quasi_energies / period".to_string(), value: period_s, unit: "s".to_string() };
                return Err(Mistake::error(period.place, fault));
            }
            if period_s > end_s * (1.0 + 1e-12) {
                return Err(Mistake::error(period.place, Fault::PeriodTooLong { period_s, end_s }));
            }
            if let Some(at_s) = breaks_period(self.problem(), period_s) {
                return Err(Mistake::error(period.place, Fault::NotPeriodic { period_s, at_s }));
            }
        }
        Ok(())
    }

    /// The point in its rotating frame.
    fn rotate(&mut self, document: &Document, frame: &Rotating, parts: &HashMap<PartKey, Arc<PulseParts>>) -> Result<InFrame, Mistake> {
        let set: Vec<Option<Wide>> = self.set.iter().map(|value| value.map(|value| Wide { high: value, low: 0.0 })).collect();
        let wide = document.tape.evaluate_shaken::<Wide>(&set, &self.set_by.energies, &self.shift);
        let mut energies = self.built.energies.clone();
        if document.system.is_typed() && self.built.basis.is_none() {
            energies.fill(Wide::default());
            for entry in document.system.entries.iter().filter(|entry| entry.row == entry.column) {
                energies[entry.row] = energies[entry.row].plus(wide[entry.value.re as usize]);
            }
        }
        let carriers: Vec<Wide> = self.timeline.carriers.iter().map(|carrier| wide[carrier.written.centre.register as usize]).collect();
        let mut sizes: HashMap<(usize, Option<usize>), f64> = HashMap::new();
        for pulse in &self.timeline.pulses {
            let size = parts[&part_key(pulse)].half_rabi_hz.abs() * self.curves[pulse.envelope].largest();
            let largest = sizes.entry((pulse.drive, pulse.carrier)).or_insert(0.0);
            *largest = largest.max(size);
        }
        let turning = level_turning(document, frame, &self.couplings, &self.energies_hz, &self.values);
        let limit_hz = frame.limit.map_or(f64::INFINITY, |limit| self.values[limit.register as usize]);
        let direct: Vec<bool> = document.drives.iter().map(|drive| drive.form == Form::Direct).collect();
        let setting = Setting {
            timeline: &self.timeline,
            couplings: &self.couplings,
            direct: &direct,
            energies_hz: &energies,
            carriers_hz: &carriers,
            sizes_hz: &sizes,
            turning: &turning,
            limit_hz,
            put_back: &self.put_back,
        };
        let mut rotated = rotate(&self.lab, &setting);
        if let (Follows::Drives, false, Some(_), Some(beat)) = (&frame.follows, frame.allow_beat, frame.limit, rotated.beats.first()) {
            let first = &self.timeline.first_carriers;
            return Err(beat_mistake(document, beat, &|drive| first[drive].map_or(0.0, |carrier| carriers[carrier].value())));
        }
        let name = |level: usize| document.system.names[level].clone();
        for line in rotated.ledger.lines.iter().filter(|line| line.is_doubtful()) {
            let fault = Fault::DoubtfulDrop {
                drive: source_name(document, line.key.source),
                levels: line.levels().map(name),
                size_hz: line.size_hz,
                turns_hz: line.turns_at_hz,
            };
            self.warnings.push(Mistake::warning(frame.place, fault));
        }
        let beats = |fault: &dyn Fn(f64) -> OpenFault, of: &dyn Fn(&JumpBeat) -> bool| {
            let slowest = rotated.jump_beats.iter().filter(|beat| of(beat)).map(|beat| beat.turns_hz).min_by(f64::total_cmp);
            slowest.map(|turns_hz| Fault::Open(fault(turns_hz)))
        };
        if let Some(fault) = beats(&|_| OpenFault::JumpBeatMoves, &|beat| !beat.even) {
            return Err(Mistake::error(frame.place, fault));
        }
        if let Some(fault) = beats(&|turns_hz| OpenFault::JumpBeats { turns_hz }, &|beat| !beat.kept) {
            self.warnings.push(Mistake::warning(frame.place, fault));
        }
        let mut elimination = None;
        if !frame.eliminate.is_empty() {
            let entries =
                |j: usize, k: usize| rotated.problem.jumps.iter().map(move |jump| jump.rate_per_s * jump.matrix[(j, k)].norm_sqr());
            let stays: Vec<usize> = (0..self.energies_hz.len()).filter(|j| !frame.eliminate.contains(j)).collect();
            let arrives = |e: usize| stays.iter().flat_map(|k| entries(e, *k)).any(|rate| rate > 0.0);
            if let Some(level) = frame.eliminate.iter().find(|level| arrives(**level)) {
                return Err(Mistake::error(frame.place, Fault::Open(OpenFault::IntoEliminated { level: name(*level) })));
            }
            if let Some(level) = frame.eliminate.iter().find(|level| self.lab.start.state().population(**level) > 1e-24) {
                return Err(Mistake::error(frame.place, Fault::StartEliminated { level: name(*level) }));
            }
            let (problem, done) = eliminate(&rotated.problem, &frame.eliminate);
            if !(done.validity < LARGEST_VALIDITY) {
                let levels = frame.eliminate.iter().map(|level| name(*level)).collect();
                return Err(Mistake::error(frame.place, Fault::TooNear { levels, validity: done.validity, limit: LARGEST_VALIDITY }));
            }
            for level in &frame.eliminate {
                let rate_per_s = self.surroundings.rate_out(*level);
                if rate_per_s > 0.0 {
                    let fault = OpenFault::EliminatedDecays { level: name(*level), rate_per_s, validity: done.validity };
                    self.warnings.push(Mistake::warning(frame.place, Fault::Open(fault)));
                }
            }
            rotated.problem = problem;
            elimination = Some(done);
        }
        Ok(InFrame { rotated, elimination })
    }

    /// What each combination of drive, envelope and carrier in use is made of.
    fn parts(&self, document: &Document) -> Result<HashMap<PartKey, Arc<PulseParts>>, Mistake> {
        let mut parts = HashMap::new();
        for pulse in &self.timeline.pulses {
            if let MapEntry::Vacant(vacant) = parts.entry(part_key(pulse)) {
                vacant.insert(Arc::new(self.part(document, pulse)?));
            }
        }
        Ok(parts)
    }

    fn part(&self, document: &Document, pulse: &PlacedPulse) -> Result<PulseParts, Mistake> {
        let envelope = &document.envelopes[pulse.envelope];
        let curve = self.curves[pulse.envelope].clone();
        let half_rabi_hz = self.half_rabi_hz(document, pulse.drive, pulse.envelope)?;
        let quadrature_s = self.quadrature_s(document, pulse.envelope);
        if !quadrature_s.is_finite() {
            let place = envelope.derivative.map_or(envelope.place, |derivative| derivative.against.place);
            return Err(Mistake::error(place, Fault::ZeroDivision { text: "against is 0".to_string() }));
        }
        let chirp = self.sweep(pulse).map(Arc::new);
        let pieces = curve.pieces();
        let signal = matches!(pieces, Pieces::Smooth { .. }).then(|| Arc::new(Signal { curve, quadrature_s }));
        Ok(PulseParts { pieces, half_rabi_hz, chirp, signal })
    }

    /// Size of c at envelope 1, Hz: R/2 turns with the carrier; a direct drive's entry is halved in its matrix instead.
    fn half_rabi_hz(&self, document: &Document, drive: usize, envelope: usize) -> Result<f64, Mistake> {
        let peak_hz = self.peak_hz(document, drive, envelope)?;
        Ok(if document.drives[drive].form == Form::Direct { peak_hz } else { 0.5 * peak_hz })
    }

    /// Weight of the derivative quadrature, Y = quadrature_s dX/dt, s; 0 for none.
    pub fn quadrature_s(&self, document: &Document, envelope: usize) -> f64 {
        document.envelopes[envelope].derivative.map_or(0.0, |derivative| {
            let (factor, against) = (self.values[derivative.factor.register as usize], self.values[derivative.against.register as usize]);
            -factor / (RAD_PER_TURN * against)
        })
    }

    /// The sweep of a pulse, if its carrier has one.
    pub fn sweep(&self, pulse: &PlacedPulse) -> Option<Chirp> {
        let carrier = &self.timeline.carriers[pulse.carrier?];
        let formula = carrier.written.instantaneous.as_ref()?.bind(&self.values);
        Some(Chirp::new(formula, carrier.centre_hz, pulse.length_s))
    }

    /// The size of an envelope on a drive at envelope 1: the Rabi frequency R of the reference pair, or the entry itself of a
    /// direct drive, Hz.
    pub fn peak_hz(&self, document: &Document, drive: usize, envelope: usize) -> Result<f64, Mistake> {
        let scale = self.couplings[drive].scale;
        let typed = if document.drives[drive].reference_implied { scale } else { 1.0 };
        let (drive, written) = (&document.drives[drive], &document.envelopes[envelope]);
        let size = self.values[written.size.register as usize];
        match written.size_word {
            SizeWord::Peak => Ok(size),
            SizeWord::MatrixElement if drive.form == Form::OneSided => Ok(2.0 * size * typed),
            SizeWord::MatrixElement => Ok(size * typed),
            // the matrix was Hz/T before it was scaled by its reference entry
            SizeWord::Field => Ok(size * scale),
            SizeWord::Turn => {
                let area = self.curves[envelope].area_s();
                let whole = self.curves[envelope].length_s() * self.curves[envelope].largest();
                if size != 0.0 && !(area.abs() > 1e-12 * whole) {
                    return Err(Mistake::error(written.size_place, Fault::NoArea { envelope: written.name.clone() }));
                }
                Ok(if size == 0.0 { 0.0 } else { size / area })
            }
            SizeWord::Volts => match drive.calibration {
                Some(calibration) => {
                    let per_volt = self.values[calibration.rabi.register as usize] / self.values[calibration.volts.register as usize];
                    if !per_volt.is_finite() {
                        return Err(Mistake::error(
                            calibration.volts.place,
                            Fault::ZeroDivision { text: "volts of the calibration are 0".to_string() },
                        ));
                    }
                    Ok(size * per_volt)
                }
                None => Err(Mistake::error(
                    written.size_place,
                    Fault::NoCalibration { envelope: written.name.clone(), drive: drive.name.clone() },
                )),
            },
        }
    }
}

/// The registers that the matrix of a drive is made of, beside those of the system.
fn drive_registers(document: &Document, drive: &Drive) -> Vec<Register> {
    match &drive.matrix {
        DriveMatrix::Typed(entries) => entries.iter().flat_map(|entry| [Some(entry.value.re), entry.value.im]).flatten().collect(),
        DriveMatrix::Operator(index) => document.operators[*index].registers(),
        DriveMatrix::Quanta(_) | DriveMatrix::Light(..) => Vec::new(),
        DriveMatrix::Moment(_, direction) => direction.iter().map(|component| component.register).collect(),
    }
}

/// The static Hamiltonian in rad/s, and its diagonal in Hz.
fn statics(built: &Built) -> (Matrix, Vec<f64>) {
    let energies = built.statics_hz.diagonal().iter().map(|entry| entry.re).collect();
    (built.statics_hz.map(|entry| entry * rad_s(1.0)), energies)
}

fn couplings(document: &Document, built: &Built, energies: &[f64], values: &[f64]) -> Result<Vec<Coupling>, Mistake> {
    let one = |drive: &Drive| {
        coupling(drive, model::drive_matrix(document, built, drive, values), energies).map_err(|fault| match fault {
            CouplingFault::ReferenceZero([from, to]) => {
                let names = &document.system.names;
                let fault = Fault::NoSuchCoupling { drive: drive.name.clone(), from: names[from].clone(), to: names[to].clone() };
                Mistake::error(drive.reference_place, fault)
            }
            CouplingFault::NotHermitian => {
                Mistake::error(drive.place, Fault::NotHermitianDrive { drive: drive.name.clone(), operator: "its operator".to_string() })
            }
        })
    };
    document.drives.iter().map(one).collect()
}

fn timeline<'p>(
    document: &'p Document,
    values: &[f64],
    couplings: &[Coupling],
    curves: &[Arc<dyn Curve>],
) -> Result<Timeline<'p>, Mistake> {
    let reference: Vec<f64> = couplings.iter().map(|coupling| coupling.reference_turns).collect();
    let lengths: Vec<f64> = curves.iter().map(|curve| curve.length_s()).collect();
    lay_out(document, values, &reference, &lengths)
}

//! What a config means, as plain numbers: gathered once, then written by `json` and `text`.
//!
//! A new capability adds a field here, a key in `json` and a section in `text`.

use std::collections::HashMap;

use crate::config::document::Document;
use crate::config::drives::Form;
use crate::config::messages::{one_line, Mistake};
use crate::drive::detuning::two_photon;
use crate::drive::strength::{coupled_pairs, strength, Strength};
use crate::drive::timeline::PlacedPulse;
use crate::model::commutators::commutators;
use crate::model::gaps::{gaps, Gap};
use crate::plan::Point;
use crate::problem::Matrix;

/// One drive.
#[derive(Debug, Clone)]
pub struct DriveFact {
    /// Carrier, or centre of the chirp, Hz; none for a direct drive.
    pub carrier_hz: Option<f64>,
    /// Largest modulus over all its pulses, Hz: Rabi frequency on the reference pair, or entry; none where no pulse uses it.
    pub peak_hz: Option<f64>,
    /// Lower and upper level of the reference pair.
    pub reference: Option<[usize; 2]>,
    /// Phase of the reference entry <upper|M|lower>, turns.
    pub reference_turns: f64,
    /// Pairs its matrix couples, each with the modulus of its entry.
    pub pairs: Vec<(Gap, f64)>,
}

/// One pulse at its place.
#[derive(Debug, Clone, Copy)]
pub struct PulseFact {
    /// Index of the drive.
    pub drive: usize,
    /// Index of the envelope.
    pub envelope: usize,
    /// Start, centre and end, s.
    pub times_s: [f64; 3],
    /// What it does.
    pub strength: Strength,
    /// Phase of the carrier, turns from 0 to below 1; none for a direct drive.
    pub phase_turns: Option<f64>,
    /// Axis of turn from x towards y, turns from 0 to below 1; none without a carrier or a reference pair.
    pub axis_turns: Option<f64>,
}

/// By (drive, envelope): what the envelope does there, and how many pulses are so.
pub type Strengths = HashMap<(usize, usize), (Strength, usize)>;

/// Everything that is known of a config before it runs.
#[derive(Debug)]
pub struct Facts<'a> {
    /// The config.
    pub document: &'a Document,
    /// Its numbers laid out.
    pub point: &'a Point<'a>,
    /// Every pair of levels.
    pub gaps: Vec<Gap>,
    /// Drives in the order of the config.
    pub drives: Vec<DriveFact>,
    /// What each envelope in use does on its drive.
    pub strengths: Strengths,
    /// Two drives that share their upper level, and the two-photon detuning, Hz.
    pub two_photon: Vec<(usize, usize, f64)>,
    /// Names of two terms and how far they are from commuting.
    pub commutators: Vec<(String, String, f64)>,
    /// Whether the static matrix has off-diagonal entries.
    pub mixed: bool,
    /// Warnings as one line each.
    pub warnings: Vec<String>,
}

/// An angle in turns from 0 to below 1, rounded at 12 digits so that rounding below 0 does not show as nearly one turn.
fn within_a_turn(turns: f64) -> f64 {
    let rounded = ((turns - turns.floor()) * 1e12).round() / 1e12;
    if rounded >= 1.0 {
        0.0
    } else {
        rounded
    }
}

impl<'a> Facts<'a> {
    /// Gathers the facts of a config at a point of it.
    pub fn gather(document: &'a Document, point: &'a Point<'a>) -> Result<Facts<'a>, Mistake> {
        let mut strengths: Strengths = HashMap::new();
        for pulse in &point.timeline.pulses {
            let key = (pulse.drive, pulse.envelope);
            if let Some((_, times)) = strengths.get_mut(&key) {
                *times += 1;
                continue;
            }
            let size_hz = point.peak_hz(document, pulse.drive, pulse.envelope)?;
            strengths.insert(key, (strength(point.curves[pulse.envelope].as_ref(), size_hz), 1));
        }
        let drives: Vec<DriveFact> = (0..document.drives.len()).map(|drive| drive_fact(document, point, drive, &strengths)).collect();
        let mut two = Vec::new();
        for (a, first) in drives.iter().enumerate() {
            for (b, second) in drives.iter().enumerate().skip(a + 1) {
                let leg = |drive: &DriveFact| Some((drive.carrier_hz?, drive.reference?));
                if let (Some(first), Some(second)) = (leg(first), leg(second)) {
                    two.extend(two_photon(&point.energies_hz, first, second).map(|hz| (a, b, hz)));
                }
            }
        }
        Ok(Facts {
            document,
            point,
            gaps: gaps(&point.energies_hz),
            drives,
            strengths,
            two_photon: two,
            commutators: terms_that_commute(document, point),
            mixed: is_mixed(&point.lab().statics),
            warnings: document.warnings.iter().chain(&point.warnings).map(|warning| one_line(&document.sources, warning)).collect(),
        })
    }

    /// The pulses in the order written, repeats and blocks unrolled.
    pub fn pulses(&self) -> impl Iterator<Item = PulseFact> + '_ {
        self.point.timeline.pulses.iter().map(|pulse| self.pulse(pulse))
    }

    /// One pulse.
    pub fn pulse(&self, pulse: &PlacedPulse) -> PulseFact {
        let direct = self.document.drives[pulse.drive].form == Form::Direct;
        let referred = self.drives[pulse.drive].reference.is_some();
        PulseFact {
            drive: pulse.drive,
            envelope: pulse.envelope,
            times_s: [0.0, 0.5, 1.0].map(|share| pulse.start.after(share * pulse.length_s).seconds()),
            strength: self.strengths[&(pulse.drive, pulse.envelope)].0,
            phase_turns: (!direct).then(|| within_a_turn(pulse.phase_turns)),
            axis_turns: (!direct && referred).then(|| within_a_turn(pulse.axis_turns)),
        }
    }

    /// Whether a drive has no carrier.
    pub fn is_direct(&self, drive: usize) -> bool {
        self.document.drives[drive].form == Form::Direct
    }
}

fn drive_fact(document: &Document, point: &Point, drive: usize, strengths: &Strengths) -> DriveFact {
    let (written, coupling) = (&document.drives[drive], &point.couplings[drive]);
    let peaks = strengths.iter().filter(|((of, _), _)| *of == drive);
    DriveFact {
        carrier_hz: written.carrier.as_ref().map(|carrier| point.values[carrier.centre.register as usize]),
        peak_hz: peaks.map(|(_, (strength, _))| strength.peak_hz).reduce(f64::max),
        reference: coupling.reference,
        reference_turns: coupling.reference_turns,
        pairs: coupled_pairs(coupling, &point.energies_hz),
    }
}

fn is_mixed(statics: &Matrix) -> bool {
    let mut entries = statics.column_iter().enumerate();
    entries.any(|(j, column)| column.iter().enumerate().any(|(i, entry)| i != j && entry.norm() > 0.0))
}

/// The static matrix and each drive's, against each other.
fn terms_that_commute(document: &Document, point: &Point) -> Vec<(String, String, f64)> {
    let mut names = vec!["static".to_string()];
    names.extend(document.drives.iter().map(|drive| drive.name.clone()));
    let mut terms = vec![(*point.lab().statics).clone()];
    terms.extend(point.couplings.iter().map(|coupling| coupling.matrix.clone()));
    let named = |(a, b, size): (usize, usize, f64)| (names[a].clone(), names[b].clone(), size);
    commutators(&terms).into_iter().map(named).collect()
}

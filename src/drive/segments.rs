//! The timeline cut into segments in which every envelope is constant or smooth, with the terms of each.

use std::sync::Arc;

use super::chirp::Chirp;
use super::envelope::Pieces;
use super::signal::Signal;
use super::timeline::{PlacedPulse, Timeline};
use crate::problem::{Chirped, Envelope, Instant, Segment, Term};
use crate::units::{cis_turns, rad_s};

/// What one pulse is made of at a point.
pub struct PulseParts {
    /// How it is cut.
    pub pieces: Pieces,
    /// Size of c at envelope 1: R/2 (or the entry of a direct drive), Hz.
    pub half_rabi_hz: f64,
    /// Chirp.
    pub chirp: Option<Arc<Chirp>>,
    /// Curve and derivative quadrature, shared by the pulses that have the same; none where the envelope is held.
    pub signal: Option<Arc<Signal>>,
}

/// The segments and terms of a timeline; `parts` gives what a pulse is made of. The matrix of a drive has the drive's number.
pub fn cut(timeline: &Timeline, parts: &dyn Fn(&PlacedPulse) -> Arc<PulseParts>) -> (Vec<Segment>, Vec<Term>) {
    let mut segments = Vec::with_capacity(timeline.groups.len());
    let mut terms = Vec::with_capacity(timeline.pulses.len());
    let mut bounds: Vec<f64> = Vec::new();
    let mut made: Vec<(&PlacedPulse, Arc<PulseParts>)> = Vec::new();
    for group in &timeline.groups {
        made.clear();
        made.extend(timeline.pulses[group.pulses.clone()].iter().map(|pulse| (pulse, parts(pulse))));
        bounds.clear();
        bounds.extend([0.0, group.length_s]);
        for (pulse, parts) in &made {
            if let Some(chirp) = &parts.chirp {
                bounds.extend(chirp.kinks_s().iter().map(|kink| pulse.offset_s + kink));
            }
            bounds.extend([pulse.offset_s, pulse.offset_s + pulse.length_s]);
            match &parts.pieces {
                Pieces::Constant(_) => {}
                Pieces::Held { starts_s, .. } => bounds.extend(starts_s.iter().map(|start| pulse.offset_s + start)),
                Pieces::Smooth { kinks_s } => bounds.extend(kinks_s.iter().map(|kink| pulse.offset_s + kink)),
            }
        }
        merge(&mut bounds, group.length_s);
        for pair in bounds.windows(2) {
            let (from, to) = (pair[0], pair[1]);
            let first = terms.len();
            let middle = 0.5 * (from + to);
            for (pulse, parts) in &made {
                if middle > pulse.offset_s && middle < pulse.offset_s + pulse.length_s {
                    terms.push(term(pulse, parts, from, middle, timeline));
                }
            }
            segments.push(Segment { start: group.start.after(from), length_s: to - from, terms: first..terms.len() });
        }
    }
    (segments, terms)
}

/// Which pulse of a timeline each term belongs to, in the order of [`cut`], whose segments these are.
pub fn owners(timeline: &Timeline, segments: &[Segment]) -> Vec<usize> {
    let mut owners = Vec::new();
    let mut groups = timeline.groups.iter().peekable();
    for segment in segments {
        while groups.peek().is_some_and(|group| segment.start.since(group.start) >= group.length_s) {
            groups.next();
        }
        let Some(group) = groups.peek() else { break };
        let middle = segment.start.since(group.start) + 0.5 * segment.length_s;
        owners.extend(group.pulses.clone().filter(|pulse| {
            let pulse = &timeline.pulses[*pulse];
            middle > pulse.offset_s && middle < pulse.offset_s + pulse.length_s
        }));
    }
    owners
}

/// Sorts boundaries and joins those that differ by rounding alone; 0 and the whole length stay exact.
fn merge(bounds: &mut Vec<f64>, length_s: f64) {
    bounds.sort_by(f64::total_cmp);
    let close = 16.0 * f64::EPSILON * length_s;
    bounds.dedup_by(|later, earlier| *later - *earlier <= close);
    if let Some(last) = bounds.last_mut() {
        *last = length_s;
    }
    if bounds.len() < 2 {
        *bounds = vec![0.0, length_s];
    }
}

fn term(pulse: &PlacedPulse, parts: &Arc<PulseParts>, from_s: f64, middle_s: f64, timeline: &Timeline) -> Term {
    let since_s = from_s - pulse.offset_s;
    let size = cis_turns(-pulse.phase_turns) * rad_s(parts.half_rabi_hz);
    let turns_hz = pulse.carrier.map_or(0.0, |carrier| timeline.carriers[carrier].centre_hz);
    let held = match &parts.pieces {
        Pieces::Constant(value) => Some(*value),
        Pieces::Held { starts_s, values } => {
            let index = starts_s.partition_point(|start| *start <= middle_s - pulse.offset_s).saturating_sub(1);
            Some(values[index])
        }
        Pieces::Smooth { .. } => None,
    };
    let envelope = match (held, &parts.signal) {
        (Some(value), _) => Envelope::Constant(size * value),
        (None, Some(signal)) => Envelope::Smooth { shape: signal.clone(), since_s, scale: size },
        (None, None) => Envelope::Constant(Default::default()),
    };
    let chirps = parts.chirp.iter().map(|chirp| Chirped { sweep: chirp.clone(), since_s, times: 1.0 }).collect();
    let turned = pulse.turned + Instant::at(since_s).turns(turns_hz);
    Term { matrix: pulse.drive, turns_hz, phase_turns: turned - turned.round(), envelope, chirps }
}

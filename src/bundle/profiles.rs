//! The shapes in time that all points share: the segments of one point's problem, each as a stretch of the problem without shapes.

use std::sync::Arc;

use num_complex::Complex64;

use super::sizes::{Frame, Slot};
use crate::problem::{Problem, Segment, Term};
use crate::propagate::lanes::Profile;
use crate::units::cis_turns;

/// The stretches, and what their channels are.
#[derive(Debug, Clone)]
pub(super) struct Profiles {
    /// Channels of all stretches: the term of the problem without shapes, and whether its factor is i.
    pub channels: Vec<(usize, bool)>,
    /// Stretches: which channels, and their profile.
    pub stretches: Vec<(Vec<usize>, Profile)>,
}

/// u of every slot of a segment at a moment (s from its start), over the size of its term.
struct Shapes {
    terms: Vec<(Term, Slot, Complex64)>,
}

impl Shapes {
    fn at(&self, tau_s: f64, slot: usize) -> Complex64 {
        let (term, turning, size) = &self.terms[slot];
        let value = term.slow(tau_s) / size;
        if turning.turns_hz == 0.0 {
            // its phase is in the size
            return value * cis_turns(-term.phase_turns);
        }
        value * cis_turns(-(term.phase_turns + term.turns_hz * tau_s))
    }
}

/// The profiles of `problem`, whose sizes without shapes are `sizes`; the reason, where there are none.
pub(super) fn profiles(problem: &Problem, frame: &Frame, sizes: &[Complex64]) -> Result<Profiles, String> {
    let mut found = Profiles { channels: Vec::new(), stretches: Vec::new() };
    let mut segments = problem.segments.iter().peekable();
    let mut first_term = 0;
    let mut end_s = 0.0;
    for (length_s, slots) in &frame.segments {
        end_s += length_s;
        let sizes = &sizes[first_term..first_term + slots.len()];
        let mut inside: Vec<&Segment> = Vec::new();
        while segments.peek().is_some_and(|segment| segment.start.seconds() + 0.5 * segment.length_s < end_s) {
            inside.extend(segments.next());
        }
        let mut held: Vec<(&Segment, Shapes)> = Vec::new();
        for segment in inside {
            let shapes = shapes(problem, segment, slots, sizes)?;
            let constant = shapes.terms.iter().all(|(term, ..)| term.is_constant() && term.turns_hz == 0.0);
            if constant {
                held.push((segment, shapes));
                continue;
            }
            found.held(&mut held, first_term);
            found.smooth(segment.length_s, shapes, first_term);
        }
        found.held(&mut held, first_term);
        first_term += slots.len();
    }
    if segments.peek().is_some() {
        return Err("its segments are not those of its pulses".to_string());
    }
    Ok(found)
}

/// The terms of a segment, one for each slot.
fn shapes(problem: &Problem, segment: &Segment, slots: &[Slot], sizes: &[Complex64]) -> Result<Shapes, String> {
    let terms = problem.terms_of(segment);
    let same = terms.len() == slots.len() && terms.iter().zip(slots).all(|(t, s)| t.matrix == s.matrix && t.turns_hz == s.turns_hz);
    if !same {
        return Err("its segments are not those of its pulses".to_string());
    }
    if terms.iter().any(|term| !term.chirps.is_empty()) {
        return Err("a carrier is swept".to_string());
    }
    if sizes.iter().any(|size| !(size.norm_sqr() > 0.0)) {
        return Err("a drive has no size where it was laid out".to_string());
    }
    let terms = terms.iter().zip(slots).zip(sizes).map(|((term, slot), size)| (term.clone(), slot.clone(), *size)).collect();
    Ok(Shapes { terms })
}

impl Profiles {
    /// The channel of a slot, by its number among all terms.
    fn channel(&mut self, term: usize, quarter: bool) -> usize {
        let wanted = (term, quarter);
        self.channels.iter().position(|channel| *channel == wanted).unwrap_or_else(|| {
            self.channels.push(wanted);
            self.channels.len() - 1
        })
    }

    /// Appends held segments as one stretch.
    fn held(&mut self, segments: &mut Vec<(&Segment, Shapes)>, first_term: usize) {
        let Some((_, shapes)) = segments.first() else { return };
        let slots = shapes.terms.len();
        let values: Vec<Vec<Complex64>> =
            segments.iter().map(|(_, shapes)| (0..slots).map(|slot| shapes.at(0.0, slot)).collect()).collect();
        let largest = |pick: fn(&Complex64) -> f64, slot: usize| values.iter().map(|row| pick(&row[slot]).abs()).fold(0.0, f64::max);
        let mut channels = Vec::new();
        let mut picked: Vec<(usize, bool)> = Vec::new();
        for slot in 0..slots {
            let (re, im) = (largest(|z| z.re, slot), largest(|z| z.im, slot));
            // what is left of a phase that cancels is rounding
            for (quarter, size, other) in [(false, re, im), (true, im, re)] {
                if size > 4.0 * f64::EPSILON * other {
                    channels.push(self.channel(first_term + slot, quarter));
                    picked.push((slot, quarter));
                }
            }
        }
        let mut bounds_s = vec![0.0];
        for (segment, _) in segments.iter() {
            bounds_s.push(bounds_s[bounds_s.len() - 1] + segment.length_s);
        }
        let pick = |row: &Vec<Complex64>| -> Vec<f64> {
            picked.iter().map(|(slot, quarter)| if *quarter { row[*slot].im } else { row[*slot].re }).collect()
        };
        self.stretches.push((channels, Profile::Held { bounds_s, values: values.iter().flat_map(pick).collect() }));
        segments.clear();
    }

    /// Appends a smooth segment as one stretch.
    fn smooth(&mut self, length_s: f64, shapes: Shapes, first_term: usize) {
        let mut picked: Vec<(usize, bool)> = Vec::new();
        let mut channels = Vec::new();
        for slot in 0..shapes.terms.len() {
            let probes: Vec<Complex64> = (0..33).map(|k| shapes.at(length_s * (f64::from(k) + 0.3) / 33.0, slot)).collect();
            let largest = |pick: fn(&Complex64) -> f64| probes.iter().map(|z| pick(z).abs()).fold(0.0, f64::max);
            let (re, im) = (largest(|z| z.re), largest(|z| z.im));
            for (quarter, size, other) in [(false, re, im), (true, im, re)] {
                if size > 4.0 * f64::EPSILON * other {
                    channels.push(self.channel(first_term + slot, quarter));
                    picked.push((slot, quarter));
                }
            }
        }
        let at = move |tau_s: f64, into: &mut [f64]| {
            for (u, (slot, quarter)) in into.iter_mut().zip(&picked) {
                let value = shapes.at(tau_s, *slot);
                *u = if *quarter { value.im } else { value.re };
            }
        };
        self.stretches.push((channels, Profile::Smooth { length_s, at: Arc::new(at) }));
    }
}

//! What samples of the envelopes say of a segment: how high each rises, how far it goes up and down, and how much of the time is busy.

use num_complex::Complex64;

use crate::problem::Term;

/// Samples of a segment, the ends included.
const CELLS: usize = 128;

/// Envelopes of one segment, by samples.
#[derive(Debug, Clone, Default)]
pub(super) struct Sampled {
    /// Largest |c| of each term, rad/s.
    pub heights: Vec<f64>,
    /// Largest way of any c, over its height.
    pub way: f64,
    /// Part of the segment, above 0 and up to 1, in which the smooth envelopes rise or fall; keeps a narrow pulse in a long segment
    /// from being stepped over.
    pub busy: f64,
    /// Largest |c| of any term over its height, at the samples; empty where nothing changes.
    course: Vec<f64>,
}

impl Sampled {
    /// Looks at the terms of a segment of `length_s`.
    pub fn of(terms: &[Term], length_s: f64) -> Self {
        let mut sampled = Sampled { heights: Vec::with_capacity(terms.len()), way: 0.0, busy: 1.0, course: Vec::new() };
        let mut constant = false;
        let mut values = [Complex64::default(); CELLS + 1];
        for term in terms {
            if term.is_constant() {
                sampled.heights.push(term.slow(0.0).norm());
                constant = true;
                continue;
            }
            for (i, value) in values.iter_mut().enumerate() {
                *value = term.slow(length_s * (i as f64 / CELLS as f64));
            }
            let most = values.iter().map(Complex64::norm_sqr).fold(0.0, f64::max).sqrt();
            sampled.heights.push(most);
            if most > 0.0 {
                sampled.course.resize(CELLS + 1, 0.0);
                for (course, value) in sampled.course.iter_mut().zip(&values) {
                    *course = course.max(value.norm_sqr().sqrt() / most);
                }
                let steps = values.windows(2).map(|pair| (pair[1] - pair[0]).norm_sqr());
                let (mut way, mut busy) = (0.0, 0);
                for step in steps {
                    way += step.sqrt();
                    busy += usize::from(step > 1e-6 * most * most);
                }
                sampled.way = sampled.way.max(way / most);
                if busy > 0 {
                    sampled.busy = sampled.busy.min(busy as f64 / CELLS as f64);
                }
            }
        }
        if constant {
            sampled.course.clear();
        }
        sampled
    }

    /// How long from the part `from` of the segment until the largest course so far times the part gone through is `reach`, as a part of it.
    pub fn reach(&self, from: f64, reach: f64) -> f64 {
        let cell = 1.0 / CELLS as f64;
        let mut most: f64 = 0.0;
        let mut at = (from / cell) as usize;
        while at < self.course.len() {
            most = most.max(self.course[at]);
            let part = at as f64 * cell - from;
            if most * part >= reach {
                return (reach / most).max(part - cell);
            }
            at += 1;
        }
        if self.course.is_empty() {
            reach
        } else {
            1.0 - from
        }
    }
}

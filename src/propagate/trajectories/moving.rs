//! Amplitudes between jumps where H or G changes: Runge-Kutta of Dormand and Prince, order 8(5,3) (coefficients and control as in
//! `../smooth.rs`), on i d(psi)/dt = (H - i G/2) psi. A step within which the norm falls to the threshold is taken anew, shorter,
//! until it ends there.

use num_complex::Complex64;

use super::super::dormand_prince::{ERROR_3, ERROR_5, NODES, STAGES, WEIGHTS};
use super::super::load::size_hz;
use super::super::picture::Picture;
use super::super::sampled::Sampled;
use super::leaving::Leaving;
use super::still::{crossing, norm};
use crate::problem::{Instant, Term};

const ZERO: Complex64 = Complex64::new(0.0, 0.0);

/// What changes, and how fast.
pub(super) struct Course<'a> {
    pub picture: &'a Picture,
    pub leaving: &'a Leaving,
    pub terms: &'a [Term],
    pub start: Instant,
    /// Longest step, s.
    pub cap_s: f64,
    /// A step to begin with, s.
    pub first_s: f64,
    /// Error of a step of h seconds over h, 1/s.
    pub error_per_s: f64,
    /// Share of the norm within which a threshold is met.
    pub tolerance: f64,
}

impl<'a> Course<'a> {
    pub fn new(
        picture: &'a Picture,
        leaving: &'a Leaving,
        terms: &'a [Term],
        (start, length_s): (Instant, f64),
        (error_per_s, tolerance): (f64, f64),
        pieces: u32,
    ) -> Course<'a> {
        let fastest = leaving.beating.iter().fold(picture.fastest_hz, |most, entry| most.max(entry.turns_hz.abs()));
        let sampled = Sampled::of(terms, length_s);
        let cap_s = (length_s * sampled.busy / (6.0 + 4.0 * f64::from(pieces))).min(1.0 / fastest);
        let rate = size_hz(picture, &sampled.heights) + fastest + leaving.diagonal.iter().fold(0.0, |most: f64, out| most.max(*out));
        let first_s = if rate > 0.0 { cap_s.min(0.05 / rate) } else { cap_s };
        Course { picture, leaving, terms, start, cap_s, first_s, error_per_s, tolerance }
    }

    /// `slope` = (-i H - G/2) `psi`.
    fn slope(&self, tau_s: f64, psi: &[Complex64], slope: &mut [Complex64]) {
        for (j, (out, psi)) in slope.iter_mut().zip(psi).enumerate() {
            *out = psi * Complex64::new(-0.5 * self.leaving.diagonal[j], -self.picture.diagonal[j]);
        }
        for turning in &self.picture.turnings {
            let factor = Picture::factor(turning, self.terms, tau_s);
            for part in &turning.parts {
                let entry = factor * part.value;
                slope[part.row] += Complex64::new(entry.im, -entry.re) * psi[part.column];
                slope[part.column] += Complex64::new(-entry.im, -entry.re) * psi[part.row];
            }
        }
        for entry in &self.leaving.beating {
            slope[entry.row] -= entry.at(self.start, tau_s) * 0.5 * psi[entry.column];
        }
    }
}

/// Scratch.
#[derive(Debug, Default)]
pub(super) struct Stages {
    slopes: Vec<Vec<Complex64>>,
    populations: Vec<Vec<f64>>,
    trial: Vec<Complex64>,
    next: Vec<Complex64>,
    /// The step at hand, kept over the whole segment.
    pub wish_s: f64,
    /// Steps taken.
    pub steps: u64,
}

impl Stages {
    fn fit(&mut self, n: usize) {
        if self.trial.len() != n {
            self.slopes = vec![vec![ZERO; n]; 12];
            self.populations = vec![vec![0.0; n]; 12];
            self.trial = vec![ZERO; n];
            self.next = vec![ZERO; n];
        }
    }

    /// Carries `psi` from `tau_s` on by `gap_s`, or until its norm squared falls to `threshold`; gives the time since `tau_s` in the
    /// latter case. Integrals of the populations over the norm are added to `spent`, where it is not empty, s.
    pub fn advance(
        &mut self,
        course: &Course,
        (from_s, gap_s): (f64, f64),
        psi: &mut [Complex64],
        threshold: f64,
        spent: &mut [f64],
    ) -> Option<f64> {
        self.fit(psi.len());
        let mut done_s = 0.0;
        let mut pending = Vec::new();
        while done_s < gap_s {
            let left_s = gap_s - done_s;
            let mut h = self.wish_s.min(course.cap_s);
            if h >= 0.999 * left_s || !(done_s + h > done_s) {
                h = left_s;
            }
            let error = self.step(course, from_s + done_s, h, psi);
            let allowed = course.error_per_s * h;
            let factor = (0.9 * (allowed / error).powf(1.0 / 7.0)).clamp(0.2, 5.0);
            if error > allowed && h > 1e-12 * gap_s {
                self.wish_s = h * factor;
                continue;
            }
            self.wish_s = if h < self.wish_s { self.wish_s.max(h * factor) } else { h * factor };
            let (first, last) = (norm(psi), norm(&self.next));
            let at = crossing(h, first, last, threshold, course.tolerance, |t| {
                self.step(course, from_s + done_s, t, psi);
                norm(&self.next)
            });
            let taken = at.unwrap_or(h);
            if taken != h {
                self.step(course, from_s + done_s, taken, psi);
            }
            self.steps += 1;
            if !spent.is_empty() {
                pending.clear();
                pending.extend(WEIGHTS.iter().map(|(stage, weight)| (*stage, weight * taken)));
                for (j, time) in spent.iter_mut().enumerate() {
                    *time += pending.iter().map(|(stage, weight)| weight * self.populations[*stage][j]).sum::<f64>();
                }
            }
            psi.copy_from_slice(&self.next);
            done_s += taken;
            if at.is_some() {
                return Some(done_s);
            }
            if error.is_nan() {
                return None;
            }
        }
        None
    }

    /// One step into `next`; gives the estimated error.
    fn step(&mut self, course: &Course, tau_s: f64, h: f64, psi: &[Complex64]) -> f64 {
        for stage in 0..12 {
            self.trial.copy_from_slice(psi);
            for (earlier, weight) in STAGES[stage] {
                let scale = h * weight;
                self.trial.iter_mut().zip(&self.slopes[*earlier]).for_each(|(out, slope)| *out += slope * scale);
            }
            course.slope(tau_s + NODES[stage] * h, &self.trial, &mut self.slopes[stage]);
            let whole = norm(&self.trial);
            self.populations[stage].iter_mut().zip(&self.trial).for_each(|(population, z)| *population = z.norm_sqr() / whole);
        }
        self.next.copy_from_slice(psi);
        for (stage, weight) in WEIGHTS {
            let scale = h * weight;
            self.next.iter_mut().zip(&self.slopes[*stage]).for_each(|(out, slope)| *out += slope * scale);
        }
        let (mut five, mut three) = (0.0, 0.0);
        for j in 0..psi.len() {
            let sum = |weights: &[(usize, f64)]| weights.iter().map(|(stage, weight)| self.slopes[*stage][j] * *weight).sum::<Complex64>();
            five += sum(ERROR_5).norm_sqr();
            three += sum(ERROR_3).norm_sqr();
        }
        if five == 0.0 {
            0.0
        } else {
            h * five / (five + 0.01 * three).sqrt()
        }
    }
}

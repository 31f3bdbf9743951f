//! Runge-Kutta of Dormand and Prince, order 8(5,3), on i d(phi)/dt = H phi in the picture with nothing on the diagonal.
//!
//! E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary Differential Equations I, second edition, Springer (1993), section II.5
//! (coefficients in `dormand_prince.rs`). Amplitudes without dimension, tau in s, H in rad/s; H is applied entry by entry, the
//! entries that turn alike sharing one factor.
//!
//! The estimated error of a step of h seconds is held below tolerance h / T, T the time over which H changes, so that the errors
//! of all steps add up to about the tolerance (in fact to far less: the estimates are of order 5 and 3). The sum of steps is compensated (W. Kahan, Communications of the ACM 8, 40 (1965)). Integrals of
//! populations over time are further components of the same steps. Measured floor: 1e-15 (1 + coupling times time in rad).

use num_complex::Complex64;

use super::dormand_prince::{ERROR_3, ERROR_5, NODES, STAGES, WEIGHTS};
use super::picture::{turns, Picture};
use super::run::{Eye, Fineness, State, Stretch, Work};
use crate::problem::Term;
use crate::units::cis_turns;

/// Scratch of the method, kept over the whole run.
pub(super) struct Smooth {
    dim: usize,
    timed: bool,
    /// How long H changes altogether, s.
    changing_s: f64,
    /// Slopes of the stages, d(phi)/dt.
    slopes: Vec<Vec<Complex64>>,
    /// Populations of the first column at the stages; empty unless time spent is wanted.
    populations: Vec<Vec<f64>>,
    trial: Vec<Complex64>,
    next: Vec<Complex64>,
    /// What the compensated sum has not yet carried over.
    lost: Vec<Complex64>,
    envelopes: Vec<Complex64>,
    /// Of each group of entries: its phase at the start of the step, what it turns by up to each stage, its factor at the stage at hand.
    phases: Vec<Complex64>,
    turned: Vec<Complex64>,
    factors: Vec<Complex64>,
    /// The step for which `turned` was made, s.
    turned_for_s: f64,
}

impl Smooth {
    pub fn new(dim: usize, size: usize, timed: bool, changing_s: f64) -> Self {
        let zero = || vec![Complex64::default(); size];
        Smooth {
            dim,
            timed,
            changing_s,
            slopes: (0..12).map(|_| zero()).collect(),
            populations: (0..12).map(|_| vec![0.0; if timed { dim } else { 0 }]).collect(),
            trial: zero(),
            next: zero(),
            lost: zero(),
            envelopes: Vec::new(),
            phases: Vec::new(),
            turned: Vec::new(),
            factors: Vec::new(),
            turned_for_s: f64::NAN,
        }
    }

    /// Carries the state through the stretch.
    pub fn pass(&mut self, stretch: &Stretch, fineness: &Fineness, state: &mut State, eye: &mut Eye, work: &mut Work) {
        let dim = self.dim;
        let (picture, length_s) = (stretch.picture, stretch.length_s);
        let multiplications = 2 * picture.turnings.iter().map(|turning| turning.parts.len()).sum::<usize>() + 10 * picture.turnings.len();
        let columns = (state.amplitudes.len() / dim) as u64;
        // No step may pass over a whole turn of H or much of an envelope, whatever the error estimate says there.
        let busy = stretch.sampled.busy;
        let cap_s = (length_s * busy / (6.0 + 4.0 * f64::from(fineness.pieces))).min(1.0 / picture.fastest_hz);
        let rate = super::load::size_hz(picture, &stretch.sampled.heights) + picture.fastest_hz;
        let mut wish_s = if rate > 0.0 { cap_s.min(0.05 / rate) } else { cap_s };
        let mut tau_s = 0.0;
        self.lost.fill(Complex64::default());
        self.turned_for_s = f64::NAN;
        self.restart(picture, stretch.terms, 0.0, state);
        for k in 0..=stretch.moments.len() {
            let stop_s = stretch.moments.get(k).map_or(length_s, |moment| moment.offset_s.min(length_s));
            let most_s = cap_s.min((stop_s - tau_s) / f64::from(fineness.pieces));
            while tau_s < stop_s && !work.exhausted() {
                let left_s = stop_s - tau_s;
                let mut nominal_s = wish_s.min(most_s);
                let mut h = nominal_s;
                let mut to_s = tau_s + h;
                if h >= 0.999 * left_s || to_s <= tau_s {
                    (nominal_s, h, to_s) = (left_s, left_s, stop_s);
                } else if h > 0.5 * left_s {
                    to_s = tau_s + 0.5 * left_s;
                    h = to_s - tau_s;
                    nominal_s = h;
                } else {
                    // The step that the clock really makes, or its rounding would add up.
                    h = to_s - tau_s;
                }
                if nominal_s != self.turned_for_s {
                    self.turn(picture, nominal_s);
                }
                let error = self.step(picture, stretch.terms, tau_s, h, state);
                work.step(12 * columns, multiplications);
                if error.is_nan() {
                    work.left = -1.0;
                    break;
                }
                let allowed = fineness.tolerance * (h / self.changing_s);
                let factor = (0.9 * (allowed / error).powf(1.0 / 7.0)).clamp(0.2, 5.0);
                if error > allowed && h > 1e-12 * length_s {
                    wish_s = h * factor;
                    continue;
                }
                // Small changes are not worth the new phases of every stage that they need.
                let factor = if (1.0..1.2).contains(&factor) { 1.0 } else { factor };
                wish_s = if nominal_s < wish_s.min(most_s) { wish_s.max(nominal_s * factor) } else { nominal_s * factor };
                wish_s = wish_s.min(cap_s);
                self.accept(h, state);
                tau_s = to_s;
                self.restart(picture, stretch.terms, tau_s, state);
            }
            if k < stretch.moments.len() {
                eye.see(stretch, k, &state.amplitudes[..dim], &state.time_in_s);
            }
        }
        for (amplitude, lost) in state.amplitudes.iter_mut().zip(&self.lost) {
            *amplitude -= lost;
        }
    }

    /// Slope at the start of a step, and the phases that its stages begin from.
    fn restart(&mut self, picture: &Picture, terms: &[Term], tau_s: f64, state: &State) {
        self.phases.clear();
        self.phases.extend(picture.turnings.iter().map(|turning| {
            let turned = turns(turning.turns_hz, tau_s);
            cis_turns(-turning.term.map_or(turned, |k| terms[k].phase_turns + turned))
        }));
        self.factors_at(picture, terms, tau_s, None);
        derivative(picture, &self.factors, self.dim, &state.amplitudes, &mut self.slopes[0]);
    }

    /// What each group turns by up to each stage of a step of `h` seconds.
    fn turn(&mut self, picture: &Picture, h: f64) {
        self.turned.clear();
        for node in NODES {
            self.turned.extend(picture.turnings.iter().map(|turning| cis_turns(-turning.turns_hz * node * h)));
        }
        self.turned_for_s = h;
    }

    /// Factors of all groups at `tau_s`, the given stage of the step or its start.
    fn factors_at(&mut self, picture: &Picture, terms: &[Term], tau_s: f64, stage: Option<usize>) {
        self.envelopes.clear();
        self.envelopes.extend(terms.iter().map(|term| term.slow(tau_s)));
        self.factors.clear();
        let groups = picture.turnings.len();
        for (g, (turning, phase)) in picture.turnings.iter().zip(&self.phases).enumerate() {
            let phase = stage.map_or(*phase, |stage| phase * self.turned[stage * groups + g]);
            self.factors.push(turning.term.map_or(phase, |k| self.envelopes[k] * phase));
        }
    }

    /// Stages of one step; leaves the increment over h in `next` and gives the estimated error.
    fn step(&mut self, picture: &Picture, terms: &[Term], tau_s: f64, h: f64, state: &State) -> f64 {
        let dim = self.dim;
        for stage in 0..12 {
            if stage > 0 {
                self.trial.copy_from_slice(&state.amplitudes);
                for (earlier, weight) in STAGES[stage] {
                    let scale = h * weight;
                    for (out, slope) in self.trial.iter_mut().zip(&self.slopes[*earlier]) {
                        *out += slope * scale;
                    }
                }
                // The last two stages share their node.
                if NODES[stage] != NODES[stage - 1] {
                    self.factors_at(picture, terms, tau_s + NODES[stage] * h, Some(stage));
                }
                derivative(picture, &self.factors, dim, &self.trial, &mut self.slopes[stage]);
            }
            if self.timed {
                let psi = if stage > 0 { &self.trial } else { &state.amplitudes };
                for (population, amplitude) in self.populations[stage].iter_mut().zip(psi) {
                    *population = amplitude.norm_sqr();
                }
            }
        }
        self.next.fill(Complex64::default());
        for (stage, weight) in WEIGHTS {
            for (out, slope) in self.next.iter_mut().zip(&self.slopes[*stage]) {
                *out += slope * *weight;
            }
        }
        let mut worst = 0.0;
        for column in 0..self.next.len() / dim {
            let (mut five, mut three) = (0.0, 0.0);
            for j in column * dim..(column + 1) * dim {
                five += estimate(ERROR_5, |stage| self.slopes[stage][j]).norm_sqr();
                three += estimate(ERROR_3, |stage| self.slopes[stage][j]).norm_sqr();
            }
            worst = larger(worst, h * blend(five, three));
        }
        if self.timed {
            let (mut five, mut three) = (0.0, 0.0);
            for j in 0..dim {
                five += estimate(ERROR_5, |stage| Complex64::new(self.populations[stage][j], 0.0)).norm_sqr();
                three += estimate(ERROR_3, |stage| Complex64::new(self.populations[stage][j], 0.0)).norm_sqr();
            }
            worst = larger(worst, h / self.changing_s * blend(five, three));
        }
        worst
    }

    /// Adds the increment to the state (compensated) and to the times spent.
    fn accept(&mut self, h: f64, state: &mut State) {
        for ((amplitude, slope), lost) in state.amplitudes.iter_mut().zip(&self.next).zip(&mut self.lost) {
            let increment = slope * h - *lost;
            let sum = *amplitude + increment;
            *lost = (sum - *amplitude) - increment;
            *amplitude = sum;
        }
        if self.timed {
            for (j, time) in state.time_in_s.iter_mut().enumerate() {
                *time += h * WEIGHTS.iter().map(|(stage, weight)| weight * self.populations[*stage][j]).sum::<f64>();
            }
        }
    }
}

/// The larger of two, or what is not a number.
fn larger(a: f64, b: f64) -> f64 {
    if b > a || b.is_nan() {
        b
    } else {
        a
    }
}

fn estimate(weights: &[(usize, f64)], slope: impl Fn(usize) -> Complex64) -> Complex64 {
    weights.iter().map(|(stage, weight)| slope(*stage) * *weight).sum()
}

/// Joins the squared estimates of order 5 and 3 as in the source.
fn blend(five: f64, three: f64) -> f64 {
    if five == 0.0 {
        0.0
    } else {
        five / (five + 0.01 * three).sqrt()
    }
}

/// `slopes` = -i H `columns`, H with these factors of its groups of entries.
fn derivative(picture: &Picture, factors: &[Complex64], dim: usize, columns: &[Complex64], slopes: &mut [Complex64]) {
    for (slope, psi) in slopes.chunks_exact_mut(dim).zip(columns.chunks_exact(dim)) {
        for ((out, amplitude), rest) in slope.iter_mut().zip(psi).zip(&picture.diagonal) {
            *out = Complex64::new(amplitude.im * rest, -amplitude.re * rest);
        }
    }
    for (turning, factor) in picture.turnings.iter().zip(factors) {
        for part in &turning.parts {
            let entry = factor * part.value;
            let (forth, back) = (Complex64::new(entry.im, -entry.re), Complex64::new(-entry.im, -entry.re));
            for (slope, psi) in slopes.chunks_exact_mut(dim).zip(columns.chunks_exact(dim)) {
                slope[part.row] += forth * psi[part.column];
                slope[part.column] += back * psi[part.row];
            }
        }
    }
}

//! Runge-Kutta of Dormand and Prince, order 8(5,3), on d(x)/dt = G(t) x; coefficients and control as for amplitudes
//! (`../smooth.rs`, `../dormand_prince.rs`; E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary Differential Equations I, second
//! edition, Springer (1993), section II.5).
//!
//! The estimated error of a step of h seconds, a Frobenius norm, is held below tolerance h / T, T the time over which G changes.
//! The sum of steps is compensated, so that the trace is kept to rounding however many there are. Explicit: steps stay shorter
//! than about six lifetimes of the fastest decay.

use super::super::dormand_prince::{ERROR_3, ERROR_5, NODES, STAGES, WEIGHTS};
use super::super::run::{Fineness, Work};
use super::super::sampled::Sampled;
use super::load::rate_hz;
use super::run::{Columns, Eye, Stretch};

/// Scratch of the method, kept over the whole run.
pub(super) struct Smooth {
    size: usize,
    changing_s: f64,
    slopes: Vec<Vec<f64>>,
    trial: Vec<f64>,
    next: Vec<f64>,
    /// What the compensated sum has not yet carried over.
    lost: Vec<f64>,
    values: Vec<f64>,
}

impl Smooth {
    pub fn new(size: usize, length: usize, changing_s: f64) -> Smooth {
        let zero = || vec![0.0; length];
        Smooth {
            size,
            changing_s,
            slopes: (0..12).map(|_| zero()).collect(),
            trial: zero(),
            next: zero(),
            lost: zero(),
            values: Vec::new(),
        }
    }

    /// Carries the columns through the stretch.
    pub fn pass(&mut self, stretch: &Stretch, fineness: &Fineness, columns: &mut Columns, eye: &mut Eye, work: &mut Work) {
        let length_s = stretch.length_s;
        let count = (columns.x.len() / columns.size) as u64;
        let fastest_hz = stretch.generator.fastest_hz;
        // No step may pass over a whole turn of G or much of an envelope, whatever the error estimate says there.
        let busy = Sampled::of(stretch.terms, length_s).busy;
        let cap_s = (length_s * busy / (6.0 + 4.0 * f64::from(fineness.pieces))).min(1.0 / fastest_hz);
        let rate = rate_hz(stretch) + fastest_hz;
        let mut wish_s = if rate > 0.0 { cap_s.min(0.05 / rate) } else { cap_s };
        let mut tau_s = 0.0;
        self.lost.fill(0.0);
        self.slope(stretch, 0.0, 0, &columns.x);
        for k in 0..=stretch.moments.len() {
            let stop_s = stretch.moments.get(k).map_or(length_s, |moment| moment.offset_s.min(length_s));
            let most_s = cap_s.min((stop_s - tau_s) / f64::from(fineness.pieces));
            while tau_s < stop_s && !work.exhausted() {
                let left_s = stop_s - tau_s;
                let mut h = wish_s.min(most_s);
                let mut to_s = tau_s + h;
                if h >= 0.999 * left_s || to_s <= tau_s {
                    (h, to_s) = (left_s, stop_s);
                } else {
                    if h > 0.5 * left_s {
                        to_s = tau_s + 0.5 * left_s;
                    }
                    // The step that the clock really makes, or its rounding would add up.
                    h = to_s - tau_s;
                }
                let error = self.step(stretch, tau_s, h, &columns.x);
                work.step(12 * count, 2 * stretch.generator.entries());
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
                wish_s = if h < wish_s.min(most_s) { wish_s.max(h * factor) } else { h * factor }.min(cap_s);
                self.accept(h, &mut columns.x);
                tau_s = to_s;
                self.slope(stretch, tau_s, 0, &columns.x);
            }
            if k < stretch.moments.len() {
                eye.see(stretch, k, &columns.x);
            }
        }
        columns.x.iter_mut().zip(&self.lost).for_each(|(x, lost)| *x -= lost);
    }

    fn slope(&mut self, stretch: &Stretch, tau_s: f64, stage: usize, x: &[f64]) {
        stretch.generator.at(stretch.terms, stretch.start, tau_s, &mut self.values);
        stretch.generator.act(&self.values, x, &mut self.slopes[stage]);
    }

    /// Stages of one step; leaves the increment over h in `next` and gives the estimated error.
    fn step(&mut self, stretch: &Stretch, tau_s: f64, h: f64, x: &[f64]) -> f64 {
        for stage in 1..12 {
            self.trial.copy_from_slice(x);
            for (earlier, weight) in STAGES[stage] {
                let scale = h * weight;
                self.trial.iter_mut().zip(&self.slopes[*earlier]).for_each(|(out, slope)| *out += slope * scale);
            }
            // The last two stages share their node.
            if NODES[stage] != NODES[stage - 1] {
                stretch.generator.at(stretch.terms, stretch.start, tau_s + NODES[stage] * h, &mut self.values);
            }
            stretch.generator.act(&self.values, &self.trial, &mut self.slopes[stage]);
        }
        self.next.fill(0.0);
        for (stage, weight) in WEIGHTS {
            self.next.iter_mut().zip(&self.slopes[*stage]).for_each(|(out, slope)| *out += slope * weight);
        }
        let mut worst = 0.0;
        for column in 0..self.next.len() / self.size {
            let (mut five, mut three) = (0.0, 0.0);
            for j in column * self.size..(column + 1) * self.size {
                let sum = |weights: &[(usize, f64)]| weights.iter().map(|(stage, weight)| self.slopes[*stage][j] * weight).sum::<f64>();
                five += sum(ERROR_5).powi(2);
                three += sum(ERROR_3).powi(2);
            }
            // the two estimates joined as in the source
            let error = if five == 0.0 { 0.0 } else { h * five / (five + 0.01 * three).sqrt() };
            worst = if error > worst || error.is_nan() { error } else { worst };
        }
        worst
    }

    /// Adds the increment (W. Kahan, Communications of the ACM 8, 40 (1965)).
    fn accept(&mut self, h: f64, x: &mut [f64]) {
        for ((x, slope), lost) in x.iter_mut().zip(&self.next).zip(&mut self.lost) {
            let increment = slope * h - *lost;
            let sum = *x + increment;
            *lost = (sum - *x) - increment;
            *x = sum;
        }
    }
}

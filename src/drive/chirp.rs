//! The phase of a chirp: the integral of the instantaneous frequency less its centre, in turns, since the start of the pulse.
//!
//! The integrand is expanded in Chebyshev polynomials on pieces that are halved until the last coefficients vanish; the
//! integral is then a polynomial too (C. W. Clenshaw and A. R. Curtis, Numerische Mathematik 2, 197 (1960)).

use crate::config::tape::BoundFormula;
use crate::problem::Sweep;
use crate::units::sin_cos_turns;

/// Coefficients per piece.
const ORDER: usize = 16;
/// Most pieces; a formula that needs more is integrated as far as they reach.
const MOST: usize = 4096;

/// The integral of a chirp.
#[derive(Debug)]
pub struct Chirp {
    formula: BoundFormula,
    centre_hz: f64,
    kinks_s: Vec<f64>,
    pieces: Vec<Piece>,
}

#[derive(Debug)]
struct Piece {
    start_s: f64,
    half_s: f64,
    before_turns: f64,
    integral: [f64; ORDER + 1],
}

impl Chirp {
    /// Times at which the sweep has a kink, s.
    pub fn kinks_s(&self) -> &[f64] {
        &self.kinks_s
    }

    /// The chirp of `instantaneous` (Hz) about `centre_hz`, from 0 to `length_s`.
    pub fn new(instantaneous: BoundFormula, centre_hz: f64, length_s: f64) -> Chirp {
        let kinks_s = instantaneous.kinks_s(length_s);
        let bounds: Vec<f64> = std::iter::once(0.0).chain(kinks_s.iter().copied()).chain([length_s]).collect();
        let mut chirp = Chirp { formula: instantaneous, centre_hz, kinks_s, pieces: Vec::new() };
        let mut waiting: Vec<(f64, f64, u32)> = bounds.windows(2).rev().map(|pair| (pair[0], pair[1], 0)).collect();
        let mut turns = 0.0;
        while let Some((from, to, depth)) = waiting.pop() {
            let coefficients = chirp.expand(from, to);
            let size = coefficients.iter().fold(0.0f64, |m, c| m.max(c.abs())) * (to - from);
            let tail = coefficients[ORDER - 3..].iter().fold(0.0f64, |m, c| m.max(c.abs())) * (to - from);
            if tail > 1e-15 * size.max(1.0) && depth < 30 && chirp.pieces.len() + waiting.len() < MOST {
                let middle = 0.5 * (from + to);
                waiting.push((middle, to, depth + 1));
                waiting.push((from, middle, depth + 1));
                continue;
            }
            let piece = Piece { start_s: from, half_s: 0.5 * (to - from), before_turns: turns, integral: integrate(&coefficients) };
            turns += piece.at(1.0);
            chirp.pieces.push(piece);
        }
        chirp
    }

    fn frequency_hz(&self, t_s: f64) -> f64 {
        self.formula.at(t_s) - self.centre_hz
    }

    fn expand(&self, from: f64, to: f64) -> [f64; ORDER] {
        let (middle, half) = (0.5 * (from + to), 0.5 * (to - from));
        // Chebyshev points of the first kind at (k + 1/2)/(2 ORDER) of a turn
        let angle = |k: usize| (k as f64 + 0.5) / (2 * ORDER) as f64;
        let values: [f64; ORDER] = std::array::from_fn(|k| self.frequency_hz(middle + half * sin_cos_turns(angle(k)).1));
        std::array::from_fn(|n| {
            let sum: f64 = (0..ORDER).map(|k| values[k] * sin_cos_turns(n as f64 * angle(k)).1).sum();
            sum * if n == 0 { 1.0 } else { 2.0 } / ORDER as f64
        })
    }
}

impl Sweep for Chirp {
    fn turns(&self, t_s: f64) -> f64 {
        let index = self.pieces.partition_point(|piece| piece.start_s <= t_s).saturating_sub(1);
        self.pieces
            .get(index)
            .map_or(0.0, |piece| piece.before_turns + piece.at(((t_s - piece.start_s) / piece.half_s - 1.0).clamp(-1.0, 1.0)))
    }

    fn offset_hz(&self, t_s: f64) -> f64 {
        self.frequency_hz(t_s)
    }
}

/// Coefficients of the integral from -1, in units of half the piece.
fn integrate(c: &[f64; ORDER]) -> [f64; ORDER + 1] {
    let at = |n: usize| c.get(n).copied().unwrap_or(0.0);
    let mut integral = [0.0; ORDER + 1];
    for (n, coefficient) in integral.iter_mut().enumerate().skip(1) {
        let before = if n == 1 { 2.0 * at(0) } else { at(n - 1) };
        *coefficient = (before - at(n + 1)) / (2 * n) as f64;
    }
    integral[0] = -(1..=ORDER).map(|n| if n % 2 == 0 { integral[n] } else { -integral[n] }).sum::<f64>();
    integral
}

impl Piece {
    /// The integral at x in [-1, 1], turns, by Clenshaw's recurrence.
    fn at(&self, x: f64) -> f64 {
        let (mut b1, mut b2) = (0.0, 0.0);
        for c in self.integral[1..].iter().rev() {
            (b1, b2) = (c + 2.0 * x * b1 - b2, b1);
        }
        (self.integral[0] + x * b1 - b2) * self.half_s
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::config::place::Place;
    use crate::config::tape::{Entry, Formula, One, Tape, Two};

    /// tanh chirp: the integral of s tanh((t - c)/w) is s w ln cosh((t - c)/w), closed form.
    #[test]
    fn exact_tanh_chirp() {
        let mut tape = Tape::default();
        let here = Place::default();
        let t = tape.push(Entry::Time, here);
        let c = tape.push(Entry::Constant(3e-6), here);
        let w = tape.push(Entry::Constant(0.3e-6), here);
        let s = tape.push(Entry::Constant(3.1e6), here);
        let u = tape.push(Entry::Two(Two::Subtract, t, c), here);
        let u = tape.push(Entry::Two(Two::Divide, u, w), here);
        let u = tape.push(Entry::One(One::Tanh, u), here);
        let result = tape.push(Entry::Two(Two::Multiply, s, u), here);
        let formula = Formula { tape, result, place: here };
        let chirp = Chirp::new(formula.bind(&[]), 0.0, 6e-6);
        let closed = |t: f64| 3.1e6 * 0.3e-6 * (((t - 3e-6) / 0.3e-6f64).cosh().ln() - 10f64.cosh().ln());
        for k in 0..=60 {
            let t = f64::from(k) * 1e-7;
            assert!((chirp.turns(t) - closed(t)).abs() < 5e-14, "{t}: {} {}", chirp.turns(t), closed(t));
        }
    }
}

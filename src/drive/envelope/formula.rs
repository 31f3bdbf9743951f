//! An envelope typed as a formula of t. Its area and largest value are found numerically, its slope by dual numbers.

use std::sync::{Arc, OnceLock};

use super::{Curve, Pieces};
use crate::config::tape::BoundFormula;
use crate::quadrature;

/// A formula with its numbers filled in, over a length.
#[derive(Debug)]
pub struct FormulaCurve {
    formula: BoundFormula,
    length_s: f64,
    kinks_s: Arc<[f64]>,
    area_s: OnceLock<f64>,
    largest: OnceLock<f64>,
}

/// Halvings after which an interval is taken as it is; a jump inside the formula then costs 2^-40 of the length.
const DEEPEST: u32 = 40;

impl FormulaCurve {
    /// The curve of `formula` from 0 to `length_s`.
    pub fn new(formula: BoundFormula, length_s: f64) -> FormulaCurve {
        let kinks_s = formula.kinks_s(length_s).into();
        FormulaCurve { formula, length_s, kinks_s, area_s: OnceLock::new(), largest: OnceLock::new() }
    }

    /// A time in the pulse without a finite value, if one of a fine grid has none.
    pub fn gap_s(&self) -> Option<f64> {
        (0..=256).map(|k| self.length_s * f64::from(k) / 256.0).find(|t| !self.formula.at(*t).is_finite())
    }
}

/// Integral by Gauss's rule, halved until both halves agree with the whole to 1e-14 of the largest part.
pub(crate) fn adaptive(from: f64, to: f64, f: &dyn Fn(f64) -> f64) -> f64 {
    fn part(from: f64, to: f64, whole: f64, scale: f64, depth: u32, f: &dyn Fn(f64) -> f64) -> f64 {
        let middle = 0.5 * (from + to);
        let (left, right) = (quadrature::integral(from, middle, f), quadrature::integral(middle, to, f));
        let scale = scale.max(left.abs()).max(right.abs());
        if depth == 0 || (left + right - whole).abs() <= 1e-14 * scale {
            return left + right;
        }
        part(from, middle, left, scale, depth - 1, f) + part(middle, to, right, scale, depth - 1, f)
    }
    let whole = quadrature::integral(from, to, f);
    let size = quadrature::integral(from, to, |t| f(t).abs());
    if !size.is_finite() {
        return f64::NAN;
    }
    part(from, to, whole, size, DEEPEST, f)
}

impl Curve for FormulaCurve {
    fn at(&self, t_s: f64) -> f64 {
        self.formula.at(t_s)
    }

    fn slope(&self, t_s: f64) -> f64 {
        self.formula.slope(t_s)
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        *self.area_s.get_or_init(|| {
            let bounds: Vec<f64> = std::iter::once(0.0).chain(self.kinks_s.iter().copied()).chain([self.length_s]).collect();
            bounds.windows(2).map(|pair| adaptive(pair[0], pair[1], &|t| self.formula.at(t))).sum()
        })
    }

    fn largest(&self) -> f64 {
        *self.largest.get_or_init(|| {
            const GRID: u32 = 512;
            let step = self.length_s / f64::from(GRID);
            let size = |t: f64| self.formula.at(t.clamp(0.0, self.length_s)).abs();
            let best = (0..=GRID).map(|k| f64::from(k) * step).max_by(|a, b| size(*a).total_cmp(&size(*b))).unwrap_or(0.0);
            // golden section in the two steps around the best point of the grid (J. Kiefer, Proc. AMS 4, 502 (1953))
            let shrink = (5f64.sqrt() - 1.0) / 2.0;
            let (mut low, mut high) = (best - step, best + step);
            for _ in 0..60 {
                let (a, b) = (high - shrink * (high - low), low + shrink * (high - low));
                if size(a) < size(b) {
                    low = a;
                } else {
                    high = b;
                }
            }
            size(best).max(size(0.5 * (low + high)))
        })
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: self.kinks_s.clone() }
    }
}

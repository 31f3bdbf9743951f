//! The sum of v_k sinc(x - k) with x = t/step and sinc(y) = sin(pi y)/(pi y), sample k at k steps, the last one at the end,
//! nothing outside the list (C. E. Shannon, Proceedings of the IRE 37, 10 (1949)).
//!
//! With m the nearest sample and d = x - m, sin(pi (x - k)) = (-1)^(k - m) sin(pi d): one sine serves the whole sum, and only
//! the nearest term can be 0/0, where sinc has its series. A value costs one division per sample.

use std::sync::{Arc, OnceLock};

use super::{Curve, Pieces};
use crate::quadrature::integral;
use crate::units::{sin_cos_turns, RAD_PER_TURN};

const PI: f64 = 0.5 * RAD_PER_TURN;

/// Places per step at which the largest value is looked for.
const PLACES: usize = 8;

/// `values[k]` at `k * length_s / (n - 1)`, n at least two.
#[derive(Debug)]
pub(super) struct BandLimited {
    values: Arc<[f64]>,
    length_s: f64,
    step_s: f64,
    area_s: f64,
    /// Found when it is first asked for: the search takes 8 n values of n terms each.
    largest: OnceLock<f64>,
}

impl BandLimited {
    pub(super) fn new(values: Arc<[f64]>, length_s: f64) -> Self {
        let step_s = length_s / (values.len() - 1) as f64;
        let area_s = step_s * area(&values);
        BandLimited { values, length_s, step_s, area_s, largest: OnceLock::new() }
    }

    /// Nearest sample m and x - m.
    fn nearest(&self, x: f64) -> (usize, f64) {
        let m = x.round().clamp(0.0, (self.values.len() - 1) as f64);
        (m as usize, x - m)
    }

    /// The terms but for the nearest one: sums of (-1)^(k - m) v_k / (x - k) and of the same over (x - k)^2.
    fn others(&self, m: usize, d: f64) -> (f64, f64) {
        let (mut first, mut second) = (0.0, 0.0);
        let mut add = |value: &f64, distance: f64, sign: f64| {
            let inverse = sign / distance;
            first += value * inverse;
            second += value * inverse / distance;
        };
        let mut sign = -1.0;
        for (j, value) in self.values[m + 1..].iter().enumerate() {
            add(value, d - (j + 1) as f64, sign);
            sign = -sign;
        }
        sign = -1.0;
        for (j, value) in self.values[..m].iter().rev().enumerate() {
            add(value, d + (j + 1) as f64, sign);
            sign = -sign;
        }
        (first, second)
    }

    /// The value at x = t/step.
    fn value(&self, x: f64) -> f64 {
        let (m, d) = self.nearest(x);
        let (sin, _) = sin_cos_turns(0.5 * d);
        self.values[m] * sinc(d) + sin / PI * self.others(m, d).0
    }

    /// The derivative with respect to x = t/step.
    fn derivative(&self, x: f64) -> f64 {
        let (m, d) = self.nearest(x);
        let (sin, cos) = sin_cos_turns(0.5 * d);
        let (first, second) = self.others(m, d);
        self.values[m] * sinc_slope(d) + cos * first - sin / PI * second
    }

    /// The largest modulus. On the whole line it cannot fall faster from its peak than cos(pi d) does, d in steps (R. J. Duffin and
    /// A. C. Schaeffer, Bulletin of the American Mathematical Society 44, 236 (1938), cited from memory), so one of the places
    /// next to it has 0.98 of its size. Every place above 0.9 is refined by halving the interval in which the slope changes sign.
    fn search(&self) -> f64 {
        let last = (self.values.len() - 1) * PLACES;
        let place = |i: usize| i as f64 / PLACES as f64;
        let sizes: Vec<f64> = (0..=last).map(|i| self.value(place(i)).abs()).collect();
        let coarse = sizes.iter().fold(0.0f64, |largest, size| size.max(largest));
        let mut largest = coarse;
        for i in 0..=last {
            let (before, after) = (i.saturating_sub(1), (i + 1).min(last));
            if sizes[i] > 0.9 * coarse && sizes[i] >= sizes[before] && sizes[i] >= sizes[after] {
                largest = largest.max(self.refine(place(before), place(after)));
            }
        }
        largest
    }

    /// The modulus at the extremum between `low` and `high`, or at an end where there is none.
    fn refine(&self, mut low: f64, mut high: f64) -> f64 {
        let sign = self.derivative(low).signum();
        if sign * self.derivative(high) >= 0.0 {
            return self.value(low).abs().max(self.value(high).abs());
        }
        // The value is flat at its peak: 30 halvings of a quarter step leave 1e-19 of it.
        for _ in 0..30 {
            let middle = 0.5 * (low + high);
            if sign * self.derivative(middle) > 0.0 {
                low = middle;
            } else {
                high = middle;
            }
        }
        self.value(0.5 * (low + high)).abs()
    }
}

/// sin(pi y)/(pi y).
fn sinc(y: f64) -> f64 {
    if y == 0.0 {
        return 1.0;
    }
    sin_cos_turns(0.5 * y).0 / (PI * y)
}

/// d sinc/dy = (cos(pi y) - sinc(y))/y; near 0 by its series -pi sum of (-1)^n z^(2n+1) (2n+2)/(2n+3)!, z = pi y, in which
/// nothing cancels.
fn sinc_slope(y: f64) -> f64 {
    if y.abs() > 0.25 {
        return (sin_cos_turns(0.5 * y).1 - sinc(y)) / y;
    }
    let z = PI * y;
    let mut term = z / 3.0;
    let mut sum = term;
    for n in 1..9 {
        let n = n as f64;
        // The ratio of (2n+2)/(2n+3)! to its predecessor 2n/(2n+1)!.
        term *= -z * z / (2.0 * n * (2.0 * n + 3.0));
        sum += term;
    }
    -PI * sum
}

/// Integral from 0 to n - 1, in steps: sample k sees sinc from -k to n - 1 - k, that is S(k) + S(n - 1 - k) with S(j) the
/// integral from 0 to j, summed from stretches of one step (a Gauss rule with 20 points is exact to rounding on each).
fn area(values: &[f64]) -> f64 {
    let mut from_zero = vec![0.0];
    let mut sum = 0.0;
    for j in 1..values.len() {
        sum += integral((j - 1) as f64, j as f64, sinc);
        from_zero.push(sum);
    }
    values.iter().zip(from_zero.iter().zip(from_zero.iter().rev())).map(|(value, (left, right))| value * (left + right)).sum()
}

impl Curve for BandLimited {
    fn at(&self, t_s: f64) -> f64 {
        self.value(t_s / self.step_s)
    }

    fn slope(&self, t_s: f64) -> f64 {
        self.derivative(t_s / self.step_s) / self.step_s
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        self.area_s
    }

    fn largest(&self) -> f64 {
        *self.largest.get_or_init(|| self.search())
    }

    fn pieces(&self) -> Pieces {
        Pieces::Smooth { kinks_s: Arc::from([]) }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// The sum as it is defined, term by term.
    fn plain(values: &[f64], x: f64) -> f64 {
        let term = |(k, value): (usize, &f64)| {
            let z = std::f64::consts::PI * (x - k as f64);
            value * if z == 0.0 { 1.0 } else { z.sin() / z }
        };
        values.iter().enumerate().map(term).sum()
    }

    proptest! {
        /// Against the plain sum anywhere, and through the samples, from either side of 0/0.
        #[test]
        fn prop_the_plain_sum(values in proptest::collection::vec(-1.0..1.0f64, 2..40), share in 0.0..1.0f64) {
            let steps = (values.len() - 1) as f64;
            let curve = BandLimited::new(Arc::from(values.as_slice()), steps);
            let t = share * steps;
            prop_assert!((curve.at(t) - plain(&values, t)).abs() < 2e-14);
            for (k, value) in values.iter().enumerate() {
                for aside in [0.0, 1e-300, 1e-17, -1e-13, 1e-13] {
                    let t = (k as f64 + aside).clamp(0.0, steps);
                    prop_assert!((curve.at(t) - value).abs() < 2e-12);
                    prop_assert!(curve.slope(t).is_finite());
                }
                prop_assert_eq!(curve.at(k as f64), *value);
            }
        }
    }

    /// sinc(1/2) = 2/pi and its slope -4/pi; near 0 the slope is -pi^2 y/3; both forms meet where they change over.
    #[test]
    fn exact_sinc() {
        let pi = std::f64::consts::PI;
        assert!((sinc(0.5) - 2.0 / pi).abs() < 2e-16);
        assert!((sinc_slope(0.5) + 4.0 / pi).abs() < 5e-16);
        assert!((sinc_slope(1e-9) / (-pi * pi / 3.0 * 1e-9) - 1.0).abs() < 1e-15);
        assert!((sinc_slope(0.25) - sinc_slope(0.25 + 1e-15)).abs() < 1e-14);
        assert_eq!((sinc(0.0), sinc_slope(0.0)), (1.0, 0.0));
    }

    /// The sine integral: from 0 to n pi, over pi, for n = 1 and 2 (SciPy, scipy.special.sici; also M. Abramowitz and I. A. Stegun,
    /// Handbook of Mathematical Functions (1964), table 5.1): a list 1, 0, .. has that area.
    #[test]
    fn ref_sine_integral() {
        for (values, want) in [(vec![1.0, 0.0], SI_PI), (vec![1.0, 0.0, 0.0], SI_2_PI)] {
            let got = area(&values);
            assert!((got - want / std::f64::consts::PI).abs() < 4e-16, "{got}");
        }
    }
    const SI_PI: f64 = 1.8519370519824658;
    const SI_2_PI: f64 = 1.4181515761326284;
}

//! Taylor numbers: a value with its first derivatives, for exact derivatives of formulas that a user typed.
//!
//! A number holds the coefficients a_k = f^(k)(x)/k! of its expansion about one x. Sums and products are those of truncated power
//! series; a function g of one is found from the differential equation that g obeys, coefficient by coefficient (R. E. Moore,
//! Interval Analysis (1966), chapter 11; the recurrences are those of power series, D. E. Knuth, The Art of Computer Programming 2,
//! section 4.7). Angles are in turns. Errors: rounding, a few units of the last place for each order.
//!
//! Where a function has a kink (abs, min, max, floor) the branch of the value is taken; at a point where it has no derivative
//! (sqrt of 0, log of 0) the coefficients are not finite.

use super::tape::{One, Real, Two};
use crate::units::{sin_cos_turns, RAD_PER_TURN};

/// The coefficients f^(k)/k! for k below N.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Taylor<const N: usize>(pub [f64; N]);

impl<const N: usize> Taylor<N> {
    /// The variable itself at `x`.
    pub fn variable(x: f64) -> Self {
        let mut coefficients = [0.0; N];
        coefficients[0] = x;
        if N > 1 {
            coefficients[1] = 1.0;
        }
        Taylor(coefficients)
    }

    /// The derivative of order `k`, in the unit of the value over that of the variable to the k.
    pub fn derivative(&self, k: usize) -> f64 {
        (1..=k).fold(self.0[k], |value, factor| value * factor as f64)
    }

    /// Whether all but the value vanish.
    fn is_constant(&self) -> bool {
        self.0[1..].iter().all(|a| *a == 0.0)
    }

    fn map(mut self, f: impl Fn(f64) -> f64) -> Self {
        self.0.iter_mut().for_each(|a| *a = f(*a));
        self
    }

    fn join(mut self, other: Self, f: impl Fn(f64, f64) -> f64) -> Self {
        self.0.iter_mut().zip(other.0).for_each(|(a, b)| *a = f(*a, b));
        self
    }

    /// Product.
    pub fn times(self, other: Self) -> Self {
        Taylor(std::array::from_fn(|k| (0..=k).map(|j| self.0[j] * other.0[k - j]).sum()))
    }

    /// Quotient: c_k b_0 = a_k - sum over j from 1 of b_j c_(k-j).
    pub fn over(self, other: Self) -> Self {
        let mut out = [0.0; N];
        for k in 0..N {
            let rest: f64 = (1..=k).map(|j| other.0[j] * out[k - j]).sum();
            out[k] = (self.0[k] - rest) / other.0[0];
        }
        Taylor(out)
    }

    /// The g with value `value` and g' = `slope` a', a this number; `slope` may read the coefficients of g found so far.
    fn chain(self, value: f64, slope: impl Fn(&[f64; N], usize) -> f64) -> Self {
        let mut out = [0.0; N];
        let mut slopes = [0.0; N];
        out[0] = value;
        for k in 1..N {
            slopes[k - 1] = slope(&out, k - 1);
            let sum: f64 = (1..=k).map(|j| j as f64 * self.0[j] * slopes[k - j]).sum();
            out[k] = sum / k as f64;
        }
        Taylor(out)
    }

    /// The number whose value is `value` and whose derivative is `slope` times that of this one.
    fn with_slope(self, value: f64, slope: Self) -> Self {
        self.chain(value, |_, k| slope.0[k])
    }

    fn exp(self) -> Self {
        self.chain(self.0[0].exp(), |g, k| g[k])
    }

    /// Sine and cosine of an angle in turns, or hyperbolic ones of a plain number: s' = f c a', c' = sign f s a'.
    fn pair(self, sin: f64, cos: f64, factor: f64, sign: f64) -> (Self, Self) {
        let (mut s, mut c) = ([0.0; N], [0.0; N]);
        (s[0], c[0]) = (sin, cos);
        for k in 1..N {
            let sum = |of: &[f64; N]| (1..=k).map(|j| j as f64 * self.0[j] * of[k - j]).sum::<f64>() * factor / k as f64;
            (s[k], c[k]) = (sum(&c), sign * sum(&s));
        }
        (Taylor(s), Taylor(c))
    }

    /// t' = f (1 + sign t^2) a': tangent and hyperbolic tangent.
    fn tangent(self, value: f64, factor: f64, sign: f64) -> Self {
        self.chain(value, |t, k| {
            let square: f64 = (0..=k).map(|j| t[j] * t[k - j]).sum();
            factor * (sign * square + if k == 0 { 1.0 } else { 0.0 })
        })
    }

    fn squared_with(self, constant: f64, sign: f64) -> Self {
        let mut out = self.times(self).map(|a| sign * a);
        out.0[0] += constant;
        out
    }

    /// A constant power: k a_0 c_k = sum over j from 1 of (p j - k + j) a_j c_(k-j).
    fn real_power(self, exponent: f64) -> Self {
        let mut out = [0.0; N];
        out[0] = self.0[0].two(Two::Power, exponent);
        for k in 1..N {
            let sum: f64 = (1..=k).map(|j| (exponent * j as f64 - (k - j) as f64) * self.0[j] * out[k - j]).sum();
            out[k] = sum / (k as f64 * self.0[0]);
        }
        Taylor(out)
    }

    fn power(self, exponent: f64) -> Self {
        if self.is_constant() {
            return Self::constant(self.0[0].two(Two::Power, exponent));
        }
        if exponent != exponent.trunc() || exponent.abs() >= 64.0 {
            return self.real_power(exponent);
        }
        // whole powers by products, which hold at 0 too
        let (mut left, mut square, mut out) = (exponent.abs() as u32, self, Self::constant(1.0));
        while left > 0 {
            if left & 1 == 1 {
                out = out.times(square);
            }
            square = square.times(square);
            left >>= 1;
        }
        if exponent < 0.0 {
            Self::constant(1.0).over(out)
        } else {
            out
        }
    }
}

impl<const N: usize> Real for Taylor<N> {
    fn constant(value: f64) -> Self {
        let mut coefficients = [0.0; N];
        coefficients[0] = value;
        Taylor(coefficients)
    }

    fn one(self, function: One) -> Self {
        let x = self.0[0];
        let value = x.one(function);
        if self.is_constant() {
            return Self::constant(value);
        }
        match function {
            One::Negative => self.map(|a| -a),
            One::Sqrt => self.real_power(0.5),
            One::Exp => self.exp(),
            One::Log => self.with_slope(value, Self::constant(1.0).over(self)),
            One::Log10 => self.with_slope(value, Self::constant(std::f64::consts::LOG10_E).over(self)),
            One::Sin | One::Cos => {
                let (sin, cos) = sin_cos_turns(x);
                let (sin, cos) = self.pair(sin, cos, RAD_PER_TURN, -1.0);
                if function == One::Sin {
                    sin
                } else {
                    cos
                }
            }
            One::Sinh => self.pair(x.sinh(), x.cosh(), 1.0, 1.0).0,
            One::Cosh => self.pair(x.sinh(), x.cosh(), 1.0, 1.0).1,
            One::Tan => self.tangent(value, RAD_PER_TURN, 1.0),
            One::Tanh => self.tangent(value, 1.0, -1.0),
            One::Asin => {
                let root = self.squared_with(1.0, -1.0).real_power(0.5);
                self.with_slope(value, Self::constant(1.0 / RAD_PER_TURN).over(root))
            }
            One::Acos => {
                let root = self.squared_with(1.0, -1.0).real_power(0.5);
                self.with_slope(value, Self::constant(-1.0 / RAD_PER_TURN).over(root))
            }
            One::Atan => self.with_slope(value, Self::constant(1.0 / RAD_PER_TURN).over(self.squared_with(1.0, 1.0))),
            One::Abs if x < 0.0 => self.map(|a| -a),
            One::Abs => self,
            One::Floor | One::Round => Self::constant(value),
        }
    }

    fn two(self, operation: Two, other: Self) -> Self {
        match operation {
            Two::Add => self.join(other, |a, b| a + b),
            Two::Subtract => self.join(other, |a, b| a - b),
            Two::Multiply => self.times(other),
            Two::Divide => self.over(other),
            Two::Power if other.is_constant() => self.power(other.0[0]),
            Two::Power => other.times(self.one(One::Log)).exp(),
            Two::Min if self.0[0] <= other.0[0] => self,
            Two::Max if self.0[0] >= other.0[0] => self,
            Two::Min | Two::Max => other,
            Two::Atan2 => {
                // d atan2(y, x) = (x dy - y dx)/(x^2 + y^2)
                let square = self.times(self).join(other.times(other), |a, b| a + b);
                let (over_y, over_x) = (other.over(square), self.over(square));
                let (a, b) = (self.with_slope(0.0, over_y), other.with_slope(0.0, over_x));
                let mut out = a.join(b, |a, b| (a - b) / RAD_PER_TURN);
                out.0[0] = self.0[0].two(Two::Atan2, other.0[0]);
                out
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const N: usize = 9;

    fn x(at: f64) -> Taylor<N> {
        Taylor::variable(at)
    }

    fn close(found: Taylor<N>, want: [f64; N], share: f64) {
        let largest = want.iter().fold(0.0f64, |m, w| m.max(w.abs()));
        for (k, (got, want)) in found.0.iter().zip(want).enumerate() {
            assert!((got - want).abs() <= share * largest, "coefficient {k}: {got} against {want}");
        }
    }

    /// exp(x) about 0.3: every derivative is exp(0.3).
    #[test]
    fn exact_exponential() {
        let mut want = [0.3f64.exp(); N];
        for k in 1..N {
            want[k] = want[k - 1] / k as f64;
        }
        close(x(0.3).one(One::Exp), want, 1e-15);
    }

    /// 1/(1 - x) about 0 has all coefficients 1; its square k + 1; its logarithm 1/k.
    #[test]
    fn exact_geometric_series_powers_and_logarithm() {
        let one = Taylor::<N>::constant(1.0);
        let down = one.two(Two::Subtract, x(0.0));
        close(one.two(Two::Divide, down), [1.0; N], 1e-15);
        close(down.power(-2.0), std::array::from_fn(|k| (k + 1) as f64), 1e-15);
        close(down.one(One::Log), std::array::from_fn(|k| if k == 0 { 0.0 } else { -1.0 / k as f64 }), 1e-15);
        // (1 - x)^(1/2): 1, -1/2, -1/8, -1/16, -5/128, -7/256, -21/1024, -33/2048, -429/32768
        let root = [1.0, -0.5, -0.125, -0.0625, -5.0 / 128.0, -7.0 / 256.0, -21.0 / 1024.0, -33.0 / 2048.0, -429.0 / 32768.0];
        close(down.one(One::Sqrt), root, 1e-15);
    }

    /// Laws that join the functions: sin^2 + cos^2, tan = sin/cos, cosh^2 - sinh^2, inverses.
    #[test]
    fn prop_functions_fit_each_other() {
        // turns, scaled so that the coefficients of sine and cosine stay below 1
        let a = x(0.7).times(x(0.7)).two(Two::Add, x(0.7)).map(|a| a * 0.1);
        let (sin, cos) = (a.one(One::Sin), a.one(One::Cos));
        close(sin.times(sin).two(Two::Add, cos.times(cos)), Taylor::<N>::constant(1.0).0, 1e-15);
        close(a.one(One::Tan), sin.over(cos).0, 1e-14);
        let (sinh, cosh) = (a.one(One::Sinh), a.one(One::Cosh));
        close(a.one(One::Tanh), sinh.over(cosh).0, 1e-14);
        close(a.one(One::Tan).one(One::Atan), a.0, 1e-13);
        close(sin.one(One::Asin), a.0, 1e-13);
        close(cos.one(One::Acos), a.0, 1e-13);
        close(sin.two(Two::Atan2, cos), a.0, 1e-13);
        close(a.two(Two::Power, a), a.one(One::Log).times(a).one(One::Exp).0, 1e-14);
        close(a.one(One::Log10).map(|a| a * std::f64::consts::LN_10), a.one(One::Log).0, 1e-14);
    }

    /// x^4 at 0: only the fourth coefficient; abs and min take the branch of the value.
    #[test]
    fn exact_whole_powers_hold_at_zero() {
        let four = x(0.0).two(Two::Power, Taylor::constant(4.0));
        close(four, std::array::from_fn(|k| f64::from(u8::from(k == 4))), 0.0);
        assert_eq!(four.derivative(4), 24.0);
        assert_eq!(x(-2.0).one(One::Abs).0[1], -1.0);
        assert_eq!(x(-2.0).two(Two::Min, Taylor::constant(0.0)).0[1], 1.0);
    }
}

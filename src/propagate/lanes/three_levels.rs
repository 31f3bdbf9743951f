//! Three levels, eight points at a time: columns carried by exp(-i K) over many steps.
//!
//! Comes in: A and C_k of each point without their trace (rad/s), and steps with weights (s, see `steps`). Columns (states, or columns of
//! the propagator) are carried in place; the phase of the trace is not in them.
//!
//! K = a1 where a step is bare (H constant in it: exact), else the Magnus expansion of order 6 in the integrals of H, with
//! {x, y} = -i (x y - y x): c1 = {a1, a2}, c2 = -{a1, 2 a3 + c1}/60, K = a1 + a3/12 + {-20 a1 - a3 + c1, a2 + c2}/240 (S. Blanes, F. Casas,
//! J. A. Oteo, J. Ros, Physics Reports 470, 151 (2009), section 5.4).
//!
//! K has no trace, so K^3 = s K + d with s = Tr K^2/2 and d = det K (Cayley and Hamilton), and exp(-i K) = p + q K + r K^2 with p, q, r
//! summed from the powers of K: no eigenvalues, so nothing to divide by where they meet. The first power left out is below 1e-17; where K is
//! large it is halved first and the propagator of the step squared as often (C. Moler, C. Van Loan, SIAM Review 45, 3 (2003), method 3).

use super::lane::{Eight, Kernel, Lane, Simd};
use super::steps::Weights;

/// A Hermitian matrix without trace: the diagonal, then real and imaginary parts of (0, 1), (1, 2) and (0, 2).
pub(crate) type Nine = [Eight; 9];

/// Three complex numbers: real and imaginary part of each.
pub(crate) type Column = [Eight; 6];

/// One group of eight points.
#[derive(Debug)]
pub(crate) struct ThreeLevels<'a, W> {
    /// A.
    pub statics: &'a Nine,
    /// C of each channel.
    pub channels: &'a [Nine],
    /// The steps.
    pub steps: W,
    /// Whether H is constant in every step, so that only the first weights count.
    pub bare: bool,
    /// Whether A is diagonal and the C have entries (0, 1) and (1, 2) alone.
    pub ladder: bool,
    /// Largest modulus of an eigenvalue of K in any step and point, or more.
    pub largest: f64,
    /// What is carried.
    pub columns: &'a mut [Column],
}

/// Largest |K| that the longest series takes.
const SERIES_END: f64 = 1.0;

impl<W: Weights> Kernel for ThreeLevels<'_, W> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        // |K|^(n + 1)/(n + 1)! is 1e-17 at these limits
        match self.largest {
            k if k < 0.054 => self.of_terms::<S, 8>(simd, 0),
            k if k < 0.28 => self.of_terms::<S, 12>(simd, 0),
            k => {
                let halvings = if k > SERIES_END { (k / SERIES_END).log2().ceil() } else { 0.0 };
                self.of_terms::<S, 18>(simd, halvings as u32);
            }
        }
    }
}

// Below, all arithmetic stands in functions that are always inlined and in plain loops: a closure or a `map` that the compiler leaves as a
// call is compiled without the instructions of the caller, and the kernel becomes ten times slower.

/// A complex number in lanes: real and imaginary part.
type Complex<V> = [V; 2];

/// A Hermitian matrix in lanes.
#[derive(Clone, Copy)]
struct Hermitian<V> {
    d: [V; 3],
    /// (0, 1), (1, 2), (0, 2).
    o: [Complex<V>; 3],
}

/// Nine complex entries, row by row.
type Square<V> = [[Complex<V>; 3]; 3];

impl<W: Weights> ThreeLevels<'_, W> {
    #[inline(always)]
    fn of_terms<S: Simd, const TERMS: usize>(self, simd: S, halvings: u32) {
        match (self.ladder, self.bare) {
            (true, true) => self.all_steps::<S, TERMS, true, true>(simd, halvings),
            (true, false) => self.all_steps::<S, TERMS, false, true>(simd, halvings),
            (false, true) => self.all_steps::<S, TERMS, true, false>(simd, halvings),
            (false, false) => self.all_steps::<S, TERMS, false, false>(simd, halvings),
        }
    }

    #[inline(always)]
    fn all_steps<S: Simd, const TERMS: usize, const BARE: bool, const LADDER: bool>(self, simd: S, halvings: u32) {
        let factor = simd.splat(0.5f64.powi(halvings as i32));
        for step in 0..self.steps.count() {
            let mut k = self.exponent::<S, BARE, LADDER>(simd, step);
            if halvings > 0 {
                k = Hermitian::zero(simd).plus(factor, &k);
            }
            let mut u = exponential::<S, TERMS>(simd, &k);
            for _ in 0..halvings {
                u = square(&u);
            }
            for column in self.columns.iter_mut() {
                let psi = load(simd, column);
                for row in 0..3 {
                    let [re, im] = row_times(&u[row], &psi);
                    re.store(&mut column[2 * row]);
                    im.store(&mut column[2 * row + 1]);
                }
            }
        }
    }

    /// K of a step.
    #[inline(always)]
    fn exponent<S: Simd, const BARE: bool, const LADDER: bool>(&self, simd: S, step: usize) -> Hermitian<S::V> {
        let h = self.steps.length(simd, step);
        let mut a = [Hermitian::zero(simd); 3];
        for j in 0..3 {
            a[0].d[j] = h * simd.load(&self.statics[j]);
            if !LADDER {
                a[0].o[j] = [h * simd.load(&self.statics[3 + 2 * j]), h * simd.load(&self.statics[4 + 2 * j])];
            }
        }
        for channel in 0..self.channels.len() {
            let c = &self.channels[channel];
            for order in 0..if BARE { 1 } else { 3 } {
                let weight = self.steps.weight(simd, step, channel, order);
                for j in 0..if LADDER { 2 } else { 3 } {
                    if !LADDER {
                        a[order].d[j] = a[order].d[j].plus(weight, simd.load(&c[j]));
                    }
                    a[order].o[j][0] = a[order].o[j][0].plus(weight, simd.load(&c[3 + 2 * j]));
                    a[order].o[j][1] = a[order].o[j][1].plus(weight, simd.load(&c[4 + 2 * j]));
                }
            }
        }
        if BARE {
            a[0]
        } else {
            magnus::<S, LADDER>(simd, &a)
        }
    }
}

impl<V: Lane> Hermitian<V> {
    #[inline(always)]
    fn zero<S: Simd<V = V>>(simd: S) -> Self {
        let zero = simd.splat(0.0);
        Hermitian { d: [zero; 3], o: [[zero; 2]; 3] }
    }

    /// self + factor other.
    #[inline(always)]
    fn plus(&self, factor: V, other: &Self) -> Self {
        let mut sum = *self;
        for j in 0..3 {
            sum.d[j] = sum.d[j].plus(factor, other.d[j]);
            sum.o[j][0] = sum.o[j][0].plus(factor, other.o[j][0]);
            sum.o[j][1] = sum.o[j][1].plus(factor, other.o[j][1]);
        }
        sum
    }
}

/// x y, added to `to`.
#[inline(always)]
fn plus_product<V: Lane>(to: Complex<V>, x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [to[0].plus(x[0], y[0]).minus(x[1], y[1]), to[1].plus(x[0], y[1]).plus(x[1], y[0])]
}

/// x y, taken from `from`.
#[inline(always)]
fn minus_product<V: Lane>(from: Complex<V>, x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [from[0].minus(x[0], y[0]).plus(x[1], y[1]), from[1].minus(x[0], y[1]).minus(x[1], y[0])]
}

/// x conj(y), added to `to`.
#[inline(always)]
fn plus_conjugate<V: Lane>(to: Complex<V>, x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [to[0].plus(x[0], y[0]).plus(x[1], y[1]), to[1].plus(x[1], y[0]).minus(x[0], y[1])]
}

/// x conj(y), taken from `from`.
#[inline(always)]
fn minus_conjugate<V: Lane>(from: Complex<V>, x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [from[0].minus(x[0], y[0]).minus(x[1], y[1]), from[1].minus(x[1], y[0]).plus(x[0], y[1])]
}

/// x y.
#[inline(always)]
fn product<V: Lane>(x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [(x[0] * y[0]).minus(x[1], y[1]), (x[0] * y[1]).plus(x[1], y[0])]
}

/// x conj(y).
#[inline(always)]
fn conjugate_product<V: Lane>(x: Complex<V>, y: Complex<V>) -> Complex<V> {
    [(x[0] * y[0]).plus(x[1], y[1]), (x[1] * y[0]).minus(x[0], y[1])]
}

/// |x|^2.
#[inline(always)]
fn size<V: Lane>(x: Complex<V>) -> V {
    (x[0] * x[0]).plus(x[1], x[1])
}

/// -i x.
#[inline(always)]
fn turned<V: Lane>(x: Complex<V>) -> Complex<V> {
    [x[1], -x[0]]
}

/// Twice the imaginary part of x conj(y).
#[inline(always)]
fn across<V: Lane>(x: Complex<V>, y: Complex<V>) -> V {
    let half = (x[1] * y[0]).minus(x[0], y[1]);
    half + half
}

/// K of a step.
#[inline(always)]
fn magnus<S: Simd, const LADDER: bool>(simd: S, a: &[Hermitian<S::V>; 3]) -> Hermitian<S::V> {
    let c1 = bracket::<S::V, LADDER, LADDER>(&a[0], &a[1]);
    let c2 = bracket::<S::V, LADDER, false>(&a[0], &c1.plus(simd.splat(2.0), &a[2]));
    let left = c1.plus(simd.splat(-20.0), &a[0]).plus(simd.splat(-1.0), &a[2]);
    let right = a[1].plus(simd.splat(-1.0 / 60.0), &c2);
    let last = bracket::<S::V, false, false>(&left, &right);
    a[0].plus(simd.splat(1.0 / 12.0), &a[2]).plus(simd.splat(1.0 / 240.0), &last)
}

/// -i (x y - y x). `LX`: x has no (0, 2). `LY`: y has neither (0, 2) nor a diagonal.
///
/// Entry (j, k) is -i times (x_jj - x_kk) y_jk - (y_jj - y_kk) x_jk and what goes through the third level.
#[inline(always)]
fn bracket<V: Lane, const LX: bool, const LY: bool>(x: &Hermitian<V>, y: &Hermitian<V>) -> Hermitian<V> {
    let ([x01, x12, x02], [y01, y12, y02]) = (x.o, y.o);
    let (g01, g12) = (x.d[0] - x.d[1], x.d[1] - x.d[2]);
    let mut e01 = [g01 * y01[0], g01 * y01[1]];
    let mut e12 = [g12 * y12[0], g12 * y12[1]];
    let mut e02 = minus_product(product(x01, y12), y01, x12);
    if !LX {
        e01 = plus_conjugate(e01, x02, y12);
        e12 = minus_conjugate(e12, x02, y01);
    }
    if !LY {
        let (f01, f12, g02) = (y.d[0] - y.d[1], y.d[1] - y.d[2], x.d[0] - x.d[2]);
        e01 = minus_conjugate([e01[0].minus(f01, x01[0]), e01[1].minus(f01, x01[1])], y02, x12);
        e12 = plus_conjugate([e12[0].minus(f12, x12[0]), e12[1].minus(f12, x12[1])], y02, x01);
        e02 = [e02[0].plus(g02, y02[0]), e02[1].plus(g02, y02[1])];
        if !LX {
            let f02 = y.d[0] - y.d[2];
            e02 = [e02[0].minus(f02, x02[0]), e02[1].minus(f02, x02[1])];
        }
    }
    let (t01, t12) = (across(x01, y01), across(x12, y12));
    let mut d = [t01, t12 - t01, -t12];
    if !LX && !LY {
        let t02 = across(x02, y02);
        d = [t01 + t02, d[1], d[2] - t02];
    }
    Hermitian { d, o: [turned(e01), turned(e12), turned(e02)] }
}

/// exp(-i K).
#[inline(always)]
fn exponential<S: Simd, const TERMS: usize>(simd: S, k: &Hermitian<S::V>) -> Square<S::V> {
    let ([k01, k12, k02], [d0, d1, d2]) = (k.o, k.d);
    let (n01, n12, n02) = (size(k01), size(k12), size(k02));
    // K^2, whose off-diagonal entries are short for lack of a trace: d_j + d_k = -d_l
    let (q01, q12, q02) = (conjugate_product(k02, k12), conjugate_product(k02, k01), product(k01, k12));
    let q01 = [q01[0].minus(d2, k01[0]), q01[1].minus(d2, k01[1])];
    let q12 = [q12[0].minus(d0, k12[0]), q12[1].minus(d0, k12[1])];
    let q02 = [q02[0].minus(d1, k02[0]), q02[1].minus(d1, k02[1])];
    let (q0, q1, q2) = ((n01 + n02).plus(d0, d0), (n01 + n12).plus(d1, d1), (n12 + n02).plus(d2, d2));
    let s = (q0 + q1 + q2) * simd.splat(0.5);
    // the adjugate of K is K^2 - s, so the determinant is row 0 of K times its column 0
    let det = (d0 * (q0 - s)).plus(k01[0], q01[0]).plus(k01[1], q01[1]).plus(k02[0], q02[0]).plus(k02[1], q02[1]);
    let [p, q, r] = coefficients::<S, TERMS>(simd, s, det);
    let (u01, u10) = above_and_below(q, r, k01, q01);
    let (u12, u21) = above_and_below(q, r, k12, q12);
    let (u02, u20) = above_and_below(q, r, k02, q02);
    [[on_diagonal(p, q, r, d0, q0), u01, u02], [u10, on_diagonal(p, q, r, d1, q1), u12], [u20, u21, on_diagonal(p, q, r, d2, q2)]]
}

/// p + q d + r e of real d and e.
#[inline(always)]
fn on_diagonal<V: Lane>(p: Complex<V>, q: Complex<V>, r: Complex<V>, d: V, e: V) -> Complex<V> {
    [p[0].plus(q[0], d).plus(r[0], e), p[1].plus(q[1], d).plus(r[1], e)]
}

/// q k + r e, and the same with k and e conjugated.
#[inline(always)]
fn above_and_below<V: Lane>(q: Complex<V>, r: Complex<V>, k: Complex<V>, e: Complex<V>) -> (Complex<V>, Complex<V>) {
    let (a, b) = ((q[0] * k[0]).plus(r[0], e[0]), (q[1] * k[1]).plus(r[1], e[1]));
    let (c, f) = ((q[0] * k[1]).plus(r[0], e[1]), (q[1] * k[0]).plus(r[1], e[0]));
    ([a - b, f + c], [a + b, f - c])
}

/// p, q, r of exp(-i K) = p + q K + r K^2 (real and imaginary parts), K^3 = s K + d: Horner's rule for the real part (even powers) and the
/// imaginary one (odd powers), each in (p, q, r) times K^2.
#[inline(always)]
fn coefficients<S: Simd, const TERMS: usize>(simd: S, s: S::V, d: S::V) -> [Complex<S::V>; 3] {
    let zero = simd.splat(0.0);
    let (mut even, mut odd) = ([zero; 3], [zero; 3]);
    for half in (0..=TERMS / 2).rev() {
        // (p, q, r) K^2 = (q d, r d + q s, p + r s)
        even = [even[1] * d, (even[2] * d).plus(even[1], s), even[0].plus(even[2], s)];
        odd = [odd[1] * d, (odd[2] * d).plus(odd[1], s), odd[0].plus(odd[2], s)];
        let sign = if half % 2 == 0 { 1.0 } else { -1.0 };
        even[0] = even[0] + simd.splat(sign * RECIPROCAL_FACTORIALS[2 * half]);
        if half < TERMS / 2 {
            odd[0] = odd[0] + simd.splat(-sign * RECIPROCAL_FACTORIALS[2 * half + 1]);
        }
    }
    // the odd part has one K more: (p, q, r) K = (r d, p + r s, q)
    let odd = [odd[2] * d, odd[0].plus(odd[2], s), odd[1]];
    [[even[0], odd[0]], [even[1], odd[1]], [even[2], odd[2]]]
}

#[inline(always)]
fn load<S: Simd>(simd: S, column: &Column) -> [Complex<S::V>; 3] {
    [
        [simd.load(&column[0]), simd.load(&column[1])],
        [simd.load(&column[2]), simd.load(&column[3])],
        [simd.load(&column[4]), simd.load(&column[5])],
    ]
}

/// A row times a column.
#[inline(always)]
fn row_times<V: Lane>(row: &[Complex<V>; 3], column: &[Complex<V>; 3]) -> Complex<V> {
    plus_product(plus_product(product(row[0], column[0]), row[1], column[1]), row[2], column[2])
}

/// u u.
#[inline(always)]
fn square<V: Lane>(u: &Square<V>) -> Square<V> {
    let mut out = *u;
    for row in 0..3 {
        for column in 0..3 {
            out[row][column] = row_times(&u[row], &[u[0][column], u[1][column], u[2][column]]);
        }
    }
    out
}

/// 1/n!.
const RECIPROCAL_FACTORIALS: [f64; 19] = reciprocal_factorials();

const fn reciprocal_factorials() -> [f64; 19] {
    let mut all = [1.0; 19];
    let (mut n, mut factorial) = (1, 1.0);
    while n < 19 {
        factorial *= n as f64;
        all[n] = 1.0 / factorial;
        n += 1;
    }
    all
}

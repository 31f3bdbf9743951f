//! Slices of constant H, eight sets of controls side by side: the propagator forwards, and backwards the gradient by every control.
//!
//! With A = h H of a slice of length h (traces taken off; rad) and U = exp(-i A), forwards F <- U F. Backwards a Hermitian matrix N, the
//! derivative of the goal by H at a moment (see [`crate::propagate::gradient`]), is carried from the end of the slice to its start,
//! N0 = U+ N1 U, and its mean over the slice, W, gives the derivative by a control C: h Tr(C W).
//!
//! U = cos A - i sin A, both as polynomials of A^2: all their factors are Hermitian and commute, so that products need their upper
//! halves alone. W by two-point Taylor quadrature, with z N = -i [A, N] the derivative along the slice,
//! W = sum_j c_j z^j (N0 + (-1)^j N1), c_j = binomial(k, j+1) / (binomial(2k, j+1) (j+1)!), j < k (N. Obreschkoff, Abhandlungen der
//! Preussischen Akademie der Wissenschaften, Nr. 4 (1940)); error (k!)^2/((2k)! (2k+1)!) s^2k, s the largest distance of
//! eigenvalues of A. Slices with s too large are carried in 2^n equal parts.
//!
//! | s up to | highest power in U | its error | k | error of W |
//! |---|---|---|---|---|
//! | 0.25 | 9 | 2e-15 | 4 | 6e-13 |
//! | 0.8 | 13 | 1e-15 | 6 | 1e-14 |
//!
//! (each over the largest entry; the limits are never all met at once). N levels, rad/s and s.

use super::lane::{Eight, Kernel, Lane, Simd};

/// N x N complex numbers: row, column, real and imaginary part.
pub(crate) type Square<const N: usize> = [[[Eight; 2]; N]; N];

/// A number of a Hermitian matrix in its upper half: row, column, 0 for the real and 1 for the imaginary part, and its value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Part {
    pub row: usize,
    pub column: usize,
    pub which: usize,
    pub value: f64,
}

/// What the slices are made of.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Slices<'a> {
    /// A, rad/s, without trace.
    pub statics: &'a [Part],
    /// The controls, without trace.
    pub controls: &'a [Vec<Part>],
    /// Lengths, s.
    pub lengths_s: &'a [f64],
    /// Controls of each slice, one slice after the other, rad/s.
    pub samples: &'a [Eight],
    /// Each slice is carried in 2^halvings parts.
    pub halvings: u32,
    /// Whether the parts are so short that the shorter series serve.
    pub short: bool,
}

/// Largest distance of eigenvalues of A for the shorter series, and for the longer ones.
pub(crate) const SPREADS: [f64; 2] = [0.25, 0.8];

/// Forwards through all slices.
pub(crate) struct Forwards<'a, const N: usize> {
    pub slices: Slices<'a>,
    /// U of one part of each slice.
    pub parts: &'a mut [Square<N>],
    /// The propagator of all.
    pub whole: &'a mut Square<N>,
}

/// Backwards through all slices.
pub(crate) struct Backwards<'a, const N: usize> {
    pub slices: Slices<'a>,
    /// What [`Forwards`] left.
    pub parts: &'a [Square<N>],
    /// N at the end.
    pub end: &'a Square<N>,
    /// Derivatives by the controls, in the order of the samples, s.
    pub by_samples: &'a mut [Eight],
}

impl<const N: usize> Kernel for Forwards<'_, N> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        let zero = [[[simd.splat(0.0); 2]; N]; N];
        let (mut a, mut u, mut whole, mut next) = (zero, zero, zero, zero);
        let mut room = [zero; 5];
        for i in 0..N {
            whole[i][i][0] = simd.splat(1.0);
        }
        for slice in 0..self.slices.lengths_s.len() {
            self.slices.exponent(simd, slice, &mut a);
            if self.slices.short {
                short_exponential(simd, &a, &mut room, &mut u);
            } else {
                long_exponential(simd, &a, &mut room, &mut u);
            }
            store(&u, &mut self.parts[slice]);
            for _ in 0..self.slices.halvings {
                product(&u, &u, &mut next);
                u = next;
            }
            product(&u, &whole, &mut next);
            whole = next;
        }
        store(&whole, self.whole);
    }
}

impl<const N: usize> Kernel for Backwards<'_, N> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        let zero = [[[simd.splat(0.0); 2]; N]; N];
        let (mut a, mut u, mut n0, mut n1, mut mean) = (zero, zero, zero, zero, zero);
        let mut room = zero;
        load(simd, self.end, &mut n1);
        for slice in (0..self.slices.lengths_s.len()).rev() {
            self.slices.exponent(simd, slice, &mut a);
            load(simd, &self.parts[slice], &mut u);
            let mut sum = zero;
            for _ in 0..1u32 << self.slices.halvings {
                conjugated(simd, &u, &n1, &mut room, &mut n0);
                if self.slices.short {
                    average::<S, N, 4>(simd, &a, [&n0, &n1], &SHORT_WEIGHTS, &mut room, &mut mean);
                } else {
                    average::<S, N, 6>(simd, &a, [&n0, &n1], &LONG_WEIGHTS, &mut room, &mut mean);
                }
                add_upper(&mean, &mut sum);
                n1 = n0;
            }
            self.slices.project(simd, slice, &sum, self.by_samples);
        }
    }
}

// Arithmetic stands in functions that are always inlined and in plain loops, for the reason given in `three_levels.rs`, and writes where
// its caller says: a matrix that is handed back is copied. A Hermitian matrix is kept whole, its lower half the mirror of its upper one.

/// Complex entries in lanes.
type Entries<V, const N: usize> = [[[V; 2]; N]; N];

impl Slices<'_> {
    /// A of one part of a slice.
    #[inline(always)]
    fn exponent<S: Simd, const N: usize>(&self, simd: S, slice: usize, a: &mut Entries<S::V, N>) {
        let mut room = [[[Eight::all(0.0); 2]; N]; N];
        for part in self.statics {
            room[part.row][part.column][part.which] = Eight::all(part.value);
        }
        let count = self.controls.len();
        for (control, sample) in self.controls.iter().zip(&self.samples[slice * count..(slice + 1) * count]) {
            let sample = simd.load(sample);
            for part in control {
                let place = &mut room[part.row][part.column][part.which];
                simd.load(place).plus(sample, simd.splat(part.value)).store(place);
            }
        }
        let h = simd.splat(self.lengths_s[slice] / f64::from(1u32 << self.halvings));
        for i in 0..N {
            a[i][i] = [simd.load(&room[i][i][0]) * h, simd.splat(0.0)];
            for j in i + 1..N {
                let entry = [simd.load(&room[i][j][0]) * h, simd.load(&room[i][j][1]) * h];
                a[i][j] = entry;
                a[j][i] = [entry[0], -entry[1]];
            }
        }
    }

    /// Derivatives by the controls of a slice, from the upper half of the mean.
    #[inline(always)]
    fn project<S: Simd, const N: usize>(&self, simd: S, slice: usize, mean: &Entries<S::V, N>, by_samples: &mut [Eight]) {
        let mut room = [[[Eight::all(0.0); 2]; N]; N];
        for i in 0..N {
            for j in i..N {
                mean[i][j][0].store(&mut room[i][j][0]);
                mean[i][j][1].store(&mut room[i][j][1]);
            }
        }
        let count = self.controls.len();
        let h = self.lengths_s[slice] / f64::from(1u32 << self.halvings);
        for (control, derivative) in self.controls.iter().zip(&mut by_samples[slice * count..(slice + 1) * count]) {
            let mut sum = simd.splat(0.0);
            for part in control {
                // both halves of the matrix give the same
                let times = if part.row == part.column { h } else { 2.0 * h };
                sum = sum.plus(simd.load(&room[part.row][part.column][part.which]), simd.splat(times * part.value));
            }
            sum.store(derivative);
        }
    }
}

#[inline(always)]
fn load<S: Simd, const N: usize>(simd: S, from: &Square<N>, x: &mut Entries<S::V, N>) {
    for i in 0..N {
        for j in 0..N {
            x[i][j] = [simd.load(&from[i][j][0]), simd.load(&from[i][j][1])];
        }
    }
}

#[inline(always)]
fn store<V: Lane, const N: usize>(x: &Entries<V, N>, into: &mut Square<N>) {
    for i in 0..N {
        for j in 0..N {
            x[i][j][0].store(&mut into[i][j][0]);
            x[i][j][1].store(&mut into[i][j][1]);
        }
    }
}

#[inline(always)]
fn add_upper<V: Lane, const N: usize>(x: &Entries<V, N>, sum: &mut Entries<V, N>) {
    for i in 0..N {
        for j in i..N {
            sum[i][j] = [sum[i][j][0] + x[i][j][0], sum[i][j][1] + x[i][j][1]];
        }
    }
}

/// a + b c.
#[inline(always)]
fn onto<V: Lane>(a: [V; 2], b: [V; 2], c: [V; 2]) -> [V; 2] {
    [a[0].plus(b[0], c[0]).minus(b[1], c[1]), a[1].plus(b[0], c[1]).plus(b[1], c[0])]
}

#[inline(always)]
fn times<V: Lane>(b: [V; 2], c: [V; 2]) -> [V; 2] {
    [(b[0] * c[0]).minus(b[1], c[1]), (b[0] * c[1]).plus(b[1], c[0])]
}

/// out = x y.
#[inline(always)]
fn product<V: Lane, const N: usize>(x: &Entries<V, N>, y: &Entries<V, N>, out: &mut Entries<V, N>) {
    for i in 0..N {
        let mut row = y[0];
        for j in 0..N {
            row[j] = times(x[i][0], y[0][j]);
        }
        for k in 1..N {
            for j in 0..N {
                row[j] = onto(row[j], x[i][k], y[k][j]);
            }
        }
        out[i] = row;
    }
}

/// Real part of the entry (i, i) of x y, for Hermitian x y.
#[inline(always)]
fn on_diagonal<V: Lane, const N: usize>(x: &Entries<V, N>, y: &Entries<V, N>, i: usize) -> V {
    let mut sum = (x[i][0][0] * y[0][i][0]).minus(x[i][0][1], y[0][i][1]);
    for k in 1..N {
        sum = sum.plus(x[i][k][0], y[k][i][0]).minus(x[i][k][1], y[k][i][1]);
    }
    sum
}

/// Entry (i, j) of x y.
#[inline(always)]
fn entry<V: Lane, const N: usize>(x: &Entries<V, N>, y: &Entries<V, N>, i: usize, j: usize) -> [V; 2] {
    let mut sum = times(x[i][0], y[0][j]);
    for k in 1..N {
        sum = onto(sum, x[i][k], y[k][j]);
    }
    sum
}

/// out = x y of Hermitian matrices that commute: Hermitian, so that the upper half is enough.
#[inline(always)]
fn commuting<S: Simd, const N: usize>(simd: S, x: &Entries<S::V, N>, y: &Entries<S::V, N>, out: &mut Entries<S::V, N>) {
    for i in 0..N {
        out[i][i] = [on_diagonal(x, y, i), simd.splat(0.0)];
        for j in i + 1..N {
            let sum = entry(x, y, i, j);
            out[i][j] = sum;
            out[j][i] = [sum[0], -sum[1]];
        }
    }
}

/// out = one + sum_k coefficients[k] powers[k] of Hermitian matrices.
#[inline(always)]
fn polynomial<S: Simd, const N: usize, const K: usize>(
    simd: S,
    one: f64,
    coefficients: [f64; K],
    powers: [&Entries<S::V, N>; K],
    out: &mut Entries<S::V, N>,
) {
    for i in 0..N {
        for j in i..N {
            let mut re = if i == j { simd.splat(one) } else { simd.splat(0.0) };
            let mut im = simd.splat(0.0);
            for k in 0..K {
                let c = simd.splat(coefficients[k]);
                re = re.plus(c, powers[k][i][j][0]);
                im = im.plus(c, powers[k][i][j][1]);
            }
            out[i][j] = [re, im];
            if j > i {
                out[j][i] = [re, -im];
            }
        }
    }
}

/// sum += x y, all three Hermitian.
#[inline(always)]
fn commuting_onto<V: Lane, const N: usize>(x: &Entries<V, N>, y: &Entries<V, N>, sum: &mut Entries<V, N>) {
    for i in 0..N {
        sum[i][i][0] = sum[i][i][0] + on_diagonal(x, y, i);
        for j in i + 1..N {
            let more = entry(x, y, i, j);
            let whole = [sum[i][j][0] + more[0], sum[i][j][1] + more[1]];
            sum[i][j] = whole;
            sum[j][i] = [whole[0], -whole[1]];
        }
    }
}

/// u = cosine - i a odd, with a odd Hermitian.
#[inline(always)]
fn joined<V: Lane, const N: usize>(cosine: &Entries<V, N>, a: &Entries<V, N>, odd: &Entries<V, N>, u: &mut Entries<V, N>) {
    for i in 0..N {
        u[i][i] = [cosine[i][i][0], -on_diagonal(a, odd, i)];
        for j in i + 1..N {
            let (c, s) = (cosine[i][j], entry(a, odd, i, j));
            u[i][j] = [c[0] + s[1], c[1] - s[0]];
            u[j][i] = [c[0] - s[1], -c[1] - s[0]];
        }
    }
}

/// exp(-i a) up to the ninth power.
#[inline(always)]
fn short_exponential<S: Simd, const N: usize>(simd: S, a: &Entries<S::V, N>, room: &mut [Entries<S::V, N>; 5], u: &mut Entries<S::V, N>) {
    let f = &RECIPROCAL_FACTORIALS;
    let [a2, a4, high, cosine, odd] = room;
    commuting(simd, a, a, a2);
    commuting(simd, a2, a2, a4);
    polynomial(simd, 1.0, [-f[2]], [a2], cosine);
    polynomial(simd, f[4], [-f[6], f[8]], [a2, a4], high);
    commuting_onto(a4, high, cosine);
    polynomial(simd, 1.0, [-f[3]], [a2], odd);
    polynomial(simd, f[5], [-f[7], f[9]], [a2, a4], high);
    commuting_onto(a4, high, odd);
    joined(cosine, a, odd, u);
}

/// exp(-i a) up to the thirteenth power.
#[inline(always)]
fn long_exponential<S: Simd, const N: usize>(simd: S, a: &Entries<S::V, N>, room: &mut [Entries<S::V, N>; 5], u: &mut Entries<S::V, N>) {
    let f = &RECIPROCAL_FACTORIALS;
    let mut a6 = *a;
    let [a2, a4, high, cosine, odd] = room;
    commuting(simd, a, a, a2);
    commuting(simd, a2, a2, a4);
    commuting(simd, a2, a4, &mut a6);
    polynomial(simd, 1.0, [-f[2], f[4]], [a2, a4], cosine);
    polynomial(simd, -f[6], [f[8], -f[10], f[12]], [a2, a4, &a6], high);
    commuting_onto(&a6, high, cosine);
    polynomial(simd, 1.0, [-f[3], f[5]], [a2, a4], odd);
    polynomial(simd, -f[7], [f[9], -f[11], f[13]], [a2, a4, &a6], high);
    commuting_onto(&a6, high, odd);
    joined(cosine, a, odd, u);
}

/// out = u+ n u of a Hermitian n; `room` is left holding n u.
#[inline(always)]
fn conjugated<S: Simd, const N: usize>(
    simd: S,
    u: &Entries<S::V, N>,
    n: &Entries<S::V, N>,
    room: &mut Entries<S::V, N>,
    out: &mut Entries<S::V, N>,
) {
    product(n, u, room);
    for i in 0..N {
        let mut sum = simd.splat(0.0);
        for k in 0..N {
            sum = sum.plus(u[k][i][0], room[k][i][0]).plus(u[k][i][1], room[k][i][1]);
        }
        out[i][i] = [sum, simd.splat(0.0)];
        for j in i + 1..N {
            let mut sum = [simd.splat(0.0); 2];
            for k in 0..N {
                let (a, b) = (u[k][i], room[k][j]);
                sum = [sum[0].plus(a[0], b[0]).plus(a[1], b[1]), sum[1].plus(a[0], b[1]).minus(a[1], b[0])];
            }
            out[i][j] = sum;
            out[j][i] = [sum[0], -sum[1]];
        }
    }
}

/// W from N at both ends of a part, with K derivatives each: Horner's rule in z. K is even, so the highest derivative is odd.
#[inline(always)]
fn average<S: Simd, const N: usize, const K: usize>(
    simd: S,
    a: &Entries<S::V, N>,
    ends: [&Entries<S::V, N>; 2],
    weights: &[f64; K],
    room: &mut Entries<S::V, N>,
    w: &mut Entries<S::V, N>,
) {
    let [n0, n1] = ends;
    let c = simd.splat(weights[K - 1]);
    for i in 0..N {
        for j in 0..N {
            w[i][j] = [c * (n0[i][j][0] - n1[i][j][0]), c * (n0[i][j][1] - n1[i][j][1])];
        }
    }
    for order in (0..K - 1).rev() {
        // the next is weight (n0 +- n1) - i (a w - w a)
        product(a, w, room);
        let c = simd.splat(weights[order]);
        let sign = simd.splat(if order % 2 == 0 { weights[order] } else { -weights[order] });
        for i in 0..N {
            w[i][i] = [(room[i][i][1] + room[i][i][1]).plus(c, n0[i][i][0]).plus(sign, n1[i][i][0]), simd.splat(0.0)];
            for j in i + 1..N {
                let (re, im) = (room[i][j][1] + room[j][i][1], room[j][i][0] - room[i][j][0]);
                let re = re.plus(c, n0[i][j][0]).plus(sign, n1[i][j][0]);
                let im = im.plus(c, n0[i][j][1]).plus(sign, n1[i][j][1]);
                w[i][j] = [re, im];
                w[j][i] = [re, -im];
            }
        }
    }
}

/// c_j of two-point Taylor quadrature with k = 4.
const SHORT_WEIGHTS: [f64; 4] = two_point_weights();
/// The same with k = 6.
const LONG_WEIGHTS: [f64; 6] = two_point_weights();

/// c_j = binomial(K, j+1) / (binomial(2K, j+1) (j+1)!).
const fn two_point_weights<const K: usize>() -> [f64; K] {
    let mut weights = [0.0; K];
    let (mut j, mut ratio) = (0, 1.0);
    while j < K {
        // the quotient of binomials, factor by factor, and one more of the factorial
        ratio *= (K - j) as f64 / (2 * K - j) as f64 / (j + 1) as f64;
        weights[j] = ratio;
        j += 1;
    }
    weights
}

/// 1/n!.
const RECIPROCAL_FACTORIALS: [f64; 14] = reciprocal_factorials();

const fn reciprocal_factorials() -> [f64; 14] {
    let mut all = [1.0; 14];
    let mut n = 1;
    while n < 14 {
        all[n] = all[n - 1] / n as f64;
        n += 1;
    }
    all
}

//! y' = G(t) y with a sparse real G, eight points at a time: columns carried by exponentials of combinations of G's integrals.
//!
//! Where G is constant in every step the step is exp(h G) y, exact. Else a step is a product of exponentials without commutators, each of a sum
//! of a1, a2, a3 (S. Blanes, P. C. Moan, Applied Numerical Mathematics 56, 1519 (2006); A. Alvermann, H. Fehske, Journal of Computational
//! Physics 230, 5930 (2011)): the table [`FACTORS`], of order 6, whose conditions a test holds against the Magnus expansion.
//!
//! An exponential is the Taylor series applied to the column by Horner's rule, v <- y + G v/n for n = N .. 1, with the first term left out below
//! 1e-17 of the column by the largest sum of moduli in a row of any of the eight; where that is large, G is divided by a whole number and applied
//! so many times.

use super::generator::Generator;
use super::lane::{Eight, Kernel, Lane, Simd};
use super::steps::Weights;

/// Columns that one pass over G's entries takes.
const TOGETHER: usize = 4;
/// Largest |G| that one series takes.
const SERIES_END: f64 = 3.0;
/// Longest series.
const MOST_TERMS: usize = 40;

/// Factors of a1, a2, a3 in each exponential, the one that acts first first. They solve the seven conditions of order 6 of a product that reads the
/// same in both directions of time (one of the eight free numbers is left: chosen so that the steps forth and back are short), found with
/// Newton's method in the free algebra of a1, a2, a3 up to order 5.
const FACTORS: [[f64; 3]; 5] = [
    [0.414_391_956_761_502_53, -0.173_480_263_748_706_48, 0.069_882_274_558_330_92],
    [-0.149_425_016_834_472_04, 0.056_942_495_121_436_155, -0.024_237_799_622_507_817],
    [0.470_066_120_145_938_85, 0.0, -0.007_955_616_538_312_879],
    [-0.149_425_016_834_472_04, -0.056_942_495_121_436_155, -0.024_237_799_622_507_817],
    [0.414_391_956_761_502_53, 0.173_480_263_748_706_48, 0.069_882_274_558_330_92],
];

/// Columns of one group of eight points.
#[derive(Debug)]
pub(crate) struct Linear<'a, W> {
    pub generator: &'a Generator,
    /// Which channels act, in the order of the weights.
    pub acting: &'a [usize],
    pub steps: W,
    /// Whether G is constant in every step.
    pub bare: bool,
    /// What is carried: number k of column c is at `k * count + c`.
    pub columns: &'a mut [Eight],
    /// How many columns there are: 1 or [`TOGETHER`].
    pub count: usize,
    pub room: &'a mut Room,
}

/// Scratch of a kernel.
#[derive(Debug, Default)]
pub(crate) struct Room {
    values: Vec<Eight>,
    old: Vec<Eight>,
    new: Vec<Eight>,
    /// All of G, row after row, where it is small.
    dense: Vec<Eight>,
}

impl Room {
    fn fit(&mut self, entries: usize, numbers: usize) {
        self.values.resize(entries, Eight::all(0.0));
        self.old.resize(numbers, Eight::all(0.0));
        self.new.resize(numbers, Eight::all(0.0));
    }
}

/// Columns in a pack.
pub(crate) const PACK: usize = TOGETHER;

impl<W: Weights> Kernel for Linear<'_, W> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        if self.count == TOGETHER {
            self.all_steps::<S, TOGETHER>(simd);
        } else {
            self.all_steps::<S, 1>(simd);
        }
    }
}

/// Terms of the series for |G| at most `largest`.
fn terms(largest: f64) -> usize {
    let mut term = 1.0;
    for n in 1..MOST_TERMS {
        term *= largest / n as f64;
        if term < 1e-17 {
            return n;
        }
    }
    MOST_TERMS
}

impl<W: Weights> Linear<'_, W> {
    #[inline(always)]
    fn all_steps<S: Simd, const C: usize>(mut self, simd: S) {
        self.room.fit(self.generator.columns.len(), self.columns.len());
        let whole: &[[f64; 3]] = &[[1.0, 0.0, 0.0]];
        let factors: &[[f64; 3]] = if self.bare { whole } else { &FACTORS };
        for step in 0..self.steps.count() {
            for factor in factors {
                self.fill(simd, step, factor, 1.0);
                let largest = largest_row(self.generator, &self.room.values);
                let times = (largest / SERIES_END).ceil().max(1.0);
                if times > 1.0 {
                    self.fill(simd, step, factor, 1.0 / times);
                }
                let terms = terms(largest / times);
                // density matrices of two and of three levels: without an index, all in registers
                match (C, self.generator.size) {
                    (1, 4) => self.dense::<S, 4>(simd, times as usize, terms),
                    (1, 9) => self.dense::<S, 9>(simd, times as usize, terms),
                    _ => {
                        for _ in 0..times as usize {
                            exponential::<S, C>(simd, self.generator, terms, self.room, self.columns);
                        }
                    }
                }
            }
        }
    }

    /// columns <- exp(G) columns, `times` times, for one column of N numbers.
    #[inline(always)]
    fn dense<S: Simd, const N: usize>(&mut self, simd: S, times: usize, terms: usize) {
        let generator = self.generator;
        self.room.dense.clear();
        self.room.dense.resize(N * N, Eight::all(0.0));
        for row in 0..N {
            for entry in generator.rows[row]..generator.rows[row + 1] {
                self.room.dense[row * N + generator.columns[entry]] = self.room.values[entry];
            }
        }
        let dense = &self.room.dense[..N * N];
        let mut y = [simd.splat(0.0); N];
        for k in 0..N {
            y[k] = simd.load(&self.columns[k]);
        }
        for _ in 0..times {
            let start = y;
            for n in (1..=terms).rev() {
                let share = simd.splat(1.0 / n as f64);
                let mut next = start;
                for row in 0..N {
                    let mut sum = simd.load(&dense[row * N]) * y[0];
                    for column in 1..N {
                        sum = sum.plus(simd.load(&dense[row * N + column]), y[column]);
                    }
                    next[row] = start[row].plus(share, sum);
                }
                y = next;
            }
        }
        for k in 0..N {
            y[k].store(&mut self.columns[k]);
        }
    }

    /// Entries of `factor[0] a1 + factor[1] a2 + factor[2] a3` times `share` into the scratch.
    #[inline(always)]
    fn fill<S: Simd>(&mut self, simd: S, step: usize, factor: &[f64; 3], share: f64) {
        let h = self.steps.length(simd, step) * simd.splat(factor[0] * share);
        let (values, statics) = (&mut self.room.values[..], &self.generator.statics[..]);
        for entry in 0..statics.len() {
            (h * simd.load(&statics[entry])).store(&mut values[entry]);
        }
        for k in 0..self.acting.len() {
            let mut weight = self.steps.weight(simd, step, k, 0) * simd.splat(factor[0] * share);
            if !self.bare {
                weight = weight.plus(self.steps.weight(simd, step, k, 1), simd.splat(factor[1] * share));
                weight = weight.plus(self.steps.weight(simd, step, k, 2), simd.splat(factor[2] * share));
            }
            let parts = &self.generator.channels[self.acting[k]][..];
            for at in 0..parts.len() {
                let (entry, part) = &parts[at];
                let value = &mut values[*entry];
                simd.load(value).plus(weight, simd.load(part)).store(value);
            }
        }
    }
}

/// Largest sum of moduli in a row of any of the eight.
#[inline(always)]
fn largest_row(generator: &Generator, values: &[Eight]) -> f64 {
    let mut largest = [0.0f64; 8];
    for row in 0..generator.size {
        let mut sums = [0.0f64; 8];
        for entry in generator.rows[row]..generator.rows[row + 1] {
            for lane in 0..8 {
                sums[lane] += values[entry].0[lane].abs();
            }
        }
        for lane in 0..8 {
            largest[lane] = if sums[lane] > largest[lane] { sums[lane] } else { largest[lane] };
        }
    }
    let mut whole = 0.0;
    for lane in 0..8 {
        whole = if largest[lane] > whole { largest[lane] } else { whole };
    }
    whole
}

/// columns <- exp(G) columns.
#[inline(always)]
fn exponential<S: Simd, const C: usize>(simd: S, generator: &Generator, terms: usize, room: &mut Room, columns: &mut [Eight]) {
    room.old.copy_from_slice(columns);
    for n in (1..=terms).rev() {
        let share = simd.splat(1.0 / n as f64);
        for row in 0..generator.size {
            let mut sums = [simd.splat(0.0); C];
            let (from, to) = (generator.rows[row], generator.rows[row + 1]);
            for entry in from..to {
                let value = simd.load(&room.values[entry]);
                let first = generator.columns[entry] * C;
                for c in 0..C {
                    sums[c] = sums[c].plus(value, simd.load(&room.old[first + c]));
                }
            }
            for c in 0..C {
                simd.load(&columns[row * C + c]).plus(share, sums[c]).store(&mut room.new[row * C + c]);
            }
        }
        std::mem::swap(&mut room.old, &mut room.new);
    }
    columns.copy_from_slice(&room.old);
}

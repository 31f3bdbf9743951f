//! Eight points carried through stretches that they share, by the kernel of their number of levels.
//!
//! Comes in: A and the C_k of each point, packed; stretches with their steps; columns (states, or columns of the propagator) at the start.
//! Leaves: the columns at the end, phases included. A lane does not depend on its neighbours but for the length of the series,
//! which goes by the largest of the eight; fixed groups of points therefore give the same bits however they are handed out.

use std::sync::Arc;

use super::generator::Recipe;
use super::lane::Eight;
use super::linear::{Linear, Room, PACK};
use super::stretch::{Stretch, Summed, Timed};
use super::three_levels::{Column, Nine, ThreeLevels};
use super::two_levels::TwoLevels;
use super::width::Width;

/// Room above the first order of an expansion for the higher ones, in the bound that picks the series.
const ROOM: f64 = 1.2;

/// The Hermitian matrix of each of eight points: its diagonal, then real and imaginary part of (j, k), j < k, row after row.
pub type Packed = Vec<Eight>;

/// A and the C_k of eight points.
#[derive(Debug, Clone)]
pub struct Group {
    /// Number of levels.
    pub dim: usize,
    /// A, rad/s.
    pub statics: Packed,
    /// The C_k, rad/s.
    pub channels: Vec<Packed>,
    /// How numbers are carried where there are more than three levels, or where they are density matrices.
    pub recipe: Option<Arc<Recipe>>,
}

/// Most levels of states that are carried side by side.
const MOST_LEVELS: usize = 24;
/// Most levels of density matrices.
const MOST_LEVELS_OPEN: usize = 5;

/// Whether there is a kernel for so many levels, of states or of density matrices.
pub fn has_kernel(dim: usize, density: bool) -> bool {
    dim >= 2 && dim <= if density { MOST_LEVELS_OPEN } else { MOST_LEVELS }
}

/// Where entry (j, k), j < k, starts in a packed matrix.
pub fn place_of(dim: usize, j: usize, k: usize) -> usize {
    dim + 2 * (j * (2 * dim - j - 1) / 2 + (k - j - 1))
}

impl Group {
    /// Carries columns (real and imaginary part of each amplitude, or packed density matrices) through the stretches.
    pub fn carry(&self, width: Width, stretches: &[Stretch], columns: &mut [Vec<Eight>]) {
        self.through(width, stretches, columns);
    }

    /// The same through stretches of which every point has its own.
    pub fn carry_apart(&self, width: Width, stretches: &[Summed], columns: &mut [Vec<Eight>]) {
        self.through(width, stretches, columns);
    }

    fn through(&self, width: Width, stretches: &[impl Timed], columns: &mut [Vec<Eight>]) {
        match (&self.recipe, self.dim) {
            (Some(recipe), _) => self.many(recipe, width, stretches, columns),
            (None, 2) => self.two(width, stretches, columns),
            (None, 3) => self.three(width, stretches, columns),
            (None, _) => self.many(&Recipe::of_states(self.dim), width, stretches, columns),
        }
        if !self.recipe.as_ref().is_some_and(|recipe| recipe.is_density()) {
            self.turn(stretches, columns);
        }
    }

    /// Largest Frobenius norm among the eight points of a packed matrix without its trace.
    pub(super) fn size(&self, packed: &Packed) -> f64 {
        let mut largest = 0.0f64;
        for lane in 0..8 {
            let mean = packed[..self.dim].iter().map(|d| d.0[lane]).sum::<f64>() / self.dim as f64;
            let diagonal: f64 = packed[..self.dim].iter().map(|d| (d.0[lane] - mean).powi(2)).sum();
            let rest: f64 = packed[self.dim..].iter().map(|e| e.0[lane].powi(2)).sum();
            largest = largest.max((diagonal + 2.0 * rest).sqrt());
        }
        largest
    }

    /// A bound of the Frobenius norm of the exponent in any step of a stretch.
    fn largest(&self, stretch: &impl Timed, static_size: f64, sizes: &[f64]) -> f64 {
        let driven: f64 = stretch.channels().iter().zip(stretch.largest_s()).map(|(channel, weight)| weight * sizes[*channel]).sum();
        (static_size * stretch.longest_s() + driven) * if stretch.is_bare() { 1.0 } else { ROOM }
    }

    fn two(&self, width: Width, stretches: &[impl Timed], columns: &mut [Vec<Eight>]) {
        // H less half its trace is w.sigma/2
        let vector = |p: &Packed| {
            let z = Eight(std::array::from_fn(|l| p[0].0[l] - p[1].0[l]));
            let twice = |e: &Eight, sign: f64| Eight(e.0.map(|x| 2.0 * sign * x));
            [twice(&p[2], 1.0), twice(&p[3], -1.0), z]
        };
        let statics = vector(&self.statics);
        let channels: Vec<[Eight; 3]> = self.channels.iter().map(vector).collect();
        let sizes: Vec<f64> = self.channels.iter().map(|p| self.size(p)).collect();
        let static_size = self.size(&self.statics);
        let still = |v: &[Eight; 3]| v[1].0.iter().all(|y| *y == 0.0);
        let zero = Eight::all(0.0);
        let mut turned = [Eight::all(1.0), zero, zero, zero];
        let mut acting = Vec::new();
        for stretch in stretches {
            acting.clear();
            acting.extend(stretch.channels().iter().map(|k| channels[*k]));
            // |W/2|^2 is half the square of the Frobenius norm
            let largest = 0.5 * self.largest(stretch, static_size, &sizes).powi(2);
            let flat = still(&statics) && acting.iter().all(still);
            let steps = stretch.weights();
            turned = width.run(TwoLevels {
                statics: &statics,
                channels: &acting,
                steps,
                bare: stretch.is_bare(),
                flat,
                largest,
                start: &turned,
            });
        }
        let [xr, xi, yr, yi] = turned;
        for column in columns {
            for l in 0..8 {
                let (x, y) = ([xr.0[l], xi.0[l]], [yr.0[l], yi.0[l]]);
                let (a, b) = ([column[0].0[l], column[1].0[l]], [column[2].0[l], column[3].0[l]]);
                // x a - conj(y) b, y a + conj(x) b
                column[0].0[l] = x[0] * a[0] - x[1] * a[1] - y[0] * b[0] - y[1] * b[1];
                column[1].0[l] = x[0] * a[1] + x[1] * a[0] - y[0] * b[1] + y[1] * b[0];
                column[2].0[l] = y[0] * a[0] - y[1] * a[1] + x[0] * b[0] + x[1] * b[1];
                column[3].0[l] = y[0] * a[1] + y[1] * a[0] + x[0] * b[1] - x[1] * b[0];
            }
        }
    }

    fn three(&self, width: Width, stretches: &[impl Timed], columns: &mut [Vec<Eight>]) {
        // packed are (0, 1), (0, 2), (1, 2); the kernel wants (0, 1), (1, 2), (0, 2), and no trace
        let without_trace = |p: &Packed| -> Nine {
            let mean = Eight(std::array::from_fn(|l| (p[0].0[l] + p[1].0[l] + p[2].0[l]) / 3.0));
            let less = |d: &Eight| Eight(std::array::from_fn(|l| d.0[l] - mean.0[l]));
            [less(&p[0]), less(&p[1]), less(&p[2]), p[3], p[4], p[7], p[8], p[5], p[6]]
        };
        let statics = without_trace(&self.statics);
        let channels: Vec<Nine> = self.channels.iter().map(without_trace).collect();
        let sizes: Vec<f64> = self.channels.iter().map(|p| self.size(p)).collect();
        let static_size = self.size(&self.statics);
        let none = |entries: &[Eight]| entries.iter().all(|e| e.0.iter().all(|x| *x == 0.0));
        let mut carried: Vec<Column> =
            columns.iter().map(|column| std::array::from_fn(|k| column.get(k).copied().unwrap_or(Eight::all(0.0)))).collect();
        let mut acting = Vec::new();
        for stretch in stretches {
            acting.clear();
            acting.extend(stretch.channels().iter().map(|k| channels[*k]));
            let largest = self.largest(stretch, static_size, &sizes);
            let ladder = none(&statics[3..]) && acting.iter().all(|c| none(&c[..3]) && none(&c[7..]));
            let steps = stretch.weights();
            let bare = stretch.is_bare();
            width.run(ThreeLevels { statics: &statics, channels: &acting, steps, bare, ladder, largest, columns: &mut carried });
        }
        for (column, carried) in columns.iter_mut().zip(&carried) {
            column.copy_from_slice(carried);
        }
    }

    fn many(&self, recipe: &Recipe, width: Width, stretches: &[impl Timed], columns: &mut [Vec<Eight>]) {
        let without_trace = |p: &Packed| -> Packed {
            let mut p = p.clone();
            for lane in 0..8 {
                let mean = p[..self.dim].iter().map(|d| d.0[lane]).sum::<f64>() / self.dim as f64;
                p[..self.dim].iter_mut().for_each(|d| d.0[lane] -= mean);
            }
            p
        };
        let channels: Vec<Packed> = self.channels.iter().map(without_trace).collect();
        let generator = recipe.generator(&without_trace(&self.statics), &channels);
        let mut room = Room::default();
        // a pack that is not full is filled up with zeros, unless there is one column alone
        for some in columns.chunks_mut(PACK) {
            let count = if some.len() == 1 { 1 } else { PACK };
            let mut carried = vec![Eight::all(0.0); generator.size * count];
            for (c, column) in some.iter().enumerate() {
                column.iter().enumerate().for_each(|(k, number)| carried[k * count + c] = *number);
            }
            for stretch in stretches {
                width.run(Linear {
                    generator: &generator,
                    acting: stretch.channels(),
                    steps: stretch.weights(),
                    bare: stretch.is_bare(),
                    columns: &mut carried,
                    count,
                    room: &mut room,
                });
            }
            for (c, column) in some.iter_mut().enumerate() {
                column.iter_mut().enumerate().for_each(|(k, number)| *number = carried[k * count + c]);
            }
        }
    }

    /// Turns every column by the phase of the trace, which the kernels leave out.
    fn turn(&self, stretches: &[impl Timed], columns: &mut [Vec<Eight>]) {
        let trace = |p: &Packed, lane: usize| p[..self.dim].iter().map(|d| d.0[lane]).sum::<f64>() / self.dim as f64;
        for lane in 0..8 {
            let mut angle = 0.0;
            for stretch in stretches {
                angle += trace(&self.statics, lane) * stretch.length_s(lane);
                for (k, channel) in stretch.channels().iter().enumerate() {
                    angle += trace(&self.channels[*channel], lane) * stretch.area_s(k, lane);
                }
            }
            if angle == 0.0 {
                continue;
            }
            let (sin, cos) = angle.sin_cos();
            for column in columns.iter_mut() {
                for pair in column.chunks_exact_mut(2) {
                    let (re, im) = (pair[0].0[lane], pair[1].0[lane]);
                    pair[0].0[lane] = cos * re + sin * im;
                    pair[1].0[lane] = cos * im - sin * re;
                }
            }
        }
    }
}

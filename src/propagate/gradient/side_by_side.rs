//! Eight sets of samples at a time, by [`crate::propagate::lanes`].

use num_complex::Complex64;

use super::controlled::{Controlled, GradientFault};
use super::goals::Goal;
use super::plain::end_matrix;
use super::{judged, Gradient, Gradients};
use crate::problem::Matrix;
use crate::propagate::lanes::{Conjugation, Eight, Width};

/// Most halvings of a slice.
const MOST_HALVINGS: u32 = 12;
/// Sets in a block of lanes.
const LANES: usize = 8;

/// Whether there is a kernel for this number of levels.
pub fn has_lanes(system: &Controlled) -> bool {
    Conjugation::has(system.dim())
}

/// The traces of H, over the number of levels.
struct Phase {
    statics: f64,
    controls: Vec<f64>,
}

/// The gradients with a given set of instructions; [`super::gradients`] takes the widest.
///
/// # Errors
/// As of [`super::gradient`].
pub fn gradients_at_width(
    width: Width,
    system: &Controlled,
    samples: &[f64],
    goal: &dyn Goal,
    threads: usize,
) -> Result<Gradients, GradientFault> {
    let size = system.samples();
    let sets: Vec<&[f64]> = samples.chunks(size.max(1)).collect();
    system.check(samples, sets.len(), goal)?;
    let blocks: Vec<&[&[f64]]> = sets.chunks(LANES).collect();
    let share = blocks.len().div_ceil(threads.max(1));
    let spreads: Vec<f64> = blocks.iter().map(|block| largest_spread(system, block)).collect();
    let hardest = (0..blocks.len()).fold(0, |most, k| if spreads[k] > spreads[most] { k } else { most });
    let one = |worker: &mut Worker, block: usize, finer: u32| worker.block(blocks[block], spreads[block], finer);
    let part = |range: std::ops::Range<usize>| -> Result<Vec<Gradient>, GradientFault> {
        let mut worker = Worker::new(width, system, goal);
        let mut found = Vec::with_capacity(LANES * range.len());
        for block in range {
            found.extend(one(&mut worker, block, 0)?);
        }
        Ok(found)
    };
    let parts: Vec<Result<Vec<Gradient>, GradientFault>> = if share >= blocks.len() {
        vec![part(0..blocks.len())]
    } else {
        let part = &part;
        std::thread::scope(|scope| {
            let count = blocks.len();
            let starts = (0..count).step_by(share);
            let running: Vec<_> = starts.map(|from| scope.spawn(move || part(from..(from + share).min(count)))).collect();
            running.into_iter().map(|thread| thread.join().unwrap_or(Err(GradientFault::NoSets))).collect()
        })
    };
    let mut gradients = Vec::with_capacity(sets.len());
    for part in parts {
        gradients.extend(part?);
    }
    let (mut value_change, mut derivative_change) = (0.0f64, 0.0f64);
    let mut worker = Worker::new(width, system, goal);
    let mut again = vec![0, hardest];
    again.dedup();
    for block in again {
        for (fine, coarse) in one(&mut worker, block, 1)?.iter().zip(&gradients[LANES * block..]) {
            value_change = value_change.max((fine.value - coarse.value).abs());
            let apart = fine.by_samples.iter().zip(&coarse.by_samples).map(|(fine, coarse)| (fine - coarse).abs());
            derivative_change = apart.fold(derivative_change, f64::max);
        }
    }
    Ok(judged(system, goal, gradients, value_change, derivative_change))
}

/// An upper bound of the distance of the eigenvalues of H h in any slice of these sets: sqrt(2) times the Frobenius norm of the part
/// without trace (L. Mirsky, Mathematika 3, 127 (1956)).
pub(super) fn largest_spread(system: &Controlled, block: &[&[f64]]) -> f64 {
    let all: Vec<Matrix> = std::iter::once(&system.statics).chain(&system.controls).map(without_trace).collect();
    // |H|^2 as a form of the samples
    let form: Vec<Vec<f64>> = all.iter().map(|a| all.iter().map(|b| a.dotc(b).re).collect()).collect();
    let count = system.controls.len();
    let mut largest = 0.0f64;
    for set in block {
        for (slice, length) in system.lengths_s.iter().enumerate() {
            let u = &set[slice * count..(slice + 1) * count];
            let mut square = form[0][0];
            for (j, u_j) in u.iter().enumerate() {
                let across: f64 = u.iter().zip(&form[j + 1][1..]).map(|(u_k, f)| u_k * f).sum();
                square += u_j * (2.0 * form[0][j + 1] + across);
            }
            largest = largest.max(square * length * length);
        }
    }
    (2.0 * largest).sqrt()
}

fn without_trace(matrix: &Matrix) -> Matrix {
    let mean = matrix.trace() / Complex64::from(matrix.nrows() as f64);
    let mut rest = matrix.clone();
    (0..matrix.nrows()).for_each(|k| rest[(k, k)] -= mean);
    rest
}

/// One thread's room.
struct Worker<'a> {
    width: Width,
    system: &'a Controlled,
    goal: &'a dyn Goal,
    start: Matrix,
    phase: Phase,
    kernel: Conjugation,
    packed: Vec<Eight>,
    by_samples: Vec<Eight>,
}

impl<'a> Worker<'a> {
    fn new(width: Width, system: &'a Controlled, goal: &'a dyn Goal) -> Worker<'a> {
        let mean = |matrix: &Matrix| matrix.trace().re / matrix.nrows() as f64;
        let controls: Vec<Matrix> = system.controls.iter().map(without_trace).collect();
        Worker {
            width,
            system,
            goal,
            start: goal.start(),
            phase: Phase { statics: mean(&system.statics), controls: system.controls.iter().map(mean).collect() },
            kernel: Conjugation::new(&without_trace(&system.statics), &controls, &system.lengths_s),
            packed: Vec::new(),
            by_samples: Vec::new(),
        }
    }

    /// The gradients of up to eight sets whose slices spread by up to `spread`, each slice halved `finer` times more than is needed.
    fn block(&mut self, sets: &[&[f64]], spread: f64, finer: u32) -> Result<Vec<Gradient>, GradientFault> {
        let needed = self.kernel.halvings(spread);
        if needed > MOST_HALVINGS {
            return Err(GradientFault::TooStrong(spread));
        }
        // missing sets repeat the last one
        let of_lane: [&[f64]; LANES] = std::array::from_fn(|lane| sets[lane.min(sets.len() - 1)]);
        self.packed.clear();
        self.packed.extend((0..of_lane[0].len()).map(|k| Eight(std::array::from_fn(|lane| of_lane[lane][k]))));
        self.by_samples.resize(self.packed.len(), Eight::all(0.0));
        let (system, goal, phase, start) = (self.system, self.goal, &self.phase, &self.start);
        let ends = self.kernel.forwards(self.width, &self.packed, spread, finer);
        let mut values = [0.0; LANES];
        let mut traces = [0.0; LANES];
        let mut seeded: Vec<Matrix> = Vec::with_capacity(LANES);
        for lane in 0..sets.len() {
            let end = &ends[lane] * start * Complex64::cis(-phase.of(sets[lane], &system.lengths_s));
            values[lane] = goal.value(&end);
            let n = end_matrix(&end, &goal.seed(&end));
            traces[lane] = n.trace().re;
            seeded.push(n);
        }
        self.kernel.backwards(self.width, &self.packed, spread, finer, &seeded, &mut self.by_samples);
        let count = system.controls.len();
        let gradient = |lane: usize| {
            let mut by_samples: Vec<f64> = self.by_samples.iter().map(|eight| eight.0[lane]).collect();
            if phase.controls.iter().any(|trace| *trace != 0.0) {
                for (slice, length) in system.lengths_s.iter().enumerate() {
                    for (c, trace) in phase.controls.iter().enumerate() {
                        by_samples[slice * count + c] += length * trace * traces[lane];
                    }
                }
            }
            Gradient { value: values[lane], by_samples }
        };
        Ok((0..sets.len()).map(gradient).collect())
    }
}

impl Phase {
    /// The common phase that a set of samples turns by, rad.
    fn of(&self, samples: &[f64], lengths_s: &[f64]) -> f64 {
        let count = self.controls.len();
        let slice = |(k, length): (usize, &f64)| {
            let driven: f64 = self.controls.iter().zip(&samples[k * count..]).map(|(trace, sample)| trace * sample).sum();
            length * (self.statics + driven)
        };
        lengths_s.iter().enumerate().map(slice).sum()
    }
}

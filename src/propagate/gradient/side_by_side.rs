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
    let part = |range: std::ops::Range<usize>| -> Result<Part, GradientFault> {
        let mut worker = Worker::new(width, system, goal);
        let mut found = Part { gradients: Vec::with_capacity(LANES * range.len()), spreads: Vec::with_capacity(range.len()) };
        for block in range {
            let (gradients, spread) = worker.block(blocks[block], 0)?;
            found.gradients.extend(gradients);
            found.spreads.push(spread);
        }
        Ok(found)
    };
    let parts: Vec<Result<Part, GradientFault>> = if share >= blocks.len() {
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
    let (mut gradients, mut spreads) = (Vec::with_capacity(sets.len()), Vec::with_capacity(blocks.len()));
    for part in parts {
        let part = part?;
        gradients.extend(part.gradients);
        spreads.extend(part.spreads);
    }
    let hardest = (0..blocks.len()).fold(0, |most, k| if spreads[k] > spreads[most] { k } else { most });
    let (mut value_change, mut derivative_change) = (0.0f64, 0.0f64);
    let mut worker = Worker::new(width, system, goal);
    let mut again = vec![0, hardest];
    again.dedup();
    for block in again {
        for (fine, coarse) in worker.block(blocks[block], 1)?.0.iter().zip(&gradients[LANES * block..]) {
            value_change = value_change.max((fine.value - coarse.value).abs());
            let apart = fine.by_samples.iter().zip(&coarse.by_samples).map(|(fine, coarse)| (fine - coarse).abs());
            derivative_change = apart.fold(derivative_change, f64::max);
        }
    }
    Ok(judged(system, goal, gradients, value_change, derivative_change))
}

/// What one thread found: gradients, and how far eigenvalues spread in each block.
struct Part {
    gradients: Vec<Gradient>,
    spreads: Vec<f64>,
}

/// An upper bound of the distance of the eigenvalues of H h in any slice of a block: sqrt(2) times the Frobenius norm of the part without
/// trace (L. Mirsky, Mathematika 3, 127 (1956)). `form` is the norm's square as a form of 1 and the samples.
pub(super) fn largest_spread(form: &[Vec<f64>], lengths_s: &[f64], packed: &[Eight]) -> f64 {
    let count = form.len() - 1;
    let mut largest = [0.0f64; LANES];
    for (slice, length) in lengths_s.iter().enumerate() {
        let samples = &packed[slice * count..(slice + 1) * count];
        let mut square = [form[0][0]; LANES];
        for (sample, row) in samples.iter().zip(&form[1..]) {
            let mut sum = [2.0 * row[0]; LANES];
            for (other, factor) in samples.iter().zip(&row[1..]) {
                for lane in 0..LANES {
                    sum[lane] += factor * other.0[lane];
                }
            }
            for lane in 0..LANES {
                square[lane] += sample.0[lane] * sum[lane];
            }
        }
        for lane in 0..LANES {
            largest[lane] = largest[lane].max(square[lane] * length * length);
        }
    }
    (2.0 * largest.into_iter().fold(0.0, f64::max)).sqrt()
}

/// The square of the Frobenius norm of H without its trace, as a form of 1 and the samples.
pub(super) fn norm_form(system: &Controlled) -> Vec<Vec<f64>> {
    let all: Vec<Matrix> = std::iter::once(&system.statics).chain(&system.controls).map(without_trace).collect();
    all.iter().map(|a| all.iter().map(|b| a.dotc(b).re).collect()).collect()
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
    form: Vec<Vec<f64>>,
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
            form: norm_form(system),
            packed: vec![Eight::all(0.0); system.samples()],
            by_samples: Vec::new(),
        }
    }

    /// The gradients of up to eight sets, each slice halved `finer` times more than is needed, and how far their eigenvalues spread.
    fn block(&mut self, sets: &[&[f64]], finer: u32) -> Result<(Vec<Gradient>, f64), GradientFault> {
        // missing sets repeat the last one
        for lane in 0..LANES {
            for (eight, sample) in self.packed.iter_mut().zip(sets[lane.min(sets.len() - 1)]) {
                eight.0[lane] = *sample;
            }
        }
        let spread = largest_spread(&self.form, &self.system.lengths_s, &self.packed);
        let needed = self.kernel.halvings(spread);
        if needed > MOST_HALVINGS {
            return Err(GradientFault::TooStrong(spread));
        }
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
        Ok(((0..sets.len()).map(gradient).collect(), spread))
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

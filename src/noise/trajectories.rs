//! The mean of quantum trajectories, for systems too large for a density matrix: as many as it takes until the standard error of
//! every recorded number is within the accuracy. Numbers do not depend on the number of threads.
//!
//! A part of the trajectories is run at both resolutions with the same random numbers: the mean of their differences is the change
//! under refinement. No fewer than 1/accuracy are run, so that what happens once in so many can show.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::Mutex;
use std::time::Instant as Clock;

use super::statistics::Sample;
use super::Draws;
use crate::config::document::Document;
use crate::config::messages::{Fault, Mistake, OpenFault};
use crate::measure::{observables, Observables, Recorded, TraceRecorder};
use crate::outcome::{self, Average, Measured, Outcome};
use crate::plan::Point;
use crate::problem::{Matrix, Problem, Start};
use crate::propagate::{figure, CrossCheck, Fine, Resolution, Solved, Trajectories, LARGEST_DENSITY};
use crate::random::Stream;

/// Trajectories that are summed by themselves before they are joined with the others.
const BLOCK: u64 = 32;
/// Least number of them.
const FIRST: u64 = 256;
/// Trajectories that are run at both resolutions.
const REFINED: u64 = 256;
/// Most of them.
const MOST: f64 = 1e6;
/// The cause of random numbers that trajectories are, beside those of noise.
const KIND: u64 = u64::MAX;

/// Whether a point is computed by trajectories.
pub fn wanted(problem: &Problem) -> bool {
    problem.dim() > LARGEST_DENSITY && problem.jumps.iter().any(|jump| jump.rate_per_s > 0.0)
}

/// Computes a point by trajectories; `noise` is whether noise would act, which has no place here.
pub fn compute(document: &Document, point: &Point, draws: &Draws, noise: bool) -> Result<Outcome, Mistake> {
    let clock = Clock::now();
    let refuse = |fault: OpenFault| Err(Mistake::error(document.record.place, Fault::Open(fault)));
    if noise && !document.noise.is_empty() {
        return refuse(OpenFault::NotByTrajectories { what: "noise", levels: point.problem().dim() });
    }
    let problem = point.problem();
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    if observables.demand.propagator {
        return refuse(OpenFault::NotByTrajectories { what: "gate", levels: problem.dim() });
    }
    let scales: Vec<f64> = observables.columns().iter().map(|column| column.scale).collect();
    let accuracy = document.accuracy.last;
    let fineness = Fine::pair(accuracy);
    let job = Job { problem, observables: &observables, scales: &scales, seed: document.accuracy.seed, draws, fineness };
    let mut total = Total::default();
    let mut count = (1.0 / accuracy).ceil().clamp(FIRST as f64, MOST) as u64;
    loop {
        let done = total.sample.count;
        total = job.pass(done..count, total);
        let error = total.largest_error();
        if error <= accuracy {
            break;
        }
        // rather some more than to look again and again
        let needed = 1.02 * total.sample.count as f64 * (error / accuracy).powi(2);
        if needed > MOST {
            return refuse(OpenFault::TooManyTrajectories { needed, limit: MOST, accuracy, reach: error * (count as f64 / MOST).sqrt() });
        }
        count = (needed.ceil() as u64).max(count + BLOCK).next_multiple_of(BLOCK);
    }
    let measured = job.conclude(total, accuracy, document.accuracy.cross_check);
    Ok(outcome::conclude(document, point, measured, clock))
}

/// What all trajectories have in common.
struct Job<'a> {
    problem: &'a Problem,
    observables: &'a Observables<'a>,
    scales: &'a [f64],
    seed: u64,
    draws: &'a Draws,
    fineness: [Fine; 2],
}

/// Sums over trajectories: numbers with the density matrix at the end, and differences of the numbers under refinement.
#[derive(Debug, Clone, Default)]
struct Total {
    sample: Sample,
    apart: Sample,
    steps: u64,
    numbers: usize,
    in_rows: usize,
}

impl Total {
    fn join(&mut self, other: &Total) {
        self.sample.join(&other.sample);
        self.apart.join(&other.apart);
        self.steps += other.steps;
        (self.numbers, self.in_rows) = (other.numbers, other.in_rows);
    }

    /// One standard error of each number. What never showed in N trajectories may still happen once in N.
    fn errors(&self) -> Vec<f64> {
        let least = 1.0 / self.sample.count.max(1) as f64;
        self.sample.standard_errors().into_iter().take(self.numbers).map(|error| error.max(least)).collect()
    }

    fn largest_error(&self) -> f64 {
        self.errors().into_iter().fold(0.0, f64::max)
    }
}

/// Blocks that are done, joined in their order.
#[derive(Default)]
struct Merger {
    next: u64,
    waiting: BTreeMap<u64, Total>,
    total: Total,
}

impl Merger {
    fn take(&mut self, block: u64, done: Total) {
        self.waiting.insert(block, done);
        while let Some(done) = self.waiting.remove(&self.next) {
            self.next += 1;
            self.total.join(&done);
        }
    }
}

impl Job<'_> {
    /// Runs the trajectories of a range and adds them to a sum.
    fn pass(&self, range: Range<u64>, total: Total) -> Total {
        let blocks = (range.end - range.start).div_ceil(BLOCK);
        let next = AtomicU64::new(0);
        let merger = Mutex::new(Merger { total, ..Merger::default() });
        let work = || {
            let mut runner = Trajectories::new(self.problem, &self.observables.demand);
            loop {
                let block = next.fetch_add(1, Ordering::Relaxed);
                if block >= blocks {
                    return;
                }
                let from = range.start + block * BLOCK;
                let done = self.block(&mut runner, from..(from + BLOCK).min(range.end));
                if let Ok(mut merger) = merger.lock() {
                    merger.take(block, done);
                }
            }
        };
        let threads = (self.draws.threads.max(1) as u64).min(blocks);
        if threads <= 1 {
            work();
        } else {
            std::thread::scope(|scope| {
                for _ in 0..threads {
                    scope.spawn(work);
                }
            });
        }
        merger.into_inner().unwrap_or_default().total
    }

    fn block(&self, runner: &mut Trajectories, numbers: Range<u64>) -> Total {
        let mut total = Total::default();
        let before = runner.steps();
        for number in numbers {
            let mut once = |fine: &Fine| {
                let mut recorder = TraceRecorder::new(self.observables, self.problem, self.scales);
                runner.run(&mut Stream::new(self.seed, KIND, self.draws.family, number), fine, &mut recorder);
                recorder.done()
            };
            let recorded = once(&self.fineness[0]);
            if number < REFINED {
                let finer = once(&self.fineness[1]);
                let apart: Vec<f64> = finer.numbers.iter().zip(&recorded.numbers).map(|(fine, coarse)| fine - coarse).collect();
                total.apart.take(&apart);
            }
            (total.numbers, total.in_rows) = (recorded.numbers.len(), recorded.in_rows);
            let mut vector = recorded.numbers;
            if let Some(end) = &recorded.end_state {
                vector.extend(end.density().iter().flat_map(|entry| [entry.re, entry.im]));
            }
            total.sample.take(&vector);
        }
        total.steps = runner.steps() - before;
        total
    }

    fn conclude(&self, total: Total, accuracy: f64, check: bool) -> Measured {
        let dim = self.problem.dim();
        let (numbers, end) = total.sample.mean.split_at(total.numbers);
        let density = Matrix::from_iterator(dim, dim, end.chunks_exact(2).map(|pair| num_complex::Complex64::new(pair[0], pair[1])));
        let recorded =
            Recorded { numbers: numbers.to_vec(), in_rows: total.in_rows, end_state: Some(Start::Mixed(density)), ..Recorded::default() };
        let finer: Vec<f64> = numbers.iter().zip(&total.apart.mean).map(|(mean, apart)| mean + apart).collect();
        // rounding of the amplitudes of one trajectory
        let floor = 64.0 * f64::EPSILON;
        let error_figure = numbers.iter().zip(&finer).map(|(a, b)| figure(*a, *b, floor)).fold(floor, f64::max);
        let sampling_error = total.largest_error();
        let sampling = total.errors();
        let count = total.sample.count;
        let resolution =
            |fine: &Fine, count: u64| Resolution { words: format!("{count} trajectories, {}", fine.words()), steps: total.steps };
        let solved = Solved {
            resolved: None,
            finer: Recorded { numbers: finer, in_rows: total.in_rows, ..Recorded::default() },
            recorded,
            method: Trajectories::new(self.problem, &self.observables.demand).method(),
            reason: format!("jumps among {dim} levels: more than {LARGEST_DENSITY}, so pure states that jump at random are averaged"),
            resolutions: [resolution(&self.fineness[0], count), resolution(&self.fineness[1], count.min(REFINED))],
            error_figure,
            floor,
            reached: error_figure <= accuracy && sampling_error <= accuracy,
            cross_check: check.then(|| CrossCheck::Skipped {
                method: "Runge-Kutta 8(5,3) of another library on the whole density matrix".to_string(),
                reason: format!("a density matrix of {dim} levels is too large"),
            }),
            steps: total.steps,
            products: 12 * total.steps,
        };
        let average = Average {
            words: format!("{count} quantum trajectories"),
            runs: count,
            draws: count,
            sampling,
            sampling_error: Some(sampling_error),
            until_accurate: true,
            ..Average::default()
        };
        Measured { solved, average: Some(average) }
    }
}

#[cfg(test)]
mod tests {
    use std::path::Path;

    use super::*;
    use crate::config::document;
    use crate::plan::Plan;

    /// A chain of 26 levels that decay one into the next at 2 /us.
    fn outcome(accuracy: f64, seed: u64, threads: usize) -> Result<Outcome, Mistake> {
        let levels: Vec<String> = (0..26).map(|k| format!("{k}: {k} MHz")).collect();
        let decays: String = (1..26).map(|k| format!("  - {{from: {k}, to: {}, rate: 2 /us}}\n", k - 1)).collect();
        let text = format!(
            "format: 1\nsystem:\n  levels: {{{}}}\nsequence:\n  - wait: 1 us\ndecay:\n{decays}start: 25\n\
             record: {{at: [1 us], populations: all, time_in: [25]}}\naccuracy: {{final: {accuracy:e}, seed: {seed}}}\n",
            levels.join(", ")
        );
        let document = document::read_str("chain", &text, Path::new(""), &[]).unwrap_or_else(|refusal| panic!("{}", refusal.text()));
        let plan = Plan::new(document);
        let point = plan.point()?;
        super::super::compute(plan.document(), &point, &Draws { threads, ..Draws::default() })
    }

    /// The same numbers for any number of threads, others for another seed; right within five standard errors: the jumps so far
    /// follow Poisson's law (S. D. Poisson, Recherches sur la probabilite des jugements (1837)).
    #[test]
    fn exact_chain_by_any_number_of_threads() {
        let one = outcome(0.02, 4, 1).expect("runs");
        let three = outcome(0.02, 4, 3).expect("runs");
        assert_eq!(one.rows, three.rows);
        assert_ne!(one.rows, outcome(0.02, 5, 3).expect("runs").rows);
        assert!(one.reached && one.sampling_error().is_some_and(|error| error <= 0.02));
        let mut expected = (-2.0f64).exp();
        for jumps in 0..8 {
            let found = one.finals[25 - jumps].value;
            assert!((found - expected).abs() < 0.1, "{jumps} jumps: {found} against {expected}");
            expected *= 2.0 / (jumps as f64 + 1.0);
        }
    }

    /// More than a million trajectories are refused, with their number.
    #[test]
    fn prop_too_many_are_refused() {
        match outcome(1e-4, 0, 1).map_err(|mistake| mistake.fault) {
            Err(Fault::Open(OpenFault::TooManyTrajectories { needed, .. })) => assert!(needed > 1e7 && needed < 1e8, "{needed:e}"),
            other => panic!("{:?}", other.map(|outcome| outcome.error_figure)),
        }
    }
}

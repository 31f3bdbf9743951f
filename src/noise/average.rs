//! The average over noise: many runs, summed in a fixed order.
//!
//! Causes with a rule of nodes make a grid; causes that are drawn at random share the number of the draw; each draw sees the whole
//! grid. The result is the mean of the coarser runs, held against the mean of the finer ones as for a single run. What a rule of n
//! nodes leaves is measured by a rule of 3n/2 + 1 and added to the error figure: it grows with time. What a random sample leaves is
//! given by itself, as one standard error of the mean.

mod batch;

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::sync::Mutex;
use std::time::Instant as Clock;

use self::batch::Batch;
use super::grid::Grid;
use super::path::{Paths, Worker};
use super::source::{sources, Source, Time};
use super::statistics::{add, Groups, Sample};
use crate::bundle::Runs;
use crate::config::document::Document;
use crate::config::messages::{Fault, Mistake};
use crate::config::noise::Rule;
use crate::config::run::Threads;
use crate::measure::{observables, Observables, Recorded, Whole};
use crate::outcome::{self, Average, Measured, Outcome};
use crate::plan::shaken::Shaken;
use crate::plan::Point;
use crate::problem::{Channel, Matrix, Problem, Start};
use crate::propagate::{figure, CrossCheck, Resolution, Solved};
use crate::random::Stream;

/// Draws, or nodes of a grid without draws, that are summed by themselves before they are joined with the others.
const BLOCK: u64 = 16;
/// Draws before the first look at the sampling error.
const FIRST_DRAWS: u64 = 256;
/// Most draws that `until accurate` takes.
const MOST_DRAWS: f64 = 1e6;
/// Most cells into which a shot is cut.
const MOST_CELLS: usize = 200_000;
/// The error of the coarser cells over the change that their halving makes: their error is of second order, so 4/3 and a fifth more.
const CELL_FACTOR: f64 = 1.6;
/// Fewest runs for which the search for a number of steps is worth while, and runs that it looks at.
const FEWEST_TOGETHER: f64 = 48.0;
const SAMPLES: u64 = 6;
/// Most runs of an average.
const MOST_RUNS: f64 = 1e7;

/// How the draws are made.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Draws {
    /// Threads that share the runs; the numbers do not depend on it.
    pub threads: usize,
    /// Which family of draws: points of a scan that have the same see the same draws.
    pub family: u64,
}

impl Draws {
    /// With as many threads as a config asks for, the first family.
    pub fn of(document: &Document) -> Draws {
        match document.run.threads {
            Threads::Count(threads) => Draws { threads, family: 0 },
            Threads::All | Threads::FromScheduler => Draws::default(),
        }
    }
}

impl Default for Draws {
    /// All cores, the first family.
    fn default() -> Draws {
        Draws { threads: std::thread::available_parallelism().map_or(1, usize::from), family: 0 }
    }
}

/// Computes a point, averaged over the noise of its document if it has any.
pub fn compute<'p>(document: &'p Document, point: &Point<'p>, draws: &Draws) -> Result<Outcome, Mistake> {
    let outcome = plain(document, point, draws, true)?;
    let shares = super::budget::shares(document, point, draws, &outcome)?;
    Ok(outcome.with_budget(document, shares))
}

/// Whether the numbers of a point are means over runs: of noise, or of quantum trajectories.
pub fn is_average(document: &Document, point: &Point) -> bool {
    !document.noise.is_empty() || super::trajectories::wanted(point.problem())
}

/// The same without an error budget; `noise` is whether noise acts.
pub(super) fn plain<'p>(document: &'p Document, point: &Point<'p>, draws: &Draws, noise: bool) -> Result<Outcome, Mistake> {
    if super::trajectories::wanted(point.problem()) {
        return super::trajectories::compute(document, point, draws, noise);
    }
    if document.noise.is_empty() || !noise {
        return Ok(outcome::compute(document, point));
    }
    let clock = Clock::now();
    let mut job = Job::new(document, point, draws)?;
    job.judge_times()?;
    let measured = job.average()?;
    Ok(outcome::conclude(document, job.calm.point(), measured, clock))
}

/// Everything that the runs of one average have in common.
struct Job<'p> {
    document: &'p Document,
    draws: Draws,
    sources: Vec<Source>,
    gridded: Vec<usize>,
    /// Drawn once a shot.
    drawn: Vec<usize>,
    /// Wandering within a shot.
    wandering: Vec<usize>,
    /// The cells on which they do, and what they do there; none where nothing wanders.
    paths: Option<Paths>,
    /// Eight runs at a time, where they can be laid side by side.
    together: Option<Runs>,
    /// The point without noise.
    calm: Shaken<'p>,
    warnings: Vec<Mistake>,
}

impl<'p> Job<'p> {
    fn new(document: &'p Document, point: &Point<'p>, draws: &Draws) -> Result<Job<'p>, Mistake> {
        let sources = sources(document, &point.values);
        let numbers: Vec<u32> = sources.iter().flat_map(Source::numbers).collect();
        let (gridded, random): (Vec<usize>, Vec<usize>) =
            (0..sources.len()).partition(|k| matches!(sources[*k].rule, Rule::Gauss { .. } | Rule::Listed));
        let (drawn, wandering) = random.into_iter().partition(|k| sources[*k].time == Time::Slow);
        let calm = Shaken::new(document, point, &numbers);
        Ok(Job { document, draws: *draws, sources, gridded, drawn, wandering, paths: None, together: None, calm, warnings: Vec::new() })
    }

    /// Causes that are drawn at random.
    fn random(&self) -> impl Iterator<Item = &Source> + '_ {
        self.drawn.iter().chain(&self.wandering).map(|k| &self.sources[*k])
    }

    /// Where noise moves the length of the sequence, its shots have no times in common: then the end alone is recorded.
    fn judge_times(&mut self) -> Result<(), Mistake> {
        let mut moved = Vec::new();
        let times = |point: &Point| -> Vec<f64> { point.problem().moments.iter().map(|moment| moment.time_s).collect() };
        let written = times(self.calm.point());
        for source in &self.sources {
            let mut probe = self.calm.clone();
            let somewhere = source.nodes(2).into_iter().map(|(draw, _)| draw);
            for draw in somewhere {
                let amounts: Vec<(u32, f64)> = source.amounts(draw).collect();
                if times(probe.by(&amounts)?) != written && !moved.contains(&source.names.join(", ")) {
                    moved.push(source.names.join(", "));
                }
            }
        }
        if !moved.is_empty() {
            self.calm.only_the_end()?;
            self.warnings.push(Mistake::warning(self.document.record.place, Fault::NoiseMovesEnd { names: moved.join(", ") }));
        }
        Ok(())
    }

    /// How many draws are asked for at least, and whether they go on until the accuracy is met.
    fn draws_asked(&self) -> (u64, bool) {
        let mut count = 0;
        let mut until = false;
        for source in self.random() {
            match source.rule {
                Rule::Random { draws, .. } => count = count.max(draws as u64),
                Rule::UntilAccurate { .. } => until = true,
                Rule::Gauss { .. } | Rule::Listed => {}
            }
        }
        (if until { count.max(FIRST_DRAWS) } else { count }, until)
    }

    fn average(&mut self) -> Result<Measured, Mistake> {
        let grid = Grid::new(&self.sources, &self.gridded, |points| points);
        let (mut count, until) = self.draws_asked();
        let runs = grid.len() as f64 * count.max(1) as f64;
        if runs > MOST_RUNS {
            return Err(self.too_many(runs, count > 0));
        }
        let mut parts = self.settle_cells(&grid, count, until)?;
        self.lay_together(&grid, count)?;
        let mut total = self.pass(&grid, 0..count)?;
        // what the first draws promised need not hold for all
        while self.wants_finer_cells(&total) {
            match self.new_paths(2 * parts) {
                Ok(paths) if paths.count() <= MOST_CELLS => self.paths = Some(paths),
                _ => break,
            }
            parts *= 2;
            total = self.pass(&grid, 0..count)?;
        }
        let first = total.first.clone();
        loop {
            let error = largest(&total.sample.standard_errors());
            if !until || error <= self.document.accuracy.last || !total.notes.sound {
                break;
            }
            let needed = 1.03 * count as f64 * (error / self.document.accuracy.last).powi(2);
            if needed > MOST_DRAWS || needed * grid.len() as f64 > MOST_RUNS {
                return Err(self.too_many(needed * grid.len() as f64, true));
            }
            let next = (needed as u64).clamp(count + BLOCK, 64 * count).next_multiple_of(BLOCK);
            let more = self.pass(&grid, count..next)?;
            total.join(more);
            count = next;
        }
        let refined = self.refined(&grid, count, if count > 0 { &first } else { &total.sum })?;
        Ok(self.conclude(&grid, count, until, total, refined))
    }

    /// Chooses how finely the wandering is followed: so that what half the cells would change is below the accuracy, judged by the
    /// first draws.
    fn settle_cells(&mut self, grid: &Grid, count: u64, until: bool) -> Result<u32, Mistake> {
        if self.wandering.is_empty() {
            return Ok(1);
        }
        let accuracy = self.document.accuracy.last;
        let draws = if until { (0.25 / (accuracy * accuracy)).min(MOST_DRAWS) } else { count as f64 };
        let mut parts = 1;
        self.paths = Some(self.new_paths(parts)?);
        for _ in 0..6 {
            let total = self.pass(grid, 0..count.min(BLOCK))?;
            let n = total.apart.count as f64;
            // what is common to all shots stays, what differs between them averages out
            let left = |(mean, spread): (&f64, f64)| {
                let deviation = spread * n.sqrt();
                (mean.abs() - 2.0 * spread).max(0.0) + 2.0 * deviation / draws.sqrt()
            };
            let spreads = total.apart.standard_errors();
            let error = CELL_FACTOR * total.apart.mean.iter().zip(spreads).map(left).fold(0.0, f64::max);
            let excess = error / (0.7 * accuracy).max(2.0 * total.notes.floor);
            let doublings = (0.5 * excess.log2()).ceil();
            if !(excess > 1.0) || !doublings.is_finite() {
                break;
            }
            let finer = parts << (doublings as u32).clamp(1, 6);
            match self.new_paths(finer) {
                Ok(paths) if paths.count() <= MOST_CELLS => {
                    parts = finer;
                    self.paths = Some(paths);
                }
                _ => break,
            }
        }
        Ok(parts)
    }

    /// Whether the cells of a whole sample leave more than the accuracy.
    fn wants_finer_cells(&self, total: &Total) -> bool {
        let Some(paths) = &self.paths else { return false };
        let largest =
            total.apart.mean[..total.notes.numbers.min(total.apart.mean.len())].iter().map(|apart| apart.abs()).fold(0.0, f64::max);
        CELL_FACTOR * largest > self.document.accuracy.last.max(2.0 * total.notes.floor) && paths.count() < MOST_CELLS && total.notes.sound
    }

    /// Lays runs side by side, where there are many and they allow it.
    fn lay_together(&mut self, grid: &Grid, count: u64) -> Result<(), Mistake> {
        if (grid.len() as f64) * (count.max(1) as f64) < FEWEST_TOGETHER {
            return Ok(());
        }
        // pure states without cells go as fast by themselves (our own measurements: 50 us a run)
        if self.paths.is_none() && !self.calm.point().problem().is_open() {
            return Ok(());
        }
        let mut worker = Worker::new(&self.calm);
        let mut samples = Vec::new();
        for k in 0..SAMPLES {
            let drawn = self.drawn_of(&mut worker, k);
            // nodes all over the grid
            let mut amounts = drawn;
            grid.node(&self.sources, k * (grid.len() - 1) / (SAMPLES - 1), &mut amounts);
            let [whole, _] = self.problems(&mut worker, &amounts)?;
            samples.push(whole);
        }
        self.together = Runs::new(self.document, self.calm.point(), &samples).ok();
        Ok(())
    }

    /// What the causes drawn once a shot add in a draw; its paths go to the worker.
    fn drawn_of(&self, worker: &mut Worker<'p>, draw: u64) -> Vec<(u32, f64)> {
        let mut drawn = Vec::new();
        for source in self.drawn.iter().map(|k| &self.sources[*k]) {
            let (Rule::Random { seed, .. } | Rule::UntilAccurate { seed }) = source.rule else { continue };
            let mut stream = Stream::new(seed, source.kind, self.draws.family, draw);
            drawn.extend(source.amounts(source.draw(&mut stream)));
        }
        worker.paths = self.paths.as_ref().map(|paths| self.path(paths, draw));
        drawn
    }

    /// The problems of a run at both resolutions.
    fn problems(&self, worker: &mut Worker<'p>, amounts: &[(u32, f64)]) -> Result<[Problem; 2], Mistake> {
        match &self.paths {
            None => {
                let problem = worker.shaken.by(amounts)?.problem();
                Ok([problem.clone(), problem.clone()])
            }
            Some(paths) => {
                let slow = !self.gridded.is_empty() || !self.drawn.is_empty();
                worker.problems(&self.sources, &self.wandering, paths, slow.then_some(amounts))
            }
        }
    }

    fn new_paths(&self, parts: u32) -> Result<Paths, Mistake> {
        Paths::new(&self.calm, &self.sources, &self.wandering, parts)
    }

    fn too_many(&self, runs: f64, draws: bool) -> Mistake {
        let gridded = self.gridded.iter().map(|k| &self.sources[*k]);
        let place = self.random().chain(gridded).map(|source| source.rule_place).next().unwrap_or_default();
        Mistake::error(place, Fault::TooManyRuns { runs, limit: if draws { MOST_DRAWS } else { MOST_RUNS }, draws })
    }

    /// What half as many nodes more make of the averages; none without a rule.
    fn refined(&self, grid: &Grid, count: u64, rough: &[f64]) -> Result<Option<Refined>, Mistake> {
        if !self.gridded.iter().any(|k| matches!(self.sources[*k].rule, Rule::Gauss { .. })) {
            return Ok(None);
        }
        let mut finer = Grid::new(&self.sources, &self.gridded, |points| (3 * points).div_ceil(2) + 1);
        let runs = finer.len() as f64 * count.clamp(1, BLOCK) as f64;
        if runs > MOST_RUNS {
            return Err(self.too_many(runs + grid.len() as f64, false));
        }
        let total = match self.pass(&finer, 0..count.min(BLOCK)) {
            Ok(total) => total,
            Err(mistake) => {
                // nodes further out may make no run; then the change from fewer nodes says more than enough
                finer = Grid::new(&self.sources, &self.gridded, |points| (2 * points).div_ceil(3).min(points.saturating_sub(1).max(1)));
                if finer.len() == grid.len() {
                    return Err(mistake);
                }
                self.pass(&finer, 0..count.min(BLOCK))?
            }
        };
        let of = |total: Total| if count > 0 { total.first } else { total.sum };
        let sizes = total.notes.numbers;
        let fine = of(total);
        // where the rule is far from done the next one is too, and single numbers may agree by chance: then a third one is asked
        let apart = rough.iter().zip(&fine).take(sizes).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        let mut finest = None;
        if apart > self.document.accuracy.last {
            let third = Grid::new(&self.sources, &self.gridded, |points| 3 * points + 2);
            if (third.len() as f64) < 0.1 * MOST_RUNS / count.clamp(1, BLOCK) as f64 {
                finest = self.pass(&third, 0..count.min(BLOCK)).ok().map(of);
            }
        }
        Ok(Some(Refined { rough: rough.to_vec(), fine, finest, grid: finer }))
    }

    /// Runs the draws of a range (none: the grid alone) and sums them.
    fn pass(&self, grid: &Grid, range: std::ops::Range<u64>) -> Result<Total, Mistake> {
        let drawn = !range.is_empty();
        let (from, until) = if drawn { (range.start, range.end) } else { (0, grid.len()) };
        let blocks = (until - from).div_ceil(BLOCK);
        let next = AtomicU64::new(0);
        let stop = AtomicBool::new(false);
        let merger = Mutex::new(Merger::default());
        let work = || {
            let mut worker = Worker::new(&self.calm);
            loop {
                let block = next.fetch_add(1, Ordering::Relaxed);
                if block >= blocks || stop.load(Ordering::Relaxed) {
                    return;
                }
                let (start, end) = (from + block * BLOCK, (from + (block + 1) * BLOCK).min(until));
                let done = if drawn {
                    self.block_of_draws(&mut worker, grid, start..end)
                } else {
                    self.block_of_nodes(&mut worker, grid, start..end)
                };
                if done.is_err() {
                    stop.store(true, Ordering::Relaxed);
                }
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
        merger.into_inner().unwrap_or_default().total()
    }

    fn block_of_draws(&self, worker: &mut Worker<'p>, grid: &Grid, draws: std::ops::Range<u64>) -> Result<Total, Mistake> {
        let mut total = Total::default();
        let (mut coarse, mut fine, mut check) = (Vec::new(), Vec::new(), Vec::new());
        let mut batch = Batch::new(self);
        let mut weights = Vec::new();
        for draw in draws {
            let drawn = self.drawn_of(worker, draw);
            for node in 0..grid.len() {
                let mut amounts = drawn.clone();
                weights.push(grid.node(&self.sources, node, &mut amounts));
                batch.push(worker, &amounts, &mut total.notes)?;
            }
        }
        let ran: Vec<(Ran, f64)> = batch.done(worker, &mut total.notes)?.into_iter().zip(weights).collect();
        for of_draw in ran.chunks(grid.len() as usize) {
            [&mut coarse, &mut fine, &mut check].into_iter().for_each(Vec::clear);
            for (ran, weight) in of_draw {
                add(&mut coarse, &ran.coarse, *weight);
                add(&mut fine, &ran.fine, *weight);
                add(&mut check, &ran.check, *weight);
            }
            total.sample.take(&coarse);
            total.groups.take(&coarse[total.notes.before_channel(&coarse)..]);
            total.fine.take(&fine);
            total.check.take(&check);
            if self.paths.is_some() {
                let apart: Vec<f64> = coarse.iter().zip(&fine).map(|(a, b)| a - b).collect();
                total.apart.take(&apart);
            }
        }
        total.first.clone_from(&total.sample.mean);
        Ok(total)
    }

    fn block_of_nodes(&self, worker: &mut Worker<'p>, grid: &Grid, nodes: std::ops::Range<u64>) -> Result<Total, Mistake> {
        let mut total = Total::default();
        let mut batch = Batch::new(self);
        let mut weights = Vec::new();
        for node in nodes {
            let mut amounts = Vec::new();
            weights.push(grid.node(&self.sources, node, &mut amounts));
            batch.push(worker, &amounts, &mut total.notes)?;
        }
        for (ran, weight) in batch.done(worker, &mut total.notes)?.into_iter().zip(weights) {
            add(&mut total.sum, &ran.coarse, weight);
            add(&mut total.sum_fine, &ran.fine, weight);
            add(&mut total.sum_check, &ran.check, weight);
        }
        Ok(total)
    }

    /// One run at both resolutions.
    fn run(&self, worker: &mut Worker<'p>, amounts: &[(u32, f64)], notes: &mut Notes) -> Result<Ran, Mistake> {
        let solved = match &self.paths {
            None => {
                let point = worker.shaken.by(amounts)?;
                outcome::measure(self.document, point, point.problem(), true)
            }
            Some(paths) => {
                let slow = !self.gridded.is_empty() || !self.drawn.is_empty();
                let [whole, halves] = worker.problems(&self.sources, &self.wandering, paths, slow.then_some(amounts))?;
                return Ok(self.alone(worker.shaken.point(), &whole, &halves, notes));
            }
        };
        Ok(ran(&solved, notes))
    }

    /// One run whose problems stand already, the second that of half the cells, if there are any.
    fn alone(&self, point: &Point, whole: &Problem, halves: &Problem, notes: &mut Notes) -> Ran {
        let solved = outcome::measure(self.document, point, whole, true);
        if self.paths.is_none() {
            return ran(&solved, notes);
        }
        let finer = outcome::measure(self.document, point, halves, false);
        notes.take(&finer);
        ran(&Solved { finer: finer.finer, ..solved }, notes)
    }

    /// The paths of a draw: for each wandering cause its mean in every cell, of halves and of wholes.
    fn path(&self, paths: &Paths, draw: u64) -> [Vec<Vec<f64>>; 2] {
        let mut found = [Vec::new(), Vec::new()];
        for (source, process) in self.wandering.iter().map(|k| &self.sources[*k]).zip(paths.processes()) {
            let (Rule::Random { seed, .. } | Rule::UntilAccurate { seed }) = source.rule else { continue };
            let mut halves = Vec::with_capacity(paths.count());
            process.draw(&mut Stream::new(seed, source.kind, self.draws.family, draw), &mut halves);
            found[0].push(halves.chunks_exact(2).map(|pair| 0.5 * (pair[0] + pair[1])).collect());
            found[1].push(halves);
        }
        found
    }

    fn conclude(&self, grid: &Grid, count: u64, until: bool, total: Total, refined: Option<Refined>) -> Measured {
        let notes = total.notes;
        let drawn = count > 0;
        let (coarse, fine, check) =
            if drawn { (&total.sample.mean, &total.fine.mean, &total.check.mean) } else { (&total.sum, &total.sum_fine, &total.sum_check) };
        let judge = Judge::new(self.document, self.calm.point());
        let (recorded, finer) = (judge.judged(coarse, &notes), judge.judged(fine, &notes));
        let numbers = recorded.numbers.len();
        let mut of_finer_rule = Vec::new();
        let of_rule = refined.as_ref().map_or_else(Vec::new, |refined| {
            let (rough, finer) = (judge.judged(&refined.rough, &notes), judge.judged(&refined.fine, &notes));
            of_finer_rule = rough.numbers.iter().zip(&finer.numbers).map(|(rough, finer)| finer - rough).collect();
            // what is rounding of the sums is no error of the rule
            let error = |(a, b): (&f64, &f64)| Some(figure(*a, *b, 0.0)).filter(|error| *error > 2.0 * notes.floor).unwrap_or(0.0);
            let mut errors: Vec<f64> = rough.numbers.iter().zip(&finer.numbers).map(error).collect();
            if let Some(finest) = &refined.finest {
                let finest = judge.judged(finest, &notes);
                let further = rough.numbers.iter().zip(&finest.numbers).map(error);
                errors.iter_mut().zip(further).for_each(|(own, further)| *own = own.max(further));
            }
            errors
        });
        let mut besides: Vec<f64> = of_rule.clone();
        if let Some(paths) = &self.paths {
            besides.resize(numbers, 0.0);
            for (k, besides) in besides.iter_mut().enumerate() {
                *besides += (CELL_FACTOR - 1.2) * (recorded.numbers[k] - finer.numbers[k]).abs() + paths.bias();
            }
        }
        let mut sampling: Vec<f64> = if drawn { total.sample.standard_errors()[..numbers].to_vec() } else { Vec::new() };
        // figures of a gate are those of the averaged channel: nothing linear, so their errors are those of leaving draws out
        let last = |channel: &[f64]| judge.last(&channel_of(channel, &notes));
        for (error, spread) in sampling.iter_mut().skip(notes.in_rows).zip(total.groups.standard_errors(last)) {
            *error = spread;
        }
        let error = |k: usize| figure(recorded.numbers[k], finer.numbers[k], notes.floor) + besides.get(k).copied().unwrap_or(0.0);
        let error_figure = if notes.sound { (0..numbers).map(error).fold(notes.floor, f64::max) } else { f64::INFINITY };
        let sampling_error = drawn.then(|| largest(&sampling));
        let accuracy = self.document.accuracy.last;
        let mut warnings = self.warnings.clone();
        warnings.extend(refined.as_ref().and_then(|refined| self.revival(grid, &refined.grid, &of_rule, &notes)));
        if let Some(error) = sampling_error.filter(|error| !until && *error > accuracy) {
            let needed = count as f64 * (error / accuracy).powi(2);
            let fault = Fault::RoughAverage { draws: count as usize, sampling_error: error, accuracy, needed };
            let place = self.random().next().map_or_else(Default::default, |source| source.rule_place);
            warnings.push(Mistake::warning(place, fault));
        }
        let words = [self.words(grid, count), self.words(refined.as_ref().map_or(grid, |refined| &refined.grid), count)];
        let cross_check = notes.check.map(|(method, reason)| match reason {
            None => {
                // figures of a gate are not means of those of each run
                let linear = if notes.within.is_empty() { numbers } else { notes.in_rows };
                let difference = recorded.numbers.iter().zip(check).take(linear).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
                CrossCheck::Done { method, recorded: Recorded::default(), difference }
            }
            Some(reason) => CrossCheck::Skipped { method, reason },
        });
        let cells = self.paths.as_ref().map_or([String::new(), String::new()], |paths| {
            [paths.count() / 2, paths.count()].map(|count| format!(" in {count} cells of time"))
        });
        let resolutions =
            [0, 1].map(|k| Resolution { words: format!("{}{}, each with {}", words[k], cells[k], notes.words[k]), steps: notes.steps });
        let solved = Solved {
            resolved: None,
            reason: notes.reason,
            reached: error_figure <= accuracy && (!until || sampling_error.is_none_or(|error| error <= accuracy)),
            recorded,
            finer,
            method: notes.method.unwrap_or(crate::propagate::Method::ConstantSteps),
            resolutions,
            error_figure,
            floor: notes.floor,
            cross_check,
            steps: notes.steps,
            products: notes.products,
        };
        let average = Average {
            words: words[0].clone(),
            runs: grid.len() * count.max(1),
            draws: count,
            besides,
            of_finer_rule,
            sampling,
            sampling_error,
            until_accurate: until,
            warnings,
        };
        Measured { solved, average: Some(average) }
    }

    /// Where a rule of nodes leaves more than the accuracy within the trace, from when on.
    fn revival(&self, grid: &Grid, finer: &Grid, besides: &[f64], notes: &Notes) -> Option<Mistake> {
        let accuracy = self.document.accuracy.last;
        let moments = &self.calm.point().problem().moments;
        let wide = notes.in_rows / moments.len().max(1);
        let bad = besides.iter().position(|error| *error > accuracy)?;
        let row = if bad < notes.in_rows { bad / wide.max(1) } else { moments.len() - 1 };
        let from_s = if row == 0 { None } else { moments.get(row - 1).map(|moment| moment.time_s) };
        let more: Vec<String> = finer
            .counts()
            .iter()
            .filter(|(k, _)| matches!(self.sources[*k].rule, Rule::Gauss { .. }))
            .map(|(k, nodes)| format!("points: {}   (for {})", 2 * nodes, self.sources[*k].names.join(", ")))
            .collect();
        let fault = Fault::Revival { points: self.words(grid, 0), from_s, accuracy, write: more.join(", ") };
        let place = self.gridded.first().map_or_else(Default::default, |k| self.sources[*k].rule_place);
        Some(Mistake::warning(place, fault))
    }

    /// What is averaged over, in words.
    fn words(&self, grid: &Grid, draws: u64) -> String {
        let mut parts: Vec<String> = Vec::new();
        for (k, nodes) in grid.counts() {
            let kind = if matches!(self.sources[k].rule, Rule::Listed) { "values" } else { "Gauss nodes" };
            parts.push(format!("{nodes} {kind} of {}", self.sources[k].names.join(", ")));
        }
        if draws > 0 {
            let names: Vec<String> = self.random().flat_map(|source| source.names.clone()).collect();
            parts.push(format!("{draws} draws of {}", names.join(", ")));
        }
        parts.join(" and ")
    }
}

/// The averages over a rule and over one of half as many nodes more.
struct Refined {
    rough: Vec<f64>,
    fine: Vec<f64>,
    /// Of a third rule, where the first is not accurate.
    finest: Option<Vec<f64>>,
    grid: Grid,
}

/// Makes the figures of a gate from an averaged channel.
struct Judge<'a> {
    observables: Observables<'a>,
}

impl<'a> Judge<'a> {
    fn new(document: &Document, point: &'a Point) -> Judge<'a> {
        Judge { observables: observables(document, &point.built, &point.values, &point.energies_hz, point.problem()) }
    }

    /// The numbers of the whole sequence.
    fn last(&self, channel: &Channel) -> Vec<f64> {
        let mut numbers = Vec::new();
        for quantity in &self.observables.last {
            quantity.see(Whole::Channel(channel), &mut numbers);
        }
        numbers
    }

    /// What an averaged vector stands for, its figures made anew.
    fn judged(&self, vector: &[f64], notes: &Notes) -> Recorded {
        let mut recorded = restored(vector, notes);
        if let Some(channel) = &recorded.channel {
            recorded.numbers.truncate(recorded.in_rows);
            recorded.numbers.extend(self.last(channel));
        }
        recorded
    }
}

fn largest(errors: &[f64]) -> f64 {
    errors.iter().copied().fold(0.0, f64::max)
}

/// Numbers of one run, then the density matrix at its end, then the images of the channel.
struct Ran {
    coarse: Vec<f64>,
    fine: Vec<f64>,
    check: Vec<f64>,
}

/// What a run by itself gives.
fn ran(solved: &Solved<Recorded>, notes: &mut Notes) -> Ran {
    notes.take(solved);
    let check = match &solved.cross_check {
        Some(CrossCheck::Done { recorded, .. }) => recorded.numbers.clone(),
        _ => Vec::new(),
    };
    Ran { coarse: flat(&solved.recorded), fine: flat(&solved.finer), check }
}

fn flat(recorded: &Recorded) -> Vec<f64> {
    let mut vector = recorded.numbers.clone();
    if let Some(end) = &recorded.end_state {
        vector.extend(end.density().iter().flat_map(|entry| [entry.re, entry.im]));
    }
    if let Some(channel) = &recorded.channel {
        vector.extend(channel.images.iter().flat_map(|image| image.iter().flat_map(|entry| [entry.re, entry.im])));
    }
    vector
}

fn restored(vector: &[f64], notes: &Notes) -> Recorded {
    let (before, channel) = vector.split_at(notes.before_channel(vector));
    let (numbers, density) = before.split_at(notes.numbers.min(before.len()));
    let end_state = matrices(density, 1).pop().map(Start::Mixed);
    let channel = (!channel.is_empty()).then(|| channel_of(channel, notes));
    Recorded { numbers: numbers.to_vec(), in_rows: notes.in_rows, end_state, propagator: None, channel }
}

fn channel_of(vector: &[f64], notes: &Notes) -> Channel {
    Channel { within: notes.within.clone(), images: matrices(vector, notes.within.len().pow(2)) }
}

/// So many square matrices, real and imaginary parts side by side.
fn matrices(vector: &[f64], count: usize) -> Vec<Matrix> {
    let dim = ((vector.len() / 2 / count.max(1)) as f64).sqrt().round() as usize;
    let matrix = |entries: &[f64]| {
        let pairs = entries.chunks_exact(2).map(|pair| num_complex::Complex64::new(pair[0], pair[1]));
        Matrix::from_iterator(dim, dim, pairs)
    };
    vector.chunks_exact((2 * dim * dim).max(1)).map(matrix).collect()
}

/// What is known of the runs beside their numbers.
#[derive(Debug, Clone, Default)]
struct Notes {
    method: Option<crate::propagate::Method>,
    reason: String,
    words: [String; 2],
    steps: u64,
    products: u64,
    floor: f64,
    /// Whether every run gave numbers.
    sound: bool,
    numbers: usize,
    in_rows: usize,
    /// Levels of the channel that is averaged; empty where no gate is judged.
    within: Vec<usize>,
    /// Second route: its method, and why it was not made.
    check: Option<(String, Option<String>)>,
}

impl Notes {
    /// Where in a flat vector the channel begins: behind the numbers and the density matrix at the end.
    fn before_channel(&self, vector: &[f64]) -> usize {
        let images = self.within.len().pow(2);
        let matrices = vector.len().saturating_sub(self.numbers);
        vector.len() - matrices / (1 + images) * images
    }

    fn take(&mut self, solved: &Solved<Recorded>) {
        let check = solved.cross_check.as_ref().map(|check| match check {
            CrossCheck::Done { method, .. } => (method.clone(), None),
            CrossCheck::Skipped { method, reason } => (method.clone(), Some(reason.clone())),
        });
        self.join(&Notes {
            method: Some(solved.method),
            reason: solved.reason.clone(),
            words: solved.resolutions.clone().map(|resolution| resolution.words),
            steps: solved.steps,
            products: solved.products,
            floor: solved.floor,
            sound: solved.error_figure.is_finite(),
            numbers: solved.recorded.numbers.len(),
            in_rows: solved.recorded.in_rows,
            within: solved.recorded.channel.as_ref().map_or_else(Vec::new, |channel| channel.within.clone()),
            check,
        });
    }

    /// Of a run that was made with others.
    fn take_together(&mut self, runs: &Runs, recorded: &Recorded) {
        self.join(&Notes {
            method: Some(crate::propagate::Method::Geometric),
            reason: "runs that differ in their numbers alone go eight at a time".to_string(),
            words: runs.words(),
            steps: runs.steps(),
            products: 0,
            floor: runs.floor(),
            sound: recorded.numbers.iter().all(|number| number.is_finite()),
            numbers: recorded.numbers.len(),
            in_rows: recorded.in_rows,
            within: recorded.channel.as_ref().map_or_else(Vec::new, |channel| channel.within.clone()),
            check: None,
        });
    }

    fn join(&mut self, other: &Notes) {
        if self.method.is_none() {
            self.clone_from(other);
            return;
        }
        self.steps += other.steps;
        self.products += other.products;
        self.floor = self.floor.max(other.floor);
        self.sound &= other.sound;
        if let (Some((_, reason @ None)), Some((_, Some(other)))) = (&mut self.check, &other.check) {
            *reason = Some(other.clone());
        }
    }
}

/// Sums of some runs: a sample of draws, or weighted sums over nodes.
#[derive(Debug, Clone, Default)]
struct Total {
    sample: Sample,
    fine: Sample,
    check: Sample,
    /// Coarse minus fine, where something wanders.
    apart: Sample,
    /// Channels of the draws, where a gate is judged.
    groups: Groups,
    sum: Vec<f64>,
    sum_fine: Vec<f64>,
    sum_check: Vec<f64>,
    /// Mean of the first block of draws.
    first: Vec<f64>,
    notes: Notes,
}

impl Total {
    fn join(&mut self, other: Total) {
        if self.notes.method.is_none() {
            *self = other;
            return;
        }
        self.sample.join(&other.sample);
        self.fine.join(&other.fine);
        self.check.join(&other.check);
        self.apart.join(&other.apart);
        self.groups.join(other.groups);
        add(&mut self.sum, &other.sum, 1.0);
        add(&mut self.sum_fine, &other.sum_fine, 1.0);
        add(&mut self.sum_check, &other.sum_check, 1.0);
        self.notes.join(&other.notes);
    }
}

/// Joins blocks in their order, whatever the order in which they are done.
#[derive(Default)]
struct Merger {
    next: u64,
    waiting: BTreeMap<u64, Result<Total, Mistake>>,
    total: Total,
    fault: Option<Mistake>,
}

impl Merger {
    fn take(&mut self, block: u64, done: Result<Total, Mistake>) {
        self.waiting.insert(block, done);
        while let Some(done) = self.waiting.remove(&self.next) {
            self.next += 1;
            match done {
                Ok(total) if self.fault.is_none() => self.total.join(total),
                Ok(_) => {}
                Err(fault) => {
                    self.fault.get_or_insert(fault);
                }
            }
        }
    }

    fn total(mut self) -> Result<Total, Mistake> {
        // a block that failed may stand behind one that was never begun
        let left = self.waiting.into_values().find_map(Result::err);
        match self.fault.take().or(left) {
            Some(fault) => Err(fault),
            None => Ok(self.total),
        }
    }
}

//! Shots in which numbers wander: the cells of a sequence, the processes on them, and the problems that a path makes.

use super::process::{Process, TooWide};
use super::source::{Draw, Source};
use crate::config::messages::{Fault, Mistake};
use crate::plan::shaken::Shaken;
use crate::plan::wander::{Cells, Wanderer};
use crate::problem::Problem;

/// Cells at both resolutions, and the processes on the finer ones.
#[derive(Debug)]
pub struct Paths {
    cells: [Cells; 2],
    processes: Vec<Process>,
    bias: f64,
}

impl Paths {
    /// On every stretch of a point cut into `parts`, and into twice as many.
    pub fn new(calm: &Shaken, sources: &[Source], wandering: &[usize], parts: u32) -> Result<Paths, Mistake> {
        let problem = calm.point().lab();
        let cells = [Cells::of(problem, parts), Cells::of(problem, 2 * parts)];
        let lengths_s = cells[1].lengths_s();
        let process = |source: &Source| {
            Process::new(&source.time, &lengths_s).map_err(|TooWide { turns, entries, limit }| {
                Mistake::error(source.rule_place, Fault::SpectrumTooWide { turns, nodes: entries, limit })
            })
        };
        let processes = wandering.iter().map(|k| process(&sources[*k])).collect::<Result<Vec<_>, _>>()?;
        let worst = processes.iter().map(Process::correlation_error).fold(0.0, f64::max);
        let numbers: Vec<(u32, f64)> = wandering.iter().flat_map(|k| sources[*k].deviations()).collect();
        let reach = Wanderer::new(calm, &numbers, cells[0].clone())?.reach_rad_s() * problem.length_s();
        // Of a Gaussian process with another correlation the mean of a probability differs by half the integral over both times
        // of the change of the correlation and the second derivative of the probability, which is at most four times the square
        // of what the number does to H.
        Ok(Paths { cells, processes, bias: 2.0 * worst * reach * reach })
    }

    /// Cells of the finer resolution.
    pub fn count(&self) -> usize {
        self.cells[1].count()
    }

    /// The processes, in the order of the wandering causes.
    pub fn processes(&self) -> &[Process] {
        &self.processes
    }

    /// How far a recorded number may be off because a spectrum is made of single frequencies.
    pub fn bias(&self) -> f64 {
        self.bias
    }
}

/// What one thread works with.
pub struct Worker<'p> {
    /// The point that slow noise moves.
    pub shaken: Shaken<'p>,
    /// The paths of the present draw: at both resolutions, cause by cause, cell by cell.
    pub paths: Option<[Vec<Vec<f64>>; 2]>,
    wanderers: Option<[Wanderer<'p>; 2]>,
}

impl<'p> Worker<'p> {
    /// From the point without noise.
    pub fn new(calm: &Shaken<'p>) -> Worker<'p> {
        Worker { shaken: calm.clone(), paths: None, wanderers: None }
    }

    /// The problems of the present draw at both resolutions; `slow` is what slow noise adds, if there is any.
    pub fn problems(
        &mut self,
        sources: &[Source],
        wandering: &[usize],
        cells: &Paths,
        slow: Option<&[(u32, f64)]>,
    ) -> Result<[Problem; 2], Mistake> {
        if let Some(amounts) = slow {
            self.shaken.by(amounts)?;
        }
        if slow.is_some() || self.wanderers.is_none() {
            let numbers: Vec<(u32, f64)> = wandering.iter().flat_map(|k| sources[*k].deviations()).collect();
            let [whole, halves] = &cells.cells;
            if !whole.fit(self.shaken.point().lab()) {
                let source = &sources[wandering[0]];
                let what = "cells of time that slow noise on another number would move".to_string();
                return Err(Mistake::error(source.rule_place, Fault::CorrelatedMoves { name: source.names.join(", "), what }));
            }
            self.wanderers =
                Some([Wanderer::new(&self.shaken, &numbers, whole.clone())?, Wanderer::new(&self.shaken, &numbers, halves.clone())?]);
        }
        let (Some([whole, halves]), Some([coarse, fine])) = (&mut self.wanderers, &self.paths) else {
            return Ok([self.shaken.point().problem().clone(), self.shaken.point().problem().clone()]);
        };
        let along = |wanderer: &mut Wanderer<'p>, path: &[Vec<f64>]| {
            wanderer.along(|cell, list| {
                for (k, means) in wandering.iter().zip(path) {
                    list.extend(sources[*k].amounts(Draw { index: 0, x: means[cell] }));
                }
            })
        };
        Ok([along(whole, coarse)?, along(halves, fine)?])
    }
}

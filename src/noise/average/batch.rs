//! The runs of a block, one by one or eight at a time. Which go together depends on the block alone.

use super::super::path::Worker;
use super::{flat, Job, Notes, Ran};
use crate::config::messages::Mistake;
use crate::measure::Recorded;
use crate::problem::Problem;
use crate::propagate::figure;

/// Runs side by side.
const EIGHT: usize = 8;

/// Runs of a block in order, made one by one or eight at a time.
pub(super) struct Batch<'j, 'p> {
    job: &'j Job<'p>,
    waiting: Vec<[Problem; 2]>,
    ran: Vec<Ran>,
}

impl<'j, 'p> Batch<'j, 'p> {
    pub(super) fn new(job: &'j Job<'p>) -> Batch<'j, 'p> {
        Batch { job, waiting: Vec::new(), ran: Vec::new() }
    }

    pub(super) fn push(&mut self, worker: &mut Worker<'p>, amounts: &[(u32, f64)], notes: &mut Notes) -> Result<(), Mistake> {
        if self.job.together.is_none() {
            self.ran.push(self.job.run(worker, amounts, notes)?);
            return Ok(());
        }
        self.waiting.push(self.job.problems(worker, amounts)?);
        if self.waiting.len() == EIGHT {
            self.flush(worker, notes);
        }
        Ok(())
    }

    pub(super) fn done(mut self, worker: &mut Worker<'p>, notes: &mut Notes) -> Result<Vec<Ran>, Mistake> {
        self.flush(worker, notes);
        Ok(self.ran)
    }

    /// Makes the runs that wait; those that are not accurate enough together are made by themselves.
    fn flush(&mut self, worker: &mut Worker<'p>, notes: &mut Notes) {
        let waiting = std::mem::take(&mut self.waiting);
        let (Some(runs), false) = (&self.job.together, waiting.is_empty()) else { return };
        let (whole, halves): (Vec<Problem>, Vec<Problem>) = waiting.into_iter().map(|[whole, halves]| (whole, halves)).unzip();
        let document = self.job.document;
        let (coarse, same) = (runs.record(document, &whole, false), self.job.paths.is_none());
        let fine = runs.record(document, if same { &whole } else { &halves }, true);
        let pairs = coarse.ok().zip(fine.ok()).map(|(coarse, fine)| coarse.into_iter().zip(fine).collect::<Vec<_>>());
        let good = |coarse: &Recorded, fine: &Recorded| {
            let apart = coarse.numbers.iter().zip(&fine.numbers).map(|(a, b)| figure(*a, *b, 0.0)).fold(0.0, f64::max);
            // cells of time leave an error of their own, which is judged by its average
            apart <= document.accuracy.last || (!same && apart.is_finite())
        };
        for (k, problem) in whole.iter().enumerate() {
            match pairs.as_ref().map(|pairs| &pairs[k]).filter(|(coarse, fine)| good(coarse, fine)) {
                Some((coarse, fine)) => {
                    notes.take_together(runs, coarse);
                    self.ran.push(Ran { coarse: flat(coarse), fine: flat(fine), check: Vec::new() });
                }
                None => self.ran.push(self.job.alone(worker.shaken.point(), problem, &halves[k], notes)),
            }
        }
    }
}

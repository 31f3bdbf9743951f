//! Runs of one point whose numbers noise has moved, eight at a time: each has its own timeline, all have the same start and surroundings,
//! and what is recorded of them is added up.

use super::layout::{floor, raised, without_harmonics, Layout, Place, Timeline, ROUNDS, SHARE};
use super::own::Filled;
use super::wanted::wanted_of;
use super::worker::{start_columns, Judge};
use crate::config::document::Document;
use crate::config::settings::MethodWord;
use crate::measure::{observables, Recorded};
use crate::plan::Point;
use crate::problem::{Instant, Problem};
use crate::propagate::figure;
use crate::propagate::lanes::Width;

/// Runs of one point, laid out.
#[derive(Debug, Clone)]
pub struct Runs {
    layout: Layout,
}

impl Runs {
    /// Lays out runs of `point`, of which `samples` are some. The reason, where they must be made one by one.
    pub fn new(document: &Document, point: &Point, samples: &[Problem]) -> Result<Runs, String> {
        if document.accuracy.method != MethodWord::Automatic || document.accuracy.cross_check {
            return Err("a method was asked for by name".to_string());
        }
        let wanted = wanted_of(document)?;
        if !wanted.state {
            return Err("nothing of the state is recorded".to_string());
        }
        without_harmonics(document, point)?;
        let calm = point.problem();
        let jump = |problem: &Problem| -> Vec<_> { problem.jumps.iter().map(|jump| (jump.at(Instant::default()), jump.keeps)).collect() };
        let alike = |other: &Problem| {
            let end = other.moments.len() == 1 && other.moments[0].segment + 1 >= other.segments.len();
            end && other.start == calm.start && jump(other) == jump(calm)
        };
        if calm.moments.len() != 1 || !samples.iter().all(alike) {
            return Err("more than the end is recorded, or the start or the surroundings move".to_string());
        }
        let layout = Layout::at(document, Place::of(point), wanted, Timeline::Own { rate: 1.0 }, &[], Width::chosen())?;
        let mut runs = Runs { layout };
        runs.settle(document, samples)?;
        Ok(runs)
    }

    /// In words, the coarser and the finer runs.
    pub fn words(&self) -> [String; 2] {
        self.layout.steps.map(|steps| format!("up to {steps} steps of order 6, eight runs side by side"))
    }

    /// What rounding leaves.
    pub fn floor(&self) -> f64 {
        self.layout.floor
    }

    /// Most steps of a run.
    pub fn steps(&self) -> u64 {
        self.layout.steps[0] as u64
    }

    /// What up to eight runs record, by the coarser or the finer steps.
    pub fn record(&self, document: &Document, problems: &[Problem], finer: bool) -> Result<Vec<Recorded>, String> {
        let layout = &self.layout;
        let filled = self.filled(problems, finer)?;
        let place = &layout.place;
        let seen = observables(document, &place.built, &place.values, &place.energies_hz, &place.problem);
        let mut judge = Judge::new(layout, &seen, &place.problem);
        let mut columns = start_columns(layout, &place.problem);
        filled.group.carry_apart(layout.width, &filled.stretches, &mut columns);
        Ok((0..problems.len()).map(|lane| judge.record(&columns, lane)).collect())
    }

    fn filled(&self, problems: &[Problem], finer: bool) -> Result<Filled, String> {
        let last = problems.last().ok_or_else(|| "there are no runs".to_string())?;
        let eight: Vec<&Problem> = problems.iter().chain(std::iter::repeat(last)).take(8).collect();
        let filled = Filled::new(&eight, self.layout.rate(finer), self.layout.recipe.clone())?;
        if filled.group.dim == self.layout.dim {
            Ok(filled)
        } else {
            Err("it has another number of levels".to_string())
        }
    }

    fn settle(&mut self, document: &Document, samples: &[Problem]) -> Result<(), String> {
        let accuracy = document.accuracy.last;
        let mut rate = 1.0;
        for _ in 0..ROUNDS {
            self.layout.timeline = Timeline::Own { rate };
            let mut worst = 0.0f64;
            for sample in samples.iter().map(std::slice::from_ref) {
                for finer in [false, true] {
                    let filled = self.filled(sample, finer)?;
                    let steps = &mut self.layout.steps[usize::from(finer)];
                    *steps = filled.steps.max(*steps);
                    self.layout.floor = floor(filled.angle, filled.steps).max(self.layout.floor);
                }
                let (coarse, fine) = (self.record(document, sample, false)?, self.record(document, sample, true)?);
                let pairs = coarse[0].numbers.iter().zip(&fine[0].numbers);
                worst = pairs.map(|(a, b)| figure(*a, *b, self.layout.floor)).fold(worst, f64::max);
            }
            if worst <= (SHARE * accuracy).max(self.layout.floor) {
                return Ok(());
            }
            rate *= raised(worst, accuracy);
        }
        Err("the number of steps did not settle".to_string())
    }
}

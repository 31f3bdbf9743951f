//! One point after the other computed by one thread: numbers moved, the problem solved, the columns of the table picked.

use super::row::{Found, Row, Trace};
use super::setup::Setup;
use crate::config::messages::{one_line, Mistake};
use crate::noise::{compute, Draws};
use crate::outcome::Outcome;
use crate::plan::{Mover, Point};
use crate::propagate::figure;

/// What one thread needs to compute points.
pub struct Evaluator<'s> {
    setup: &'s Setup,
    names: Vec<&'s str>,
    /// Threads that share the runs of one point, where noise makes many.
    threads: usize,
    /// Movers of the structures met last, the latest first.
    movers: Vec<(usize, Mover<'s>)>,
}

/// Structures whose movers are kept.
const MOST_MOVERS: usize = 8;

impl<'s> Evaluator<'s> {
    /// For the points of a scan; `threads` share the runs of one point.
    pub fn new(setup: &'s Setup, threads: usize) -> Evaluator<'s> {
        Evaluator { setup, names: setup.names(), threads, movers: Vec::new() }
    }

    /// Computes a point at two resolutions.
    pub fn checked(&mut self, point: u64) -> Row {
        let setup = self.setup;
        let found = match self.moved(point) {
            Err(reason) => Found::Failed(reason),
            Ok((group, mover)) => {
                let (_, plan) = setup.plan_of(point);
                let found = match plan {
                    Ok(plan) => {
                        let family = if setup.scan.same_noise { 0 } else { point };
                        let document = plan.document();
                        match compute(document, mover.point(), &Draws { threads: self.threads, family }) {
                            Ok(outcome) => pick(setup, mover.point(), outcome),
                            Err(mistake) => Found::Failed(one_line(&document.sources, &mistake)),
                        }
                    }
                    Err(reason) => Found::Failed(reason.to_string()),
                };
                self.movers.insert(0, (group, mover));
                self.movers.truncate(MOST_MOVERS);
                found
            }
        };
        Row { point, found }
    }

    /// A mover at the point, taken from those kept. One that has met a mistake is not used again.
    fn moved(&mut self, point: u64) -> Result<(usize, Mover<'s>), String> {
        let (group, plan) = self.setup.plan_of(point);
        let plan = plan.map_err(str::to_string)?;
        let values = self.setup.grid.values(point);
        let words = |mistake: Mistake| one_line(&plan.document().sources, &mistake);
        let kept = self.movers.iter().position(|(of, _)| *of == group);
        let mut mover = match kept {
            Some(at) => self.movers.remove(at).1,
            None => match plan.mover(&self.names) {
                Ok(mover) => mover,
                // the numbers as written make no run; those of the point may
                Err(_) => return Ok((group, plan.mover_from(&self.names, &values).map_err(words)?)),
            },
        };
        mover.at(&values).map_err(words)?;
        Ok((group, mover))
    }
}

/// The columns of the table out of everything that was computed.
fn pick(setup: &Setup, point: &Point, outcome: Outcome) -> Found {
    if !outcome.error_figure.is_finite() {
        return Found::Failed(outcome.reason);
    }
    let of = |name: &str| outcome.finals.iter().find(|last| last.name == name);
    let (mut numbers, mut errors) = (Vec::with_capacity(setup.columns.len()), Vec::with_capacity(setup.columns.len()));
    let mut largest = 0.0f64;
    let mut derived = setup.scan.derived.iter();
    for column in &setup.columns {
        let (value, error) = if column.derived {
            let Some((_, formula)) = derived.next() else { continue };
            let all = |pick: fn(&crate::outcome::Final) -> f64| -> Vec<f64> {
                formula.finals.iter().map(|(name, _)| of(name).map_or(f64::NAN, pick)).collect()
            };
            let value = formula.value(&point.values, &all(|last| last.value));
            (value, figure(value, formula.value(&point.values, &all(|last| last.finer)), 0.0))
        } else {
            match of(&column.name) {
                Some(last) => {
                    largest = largest.max(last.error / column.scale);
                    (last.value, last.error)
                }
                // a structure that lacks this quantity
                None => (f64::NAN, f64::NAN),
            }
        };
        numbers.push(value);
        errors.push(error);
    }
    if !setup.traced.is_empty() && setup.traced.len() != outcome.columns.len() {
        return Found::Failed("its traces have other columns than those of the first point".to_string());
    }
    let trace = (!setup.traced.is_empty()).then(|| Trace { times_s: outcome.times_s, rows: outcome.rows });
    Found::Numbers { numbers, checked: Some((largest, errors)), trace }
}

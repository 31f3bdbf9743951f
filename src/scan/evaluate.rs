//! One point after the other computed by one thread: numbers moved, the problem solved, the columns of the table picked.
//!
//! A point is solved by itself (its resolution tightened until it is accurate enough), or at two resolutions of which the coarser
//! is that of all points, or once at that one. What it becomes depends on the config, on the recipe, and on which of the three is
//! done; never on the points before it.

use super::bundled::{Bundled, GROUP};
use super::row::{Checked, Found, Row, Trace};
use super::setup::Setup;
use crate::bundle::Worker;
use crate::config::messages::{one_line, Mistake};
use crate::noise::{compute, is_average, Draws};
use crate::outcome::{compute_from, compute_once, final_columns, Final, Once, Outcome};
use crate::plan::{Mover, Plan, Point};
use crate::propagate::{figure, Recipe};

/// What one thread needs to compute points.
pub struct Evaluator<'s> {
    setup: &'s Setup,
    names: Vec<&'s str>,
    /// Threads that share the runs of one point, where noise makes many.
    threads: usize,
    /// Those of the structures met last, the latest first.
    structures: Vec<Structure<'s>>,
    /// For points side by side.
    together: Option<(&'s Bundled, Worker<'s>)>,
}

/// A structure that the points run through.
struct Structure<'s> {
    group: usize,
    plan: &'s Plan,
    mover: Mover<'s>,
    /// Where each final quantity of the table, and each that a derived one reads, stands among those of this structure.
    finals: Vec<Option<usize>>,
    read: Vec<Vec<Option<usize>>>,
}

/// Structures that are kept.
const MOST_STRUCTURES: usize = 8;

impl<'s> Evaluator<'s> {
    /// For the points of a scan; `threads` share the runs of one point.
    pub fn new(setup: &'s Setup, threads: usize) -> Evaluator<'s> {
        let together = setup.bundled().ok().and_then(|bundled| Some((bundled, bundled.worker(setup).ok()?)));
        Evaluator { setup, names: setup.names(), threads, structures: Vec::new(), together }
    }

    /// Computes points side by side, at two resolutions or one; those that must be, by themselves.
    pub fn together(&mut self, points: &[u64], finer: bool) -> Vec<Row> {
        let mut rows = Vec::with_capacity(points.len());
        for some in points.chunk_by(|a, b| a / GROUP == b / GROUP) {
            let found = match &mut self.together {
                Some((bundled, worker)) => bundled.rows(self.setup, worker, some, finer),
                None => vec![None; some.len()],
            };
            rows.extend(some.iter().zip(found).map(|(point, row)| row.unwrap_or_else(|| self.alone(*point))));
        }
        rows
    }

    /// Solves a point by itself.
    pub fn alone(&mut self, point: u64) -> Row {
        self.checked(point, &Recipe::default())
    }

    /// Computes a point at two resolutions, the coarser that of the recipe; where that is not accurate enough, by itself.
    pub fn checked(&mut self, point: u64, recipe: &Recipe) -> Row {
        let (setup, threads) = (self.setup, self.threads);
        self.with(point, |structure| {
            let (document, at) = (structure.plan.document(), structure.mover.point());
            let outcome = if !is_average(document, at) {
                compute_from(document, at, recipe)
            } else {
                let family = if setup.scan.same_noise { 0 } else { point };
                match compute(document, at, &Draws { threads, family }) {
                    Ok(outcome) => outcome,
                    Err(mistake) => return Found::Failed(one_line(&document.sources, &mistake)),
                }
            };
            structure.of_outcome(setup, outcome, recipe)
        })
    }

    /// Computes a point once, at the resolution of the recipe; where that does not cover it, at two.
    pub fn plain(&mut self, point: u64, recipe: &Recipe) -> Row {
        let setup = self.setup;
        if recipe.is_empty() {
            return self.checked(point, recipe);
        }
        let mut covered = true;
        let once = |structure: &Structure<'s>| {
            let (document, at) = (structure.plan.document(), structure.mover.point());
            if is_average(document, at) {
                return None;
            }
            compute_once(document, at, recipe)
        };
        let row = self.with(point, |structure| match once(structure) {
            Some(once) => structure.of_once(setup, once),
            None => {
                covered = false;
                Found::Failed(String::new())
            }
        });
        if covered {
            row
        } else {
            self.checked(point, recipe)
        }
    }

    fn with(&mut self, point: u64, compute: impl FnOnce(&Structure<'s>) -> Found) -> Row {
        let found = match self.moved(point) {
            Err(reason) => Found::Failed(reason),
            Ok(structure) => {
                let found = compute(&structure);
                self.structures.insert(0, structure);
                self.structures.truncate(MOST_STRUCTURES);
                found
            }
        };
        Row { point, found }
    }

    /// The structure of a point, moved there. One that has met a mistake is not used again.
    fn moved(&mut self, point: u64) -> Result<Structure<'s>, String> {
        let (group, plan) = self.setup.plan_of(point);
        let plan = plan.map_err(str::to_string)?;
        let values = self.setup.grid.values(point);
        let words = |mistake: Mistake| one_line(&plan.document().sources, &mistake);
        if let Some(at) = self.structures.iter().position(|structure| structure.group == group) {
            let mut structure = self.structures.remove(at);
            structure.mover.at(&values).map_err(words)?;
            return Ok(structure);
        }
        // laid out at the point itself, as the numbers as written need make no run
        let mover = plan.mover_from(&self.names, &values).map_err(words)?;
        Ok(Structure::new(self.setup, group, plan, mover))
    }
}

impl<'s> Structure<'s> {
    fn new(setup: &Setup, group: usize, plan: &'s Plan, mover: Mover<'s>) -> Structure<'s> {
        let names: Vec<String> = final_columns(plan.document(), mover.point()).into_iter().map(|last| last.name).collect();
        let place = |name: &str| names.iter().position(|other| other == name);
        let finals = setup.columns.iter().filter(|column| !column.derived).map(|column| place(&column.name)).collect();
        let read = setup.scan.derived.iter().map(|(_, formula)| formula.finals.iter().map(|(name, _)| place(name)).collect()).collect();
        Structure { group, plan, mover, finals, read }
    }

    fn point(&self) -> &Point<'s> {
        self.mover.point()
    }

    /// The columns of the table; NaN for those that this structure lacks.
    fn columns(&self, setup: &Setup, number: &dyn Fn(usize) -> f64) -> Vec<f64> {
        let of = |place: &Option<usize>| place.map_or(f64::NAN, number);
        let derived = setup.scan.derived.iter().zip(&self.read).map(|((_, formula), read)| {
            let finals: Vec<f64> = read.iter().map(of).collect();
            formula.value(&self.point().values, &finals)
        });
        self.finals.iter().map(of).chain(derived).collect()
    }

    fn trace(&self, setup: &Setup, times_s: Vec<f64>, rows: Vec<f64>) -> Result<Option<Trace>, String> {
        let wide = setup.traced.len();
        if wide == 0 {
            Ok(None)
        } else if rows.len() == wide * times_s.len() {
            Ok(Some(Trace { times_s, rows }))
        } else {
            Err("its traces have other columns than those of the first point".to_string())
        }
    }

    fn of_once(&self, setup: &Setup, once: Once) -> Found {
        let numbers = self.columns(setup, &|k| once.finals.get(k).copied().unwrap_or(f64::NAN));
        match self.trace(setup, once.times_s, once.rows) {
            Ok(trace) => Found::Numbers { numbers, checked: None, trace },
            Err(reason) => Found::Failed(reason),
        }
    }

    fn of_outcome(&self, setup: &Setup, outcome: Outcome, recipe: &Recipe) -> Found {
        if !outcome.error_figure.is_finite() {
            return Found::Failed(outcome.reason);
        }
        let of = |k: usize, pick: fn(&Final) -> f64| outcome.finals.get(k).map_or(f64::NAN, pick);
        let numbers = self.columns(setup, &|k| of(k, |last| last.value));
        let finer = self.columns(setup, &|k| of(k, |last| last.finer));
        let mut errors: Vec<f64> = self.finals.iter().map(|place| place.map_or(f64::NAN, |k| of(k, |last| last.error))).collect();
        let scales = setup.columns.iter().map(|column| column.scale);
        let largest = errors.iter().zip(scales).map(|(error, scale)| error / scale).fold(0.0, f64::max);
        errors.extend((errors.len()..numbers.len()).map(|k| figure(numbers[k], finer[k], 0.0)));
        let sampling = self.sampling(setup, &outcome, &numbers);
        let alone = outcome.resolved.filter(|resolved| !recipe.suffices(resolved));
        match self.trace(setup, outcome.times_s, outcome.rows) {
            Ok(trace) => Found::Numbers { numbers, checked: Some(Checked { figure: largest, errors, sampling, alone }), trace },
            Err(reason) => Found::Failed(reason),
        }
    }

    /// Standard errors of the columns; of a derived one what those of all that it reads make together at most.
    fn sampling(&self, setup: &Setup, outcome: &Outcome, numbers: &[f64]) -> Vec<f64> {
        if outcome.sampling_error().is_none() {
            return Vec::new();
        }
        let of = |k: usize| outcome.finals.get(k).and_then(|last| last.sampling_error).unwrap_or(0.0);
        let value = |k: usize| outcome.finals.get(k).map_or(f64::NAN, |last| last.value);
        let mut sampling: Vec<f64> = self.finals.iter().map(|place| place.map_or(f64::NAN, of)).collect();
        let first = sampling.len();
        sampling.resize(numbers.len(), 0.0);
        if first < numbers.len() {
            for moved in (0..outcome.finals.len()).filter(|moved| of(*moved) > 0.0) {
                let shifted = self.columns(setup, &|k| value(k) + if k == moved { of(k) } else { 0.0 });
                for k in first..numbers.len() {
                    sampling[k] += (shifted[k] - numbers[k]).abs();
                }
            }
        }
        sampling
    }
}

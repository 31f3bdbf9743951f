//! What all points together say: counts, errors, extremes, the best point and how far one may go from it. Rows pass by one at a
//! time, twice, so that memory does not grow with the number of points.

use std::collections::BTreeMap;
use std::io;

use super::row::{Checked, Found, Row};
use super::setup::Setup;
use super::shelf::Rows;
use crate::config::scan::Make;

/// Failed points that are kept by name.
const MOST_NAMED: usize = 100;
/// Different reasons that are counted apart.
const MOST_REASONS: usize = 100;

/// Smallest and largest value of a column, with their points.
pub type Extremes = Option<[(f64, u64); 2]>;

/// The best point.
#[derive(Debug, Clone, PartialEq)]
pub struct BestPoint {
    /// Column.
    pub column: usize,
    /// The point.
    pub point: u64,
    /// Its value there.
    pub value: f64,
}

/// How far one axis may be moved from the best point while the tolerance is met, the others held.
#[derive(Debug, Clone, PartialEq)]
pub struct Reach {
    /// Group of axes that moves.
    pub group: usize,
    /// Last place along it that still serves, below and above.
    pub places: [u64; 2],
    /// Whether the axis ends there, so that it might go on.
    pub open: [bool; 2],
}

/// The points that meet the tolerance.
#[derive(Debug, Clone, PartialEq)]
pub struct Region {
    /// How many, anywhere in the grid.
    pub points: u64,
    /// Along each axis through the best point.
    pub reaches: Vec<Reach>,
}

/// Rows along one group of axes through a point.
#[derive(Debug, Clone, PartialEq)]
pub struct Cut {
    /// The group.
    pub group: usize,
    /// The numbers of each place along it; none for failed points.
    pub numbers: Vec<Option<Vec<f64>>>,
}

/// What all points together say.
#[derive(Debug, Clone, Default)]
pub struct Summary {
    /// Points with a row.
    pub points: u64,
    /// Points without numbers.
    pub failed: u64,
    /// The first of them, with their reasons.
    pub failures: Vec<(u64, String)>,
    /// How often each reason was met.
    pub reasons: BTreeMap<String, u64>,
    /// Points computed at two resolutions.
    pub checked: u64,
    /// Points that were solved by themselves.
    pub alone: u64,
    /// Largest error of any of them, over its scale.
    pub error_figure: f64,
    /// Largest error of each column.
    pub errors: Vec<f64>,
    /// Largest standard error of each column over random draws; empty where nothing was drawn.
    pub sampling: Vec<f64>,
    /// The point with the largest error.
    pub worst: Option<u64>,
    /// Of each column.
    pub extremes: Vec<Extremes>,
    /// The best point, where one is asked for and there is one.
    pub best: Option<BestPoint>,
    /// Points whose own error is larger than asked.
    pub inaccurate: u64,
    /// Most moments of a trace.
    pub moments: usize,
}

impl Summary {
    /// Passes over all rows.
    pub fn of(setup: &Setup, rows: &dyn Rows) -> io::Result<Summary> {
        let wide = setup.columns.len();
        let mut summary = Summary { errors: vec![0.0; wide], extremes: vec![None; wide], ..Summary::default() };
        let asked = setup.document().accuracy.last;
        rows.each(&mut |row| {
            summary.add(&row, asked);
            Ok(())
        })?;
        if let Some(best) = &setup.scan.best {
            let column = setup.columns.iter().position(|column| column.name == best.of);
            summary.best = column.and_then(|column| {
                let [low, high] = summary.extremes[column]?;
                let (value, point) = if best.make == Make::Small { low } else { high };
                Some(BestPoint { column, point, value })
            });
        }
        Ok(summary)
    }

    fn add(&mut self, row: &Row, asked: f64) {
        self.points += 1;
        match &row.found {
            Found::Failed(reason) => {
                self.failed += 1;
                if self.failures.len() < MOST_NAMED {
                    self.failures.push((row.point, reason.clone()));
                }
                if self.reasons.len() < MOST_REASONS || self.reasons.contains_key(reason) {
                    *self.reasons.entry(reason.clone()).or_insert(0) += 1;
                }
            }
            Found::Numbers { numbers, checked, trace } => {
                self.moments = self.moments.max(trace.as_ref().map_or(0, |trace| trace.times_s.len()));
                for (extremes, value) in self.extremes.iter_mut().zip(numbers).filter(|(_, value)| value.is_finite()) {
                    let here = (*value, row.point);
                    *extremes = Some(match *extremes {
                        None => [here, here],
                        // of equals the first counts
                        Some([low, high]) => [if here.0 < low.0 { here } else { low }, if here.0 > high.0 { here } else { high }],
                    });
                }
                if let Some(Checked { figure, errors, sampling, alone }) = checked {
                    self.checked += 1;
                    self.alone += u64::from(alone.is_some());
                    self.inaccurate += u64::from(*figure > asked);
                    if *figure > self.error_figure || self.worst.is_none() {
                        (self.error_figure, self.worst) = (*figure, Some(row.point));
                    }
                    for (largest, error) in self.errors.iter_mut().zip(errors) {
                        *largest = largest.max(*error);
                    }
                    self.sampling.resize(self.sampling.len().max(sampling.len()), 0.0);
                    for (largest, error) in self.sampling.iter_mut().zip(sampling) {
                        *largest = largest.max(*error);
                    }
                }
            }
        }
    }

    /// The largest standard error of any column that is not derived, over its scale; 0 where nothing was drawn.
    pub fn sampling_error(&self, setup: &Setup) -> f64 {
        let fixed = setup.columns.iter().zip(&self.sampling).filter(|(column, _)| !column.derived);
        fixed.map(|(column, error)| error / column.scale).fold(0.0, f64::max)
    }

    /// Points that hold the smallest or the largest value of a column.
    pub fn extreme_points(&self) -> Vec<u64> {
        let mut points: Vec<u64> = self.extremes.iter().flatten().flat_map(|[low, high]| [low.1, high.1]).collect();
        points.sort_unstable();
        points.dedup();
        points
    }
}

/// The cuts through a point along each group of axes that has more than one place.
pub fn cuts(setup: &Setup, rows: &dyn Rows, through: u64) -> io::Result<Vec<Cut>> {
    let grid = &setup.grid;
    let here = grid.coordinates(through);
    let mut cuts: Vec<Cut> = (0..here.len())
        .filter(|group| grid.counts()[*group] > 1)
        .map(|group| Cut { group, numbers: vec![None; grid.counts()[group] as usize] })
        .collect();
    rows.each(&mut |row| {
        let along = grid.coordinates(row.point);
        let mut off = (0..along.len()).filter(|group| along[*group] != here[*group]);
        let numbers = match row.found {
            Found::Numbers { numbers, .. } => Some(numbers),
            Found::Failed(_) => None,
        };
        match (off.next(), off.next()) {
            (None, _) => cuts.iter_mut().for_each(|cut| cut.numbers[along[cut.group] as usize] = numbers.clone()),
            (Some(group), None) => {
                if let Some(cut) = cuts.iter_mut().find(|cut| cut.group == group) {
                    cut.numbers[along[group] as usize] = numbers;
                }
            }
            _ => {}
        }
        Ok(())
    })?;
    Ok(cuts)
}

/// The region in which the tolerance is met: its points, and how far it reaches along each cut.
pub fn region(setup: &Setup, rows: &dyn Rows, best: &BestPoint, cuts: &[Cut], tolerance: f64) -> io::Result<Region> {
    let small = setup.scan.best.as_ref().is_some_and(|best| best.make == Make::Small);
    let serves = |value: f64| if small { value <= best.value + tolerance } else { value >= best.value - tolerance };
    let mut points = 0;
    rows.each(&mut |row| {
        if let Found::Numbers { numbers, .. } = &row.found {
            points += u64::from(serves(numbers[best.column]));
        }
        Ok(())
    })?;
    let here = setup.grid.coordinates(best.point);
    let reaches = cuts
        .iter()
        .map(|cut| {
            let good = |at: usize| cut.numbers[at].as_ref().is_some_and(|numbers| serves(numbers[best.column]));
            let (mut low, mut high) = (here[cut.group] as usize, here[cut.group] as usize);
            while low > 0 && good(low - 1) {
                low -= 1;
            }
            while high + 1 < cut.numbers.len() && good(high + 1) {
                high += 1;
            }
            Reach { group: cut.group, places: [low as u64, high as u64], open: [low == 0, high + 1 == cut.numbers.len()] }
        })
        .collect();
    Ok(Region { points, reaches })
}

//! Points of a scan eight at a time, where its plan lets them share their timeline.
//!
//! Groups are the points 8 g to 8 g + 7, whoever computes them, so that every row has the same bits in any part and on any number of
//! threads. One group of each block is computed at two resolutions; a block holds as many groups as the share asked for says.
//! Where the coarser is not accurate enough the point is solved by itself, and all others of its block are computed at two resolutions
//! too. A point that is refused is computed alone with all of its group, one whose numbers are not finite by itself.

use super::order::scattered;
use super::row::{Checked, Found, Row};
use super::setup::{Setup, TableColumn};
use crate::bundle::{Layout, Worker};
use crate::outcome::{compute, FinalColumn};
use crate::propagate::figure;
use crate::propagate::lanes::Width;

/// Points of a group.
pub const GROUP: u64 = 8;
/// Fewest points of the grid beside its corners from which the number of steps is found; groups of eight are filled up.
const INSIDE: u64 = 8;
/// Fewest points whose pulses differ that are worth the search for a number of steps.
const FEWEST_APART: u64 = 128;
/// Scans of at most so many points are computed at two resolutions throughout.
const SMALL: u64 = 64;

/// What all threads share.
#[derive(Debug)]
pub struct Bundled {
    layout: Layout,
    /// For each column of the table that is not derived the place of its number among the final ones.
    places: Vec<usize>,
    /// The same for what each derived column reads.
    read: Vec<Vec<usize>>,
    /// Points of a block.
    block: u64,
    points: u64,
}

/// Holds a few samples side by side against the same points alone, so that nothing that moves is left out of a layout; the reason,
/// where they differ by more than their errors.
fn agree(setup: &Setup, finals: &[FinalColumn], layout: &Layout, samples: &[Vec<f64>]) -> Result<(), String> {
    let (plan, names) = (setup.plan(), setup.names());
    let accuracy = setup.document().accuracy.last;
    let mut worker = Worker::new(plan, &names, layout)?;
    let last = samples.len().saturating_sub(1);
    let mut picked = vec![0, last / 3, last];
    picked.dedup();
    for sample in picked.into_iter().filter_map(|k| samples.get(k)) {
        let Ok(mover) = plan.mover_from(&names, sample) else { continue };
        let alone = compute(plan.document(), mover.point());
        let found = worker.numbers(layout, std::slice::from_ref(sample), false)?;
        let apart = alone.finals.iter().zip(finals).zip(&found).map(|((alone, column), found)| {
            let figure = alone.error / column.scale + accuracy.max(layout.floor());
            (alone.value / column.scale - found).abs() / figure
        });
        // a point alone that is not accurate itself says nothing
        if alone.reached && !(apart.fold(0.0, f64::max) <= 1.0) {
            return Err("points alone give other numbers".to_string());
        }
    }
    Ok(())
}

impl Bundled {
    /// Lays out the points of a scan; the reason, where they must be computed one by one.
    pub fn new(setup: &Setup, finals: &[FinalColumn], width: Width) -> Result<Bundled, String> {
        if !setup.traced.is_empty() {
            return Err("it keeps traces".to_string());
        }
        let grid = &setup.grid;
        let points = grid.points();
        let corners = grid.corners();
        let inside = (corners.len() as u64 + INSIDE).next_multiple_of(GROUP) - corners.len() as u64;
        let inside = (0..inside).map(|k| scattered(k) % points);
        let samples: Vec<Vec<f64>> = corners.iter().copied().chain(inside).map(|point| grid.values(point)).collect();
        let names = setup.names();
        let layout = Layout::new(setup.plan(), &names, &grid.bounds(), &samples, width).or_else(|reason| {
            if points < FEWEST_APART {
                return Err(reason);
            }
            Layout::own(setup.plan(), &names, &samples, width).map_err(|_| reason)
        })?;
        agree(setup, finals, &layout, &samples)?;
        let place = |name: &str| finals.iter().position(|last| last.name == name);
        let lost = || "a column is not among the final numbers".to_string();
        let fixed = setup.columns.iter().filter(|column| !column.derived);
        let places = fixed.map(|column: &TableColumn| place(&column.name)).collect::<Option<Vec<usize>>>().ok_or_else(lost)?;
        let of_formula = |(name, _): &(String, _)| place(name);
        let derived = setup.scan.derived.iter();
        let read = derived.map(|(_, formula)| formula.finals.iter().map(of_formula).collect::<Option<Vec<usize>>>());
        let read = read.collect::<Option<Vec<_>>>().ok_or_else(lost)?;
        let wanted = (1.0 / setup.document().run.check_fraction.max(1e-9)).round().max(1.0) as u64;
        let block = if points <= SMALL { GROUP } else { (wanted * GROUP).min((points / 4).next_multiple_of(GROUP)) };
        Ok(Bundled { layout, places, read, block, points })
    }

    /// How it computes, in words.
    pub fn words(&self) -> String {
        format!("eight points side by side, {}", self.layout.words())
    }

    /// What a thread needs.
    pub fn worker<'s>(&self, setup: &'s Setup) -> Result<Worker<'s>, String> {
        let worker = Worker::new(setup.plan(), &setup.names(), &self.layout)?;
        Ok(if self.read.is_empty() { worker } else { worker.with_registers() })
    }

    /// The block of a point.
    pub fn block_of(&self, point: u64) -> u64 {
        point / self.block
    }

    /// The points of a block that are computed at two resolutions: a group at random, the same in each run.
    pub fn check_points(&self, block: u64) -> std::ops::Range<u64> {
        let first = block * self.block;
        let groups = self.block.min(self.points - first).div_ceil(GROUP);
        let start = first + scattered(block) % groups * GROUP;
        start..(start + GROUP).min(self.points)
    }

    /// Rows of `points`, all of one group; none for those that must be computed alone.
    pub fn rows(&self, setup: &Setup, worker: &mut Worker, points: &[u64], finer: bool) -> Vec<Option<Row>> {
        let first = points.first().map_or(0, |point| point / GROUP * GROUP);
        let all: Vec<Vec<f64>> = (first..(first + GROUP).min(self.points)).map(|point| setup.grid.values(point)).collect();
        let numbers = |worker: &mut Worker, finer: bool| worker.numbers(&self.layout, &all, finer).ok();
        let Some(coarse) = numbers(worker, false) else { return vec![None; points.len()] };
        let fine = if finer { numbers(worker, true) } else { None };
        if finer && fine.is_none() {
            return vec![None; points.len()];
        }
        let each = coarse.len() / all.len();
        points
            .iter()
            .map(|point| {
                let at = (point - first) as usize;
                let of = |numbers: &[f64]| self.columns(setup, worker.values(at), &numbers[at * each..][..each]);
                let found = self.found(setup, of(&coarse), fine.as_deref().map(of))?;
                Some(Row { point: *point, found })
            })
            .collect()
    }

    /// The columns of the table from the final numbers and the registers of a point.
    fn columns(&self, setup: &Setup, registers: &[f64], finals: &[f64]) -> Vec<f64> {
        let derived = setup.scan.derived.iter().zip(&self.read).map(|((_, formula), read)| {
            let finals: Vec<f64> = read.iter().map(|place| finals[*place]).collect();
            formula.value(registers, &finals)
        });
        self.places.iter().map(|place| finals[*place]).chain(derived).collect()
    }

    fn found(&self, setup: &Setup, numbers: Vec<f64>, finer: Option<Vec<f64>>) -> Option<Found> {
        let fixed = self.places.len();
        if numbers[..fixed].iter().any(|number| !number.is_finite()) {
            return None;
        }
        let checked = match finer {
            None => None,
            Some(finer) => {
                let floor = self.layout.floor();
                let floors = setup.columns.iter().map(|column| if column.derived { 0.0 } else { floor * column.scale });
                let errors: Vec<f64> = numbers.iter().zip(&finer).zip(floors).map(|((a, b), floor)| figure(*a, *b, floor)).collect();
                let over = errors[..fixed].iter().zip(&setup.columns).map(|(error, column)| error / column.scale);
                let largest = over.fold(0.0, f64::max);
                if !(largest <= setup.document().accuracy.last.max(floor)) {
                    return None;
                }
                Some(Checked { figure: largest, errors, sampling: Vec::new(), alone: None })
            }
        };
        Some(Found::Numbers { numbers, checked, trace: None })
    }
}

//! How every final number of a run depends on every named number: first derivatives in reverse, second ones by differences, each first one
//! with its measured error, and the change of the named number that alone costs a tolerance.
//!
//! Comes in: a plan, its point, the tolerance. Leaves: a [`Sensitivity`]. A named number is moved as `--set` moves it: everything that is
//! computed from it, gaps and phases of the frame included, follows.
//!
//! The end of the run is carried back once for all numbers (`propagate::gradient::Carried`); what a number moves in the Hamiltonian, in
//! times, jumps, start and in the recorded quantity itself is taken from points of the plan in which it is moved a little (`steps.rs`),
//! by differences of order 4. The error figure is the change under a finer grid and half the step together, with a fifth on top.
//!
//! | file | what it does |
//! |---|---|
//! | `steps.rs` | how far a number is moved, and the points around it |
//! | `finals.rs` | final numbers as functions of the end, and their seeds |

mod finals;
mod steps;

use std::time::Instant as Clock;

use num_complex::Complex64;

use crate::config::document::Document;
use crate::config::messages::short_with_unit;
use crate::config::reader::NamedNumber;
use crate::noise::is_average;
use crate::outcome::sensitivity::{Derivative, FinalSensitivity, MovedNumber, Sensitivity};
use crate::outcome::{final_columns, FinalColumn};
use crate::plan::{Plan, Point};
use crate::problem::Matrix;
use crate::propagate::figure;
use crate::propagate::gradient::{Carried, Moved, TooLarge};
use crate::units::{unit, Unit};
use finals::Finals;
use steps::{neighbourhood, Neighbourhood, WEIGHTS};

/// Fineness of the two grids.
const FINENESS: [f64; 2] = [1.0, 1.5];

/// Why there is no sensitivity.
#[derive(Debug, Clone, PartialEq)]
pub enum NoSensitivity {
    /// The numbers of the run are means over noise or over quantum trajectories.
    Average,
    /// The file has no named number.
    NoNumbers,
    /// None of the named numbers can be moved: the first, and why.
    NoneMoves(String, String),
    /// The run is too long to be carried back.
    TooLarge(TooLarge),
}

impl NoSensitivity {
    /// In words, with what to write.
    pub fn words(&self) -> (String, &'static str) {
        match self {
            NoSensitivity::Average => (
                "the numbers of this run are averages over noise or over quantum trajectories, which have no derivatives here".to_string(),
                "a copy of the file without noise:, or the number as an axis of scan:",
            ),
            NoSensitivity::NoNumbers => ("the file names no number that could be moved".to_string(), "numbers: {rabi: 25 MHz}"),
            NoSensitivity::NoneMoves(name, why) => (format!("no named number can be moved; {name}: {why}"), "numbers: {rabi: 25 MHz}"),
            NoSensitivity::TooLarge(TooLarge::Elements { elements, kept }) => (
                format!("the run is too long to be carried back: {elements:.1e} steps, {:.1e} GB of states to keep", kept * 16e-9),
                "frame: {kind: rotating, follows: drives}, or a shorter sequence",
            ),
            NoSensitivity::TooLarge(TooLarge::Unsettled) => (
                "the run could not be carried back: the Hamiltonian changes too suddenly within a pulse".to_string(),
                "an envelope without sharp peaks",
            ),
        }
    }
}

/// The sensitivity of all final numbers; `tolerance` in place of the accuracy asked for.
///
/// # Errors
/// Where the numbers have no derivatives, or the run is too long.
pub fn sensitivity(plan: &Plan, point: &Point, tolerance: Option<f64>) -> Result<Sensitivity, NoSensitivity> {
    let clock = Clock::now();
    let document = plan.document();
    if is_average(document, point) {
        return Err(NoSensitivity::Average);
    }
    if document.numbers.is_empty() {
        return Err(NoSensitivity::NoNumbers);
    }
    let open = point.problem().is_open();
    let mut left_out = Vec::new();
    let mut moved: Vec<(&NamedNumber, Neighbourhood)> = Vec::new();
    for number in &document.numbers {
        match neighbourhood(plan, point, number, open) {
            Ok(found) => moved.push((number, found)),
            Err(why) => left_out.push((number.name.clone(), why)),
        }
    }
    if moved.is_empty() {
        let (name, why) = left_out.swap_remove(0);
        return Err(NoSensitivity::NoneMoves(name, why));
    }
    let job = Job { document, point, open, moved: &moved };
    let (values, coarse, direct) = job.first_derivatives(0).map_err(NoSensitivity::TooLarge)?;
    let (_, fine, _) = job.first_derivatives(1).map_err(NoSensitivity::TooLarge)?;
    let columns = final_columns(document, point);
    let scales: Vec<f64> = columns.iter().map(|column| column.scale).collect();
    let second = job.second_derivatives(&values, &scales).map_err(NoSensitivity::TooLarge)?;

    let numbers: Vec<MovedNumber> = moved.iter().map(|(number, _)| moved_number(document, point, number)).collect();
    let asked = tolerance.unwrap_or(document.accuracy.last);
    let mut finals = Vec::new();
    let mut without = Vec::new();
    for (k, column) in columns.into_iter().enumerate() {
        if column.name.starts_with("time_in_") {
            without.push((column.name, "an integral over the whole run".to_string()));
            continue;
        }
        let derivative = |p: usize| {
            let factor = numbers[p].factor;
            // rounding, over the natural size of a derivative
            let differences = if direct[k][p] { 4.0 / moved[p].1.step } else { 0.0 };
            let floor = f64::EPSILON * (64.0 * moved[p].1.action + differences) * column.scale;
            let error = figure(coarse[k][p], fine[k][p], floor);
            Derivative::new(factor * coarse[k][p], factor * error, factor * factor * second[k][p], asked * column.scale)
        };
        let by = (0..moved.len()).map(derivative).collect();
        let FinalColumn { name, unit, scale } = column;
        finals.push(FinalSensitivity { name, unit, scale, value: values[k], by });
    }
    Ok(Sensitivity {
        tolerance: asked,
        tolerance_given: tolerance.is_some(),
        numbers,
        finals,
        left_out,
        without,
        words: format!("carried back once for all numbers{}", if open { ", density matrices" } else { "" }),
        seconds: clock.elapsed().as_secs_f64(),
    })
}

/// A number in the unit it was written in.
fn moved_number(document: &Document, point: &Point, number: &NamedNumber) -> MovedNumber {
    let set = document.set.iter().find(|(name, _)| *name == number.name).map(|(_, text)| text.as_str());
    let written = document.root.get("numbers").and_then(|numbers| numbers.get(&number.name)).and_then(|node| node.text());
    let own = set.or(written).and_then(own_unit).filter(|(_, unit)| unit.dim == number.dim);
    let si = point.values[number.register as usize];
    // a formula has no unit of its own: the one that it would be read out in
    let read_out = || short_with_unit(si, &number.dim.unit()).split_once(' ').and_then(|(_, symbol)| own_unit(&format!("1 {symbol}")));
    let (unit, factor) = match own.or_else(read_out) {
        Some((symbol, unit)) => (symbol, unit.factor),
        None => (number.dim.unit(), 1.0),
    };
    let value = si / factor;
    MovedNumber { name: number.name.clone(), unit, factor, value, dim: number.dim }
}

/// The unit of a text such as `2.5 MHz` or `2.5MHz`.
fn own_unit(text: &str) -> Option<(String, Unit)> {
    let text = text.trim();
    let at = text.char_indices().find(|(k, _)| text[..*k].parse::<f64>().is_ok() && unit(text[*k..].trim()).is_some())?.0;
    let symbol = text[at..].trim();
    unit(symbol).map(|unit| (symbol.to_string(), unit))
}

/// Values, derivatives, and whether they hold differences of numbers of order 1.
type FirstDerivatives = (Vec<f64>, Vec<Vec<f64>>, Vec<Vec<bool>>);

struct Job<'a, 'p> {
    document: &'a Document,
    point: &'a Point<'p>,
    open: bool,
    moved: &'a [(&'a NamedNumber, Neighbourhood<'a>)],
}

impl Job<'_, '_> {
    fn finals<'b>(&'b self, point: &'b Point) -> Finals<'b> {
        Finals::new(self.document, point, self.open)
    }

    /// The final numbers, their derivatives `[final][number]` at one of the two resolutions, SI, and whether the number is in the start or in the
    /// final number itself, whose differences are rounded.
    fn first_derivatives(&self, resolution: usize) -> Result<FirstDerivatives, TooLarge> {
        let here = self.finals(self.point);
        let carried = Carried::new(self.point.problem(), &here.start(), self.open, FINENESS[resolution])?;
        let values = here.values(&carried.end);
        let mut moved = Vec::with_capacity(self.moved.len());
        let mut explicit = Vec::with_capacity(self.moved.len());
        for (_, around) in self.moved {
            let weights = WEIGHTS[resolution].iter().map(|weight| weight / around.step);
            let mut problems = Vec::new();
            let mut start = Matrix::zeros(carried.end.nrows(), carried.end.ncols());
            let mut direct = vec![0.0; values.len()];
            for (weight, point) in weights.zip(&around.points).filter(|(weight, _)| *weight != 0.0) {
                let there = self.finals(point);
                if around.action > 0.0 {
                    problems.push((weight, point.problem()));
                }
                start += there.start() * Complex64::from(weight);
                for (sum, value) in direct.iter_mut().zip(there.values(&carried.end)) {
                    *sum += weight * value;
                }
            }
            moved.push(Moved { problems, start });
            explicit.push(direct);
        }
        let mut found = carried.derivatives(&here.seeds(&carried.end), &moved)?;
        let mut differenced = vec![Vec::with_capacity(self.moved.len()); values.len()];
        for (k, row) in found.iter_mut().enumerate() {
            for ((derivative, direct), moved) in row.iter_mut().zip(&explicit).zip(&moved) {
                *derivative += direct[k];
                differenced[k].push(direct[k] != 0.0 || moved.start.iter().any(|entry| entry.norm() != 0.0));
            }
        }
        Ok((values, found, differenced))
    }

    /// Second derivatives `[final][number]`, SI, by the second difference of whole runs.
    fn second_derivatives(&self, values: &[f64], scales: &[f64]) -> Result<Vec<Vec<f64>>, TooLarge> {
        let mut found = vec![Vec::with_capacity(self.moved.len()); values.len()];
        for (_, around) in self.moved {
            let ends = |point: &Point| -> Result<Vec<f64>, TooLarge> {
                let there = self.finals(point);
                Ok(there.values(&Carried::new(point.problem(), &there.start(), self.open, FINENESS[0])?.end))
            };
            let [down, up] = [ends(&around.wide_points[0])?, ends(&around.wide_points[1])?];
            for (k, row) in found.iter_mut().enumerate() {
                let difference = up[k] - 2.0 * values[k] + down[k];
                // below rounding there is no curvature to speak of
                let seen = difference.abs() > 1e-12 * scales[k];
                row.push(if seen { difference / (around.wide * around.wide) } else { 0.0 });
            }
        }
        Ok(found)
    }
}

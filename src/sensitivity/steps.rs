//! How far a named number is moved: far enough that what moves with it stands clear of rounding, near enough that differences of high
//! order are exact, and what the moved points are.

use crate::config::document::Document;
use crate::config::messages::{one_line, Mistake};
use crate::config::reader::NamedNumber;
use crate::plan::{Mover, Plan, Point};
use crate::propagate::gradient::{apart, Apart};
use crate::units::Dim;

/// Relative change of an entry of the generator that one step makes: differences of order 4 are then exact to some 1e-12 of it.
const STEP: f64 = 2e-3;
/// Change of the action (radians turned by what moves) in the second difference.
const CURVATURE_STEP: f64 = 0.02;
/// A number is moved by this share of itself at most, so that it keeps its sign and lengths stay lengths.
const LARGEST_SHARE: f64 = 2e-3;
/// The same in the second difference.
const LARGEST_WIDE_SHARE: f64 = 0.02;
/// A smaller relative change of the generator, at the largest step, is rounding.
const ROUNDING: f64 = 1e-11;

/// A number's neighbourhood: points at -2, -1, -1/2, 1/2, 1, 2 steps, and at -1 and 1 steps of the second difference.
pub(super) struct Neighbourhood<'p> {
    /// One step, SI.
    pub step: f64,
    /// The points for first derivatives.
    pub points: [Point<'p>; 6],
    /// The step of the second difference, SI.
    pub wide: f64,
    /// Its points.
    pub wide_points: [Point<'p>; 2],
    /// Radians turned by what moves, for one SI unit of the number; 0 where the Hamiltonian, times and jumps do not move.
    pub action: f64,
}

/// Weights of [`Neighbourhood::points`] over the step, for a whole step and for half of it (B. Fornberg, Mathematics of Computation 51, 699
/// (1988): order 4).
pub(super) const WEIGHTS: [[f64; 6]; 2] =
    [[1.0 / 12.0, -8.0 / 12.0, 0.0, 0.0, 8.0 / 12.0, -1.0 / 12.0], [0.0, 2.0 / 12.0, -16.0 / 12.0, 16.0 / 12.0, -2.0 / 12.0, 0.0]];
const PLACES: [f64; 6] = [-2.0, -1.0, -0.5, 0.5, 1.0, 2.0];

/// A first step for a number that is zero, SI.
fn unit_step(dim: Dim) -> f64 {
    match dim {
        Dim::TIME => 1e-12,
        Dim::FREQUENCY | Dim::RATE => 1e3,
        _ => 1e-4,
    }
}

/// The points around a number, or why there are none.
pub(super) fn neighbourhood<'p>(plan: &'p Plan, point: &Point, number: &NamedNumber, open: bool) -> Result<Neighbourhood<'p>, String> {
    let document = plan.document();
    let name = number.name.as_str();
    if plan.is_structural(&[name]) {
        return Err("it is a count that shapes the file, and cannot move a little".to_string());
    }
    let value = point.values[number.register as usize];
    let words = |mistake: Mistake| format!("it cannot be moved a little: {}", one_line(&document.sources, &mistake));
    let mut mover = plan.mover(&[name]).map_err(words)?;
    let mut at = |offset: f64| moved(document, &mut mover, point, value + offset, open);
    let largest = if value == 0.0 { f64::INFINITY } else { LARGEST_SHARE * value.abs() };
    let mut step = if value == 0.0 { unit_step(number.dim) } else { 1e-4 * value.abs() };
    // the generator changes in proportion to the step; once more where the first guess was far off
    let mut change = at(step)?.1;
    for _ in 0..3 {
        if change.relative == 0.0 || (0.3..3.0).contains(&(change.relative / STEP)) {
            break;
        }
        let wanted = (step * (STEP / change.relative).clamp(1e-5, 1e5)).min(largest);
        if wanted == step {
            break;
        }
        step = wanted;
        change = at(step)?.1;
    }
    let action = if change.relative < ROUNDING { 0.0 } else { change.action / step };
    // exact in binary, so that half and twice of it are too
    step = step.log2().round().exp2();
    let mut points = Vec::with_capacity(PLACES.len());
    for place in PLACES {
        points.push(at(place * step)?.0);
    }
    let widest = if value == 0.0 { f64::INFINITY } else { LARGEST_WIDE_SHARE * value.abs() };
    let wide = if action > 0.0 { (CURVATURE_STEP / action).min(widest) } else { 8.0 * step };
    let wide_points = [at(-wide)?.0, at(wide)?.0];
    let points = <[Point; 6]>::try_from(points).map_err(|_| "it has no neighbourhood".to_string())?;
    Ok(Neighbourhood { step, points, wide, wide_points, action })
}

/// The point with the number at `value`, and how far it is away.
fn moved<'p>(document: &Document, mover: &mut Mover<'p>, point: &Point, value: f64, open: bool) -> Result<(Point<'p>, Apart), String> {
    let words = |mistake: Mistake| format!("it cannot be moved a little: {}", one_line(&document.sources, &mistake));
    let found = mover.at(&[value]).map_err(words)?;
    match apart(point.problem(), found.problem(), open) {
        Some(change) if change.relative.is_finite() && change.action.is_finite() => Ok((found.clone(), change)),
        _ => Err("a little more or less of it changes the order of pulses or the terms that the frame keeps".to_string()),
    }
}

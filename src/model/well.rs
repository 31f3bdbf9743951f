//! A well at one point: pieces of potential and mass become levels, and matrices of position (m), momentum (kg m/s), kinetic energy (J)
//! and of typed differential operators (SI), in the levels from the lowest.
//!
//! Everything is computed on two grids, of polynomial degree 20 and 26; the change between them is the error of each level and operator.

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::built::{Block, Built};
use super::differential::{self, DifferentialFault, Family, Term};
use super::grid::waves::{waves, Waves};
use super::grid::{Eigenfunctions, GridFault, Piece, Profile};
use super::typed_differential;
use crate::config::messages::{Fault, Mistake};
use crate::config::place::Place;
use crate::config::system::well::{Potential, Well};
use crate::config::system::Operator;
use crate::config::tape::Formula;
use crate::problem::Matrix;
use crate::units::{constants::PLANCK, kinetic_hz_m2, HBAR_J_S, HZ_PER_EV};

/// Builds a well; `typed` are the differential operators of the file.
pub fn build(well: &Well, typed: &[Operator], values: &[f64]) -> Result<Built, Mistake> {
    let pieces = pieces(well, values)?;
    let waves = waves(&pieces, well.ring, well.keep).map_err(|fault| mistake(well, fault))?;
    let functions = [Eigenfunctions::new(&waves.fine, &pieces), Eigenfunctions::new(&waves.coarse, &pieces)];
    let levels = &waves.fine.levels_hz;
    let statics = Matrix::from_fn(levels.len(), levels.len(), |row, column| if row == column { levels[row].into() } else { 0.0.into() });
    let mut built = Built::new(statics);
    built.error_hz = level_error_hz(&waves);
    built.operators = natural(well, &pieces, &functions)?;
    for operator in typed {
        let pair = [&functions[0] as &dyn Family, &functions[1] as &dyn Family];
        if let Some(block) = typed_differential::block(operator, pair, None, values)? {
            built.operators.push(block);
        }
    }
    if let (Some(mass), Some(position)) = (one_mass(&pieces), built.operators.iter().find(|block| block.name == "position")) {
        built.sum_rule = sum_rule(levels, &position.matrix, mass);
    }
    Ok(built)
}

/// Sum over m of (2 mass/hbar^2)(E_m - E_n) |x_mn|^2 for each n, 1 for a complete set (W. Thomas, Naturwissenschaften 13, 627 (1925);
/// F. Reiche and W. Thomas, Zeitschrift fuer Physik 34, 510 (1925); W. Kuhn, Zeitschrift fuer Physik 33, 408 (1925)).
fn sum_rule(levels_hz: &[f64], position: &Matrix, mass: f64) -> Vec<f64> {
    let of = |n: usize| (0..levels_hz.len()).map(|m| (levels_hz[m] - levels_hz[n]) * position[(m, n)].norm_sqr()).sum::<f64>();
    (0..levels_hz.len()).map(|n| of(n) / kinetic_hz_m2(mass)).collect()
}

/// The change of the levels between the grids, and no less than the rounding of the highest, counted from the bottom of the levels.
fn level_error_hz(waves: &Waves) -> f64 {
    let levels = &waves.fine.levels_hz;
    let largest = levels.iter().fold(0.0f64, |most, level| most.max(level.abs()));
    (2.0 * waves.level_error_hz()).max(4.0 * f64::EPSILON * largest)
}

fn one_mass(pieces: &[Piece]) -> Option<f64> {
    let mass = |piece: &Piece| if let Profile::Constant(mass) = piece.mass_kg { Some(mass) } else { None };
    let first = mass(&pieces[0])?;
    pieces.iter().all(|piece| mass(piece) == Some(first)).then_some(first)
}

fn mistake(well: &Well, fault: GridFault) -> Mistake {
    let fault = match fault {
        GridFault::Potential(x_m) => Fault::NoValueAt { what: "the potential".to_string(), x_m },
        GridFault::Mass(x_m) => Fault::NoValueAt { what: "the mass is not positive, or it".to_string(), x_m },
        GridFault::TooMany(most) => {
            Fault::OutOfRange { what: "keep".to_string(), found: well.keep.to_string(), wanted: format!("at most {most} here") }
        }
    };
    Mistake::error(well.place, fault)
}

fn not_positive(place: Place, what: &str, value: f64, unit: &str) -> Mistake {
    Mistake::error(place, Fault::NotPositive { what: what.to_string(), value, unit: unit.to_string() })
}

/// A formula of x, or the constant that it is.
fn profile(formula: &Formula, values: &[f64]) -> Profile {
    let bound = formula.bind(values);
    if formula.is_constant() {
        Profile::Constant(bound.at(0.0))
    } else {
        Profile::Formula(bound)
    }
}

/// The stretches of the axis from left to right.
fn pieces(well: &Well, values: &[f64]) -> Result<Vec<Piece>, Mistake> {
    let value = |register: u32| values[register as usize];
    let mass = well.mass.as_ref().map_or(Profile::Constant(0.0), |mass| profile(mass, values));
    // energy -charge e F x, over h
    let tilt_hz_per_m = well.tilt.map_or(0.0, |tilt| -value(tilt.charge.register) * value(tilt.field.register) * HZ_PER_EV);
    let piece =
        |from_m: f64, to_m: f64, potential_hz: Profile, mass_kg: Profile| Piece { from_m, to_m, potential_hz, tilt_hz_per_m, mass_kg };
    match &well.potential {
        Potential::Layers(layers) => {
            let mut at = 0.0;
            let mut found = Vec::new();
            for layer in layers {
                let length = value(layer.length.register);
                if !(length > 0.0) {
                    return Err(not_positive(layer.length.place, "the length of a layer", length, "m"));
                }
                let own = layer.mass.map_or_else(|| mass.clone(), |mass| Profile::Constant(value(mass.register)));
                if let (Some(quantity), Profile::Constant(kg)) = (layer.mass, &own) {
                    if !(*kg > 0.0) {
                        return Err(not_positive(quantity.place, "a mass", *kg, "kg"));
                    }
                }
                found.push(piece(at, at + length, Profile::Constant(value(layer.potential.register)), own));
                at += length;
            }
            Ok(found)
        }
        Potential::Formula { formula, from, to } => {
            let (from_m, to_m) = (value(from.register), value(to.register));
            if !(to_m > from_m) {
                return Err(not_positive(to.place, "to minus from", to_m - from_m, "m"));
            }
            let potential = profile(formula, values);
            let mut ends = vec![from_m];
            ends.extend(potential.kinks(from_m, to_m));
            ends.extend(mass.kinks(from_m, to_m));
            ends.push(to_m);
            ends.sort_by(f64::total_cmp);
            ends.dedup_by(|later, earlier| *later - *earlier <= 1e-12 * (to_m - from_m));
            Ok(ends.windows(2).map(|two| piece(two[0], two[1], potential.clone(), mass.clone())).collect())
        }
        Potential::Table { x_m, energy_hz } => {
            let line = |k: usize| {
                let slope = (energy_hz[k + 1] - energy_hz[k]) / (x_m[k + 1] - x_m[k]);
                piece(x_m[k], x_m[k + 1], Profile::Line { at: x_m[k], value: energy_hz[k], slope }, mass.clone())
            };
            Ok((0..x_m.len() - 1).map(line).collect())
        }
    }
}

/// What is smaller than this share of the largest entry is rounding.
const ROUNDING: f64 = 4e-15;

/// A block of the matrix on the finer grid times `factor`, with the change from the coarser one; entries within it are 0.
pub fn measured(name: &str, unit: &'static str, fine: Matrix, coarse: &Matrix) -> Block {
    let largest = fine.iter().map(|z| z.norm()).fold(0.0, f64::max);
    let change = (&fine - coarse).iter().map(|z| z.norm()).fold(0.0, f64::max);
    let error = (2.0 * change).max(ROUNDING * largest);
    let matrix = fine.map(|z| if z.norm() <= error { Complex64::from(0.0) } else { z });
    Block { error, ..Block::new(name, unit, matrix) }
}

/// Position, momentum and kinetic energy.
fn natural(well: &Well, pieces: &[Piece], functions: &[Eigenfunctions; 2]) -> Result<Vec<Block>, Mistake> {
    let of = |terms: &[Term], factor: Complex64, sign: f64| -> Result<[Matrix; 2], Mistake> {
        let one = |family: &Eigenfunctions| -> Result<Matrix, Mistake> {
            let found = differential::matrix(family, terms).map_err(|fault| no_meaning(well.place, fault))?;
            // the law of the operator, which quadrature keeps only to rounding
            let exact = (&found.fine + found.fine.transpose() * sign) * 0.5;
            Ok(exact.map(|entry| factor * entry))
        };
        Ok([one(&functions[0])?, one(&functions[1])?])
    };
    let mut blocks = Vec::new();
    if !well.ring {
        let x = Profile::Line { at: 0.0, value: 0.0, slope: 1.0 };
        let place = Term { order: 0, coefficient: x };
        let [fine, coarse] = of(std::slice::from_ref(&place), 1.0.into(), 1.0)?;
        blocks.push(with_images(measured("position", "m", fine, &coarse), &functions[0], place, 1.0));
    }
    let slope = Term { order: 1, coefficient: Profile::Constant(1.0) };
    let [fine, coarse] = of(std::slice::from_ref(&slope), Complex64::new(0.0, -HBAR_J_S), -1.0)?;
    blocks.push(with_images(measured("momentum", "kg m/s", fine, &coarse), &functions[0], slope, HBAR_J_S));
    let [fine, coarse] = [kinetic(pieces, &functions[0]), kinetic(pieces, &functions[1])];
    blocks.push(measured("kinetic", "J", fine, &coarse));
    Ok(blocks)
}

/// A block with what its operator, `factor` times `term`, leads to outside the kept states.
fn with_images(mut block: Block, functions: &Eigenfunctions, term: Term, factor: f64) -> Block {
    if let Some(images) = differential::images(functions, &[(term, None)]) {
        block.beyond = typed_differential::beyond(&block.matrix, images.map(|entry| Complex64::from(entry * factor * factor)));
    }
    block
}

/// integral of hbar^2/(2 m) f_a' f_b', J: the form that holds at a step of the mass too.
fn kinetic(pieces: &[Piece], functions: &Eigenfunctions) -> Matrix {
    let size = functions.count();
    let mut sum = DMatrix::zeros(size, size);
    for (index, [from, to]) in functions.panels().into_iter().enumerate() {
        let mass = &pieces[functions.piece(index)].mass_kg;
        differential::add_products(&mut sum, from, to, &|x| {
            let slopes: Vec<f64> = functions.jets(index, x, 2).iter().map(|jet| jet.0[1]).collect();
            (slopes.clone(), slopes, kinetic_hz_m2(mass.value(x)) * PLANCK)
        });
    }
    let exact = (&sum + sum.transpose()) * 0.5;
    exact.map(Complex64::from)
}

/// What a differential operator stumbles over, as a mistake at `place`.
pub fn no_meaning(place: Place, fault: DifferentialFault) -> Mistake {
    let (order, reason, write) = match fault {
        DifferentialFault::TooHigh(order) => (order, "it is too high".to_string(), format!("an order up to {}", differential::HIGHEST)),
        DifferentialFault::Steps(order) => (
            order,
            "a step or a kink of the mass, the potential or the coefficient leaves it infinite".to_string(),
            "a lower order, or smooth functions in place of steps".to_string(),
        ),
        DifferentialFault::Open(order) => {
            (order, "its coefficient does not close on the ring".to_string(), "a coefficient such as cos(1 turn * x / girth)".to_string())
        }
        DifferentialFault::NotFinite(_, x_m) => {
            return Mistake::error(place, Fault::NoValueAt { what: "the coefficient".to_string(), x_m });
        }
    };
    Mistake::error(place, Fault::NoMeaning { order, reason, write })
}

//! Matrices in a basis: the checked config's entries become dense Hermitian matrices. Knows nothing of time.

pub mod angular_momentum;
mod atom;
pub mod basis;
pub mod built;
pub mod commutators;
pub mod differential;
pub mod expansion;
mod functions;
pub mod gaps;
pub mod grid;
mod mode;
mod parts;
pub mod product;
pub mod spin;
pub mod surroundings;
mod typed_differential;
mod well;

use num_complex::Complex64;

use crate::config::document::Document;
use crate::config::drives::{Drive, DriveMatrix};
use crate::config::matrix::MatrixEntry;
use crate::config::messages::{Fault, Mistake, OpenFault};
use crate::config::state::State;
use crate::config::system::{Operator, OperatorSource, Physics, System};
use crate::problem::{Matrix, Start, Vector};
use crate::units::cis_turns;

use built::Built;

/// The system of a document at one point, in its working basis; `values` are the registers of the tape, of which those that
/// follow its own levels need not be known.
pub fn build(document: &Document, values: &[f64]) -> Result<Built, Mistake> {
    let built = build_system(&document.system, &document.built_names, &document.operators, values)?;
    basis::change(built, &document.basis, &document.built_names, values)
}

/// A system as built, without a change of basis. Every kind has its line here.
fn build_system(system: &System, names: &[String], operators: &[Operator], values: &[f64]) -> Result<Built, Mistake> {
    let size = names.len();
    Ok(match &system.physics {
        Physics::Typed => Built::new(dense(size, &system.entries, values)),
        Physics::Ladder(rungs) => mode::ladder(system.kind, dense(size, &system.entries, values), rungs, values),
        Physics::Spin(spin) => spin::build(spin, values),
        Physics::Mode(mode) => mode::build(mode, values),
        Physics::Atom(one) => atom::build_in(one, values, [0.0; 3]),
        Physics::Parts(parts) => parts::build(parts, values)?,
        Physics::Well(well) => well::build(well, operators, values)?,
        Physics::Functions(functions) => functions::build(functions, names, operators, values)?,
    })
}

/// The named operator of this index in the working basis, in SI units.
pub fn operator(document: &Document, built: &Built, index: usize, values: &[f64]) -> Matrix {
    let operator = &document.operators[index];
    match &operator.source {
        OperatorSource::Typed(entries) => dense(built.size(), entries, values),
        OperatorSource::AsBuilt(entries) => built.to_working(dense(document.built_names.len(), entries, values)),
        OperatorSource::Displacement { of, by } => {
            let by = Complex64::new(values[by.re as usize], by.im.map_or(0.0, |im| values[im as usize]));
            built.displacement(of, by)
        }
        OperatorSource::Natural | OperatorSource::Differential(_) => built.operator(&operator.name),
    }
}

/// The matrix of a drive in the working basis, not yet scaled: plain, or in Hz/T where it is that of a magnetic moment.
pub fn drive_matrix(document: &Document, built: &Built, drive: &Drive, values: &[f64]) -> Matrix {
    match &drive.matrix {
        DriveMatrix::Typed(entries) => dense(built.size(), entries, values),
        DriveMatrix::Operator(index) => operator(document, built, *index, values),
        DriveMatrix::Quanta(part) => built.quanta(part),
        DriveMatrix::Light(part, light) => built.light(part, *light),
        DriveMatrix::Moment(part, direction) => built.moment(part, direction.map(|component| values[component.register as usize])),
    }
}

/// The matrix of written entries, `size` x `size`, in the unit of the entries; `values` are the registers of the tape.
pub fn dense(size: usize, entries: &[MatrixEntry], values: &[f64]) -> Matrix {
    let mut matrix = Matrix::zeros(size, size);
    for entry in entries {
        let im = entry.value.im.map_or(0.0, |im| values[im as usize]);
        matrix[(entry.row, entry.column)] += Complex64::new(values[entry.value.re as usize], im);
    }
    matrix
}

/// Whether a matrix equals its adjoint to `share` of its largest entry.
pub fn is_hermitian(matrix: &Matrix, share: f64) -> bool {
    let largest = matrix.iter().map(|z| z.norm()).fold(0.0, f64::max);
    (0..matrix.ncols()).all(|j| (0..=j).all(|i| (matrix[(i, j)] - matrix[(j, i)].conj()).norm() <= share * largest))
}

/// Amplitudes of a pure state, norm 1; none of a mixture.
pub fn amplitudes(size: usize, state: &State, values: &[f64]) -> Option<Vector> {
    let mut vector = Vector::zeros(size);
    match state {
        State::Level(level) => vector[*level] = 1.0.into(),
        State::Superposition(parts, _) => {
            for (level, amplitude, phase) in parts {
                vector[*level] += cis_turns(values[phase.register as usize]) * values[amplitude.register as usize];
            }
            vector.normalize_mut();
        }
        State::Amplitudes(list) => {
            for (k, (re, im)) in list.iter().enumerate() {
                vector[k] = Complex64::new(*re, *im);
            }
        }
        State::Density(_) | State::Mix(_) | State::Thermal(_) | State::Steady(_) | State::Quanta { .. } => return None,
    }
    Some(vector)
}

/// The state at time zero; `statics_hz` is the static Hamiltonian. None for a steady state, which is solved for.
pub fn start(state: &State, values: &[f64], statics_hz: &Matrix) -> Result<Option<Start>, Mistake> {
    let size = statics_hz.nrows();
    let diagonal = |shares: &[(usize, f64)]| {
        let mut density = Matrix::zeros(size, size);
        shares.iter().for_each(|(level, share)| density[(*level, *level)] += Complex64::from(*share));
        density
    };
    Ok(match state {
        State::Density(list) => Some(Start::Mixed(Matrix::from_iterator(size, size, list.iter().map(|(re, im)| Complex64::new(*re, *im))))),
        State::Mix(shares) => {
            let numbers = shares.numbers(None, "mix", values).map_err(|fault| Mistake::error(shares.place, fault))?;
            let shares: Vec<(usize, f64)> = shares.parts.iter().filter_map(|(level, ..)| *level).zip(numbers).collect();
            Some(Start::Mixed(diagonal(&shares)))
        }
        State::Thermal(temperature) => {
            let kelvin = values[temperature.register as usize];
            if !(kelvin >= 0.0) {
                let fault = Fault::Open(OpenFault::BelowZeroKelvin { found: kelvin });
                return Err(Mistake::error(temperature.place, fault));
            }
            Some(Start::Mixed(surroundings::thermal(statics_hz, kelvin)))
        }
        State::Steady(_) => None,
        State::Quanta { base, modes } => {
            let mut shares = vec![(*base, 1.0)];
            for warm in modes {
                let mean = values[warm.mean.register as usize];
                let each = mode::thermal(mean, warm.levels);
                let spread = |(level, share): &(usize, f64)| -> Vec<(usize, f64)> {
                    each.iter().enumerate().map(|(n, of)| (level + n * warm.stride, share * of)).collect()
                };
                shares = shares.iter().flat_map(spread).collect();
            }
            Some(Start::Mixed(diagonal(&shares)))
        }
        State::Level(_) | State::Superposition(..) | State::Amplitudes(_) => amplitudes(size, state, values).map(Start::Pure),
    })
}

#[cfg(test)]
mod tests;

//! The matrix of a drive: scaled by its reference entry, and cut down to one rotation sense where the form says so.
//!
//! H_lab = 2 pi R(t) cos(2 pi f t + phase) M with |M_reference| = 1. As the `Problem` writes it, c exp(-2 pi i f t) B +
//! adjoint with c = 2 pi R/2 exp(-i phase): B = M for a linear drive; B_ul = M_ul on each pair, u the upper level, for a
//! one-sided one (its diagonal halved, the adjoint adds the other half); B = M/2 for a direct drive, c = 2 pi times the entry.

use num_complex::Complex64;

use crate::config::drives::{Drive, Form};
use crate::model;
use crate::problem::Matrix;
use crate::units::RAD_PER_TURN;

/// A drive's matrices at one point.
#[derive(Debug, Clone)]
pub struct Coupling {
    /// M, scaled.
    pub matrix: Matrix,
    /// B.
    pub turning: Matrix,
    /// Lower and upper level of the reference pair, by energy (as written where equal).
    pub reference: Option<[usize; 2]>,
    /// Phase of <upper|M|lower> on the reference pair, turns.
    pub reference_turns: f64,
    /// Modulus of the reference entry as typed, by which the matrix was divided.
    pub scale: f64,
}

/// Why a drive has no matrix at a point.
#[derive(Debug, Clone, PartialEq)]
pub enum CouplingFault {
    /// The reference entry is zero.
    ReferenceZero([usize; 2]),
    /// The matrix is not Hermitian and the form needs it.
    NotHermitian,
}

/// The matrices of `drive`; `matrix` is its matrix before scaling, `energies` the diagonal of the static Hamiltonian.
pub fn coupling(drive: &Drive, mut matrix: Matrix, energies: &[f64]) -> Result<Coupling, CouplingFault> {
    let size = energies.len();
    let hermitian = model::is_hermitian(&matrix, 1e-12);
    if !hermitian && drive.form != Form::OneSided {
        return Err(CouplingFault::NotHermitian);
    }
    let ordered = |[a, b]: [usize; 2]| if energies[a] <= energies[b] { [a, b] } else { [b, a] };
    let reference = drive.reference.map(ordered);
    let (mut reference_turns, mut scale) = (0.0, 1.0);
    if let Some([lower, upper]) = reference {
        let entry = matrix[(upper, lower)];
        // a one-sided drive may couple upwards or downwards alone
        let entry = if entry.norm() > 0.0 { entry } else { matrix[(lower, upper)].conj() };
        if entry.norm() == 0.0 {
            return Err(CouplingFault::ReferenceZero([lower, upper]));
        }
        scale = entry.norm();
        matrix /= Complex64::from(scale);
        reference_turns = entry.arg() / RAD_PER_TURN;
    }
    let turning = match drive.form {
        Form::Linear => matrix.clone(),
        Form::Direct => &matrix * Complex64::from(0.5),
        // what is not Hermitian is taken as typed: its adjoint turns the other way
        Form::OneSided if !hermitian => {
            if drive.opposite {
                matrix.adjoint()
            } else {
                matrix.clone()
            }
        }
        Form::OneSided => Matrix::from_fn(size, size, |row, column| {
            if row == column {
                return matrix[(row, column)] * 0.5;
            }
            // of equal energies the pair as written counts, the first the lower one: in basis order here
            let row_is_upper =
                if energies[row] == energies[column] { upper_as_written(drive, row, column) } else { energies[row] > energies[column] };
            if row_is_upper != drive.opposite {
                matrix[(row, column)]
            } else {
                Complex64::from(0.0)
            }
        }),
    };
    Ok(Coupling { matrix, turning, reference, reference_turns, scale })
}

fn upper_as_written(drive: &Drive, row: usize, column: usize) -> bool {
    match drive.reference {
        Some([lower, upper]) if [lower, upper] == [column, row] => true,
        Some([lower, upper]) if [lower, upper] == [row, column] => false,
        _ => row > column,
    }
}

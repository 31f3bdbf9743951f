//! An expansion at one point: functions as typed become orthonormal states, and the Hamiltonian (Hz) and operators (SI) matrices in them.
//!
//! Both resolutions of the quadrature are carried through the orthogonalisation to the end; their change is the error.

use super::built::Built;
use super::differential::{self, Family, Term};
use super::expansion::{independence, orthonormal, skewness, Expansion, LEAST};
use super::grid::Profile;
use super::typed_differential::{block, largest, term, whole};
use super::well::no_meaning;
use crate::config::messages::{Fault, Mistake};
use crate::config::system::functions::{Functions, Orthogonalise};
use crate::config::system::Operator;
use crate::problem::Matrix;
use num_complex::Complex64;

/// Functions that overlap by less than this share of their norms are orthogonal.
const ORTHOGONAL: f64 = 1e-12;
/// A Hamiltonian that differs from its adjoint by more than this share of its largest entry is refused.
const HERMITIAN: f64 = 1e-9;

/// Builds an expansion; `names` are those of the functions, `typed` the differential operators of the file.
pub fn build(functions: &Functions, names: &[String], typed: &[Operator], values: &[f64]) -> Result<Built, Mistake> {
    let value = |register: u32| values[register as usize];
    let (from, to) = (value(functions.from.register), value(functions.to.register));
    if !(to > from) {
        let fault = Fault::NotPositive { what: "to minus from".to_string(), value: to - from, unit: functions.dim.unit() };
        return Err(Mistake::error(functions.to.place, fault));
    }
    let family = Expansion::new(functions.list.iter().map(|formula| formula.bind(values)).collect(), from, to);
    if let Some((which, x)) = family.without_value() {
        let place = functions.list[which].place;
        return Err(Mistake::error(place, Fault::NoValueAt { what: format!("the function {}", names[which]), x_m: x }));
    }
    let one = [Term { order: 0, coefficient: Profile::Constant(1.0) }];
    let overlap = differential::matrix(&family, &one).map_err(|fault| no_meaning(functions.place, fault))?;
    let (skew, [a, b]) = skewness(&overlap.fine);
    let least = independence(&overlap.fine);
    if !(least > LEAST) {
        return Err(Mistake::error(functions.place, Fault::Dependent { least: least.max(0.0), names: names.to_vec() }));
    }
    let how = match functions.orthogonalise {
        Some(how) => how,
        None if skew <= ORTHOGONAL => Orthogonalise::InOrder,
        None => {
            let fault = Fault::NotOrthogonal { first: names[a].clone(), second: names[b].clone(), overlap: skew };
            return Err(Mistake::error(functions.place, fault));
        }
    };
    let shares = [&overlap.fine, &overlap.coarse].map(|overlap| orthonormal(overlap, how).map(Complex64::from));
    let raw = whole(&family, &functions.hamiltonian, values)?;
    let [fine, coarse] = [0, 1].map(|k| shares[k].adjoint() * &raw[k] * &shares[k]);
    // terms may cancel, so the difference from the adjoint is judged beside them and not beside their sum
    let mut scale = 0.0;
    for written in &functions.hamiltonian.terms {
        let [term, _] = term(&family, written, values)?;
        scale += largest(&(shares[0].adjoint() * term * &shares[0]));
    }
    if residue(&fine) > HERMITIAN * scale {
        return Err(not_hermitian(functions, &family, &shares[0], &fine, values)?);
    }
    let (fine, coarse) = (hermitian(&fine), hermitian(&coarse));
    let change = (&fine - &coarse).norm();
    let mut built = Built::new(fine);
    built.error_hz = (2.0 * change).max(4.0 * f64::EPSILON * scale / least);
    built.overlap = Some(overlap.fine.map(Complex64::from));
    for operator in typed {
        if let Some(block) = block(operator, [&family, &family], Some(&shares), values)? {
            built.operators.push(block);
        }
    }
    Ok(built)
}

fn hermitian(matrix: &Matrix) -> Matrix {
    (matrix + matrix.adjoint()) * Complex64::from(0.5)
}

fn residue(matrix: &Matrix) -> f64 {
    (matrix - matrix.adjoint()).iter().map(|z| z.norm()).fold(0.0, f64::max)
}

/// The mistake of a Hamiltonian that is not Hermitian, at the term from which most of the residue comes.
fn not_hermitian(functions: &Functions, family: &dyn Family, shares: &Matrix, whole: &Matrix, values: &[f64]) -> Result<Mistake, Mistake> {
    let mut worst = (0.0, &functions.hamiltonian.terms[0]);
    for written in &functions.hamiltonian.terms {
        let [fine, _] = term(family, written, values)?;
        let size = residue(&(shares.adjoint() * fine * shares));
        if size > worst.0 {
            worst = (size, written);
        }
    }
    let fault = Fault::NotHermitianDifferential {
        what: "the Hamiltonian".to_string(),
        order: worst.1.order,
        residue: residue(whole) / largest(whole),
    };
    Ok(Mistake::error(worst.1.place, fault))
}

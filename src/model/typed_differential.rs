//! A differential operator as typed, as a matrix between functions.

use std::sync::Arc;

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::built::Block;
use super::differential::{self, Family, Term};
use super::grid::Profile;
use super::well::{measured, no_meaning};
use crate::config::differential::{Differential, WrittenTerm};
use crate::config::messages::Mistake;
use crate::config::system::{Operator, OperatorSource};
use crate::config::tape::Formula;
use crate::problem::Matrix;
use crate::units::{constants::PLANCK, lasting, Dim};

/// Name of the unit in which a matrix of this dimension stands, and the factor to it: energies leave in joule.
fn si_unit(dim: Dim) -> (&'static str, f64) {
    match dim {
        Dim::FREQUENCY => ("J", PLANCK),
        other => (lasting(other.unit()), 1.0),
    }
}

fn profile(formula: &Formula, values: &[f64]) -> Profile {
    let bound = formula.bind(values);
    if formula.is_constant() {
        Profile::Constant(bound.at(0.0))
    } else {
        Profile::Formula(bound)
    }
}

/// Real and imaginary coefficient of a term.
fn parts_of(term: &WrittenTerm, values: &[f64]) -> (Term, Option<Profile>) {
    let real = Term { order: term.order, coefficient: profile(&term.coefficient, values) };
    (real, term.imaginary.as_ref().map(|imaginary| profile(imaginary, values)))
}

/// What is smaller than this share of |A n|^2 is rounding of the difference.
const CANCELS: f64 = 1e-9;

/// <A m| (1 - P) |A n> from the scalar products of the images and the matrix of A in the kept states.
pub fn beyond(matrix: &Matrix, images: Matrix) -> Option<Arc<Matrix>> {
    let size: Vec<f64> = (0..images.nrows()).map(|n| images[(n, n)].re.max(0.0).sqrt()).collect();
    let mut left = images - matrix.adjoint() * matrix;
    for column in 0..size.len() {
        for row in 0..size.len() {
            if left[(row, column)].norm() <= CANCELS * size[row] * size[column] {
                left[(row, column)] = 0.0.into();
            }
        }
    }
    left.iter().any(|z| z.norm() > 0.0).then(|| Arc::new(left))
}

/// The matrix of one term on `family`, at both resolutions of the quadrature, in Hz or SI.
pub fn term(family: &dyn Family, term: &WrittenTerm, values: &[f64]) -> Result<[Matrix; 2], Mistake> {
    let one = |formula: &Formula| {
        let terms = [Term { order: term.order, coefficient: profile(formula, values) }];
        differential::matrix(family, &terms).map_err(|fault| no_meaning(term.place, fault))
    };
    let re = one(&term.coefficient)?;
    let im = term.imaginary.as_ref().map(one).transpose()?;
    let join = |re: DMatrix<f64>, im: Option<&DMatrix<f64>>| match im {
        Some(im) => re.zip_map(im, Complex64::new),
        None => re.map(Complex64::from),
    };
    Ok([join(re.fine, im.as_ref().map(|im| &im.fine)), join(re.coarse, im.as_ref().map(|im| &im.coarse))])
}

/// The largest modulus of an entry.
pub fn largest(matrix: &Matrix) -> f64 {
    matrix.iter().map(|z| z.norm()).fold(0.0, f64::max)
}

/// The sum of all terms.
pub fn whole(family: &dyn Family, differential: &Differential, values: &[f64]) -> Result<[Matrix; 2], Mistake> {
    let size = family.count();
    let mut sum = [Matrix::zeros(size, size), Matrix::zeros(size, size)];
    for written in &differential.terms {
        let [fine, coarse] = term(family, written, values)?;
        sum[0] += fine;
        sum[1] += coarse;
    }
    Ok(sum)
}

/// Below this share of the largest entry a difference from the adjoint is rounding.
const HERMITIAN: f64 = 1e-11;

/// Half of a matrix and its adjoint where they differ by rounding alone; else the matrix.
fn tidied(matrix: Matrix) -> Matrix {
    if super::is_hermitian(&matrix, HERMITIAN) {
        (&matrix + matrix.adjoint()) * Complex64::from(0.5)
    } else {
        matrix
    }
}

/// The block of a typed differential operator between functions on two grids, of which `shares` makes orthonormal ones; none for an
/// operator of another kind.
pub fn block(
    operator: &Operator,
    families: [&dyn Family; 2],
    shares: Option<&[Matrix; 2]>,
    values: &[f64],
) -> Result<Option<Block>, Mistake> {
    let OperatorSource::Differential(differential) = &operator.source else {
        return Ok(None);
    };
    let (unit, factor) = si_unit(differential.dim);
    let mut found = Vec::new();
    for (k, family) in families.into_iter().enumerate() {
        // the second family is the coarser one, and of one family the coarser quadrature is taken
        let [fine, coarse] = whole(family, differential, values)?;
        let raw = if k == 0 || shares.is_none() { fine } else { coarse };
        let in_basis = match shares {
            Some(shares) => shares[k].adjoint() * raw * &shares[k],
            None => raw,
        };
        found.push(tidied(in_basis * Complex64::from(factor)));
    }
    let coarse = found.pop().unwrap_or_default();
    let fine = found.pop().unwrap_or_default();
    let mut block = measured(&operator.name, unit, fine, &coarse);
    let terms: Vec<(Term, Option<Profile>)> = differential.terms.iter().map(|term| parts_of(term, values)).collect();
    if let Some(images) = differential::images(families[0], &terms) {
        let images = images.map(Complex64::from) * Complex64::from(factor * factor);
        block.beyond = beyond(&block.matrix, shares.map_or(images.clone(), |shares| shares[0].adjoint() * images * &shares[0]));
    }
    Ok(Some(block))
}

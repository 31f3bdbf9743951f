//! Products of large complex matrices by real ones, which run many times faster: of each factor the parts that vanish are left out.
//!
//! (A + i B)(C + i D) = AC - BD + i (AD + BC). Errors: those of real sums, a few roundings times the root of the size.

use nalgebra::{DMatrix, Scalar};
use num_complex::Complex64;

use crate::problem::Matrix;

/// Below this size the plain product is as fast.
const SMALL: usize = 24;

/// A B.
pub fn product(a: &Matrix, b: &Matrix) -> Matrix {
    if a.nrows().min(a.ncols()).min(b.ncols()) < SMALL {
        return a * b;
    }
    parts((a.nrows(), b.ncols()), &split(a), &split(b))
}

/// A^+ B.
pub fn adjoint_product(a: &Matrix, b: &Matrix) -> Matrix {
    if a.ncols().min(a.nrows()).min(b.ncols()) < SMALL {
        return a.adjoint() * b;
    }
    let [re, im] = split(a);
    parts((a.ncols(), b.ncols()), &[re.map(|re| re.transpose()), im.map(|im| -im.transpose())], &split(b))
}

/// Real and imaginary part; none where all of it is 0.
fn split(matrix: &Matrix) -> [Option<DMatrix<f64>>; 2] {
    let part = |of: fn(&Complex64) -> f64| {
        let found = matrix.map(|z| of(&z));
        found.iter().any(|x| *x != 0.0).then_some(found)
    };
    [part(|z| z.re), part(|z| z.im)]
}

fn parts(shape: (usize, usize), [a, b]: &[Option<DMatrix<f64>>; 2], [c, d]: &[Option<DMatrix<f64>>; 2]) -> Matrix {
    let times = |x: &Option<DMatrix<f64>>, y: &Option<DMatrix<f64>>| Some(x.as_ref()? * y.as_ref()?);
    let re = sum(times(a, c), times(b, d).map(|m| -m));
    let im = sum(times(a, d), times(b, c));
    match (re, im) {
        (Some(re), Some(im)) => re.zip_map(&im, Complex64::new),
        (Some(re), None) => re.map(Complex64::from),
        (None, Some(im)) => im.map(|im| Complex64::new(0.0, im)),
        (None, None) => Matrix::zeros(shape.0, shape.1),
    }
}

fn sum<T: Scalar + nalgebra::ClosedAddAssign>(a: Option<DMatrix<T>>, b: Option<DMatrix<T>>) -> Option<DMatrix<T>> {
    match (a, b) {
        (Some(a), Some(b)) => Some(a + b),
        (a, b) => a.or(b),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn wave(rows: usize, columns: usize, re: f64, im: f64) -> Matrix {
        let at = |i: usize, j: usize| ((i * 7 + j * 13) % 11) as f64 - 5.0;
        Matrix::from_fn(rows, columns, |i, j| Complex64::new(re * at(i, j), im * at(j, i)))
    }

    #[test]
    fn exact_products_are_those_of_the_plain_rule() {
        for (a, b) in [((1.0, 0.5), (0.25, 1.0)), ((1.0, 0.0), (0.0, 2.0)), ((0.0, 1.0), (0.0, 1.0)), ((1.0, 0.0), (1.0, 0.0))] {
            let (left, right) = (wave(40, 30, a.0, a.1), wave(30, 50, b.0, b.1));
            // whole and half numbers: nothing is rounded
            assert_eq!(product(&left, &right), &left * &right);
            let tall = wave(30, 40, a.0, a.1);
            assert_eq!(adjoint_product(&tall, &right), tall.adjoint() * &right);
        }
        let nothing = Matrix::zeros(30, 30);
        assert_eq!(product(&nothing, &wave(30, 50, 1.0, 1.0)), Matrix::zeros(30, 50));
        assert_eq!(product(&nothing, &nothing), nothing);
    }
}

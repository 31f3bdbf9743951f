//! A change of basis: columns hold the states of the working basis in those as built, and U^+ A U is a matrix in them.
//!
//! Eigenstates are found block by block: states that nothing couples are never mixed, and each block is taken without its mean
//! diagonal, so that small splittings of high levels keep their digits. Where levels coincide, the states within them are turned as
//! near as can be to states as built (the polar choice of P.-O. Lowdin, Journal of Chemical Physics 18, 365 (1950)), so that names do
//! not hang on rounding. The largest component of each is real and positive, of several equal ones the first. Errors: U is unitary
//! to a few roundings times the number of states; levels to that share of the spread of their block.

use std::sync::Arc;

use nalgebra::SymmetricEigen;
use num_complex::Complex64;

use super::built::Built;
use super::product::{adjoint_product, product};
use crate::config::basis::{judge, Basis, NewState};
use crate::config::messages::{Fault, Mistake};
use crate::config::system::functions::Orthogonalise;
use crate::config::tape::Wide;
use crate::problem::Matrix;

/// Levels closer than this share of the spread of their block count as one.
const SAME: f64 = 1e-12;
/// What is smaller than this share of the largest matrix is no coupling.
const NO_LOSS: f64 = 1e-14;

/// Puts a built system into the working basis; `names` are those of the states as built.
pub fn change(mut built: Built, basis: &Basis, names: &[String], values: &[f64]) -> Result<Built, Mistake> {
    match basis {
        Basis::AsBuilt => {}
        Basis::Eigenstates { by_energy, place } => {
            let eigen = eigenstates(&built.statics_hz, &built.energies);
            let order = if *by_energy {
                ascending(&eigen)
            } else {
                match by_growth(&eigen, &built.grown) {
                    Some(order) => order,
                    None => {
                        let (order, doubtful) = by_overlap(&eigen, names);
                        built.doubtful = doubtful.into_iter().map(|(level, fault)| (level, Mistake::error(*place, fault))).collect();
                        order
                    }
                }
            };
            let size = names.len();
            let vectors = Matrix::from_fn(size, size, |row, column| eigen.vectors[(row, order[column])]);
            built.weights = (0..size).map(|k| vectors[(k, k)].norm_sqr()).collect();
            built.energies = order.iter().map(|k| eigen.energies[*k]).collect();
            built.statics_hz =
                Matrix::from_fn(size, size, |row, column| Complex64::from(if row == column { built.energies[row].value() } else { 0.0 }));
            built.basis = Some(Arc::new(vectors));
        }
        Basis::Expansions { states, orthogonalise, place } => {
            if let Some((place, fault)) = judge(states, *orthogonalise, values) {
                return Err(Mistake::error(place, fault));
            }
            let columns = columns(states, *orthogonalise, names.len(), values).map_err(|fault| Mistake::error(*place, fault))?;
            built.weights = columns.column_iter().map(|column| column.iter().map(|z| z.norm_sqr()).fold(0.0, f64::max)).collect();
            built.sum_rule.clear();
            built.lost_hz = lost(&built.statics_hz, &columns);
            built.statics_hz = hermitian(adjoint_product(&columns, &product(&built.statics_hz, &columns)));
            built.energies = built.statics_hz.diagonal().iter().map(|z| Wide { high: z.re, low: 0.0 }).collect();
            built.basis = Some(Arc::new(columns));
        }
    }
    Ok(built)
}

/// Eigenstates in no particular order.
struct Eigen {
    energies: Vec<Wide>,
    vectors: Matrix,
}

/// Groups of states that the matrix ties together, each ascending.
pub fn blocks(matrix: &Matrix) -> Vec<Vec<usize>> {
    let size = matrix.nrows();
    let mut group: Vec<usize> = (0..size).collect();
    fn root(group: &mut [usize], mut k: usize) -> usize {
        while group[k] != k {
            group[k] = group[group[k]];
            k = group[k];
        }
        k
    }
    for column in 0..size {
        for row in 0..column {
            if matrix[(row, column)] != Complex64::from(0.0) {
                let (a, b) = (root(&mut group, row), root(&mut group, column));
                group[a.max(b)] = a.min(b);
            }
        }
    }
    let mut found: Vec<Vec<usize>> = vec![Vec::new(); size];
    for k in 0..size {
        let first = root(&mut group, k);
        found[first].push(k);
    }
    found.retain(|block| !block.is_empty());
    found
}

/// Eigenvectors of a Hermitian matrix in Hz; `diagonal` may hold more digits of its diagonal.
fn eigenstates(matrix: &Matrix, diagonal: &[Wide]) -> Eigen {
    let size = matrix.nrows();
    let mut eigen = Eigen { energies: vec![Wide::default(); size], vectors: Matrix::zeros(size, size) };
    for block in blocks(matrix) {
        let count = block.len();
        let mean = block.iter().map(|k| diagonal[*k].value()).sum::<f64>() / count as f64;
        let minus = Wide { high: -mean, low: 0.0 };
        let inner = Matrix::from_fn(count, count, |i, j| {
            if i == j {
                diagonal[block[i]].plus(minus).value().into()
            } else {
                matrix[(block[i], block[j])]
            }
        });
        let (values, raw) = solved(&inner);
        let mut order: Vec<usize> = (0..count).collect();
        order.sort_by(|a, b| values[*a].total_cmp(&values[*b]));
        let levels: Vec<f64> = order.iter().map(|k| values[*k]).collect();
        let raw = Matrix::from_fn(count, count, |row, k| raw[(row, order[k])]);
        let vectors = settled(raw, &levels);
        let images = product(&inner, &vectors);
        for (k, home) in block.iter().enumerate() {
            for (row, place) in block.iter().enumerate() {
                eigen.vectors[(*place, *home)] = vectors[(row, k)];
            }
            // the Rayleigh quotient squares what rounding left in the vector
            let level = vectors.column(k).dotc(&images.column(k)).re;
            eigen.energies[*home] = Wide { high: mean, low: 0.0 }.plus(Wide { high: level, low: 0.0 });
        }
    }
    eigen
}

/// Eigenvalues and eigenvectors in any order; of a real matrix by real numbers, which is four times as fast.
fn solved(matrix: &Matrix) -> (Vec<f64>, Matrix) {
    if matrix.iter().all(|z| z.im == 0.0) {
        let eigen = SymmetricEigen::new(matrix.map(|z| z.re));
        return (eigen.eigenvalues.iter().copied().collect(), eigen.eigenvectors.map(Complex64::from));
    }
    let eigen = SymmetricEigen::new(matrix.clone());
    (eigen.eigenvalues.iter().copied().collect(), eigen.eigenvectors)
}

/// Turns the vectors of levels that coincide to states as built, and gives each its phase.
fn settled(mut vectors: Matrix, levels: &[f64]) -> Matrix {
    let count = levels.len();
    let spread = levels.iter().fold(0.0f64, |most, level| most.max(level.abs()));
    let mut first = 0;
    while first < count {
        let mut end = first + 1;
        while end < count && levels[end] - levels[end - 1] <= SAME * spread {
            end += 1;
        }
        if end - first > 1 {
            let group = vectors.columns(first, end - first).clone_owned();
            vectors.columns_mut(first, end - first).copy_from(&nearest(&group));
        }
        first = end;
    }
    for mut column in vectors.column_iter_mut() {
        let most = column.iter().map(|z| z.norm()).fold(0.0, f64::max);
        let largest = column.iter().find(|z| z.norm() >= most * (1.0 - 1e-9)).copied().unwrap_or_default();
        let phase = largest.conj() / largest.norm();
        column.iter_mut().for_each(|z| *z *= phase);
    }
    vectors
}

/// The orthonormal vectors of the space of `group` that lie nearest to as many states as built, in their order.
fn nearest(group: &Matrix) -> Matrix {
    let count = group.ncols();
    let mut rest = group.clone();
    let mut chosen = Vec::new();
    for _ in 0..count {
        // the state of which most lies in what is left of the space
        let weight = |row: usize| rest.row(row).iter().map(|z| z.norm_sqr()).sum::<f64>();
        let most = (0..rest.nrows()).map(weight).fold(0.0, f64::max);
        let row = (0..rest.nrows()).find(|row| weight(*row) >= most * (1.0 - 1e-9)).unwrap_or(0);
        chosen.push(row);
        // take its projection out
        let projected = rest.row(row).adjoint() / Complex64::from(most.sqrt());
        let along = &rest * &projected;
        rest -= along * projected.adjoint();
    }
    chosen.sort_unstable();
    // P on the chosen states is group times a square matrix; its unitary polar factor is the nearest choice
    let square = Matrix::from_fn(count, count, |i, j| group[(chosen[j], i)].conj());
    let svd = square.svd(true, true);
    match (svd.u, svd.v_t) {
        (Some(u), Some(v_t)) => group * (u * v_t),
        _ => group.clone(),
    }
}

fn ascending(eigen: &Eigen) -> Vec<usize> {
    let mut order: Vec<usize> = (0..eigen.energies.len()).collect();
    let difference = |a: usize, b: usize| eigen.energies[a].plus(eigen.energies[b].times(-1.0)).value();
    order.sort_by(|a, b| difference(*a, *b).total_cmp(&0.0));
    order
}

/// For each state as built the eigenstate that grows from it as a field is switched on: levels of one label do not cross (J. von
/// Neumann, E. P. Wigner, Physikalische Zeitschrift 30, 467 (1929)), so their order is kept. None where the matrix mixes labels, or
/// where two of one label coincide without a field.
fn by_growth(eigen: &Eigen, grown: &[(i32, f64)]) -> Option<Vec<usize>> {
    let size = grown.len();
    if size == 0 {
        return None;
    }
    let mut labels = Vec::with_capacity(size);
    for k in 0..size {
        let largest = (0..size).max_by(|a, b| eigen.vectors[(*a, k)].norm_sqr().total_cmp(&eigen.vectors[(*b, k)].norm_sqr()))?;
        let label = grown[largest].0;
        let mixed = (0..size).any(|row| grown[row].0 != label && eigen.vectors[(row, k)].norm_sqr() > 1e-24);
        if mixed {
            return None;
        }
        labels.push(label);
    }
    let in_order = ascending(eigen);
    let mut order = vec![usize::MAX; size];
    for (k, (label, _)) in grown.iter().enumerate() {
        let mut alike: Vec<usize> = (0..size).filter(|other| grown[*other].0 == *label).collect();
        alike.sort_by(|a, b| grown[*a].1.total_cmp(&grown[*b].1));
        if alike.windows(2).any(|two| grown[two[0]].1 == grown[two[1]].1) {
            return None;
        }
        let place = alike.iter().position(|other| *other == k)?;
        order[k] = *in_order.iter().filter(|eigenstate| labels[**eigenstate] == *label).nth(place)?;
    }
    Some(order)
}

/// For each state as built the eigenstate that bears its name, and the names that none overlaps by more than half: those go, the
/// largest overlap first, to what is left.
fn by_overlap(eigen: &Eigen, names: &[String]) -> (Vec<usize>, Vec<(usize, Fault)>) {
    let size = names.len();
    let mut order = vec![usize::MAX; size];
    let mut left = Vec::new();
    for k in ascending(eigen) {
        let weight = |row: usize| eigen.vectors[(row, k)].norm_sqr();
        let first = (0..size).max_by(|a, b| weight(*a).total_cmp(&weight(*b)).then(b.cmp(a))).unwrap_or(k);
        if weight(first) > 0.5 + 1e-12 {
            order[first] = k;
        } else {
            left.push(k);
        }
    }
    let mut doubtful = Vec::new();
    let mut free: Vec<usize> = (0..size).filter(|row| order[*row] == usize::MAX).collect();
    while !left.is_empty() {
        let pairs = left.iter().flat_map(|k| free.iter().map(move |row| (*k, *row)));
        let weight = |(k, row): (usize, usize)| eigen.vectors[(row, k)].norm_sqr();
        // of equal overlaps the state written first and the lower eigenstate
        let best = pairs.reduce(|best, next| if weight(next) > weight(best) + 1e-12 { next } else { best });
        let Some((k, row)) = best else { break };
        order[row] = k;
        left.retain(|other| *other != k);
        free.retain(|other| *other != row);
        doubtful.push((row, unclear(eigen, k, names)));
    }
    (order, doubtful)
}

/// The two states that an eigenstate could be named by.
fn unclear(eigen: &Eigen, k: usize, names: &[String]) -> Fault {
    let weight = |row: usize| eigen.vectors[(row, k)].norm_sqr();
    let mut rows: Vec<usize> = (0..names.len()).collect();
    rows.sort_by(|a, b| weight(*b).total_cmp(&weight(*a)));
    let candidate = |row: usize| (names[row].clone(), weight(row));
    let candidates = [candidate(rows[0]), candidate(rows.get(1).copied().unwrap_or(rows[0]))];
    Fault::NoLargestOverlap { energy_hz: eigen.energies[k].value(), candidates }
}

/// The columns of expansions, made orthonormal where that is asked for.
fn columns(states: &[NewState], how: Option<Orthogonalise>, size: usize, values: &[f64]) -> Result<Matrix, Fault> {
    let mut columns = Matrix::zeros(size, states.len());
    for (k, state) in states.iter().enumerate() {
        for (old, value) in &state.amplitudes {
            columns[(*old, k)] += Complex64::new(values[value.re as usize], value.im.map_or(0.0, |im| values[im as usize]));
        }
    }
    if let Some(how) = how {
        let norms: Vec<f64> = columns.column_iter().map(|column| column.norm()).collect();
        let scaled = Matrix::from_fn(size, states.len(), |row, k| columns[(row, k)] / norms[k].max(f64::MIN_POSITIVE));
        let least = SymmetricEigen::new(scaled.adjoint() * &scaled).eigenvalues.min();
        if !(least > super::expansion::LEAST) {
            return Err(Fault::Dependent { least: least.max(0.0), names: states.iter().map(|state| state.name.clone()).collect() });
        }
        columns = match how {
            Orthogonalise::Symmetric => {
                let eigen = SymmetricEigen::new(columns.adjoint() * &columns);
                let inverse = Matrix::from_diagonal(&eigen.eigenvalues.map(|value| Complex64::from(1.0 / value.sqrt())));
                columns * (&eigen.eigenvectors * inverse * eigen.eigenvectors.adjoint())
            }
            Orthogonalise::InOrder => {
                for k in 0..columns.ncols() {
                    for _ in 0..2 {
                        for j in 0..k {
                            let other = columns.column(j).clone_owned();
                            let part = other.dotc(&columns.column(k));
                            columns.column_mut(k).axpy(-part, &other, Complex64::from(1.0));
                        }
                    }
                    let norm = columns.column(k).norm();
                    columns.column_mut(k).unscale_mut(norm);
                }
                columns
            }
        };
    }
    // one step of Newton takes the last roundings out of the columns: U (3 - U^+ U)/2
    let square = columns.adjoint() * &columns;
    let off = Matrix::identity(states.len(), states.len()) - square;
    Ok(&columns + &columns * off * Complex64::from(0.5))
}

/// What the static matrix couples from the kept states to those that are dropped: the norm of (1 - P) H P, Hz.
fn lost(statics: &Matrix, columns: &Matrix) -> f64 {
    let image = statics * columns;
    let outside = &image - columns * (columns.adjoint() * &image);
    let norm = outside.norm();
    if norm <= NO_LOSS * statics.norm() * statics.nrows() as f64 {
        0.0
    } else {
        norm
    }
}

/// Half of a matrix and its adjoint, so that rounding leaves it Hermitian.
fn hermitian(matrix: Matrix) -> Matrix {
    (&matrix + matrix.adjoint()) * Complex64::from(0.5)
}

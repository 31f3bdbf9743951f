//! The matrices of a system at one point, in its working basis: levels, operators, drives, lines with their strengths, and how
//! far the terms of the run are from commuting. Plain data for the report.
//!
//! Energies over h in Hz, operators in SI. Eigenvalues of a static matrix that falls apart into blocks are found block by block,
//! so that none is rounded on the scale of another.

use num_complex::Complex64;

use crate::config::decay::Leaves;
use crate::config::dephasing::Weights;
use crate::config::document::Document;
use crate::config::drives::DriveMatrix;
use crate::config::messages::Mistake;
use crate::config::record::Item;
use crate::model;
use crate::model::basis::blocks;
use crate::model::commutators::commutators;
use crate::plan::{Plan, Still};
use crate::problem::Matrix;

/// Beyond this many states lines and commutators are left out: their number and cost grow with the square and the cube.
pub const MOST_IN_DETAIL: usize = 200;

/// A named matrix.
#[derive(Debug, Clone)]
pub struct Named {
    /// Its name.
    pub name: String,
    /// SI unit of its entries.
    pub unit: &'static str,
    /// The matrix in the working basis.
    pub matrix: Matrix,
    /// Largest error of an entry, in its unit.
    pub error: f64,
}

/// A line between two levels.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Line {
    /// The lower level; of equal energies the one written first.
    pub from: usize,
    /// The upper level.
    pub to: usize,
    /// Their gap, Hz.
    pub gap_hz: f64,
}

/// Everything that `nutate matrices` tells.
#[derive(Debug, Clone)]
pub struct Matrices {
    /// The point.
    pub still: Still,
    /// Eigenvalues of the static matrix over h, Hz, ascending.
    pub eigenvalues_hz: Vec<f64>,
    /// Every operator.
    pub operators: Vec<Named>,
    /// The matrix of every drive, scaled so that its reference entry has modulus 1.
    pub drives: Vec<Named>,
    /// Every pair of levels; empty beyond [`MOST_IN_DETAIL`].
    pub lines: Vec<Line>,
    /// Names of two terms of the run, and |AB - BA| / (2 |A| |B|), both without their mean diagonal.
    pub commutators: Vec<(String, f64)>,
    /// Where the cut basis breaks [position, momentum] = i (or i hbar): name of the part, level by level the diagonal over i.
    pub canonical: Vec<(String, Vec<f64>)>,
    /// Operators that lead out of the kept states: name, and for each state n |A n| outside them over |A n|.
    pub leaving: Vec<(String, Vec<f64>)>,
    /// Operators of the system that are too many and too large to be kept.
    pub left_out: usize,
    /// Largest error of a level over the largest level.
    pub error_figure: f64,
}

/// A share of an image outside the kept states that is more than rounding.
const LEAVES: f64 = 1e-4;
/// Bytes that operators may take; beyond these only typed ones and those that the run uses are kept.
const MOST_BYTES: f64 = 2.56e8;

/// The matrices of a plan with the numbers as written.
pub fn matrices(plan: &Plan) -> Result<Matrices, Mistake> {
    let document = plan.document();
    let still = plan.still()?;
    let size = still.built.size() as f64;
    let all = document.operators.len() as f64 * size * size * 16.0 <= MOST_BYTES;
    let used = |index: usize| all || document.operators[index].entries().is_some() || is_used(document, index);
    let operators = operators(document, &still, &used);
    let left_out = document.operators.len() - operators.len();
    let drives: Vec<Named> = document
        .drives
        .iter()
        .zip(&still.couplings)
        .map(|(drive, coupling)| Named { name: drive.name.clone(), unit: "1", matrix: coupling.matrix.clone(), error: 0.0 })
        .collect();
    let statics = &still.built.statics_hz;
    let eigenvalues_hz = eigenvalues(statics);
    let largest = eigenvalues_hz.iter().fold(0.0f64, |largest, level| largest.max(level.abs()));
    let error_figure = if largest > 0.0 { still.built.error_hz / largest + f64::EPSILON } else { 0.0 };
    let small = statics.nrows() <= MOST_IN_DETAIL;
    let lines = if small { lines(&still.energies_hz) } else { Vec::new() };
    let commutators = if small { terms_of_the_run(document, &operators, &drives, statics) } else { Vec::new() };
    let canonical = canonical(&operators);
    let leaving = if small { leaving(document, &still) } else { Vec::new() };
    Ok(Matrices { eigenvalues_hz, operators, drives, lines, commutators, canonical, leaving, left_out, error_figure, still })
}

/// Whether a record, a drive, a decay or a dephasing speaks of the operator of this index.
fn is_used(document: &Document, index: usize) -> bool {
    let recorded = document.record.items.iter().any(|item| matches!(item, Item::MeanOf(list) if list.contains(&index)));
    let drives = document.drives.iter().any(|drive| matches!(drive.matrix, DriveMatrix::Operator(of) if of == index));
    let decays = document.decays.iter().any(|decay| matches!(decay.leaves, Leaves::Operator(of) if of == index));
    let dephasings = document.dephasings.iter().any(|one| matches!(one.weights, Weights::Operator(of) if of == index));
    recorded || drives || decays || dephasings
}

/// Where operators lead out of the kept states: there the product of two matrices is not the matrix of the product.
fn leaving(document: &Document, still: &Still) -> Vec<(String, Vec<f64>)> {
    let mut found = Vec::new();
    for operator in document.operators.iter().filter(|operator| operator.entries().is_none()) {
        let Some(norms) = still.built.leaving(&operator.name) else { continue };
        let share = |[outside, all]: &[f64; 2]| if *all > 0.0 { outside / all } else { 0.0 };
        let shares: Vec<f64> = norms.iter().map(share).map(|share| if share > LEAVES { share } else { 0.0 }).collect();
        if shares.iter().any(|share| *share > 0.0) {
            found.push((operator.name.clone(), shares));
        }
    }
    found
}

fn operators(document: &Document, still: &Still, used: &dyn Fn(usize) -> bool) -> Vec<Named> {
    let one = |(index, operator): (usize, &crate::config::system::Operator)| Named {
        name: operator.name.clone(),
        unit: still.built.unit(&operator.name),
        matrix: model::operator(document, &still.built, index, &still.values),
        error: still.built.operator_error(&operator.name),
    };
    // those that come with the system first, as typed ones are made of them
    let (own, typed): (Vec<Named>, Vec<Named>) = {
        let all: Vec<(bool, Named)> =
            document.operators.iter().enumerate().filter(|pair| used(pair.0)).map(|pair| (pair.1.entries().is_none(), one(pair))).collect();
        let (own, typed): (Vec<_>, Vec<_>) = all.into_iter().partition(|(own, _)| *own);
        (own.into_iter().map(|(_, named)| named).collect(), typed.into_iter().map(|(_, named)| named).collect())
    };
    own.into_iter().chain(typed).collect()
}

fn lines(energies_hz: &[f64]) -> Vec<Line> {
    model::gaps::gaps(energies_hz).into_iter().map(|gap| Line { from: gap.lower, to: gap.upper, gap_hz: gap.hz }).collect()
}

/// The squared modulus of <to|A|from>; of a matrix that couples one way only, that way.
pub fn strength(matrix: &Matrix, line: Line) -> f64 {
    matrix[(line.to, line.from)].norm_sqr()
}

/// Commutators of every two of: the static matrix, the drives, and the operators that are recorded.
fn terms_of_the_run(document: &Document, operators: &[Named], drives: &[Named], statics: &Matrix) -> Vec<(String, f64)> {
    let recorded = document.record.items.iter().flat_map(|item| match item {
        Item::MeanOf(list) => list.iter().map(|index| document.operators[*index].name.as_str()).collect(),
        _ => Vec::new(),
    });
    let mut names = vec!["static"];
    let mut terms = vec![statics.clone()];
    for drive in drives {
        names.push(&drive.name);
        terms.push(drive.matrix.clone());
    }
    for name in recorded {
        if let Some(operator) = operators.iter().find(|operator| operator.name == name) {
            names.push(&operator.name);
            terms.push(operator.matrix.clone());
        }
    }
    commutators(&terms).into_iter().map(|(a, b, size)| (format!("{} and {}", names[a], names[b]), size)).collect()
}

/// The diagonal of [position, momentum] over i (over i hbar where they have units), for every part that has both.
fn canonical(operators: &[Named]) -> Vec<(String, Vec<f64>)> {
    let mut found = Vec::new();
    for position in operators {
        let Some(part) = position.name.strip_suffix("position") else { continue };
        let Some(momentum) = operators.iter().find(|operator| operator.name == format!("{part}momentum")) else { continue };
        let (x, p) = (&position.matrix, &momentum.matrix);
        let unit = if position.unit == "1" { 1.0 } else { crate::units::HBAR_J_S };
        let diagonal = (0..x.nrows()).map(|n| {
            // the diagonal alone, as the whole product would cost the cube of the size
            let xp: Complex64 = (0..x.nrows()).map(|k| x[(n, k)] * p[(k, n)] - p[(n, k)] * x[(k, n)]).sum();
            xp.im / unit
        });
        found.push((part.trim_end_matches('.').to_string(), diagonal.collect()));
    }
    found
}

/// Eigenvalues of a Hermitian matrix, ascending, block by block.
pub fn eigenvalues(matrix: &Matrix) -> Vec<f64> {
    let mut found: Vec<f64> = Vec::with_capacity(matrix.nrows());
    for block in blocks(matrix) {
        let size = block.len();
        if let [one] = block[..] {
            found.push(matrix[(one, one)].re);
            continue;
        }
        // shifted to the mean, so that the levels far apart in absolute terms lose nothing here
        let mean = block.iter().map(|k| matrix[(*k, *k)].re).sum::<f64>() / size as f64;
        let entry = |row: usize, column: usize| {
            let shift = if row == column { mean } else { 0.0 };
            matrix[(block[row], block[column])] - shift
        };
        let real = block.iter().all(|a| block.iter().all(|b| matrix[(*a, *b)].im == 0.0));
        let levels: Vec<f64> = if real {
            let part = nalgebra::DMatrix::from_fn(size, size, |row, column| entry(row, column).re);
            part.symmetric_eigenvalues().iter().copied().collect()
        } else {
            Matrix::from_fn(size, size, entry).symmetric_eigenvalues().iter().copied().collect()
        };
        found.extend(levels.into_iter().map(|level| level + mean));
    }
    found.sort_by(f64::total_cmp);
    found
}

//! exp(A) of real matrices that are neither symmetric nor normal, and its action on columns.
//!
//! * [`dense`]: Taylor polynomial of degree 16 (M. S. Paterson, L. J. Stockmeyer, SIAM Journal on Computing 2, 60 (1973): 6
//!   products) of A / 2^s, whose sum norm is at most 0.75, then s squarings. The remainder is below 3e-17. Where the trace is kept
//!   each squaring sets it right again: rounding would double with every squaring and nothing else pulls it back.
//! * [`act`]: Taylor series in steps of norm 2 at most, for few columns or short times (A. H. Al-Mohy, N. J. Higham, SIAM Journal
//!   on Scientific Computing 33, 488 (2011), without their estimates of norms of powers).

use super::super::run::Work;
use super::generator::Generator;

/// Largest norm for which the polynomial alone is exact to rounding.
const SMALL: f64 = 0.75;
/// Longest step of the series, in norms.
const STEP: f64 = 2.0;

/// 1/k!.
fn inverse_factorial(k: usize) -> f64 {
    (1..=k).fold(1.0, |sum, j| sum / j as f64)
}

/// `into` = `a` `b`, column after column.
pub(super) fn product(n: usize, a: &[f64], b: &[f64], into: &mut [f64]) {
    if n > 12 {
        let view = |m| nalgebra::DMatrixView::from_slice(m, n, n);
        nalgebra::DMatrixViewMut::from_slice(into, n, n).gemm(1.0, &view(a), &view(b), 0.0);
        return;
    }
    for (out, factors) in into.chunks_exact_mut(n).zip(b.chunks_exact(n)) {
        out.fill(0.0);
        for (column, factor) in a.chunks_exact(n).zip(factors) {
            for (o, entry) in out.iter_mut().zip(column) {
                *o += entry * factor;
            }
        }
    }
}

/// Squarings that a norm takes.
pub(super) fn squarings(norm: f64) -> i32 {
    if norm <= SMALL {
        0
    } else {
        (norm / SMALL).log2().ceil() as i32
    }
}

/// exp(`a`) of an n x n matrix with this sum norm; `kept` populations at the head of each column keep their sum where given.
pub(super) fn dense(n: usize, a: &[f64], norm: f64, kept: Option<usize>) -> Vec<f64> {
    if !norm.is_finite() {
        return vec![f64::NAN; n * n];
    }
    let s = squarings(norm);
    let scale = 0.5f64.powi(s);
    let x: Vec<f64> = a.iter().map(|entry| entry * scale).collect();
    let power = |left: &[f64], right: &[f64]| {
        let mut out = vec![0.0; n * n];
        product(n, left, right, &mut out);
        out
    };
    let x2 = power(&x, &x);
    let x3 = power(&x2, &x);
    let x4 = power(&x2, &x2);
    let c: Vec<f64> = (0..=16).map(inverse_factorial).collect();
    // four terms of the polynomial from x^(4 block) on
    let part = |block: usize, at: usize| {
        let unit = if at.is_multiple_of(n + 1) { c[4 * block] } else { 0.0 };
        unit + c[4 * block + 1] * x[at] + c[4 * block + 2] * x2[at] + c[4 * block + 3] * x3[at]
    };
    let mut sum: Vec<f64> = (0..n * n).map(|at| part(3, at) + c[16] * x4[at]).collect();
    let mut next = vec![0.0; n * n];
    for block in [2, 1, 0] {
        product(n, &x4, &sum, &mut next);
        next.iter_mut().enumerate().for_each(|(at, entry)| *entry += part(block, at));
        std::mem::swap(&mut sum, &mut next);
    }
    for _ in 0..s {
        product(n, &sum, &sum, &mut next);
        std::mem::swap(&mut sum, &mut next);
        if let Some(populations) = kept {
            set_right(n, populations, &mut sum);
        }
    }
    sum
}

/// Spreads what the sum of the populations of each column lacks over them, in proportion to their size.
fn set_right(n: usize, populations: usize, matrix: &mut [f64]) {
    // times spent and coherences have sum 0, each population has sum 1
    for (column, entries) in matrix.chunks_exact_mut(n).enumerate() {
        let head = &mut entries[..populations];
        let lack = if column < populations { 1.0 } else { 0.0 } - head.iter().sum::<f64>();
        let size: f64 = head.iter().map(|entry| entry.abs()).sum();
        if size > 0.0 {
            head.iter_mut().for_each(|entry| *entry += lack * (entry.abs() / size));
        }
    }
}

/// `into` = `matrix` `from` for each column of n numbers.
pub(super) fn apply(n: usize, matrix: &[f64], from: &[f64], into: &mut [f64]) {
    for (out, factors) in into.chunks_exact_mut(n).zip(from.chunks_exact(n)) {
        out.fill(0.0);
        for (column, factor) in matrix.chunks_exact(n).zip(factors) {
            for (o, entry) in out.iter_mut().zip(column) {
                *o += entry * factor;
            }
        }
    }
}

/// Products of G with one column that [`act`] takes, roughly.
pub(super) fn products(norm: f64) -> f64 {
    let steps = (norm / STEP).ceil().max(1.0);
    steps * (7.0 + 8.5 * (norm / steps))
}

/// Columns at hand while a series is summed.
#[derive(Debug, Default)]
pub(super) struct Room {
    term: Vec<f64>,
    next: Vec<f64>,
}

/// Columns `x` become exp(G tau) x, with the norm of G tau.
pub(super) fn act(generator: &Generator, values: &[f64], tau_s: f64, norm: f64, x: &mut [f64], room: &mut Room, work: &mut Work) {
    let columns = (x.len() / generator.size).max(1) as u64;
    let steps = (norm / STEP).ceil().max(1.0);
    if !norm.is_finite() {
        x.fill(f64::NAN);
        return;
    }
    let h = tau_s / steps;
    room.next.resize(x.len(), 0.0);
    let mut done = 0.0;
    while done < steps && !work.exhausted() {
        done += 1.0;
        room.term.clear();
        room.term.extend_from_slice(x);
        let mut products = 0;
        for order in 1..=60 {
            generator.act(values, &room.term, &mut room.next);
            products += columns;
            let scale = h / f64::from(order);
            let mut largest: f64 = 0.0;
            for ((sum, term), next) in x.iter_mut().zip(&mut room.term).zip(&room.next) {
                *term = next * scale;
                *sum += *term;
                largest = largest.max(term.abs());
            }
            // entries that only higher orders reach keep their relative accuracy when tiny
            if largest < 1e-20 {
                break;
            }
        }
        work.step(products, generator.entries());
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// exp of a decay chain a -> b -> c with rates 1 and 3 (H. Bateman, Proceedings of the Cambridge Philosophical Society 15,
    /// 423 (1910)), however long it lasts.
    #[test]
    fn exact_chain_of_two_decays() {
        for t in [1e-3, 0.4, 2.0, 30.0, 1e6, 1e12] {
            let a: Vec<f64> = [-1.0, 1.0, 0.0, 0.0, -3.0, 3.0, 0.0, 0.0, 0.0].iter().map(|x| x * t).collect();
            let p = dense(3, &a, 6.0 * t, Some(3));
            let (one, three) = ((-t).exp(), (-3.0 * t).exp());
            let b = 0.5 * (one - three);
            for (found, expected) in p[..3].iter().zip([one, b, 1.0 - one - b]) {
                assert!((found - expected).abs() < 1e-15 + 1e-16 * t.min(1e3), "{t}: {found} against {expected}");
            }
        }
    }

    /// A rotation by 1000 rad and a nilpotent block.
    #[test]
    fn exact_rotation_and_nilpotent() {
        let r = dense(2, &[0.0, 1000.0, -1000.0, 0.0], 1000.0, None);
        assert!((r[0] - 1000f64.cos()).abs() < 1e-12 && (r[1] - 1000f64.sin()).abs() < 1e-12, "{r:?}");
        let j = dense(2, &[-50.0, 0.0, 3.0, -50.0], 53.0, None);
        assert!((j[2] / (3.0 * (-50f64).exp()) - 1.0).abs() < 1e-13, "{j:?}");
    }
}

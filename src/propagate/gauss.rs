//! The collocation rule of the elements: Gauss and Legendre's eight nodes on (0, 1), with all matrices that act on values there.
//!
//! J. C. Butcher, Mathematics of Computation 18, 50 (1964): collocation at the zeros of the Legendre polynomial of degree 8 is of
//! order 16 at the end of a step. Functions on an element are polynomials of degree 7 through their values at the nodes. P_k is the
//! Legendre polynomial of degree k moved to (0, 1).
//!
//! Matrices stand column after column, so that a product with values is a sum of whole columns: `out += column[j] * value[j]`.

use std::sync::LazyLock;

use super::lanes::Eight;
use crate::units::cis_turns;

/// Nodes of an element.
pub(super) const NODES: usize = 8;
/// Real values at the nodes.
pub(super) type Values = Eight;
/// A matrix that acts on values at the nodes, column after column.
pub(super) type Table = [Values; NODES];
/// Degrees of the Legendre polynomials kept: as many as the downward recurrence of `turning.rs` may need.
pub(super) const DEGREES: usize = 24;

/// The rule and its matrices; lengths are in units of the element.
pub(super) struct Rule {
    pub nodes: Values,
    /// Sum to 1.
    pub weights: Values,
    /// P_k at the nodes, `legendre[k][i]`.
    pub legendre: [Values; DEGREES],
    /// From values to the coefficients of P_0 .. P_7.
    pub to_legendre: Table,
    /// The same by rows: the coefficient of P_k is the sum of row k times the values.
    pub legendre_rows: Table,
    /// Integral from 0 to each node.
    pub integral: Table,
    /// d^m/dx^m, m from 0 to 7.
    pub derivatives: [Table; NODES],
    /// Values at the nodes of the first and of the second half.
    pub halves: [Table; 2],
    /// Value of the polynomial at 0.
    pub at_start: Values,
    /// Value of the polynomial at 1.
    pub at_end: Values,
}

/// The rule, made at first use.
pub(super) static RULE: LazyLock<Rule> = LazyLock::new(Rule::new);

/// P_0 .. P_(count - 1) at x in [0, 1].
pub(super) fn legendre(x: f64, into: &mut [f64]) {
    let y = 2.0 * x - 1.0;
    let (mut before, mut now) = (0.0, 1.0);
    for (k, p) in into.iter_mut().enumerate() {
        *p = now;
        let next = ((2 * k + 1) as f64 * y * now - k as f64 * before) / (k + 1) as f64;
        (before, now) = (now, next);
    }
}

impl Rule {
    fn new() -> Self {
        let (mut nodes, mut weights) = ([0.0; NODES], [0.0; NODES]);
        for i in 0..NODES {
            let (node, weight) = root(i);
            nodes[NODES - 1 - i] = node;
            weights[NODES - 1 - i] = weight;
        }
        let mut polynomials = [[0.0; NODES]; DEGREES];
        for i in 0..NODES {
            let mut column = [0.0; DEGREES];
            legendre(nodes[i], &mut column);
            for k in 0..DEGREES {
                polynomials[k][i] = column[k];
            }
        }
        // the rule is exact for P_k P_l, so the coefficients are sums at the nodes
        let to_legendre = |j: usize, k: usize| weights[j] * (2 * k + 1) as f64 * polynomials[k][j];
        let columns: Plain = std::array::from_fn(|j| std::array::from_fn(|k| to_legendre(j, k)));
        let rows: Plain = std::array::from_fn(|k| std::array::from_fn(|j| to_legendre(j, k)));
        // integral of P_k from 0: (P_(k+1) - P_(k-1)) / (2 (2k + 1)), and x for k = 0
        let of_each = |k: usize, i: usize| match k {
            0 => nodes[i],
            _ => (polynomials[k + 1][i] - polynomials[k - 1][i]) / (2 * (2 * k + 1)) as f64,
        };
        // P_k' = 2 sum of (2l + 1) P_l over l = k - 1, k - 3, ..
        let slope = |k: usize, i: usize| -> f64 { (0..k).rev().step_by(2).map(|l| (2 * (2 * l + 1)) as f64 * polynomials[l][i]).sum() };
        let at = |x: f64| -> Values {
            let mut p = [0.0; NODES];
            legendre(x, &mut p);
            Eight(std::array::from_fn(|j| (0..NODES).map(|k| p[k] * columns[j][k]).sum()))
        };
        let half = |second: f64| {
            let image = |k: usize, i: usize| {
                let mut p = [0.0; NODES];
                legendre(0.5 * (nodes[i] + second), &mut p);
                p[k]
            };
            through(&columns, image).map(Eight)
        };
        Rule {
            halves: [half(0.0), half(1.0)],
            nodes: Eight(nodes),
            weights: Eight(weights),
            legendre: polynomials.map(Eight),
            to_legendre: columns.map(Eight),
            legendre_rows: rows.map(Eight),
            integral: through(&columns, of_each).map(Eight),
            derivatives: powers(&through(&columns, slope)).map(|power| power.map(Eight)),
            at_start: at(0.0),
            at_end: at(1.0),
        }
    }
}

/// A matrix, column after column.
type Plain = [[f64; NODES]; NODES];

/// The matrix from values to values that takes P_k to `image(k, node)`.
fn through(to_legendre: &Plain, image: impl Fn(usize, usize) -> f64) -> Plain {
    std::array::from_fn(|j| std::array::from_fn(|i| (0..NODES).map(|k| to_legendre[j][k] * image(k, i)).sum()))
}

/// Powers 0 to 7 of a matrix.
fn powers(first: &Plain) -> [Plain; NODES] {
    let mut all = [[[0.0; NODES]; NODES]; NODES];
    for j in 0..NODES {
        all[0][j][j] = 1.0;
    }
    for m in 1..NODES {
        for j in 0..NODES {
            for i in 0..NODES {
                all[m][j][i] = (0..NODES).map(|k| first[k][i] * all[m - 1][j][k]).sum();
            }
        }
    }
    all
}

/// Node number i from above, and its weight, by Newton's method from the usual guess.
fn root(i: usize) -> (f64, f64) {
    let mut x = cis_turns(0.5 * (i as f64 + 0.75) / (NODES as f64 + 0.5)).re;
    let mut slope = 0.0;
    for _ in 0..50 {
        let (mut before, mut now) = (1.0, x);
        for k in 2..=NODES {
            (before, now) = (now, ((2 * k - 1) as f64 * x * now - (k - 1) as f64 * before) / k as f64);
        }
        slope = NODES as f64 * (x * now - before) / (x * x - 1.0);
        x -= now / slope;
    }
    (0.5 * (1.0 + x), 1.0 / ((1.0 - x * x) * slope * slope))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Order conditions: quadrature is exact up to degree 15, integrals and derivatives of powers up to degree 7.
    #[test]
    fn exact_for_powers() {
        let rule = &*RULE;
        for k in 0..16 {
            let sum: f64 = (0..NODES).map(|i| rule.weights.0[i] * rule.nodes.0[i].powi(k)).sum();
            assert!((sum - 1.0 / f64::from(k + 1)).abs() < 3e-16, "degree {k}: {sum}");
        }
        for k in 0..8 {
            let power = |i: usize| rule.nodes.0[i].powi(k);
            for i in 0..NODES {
                let integral: f64 = (0..NODES).map(|j| rule.integral[j].0[i] * power(j)).sum();
                assert!((integral - rule.nodes.0[i].powi(k + 1) / f64::from(k + 1)).abs() < 5e-16, "integral of degree {k}");
                let slope: f64 = (0..NODES).map(|j| rule.derivatives[1][j].0[i] * power(j)).sum();
                let expected = if k == 0 { 0.0 } else { f64::from(k) * rule.nodes.0[i].powi(k - 1) };
                assert!((slope - expected).abs() < 1e-12, "slope of degree {k}: {slope} {expected}");
            }
            let end: f64 = (0..NODES).map(|j| rule.at_end.0[j] * power(j)).sum();
            let start: f64 = (0..NODES).map(|j| rule.at_start.0[j] * power(j)).sum();
            assert!((end - 1.0).abs() < 1e-13 && (start - f64::from(u8::from(k == 0))).abs() < 1e-13, "ends of degree {k}");
        }
        let seventh: f64 = (0..NODES).map(|j| rule.derivatives[7][j].0[3] * rule.nodes.0[j].powi(7)).sum();
        assert!((seventh / 5040.0 - 1.0).abs() < 1e-9, "{seventh}");
    }
}

//! Gauss rules: n nodes and weights that average polynomials up to degree 2n - 1 exactly over a distribution.
//!
//! Nodes are the eigenvalues of the symmetric tridiagonal matrix of the recurrence coefficients of the orthogonal polynomials,
//! weights the squared first components of its eigenvectors (G. H. Golub and J. H. Welsch, Mathematics of Computation 23, 221
//! (1969)). For the normal distribution and the even one the coefficients are known (M. Abramowitz and I. A. Stegun, Handbook of
//! Mathematical Functions (1964), 22.7); for a Lorentzian that ends at a cut they are found by the procedure of Stieltjes on a fine
//! discretisation (W. Gautschi, SIAM Journal on Scientific and Statistical Computing 3, 289 (1982)). All three are even, so the
//! diagonal of the matrix is 0.

/// Nodes, ascending, and weights that add up to 1.
pub type Rule = Vec<(f64, f64)>;

/// For the normal distribution of standard deviation 1.
pub fn normal(points: usize) -> Rule {
    from_recurrence((1..points).map(|k| (k as f64).sqrt()).collect())
}

/// For the even distribution from -1 to 1.
pub fn even(points: usize) -> Rule {
    let beta = |k: usize| {
        let k = k as f64;
        k / (4.0 * k * k - 1.0).sqrt()
    };
    from_recurrence((1..points).map(beta).collect())
}

/// For the Lorentzian 1/(1 + x^2) from -`cut` to `cut`, scaled to area 1; x in units of half the full width.
pub fn lorentzian(points: usize, cut: f64) -> Rule {
    // x = sinh(u): the weight becomes 1/cosh(u), smooth where the Lorentzian is narrow, and the cut comes near
    let (panels, panel) = (points + 8, even(32));
    let width = 2.0 * cut.asinh() / panels as f64;
    let at = |p: usize, x: f64| width * (p as f64 - 0.5 * panels as f64 + 0.5 * (x + 1.0));
    let nodes: Vec<(f64, f64)> =
        (0..panels).flat_map(|p| panel.iter().map(move |(x, w)| (at(p, *x), *w))).map(|(u, w)| (u.sinh(), w / u.cosh())).collect();
    let total: f64 = nodes.iter().map(|(_, w)| w).sum();
    // Stieltjes: the norms of the monic polynomials give beta_k^2 = |p_k|^2/|p_(k-1)|^2; each is kept at norm 1
    let mut before: Vec<f64> = vec![0.0; nodes.len()];
    let mut now: Vec<f64> = vec![1.0; nodes.len()];
    let mut beta = Vec::with_capacity(points.saturating_sub(1));
    let mut last = 0.0;
    for _ in 1..points {
        let mut next: Vec<f64> = nodes.iter().zip(now.iter().zip(&before)).map(|((x, _), (p, q))| x * p - last * q).collect();
        last = (nodes.iter().zip(&next).map(|((_, w), p)| w * p * p).sum::<f64>() / total).sqrt();
        next.iter_mut().for_each(|p| *p /= last);
        before = std::mem::replace(&mut now, next);
        beta.push(last);
    }
    from_recurrence(beta)
}

/// Eigenvalues and squared first components of the matrix with `off` beside a diagonal of 0, by implicit QL steps (C. Reinsch and
/// J. H. Wilkinson, Handbook for Automatic Computation II (1971), contribution II/4).
fn from_recurrence(off: Vec<f64>) -> Rule {
    let n = off.len() + 1;
    let mut d = vec![0.0f64; n];
    let mut e = off;
    e.push(0.0);
    let mut z = vec![0.0f64; n];
    z[0] = 1.0;
    for l in 0..n {
        for _ in 0..200 {
            let m = (l..n - 1).find(|m| e[*m].abs() <= f64::EPSILON * (d[*m].abs() + d[*m + 1].abs()).max(1e-300)).unwrap_or(n - 1);
            if m == l {
                break;
            }
            let mut g = (d[l + 1] - d[l]) / (2.0 * e[l]);
            let r = g.hypot(1.0);
            g = d[m] - d[l] + e[l] / (g + r.copysign(g));
            let (mut s, mut c, mut p) = (1.0, 1.0, 0.0);
            for i in (l..m).rev() {
                let f = s * e[i];
                let b = c * e[i];
                let r = f.hypot(g);
                e[i + 1] = r;
                if r == 0.0 {
                    d[i + 1] -= p;
                    e[m] = 0.0;
                    break;
                }
                s = f / r;
                c = g / r;
                g = d[i + 1] - p;
                let t = (d[i] - g) * s + 2.0 * c * b;
                p = s * t;
                d[i + 1] = g + p;
                g = c * t - b;
                let carried = z[i + 1];
                z[i + 1] = s * z[i] + c * carried;
                z[i] = c * z[i] - s * carried;
            }
            d[l] -= p;
            e[l] = g;
            e[m] = 0.0;
        }
    }
    let mut rule: Rule = d.into_iter().zip(z.into_iter().map(|first| first * first)).collect();
    rule.sort_by(|a, b| a.0.total_cmp(&b.0));
    // an even weight has nodes in pairs; rounding must not tell them apart
    for k in 0..n / 2 {
        let (a, b) = (rule[k], rule[n - 1 - k]);
        let (node, weight) = (0.5 * (b.0 - a.0), 0.5 * (a.1 + b.1));
        (rule[k], rule[n - 1 - k]) = ((-node, weight), (node, weight));
    }
    if n % 2 == 1 {
        rule[n / 2].0 = 0.0;
    }
    let total: f64 = rule.iter().map(|(_, weight)| weight).sum();
    rule.iter_mut().for_each(|(_, weight)| *weight /= total);
    rule
}

#[cfg(test)]
mod tests {
    use super::*;

    fn mean(rule: &Rule, f: impl Fn(f64) -> f64) -> f64 {
        rule.iter().map(|(x, w)| w * f(*x)).sum()
    }

    /// The order conditions: moments up to degree 2n - 1; 1, 1, 3, 15 .. of the normal distribution, 1/(k + 1) of the even one.
    #[test]
    fn exact_moments_up_to_twice_the_points() {
        for points in 1..=20 {
            let (bell, flat) = (normal(points), even(points));
            let mut double_factorial = 1.0;
            for k in (0..2 * points).step_by(2) {
                if k > 0 {
                    double_factorial *= (k - 1) as f64;
                }
                let got = mean(&bell, |x| x.powi(k as i32));
                assert!((got / double_factorial - 1.0).abs() < 2e-12, "{points} points, degree {k}: {got}");
                assert!((mean(&flat, |x| x.powi(k as i32)) * (k + 1) as f64 - 1.0).abs() < 2e-14 * points as f64);
            }
        }
    }

    /// Fourier transform of a normal distribution, exp(-k^2/2), to rounding where the rule reaches.
    #[test]
    fn exact_fourier_transform_of_the_normal_distribution() {
        for (points, k) in [(12, 1.0f64), (25, 3.0), (41, 5.0), (61, 6.0), (200, 12.0)] {
            let got = mean(&normal(points), |x| (k * x).cos());
            assert!((got - (-0.5 * k * k).exp()).abs() < 2e-14, "{points} points at {k}: {got}");
        }
    }

    /// Transform of the cut Lorentzian at 30 digits by quadrature (mpmath, tests/reference/noise.py): cut, k, value.
    #[test]
    fn ref_transform_of_the_cut_lorentzian() {
        for (cut, k, want) in TRANSFORMS {
            let got = mean(&lorentzian(61, cut), |x| (k * x).cos());
            assert!((got - want).abs() < 1e-13, "cut {cut} at {k}: {got} against {want}");
        }
    }

    const TRANSFORMS: [(f64, f64, f64); 5] = [
        (5.0, 1.0, 0.395_465_390_177_262_63),
        (5.0, 4.0, 0.026_987_979_157_799_283),
        (5.0, 7.5, -0.000_289_456_283_553_175_04),
        (20.0, 0.7, 0.515_110_403_041_277_4),
        (0.5, 9.0, -0.183_428_030_443_783_64),
    ];

    /// Nodes and weights at 30 digits (mpmath, tests/reference/noise.py): of five points of each distribution, the positive half.
    #[test]
    fn ref_nodes_of_five_points() {
        for (rule, want) in [(normal(5), FIVE_NORMAL), (even(5), FIVE_EVEN), (lorentzian(5, 5.0), FIVE_LORENTZIAN)] {
            for ((x, w), (node, weight)) in rule[3..].iter().zip(want) {
                assert!((x - node).abs() < 4e-15 && (w - weight).abs() < 2e-15, "{x}, {w} against {node}, {weight}");
            }
        }
    }

    const FIVE_NORMAL: [(f64, f64); 2] =
        [(1.355_626_179_974_265_9, 0.222_075_922_005_612_64), (2.856_970_013_872_805_7, 0.011_257_411_327_720_689)];
    const FIVE_EVEN: [(f64, f64); 2] =
        [(0.538_469_310_105_683_1, 0.239_314_335_249_683_23), (0.906_179_845_938_664, 0.118_463_442_528_094_54)];
    const FIVE_LORENTZIAN: [(f64, f64); 2] =
        [(2.107_564_752_292_908_8, 0.174_269_597_607_105_19), (4.365_678_031_706_857_6, 0.028_659_375_511_022_207)];
}

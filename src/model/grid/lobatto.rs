//! The rule of Gauss and Lobatto on (-1, 1): its nodes carry the polynomials of a spectral element.
//!
//! Nodes are -1, 1 and the roots of the derivative of the Legendre polynomial P_p; weights are 2/(p (p + 1) P_p(x)^2); the rule is
//! exact for degree 2 p - 1 (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964), 25.4.32). The matrix of d/dx
//! on the nodes: D_ij = P_p(x_i)/(P_p(x_j) (x_i - x_j)), diagonal the negative sum of its row, so that a constant has slope 0.
//! Errors: rounding.

/// Nodes of one polynomial degree, and what is made of them.
#[derive(Debug, Clone)]
pub struct Lobatto {
    /// The nodes, ascending, -1 and 1 among them.
    pub nodes: Vec<f64>,
    /// The weights; they add up to 2.
    pub weights: Vec<f64>,
    /// d/dx of the interpolating polynomial on the nodes, row by row.
    pub slopes: Vec<Vec<f64>>,
    /// Barycentric weights (J.-P. Berrut and L. N. Trefethen, SIAM Review 46, 501 (2004)).
    barycentric: Vec<f64>,
    /// Legendre polynomials of degree p - 2, p - 1, p on the nodes, each scaled so that its sum with nodal values is a coefficient.
    tail: [Vec<f64>; 3],
}

/// P_n(x) and P_(n-1)(x).
fn legendre(n: usize, x: f64) -> (f64, f64) {
    let (mut before, mut now) = (0.0, 1.0);
    for k in 0..n {
        let next = ((2 * k + 1) as f64 * x * now - k as f64 * before) / (k + 1) as f64;
        (before, now) = (now, next);
    }
    (now, before)
}

impl Lobatto {
    /// The rule of polynomial degree `p`, at least 2; p + 1 nodes.
    pub fn new(p: usize) -> Lobatto {
        let degree = p as f64;
        let node = |k: usize| -> f64 {
            // the nodes of Chebyshev and Lobatto are near; Newton on (1 - x^2) P_p'(x) = p (P_(p-1) - x P_p)
            let mut x = -crate::units::sin_cos_turns(k as f64 / (2.0 * degree)).1;
            for _ in 0..60 {
                let (now, before) = legendre(p, x);
                let step = (before - x * now) / ((degree + 1.0) * now);
                x += step;
                if step.abs() < 1e-16 {
                    break;
                }
            }
            x
        };
        let half: Vec<f64> = (0..=p / 2).map(|k| if k == 0 { -1.0 } else { node(k) }).collect();
        // the mirror image is exact, and so is the middle
        let nodes: Vec<f64> = (0..=p)
            .map(|k| match (2 * k).cmp(&p) {
                std::cmp::Ordering::Less => half[k],
                std::cmp::Ordering::Equal => 0.0,
                std::cmp::Ordering::Greater => -half[p - k],
            })
            .collect();
        let values: Vec<f64> = nodes.iter().map(|x| legendre(p, *x).0).collect();
        let weights: Vec<f64> = values.iter().map(|value| 2.0 / (degree * (degree + 1.0) * value * value)).collect();
        let slopes = (0..=p)
            .map(|i| {
                let entry = |j: usize| if i == j { 0.0 } else { values[i] / (values[j] * (nodes[i] - nodes[j])) };
                let mut row: Vec<f64> = (0..=p).map(entry).collect();
                row[i] = -row.iter().sum::<f64>();
                row
            })
            .collect();
        let barycentric = values.iter().map(|value| 1.0 / value).collect();
        let coefficient = |degree_k: usize| -> Vec<f64> {
            let scale = if degree_k == p { 0.5 * degree } else { degree_k as f64 + 0.5 };
            nodes.iter().zip(&weights).map(|(x, w)| scale * w * legendre(degree_k, *x).0).collect()
        };
        let tail = [coefficient(p - 2), coefficient(p - 1), coefficient(p)];
        Lobatto { nodes, weights, slopes, barycentric, tail }
    }

    /// The values at `x` within (-1, 1) of the polynomials that are 1 on one node and 0 on the others.
    pub fn cardinals(&self, x: f64) -> Vec<f64> {
        if let Some(hit) = self.nodes.iter().position(|node| *node == x) {
            return (0..self.nodes.len()).map(|k| f64::from(u8::from(k == hit))).collect();
        }
        let parts: Vec<f64> = self.nodes.iter().zip(&self.barycentric).map(|(node, weight)| weight / (x - node)).collect();
        let sum: f64 = parts.iter().sum();
        parts.into_iter().map(|part| part / sum).collect()
    }

    /// The largest of the last three Legendre coefficients of nodal values: what a higher degree would still change.
    pub fn tail(&self, values: &[f64]) -> f64 {
        let sum = |row: &Vec<f64>| row.iter().zip(values).map(|(a, b)| a * b).sum::<f64>().abs();
        self.tail.iter().map(sum).fold(0.0, f64::max)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Five nodes: 0, sqrt(3/7), 1 with weights 32/45, 49/90, 1/10 (Abramowitz and Stegun, table 25.6).
    #[test]
    fn exact_five_nodes() {
        let rule = Lobatto::new(4);
        let inner = (3.0f64 / 7.0).sqrt();
        let want = [(-1.0, 0.1), (-inner, 49.0 / 90.0), (0.0, 32.0 / 45.0), (inner, 49.0 / 90.0), (1.0, 0.1)];
        for (k, (node, weight)) in want.into_iter().enumerate() {
            assert!((rule.nodes[k] - node).abs() < 3e-16 && (rule.weights[k] - weight).abs() < 3e-16, "{rule:?}");
        }
    }

    /// Monomials: integrals up to degree 2 p - 1, slopes up to degree p, values between the nodes.
    #[test]
    fn exact_for_polynomials() {
        let rule = Lobatto::new(20);
        for k in 0..40usize {
            let sum: f64 = rule.nodes.iter().zip(&rule.weights).map(|(x, w)| w * x.powi(k as i32)).sum();
            let want = if k % 2 == 0 { 2.0 / (k as f64 + 1.0) } else { 0.0 };
            assert!((sum - want).abs() < 2e-15, "degree {k}: {sum}");
        }
        let values: Vec<f64> = rule.nodes.iter().map(|x| x.powi(20)).collect();
        for (x, row) in rule.nodes.iter().zip(&rule.slopes) {
            let slope: f64 = row.iter().zip(&values).map(|(a, b)| a * b).sum();
            assert!((slope - 20.0 * x.powi(19)).abs() < 1e-12, "at {x}: {slope}");
        }
        let between: f64 = rule.cardinals(0.93).iter().zip(&values).map(|(a, b)| a * b).sum();
        assert!((between - 0.93f64.powi(20)).abs() < 1e-15);
    }
}

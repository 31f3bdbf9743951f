//! An independent, slow and very accurate solution for tests: Gauss collocation with eight nodes (order 16) on `Problem::hamiltonian`.
//!
//! J. C. Butcher, Mathematics of Computation 18, 50 (1964). All in the frame of the problem, dense, no picture, no step control.

use nalgebra::DMatrix;

use super::*;

const NODES: usize = 8;

/// Nodes and weights on [0, 1], roots of the Legendre polynomial by Newton's method.
fn gauss() -> ([f64; NODES], [f64; NODES]) {
    let (mut nodes, mut weights) = ([0.0; NODES], [0.0; NODES]);
    for i in 0..NODES {
        let mut x = crate::units::cis_turns(0.5 * (i as f64 + 0.75) / (NODES as f64 + 0.5)).re;
        let mut slope = 0.0;
        for _ in 0..50 {
            let (mut before, mut now) = (1.0, x);
            for k in 2..=NODES {
                (before, now) = (now, ((2 * k - 1) as f64 * x * now - (k - 1) as f64 * before) / k as f64);
            }
            slope = NODES as f64 * (x * now - before) / (x * x - 1.0);
            x -= now / slope;
        }
        nodes[i] = 0.5 * (1.0 + x);
        weights[i] = 1.0 / ((1.0 - x * x) * slope * slope);
    }
    (nodes, weights)
}

/// Integrals of the Lagrange polynomials from 0 to each node.
fn table(nodes: &[f64; NODES], weights: &[f64; NODES]) -> [[f64; NODES]; NODES] {
    let lagrange = |j: usize, x: f64| (0..NODES).filter(|m| *m != j).map(|m| (x - nodes[m]) / (nodes[j] - nodes[m])).product::<f64>();
    let mut a = [[0.0; NODES]; NODES];
    for i in 0..NODES {
        for (j, entry) in a[i].iter_mut().enumerate() {
            *entry = nodes[i] * (0..NODES).map(|m| weights[m] * lagrange(j, nodes[i] * nodes[m])).sum::<f64>();
        }
    }
    a
}

/// One step of `h` seconds from `at` of d(y)/dt = M(t) y; `look` sees weight times h and y at each node.
pub fn step(m: &impl Fn(f64) -> Matrix, at: f64, h: f64, y: &mut Matrix, mut look: impl FnMut(f64, &Matrix)) {
    let (nodes, weights) = gauss();
    let a = table(&nodes, &weights);
    let n = y.nrows();
    let mut system = DMatrix::<Complex64>::identity(n * NODES, n * NODES);
    let mut right = DMatrix::<Complex64>::zeros(n * NODES, 1);
    for i in 0..NODES {
        let slope = m(at + nodes[i] * h);
        for (j, weight) in a[i].iter().enumerate() {
            let mut block = system.view_mut((i * n, j * n), (n, n));
            block -= &slope * re(h * weight);
        }
        right.view_mut((i * n, 0), (n, 1)).copy_from(&(&slope * &*y));
    }
    let k = system.lu().solve(&right).expect("close to the identity");
    for i in 0..NODES {
        let mut inner = y.clone();
        for (j, weight) in a[i].iter().enumerate() {
            inner += k.view((j * n, 0), (n, 1)) * re(h * weight);
        }
        look(h * weights[i], &inner);
    }
    for (i, weight) in weights.iter().enumerate() {
        *y += k.view((i * n, 0), (n, 1)) * re(h * weight);
    }
}

/// Shows every moment to `kept`, in steps through which H and its turning go by at most `most_rad`.
pub fn solve(problem: &Problem, most_rad: f64, timed: bool, kept: &mut Kept) {
    let n = problem.dim();
    let mut psi = Matrix::from_column_slice(n, 1, problem.start.amplitudes().expect("closed").as_slice());
    let mut next = 0;
    let mut spent = vec![0.0; n];
    for (index, segment) in problem.segments.iter().enumerate() {
        let turning = problem.terms_of(segment).iter().map(|term| rad_s(term.turns_hz.abs())).fold(0.0, f64::max);
        let size = (0..=20).map(|i| problem.hamiltonian(segment, segment.length_s * i as f64 / 20.0).norm()).fold(0.0, f64::max);
        let mut tau = 0.0;
        loop {
            let here = next < problem.moments.len() && problem.moments[next].segment == index;
            let stop = if here { problem.moments[next].offset_s } else { segment.length_s };
            let steps = ((turning + size + 20.0 / segment.length_s) * (stop - tau) / most_rad).ceil() as usize;
            let from = tau;
            for number in 0..steps {
                let at = from + (stop - from) * number as f64 / steps as f64;
                let h = from + (stop - from) * (number + 1) as f64 / steps as f64 - at;
                let slope = |t: f64| problem.hamiltonian(segment, t) * Complex64::new(0.0, -1.0);
                step(&slope, at, h, &mut psi, |weight, inner| {
                    for (time, amplitude) in spent.iter_mut().zip(inner.iter()) {
                        *time += weight * amplitude.norm_sqr();
                    }
                });
            }
            tau = stop;
            if !here {
                break;
            }
            kept.see(next, State::Pure(&Vector::from_column_slice(psi.as_slice())), if timed { &spent } else { &[] });
            next += 1;
        }
    }
    kept.finish(None);
}

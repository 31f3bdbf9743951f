//! Laws that every channel obeys, for random problems.

use super::open::{random_jumps, solve_open, with_jumps};
use super::statistics::{random_problem, Random};
use super::*;
use crate::problem::Jump;

fn eigenvalues(m: &Matrix) -> Vec<f64> {
    ((m + m.adjoint()) * re(0.5)).symmetric_eigen().eigenvalues.iter().copied().collect()
}

/// Random open problems with their solutions, channel of all levels included.
fn solved(seed: u64, count: usize, mut look: impl FnMut(&Problem, &super::open::Densities, f64)) {
    let mut random = Random(seed);
    let mut done = 0;
    while done < count {
        let case = random_problem(&mut random);
        if case.dim() > 4 {
            continue;
        }
        done += 1;
        let jumps = random_jumps(&mut random, case.dim());
        let case = with_jumps(case, jumps);
        let demand = Demand { propagator: true, ..Demand::default() };
        let method = [None, Some(Method::Smooth), Some(Method::Geometric)][random.below(3)];
        let solved = solve_open(&case, &demand, 1e-8, method);
        assert!(solved.reached);
        look(&case, &solved.recorded, solved.error_figure);
    }
}

/// Choi's matrix has no eigenvalue below zero (M.-D. Choi, Linear Algebra and its Applications 10, 285 (1975)); the trace is kept
/// unless something is lost, and never grows; populations lie between 0 and 1.
#[test]
fn prop_channels_are_completely_positive_and_keep_the_trace() {
    solved(0x1357_9bdf_0246_8ace, 40, |case, found, figure| {
        let channel = found.channel.as_ref().expect("asked for");
        let least = eigenvalues(&channel.choi()).into_iter().fold(f64::INFINITY, f64::min);
        assert!(least > -4.0 * figure, "{least:e}, figure {figure:e}");
        let lossy = case.jumps.iter().any(|jump| !jump.keeps);
        let mut before = 1.0;
        for rho in &found.seen {
            let trace = rho.trace().re;
            assert!(if lossy { trace <= before + figure } else { (trace - 1.0).abs() < 4e-14 }, "{trace}");
            before = trace;
            let good = |p: f64| p >= -figure && p <= 1.0 + figure;
            assert!((0..case.dim()).all(|j| good(rho[(j, j)].re)) && eigenvalues(rho).into_iter().all(good));
        }
        // the channel carries the start to the end
        let start = case.start.density();
        let mut end = Matrix::zeros(case.dim(), case.dim());
        for (j, k) in (0..case.dim()).flat_map(|j| (0..case.dim()).map(move |k| (j, k))) {
            end += channel.image(j, k) * start[(j, k)];
        }
        assert!((end - found.last()).norm() < 4.0 * figure);
    });
}

/// The entropy never falls where every L is Hermitian, so that the identity is steady (G. Lindblad, Communications in Mathematical
/// Physics 40, 147 (1975)).
#[test]
fn prop_entropy_grows_in_unital_channels() {
    let mut random = Random(0x0f1e_2d3c_4b5a_6978);
    for _ in 0..20 {
        let case = random_problem(&mut random);
        if case.dim() > 4 {
            continue;
        }
        let a = Matrix::from_fn(case.dim(), case.dim(), |_, _| random.complex());
        let case = with_jumps(case, vec![Jump::new((&a + a.adjoint()) * re(0.5), random.size(0.1, 3.0))]);
        let found = solve_open(&case, &Demand::default(), 1e-9, None);
        let mut before = 0.0;
        for rho in &found.recorded.seen {
            let entropy: f64 = eigenvalues(rho).into_iter().filter(|p| *p > 0.0).map(|p| -p * p.ln()).sum();
            assert!(entropy > before - 1e-7, "{entropy} after {before}");
            before = entropy;
        }
        assert!(before > 1e-3);
    }
}

/// As the rates vanish the density matrix tends to that of the amplitudes, in proportion to them.
#[test]
fn prop_vanishing_rates_leave_the_pure_state() {
    let mut random = Random(0x7777_1234_abcd_0001);
    for _ in 0..12 {
        let case = random_problem(&mut random);
        if case.dim() > 4 {
            continue;
        }
        let pure = solve(&case, 1e-11, None);
        let expected = Vector::from_column_slice(pure.recorded.last());
        let expected = &expected * expected.adjoint();
        let jumps = random_jumps(&mut random, case.dim());
        let apart = |share: f64| {
            let weak = jumps.iter().map(|jump| Jump { rate_per_s: jump.rate_per_s * share, ..jump.clone() }).collect();
            (solve_open(&with_jumps(case.clone(), weak), &Demand::default(), 1e-11, None).recorded.last() - &expected).norm()
        };
        let (small, smaller) = (apart(1e-4), apart(1e-6));
        assert!(apart(1e-14) < 1e-10);
        assert!(small < 0.02 && (small < 1e-8 || (smaller / small - 0.01).abs() < 3e-3), "{small:e} {smaller:e}");
    }
}

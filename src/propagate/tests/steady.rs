//! Steady states against closed forms.

use super::open::{random_jumps, solve_open, with_jumps};
use super::statistics::Random;
use super::*;
use crate::problem::Jump;
use crate::propagate::{steady, NotSteady};

/// Two levels in the frame of the drive: detuning and Rabi frequency in rad/s.
fn driven(detuning: f64, rabi: f64, jumps: Vec<Jump>) -> Problem {
    let hz = 1.0 / rad_s(1.0);
    let h = sparse(2, &[(1, 1, -detuning * hz), (0, 1, 0.5 * rabi * hz), (1, 0, 0.5 * rabi * hz)]);
    with_jumps(problem(&h, vec![], vec![(1.0, vec![], vec![])]), jumps)
}

/// Saturation and power broadening: population of the upper level s/2/(1 + s + (2 D/G)^2) with s = 2 R^2/G^2 for decay alone (R.
/// Loudon, The Quantum Theory of Light, third edition, Oxford (2000), section 2.8), R^2 T1/(2 T2)/(1/T2^2 + D^2 + R^2 T1/T2) for
/// any T1 and T2 (F. Bloch, Physical Review 70, 460 (1946)).
#[test]
fn exact_saturation_and_power_broadening() {
    let gamma = 3.0;
    for (detuning, rabi, dephasing) in [(0.0, 1.0, 0.0), (2.0, 5.0, 0.0), (-0.7, 0.02, 0.0), (1.5, 4.0, 2.0), (300.0, 40.0, 0.1)] {
        let jumps = vec![Jump::between(2, 1, 0, gamma), Jump::new(diagonal(&[0.0, 1.0]), 2.0 * dephasing)];
        let found = steady(&driven(detuning, rabi, jumps), None).expect("constant");
        let (t1, t2) = (1.0 / gamma, 1.0 / (0.5 * gamma + dephasing));
        let expected = 0.5 * rabi * rabi * t1 / t2 / (1.0 / (t2 * t2) + detuning * detuning + rabi * rabi * t1 / t2);
        let error = (found.state[(1, 1)].re - expected).abs();
        assert!(found.unique && error <= found.error && error < 1e-14, "{error:e}, figure {:e}", found.error);
    }
}

/// Detailed balance: rates up and down of a bath leave the populations of Boltzmann (A. Einstein, Physikalische Zeitschrift 18,
/// 121 (1917)), though the levels lie at optical frequencies.
#[test]
fn exact_detailed_balance() {
    let energies: [f64; 4] = [0.0, 3.1e14, 3.7e14, 9.9e14];
    let beta = 2.5e-15;
    let mut jumps = Vec::new();
    for (lower, upper, rate) in [(0, 1, 2.0e7), (1, 2, 30.0), (0, 3, 5.0e8)] {
        let n = 1.0 / ((beta * (energies[upper] - energies[lower])).exp() - 1.0);
        jumps.push(Jump::between(4, upper, lower, rate * (n + 1.0)));
        jumps.push(Jump::between(4, lower, upper, rate * n));
    }
    let bath = with_jumps(problem(&diagonal(&energies), vec![], vec![(1e-6, vec![], vec![])]), jumps);
    let found = steady(&bath, None).expect("constant");
    let sum: f64 = energies.iter().map(|e| (-beta * e).exp()).sum();
    for (j, e) in energies.iter().enumerate() {
        let expected = (-beta * e).exp() / sum;
        assert!((found.state[(j, j)].re - expected).abs() < 1e-14, "{j}: {} against {expected}", found.state[(j, j)].re);
    }
    assert!(found.unique && (found.state.trace().re - 1.0).abs() < 1e-14);
}

/// A lambda system pumped into its dark state (E. Arimondo, G. Orriols, Lettere al Nuovo Cimento 17, 333 (1976)), (R2|1> - R1|2>)
/// over its norm.
#[test]
fn exact_dark_state() {
    let (r1, r2) = (1.3, 0.4);
    let h = sparse(3, &[(0, 2, 0.5 * r1), (2, 0, 0.5 * r1), (1, 2, 0.5 * r2), (2, 1, 0.5 * r2)]);
    let jumps = vec![Jump::between(3, 2, 0, 9.0), Jump::between(3, 2, 1, 4.0)];
    let found = steady(&with_jumps(problem(&h, vec![], vec![(1.0, vec![], vec![])]), jumps), None).expect("constant");
    let norm = r1 * r1 + r2 * r2;
    assert!(found.unique);
    assert!((found.state[(0, 0)].re - r2 * r2 / norm).abs() < 1e-14);
    assert!((found.state[(0, 1)].re + r1 * r2 / norm).abs() < 1e-14);
    assert!(found.state[(2, 2)].norm() < 1e-15);
}

/// Two traps filled from one level in the ratio of the rates: what each holds depends on the start. A pair of levels that nothing
/// damps turns for ever; its mean counts.
#[test]
fn exact_where_several_are_steady() {
    let jumps = vec![Jump::between(3, 2, 0, 6.0), Jump::between(3, 2, 1, 2.0)];
    let mut traps = with_jumps(problem(&diagonal(&[0.0, 5.0, 90.0]), vec![], vec![(1.0, vec![], vec![])]), jumps);
    assert_eq!(steady(&traps, None), Err(NotSteady::NotUnique(2)));
    traps.start = start(&[0.6, 0.0, 0.8]);
    let found = steady(&traps, Some(&traps.start.density())).expect("constant");
    assert!(!found.unique);
    assert!((found.state[(0, 0)].re - (0.36 + 0.64 * 0.75)).abs() < 1e-14);
    assert!((found.state[(1, 1)].re - 0.16).abs() < 1e-14 && found.state[(0, 1)].norm() < 1e-14);
    let undamped = driven(0.3, 2.0, vec![Jump::new(Matrix::zeros(2, 2), 1.0)]);
    let found = steady(&undamped, Some(&start(&[1.0, 0.0]).density())).expect("constant");
    // mean of Rabi's oscillation from the lower level
    let expected = 0.5 * 4.0 / (4.0 + 0.09);
    assert!(!found.unique && (found.state[(1, 1)].re - expected).abs() < 1e-14, "{}", found.state[(1, 1)].re);
    let lost = with_jumps(
        problem(&diagonal(&[0.0, 1.0]), vec![], vec![(1.0, vec![], vec![])]),
        vec![Jump::out_of(2, 0, 1.0), Jump::between(2, 1, 0, 1.0)],
    );
    let found = steady(&lost, None).expect("constant");
    assert!(found.unique && found.state.norm() < 1e-14);
}

/// What is steady stays, and is what a long wait leads to.
#[test]
fn prop_steady_states_are_reached() {
    let mut random = Random(0x0bad_cafe_1234_5678);
    for number in 0..20 {
        let dim = 2 + random.below(3);
        let a = Matrix::from_fn(dim, dim, |_, _| random.complex());
        let h = &a + a.adjoint();
        let mut jumps = random_jumps(&mut random, dim);
        // dephasing alone may take for ever
        jumps.push(Jump::between(dim, dim - 1, 0, 2.0));
        let wait = with_jumps(problem(&h, vec![], vec![(4000.0, vec![], vec![])]), jumps);
        let end = solve_open(&wait, &Demand::default(), 1e-8, None);
        let found = steady(&wait, Some(end.recorded.last())).expect("constant");
        let apart = (found.state - end.recorded.last()).norm();
        assert!(apart < 1e-10, "number {number}: {apart:e}");
    }
}

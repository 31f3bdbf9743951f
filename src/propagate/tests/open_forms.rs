//! Density matrices against closed forms, by every method.

use super::open::{solve_open, with_jumps, Densities};
use super::*;
use crate::problem::Jump;
use crate::units::{cis_turns, sin_cos_turns, RAD_PER_TURN};

const METHODS: [Option<Method>; 4] = [None, Some(Method::Smooth), Some(Method::Geometric), Some(Method::ConstantSteps)];

/// The term that makes a constant H count as changing, without doing anything: its envelope is smooth, and 1 throughout.
fn changing(peak_hz: f64) -> Envelope {
    shaped(peak_hz, |_| 1.0)
}

/// Resonant nutation with any T1 and T2, from the lower level (H. C. Torrey, Physical Review 76, 1059 (1949)): with the Rabi
/// frequency R, a = (1/T1 + 1/T2)/2 and s^2 = R^2 - (1/T1 - 1/T2)^2/4, decay to the lower level,
/// w(t) = w_s + e^(-at) (A cos st + B sin st), w_s = 1/(1 + R^2 T1 T2) the difference lower - upper in the long run.
fn torrey(rabi: f64, t1: f64, t2: f64, t: f64) -> f64 {
    let (r1, r2) = (1.0 / t1, 1.0 / t2);
    let steady = r1 * r2 / (r1 * r2 + rabi * rabi);
    let (mean, half) = (0.5 * (r1 + r2), 0.5 * (r1 - r2));
    let square = rabi * rabi - half * half;
    let a = 1.0 - steady;
    // dw/dt = 0 at the start
    let b = mean * a;
    let (cos, sin_over_s) = if square > 0.0 {
        let s = square.sqrt();
        ((s * t).cos(), (s * t).sin() / s)
    } else {
        let s = (-square).sqrt();
        ((s * t).cosh(), if s == 0.0 { t } else { (s * t).sinh() / s })
    };
    let w = steady + (-mean * t).exp() * (a * cos + b * sin_over_s);
    0.5 * (1.0 - w)
}

#[test]
fn exact_torrey_nutation_by_every_method() {
    for (rabi, t1, t2) in [(7.0, 1.3, 0.9), (7.0, 0.5, 1.0), (0.3, 0.4, 0.1), (2.0, 0.25, 0.125), (40.0, 5.0, 3.0)] {
        let jumps = vec![Jump::between(2, 1, 0, 1.0 / t1), Jump::new(diagonal(&[0.0, 1.0]), 2.0 / t2 - 1.0 / t1)];
        let drive = sparse(2, &[(1, 0, 1.0)]);
        for method in METHODS {
            for (gap, envelope) in [
                (0.0, changing(0.5 * rabi / RAD_PER_TURN)),
                (0.0, flat(0.5 * rabi / RAD_PER_TURN)),
                (900.0, flat(0.5 * rabi / RAD_PER_TURN)),
            ] {
                let pulse = vec![(2.0, vec![term(0, gap, 0.2, envelope)], vec![0.11, 0.5])];
                let case = with_jumps(problem(&diagonal(&[0.0, gap]), vec![drive.clone()], pulse), jumps.clone());
                let accuracy = if method == Some(Method::ConstantSteps) { 1e-6 } else { 1e-9 };
                let solved = solve_open(&case, &Demand::default(), accuracy, method);
                assert!(solved.reached, "{method:?}: {:e}", solved.error_figure);
                for (t, rho) in [0.11, 0.5, 2.0].iter().zip(&solved.recorded.seen) {
                    let error = (rho[(1, 1)].re - torrey(rabi, t1, t2, *t)).abs();
                    assert!(error <= solved.error_figure, "{method:?} {rabi} {t}: {error:e}, figure {:e}", solved.error_figure);
                }
            }
        }
    }
}

/// A chain of decays, each level at its own rate (H. Bateman, Proceedings of the Cambridge Philosophical Society 15, 423 (1910)),
/// with lifetimes over six decades and levels at optical distances; and how long each level was held: what has passed through it
/// over its rate.
#[test]
fn exact_cascade_and_times_spent() {
    let rates: [f64; 4] = [3.0e6, 40.0, 700.0, 2.0e5];
    let dim = 5;
    let energies = [0.0, 1.1e14, 2.9e14, 3.3e14, 5.0e14];
    let jumps: Vec<Jump> = (0..4).map(|k| Jump::between(dim, 4 - k, 3 - k, rates[k])).collect();
    for t in [1e-7, 1e-3, 0.02, 30.0] {
        let mut case = with_jumps(problem(&diagonal(&energies), vec![], vec![(t, vec![], vec![])]), jumps.clone());
        case.start = start(&[0.0, 0.0, 0.0, 0.0, 1.0]);
        let demand = Demand { time_in: true, ..Demand::default() };
        let solved = solve_open(&case, &demand, 1e-11, None);
        let mut left = 1.0;
        for k in 0..4 {
            let product: f64 = rates[..k].iter().product();
            let population: f64 = (0..=k)
                .map(|m| product * (-rates[m] * t).exp() / (0..=k).filter(|l| *l != m).map(|l| rates[l] - rates[m]).product::<f64>())
                .sum();
            left -= population;
            let found = &solved.recorded;
            assert!((found.population(4 - k) - population).abs() < 2e-14, "{t}, {k}: {} against {population}", found.population(4 - k));
            let through: f64 = left / rates[k];
            let spent = found.time_in_s.last().expect("the end is a moment")[4 - k];
            // what is left of 1 is known to rounding only
            assert!((spent - through).abs() < 1e-13 * t + 4e-15 / rates[k], "{t}, {k}: {spent:e} against {through:e}");
        }
        assert!((solved.recorded.last().trace().re - 1.0).abs() < 1e-15);
    }
}

/// Coupling R/2 and loss G of the upper level alone: the amplitude of the lower one is e^(-Gt/4) (cos st + G/(4s) sin st), 4 s^2 =
/// R^2 - G^2/4, and e^(-Gt/4) (1 + Gt/4) at the exceptional point R = G/2 (W. D. Heiss, Journal of Physics A 45, 444016 (2012)).
#[test]
fn exact_loss_and_exceptional_point() {
    let gamma: f64 = 5.0;
    for (rabi, method) in [9.0, 2.5, 1.0].into_iter().flat_map(|rabi| METHODS.map(|method| (rabi, method))) {
        let pulse = vec![(1.7, vec![term(0, 0.0, 0.0, changing(0.5 * rabi / RAD_PER_TURN))], vec![])];
        let case = problem(&Matrix::zeros(2, 2), vec![sparse(2, &[(1, 0, 1.0)])], pulse);
        let case = with_jumps(case, vec![Jump::out_of(2, 1, gamma)]);
        let accuracy = if method == Some(Method::ConstantSteps) { 1e-6 } else { 1e-10 };
        let solved = solve_open(&case, &Demand::default(), accuracy, method);
        let t = 1.7;
        let square: f64 = 0.25 * (rabi * rabi - 0.25 * gamma * gamma);
        let s = square.abs().sqrt();
        let (cos, sinc) = match square {
            0.0 => (1.0, t),
            _ if square > 0.0 => ((s * t).cos(), (s * t).sin() / s),
            _ => ((s * t).cosh(), (s * t).sinh() / s),
        };
        let lower = ((-0.25 * gamma * t).exp() * (cos + 0.25 * gamma * sinc)).powi(2);
        let upper = ((-0.25 * gamma * t).exp() * 0.5 * rabi * sinc).powi(2);
        for (found, expected) in [(solved.recorded.population(0), lower), (solved.recorded.population(1), upper)] {
            let error = (found - expected).abs();
            assert!(error <= solved.error_figure, "{rabi} {method:?}: {error:e}, figure {:e}", solved.error_figure);
        }
    }
}

/// A coherence at 4 MHz keeps its phase through 3 s of dephasing: rho_10(t) = rho_10(0) e^(-t/T) e^(-i w t).
#[test]
fn exact_phase_of_a_long_wait() {
    let gap = 2f64.powi(22) + 0.25;
    let jumps = vec![Jump::new(diagonal(&[0.0, 1.0]), 2.0 / 4.0)];
    let mut wait = with_jumps(problem(&diagonal(&[0.0, gap]), vec![], vec![(3.0, vec![], vec![])]), jumps);
    wait.start = start(&[0.5f64.sqrt(), 0.5f64.sqrt()]);
    let solved = solve_open(&wait, &Demand::default(), 1e-8, None);
    let error = (solved.recorded.last()[(1, 0)] - cis_turns(-0.75) * (0.5 * (-0.75f64).exp())).norm();
    assert!(error < 1e-15, "{error:e}");
}

/// Collective decay of two emitters through the symmetric state (R. H. Dicke, Physical Review 93, 99 (1954)): from |ee> with L =
/// s1 + s2, rate G: p_ee = e^(-2Gt), p_S = 2 G t e^(-2Gt); in a frame that turns as well as at rest.
#[test]
fn exact_collective_decay() {
    let gamma = 0.8;
    let both = sparse(4, &[(0, 1, 1.0), (0, 2, 1.0), (1, 3, 1.0), (2, 3, 1.0)]);
    for gap in [0.0, 1e9] {
        let mut case = problem(&diagonal(&[0.0, gap, gap, 2.0 * gap]), vec![], vec![(1.1, vec![], vec![0.3])]);
        case = with_jumps(case, vec![Jump::new(both.clone(), gamma)]);
        case.start = start(&[0.0, 0.0, 0.0, 1.0]);
        let solved = solve_open(&case, &Demand::default(), 1e-10, None);
        for (t, rho) in [0.3f64, 1.1].iter().zip(&solved.recorded.seen) {
            let both = (-2.0 * gamma * t).exp();
            let symmetric = 2.0 * gamma * t * both;
            assert!((rho[(3, 3)].re - both).abs() < 1e-14 && (rho[(1, 2)].re - 0.5 * symmetric).abs() < 1e-14, "{rho}");
        }
    }
}

/// A mixed start of a closed system: the mean of its pure parts.
#[test]
fn exact_mixture_is_the_mean_of_its_parts() {
    let pulse = vec![(0.37, vec![term(0, 12.0, 0.1, changing(1.6))], vec![])];
    let mut case = problem(&diagonal(&[0.0, 11.0]), vec![sparse(2, &[(1, 0, 1.0)])], pulse);
    case.start = Start::Mixed(diagonal(&[0.7, 0.3]));
    let solved = solve_open(&case, &Demand::default(), 1e-10, None);
    // Rabi frequency 3.2 Hz, detuning 1 Hz
    let w: f64 = (3.2f64 * 3.2 + 1.0).sqrt();
    let flipped = (3.2 / w).powi(2) * sin_cos_turns(0.5 * w * 0.37).0.powi(2);
    let expected = 0.7 * flipped + 0.3 * (1.0 - flipped);
    let error = (solved.recorded.population(1) - expected).abs();
    assert!(error <= solved.error_figure && error < 1e-10, "{error:e}");
}

/// `cross_check` agrees where something decays, turns and is timed.
#[test]
fn prop_second_route_agrees() {
    let pulse = vec![(0.8, vec![term(0, 5.0, 0.1, shaped(2.0, |t| (-(t - 0.4) * (t - 0.4) / 0.02).exp()))], vec![0.3])];
    let case = problem(&diagonal(&[0.0, 5.5, 9.0]), vec![sparse(3, &[(1, 0, 1.0), (2, 1, 1.4), (0, 1, 0.5)])], pulse);
    let case = with_jumps(case, vec![Jump::between(3, 2, 1, 2.0), Jump::out_of(3, 1, 0.3), Jump::new(diagonal(&[0.0, 1.0, 2.0]), 0.4)]);
    let demand = Demand { propagator: true, time_in: true, within: vec![0, 1] };
    let ask = Asked { cross_check: true, ..asked(1e-9, None) };
    let solved = crate::propagate::solve(&case, &demand, &ask, || Densities { scale_s: 0.8, ..Densities::default() });
    match solved.cross_check {
        Some(crate::propagate::CrossCheck::Done { difference, .. }) => {
            assert!(difference < 2e-9, "{difference:e}, figure {:e}", solved.error_figure)
        }
        other => panic!("{other:?}"),
    }
}

//! Closed forms from the literature.

use super::*;
use crate::propagate::{CrossCheck, METHODS};
use crate::units::{cis_turns, RAD_PER_TURN};

/// Two levels `gap` apart, one-sided drive of Rabi frequency `rabi` (both Hz), as the term of the contract: half of it times |1><0|.
fn driven(gap: f64, carrier: f64, envelope: Envelope, length_s: f64) -> Problem {
    problem(
        &diagonal(&[0.0, gap]),
        vec![sparse(2, &[(1, 0, 1.0)])],
        vec![(length_s, vec![term(0, carrier, 0.0, envelope)], vec![0.37 * length_s])],
    )
}

/// I. I. Rabi, Physical Review 51, 652 (1937): P = R^2/(R^2+D^2) sin^2(pi sqrt(R^2+D^2) t), R and D in Hz.
fn rabi_formula(rabi: f64, detuning: f64, t: f64) -> f64 {
    let whole = rabi.hypot(detuning);
    (rabi / whole).powi(2) * crate::units::sin_cos_turns(0.5 * whole * t).0.powi(2)
}

#[test]
fn exact_rabi_square_pulse_by_one_exponential_any_carrier() {
    for carrier in [5e6, 5e9, 28e12] {
        let (rabi, detuning, length) = (3e6, 1e6, 1e-6);
        let solved = solve(&driven(carrier - detuning, carrier, flat(rabi / 2.0), length), 1e-6, None);
        assert_eq!(solved.method, Method::ConstantSteps);
        assert_eq!(solved.resolutions[0].steps, 3, "two moments and the end");
        for (k, t) in [0.37 * length, length].into_iter().enumerate() {
            let error = (solved.recorded.amplitudes[k][1].norm_sqr() - rabi_formula(rabi, detuning, t)).abs();
            // The rounding of the carrier in rad/s times the length is all that is lost.
            assert!(error < 4e-15 + 1e-16 * RAD_PER_TURN * carrier * length, "carrier {carrier}: {error:e}");
            assert!(error <= solved.error_figure, "carrier {carrier}: {error:e}");
        }
    }
}

#[test]
fn exact_tiny_population_keeps_its_relative_accuracy() {
    let hop = sparse(2, &[(1, 0, 1.0)]);
    let solved = solve(&problem(&diagonal(&[0.0, 3.0]), vec![hop], vec![(2e-9, vec![term(0, 0.0, 0.0, flat(0.5))], vec![])]), 1e-12, None);
    // sin^2(2 pi sqrt(0.5^2+1.5^2) 2 ns) 0.5^2/(0.5^2+1.5^2), mpmath 30 digits (acceptance case of the tiny kick).
    let expected = 3.947841760435743e-17;
    assert!((solved.recorded.population(1) / expected - 1.0).abs() < 2e-15, "{}", solved.recorded.population(1));
    assert!(solved.reached);
}

/// L. Landau 1932, C. Zener, Proceedings of the Royal Society A 137, 696 (1932): P(stay) = exp(-(2 pi)^2 g^2/(d slope)), all in Hz.
#[test]
fn exact_crossing_in_the_long_limit_by_every_method() {
    let (coupling, slope, half) = (0.3, 1.0, 60.0);
    let statics = sparse(2, &[(0, 1, coupling), (1, 0, coupling)]);
    let sweep = term(0, 0.0, 0.0, shaped(0.25, move |t| slope * (t - half)));
    let mut crossing = problem(&statics, vec![diagonal(&[1.0, -1.0])], vec![(2.0 * half, vec![sweep], vec![])]);
    // Started and read in the states of fixed energy at the ends; the formula is then off by about coupling / half^3 only.
    let lean = 0.5 * (2.0 * coupling / (slope * half)).atan();
    crossing.start = start(&[lean.cos(), -lean.sin()]);
    let expected = (-RAD_PER_TURN * RAD_PER_TURN * coupling * coupling / slope).exp();
    for method in [Method::Smooth, Method::Geometric] {
        let solved = solve(&crossing, 1e-9, Some(method));
        assert!(solved.reached, "{method:?} {:e}", solved.error_figure);
        let end = solved.recorded.last();
        let found = (end[0] * lean.cos() + end[1] * lean.sin()).norm_sqr();
        assert!((found - expected).abs() < 2e-6, "{method:?}: {found} against {expected}");
    }
}

/// N. Rosen, C. Zener, Physical Review 40, 502 (1932): P = sin^2(area/2) sech^2(pi D T/2), sech(t/T) pulse, D in rad/s.
#[test]
fn exact_rosen_zener_by_every_method() {
    let (width, detuning, rabi, half) = (1e-8, 7e6, 41e6, 40.0 * 1e-8);
    let pulse = shaped(rabi / 2.0, move |t| 1.0 / ((t - half) / width).cosh());
    let solved_by = |method, accuracy| solve(&driven(4e9 - detuning, 4e9, pulse.clone(), 2.0 * half), accuracy, method);
    let area_half_turns = 0.25 * RAD_PER_TURN * rabi * width;
    let expected =
        crate::units::sin_cos_turns(area_half_turns).0.powi(2) / (0.25 * RAD_PER_TURN * RAD_PER_TURN * detuning * width).cosh().powi(2);
    for (method, accuracy) in
        [(None, 1e-11), (Some(Method::Smooth), 1e-11), (Some(Method::Geometric), 1e-11), (Some(Method::ConstantSteps), 1e-8)]
    {
        let solved = solved_by(method, accuracy);
        let error = (solved.recorded.population(1) - expected).abs();
        assert!(solved.reached, "{method:?}: {:e}", solved.error_figure);
        assert!(error <= solved.error_figure + 1e-14, "{method:?}: {error:e} beyond {:e}", solved.error_figure);
    }
}

#[test]
fn exact_far_detuned_wait_of_seconds_keeps_its_phase() {
    let mut wait = problem(&diagonal(&[0.0, 2f64.powi(22) + 0.25]), vec![], vec![(3.0, vec![], vec![])]);
    wait.start = start(&[0.5f64.sqrt(), 0.5f64.sqrt()]);
    let solved = solve(&wait, 1e-8, None);
    let expected = cis_turns(-0.75) * 0.5f64.sqrt();
    let error = (solved.recorded.last()[1] - expected).norm();
    assert!(error <= solved.error_figure && error < 2e-8, "{error:e} {:e}", solved.error_figure);
}

#[test]
fn exact_time_spent_in_a_resonant_pulse() {
    let (rabi, length) = (2e6, 0.9e-6);
    let resonant = driven(3e9, 3e9, flat(rabi / 2.0), length);
    // Integral of sin^2(pi R t): T/2 - sin(2 pi R T)/(4 pi R).
    let expected = 0.5 * length - crate::units::sin_cos_turns(rabi * length).0 / (2.0 * RAD_PER_TURN * rabi);
    for (method, within) in [(Method::ConstantSteps, 1e-14), (Method::Smooth, 1e-14)] {
        let demand = Demand { propagator: false, time_in: true, ..Demand::default() };
        let kept = || Kept { scale_s: length, ..Kept::default() };
        let solved = crate::propagate::solve(&resonant, &demand, &asked(1e-10, Some(method)), kept);
        let found = solved.recorded.time_in_s[1][1];
        assert!((found - expected).abs() < within * 1e-6, "{method:?}: {found:e} {expected:e}");
        let both: f64 = solved.recorded.time_in_s[1].iter().sum();
        assert!((both / length - 1.0).abs() < 1e-13);
    }
    // The same pulse with its height as a smooth envelope goes through the quadrature.
    let smooth = driven(3e9, 3e9, shaped(rabi / 2.0, |_| 1.0), length);
    let kept = || Kept { scale_s: length, ..Kept::default() };
    for wish in [None, Some(Method::Geometric)] {
        let solved =
            crate::propagate::solve(&smooth, &Demand { propagator: true, time_in: true, ..Demand::default() }, &asked(1e-10, wish), kept);
        assert_eq!(solved.method, Method::Smooth);
        assert!((solved.recorded.time_in_s[1][1] - expected).abs() / length <= solved.error_figure);
        assert!(solved.reached);
    }
}

#[test]
fn cross_check_agrees_or_says_why_not() {
    let ask = Asked { accuracy: 1e-9, method: None, cross_check: true };
    let pulse = driven(50e6, 48e6, shaped(3e6, |t| (RAD_PER_TURN * t / 2e-6).sin().powi(2)), 1e-6);
    let solved = crate::propagate::solve(&pulse, &Demand { propagator: true, time_in: false, ..Demand::default() }, &ask, Kept::default);
    match solved.cross_check {
        Some(CrossCheck::Done { difference, .. }) => assert!(difference < 1e-9, "{difference:e}"),
        other => panic!("{other:?}"),
    }
    let long = driven(5e12, 5e12, flat(1e6), 1e-3);
    match crate::propagate::solve(&long, &Demand::default(), &ask, Kept::default).cross_check {
        Some(CrossCheck::Skipped { reason, .. }) => assert!(reason.contains("evaluations of H"), "{reason}"),
        other => panic!("{other:?}"),
    }
}

#[test]
fn methods_have_words() {
    for row in METHODS {
        assert_eq!(row.method.word(), row.word);
        assert_eq!(Method::from_word(row.word), Some(row.method));
    }
    assert_eq!(Method::from_word("automatic"), None);
}

#[test]
fn what_is_no_number_stops_with_an_infinite_figure() {
    for method in [Method::Smooth, Method::Geometric, Method::ConstantSteps] {
        let broken = driven(1e6, 1e6, shaped(1e6, |t| if t > 4e-7 { f64::NAN } else { 1.0 }), 1e-6);
        let solved = solve(&broken, 1e-8, Some(method));
        assert!(!solved.reached && solved.error_figure.is_infinite(), "{method:?}");
    }
}

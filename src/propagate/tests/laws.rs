//! Laws that hold for every method, over one table of problems.

use super::*;
use crate::propagate::METHODS;

/// The table: a name, the problem, and whether time spent matters.
pub fn table() -> Vec<(&'static str, Problem)> {
    let hump = |length: f64| move |t: f64| crate::units::sin_cos_turns(0.5 * t / length).0.powi(2);
    let pair = || sparse(2, &[(1, 0, 1.0)]);
    let both = || sparse(2, &[(1, 0, 1.0), (0, 1, 1.0)]);
    let ladder = || sparse(3, &[(1, 0, 1.0), (2, 1, 1.4)]);
    let three = || diagonal(&[0.0, 5e9, 9.7e9]);
    vec![
        (
            "resonant square",
            problem(&diagonal(&[0.0, 5e9]), vec![pair()], vec![(1e-6, vec![term(0, 5e9, 0.1, flat(1e6))], vec![0.0, 3e-7])]),
        ),
        (
            "smooth one-sided",
            problem(&diagonal(&[0.0, 5e9]), vec![pair()], vec![(1e-7, vec![term(0, 5.003e9, 0.1, shaped(2e7, hump(1e-7)))], vec![2e-8])]),
        ),
        (
            "linear near the drive",
            problem(&diagonal(&[0.0, 8e6]), vec![both()], vec![(5e-7, vec![term(0, 8e6, 0.0, flat(2e6))], vec![1e-7])]),
        ),
        (
            "linear smooth ladder",
            problem(
                &three(),
                vec![ladder() + ladder().transpose()],
                vec![(1e-8, vec![term(0, 5e9, 0.2, shaped(3e7, hump(1e-8)))], vec![])],
            ),
        ),
        (
            "square ladder, wait, chirp on the diagonal",
            problem(
                &three(),
                vec![ladder(), diagonal(&[0.0, 0.5, 1.0])],
                vec![
                    (4e-8, vec![term(0, 4.9e9, 0.2, flat(1e7))], vec![1e-8]),
                    (3e-8, vec![], vec![1e-8]),
                    (
                        4e-8,
                        vec![term(0, 4.9e9, 0.7, shaped(1e7, hump(4e-8))), term(1, 0.0, 0.0, shaped(2e8, |t| 2.5e7 * t - 0.5))],
                        vec![3e-8],
                    ),
                ],
            ),
        ),
        (
            "static couplings pushed directly",
            problem(
                &(diagonal(&[1e6, -2e6, 0.5e6, 3e6])
                    + sparse(4, &[(0, 1, 1e6), (1, 0, 1e6), (2, 3, 2e6), (3, 2, 2e6), (1, 2, 5e5), (2, 1, 5e5)])),
                vec![sparse(4, &[(0, 2, 1.0), (3, 3, 0.5)])],
                vec![(1e-6, vec![term(0, 0.0, 0.0, shaped(3e6, hump(1e-6)))], vec![])],
            ),
        ),
    ]
}

#[test]
fn prop_every_method_agrees_on_the_table_and_is_unitary() {
    for (name, case) in table() {
        let full = |accuracy, method| {
            crate::propagate::solve(
                &case,
                &Demand { propagator: true, time_in: false, ..Demand::default() },
                &asked(accuracy, method),
                Kept::default,
            )
        };
        let best = full(1e-11, None);
        assert!(best.reached, "{name}: {:e}, {:?}", best.error_figure, best.resolutions);
        for row in METHODS {
            let accuracy = if row.order == 2 { 1e-6 } else { 1e-10 };
            let solved = full(accuracy, Some(row.method));
            assert!(solved.reached, "{name} by {}: {:e} {:?}", row.word, solved.error_figure, solved.resolutions);
            for (a, b) in solved.recorded.numbers().iter().zip(best.recorded.numbers()) {
                assert!(
                    (a - b).abs() <= solved.error_figure + best.error_figure,
                    "{name} by {}: {a} {b} {:e}",
                    row.word,
                    solved.error_figure
                );
            }
            let u = solved.recorded.propagator.expect("asked for");
            let off = (u.adjoint() * &u - Matrix::identity(u.nrows(), u.nrows())).norm();
            // both parts of every entry err by the figure at most, so the norm of U - exact by sqrt(2) n of it, and that of U'U - 1 by twice
            // that (reached: 3 times the figure at n = 4)
            let allowed =
                if row.method.is_adaptive() { 2.0 * 2f64.sqrt() * u.nrows() as f64 * solved.error_figure } else { 4.0 * solved.floor };
            assert!(off < allowed, "{name} by {}: {off:e}", row.word);
            let through = &u * case.start.amplitudes().expect("closed");
            for (a, b) in through.iter().zip(solved.recorded.amplitudes.last().expect("the end")) {
                assert!((a - b).norm() <= 2.0 * solved.error_figure, "{name} by {}: propagator and state differ", row.word);
            }
        }
    }
}

#[test]
fn prop_going_back_through_a_pulse_returns_to_the_start() {
    // psi'(T - t) of -H(T - t) undoes H: a segment, then the same with the sign of H turned and time reversed.
    let length = 3e-7;
    let shape = move |t: f64| (-((t - 1.1e-7) / 8e-8f64).powi(2)).exp();
    let hop = sparse(2, &[(1, 0, 1.0)]);
    let gap = diagonal(&[0.0, 0.5]);
    let forth = vec![term(0, 0.0, 0.0, shaped(9e6, shape)), term(1, 0.0, 0.0, flat(4e6))];
    let back = vec![term(0, 0.0, 0.0, shaped(-9e6, move |t| shape(length - t))), term(1, 0.0, 0.0, flat(-4e6))];
    let there = problem(&diagonal(&[0.0, 0.0]), vec![hop, gap], vec![(length, forth, vec![]), (length, back, vec![])]);
    for method in [Method::Smooth, Method::Geometric] {
        let solved = solve(&there, 1e-11, Some(method));
        assert!((solved.recorded.last()[0] - 1.0).norm() < 1e-11, "{method:?}: {:?}", solved.recorded.last());
    }
}

#[test]
fn prop_cutting_a_segment_changes_nothing() {
    let length = 2e-7;
    let shape = move |t: f64| (-((t - 0.9e-7) / 4e-8f64).powi(2)).exp();
    let hop = || sparse(2, &[(1, 0, 1.0), (0, 1, 1.0)]);
    let carrier = 40e6;
    let one = problem(&diagonal(&[0.0, 41e6]), vec![hop()], vec![(length, vec![term(0, carrier, 0.3, shaped(9e6, shape))], vec![])]);
    let cut = 0.6e-7;
    let later = term(0, carrier, 0.3 + carrier * cut - (carrier * cut).round(), shaped(9e6, move |t| shape(t + cut)));
    let two = problem(
        &diagonal(&[0.0, 41e6]),
        vec![hop()],
        vec![(cut, vec![term(0, carrier, 0.3, shaped(9e6, shape))], vec![]), (length - cut, vec![later], vec![])],
    );
    for method in [Method::Smooth, Method::Geometric] {
        let (a, b) = (solve(&one, 1e-11, Some(method)), solve(&two, 1e-11, Some(method)));
        for (x, y) in a.recorded.last().iter().zip(b.recorded.last()) {
            assert!((x - y).norm() <= a.error_figure + b.error_figure, "{method:?}: {x} {y}");
        }
    }
}

#[test]
fn prop_geometric_is_of_order_six_and_slices_of_order_two() {
    let hump = |t: f64| crate::units::sin_cos_turns(0.5 * t).0.powi(2);
    let three = problem(
        &diagonal(&[0.0, 3.0, 5.5]),
        vec![sparse(3, &[(1, 0, 1.0), (2, 1, 1.2), (0, 2, 0.3)])],
        vec![(1.0, vec![term(0, 2.5, 0.0, shaped(2.0, hump))], vec![])],
    );
    let two = problem(
        &diagonal(&[0.0, 3.0]),
        vec![sparse(2, &[(1, 0, 1.0), (0, 1, 0.7)])],
        vec![(1.0, vec![term(0, 2.5, 0.0, shaped(2.0, hump))], vec![])],
    );
    for case in [two, three] {
        for (method, order, doublings) in [(Method::Geometric, 6.0, 1), (Method::ConstantSteps, 2.0, 3)] {
            let at = |doublings| crate::propagate::tests::at_doublings(&case, method, doublings);
            let best = crate::propagate::tests::at_doublings(&case, Method::Geometric, 6);
            let error = |end: &[Complex64]| end.iter().zip(&best).map(|(a, b)| (a - b).norm_sqr()).sum::<f64>().sqrt();
            let measured = (error(&at(doublings)) / error(&at(doublings + 1))).log2();
            assert!((measured - order).abs() < 0.4, "{method:?}: order {measured}");
        }
    }
}

#[test]
fn prop_what_cannot_be_reached_stops_and_says_so() {
    for (name, case) in table() {
        for method in [None, Some(Method::Smooth), Some(Method::Geometric), Some(Method::ConstantSteps)] {
            if method == Some(Method::ConstantSteps) && !name.starts_with("smooth") {
                continue; // Millions of slices: true, but slow.
            }
            let solved = solve(&case, 1e-16, method);
            let best = if method == Some(Method::ConstantSteps) { 5e-9 } else { 1e-10 };
            assert!(!solved.reached && solved.error_figure < best, "{name} {method:?}: {:e}", solved.error_figure);
        }
    }
    let pair = sparse(2, &[(1, 0, 1.0), (0, 1, 1.0)]);
    let endless = problem(&diagonal(&[0.0, 5e9]), vec![pair], vec![(1e3, vec![term(0, 5e9, 0.0, flat(1e6))], vec![1.0, 2.0])]);
    let solved = solve(&endless, 1e-8, None);
    assert!(!solved.reached && solved.error_figure.is_infinite() && solved.recorded.amplitudes.len() == 3);
    assert!(solved.reason.contains("it was not run"), "{}", solved.reason);
}

#[test]
fn prop_a_narrow_pulse_in_a_long_segment_is_seen() {
    // Half a turn by a Gaussian of 1/100 of the segment, far from its start.
    let (width, at) = (0.01, 0.8137);
    let area = width * (0.5 * crate::units::RAD_PER_TURN).sqrt();
    let bell = shaped(0.25 / area, move |t| (-((t - at) / width).powi(2)).exp());
    let case = problem(&diagonal(&[0.0, 0.0]), vec![sparse(2, &[(1, 0, 1.0)])], vec![(1.0, vec![term(0, 0.0, 0.0, bell)], vec![])]);
    for method in [None, Some(Method::Smooth), Some(Method::Geometric), Some(Method::ConstantSteps)] {
        let solved = solve(&case, 1e-6, method);
        assert!(
            solved.reached && (solved.recorded.population(1) - 1.0).abs() <= solved.error_figure,
            "{method:?} {}",
            solved.recorded.population(1)
        );
    }
}

#[test]
fn prop_second_route_agrees_on_the_table() {
    for (name, case) in table() {
        if name == "resonant square" {
            continue; // 5000 turns of the carrier for the same test as the others.
        }
        let ask = Asked { accuracy: 1e-9, method: None, cross_check: true };
        let kept = || Kept { scale_s: case.length_s(), ..Kept::default() };
        let solved = crate::propagate::solve(&case, &Demand { propagator: true, time_in: true, ..Demand::default() }, &ask, kept);
        match solved.cross_check {
            Some(crate::propagate::CrossCheck::Done { difference, .. }) => assert!(difference < 1e-9, "{name}: {difference:e}"),
            other => panic!("{name}: {other:?}"),
        }
    }
}

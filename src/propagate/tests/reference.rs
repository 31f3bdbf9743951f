//! Numbers from outside, each with the script that made it.

use super::*;
use crate::units::{cis_turns, sin_cos_turns};

/// tests/reference/slices.py (mpmath, 50 digits).
pub const HUNDRED_THOUSAND_REPEATS: f64 = 0.469_522_389_104_547_4;

fn hump(length: f64) -> impl Fn(f64) -> f64 {
    move |t| sin_cos_turns(0.5 * t / length).0.powi(2)
}

/// Both methods against amplitudes of tests/reference/pulses.py (SciPy's DOP853 at 1e-13, good to about 5e-12).
fn compare(case: &Problem, expected: &[(f64, f64)]) {
    for method in [Method::Smooth, Method::Geometric] {
        let solved = solve(case, 1e-11, Some(method));
        assert!(solved.reached, "{method:?} {:e}", solved.error_figure);
        for (found, (re, im)) in solved.recorded.last().iter().zip(expected) {
            assert!((found - Complex64::new(*re, *im)).norm() < 1.5e-11, "{method:?}: {found} against {re} {im}");
        }
    }
}

#[test]
fn ref_linear_ladder_pulse() {
    let both = sparse(3, &[(1, 0, 1.0), (0, 1, 1.0), (2, 1, 1.4), (1, 2, 1.4)]);
    let case = problem(&diagonal(&[0.0, 5.0, 9.7]), vec![both], vec![(12.0, vec![term(0, 5.0, 0.2, shaped(0.3, hump(12.0)))], vec![])]);
    let expected = [
        (-0.40389773307447274, -0.5062429907068007),
        (0.31179495606768853, 0.6690430668773142),
        (-0.14840534669996272, 0.11715711110456356),
    ];
    compare(&case, &expected);
}

#[test]
fn ref_chirped_pulse() {
    let shape = |t: f64| cis_turns(-0.45 * (t - 2.0).powi(2)) * hump(4.0)(t);
    let chirp = Envelope::Smooth { shape: Arc::new(Shape(Box::new(shape))), since_s: 0.0, scale: re(rad_s(1.1)) };
    let case = problem(&diagonal(&[0.0, 3.0]), vec![sparse(2, &[(1, 0, 1.0)])], vec![(4.0, vec![term(0, 3.0, 0.0, chirp)], vec![])]);
    compare(&case, &[(0.013107260370602121, 3.605971296440369e-12), (0.9169584726828792, 0.3987672994373075)]);
}

#[test]
fn ref_static_coupling_with_two_drives() {
    let mut statics = diagonal(&[0.0, 1.5, -0.7]);
    statics[(0, 1)] = re(0.3);
    statics[(1, 0)] = re(0.3);
    statics[(1, 2)] = Complex64::new(0.0, 0.2);
    statics[(2, 1)] = Complex64::new(0.0, -0.2);
    let terms =
        vec![term(0, 0.6, 0.1, shaped(0.5, |t| (-((t - 1.0) / 0.8).powi(2)).exp())), term(1, 0.0, 0.0, shaped(2.0, |t| (t - 2.0).tanh()))];
    let case = problem(&statics, vec![sparse(3, &[(2, 0, 1.0)]), diagonal(&[0.0, 0.5, 0.0])], vec![(5.0, terms, vec![])]);
    let expected = [
        (-0.24402699276437353, -0.4634410630927049),
        (-0.2823127429801685, -0.7920631817885246),
        (-0.022375264380659902, -0.13456591913111562),
    ];
    compare(&case, &expected);
}

/// tests/reference/constant.py (mpmath, 60 digits); the entries in rad/s are rounded, so no better than 3.6e5 rad times 1e-16.
#[test]
fn ref_huge_norm_and_near_degeneracy() {
    let i = |x: f64| Complex64::new(0.0, x);
    let huge =
        Matrix::from_row_slice(3, 3, &[re(0.0), re(310e9), i(95e9), re(310e9), re(870e9), re(-220e9), i(-95e9), re(-220e9), re(-1430e9)]);
    let mut case = problem(&huge, vec![], vec![(40e-9, vec![], vec![])]);
    case.start = start(&[0.0, 0.0, 1.0]);
    let solved = solve(&case, 1e-9, None);
    assert!(solved.reached);
    for (j, expected) in [0.021621462152995558, 0.00162686750142434, 0.9767516703455801].into_iter().enumerate() {
        let error = (solved.recorded.population(j) - expected).abs();
        assert!(error <= solved.error_figure && error < 1e-10, "{error:e} beyond {:e}", solved.error_figure);
    }
    let near = sparse(3, &[(0, 0, 1e7), (1, 1, 1e7 + 20.0), (2, 2, 1e7 - 40.0), (0, 1, 20.0), (1, 0, 20.0), (1, 2, 20.0), (2, 1, 20.0)]);
    let solved = solve(&problem(&near, vec![], vec![(10e-3, vec![], vec![])]), 1e-9, None);
    for (j, expected) in [0.286_296_629_728_581_6, 0.5283911716898976, 0.1853121985815208].into_iter().enumerate() {
        let error = (solved.recorded.population(j) - expected).abs();
        assert!(error <= solved.error_figure && error < 1e-9, "{error:e} beyond {:e}", solved.error_figure);
    }
}

/// Two thousand periods of a strong linear drive: one period by collocation, its propagator to the power 2000.
#[test]
fn ref_two_thousand_periods_to_ten_digits() {
    let (gap, carrier, periods) = (8.0, 7.9, 2000);
    let both = || sparse(2, &[(1, 0, 1.0), (0, 1, 1.0)]);
    let lasting =
        |length: f64| problem(&diagonal(&[0.0, gap]), vec![both()], vec![(length, vec![term(0, carrier, 0.15, flat(0.8))], vec![])]);
    let mut once = Matrix::zeros(2, 2);
    for j in 0..2 {
        let mut one = lasting(1.0 / carrier);
        one.start = start(&if j == 0 { [1.0, 0.0] } else { [0.0, 1.0] });
        let mut kept = Kept::default();
        collocation::solve(&one, 0.5, false, &mut kept);
        once.set_column(j, &Vector::from_column_slice(kept.last()));
    }
    let mut expected = Vector::from_vec(vec![re(1.0), re(0.0)]);
    for _ in 0..periods {
        expected = &once * expected;
    }
    for method in [None, Some(Method::Smooth), Some(Method::Geometric)] {
        let solved = solve(&lasting(f64::from(periods) / carrier), 1e-10, method);
        let error = solved.recorded.last().iter().zip(expected.iter()).map(|(a, b)| (a - b).norm()).fold(0.0, f64::max);
        assert!(solved.reached && error <= 1.5 * solved.error_figure + 1e-12, "{method:?}: {error:e} beyond {:e}", solved.error_figure);
    }
}

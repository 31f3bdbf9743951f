//! Gate figures of channels against closed forms, and against the formula for propagators.

use num_complex::Complex64;

use super::gate::GateJudge;
use crate::problem::{Channel, Matrix};
use crate::units::{cis_turns, sin_cos_turns};

fn z(re: f64, im: f64) -> Complex64 {
    Complex64::new(re, im)
}

fn two(entries: [f64; 4]) -> Matrix {
    Matrix::from_row_slice(2, 2, &entries.map(Complex64::from))
}

/// The channel sum K rho K+ of some Kraus matrices, on the first `d` levels.
fn channel(kraus: &[Matrix], d: usize) -> Channel {
    let within: Vec<usize> = (0..d).collect();
    let mut sum = Channel::of_propagator(&kraus[0], &within);
    kraus[1..].iter().for_each(|k| sum.add(&Channel::of_propagator(k, &within), 1.0));
    sum
}

/// exp(-i theta/2 n.s) for a turn about an axis in the plane of y and z (y at 0, z at a quarter).
fn turn(turns: f64, tilt: f64) -> Matrix {
    let (sin, cos) = sin_cos_turns(turns / 2.0);
    let (nz, ny) = sin_cos_turns(tilt);
    Matrix::from_row_slice(2, 2, &[z(cos, -sin * nz), z(-sin * ny, 0.0), z(sin * ny, 0.0), z(cos, sin * nz)])
}

/// A unitary by Gram and Schmidt from numbers without pattern (the fractional parts of multiples of the golden mean).
fn mixed_up(n: usize, seed: f64) -> Matrix {
    let part = |k: usize| ((k as f64 + seed) * 0.618_033_988_749_894_9).fract() - 0.5;
    let m = Matrix::from_fn(n, n, |a, b| z(part(2 * (a * n + b)), part(2 * (a * n + b) + 1)));
    m.qr().q()
}

/// Pedersen, Moller, Molmer (2007): the figures of a unitary, leaking or not, by their formula on the matrix itself.
#[test]
fn prop_a_propagator_is_judged_as_by_its_own_formula() {
    for (n, d, seed) in [(2, 2, 0.3), (3, 2, 1.7), (5, 3, 2.9), (4, 4, 0.11)] {
        let (u, target) = (mixed_up(n, seed), mixed_up(d, seed + 100.0));
        let within: Vec<usize> = (0..d).map(|k| n - 1 - k).collect();
        let m = Matrix::from_fn(d, d, |a, b| u[(within[a], within[b])]);
        let kept = m.norm_squared();
        let overlap = (target.adjoint() * &m).trace().norm_sqr();
        let size = d as f64;
        let figures = GateJudge::of(&within, target, Vec::new()).judge(&Channel::of_propagator(&u, &within));
        assert!((figures.error - (1.0 - (kept + overlap) / (size * (size + 1.0)))).abs() < 4e-15, "{n} {d}");
        assert!((figures.leakage - (1.0 - kept / size)).abs() < 4e-15);
    }
}

/// Average over the six poles of the sphere, exact for two levels (a spherical 2-design; P. Delsarte, J. M. Goethals, J. J. Seidel,
/// Geometriae Dedicata 6, 363 (1977)), for a channel that leaks, damps and turns at once.
#[test]
fn prop_two_levels_agree_with_six_states() {
    let kraus: Vec<Matrix> =
        [(0.6, 0.4), (0.3, 5.2), (0.1, 9.9)].iter().map(|(w, s): &(f64, f64)| mixed_up(3, *s) * z(w.sqrt(), 0.0)).collect();
    let target = turn(0.21, 0.07);
    let r = 0.5f64.sqrt();
    let poles = [
        [z(1.0, 0.0), z(0.0, 0.0)],
        [z(0.0, 0.0), z(1.0, 0.0)],
        [z(r, 0.0), z(r, 0.0)],
        [z(r, 0.0), z(-r, 0.0)],
        [z(r, 0.0), z(0.0, r)],
        [z(r, 0.0), z(0.0, -r)],
    ];
    let mean: f64 = poles
        .iter()
        .map(|pole| {
            let psi = nalgebra::DVector::from_column_slice(pole);
            let wanted = &target * &psi;
            kraus.iter().map(|k| wanted.dotc(&(k.view((0, 0), (2, 2)) * &psi)).norm_sqr()).sum::<f64>() / 6.0
        })
        .sum();
    let figures = GateJudge::of(&[0, 1], target, Vec::new()).judge(&channel(&kraus, 2));
    assert!((figures.error - (1.0 - mean)).abs() < 4e-15, "{} {}", figures.error, 1.0 - mean);
}

/// Depolarising with probability p towards equal shares: F = 1 - p/2 for two levels, all of it incoherent
/// (M. A. Nielsen, Physics Letters A 303, 249 (2002): F = (d F_e + 1)/(d + 1), F_e = 1 - 3p/4).
#[test]
fn exact_depolarising() {
    let p: f64 = 0.013;
    let paulis = [
        two([1.0, 0.0, 0.0, 1.0]),
        two([0.0, 1.0, 1.0, 0.0]),
        Matrix::from_row_slice(2, 2, &[z(0.0, 0.0), z(0.0, -1.0), z(0.0, 1.0), z(0.0, 0.0)]),
        two([1.0, 0.0, 0.0, -1.0]),
    ];
    let weights = [1.0 - 0.75 * p, p / 4.0, p / 4.0, p / 4.0];
    let kraus: Vec<Matrix> = paulis.iter().zip(weights).map(|(s, w)| s * z(w.sqrt(), 0.0)).collect();
    let figures = GateJudge::of(&[0, 1], Matrix::identity(2, 2), Vec::new()).judge(&channel(&kraus, 2));
    assert!((figures.error - p / 2.0).abs() < 1e-15);
    assert!(figures.leakage.abs() < 1e-15 && (figures.incoherent.unwrap_or(0.0) - p / 2.0).abs() < 1e-15);
}

/// Amplitude damping by g: F_e = (1 + sqrt(1 - g))^2/4, F = (2 F_e + 1)/3 (Nielsen 2002); a turn put before the damping is wholly
/// coherent: the turn back behind it restores the same F.
#[test]
fn exact_amplitude_damping_splits_from_a_turn() {
    let g: f64 = 0.02;
    let kraus = [two([1.0, 0.0, 0.0, (1.0 - g).sqrt()]), two([0.0, g.sqrt(), 0.0, 0.0])];
    let damped = 1.0 - (0.5 * (1.0 + (1.0 - g).sqrt()).powi(2) + 1.0) / 3.0;
    let judge = GateJudge::of(&[0, 1], Matrix::identity(2, 2), Vec::new());
    let figures = judge.judge(&channel(&kraus, 2));
    assert!((figures.error - damped).abs() < 1e-15);
    assert!((figures.incoherent.unwrap_or(0.0) - damped).abs() < 1e-15);
    // a turn by 0.03 about an axis between y and z, behind the damping: angle and axis come back
    let w = turn(0.03, 0.1);
    let turned: Vec<Matrix> = kraus.iter().map(|k| &w * k).collect();
    let figures = judge.judge(&channel(&turned, 2));
    assert!((figures.incoherent.unwrap_or(0.0) - damped).abs() < 1e-15, "{figures:?}");
    let (turns, axis) = figures.residual.unwrap_or_default();
    let (nz, ny) = sin_cos_turns(0.1);
    assert!(
        (turns - 0.03).abs() < 1e-14 && axis[0].abs() < 1e-13 && (axis[1] - ny).abs() < 1e-13 && (axis[2] - nz).abs() < 1e-13,
        "{axis:?}"
    );
}

/// A free turn about z on a channel: the best angle of two levels undoes a turn about z exactly, though the coherence has faded.
#[test]
fn exact_free_turn_on_a_faded_channel() {
    let (p, phi): (f64, f64) = (0.04, 0.37);
    let turned = Matrix::from_diagonal(&nalgebra::DVector::from_vec(vec![cis_turns(-phi / 2.0), cis_turns(phi / 2.0)]));
    let flipped = &turned * two([1.0, 0.0, 0.0, -1.0]);
    let kraus = [&turned * z((1.0 - p).sqrt(), 0.0), flipped * z(p.sqrt(), 0.0)];
    let judge = GateJudge::of(&[0, 1], Matrix::identity(2, 2), vec![vec![0.5, -0.5]]);
    let figures = judge.judge(&channel(&kraus, 2));
    // phase flips with probability p: F_e = 1 - p
    assert!((figures.error - 2.0 * p / 3.0).abs() < 1e-15, "{figures:?}");
    assert!((figures.free_z_turns[0] - phi).abs() < 1e-14, "{figures:?}");
    // the same found by Newton's method, as one of two free operators on three levels of which one is idle
    let wide = |m: &Matrix| {
        let mut wide = Matrix::identity(3, 3);
        wide.view_mut((0, 0), (2, 2)).copy_from(m);
        wide
    };
    let kraus = [wide(&turned) * z((1.0 - p).sqrt(), 0.0), wide(&(&turned * two([1.0, 0.0, 0.0, -1.0]))) * z(p.sqrt(), 0.0)];
    let judge = GateJudge::of(&[0, 1, 2], Matrix::identity(3, 3), vec![vec![0.5, -0.5, 0.0], vec![0.0, 0.0, 1.0]]);
    let figures = judge.judge(&channel(&kraus, 3));
    // trace of the Kraus matrices: 3 and 1 of 3, so F_e = (1 - p) + p/9
    let expected = 1.0 - (3.0 * (1.0 - 8.0 * p / 9.0) + 1.0) / 4.0;
    assert!((figures.error - expected).abs() < 1e-14, "{} {expected}", figures.error);
}

/// Channels are averaged before they are judged: half a channel and half another is what `add` makes of them.
#[test]
fn prop_channels_add_up() {
    let (a, b) = (mixed_up(3, 0.5), mixed_up(3, 7.5));
    let both = channel(&[&a * z(0.25f64.sqrt(), 0.0), &b * z(0.75f64.sqrt(), 0.0)], 2);
    let judge = GateJudge::of(&[0, 1], Matrix::identity(2, 2), Vec::new());
    let error = |u: &Matrix| judge.judge(&Channel::of_propagator(u, &[0, 1])).error;
    assert!((judge.judge(&both).error - (0.25 * error(&a) + 0.75 * error(&b))).abs() < 4e-15);
}

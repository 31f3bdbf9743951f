//! Expansions in functions of one's own.

use num_complex::Complex64;

use super::{built, largest, tried};
use crate::problem::Matrix;
use crate::units::{kinetic_hz_m2, RAD_PER_TURN};

/// Sines of a box are orthonormal already: no word is needed, and every matrix is that of the box.
#[test]
fn exact_sines_of_a_box() {
    let kappa = kinetic_hz_m2(crate::units::constants::ELECTRON_MASS);
    let built = built(&format!(
        "# first: one\nsystem:\n  functions:\n    variable: x\n    from: 0 nm\n    to: 6 nm\n    list: {{one: sin(0.5 turn * x / 6 nm), two: 3 * sin(1 turn * x / 6 nm), three: sin(1.5 turn * x / 6 nm)}}\n    \
         hamiltonian: {{derivatives: {{2: -{kappa:e} Hz * (1 m)^2}}}}\noperators:\n  place: {{derivatives: {{0: x}}}}\n  slope: {{derivatives: {{1: 1}}}}\n  pull: {{derivatives: {{1: -1i * 1 nm}}}}\n"
    ));
    let length = 6e-9;
    for n in 1..=3usize {
        let wanted = kappa * (0.5 * RAD_PER_TURN * n as f64 / length).powi(2);
        assert!((built.energies[n - 1].value() / wanted - 1.0).abs() < 1e-14, "{n}");
    }
    let pi = 0.5 * RAD_PER_TURN;
    assert!((built.operator("place")[(0, 1)].re + 16.0 * length / (9.0 * pi * pi)).abs() < 1e-14 * length);
    assert!((built.operator("slope")[(0, 1)].re - 4.0 / length * 2.0 / -3.0).abs() < 1e-13 / length);
    // i times a real slope is Hermitian
    let pull = built.operator("pull");
    assert_eq!(largest(&(&pull - pull.adjoint())), 0.0);
    assert!(built.error_hz < 1e-14 * built.energies[2].value());
}

/// Products of Gaussians (S. F. Boys, Proceedings of the Royal Society A 200, 542 (1950)): the overlap of two of widths a and b whose
/// centres are d apart is sqrt(2 pi) a b/sqrt(a^2 + b^2) exp(-d^2/(2 (a^2 + b^2))).
#[test]
fn exact_overlap_of_gaussians_and_both_orders() {
    let of = |how: &str| {
        built(&format!(
            "# first: left\nsystem:\n  functions:\n    variable: y\n    from: -50 nm\n    to: 50 nm\n    list: {{left: exp(-((y + 4 nm) / 3 nm)^2 / 2), right: exp(-((y - 3 nm) / 5 nm)^2 / 2)}}\n    \
             orthogonalise: {how}\n    hamiltonian: {{derivatives: {{0: 20 meV * (y / 10 nm)^2, 2: -300 meV * (1 nm)^2}}}}\noperators:\n  place: {{derivatives: {{0: y}}}}\n"
        ))
    };
    let (symmetric, order) = (of("symmetric"), of("in order"));
    let overlap = symmetric.overlap.as_ref().expect("functions have an overlap");
    let wanted = RAD_PER_TURN.sqrt() * 15e-9 / 34f64.sqrt() * (-49.0f64 / 68.0).exp();
    assert!((overlap[(0, 1)].re / wanted - 1.0).abs() < 1e-14, "{overlap}");
    // the first of an ordered set keeps its function: <x> = -4 nm
    assert!((order.operator("place")[(0, 0)].re / -4e-9 - 1.0).abs() < 1e-13);
    // both bases span the same space: trace and spectrum agree, the matrices do not
    let spectrum = |matrix: &Matrix| {
        let mut found: Vec<f64> = matrix.clone().symmetric_eigenvalues().iter().copied().collect();
        found.sort_by(f64::total_cmp);
        found
    };
    let (a, b) = (spectrum(&symmetric.statics_hz), spectrum(&order.statics_hz));
    assert!(a.iter().zip(&b).all(|(a, b)| (a / b - 1.0).abs() < 1e-13), "{a:?} {b:?}");
    assert!((symmetric.operator("place").trace() - order.operator("place").trace()).norm() < 1e-14 * 1e-9 * 10.0);
    assert!((symmetric.statics_hz[(0, 1)] - order.statics_hz[(0, 1)]).norm() > 0.01 * b[1]);
}

/// The kink of exp(-|x|/a) sits on its second derivative: <T> = kappa/a^2, which a sum over both sides alone would give the wrong sign.
#[test]
fn exact_kinetic_energy_of_a_cusp() {
    let built = built(
        "# first: cusp\nsystem:\n  functions:\n    variable: x\n    from: -160 nm\n    to: 160 nm\n    list: {cusp: exp(-abs(x) / 4 nm)}\n    hamiltonian: {derivatives: {2: -7 THz * (1 nm)^2}}\n",
    );
    assert!((built.energies[0].value() / (7e12 / 16.0) - 1.0).abs() < 1e-13, "{:?}", built.energies);
}

#[test]
fn prop_what_is_not_hermitian_or_not_independent_is_refused() {
    let with = |list: &str, rest: &str, derivatives: &str| {
        tried(&format!(
            "# first: a\nsystem:\n  functions:\n    variable: x\n    from: -40 nm\n    to: 40 nm\n    list: {list}\n    {rest}hamiltonian: {{derivatives: {derivatives}}}\n"
        ))
    };
    let two = "{a: exp(-((x + 4 nm) / 4 nm)^2), b: exp(-((x - 4 nm) / 4 nm)^2)}";
    let bend = "{2: -300 meV * (1 nm)^2}";
    let text = with(two, "", bend).expect_err("skew functions");
    assert!(text.contains("symmetric") && text.contains("in order"), "{text}");
    let text = with(two, "orthogonalise: symmetric\n    ", "{0: 1 meV, 1: -300 meV * 1 nm}").expect_err("a slope alone");
    assert!(text.contains("not Hermitian") && text.contains("order 1"), "{text}");
    let same = "{a: exp(-(x / 4 nm)^2), b: 2 * exp(-(x / 4 nm)^2)}";
    let text = with(same, "orthogonalise: symmetric\n    ", bend).expect_err("the same function twice");
    assert!(text.contains("not independent"), "{text}");
    // the second derivative of a step means nothing
    let text = with("{a: \"max(0, 1 - abs(x) / 5 nm)\"}", "", "{4: 1 meV * (1 nm)^4}").expect_err("four derivatives of a kink");
    assert!(text.contains("order 4"), "{text}");
    // i c d/dx + i c'/2 is Hermitian
    let uneven = two.replace("x - 4 nm) / 4 nm", "x - 4 nm) / 6 nm");
    let good = with(&uneven, "orthogonalise: in order\n    ", "{1: 2i * 1 meV * x, 0: 1i * 1 meV}").expect("a Hermitian first order");
    let off = &good.statics_hz - good.statics_hz.adjoint();
    assert_eq!(largest(&off), 0.0);
    assert!(good.statics_hz[(0, 1)].im.abs() > 0.0 && good.statics_hz[(0, 0)] == Complex64::from(0.0));
}

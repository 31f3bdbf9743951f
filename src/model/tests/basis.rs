//! Changes of basis: laws, names, and what is refused.

use num_complex::Complex64;

use super::{built, document, largest, tried};
use crate::problem::Matrix;

const THREE: &str = "# first: a\nsystem:\n  hamiltonian:\n    names: [a, b, c]\n    unit: MHz\n    rows: [[3, 1 + 0.5i, 0.2], [1 - 0.5i, -2, 0.7i], [0.2, -0.7i, 9]]\n";

/// U^+ U = 1 and H U = U E to rounding; trace and spectrum stay; the largest component of each eigenstate is real and positive.
#[test]
fn prop_eigenstates_are_a_unitary_change() {
    let (plain, eigen) = (built(THREE), built(&format!("{THREE}basis: eigenstates\n")));
    let u = eigen.basis.as_ref().expect("another basis").as_ref().clone();
    assert!(largest(&(u.adjoint() * &u - Matrix::identity(3, 3))) < 1e-15);
    let h = &plain.statics_hz;
    assert!(largest(&(h * &u - &u * &eigen.statics_hz)) < 1e-15 * 3.0 * largest(h));
    assert!((h.trace() - eigen.statics_hz.trace()).norm() < 1e-15 * 10e6);
    for k in 0..3 {
        let column = u.column(k);
        let most = column.iter().max_by(|a, b| a.norm().total_cmp(&b.norm())).copied().unwrap_or_default();
        assert!(most.im.abs() < 1e-16 && most.re > 0.0);
        assert!((eigen.weights[k] - u[(k, k)].norm_sqr()).abs() < 1e-16 && eigen.weights[k] > 0.5);
    }
}

/// A spin 1 without a field is three times degenerate, a triplet beside a singlet likewise: the states as built remain.
#[test]
fn prop_degenerate_levels_keep_their_states() {
    let spin = built("# first: +1\nsystem:\n  spin: {size: 1, g: 2, field: [0 T, 0 T, 0 T], zero_field: {axial: 2 GHz, rhombic: 0 GHz}}\nbasis: eigenstates\n");
    assert_eq!(spin.weights, [1.0, 1.0, 1.0]);
    // a coupling of b and c that leaves a alone, with a degenerate with their even sum
    let rows = "[[1, 0, 0], [0, 0.2, 0.8], [0, 0.8, 0.2]]";
    let shared = format!("# first: a\nsystem:\n  hamiltonian: {{names: [a, b, c], unit: MHz, rows: {rows}}}\nbasis: {{u: {{a: 1}}, v: {{b: sqrt(1/2), c: sqrt(1/2)}}, w: {{b: sqrt(1/2), c: -sqrt(1/2)}}}}\n");
    let levels: Vec<f64> = built(&shared.replace("first: a", "first: u")).energies.iter().map(|level| level.value()).collect();
    for (level, wanted) in levels.iter().zip([1e6, 1e6, -0.6e6]) {
        assert!((level - wanted).abs() < 1e-15 * 4e6, "{levels:?}");
    }
    // dense and degenerate: 1 + |s><s| of four states has three equal levels; the one along s cannot bear a name
    let ones = "[[2, 1, 1, 1], [1, 2, 1, 1], [1, 1, 2, 1], [1, 1, 1, 2]]";
    let text =
        tried(&format!("# first: a\nsystem:\n  hamiltonian: {{names: [a, b, c, d], unit: MHz, rows: {ones}}}\nbasis: eigenstates\n"))
            .expect_err("a quarter of each state");
    assert!(text.contains("25 % of it is a") && text.contains("b"), "{text}");
}

/// Two levels at the point where they cross share each eigenstate evenly; `energy` names them all the same.
#[test]
fn prop_names_by_energy_where_overlap_has_none() {
    let at = |naming: &str, tilt: &str| {
        format!("# first: a\nsystem:\n  hamiltonian: {{names: [a, b], unit: MHz, rows: [[{tilt}, 2], [2, -{tilt}]]}}\n{naming}basis: eigenstates\n")
    };
    let text = tried(&at("", "0")).expect_err("half and half");
    assert!(text.contains("50 % of it is a") && text.contains("name_states_by: energy"), "{text}");
    let named = built(&at("  name_states_by: energy\n", "0"));
    assert!((named.energies[0].value() + 2e6).abs() < 1e-8 && (named.energies[1].value() - 2e6).abs() < 1e-8);
    let side = built(&at("", "1.5"));
    assert!((side.energies[0].value() - 2.5e6).abs() < 1e-8, "a lies above by its overlap");
    let side = built(&at("  name_states_by: energy\n", "1.5"));
    assert!((side.energies[0].value() + 2.5e6).abs() < 1e-8, "a lies below by energy");
}

/// Two of three states kept: (1 - P) H P is what they would have coupled, here sqrt(|1 + 0.5i|^2 ..) by hand.
#[test]
fn exact_what_a_cut_loses() {
    let cut = built(&format!("{}basis: {{u: {{a: 1}}, v: {{c: 1i}}}}\n", THREE.replace("first: a", "first: u")));
    // b is dropped: its couplings to a and c are 1 + 0.5i and 0.7i MHz
    assert!((cut.lost_hz / (1e6 * (1.25f64 + 0.49).sqrt()) - 1.0).abs() < 1e-14, "{}", cut.lost_hz);
    assert!((cut.statics_hz[(0, 1)] - Complex64::new(0.0, 0.2e6)).norm() < 1e-9);
    let whole = built(&format!("{THREE}basis: eigenstates\n"));
    assert_eq!(whole.lost_hz, 0.0);
}

/// What raise, position and momentum make of the last kept state of a mode has n + 1 quanta; nothing else leaves. Of the two kept
/// states of three, an operator in the basis as built leads to the third by its entry there.
#[test]
fn exact_what_leads_out_of_a_cut_basis() {
    let mode = built("# first: 0\nsystem:\n  mode: {frequency: 1 GHz, levels: 5}\n");
    let position = mode.leaving("position").expect("an operator of the mode");
    for (n, [outside, all]) in position.iter().enumerate() {
        // |x n|^2 = n + 1/2, of which (n + 1)/2 lies above
        assert!((all * all - (n as f64 + 0.5)).abs() < 1e-14, "{n}");
        assert!((outside * outside - if n == 4 { 2.5 } else { 0.0 }).abs() < 1e-14, "{n}");
    }
    assert!(mode.leaving("lower").is_some_and(|list| list.iter().all(|[outside, _]| *outside == 0.0)));
    let cut = built(
        "# first: u\nsystem:\n  spin: {size: 1, gyromagnetic: 1 MHz/T, field: [0 T, 0 T, 1 T]}\nbasis: {u: {\"+1\": 1}, v: {\"0\": 1}}\n",
    );
    let left = cut.leaving("spin_x").expect("an operator of the spin");
    assert!(left[0][0] == 0.0 && (left[1][0] - 0.5f64.sqrt()).abs() < 1e-15 && (left[1][1] - 1.0).abs() < 1e-15, "{left:?}");
}

/// Vectors that are not orthonormal: refused, or made so; the symmetric choice treats both alike.
#[test]
fn exact_expansions_made_orthonormal() {
    let two = "# first: u\nsystem:\n  levels: {a: 0 MHz, b: 10 MHz}\n";
    let skew = "u: {a: 1, b: 0.2}, v: {a: 0.2, b: 1}";
    let made = built(&format!("{two}basis: {{names: {{{skew}}}, orthogonalise: symmetric}}\n"));
    // S = 1.04 + 0.4 sx, S^(-1/2) turns them back to a and b
    let u = made.basis.as_ref().expect("another basis");
    assert!((u[(0, 0)].re - 1.0).abs() < 1e-15 && u[(1, 0)].norm() < 1e-15, "{u}");
    let order = built(&format!("{two}basis: {{names: {{{skew}}}, orthogonalise: in order}}\n"));
    assert!((order.energies[0].value() - 10e6 * 0.04 / 1.04).abs() < 1e-8);
}

/// Populations of a run, means and coherences do not hang on the basis: here through the matrices that the run is made of.
#[test]
fn prop_operators_follow_the_states() {
    let base = "# first: a\nsystem:\n  hamiltonian: {names: [a, b], unit: MHz, rows: [[1.5, 2.4], [2.4, -1.5]]}\n";
    let document = document(&format!(
        "{base}basis: {{even: {{a: cos(30 deg), b: sin(30 deg)}}, odd: {{a: -sin(30 deg), b: cos(30 deg)}}}}\noperators:\n  side: {{rows: [[1, 0], [0, -1]], in: as built}}\n  crossed: {{rows: [[0, 1], [1, 0]]}}\n"
    ).replace("first: a", "first: even"));
    let values = document.tape.as_written();
    let built = crate::model::build(&document, &values).expect("a good basis");
    let side = crate::model::operator(&document, &built, 0, &values);
    let crossed = crate::model::operator(&document, &built, 1, &values);
    // cos 60 deg, -sin 60 deg: sigma_z turned by twice 30 deg
    assert!((side[(0, 0)].re - 0.5).abs() < 1e-15 && (side[(0, 1)].re + 0.75f64.sqrt()).abs() < 1e-15, "{side}");
    assert_eq!(crossed[(0, 1)], Complex64::from(1.0));
}

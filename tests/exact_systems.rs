//! Systems from their physics against closed forms.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

use std::path::Path;

use nutate::config::document::read_str;
use nutate::matrices::{matrices, Matrices};
use nutate::outcome::compute;
use nutate::plan::Plan;
use nutate::units::{BOHR_HZ_PER_TESLA, DIPOLAR_HZ};

fn plan(text: &str) -> Plan {
    Plan::new(read_str("test.yaml", text, Path::new(""), &[]).unwrap_or_else(|refusal| panic!("{}", refusal.text())))
}

/// The matrices of a system; `start` is any level of it.
fn of(system: &str, start: &str) -> (Plan, Matrices) {
    let plan = plan(&format!("format: 1\nsystem:\n{system}\nsequence: [{{wait: 1 ns}}]\nstart: {start}\n"));
    let found = matrices(&plan).unwrap();
    (plan, found)
}

/// G. Breit and I. I. Rabi, Physical Review 38, 2082 (1931): hydrogen and rubidium-87 from no field to far beyond the hyperfine
/// one, each level under the name that it grows from.
#[test]
fn exact_breit_rabi_at_any_field() {
    for (twice_i, a, g_j, g_i) in [(1, 1420.405751768e6, 2.0022838, -0.003042064), (3, 3417.341305452145e6, 2.00233113, -0.0009951414)] {
        for field in [0.0, 1e-4, 3.2289e-4, 0.05, 0.5, 8.0] {
            let system = format!(
                "  atom:\n    lower: {{nuclear_spin: {twice_i}/2, electron_total: 1/2, g_electron: {g_j}, g_nucleus: {g_i}, dipole_constant: {a:?} Hz}}\n    field: [0 T, 0 T, {field:?} T]\nbasis: eigenstates"
            );
            let top = format!("\"F={},m=0\"", (twice_i + 1) / 2);
            let (plan, found) = of(&system, &top);
            let i = f64::from(twice_i) / 2.0;
            let splitting = a * (i + 0.5);
            let x = (g_j - g_i) * BOHR_HZ_PER_TESLA * field / splitting;
            for (name, energy) in plan.document().system.names.iter().zip(&found.still.energies_hz) {
                let (f, m) = name[2..].split_once(",m=").unwrap();
                let (f, m): (f64, f64) = (f.parse().unwrap(), m.parse().unwrap());
                let wanted = if m.abs() > i {
                    splitting * i / (2.0 * i + 1.0) + m.signum() * (0.5 * g_j + i * g_i) * BOHR_HZ_PER_TESLA * field
                } else {
                    let sign = if f > i { 1.0 } else { -1.0 };
                    let root = (1.0 + 4.0 * m * x / (2.0 * i + 1.0) + x * x).sqrt();
                    -splitting / (2.0 * (2.0 * i + 1.0)) + g_i * BOHR_HZ_PER_TESLA * m * field + sign * 0.5 * splitting * root
                };
                let scale = splitting * (1.0 + x.abs());
                assert!((energy - wanted).abs() < 4e-15 * scale, "{name} at {field} T: {energy}, not {wanted}");
            }
        }
    }
}

/// E. T. Jaynes and F. W. Cummings, Proceedings of the IEEE 51, 89 (1963): on resonance the pair of n quanta is 2 g sqrt(n) apart.
#[test]
fn exact_jaynes_cummings_splitting() {
    let (gap, size) = (4.87e9, 12e6);
    let system = format!(
        "  parts:\n    atom: {{spin: {{size: 1/2, gyromagnetic: -4.87 GHz/T}}}}\n    mode: {{mode: {{frequency: {gap:?} Hz, levels: 9}}}}\n  magnetic_field: [0 T, 0 T, 1 T]\n  interactions:\n    - {{between: [atom, mode], kind: exchange, size: {size:?} Hz}}"
    );
    let (_, found) = of(&system, "{atom: -1/2, mode: 0}");
    let levels = &found.eigenvalues_hz;
    assert!((levels[0] + 0.5 * gap).abs() < 1e-3);
    for n in 1..9 {
        let (low, high) = (levels[2 * n - 1], levels[2 * n]);
        assert!((high - low - 2.0 * size * (n as f64).sqrt()).abs() < 2e-5, "{n}: {}", high - low);
    }
}

/// J. H. Van Vleck, Physical Review 74, 1168 (1948), axis along z and no field: T0 at d, T+ and T- at -d/2, S at 0, d = mu0 (g mu_B)^2
/// /(4 pi h r^3); 52.04 MHz at 1 nm for free electrons (G. Jeschke, Annual Review of Physical Chemistry 63, 419 (2012), from memory).
#[test]
fn exact_dipolar_pair_along_its_axis() {
    let system = "  parts:\n    a: {spin: {size: 1/2, g: 2.00232}}\n    b: {spin: {size: 1/2, g: 2.00232}}\n  interactions:\n    - {between: [a, b], kind: dipolar, distance: [0 nm, 0 nm, 1 nm]}";
    let (_, found) = of(system, "{a: +1/2, b: -1/2}");
    let d = DIPOLAR_HZ * (2.00232 * BOHR_HZ_PER_TESLA).powi(2) / 1e-27;
    assert!((d - 52.04e6).abs() < 5e3, "{d}");
    for (level, wanted) in found.eigenvalues_hz.iter().zip([-0.5 * d, -0.5 * d, 0.0, d]) {
        assert!((level - wanted).abs() < 1e-7, "{level} {wanted}");
    }
}

/// What is recorded does not hang on the basis it was computed in: a thermal pair of spins driven by a field, as built and in its
/// eigenstates. Basis independence is exact; what remains is the error of two runs.
#[test]
fn prop_means_do_not_hang_on_the_basis() {
    let run = |basis: &str| -> Vec<f64> {
        let text = format!(
            "format: 1\nsystem:\n  parts:\n    electron: {{spin: {{size: 1/2, g: [2.1, 2.0, 1.9]}}}}\n    nucleus: {{spin: {{size: 1, gyromagnetic: 6.5 MHz/T}}}}\n  magnetic_field: {{strength: 3 mT, tilt: 0.1 turn, turned: 20 deg}}\n  interactions:\n    - {{between: [electron, nucleus], kind: axial, along: 31 MHz, across: 22 MHz}}\n{basis}drives:\n  coil: {{acts_on: electron, field_direction: [0.3, 1, 0], reference_pair: [\"+1/2,0\", \"-1/2,0\"], form: linear, carrier: 83 MHz}}\nenvelopes:\n  flat: {{shape: square, length: 60 ns, field: 0.4 mT}}\nsequence:\n  - pulse: {{drive: coil, envelope: flat}}\nstart: {{temperature: 4 mK}}\nrecord: {{at: [60 ns], populations: [\"+1/2,0\"], mean_of: [electron.spin_x, electron.spin_z, nucleus.spin_y]}}\naccuracy: {{final: 1e-10}}\n"
        );
        let plan = plan(&text);
        let point = plan.point().unwrap();
        let outcome = compute(plan.document(), &point);
        outcome.finals.iter().filter(|f| f.name.starts_with("mean_")).map(|f| f.value).collect()
    };
    let (built, eigen) = (run(""), run("basis: eigenstates\n"));
    assert_eq!(built.len(), 3);
    for (a, b) in built.iter().zip(&eigen) {
        assert!((a - b).abs() < 4e-10, "{built:?} {eigen:?}");
    }
    assert!(built[0].abs() > 1e-4, "the drive does something: {built:?}");
}

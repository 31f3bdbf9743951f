//! Wells against closed forms and tabulated numbers. The helper reads a config, so the reading is tested with the numerics.

use num_complex::Complex64;

use super::{built, largest};
use crate::problem::Matrix;
use crate::units::constants::{ELECTRON_MASS, PLANCK};
use crate::units::{kinetic_hz_m2, HBAR_J_S, HZ_PER_EV, RAD_PER_TURN};

const MASS: f64 = 0.067 * ELECTRON_MASS;
const NM: f64 = 1e-9;

fn levels(system: &str) -> (Vec<f64>, f64) {
    let built = built(&format!("system:\n  well: {system}\n"));
    (built.energies.iter().map(|level| level.value()).collect(), built.error_hz)
}

/// Every level within its share of the largest, and within the error figure, which is no more than `figure` of the largest.
fn close(system: &str, wanted: &[f64], share: f64) {
    let (found, error) = levels(system);
    let most = wanted.iter().fold(0.0f64, |most, level| most.max(level.abs()));
    for (k, (found, wanted)) in found.iter().zip(wanted).enumerate() {
        let off = (found - wanted).abs();
        assert!(off <= share * most, "{system}: level {}: {found:e} against {wanted:e}, off by {:e}", k + 1, off / most);
        assert!(off <= error, "{system}: level {}: off by {off:e} Hz, error figure {error:e} Hz", k + 1);
    }
    assert!(error <= 1e-12 * most, "{system}: error figure {error:e} Hz of {most:e} Hz");
}

/// h^2 n^2/(8 m L^2), and <i|x|j> = -(8 L/pi^2) i j/(i^2 - j^2)^2 for odd i - j, L/2 on the diagonal (elementary; shared case of
/// the box). The functions are positive at the left wall.
#[test]
fn exact_box() {
    let length = 10.0 * NM;
    let wanted: Vec<f64> = (1..=5).map(|n| kinetic_hz_m2(MASS) * (0.5 * RAD_PER_TURN * f64::from(n) / length).powi(2)).collect();
    close("{mass: 0.067 electron_mass, layers: [{length: 10 nm, potential: 0 eV}], ends: closed, keep: 5}", &wanted, 4e-15);
    let built = built("system:\n  well: {mass: 0.067 electron_mass, layers: [{length: 10 nm, potential: 0 eV}], ends: closed, keep: 5}\n");
    let pi = 0.5 * RAD_PER_TURN;
    let (x, p, t) = (built.operator("position"), built.operator("momentum"), built.operator("kinetic"));
    for i in 1..=5i32 {
        for j in 1..=5i32 {
            let (a, b) = (f64::from(i), f64::from(j));
            let odd = (i - j) % 2 != 0;
            let x_want = match (i == j, odd) {
                (true, _) => length / 2.0,
                (_, true) => -8.0 * length / (pi * pi) * a * b / (a * a - b * b).powi(2),
                _ => 0.0,
            };
            // -i hbar integral of psi_i psi_j' = -i hbar (4/L) i j/(i^2 - j^2)
            let p_want = if odd { -HBAR_J_S * 4.0 / length * a * b / (a * a - b * b) } else { 0.0 };
            let t_want = if i == j { wanted[j as usize - 1] * PLANCK } else { 0.0 };
            let at = (i as usize - 1, j as usize - 1);
            assert!((x[at] - Complex64::from(x_want)).norm() < 3e-15 * length, "x {i} {j}: {} {x_want}", x[at]);
            assert!((p[at] - Complex64::new(0.0, p_want)).norm() < 1e-13 * HBAR_J_S / length, "p {i} {j}: {} {p_want}", p[at]);
            assert!((t[at] - Complex64::from(t_want)).norm() < 4e-14 * wanted[4] * PLANCK, "T {i} {j}");
        }
    }
}

/// p n = hbar (n pi/L) cos(n pi x/L) is no sum of five sines: |p n|^2 = (hbar n pi/L)^2, of which the five hold
/// (hbar 4/L)^2 sum over odd i - n of (i n/(i^2 - n^2))^2; x n: |x n|^2 = L^2 (1/3 - 1/(2 n^2 pi^2)).
#[test]
fn exact_what_leads_out_of_five_states_of_a_box() {
    let built = built("system:\n  well: {mass: 0.067 electron_mass, layers: [{length: 10 nm, potential: 0 eV}], ends: closed, keep: 5}\n");
    let (pi, length) = (0.5 * RAD_PER_TURN, 10.0 * NM);
    let momentum = built.leaving("momentum").expect("a well has it");
    let position = built.leaving("position").expect("a well has it");
    for n in 1..=5i32 {
        let (index, number) = (n as usize - 1, f64::from(n));
        let unit = HBAR_J_S / length;
        let all = (unit * number * pi).powi(2);
        let term = |i: i32| 4.0 * f64::from(i) * number / f64::from(i * i - n * n);
        let kept: f64 = (1..=5).filter(|i| (i - n) % 2 != 0).map(|i| (unit * term(i)).powi(2)).sum();
        let [outside, whole] = momentum[index];
        assert!((whole * whole / all - 1.0).abs() < 1e-12, "{n}: {}", whole * whole / all);
        assert!((outside * outside / (all - kept) - 1.0).abs() < 1e-11, "{n}");
        let [_, whole] = position[index];
        let square = length * length * (1.0 / 3.0 - 0.5 / (number * pi).powi(2));
        assert!((whole * whole / square - 1.0).abs() < 1e-12, "{n}");
    }
}

/// Four bound levels of a well 1 eV deep and 2 nm wide: z tan z, -z cot z at 50 digits (shared case of the square well). Walls
/// 5 nm away change the highest by exp(-2 k 5 nm) = 3e-6 of itself, so the lower three are looked at.
#[test]
fn ref_finite_square_well() {
    let built = built(
        "system:\n  well:\n    mass: 1 electron_mass\n    layers: [{length: 9 nm, potential: 1 eV}, {length: 2 nm, potential: 0 eV}, \
         {length: 9 nm, potential: 1 eV}]\n    ends: closed\n    keep: 4\n",
    );
    for (k, wanted) in [0.065_567_890_048_099_19, 0.259_061_223_460_894_4, 0.567_470_343_633_942_7].into_iter().enumerate() {
        let found = built.energies[k].value() / HZ_PER_EV;
        assert!((found / wanted - 1.0).abs() < 1e-14, "level {}: {found} {wanted}", k + 1);
    }
}

/// (n + 1/2) of the frequency; x = (lower + raise) s/sqrt 2 with s^2 = hbar/(m omega) (elementary). The sum rule is 1 for every
/// level but the last (W. Thomas 1925, F. Reiche and W. Thomas 1925, W. Kuhn 1925), where it is -n of n + 1 kept: its trace vanishes.
#[test]
fn exact_harmonic_oscillator() {
    // hbar omega = 10 meV: k x^2/2 with s = hbar/sqrt(m 10 meV)
    let energy = 0.010 * HZ_PER_EV;
    let s = (2.0 * kinetic_hz_m2(MASS) / energy).sqrt();
    let well =
        format!("{{mass: 0.067 electron_mass, potential: 5 meV * (x / {s:e} m)^2, from: -120 nm, to: 120 nm, ends: closed, keep: 8}}");
    let wanted: Vec<f64> = (0..8).map(|n| energy * (f64::from(n) + 0.5)).collect();
    close(&well, &wanted, 4e-15);
    let built = built(&format!("system:\n  well: {well}\n"));
    let x = built.operator("position");
    for n in 0..7usize {
        let wanted = s * (0.5 * (n + 1) as f64).sqrt();
        assert!((x[(n, n + 1)].norm() / wanted - 1.0).abs() < 3e-14, "{n}");
    }
    assert!(built.sum_rule[..7].iter().all(|sum| (sum - 1.0).abs() < 1e-13), "{:?}", built.sum_rule);
    assert!((built.sum_rule[7] + 7.0).abs() < 1e-12, "{:?}", built.sum_rule);
}

/// E_n = hbar w0 (n + 1/2) - (hbar w0 (n + 1/2))^2/(4 De) (P. M. Morse, Physical Review 34, 57 (1929)); the shared case of
/// the Morse levels, in 1/cm.
#[test]
fn ref_morse_levels() {
    let wanted = [
        1_481.901_590_587_584,
        4_355.476_031_806_804,
        7_108.745_486_418_093,
        9_741.709_954_421_45,
        12_254.369_435_816_878,
        14_646.723_930_604_376,
        16_918.773_438_783_94,
        19_070.517_960_355_577,
    ];
    let hz: Vec<f64> = wanted.iter().map(|level| level * crate::units::HZ_PER_CM).collect();
    let depth = 7.4e-19 / PLANCK;
    let well = format!("{{mass: 0.98 dalton, potential: {depth:e} Hz * (1 - exp(-x * 1.87e10 / 1 m))^2, from: -0.07 nm, to: 0.45 nm, ends: closed, keep: 8}}");
    close(&well, &hz, 2e-14);
}

/// -(hbar^2/2 m a^2) (3 - n)^2 in a potential of -12 hbar^2/(2 m a^2)/cosh^2(x/a) (G. Poschl and E. Teller, Zeitschrift fuer
/// Physik 83, 143 (1933), with lambda = 3). Walls 22 a away weigh exp(-44).
#[test]
fn exact_poschl_teller() {
    let unit = kinetic_hz_m2(MASS) / (5.0 * NM).powi(2);
    let well = format!(
        "{{mass: 0.067 electron_mass, potential: -12 * {unit:e} Hz / cosh(x / 5 nm)^2, from: -110 nm, to: 110 nm, ends: closed, keep: 3}}"
    );
    close(&well, &[-9.0 * unit, -4.0 * unit, -unit], 4e-15);
}

/// p^2 + x^4: 1.0603620904.. (F. T. Hioe and E. W. Montroll, Journal of Mathematical Physics 16, 1945 (1975), from memory; shared
/// case at 16 digits by an oscillator basis at 40).
#[test]
fn ref_quartic_oscillator() {
    let a = 2.0 * NM;
    let unit = kinetic_hz_m2(MASS) / (a * a);
    let wanted = [1.060_362_090_484_183, 3.799_673_029_801_394, 7.455_697_937_986_738, 11.644_745_511_378_16].map(|level| level * unit);
    let well =
        format!("{{mass: 0.067 electron_mass, potential: {unit:e} Hz * (x / 2 nm)^4, from: -12 nm, to: 12 nm, ends: closed, keep: 4}}");
    close(&well, &wanted, 4e-15);
}

/// p^2 + (x^2 - 4)^2: two doublets, by an oscillator basis of 90 and of 100 states at 30 digits (mpmath, both agree to 19). The
/// splitting of the lower one is 4e-4 of its energy (D. M. Dennison and G. E. Uhlenbeck, Physical Review 41, 313 (1932)).
#[test]
fn ref_double_well() {
    let unit = kinetic_hz_m2(MASS) / (NM * NM);
    let wanted = [3.863_669_279_306_524, 3.865_185_654_727_138, 10.873_449_795_773_883, 10.989_086_688_497_553].map(|level| level * unit);
    let well = format!(
        "{{mass: 0.067 electron_mass, potential: {unit:e} Hz * ((x / 1 nm)^2 - 4)^2, from: -7 nm, to: 7 nm, ends: closed, keep: 4}}"
    );
    close(&well, &wanted, 4e-15);
    let (found, _) = levels(&well);
    let (split, want) = ((found[1] - found[0]) / unit, 3.865_185_654_727_138_162_5 - 3.863_669_279_306_524_390_6);
    assert!((split / want - 1.0).abs() < 1e-11, "{split} {want}");
}

/// Zeros of the Airy function and of its derivative (NIST Digital Library of Mathematical Functions, 9.9): a slope above a wall; the
/// kink of |x|, whose even states have their maximum on it; the same kink as a table of straight lines.
#[test]
fn ref_slopes_and_kinks() {
    let force = 4.2e-3 * HZ_PER_EV / NM;
    let mass = 0.19 * ELECTRON_MASS;
    let unit = (kinetic_hz_m2(mass) * force * force).cbrt();
    let airy = [2.338_107_410_459_767_0, 4.087_949_444_130_970_6, 5.520_559_828_095_551].map(|zero| zero * unit);
    close("{mass: 0.19 electron_mass, potential: 4.2 meV * x / 1 nm, from: 0 nm, to: 84 nm, ends: closed, keep: 3}", &airy, 4e-15);
    let both = [1.018_792_971_647_471, 2.338_107_410_459_767_0, 3.248_197_582_179_836_5, 4.087_949_444_130_970_6].map(|zero| zero * unit);
    close("{mass: 0.19 electron_mass, potential: 4.2 meV * abs(x) / 1 nm, from: -84 nm, to: 84 nm, ends: closed, keep: 4}", &both, 4e-15);
    // the slope as a field on a charge: -charge e F x with charge -1 rises to the right for F > 0
    let field =
        "{mass: 0.19 electron_mass, layers: [{length: 84 nm, potential: 0 eV}], field: 42 kV/cm, charge: -1, ends: closed, keep: 3}";
    close(field, &airy, 4e-15);
    let (mirrored, _) = levels(
        "{mass: 0.19 electron_mass, layers: [{length: 84 nm, potential: 352.8 meV}], field: 42 kV/cm, charge: 1, ends: closed, keep: 3}",
    );
    assert!((mirrored[0] / airy[0] - 1.0).abs() < 1e-13);
}

/// Barriers of another mass: k tan(k w/2)/m_w = q/(m_b tanh(q b)) for even, -k cot(k w/2)/m_w the same for odd states, walls at the
/// outer ends (D. J. BenDaniel and C. B. Duke, Physical Review 152, 683 (1966): f and f'/mass continuous).
#[test]
fn exact_mass_step() {
    let (inner, outer, w, b, height) = (0.0665, 0.0919, 9.3 * NM, 11.0 * NM, 0.228 * HZ_PER_EV);
    let miss = |energy: f64, odd: bool| {
        let (k, q) =
            ((energy / kinetic_hz_m2(inner * ELECTRON_MASS)).sqrt(), ((height - energy) / kinetic_hz_m2(outer * ELECTRON_MASS)).sqrt());
        let (sin, cos) = (0.5 * k * w).sin_cos();
        let outside = q / (outer * (q * b).tanh());
        if odd {
            k * cos / inner + outside * sin
        } else {
            k * sin / inner - outside * cos
        }
    };
    let root = |mut low: f64, mut high: f64, odd: bool| {
        for _ in 0..200 {
            let middle = 0.5 * (low + high);
            if (miss(middle, odd) > 0.0) == (miss(low, odd) > 0.0) {
                low = middle
            } else {
                high = middle
            }
        }
        0.5 * (low + high)
    };
    let wanted = [root(5e12, 1.2e13, false), root(2.5e13, 4e13, true)];
    let layers = "[{length: 11 nm, potential: 228 meV, mass: 0.0919 electron_mass}, {length: 9.3 nm, potential: 0 meV, mass: 0.0665 electron_mass}, \
                  {length: 11 nm, potential: 228 meV, mass: 0.0919 electron_mass}]";
    close(&format!("{{layers: {layers}, ends: closed, keep: 2}}"), &wanted, 1e-14);
}

/// kappa = kappa0 (1 + g x)^2, that is a mass m0/(1 + g x)^2, has the functions (1 + g x)^(-1/2) sin(n pi ln(1 + g x)/ln(1 + g L))
/// between walls and the levels kappa0 g^2 (1/4 + (n pi/ln(1 + g L))^2) (Euler's equation).
#[test]
fn exact_mass_that_changes_along_x() {
    let (g, length) = (0.3 / NM, 8.0 * NM);
    let log = (g * length).ln_1p();
    let level = |n: i32| kinetic_hz_m2(MASS) * g * g * (0.25 + (0.5 * RAD_PER_TURN * f64::from(n) / log).powi(2));
    let well = "{mass: 0.067 electron_mass / (1 + 0.3 * x / 1 nm)^2, potential: 0 meV, from: 0 nm, to: 8 nm, ends: closed, keep: 4}";
    close(well, &[level(1), level(2), level(3), level(4)], 1e-14);
}

/// Free on a ring: (h n)^2/(2 m L^2), each but the lowest twice; momentum +-hbar 2 pi n/L between the pair. The cosine potential is
/// Mathieu's equation, whose characteristic values stand in the shared acceptance case.
#[test]
fn exact_free_ring() {
    let unit = kinetic_hz_m2(MASS) * (RAD_PER_TURN / (31.0 * NM)).powi(2);
    let well = "{mass: 0.067 electron_mass, potential: 0 meV, from: 0 nm, to: 31 nm, ends: ring, keep: 5}";
    close(well, &[0.0, unit, unit, 4.0 * unit, 4.0 * unit], 4e-15);
    let built = built(&format!("system:\n  well: {well}\noperators:\n  wave: {{derivatives: {{0: cos(1 turn * x / 31 nm)}}}}\n"));
    let p = built.operator("momentum");
    let k = HBAR_J_S * RAD_PER_TURN / (31.0 * NM);
    assert!((p[(1, 2)].norm() / k - 1.0).abs() < 1e-13 && (p[(3, 4)].norm() / (2.0 * k) - 1.0).abs() < 1e-13);
    assert!(p[(0, 1)].norm() < 1e-13 * k);
    // <1| cos |cos> = 1/sqrt 2, and the sine is not reached
    let wave = built.operator("wave");
    assert!((wave[(0, 1)].re.abs() - 0.5f64.sqrt()).abs() < 1e-13 && wave[(0, 2)].norm() < 1e-13, "{wave}");
}

/// d^2/dx^2 = (V - E)/kappa on each level, so its matrix is that of the potential less the level: for a step of the potential, where the
/// second derivative jumps. The fourth derivative is <psi''|psi''>, the third minus <psi'|psi''>: positive and antisymmetric.
#[test]
fn prop_derivatives_across_a_step() {
    let system = "system:\n  well:\n    mass: 0.067 electron_mass\n    layers: [{length: 60 nm, potential: 200 meV}, {length: 12 nm, potential: 0 meV}, \
                  {length: 60 nm, potential: 200 meV}]\n    ends: closed\n    keep: 3\noperators:\n  bend: {derivatives: {2: 1}}\n  third: {derivatives: {3: 1}}\n  \
                  fourth: {derivatives: {4: 1}}\n  slope: {derivatives: {1: 1}}\n";
    let built = built(system);
    let kappa = kinetic_hz_m2(MASS);
    let (bend, kinetic) = (built.operator("bend"), built.operator("kinetic"));
    let scaled = &kinetic * Complex64::from(-1.0 / (PLANCK * kappa));
    assert!(largest(&(&bend - scaled)) < 1e-13 * largest(&bend));
    let third = built.operator("third");
    assert!(largest(&(&third + third.transpose())) < 1e-10 * largest(&third));
    // the square of the curvature of the lowest level by hand: k^4 inside, q^4 outside
    let level = built.energies[0].value();
    let (k2, q2) = (level / kappa, (0.2 * HZ_PER_EV - level) / kappa);
    let (k, q) = (k2.sqrt(), q2.sqrt());
    let half = 6.0 * NM;
    let inside = half + (2.0 * k * half).sin() / (2.0 * k);
    let edge = (k * half).cos().powi(2) / q;
    let wanted = (k2 * k2 * inside + q2 * q2 * edge) / (inside + edge);
    let found = built.operator("fourth")[(0, 0)].re;
    assert!((found / wanted - 1.0).abs() < 1e-12, "{found} {wanted}");
}

/// In a finite basis the trace of [x, p] vanishes, though each level but the last few has i hbar.
#[test]
fn prop_the_commutator_of_position_and_momentum_has_no_trace() {
    let s = 8.0;
    let built = built(&format!(
        "system:\n  well: {{mass: 0.067 electron_mass, potential: 5 meV * (x / {s} nm)^2, from: -150 nm, to: 150 nm, ends: closed, keep: 12}}\n"
    ));
    let (x, p) = (built.operator("position"), built.operator("momentum"));
    let commutator: Matrix = &x * &p - &p * &x;
    assert!(commutator.trace().norm() < 1e-12 * HBAR_J_S);
    for n in 0..11 {
        assert!((commutator[(n, n)] - Complex64::new(0.0, HBAR_J_S)).norm() < 1e-12 * HBAR_J_S, "{n}");
    }
}

/// The change of a level falls faster than any power: at least a hundredfold for each two degrees, until rounding.
#[test]
fn prop_the_grid_converges_at_spectral_speed() {
    use crate::model::grid::{states, Mesh, Piece, Profile};
    let pieces = [Piece {
        from_m: 0.0,
        to_m: 10.0 * NM,
        potential_hz: Profile::Constant(0.0),
        tilt_hz_per_m: 0.0,
        mass_kg: Profile::Constant(MASS),
    }];
    let mesh = Mesh::coarse(&pieces, false);
    let wanted = kinetic_hz_m2(MASS) * (0.5 * RAD_PER_TURN * 10.0 / (10.0 * NM)).powi(2);
    let error = |degree: usize| {
        let found = states(&pieces, &mesh, degree, 10).expect("a box has states");
        (found.levels_hz[9] / wanted - 1.0).abs()
    };
    let errors: Vec<f64> = [4, 6, 8, 10].map(error).to_vec();
    for pair in errors.windows(2) {
        assert!(pair[1] < pair[0] / 100.0 || pair[1] < 1e-14, "{errors:?}");
    }
}

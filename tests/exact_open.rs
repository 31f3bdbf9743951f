//! Decay, dephasing, baths and mixtures against closed forms, from the text of a config to its numbers.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use nutate::outcome::Outcome;
use nutate::plan::Plan;
use rig::{at, close, document, last, run, run_set};

const PI: f64 = std::f64::consts::PI;
/// k/h, Hz per kelvin (CODATA 2022, exact by h and k).
const HZ_PER_KELVIN: f64 = 1.380_649e-23 / 6.626_070_15e-34;

fn coherence(outcome: &Outcome, pair: &str, time_s: f64) -> [f64; 2] {
    ["re", "im"].map(|part| at(outcome, &format!("coherence_{pair}_{part}"), time_s))
}

/// H. Bateman, Proceedings of the Cambridge Philosophical Society 15, 423 (1910): the chain a -> b -> c -> d with rates p, q, r.
#[test]
fn exact_cascade_of_bateman() {
    let outcome = run("format: 1
system: {levels: {a: 900 THz, b: 500 THz, c: 40 THz, d: 0 THz}}
sequence: [{wait: 3 us}]
decay:
  - {from: a, to: b, rate: 2 /us}
  - {from: b, to: c, lifetime: 0.8 us}
  - {from: c, to: d, linewidth: 60 kHz}
start: a
record: {at: [0.7 us, 3 us], populations: all}
frame: {kind: lab}
accuracy: {final: 1e-11, method: automatic}
");
    let (p, q, r) = (2.0f64, 1.25f64, 2.0 * PI * 0.06);
    for t in [0.7f64, 3.0] {
        let e = |rate: f64| (-rate * t).exp();
        let b = p / (q - p) * (e(p) - e(q));
        let c = p * q * (e(p) / ((q - p) * (r - p)) + e(q) / ((p - q) * (r - q)) + e(r) / ((p - r) * (q - r)));
        for (name, wanted) in [("a", e(p)), ("b", b), ("c", c), ("d", 1.0 - e(p) - b - c)] {
            close(at(&outcome, &format!("population_{name}"), t * 1e-6), wanted, 2e-14);
        }
    }
}

/// A. Einstein, Physikalische Zeitschrift 18, 121 (1917): in a bath each channel is in detailed balance, so the steady state has
/// Boltzmann's weights, whatever the rates; it is the thermal start at that temperature, and stays.
#[test]
fn exact_detailed_balance() {
    let text = "format: 1
numbers: {bath: 110 mK}
system: {ladder: {levels: 4, first_gap: 4.1 GHz, anharmonicity: -190 MHz, couplings_grow: sqrt}}
sequence: [{wait: 2 us}]
decay:
  - {from: 1, to: 0, lifetime: 20 us, temperature: bath}
  - {from: 2, to: 1, rate: 90 /ms, temperature: bath}
  - {from: 3, to: 1, lifetime: 7 us, temperature: bath}
  - {from: 3, to: {2: 0.8, 0: rest}, linewidth: 30 kHz, temperature: bath}
start: START
record: {populations: all, steady: true}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
";
    let energy = |n: f64| n * 4.1e9 - n * (n - 1.0) / 2.0 * 190e6;
    let weights: Vec<f64> = (0..4).map(|n| (-energy(f64::from(n)) / (0.110 * HZ_PER_KELVIN)).exp()).collect();
    let sum: f64 = weights.iter().sum();
    for start in ["steady", "{temperature: bath}"] {
        let outcome = run(&text.replace("START", start));
        for (n, weight) in weights.iter().enumerate() {
            close(last(&outcome, &format!("population_{n}")), weight / sum, 1e-13);
            close(last(&outcome, &format!("steady_population_{n}")), weight / sum, 2e-14);
        }
        assert!(outcome.steady.unwrap().unique);
    }
    // at zero temperature the bath only takes
    let outcome = run_set(&text.replace("START", "2"), &[("bath", "0 K")]);
    close(last(&outcome, "steady_population_0"), 1.0, 1e-14);
}

/// Steady state of the Bloch equations, P = (S/2)/(1 + S + (D T2)^2) with S = W^2 T1 T2 (F. Bloch, Physical Review 70, 460 (1946)): the
/// line broadens by its own power.
#[test]
fn exact_saturation_and_power_broadening() {
    for (rabi, detuning) in [(0.2f64, 0.0f64), (0.2, 0.3), (3.0, 0.3), (3.0, -2.0)] {
        let outcome = run(&format!(
            "format: 1
system: {{levels: {{down: 0 GHz, up: 3.3 GHz}}}}
drives: {{mw: {{pair: [down, up], form: one_sided, carrier: \"{detuning} MHz above gap(down, up)\"}}}}
envelopes: {{on: {{shape: square, length: 0.5 us, peak: {rabi} MHz}}}}
sequence: [{{pulse: {{drive: mw, envelope: on}}}}]
decay: [{{from: up, to: down, lifetime: 1.7 us}}]
dephasing: [{{energy_of: {{up: 1}}, total_time: 1.1 us}}]
start: down
frame: {{kind: rotating, follows: drives, drop_terms_faster_than: 1 GHz}}
record: {{populations: all, steady: true}}
accuracy: {{final: 1e-10, method: automatic}}
"
        ));
        let (w, d) = (2.0 * PI * rabi, 2.0 * PI * detuning);
        let s = w * w * 1.7 * 1.1;
        close(last(&outcome, "steady_population_up"), 0.5 * s / (1.0 + s + (d * 1.1).powi(2)), 5e-13);
    }
}

/// H. C. Torrey, Physical Review 76, 1059 (1949): on resonance, with v' = -v/T2 + W w, w' = -W v + (1 - w)/T1 (w = 1 in the lower level), the
/// pair swings by a damped cosine about its steady state; below half the difference of the rates it creeps.
#[test]
fn exact_nutation_of_torrey() {
    for rabi in [0.9f64, 0.02] {
        let outcome = run(&format!(
            "format: 1
system: {{levels: {{down: 0 GHz, up: 2 GHz}}}}
drives: {{mw: {{pair: [down, up], form: one_sided, carrier: 2 GHz}}}}
envelopes: {{on: {{shape: square, length: 4 us, peak: {rabi} MHz}}}}
sequence: [{{pulse: {{drive: mw, envelope: on}}}}]
decay: [{{from: up, to: down, lifetime: 2.2 us}}]
dephasing: [{{energy_of: {{up: 1}}, total_time: 0.6 us}}]
start: down
frame: {{kind: rotating, follows: drives, drop_terms_faster_than: 1 GHz}}
record: {{at: [0.3 us, 1 us, 4 us], populations: all}}
accuracy: {{final: 1e-11, method: automatic}}
"
        ));
        let (w0, g1, g2) = (2.0 * PI * rabi, 1.0 / 2.2, 1.0 / 0.6);
        let steady = g1 * g2 / (g1 * g2 + w0 * w0);
        let (mean, half) = (0.5 * (g1 + g2), 0.5 * (g2 - g1));
        for t in [0.3f64, 1.0, 4.0] {
            // y = w - steady obeys y'' + 2 mean y' + (g1 g2 + W^2) y = 0, y(0) = 1 - steady, y'(0) = 0
            let squared = w0 * w0 - half * half;
            let (c, s) = if squared > 0.0 {
                let k = squared.sqrt();
                ((k * t).cos(), (k * t).sin() / k)
            } else {
                let k = (-squared).sqrt();
                ((k * t).cosh(), (k * t).sinh() / k)
            };
            let w = steady + (1.0 - steady) * (-mean * t).exp() * (c + mean * s);
            close(at(&outcome, "population_up", t * 1e-6), 0.5 * (1.0 - w), 2e-13);
        }
    }
}

/// Window of transparency of a lambda system, weak probe: coherence of upper and near
/// = -(R_p/2) / (D + i g - (R_c/2)^2/(d + i s)) with D, d one- and two-photon detunings (M. Fleischhauer, A. Imamoglu, J. P. Marangos,
/// Reviews of Modern Physics 77, 633 (2005)); beyond the formula stands (R_p)^3, 1e-13 here.
#[test]
fn exact_window_of_transparency() {
    let (probe, coupling, gamma) = (1e-4f64, 2.6f64, 5.8f64);
    for two_photon in [0.0f64, 0.31, -1.7] {
        let outcome = run(&format!(
            "format: 1
numbers: {{probe: {probe} MHz, coupling: {coupling} MHz, d: {two_photon} MHz}}
system:
  hamiltonian:
    names: [near, far, upper]
    unit: MHz
    lower: mirror
    rows: [[0, 0, probe / 2], [-d, coupling / 2], [-d]]
sequence: [{{wait: 12 us}}]
decay: [{{from: upper, linewidth: {gamma} MHz, to: {{near: 0.5, far: rest}}}}]
dephasing: [{{energy_of: {{far: 1}}, linewidth: 40 kHz}}]
start: near
record: {{populations: all, coherence: [upper, near]}}
frame: {{kind: lab}}
accuracy: {{final: 1e-12, method: automatic}}
"
        ));
        // in units of MHz; the coherence of the upper pair fades at half the width, that of the lower pair at half its linewidth
        let (g, s) = (gamma / 2.0, 0.02);
        let c = num_complex::Complex64::new;
        let rho = c(probe / 2.0, 0.0) / (c(two_photon, g) - c(coupling * coupling / 4.0, 0.0) / c(two_photon, s));
        let found = coherence(&outcome, "upper_near", 12e-6);
        close(found[0], rho.re, 1e-12);
        close(found[1], rho.im, 1e-12);
    }
}

/// On two-photon resonance and without dephasing of the lower pair the steady state is dark: populations of the lower levels as
/// the squares of the other leg's Rabi frequency, nothing above (E. Arimondo, Progress in Optics 35, 257 (1996)).
#[test]
fn exact_dark_state() {
    let outcome = run("format: 1
system:
  hamiltonian:
    names: [near, far, upper]
    unit: MHz
    lower: mirror
    rows: [[0, 0, 0.6], [0, 0.8], [2.5]]
sequence: [{wait: 1 us}]
decay: [{from: upper, linewidth: 5 MHz, to: {near: 0.7, far: rest}}]
start: far
record: {populations: all, steady: true}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
");
    for (level, wanted) in [("near", 0.64), ("far", 0.36), ("upper", 0.0)] {
        close(last(&outcome, &format!("steady_population_{level}")), wanted, 1e-13);
    }
}

/// A coherence fades at 1/T2 = (rate a + rate b)/2 + (w_a - w_b)^2/pure time; a total time is that of its pair whatever the lifetimes
/// (definition; the same as A. Abragam, The Principles of Nuclear Magnetism, Oxford (1961), chapter III).
#[test]
fn exact_coherences_fade_at_their_times() {
    let text = "format: 1
system: {levels: {a: 0 kHz, b: 30 kHz, c: 75 kHz}}
operators: {slope: {rows: [[0, 0, 0], [0, 1, 0], [0, 0, 2]]}}
sequence: [{wait: 9 us}]
decay:
  - {from: c, to: {a: 0.25, b: rest}, lifetime: 17 us}
  - {from: b, to: a, lifetime: 50 us}
dephasing: DEPHASING
start: {superposition: {a: [sqrt(0.5), 0 deg], b: [sqrt(0.3), 0 deg], c: [sqrt(0.2), 0 deg]}}
record: {populations: all, coherence: [[a, b], [b, c], [a, c]]}
frame: {kind: lab}
accuracy: {final: 1e-11, method: automatic}
";
    let decay = |pair: &str| match pair {
        "a_b" => 0.5 / 50.0,
        "b_c" => 0.5 / 50.0 + 0.5 / 17.0,
        _ => 0.5 / 17.0,
    };
    let check = |dephasing: &str, pure: [f64; 3]| {
        let outcome = run(&text.replace("DEPHASING", dephasing));
        for ((pair, start, hz), pure) in [("a_b", 0.15f64, 0.03), ("b_c", 0.06, 0.045), ("a_c", 0.1, 0.075)].into_iter().zip(pure) {
            let size = start.sqrt() * (-9.0 * (decay(pair) + pure)).exp();
            let found = coherence(&outcome, pair, 9e-6);
            close(found[0], size * (2.0 * PI * hz * 9.0).cos(), 1e-13);
            close(found[1], size * (2.0 * PI * hz * 9.0).sin(), 1e-13);
        }
    };
    check("[{energy_of: {b: 1, c: 2}, pure_time: 21 us}]", [1.0 / 21.0, 1.0 / 21.0, 4.0 / 21.0]);
    check("[{energy_of: slope, linewidth: 20 kHz}]", [PI * 0.02, PI * 0.02, 4.0 * PI * 0.02]);
    let left = 1.0 / 13.0 - decay("b_c");
    check("[{energy_of: {b: 1, c: 2}, total_time: 13 us, of: [b, c]}]", [left, left, 4.0 * left]);
    // another entry on the same pair is part of the total too
    let rest = 1.0 / 13.0 - decay("b_c") - 1.0 / 100.0;
    check(
        "[{energy_of: {c: 1}, pure_time: 100 us}, {energy_of: {b: 1, c: 2}, total_time: 13 us, of: [b, c]}]",
        [rest, rest + 0.01, 4.0 * rest + 0.01],
    );
}

/// What is lost, what is outside and what is left add up; loss alone is exponential.
#[test]
fn exact_loss_to_outside() {
    let outcome = run("format: 1
system: {levels: {kept: 0 GHz, leaky: 1 GHz}}
sequence: [{wait: 3 us}]
decay: [{from: leaky, rate: 0.4 /us, to: {kept: 0.3, outside: rest}}]
start: {mix: {kept: 0.2, leaky: rest}}
record: {at: [1 us], populations: all, outside_of: [kept], lost: true}
frame: {kind: lab}
accuracy: {final: 1e-12, method: automatic}
");
    let gone = 0.8 * (1.0 - (-1.2f64).exp());
    close(last(&outcome, "lost"), 0.7 * gone, 1e-15);
    close(last(&outcome, "outside"), 0.8 - gone + 0.7 * gone, 1e-15);
    close(last(&outcome, "population_kept"), 0.2 + 0.3 * gone, 1e-15);
}

/// Amplitude damping by g = 1 - exp(-t/T1) and phase damping by a factor p of the coherence beside it, target the identity:
/// F = 1/2 + (1 - g)/6 + sqrt(1 - g) p/3, by the action on the four operators of the basis (M. A. Nielsen, Physics Letters A 303, 249
/// (2002)); no turn mends it.
#[test]
fn exact_gate_error_of_waiting() {
    let outcome = run("format: 1
system: {levels: {down: 0 MHz, up: 0 MHz}}
sequence: [{wait: 1.5 us}]
decay: [{from: up, to: down, lifetime: 11 us}]
dephasing: [{energy_of: {up: 1}, pure_time: 7 us}]
start: down
record:
  populations: all
  gate: {within: [down, up], target: {rows: [[1, 0], [0, 1]]}, free_z: true}
  error_budget: [dephasing, decay]
frame: {kind: lab}
accuracy: {final: 1e-12, method: automatic}
");
    let (left, p) = ((-1.5f64 / 11.0).exp(), (-1.5f64 / 7.0).exp());
    let error = |left: f64, p: f64| 0.5 - left / 6.0 - left.sqrt() * p / 3.0;
    close(last(&outcome, "gate_error"), error(left, p), 2e-14);
    close(last(&outcome, "gate_incoherent"), error(left, p), 2e-14);
    close(last(&outcome, "gate_coherent"), 0.0, 2e-14);
    close(last(&outcome, "gate_leakage"), 0.0, 2e-14);
    let share = |name: &str| outcome.budget.iter().find(|share| share.name == name).map(|share| share.value);
    // a run by itself has no budget: its runs are made where averages over noise are
    assert_eq!(share("decay"), None);
    let plan = Plan::new(document(BUDGET, &[]));
    let point = plan.point().unwrap();
    let outcome = nutate::noise::compute(plan.document(), &point, &nutate::noise::Draws::default()).unwrap();
    let share = |name: &str| outcome.budget.iter().find(|share| share.name == name).unwrap().value;
    close(share("decay"), error(left, 1.0), 2e-14);
    close(share("dephasing"), error(1.0, p), 2e-14);
    close(share("leakage"), 0.0, 2e-14);
    close(share("noise"), 0.0, 0.0);
    close(share("interplay"), error(left, p) - error(left, 1.0) - error(1.0, p), 2e-14);
    close(outcome.budget.iter().map(|share| share.value).sum::<f64>(), last(&outcome, "gate_error"), 2e-16);
}

const BUDGET: &str = "format: 1
system: {levels: {down: 0 MHz, up: 0 MHz}}
sequence: [{wait: 1.5 us}]
decay: [{from: up, to: down, lifetime: 11 us}]
dephasing: [{energy_of: {up: 1}, pure_time: 7 us}]
start: {mix: {down: 0.5, up: rest}}
record:
  populations: all
  gate: {within: [down, up], target: {rows: [[1, 0], [0, 1]]}, free_z: true}
  error_budget: [dephasing, decay, noise, leakage]
frame: {kind: lab}
accuracy: {final: 1e-12, method: automatic}
";

/// Rates that vanish leave the closed result (law: the master equation without jumps is the Schroedinger equation).
#[test]
fn prop_vanishing_rates_leave_the_closed_result() {
    let text = "format: 1
numbers: {slow: 1e-9 /s}
system: {ladder: {levels: 3, first_gap: 5 GHz, anharmonicity: -200 MHz, couplings_grow: sqrt}}
drives: {xy: {acts_on: ladder, reference_pair: [0, 1], form: linear, carrier: 5 GHz}}
envelopes: {bump: {shape: raised cosine, length: 11 ns, turn: 180 deg}}
sequence: [{pulse: {drive: xy, envelope: bump, turn_about: x}}]
SURROUNDINGS
start: 0
record: {populations: all, coherence: [[0, 1]], gate: {within: [0, 1], target: {turn: 180 deg, about: x}, free_z: true}}
frame: {kind: rotating, follows: drives, drop_terms_faster_than: 1 GHz}
accuracy: {final: 1e-10, method: automatic}
";
    let closed = run(&text.replace("SURROUNDINGS\n", "").replace("numbers: {slow: 1e-9 /s}\n", ""));
    let open = run(&text.replace(
        "SURROUNDINGS",
        "decay: [{from: 1, to: 0, rate: slow}, {from: 2, to: 1, rate: slow}]\ndephasing: [{energy_of: {1: 1}, pure_time: 1 / slow}]",
    ));
    for name in ["population_0", "population_1", "population_2", "coherence_0_1_re", "gate_error", "gate_leakage", "gate_coherent"] {
        close(last(&open, name), last(&closed, name), open.error_figure + closed.error_figure);
    }
}

/// A plan replays what the moved numbers touch: the same as reading the file with them (law).
#[test]
fn prop_moved_numbers_are_those_of_another_reading() {
    let text = "format: 1
numbers: {line: 4 GHz, life: 20 us, bath: 100 mK, pure: 30 us, share: 0.4, hot: 80 mK, chance: 0.9}
system: {levels: {a: 0 GHz, b: line, c: 9 GHz}}
sequence: [{wait: 5 us}]
decay:
  - {from: b, to: a, lifetime: life, temperature: bath}
  - {from: c, to: {a: share, b: rest}, linewidth: 1 turn / life / 4}
dephasing: [{energy_of: {b: share}, pure_time: pure}]
start: START
record: {populations: all, coherence: [[a, b]], shots: {number: 100, reads: {yes: [chance, 0, 0], no: [1 - chance, 1, 1]}}}
frame: {kind: lab}
accuracy: {final: 1e-10, method: automatic}
";
    let moves = [
        ("line", 5.5e9, "5.5 GHz"),
        ("life", 7e-6, "7 us"),
        ("bath", 0.2, "200 mK"),
        ("pure", 4e-6, "4 us"),
        ("share", 0.7, "0.7"),
        ("hot", 0.3, "300 mK"),
        ("chance", 0.5, "0.5"),
    ];
    for start in ["{temperature: hot}", "steady", "{mix: {a: share, c: rest}}"] {
        let text = text.replace("START", start);
        for (name, value, written) in moves {
            // "used nowhere" is a warning only
            let plan = Plan::new(document(&text, &[]));
            let mut mover = plan.mover(&[name]).unwrap();
            let moved = nutate::outcome::compute(plan.document(), mover.at(&[value]).unwrap());
            let read = run_set(&text, &[(name, written)]);
            for (a, b) in moved.finals.iter().zip(&read.finals) {
                assert_eq!(a.value, b.value, "{name} {start} {}", a.name);
            }
            assert_eq!(moved.counts, read.counts, "{name} {start}");
        }
    }
}

/// A thermal mode has p_n = m^n/(1 + m)^(n + 1) (M. Planck, Annalen der Physik 309, 553 (1901)); its mean decays as exp(-t/T1) when each rung
/// decays in proportion to its number (W. H. Louisell, Quantum Statistical Properties of Radiation, Wiley (1973)).
#[test]
fn exact_thermal_mode_cools() {
    let outcome = run("format: 1
system: {mode: {frequency: 80 MHz, levels: 16}}
sequence: [{wait: 2 us}]
decay: [{operator: lower, lifetime: 5 us}]
start: {quanta: thermal 0.1}
record: {at: [0 us, 2 us], populations: all, mean_of: quanta}
frame: {kind: lab}
accuracy: {final: 1e-11, method: automatic}
");
    for n in 0..4 {
        close(at(&outcome, &format!("population_{n}"), 0.0), 0.1f64.powi(n) / 1.1f64.powi(n + 1), 2e-16);
        let mean = 0.1 * (-0.4f64).exp();
        close(at(&outcome, &format!("population_{n}"), 2e-6), mean.powi(n) / (1.0 + mean).powi(n + 1), 1e-14);
    }
    close(last(&outcome, "mean_quanta"), 0.1 * (-0.4f64).exp(), 1e-13);
}

/// Two levels without any decay: the total time is that of the dephasing alone.
#[test]
fn regress_total_time_where_nothing_decays() {
    let outcome = run("format: 1
system: {levels: {a: 0 MHz, b: 1 MHz, c: 3 MHz}}
sequence: [{wait: 1 us}]
dephasing: [{energy_of: {c: 1}, total_time: 5 us, of: [a, c]}]
start: {superposition: {a: [sqrt(1/2), 0 deg], c: [sqrt(1/2), 0 deg]}}
record: {at: [1 us], coherence: [a, c]}
accuracy: {final: 1e-12}
");
    let [re, im] = coherence(&outcome, "a_c", 1e-6);
    close(re.hypot(im), 0.5 * (-0.2f64).exp(), 1e-14);
}

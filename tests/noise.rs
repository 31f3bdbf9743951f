//! Averages over noise, in process, against closed forms and against each other.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use std::f64::consts::{PI, TAU};

use nutate::noise::{compute, Draws};
use nutate::outcome::Outcome;
use nutate::plan::Plan;
use rig::{at, close, document, last};

/// A superposition left alone for some time while `drift` moves its gap; `noise` stands under `noise:`.
fn ramsey(wait: &str, times: &str, noise: &str, accuracy: &str) -> String {
    format!(
        "format: 1
numbers: {{drift: 0 kHz}}
system: {{levels: {{down: 0 MHz, up: drift}}}}
sequence: [{{wait: {wait}}}]
noise:
  - moves: drift
{noise}
start: {{superposition: {{down: [sqrt(1/2), 0 deg], up: [sqrt(1/2), 0 deg]}}}}
record: {{at: [{times}], populations: all, coherence: [down, up]}}
accuracy: {{final: {accuracy}, method: automatic}}
"
    )
}

fn averaged_by(text: &str, threads: usize, set: &[(&str, &str)]) -> Outcome {
    let plan = Plan::new(document(text, set));
    let point = plan.point().unwrap_or_else(|mistake| panic!("{mistake:?}\n{text}"));
    compute(plan.document(), &point, &Draws { threads, family: 0 }).unwrap_or_else(|mistake| panic!("{mistake:?}\n{text}"))
}

fn averaged(text: &str) -> Outcome {
    averaged_by(text, 2, &[])
}

/// Standard error of a final number.
fn sampling(outcome: &Outcome, name: &str) -> f64 {
    outcome.finals.iter().find(|last| last.name == name).unwrap().sampling_error.unwrap()
}

/// Coherence under a normal spread of the gap, exp(-(2 pi sigma t)^2/2)/2: the Fourier transform of a Gaussian (N. F. Ramsey,
/// Physical Review 78, 695 (1950)).
#[test]
fn exact_gaussian_decay() {
    let noise = "    spread: {sigma: 70 kHz}\n    sampling: {rule: gauss, points: 31}";
    let outcome = averaged(&ramsey("5 us", "1 us, 3 us, 5 us", noise, "1e-11"));
    assert!(outcome.reached && outcome.sampling_error().is_none());
    for t in [1e-6, 3e-6, 5e-6] {
        close(at(&outcome, "coherence_down_up_re", t), 0.5 * (-0.5 * (TAU * 70e3 * t).powi(2)).exp(), 3e-15);
    }
    close(last(&outcome, "population_up"), 0.5, 1e-15);
}

/// An uncut Lorentzian of full width w makes the coherence fall as exp(-pi w t)/2 (Fourier transform, elementary). Its tails beyond
/// the cut c hold a share of about w/(pi c), here 2e-3, and so much the numbers may differ; the error figure is of the cut one.
#[test]
fn exact_exponential_decay() {
    let noise = "    spread: {fwhm: 200 kHz, form: lorentzian, cut_at: 30 MHz}\n    sampling: {rule: gauss, points: 300}";
    let outcome = averaged(&ramsey("2 us", "0.5 us, 1 us, 2 us", noise, "1e-9"));
    assert!(outcome.reached, "{:e}", outcome.error_figure);
    for t in [0.5e-6, 1e-6, 2e-6] {
        // scaled to area 1 between the cuts
        let share = (30e6f64 / 100e3).atan() / (PI / 2.0);
        close(at(&outcome, "coherence_down_up_re", t), 0.5 * (-PI * 200e3 * t).exp() / share, 4e-5);
    }
}

/// A rule of too few nodes says how far it is off, and not more than ten times that.
#[test]
fn prop_the_error_of_a_rule_is_measured() {
    for points in 2..=16 {
        let noise = format!("    spread: {{sigma: 100 kHz}}\n    sampling: {{rule: gauss, points: {points}}}");
        let outcome = averaged(&ramsey("3.3 us", "3.3 us", &noise, "1e-12"));
        let error = (last(&outcome, "coherence_down_up_re") - 0.5 * (-0.5 * (TAU * 100e3 * 3.3e-6f64).powi(2)).exp()).abs();
        assert!(error <= outcome.error_figure, "{points} points: {error:e} against {:e}", outcome.error_figure);
        assert!(outcome.error_figure <= 10.0 * error.max(1e-13), "{points} points: {error:e} against {:e}", outcome.error_figure);
        assert_eq!(outcome.reached, outcome.error_figure <= 1e-12);
        assert_eq!(outcome.warnings().len(), usize::from(!outcome.reached));
    }
}

/// Variance of the phase of a superposition whose gap has exponential memory T: 2 (2 pi sigma T)^2 (exp(-x) - 1 + x), x = t/T
/// (J. R. Klauder and P. W. Anderson, Physical Review 125, 912 (1962); R. Kubo, J. Phys. Soc. Japan 9, 935 (1954)).
fn free_variance(sigma_hz: f64, memory_s: f64, t: f64) -> f64 {
    let x = t / memory_s;
    2.0 * (TAU * sigma_hz * memory_s).powi(2) * ((-x).exp() - 1.0 + x)
}

/// From nearly static to nearly white noise, within four standard errors of 3000 draws.
#[test]
fn exact_decay_with_memory() {
    for (memory, memory_s) in [("30 us", 30e-6), ("1 us", 1e-6), ("40 ns", 40e-9)] {
        let noise = format!(
            "    spread: {{sigma: 300 kHz}}\n    sampling: {{rule: random, draws: 3000, seed: 5}}\n    correlated: {{time: {memory}}}"
        );
        let outcome = averaged(&ramsey("1.2 us", "0.3 us, 1.2 us", &noise, "1e-3"));
        assert!(outcome.error_figure < 1e-12, "phases over whole cells are exact: {:e}", outcome.error_figure);
        for (row, t) in [(0, 0.3e-6), (1, 1.2e-6)] {
            let want = 0.5 * (-0.5 * free_variance(300e3, memory_s, t)).exp();
            let error = outcome.row_errors[row * outcome.columns.len() + 2];
            close(at(&outcome, "coherence_down_up_re", t), want, 4.0 * error);
        }
    }
}

/// Over 200 fixed seeds the true value lies within one standard error in 60 to 76 % of the cases (normal distribution: 68.3 %,
/// and 3.3 % the spread of 200 cases), for slow draws, memory, a spectrum, and a size that wanders.
#[test]
fn prop_standard_errors_mean_what_they_say() {
    let slow = 0.5 * (-0.5 * (TAU * 120e3 * 1.3e-6f64).powi(2)).exp();
    let memory = 0.5 * (-0.5 * free_variance(250e3, 0.7e-6, 1.3e-6)).exp();
    // one row of density: S = 0.02 MHz^2/MHz from 0 to 3 MHz; variance of the phase by a fine sum of S (2 sin(pi f t)/f)^2
    let steps = 100_000;
    let variance: f64 = (0..steps)
        .map(|k| {
            let f = 3e6 * (f64::from(k) + 0.5) / f64::from(steps);
            2e4 * (2.0 * (PI * f * 1.3e-6).sin() / f).powi(2) * 3e6 / f64::from(steps)
        })
        .sum();
    let spectrum = 0.5 * (-0.5 * variance).exp();
    let cases = [
        ("spread: {sigma: 120 kHz}", "", slow),
        ("spread: {sigma: 250 kHz}", "\n    correlated: {time: 0.7 us}", memory),
        ("", "correlated: {spectrum: tests/noise-flat.csv}", spectrum),
    ];
    for (spread, correlated, want) in cases {
        let mut within = 0;
        for seed in 0..200 {
            let noise = format!("    {spread}{correlated}\n    sampling: {{rule: random, draws: 150, seed: {seed}}}");
            let outcome = averaged(&ramsey("1.3 us", "1.3 us", &noise, "1e-3"));
            let apart = (last(&outcome, "coherence_down_up_re") - want).abs();
            within += u32::from(apart <= sampling(&outcome, "coherence_down_up_re"));
        }
        assert!((120..=152).contains(&within), "{within} of 200 within one standard error: {spread} {correlated}");
    }
}

/// The same numbers to the last bit with one thread, two and five, for draws and for nodes; another seed gives others.
#[test]
fn prop_threads_do_not_matter() {
    let random = |seed: u32| {
        format!("    spread: {{sigma: 90 kHz}}\n    correlated: {{time: 1 us}}\n    sampling: {{rule: random, draws: 100, seed: {seed}}}")
    };
    let gauss = "    spread: {sigma: 90 kHz}\n    sampling: {rule: gauss, points: 37}".to_string();
    for noise in [random(1), gauss] {
        let text = ramsey("2 us", "1 us, 2 us", &noise, "1e-3");
        let one = averaged_by(&text, 1, &[]);
        for threads in [2, 5] {
            let other = averaged_by(&text, threads, &[]);
            assert_eq!(one.rows, other.rows);
            assert_eq!(one.row_errors, other.row_errors);
            assert_eq!(one.finals, other.finals);
        }
    }
    let [first, second] = [1, 2].map(|seed| averaged(&ramsey("2 us", "2 us", &random(seed), "1e-3")));
    assert_ne!(first.rows, second.rows);
}

/// An instrument set by gap() misses a line that drifts; one set by the number itself goes with it. Against the average of the
/// formula of Rabi (Physical Review 51, 652 (1937)) by the same nodes, and against the run without noise.
#[test]
fn exact_gap_stays_where_it_was_set() {
    let text = |carrier: &str| {
        format!(
            "format: 1
numbers: {{line: 40 MHz, drift: 0 kHz}}
system: {{levels: {{down: 0 MHz, up: line + drift}}}}
drives: {{rf: {{pair: [down, up], form: one_sided, carrier: \"{carrier}\"}}}}
envelopes: {{flat: {{shape: square, length: 1 us, peak: 0.5 MHz}}}}
sequence: [{{pulse: {{drive: rf, envelope: flat}}}}]
noise: [{{moves: drift, spread: {{values: [-300 kHz, 200 kHz], weights: [0.25, 0.75]}}}}]
start: down
record: {{populations: all}}
frame: {{kind: rotating, follows: drives, drop_terms_faster_than: nothing}}
accuracy: {{final: 1e-10, method: automatic}}
"
        )
    };
    let rabi = |detuning: f64| {
        let w = (0.25e12 + detuning * detuning).sqrt();
        0.25e12 / (w * w) * (PI * w * 1e-6).sin().powi(2)
    };
    // a scan moves the gap, and the carrier with it
    for set in ["40 MHz", "47 MHz"] {
        let missed = averaged_by(&text("gap(down, up)"), 1, &[("line", set)]);
        close(last(&missed, "population_up"), 0.25 * rabi(-300e3) + 0.75 * rabi(200e3), 2e-14);
    }
    let followed = averaged(&text("line + drift"));
    close(last(&followed, "population_up"), 1.0, 2e-14);
}

/// A wait of uncertain length: nothing but the end is recorded. The flip angle a spreads by s_a: (1 - cos(a) exp(-s_a^2/2))/2.
#[test]
fn exact_uncertain_length() {
    let text = "format: 1
numbers: {late: 0 ns}
system: {levels: {down: 0 MHz, up: 0 MHz}}
drives: {rf: {pair: [down, up], form: direct}}
envelopes: {flat: {shape: square, length: 300 ns + late, matrix_element: 0.6 MHz}}
sequence: [{pulse: {drive: rf, envelope: flat}}]
noise: [{moves: late, spread: {fwhm: 40 ns}, sampling: {rule: gauss, points: 15}}]
start: down
record: {populations: all}
accuracy: {final: 1e-10, method: automatic}
";
    let outcome = averaged(text);
    assert_eq!(outcome.times_s.len(), 1);
    close(outcome.times_s[0], 300e-9, 1e-21);
    let (angle, spread) = (TAU * 1.2e6 * 300e-9, TAU * 1.2e6 * 40e-9 / (8.0 * std::f64::consts::LN_2).sqrt());
    close(last(&outcome, "population_up"), 0.5 * (1.0 - angle.cos() * (-0.5 * spread * spread).exp()), 2e-14);
}

/// A gain that wanders within the pulse, R (1 + g): the angle is normal with the variance of the integral of g, so that
/// P = (1 - cos(a) exp(-V/2))/2. In the laboratory frame and in a rotating one, and with nothing of the size written.
#[test]
fn exact_wandering_gain() {
    let text = |drive: &str, size: &str, frame: &str| {
        format!(
            "format: 1
numbers: {{gain: 0, stray: 0 MHz}}
system: {{levels: {{down: 0 MHz, up: 50 MHz}}}}
drives: {{rf: {{pair: [down, up], {drive}}}}}
envelopes: {{flat: {{shape: raised cosine, length: 2 us, {size}}}}}
sequence: [{{pulse: {{drive: rf, envelope: flat}}}}]
noise: [{{moves: gain, spread: {{sigma: 0.2}}, correlated: {{time: 0.4 us}}, sampling: {{rule: random, draws: 800, seed: 3}}}}]
start: down
record: {{at: [1 us], populations: all}}
frame: {{kind: {frame}}}
accuracy: {{final: 1e-3, method: automatic}}
"
        )
    };
    let rotating = "rotating, follows: drives, drop_terms_faster_than: nothing";
    // variance of the integral of shape(t) g(t): a double sum over a fine grid
    let (n, length) = (1200, 2e-6);
    let step = length / f64::from(n);
    let shape = |k: i32| 0.5 * (1.0 - (TAU * (f64::from(k) + 0.5) / f64::from(n)).cos());
    let double: f64 =
        (0..n).map(|j| (0..n).map(|k| shape(j) * shape(k) * (-f64::from((j - k).abs()) * step / 0.4e-6).exp()).sum::<f64>()).sum::<f64>()
            * step
            * step;
    let variance = |rabi: f64| (TAU * rabi * 0.2).powi(2) * double;
    let one = averaged(&text("form: one_sided, carrier: 50 MHz", "peak: 0.8 MHz * (1 + gain) + stray", rotating));
    let want = 0.5 * (1.0 - (TAU * 0.8e6 * 1e-6).cos() * (-0.5 * variance(0.8e6)).exp());
    close(last(&one, "population_up"), want, 4.0 * sampling(&one, "population_up"));
    let lab = averaged(&text("form: one_sided, carrier: 50 MHz", "peak: 0.8 MHz * (1 + gain) + stray", "lab"));
    close(last(&lab, "population_up"), last(&one, "population_up"), 1e-3);
    let nothing = averaged(&text("form: one_sided, carrier: 50 MHz", "peak: 2 MHz * gain + stray", rotating));
    let want = 0.5 * (1.0 - (-0.5 * variance(2e6)).exp());
    close(last(&nothing, "population_up"), want, 4.0 * sampling(&nothing, "population_up"));
}

/// An echo takes out what stands still and keeps what has a memory T: variance 2 (2 pi sigma T)^2 (x - 3 - exp(-x) + 4 exp(-x/2)),
/// x = t/T (J. R. Klauder and P. W. Anderson, Physical Review 125, 912 (1962)); the half turn of 0.1 ns moves less than 1e-5.
#[test]
fn exact_echo_static_and_with_memory() {
    let text = |noise: &str| {
        format!(
            "format: 1
numbers: {{drift: 0 kHz}}
system: {{levels: {{down: 0 MHz, up: drift}}}}
drives: {{kick: {{pair: [down, up], form: direct}}}}
envelopes: {{half: {{shape: square, length: 0.1 ns, matrix_element: 2500 MHz}}}}
sequence: [{{wait: 0.7 us}}, {{pulse: {{drive: kick, envelope: half}}}}, {{wait: 0.7 us}}]
noise: [{{moves: drift, spread: {{sigma: 220 kHz}}, {noise}}}]
start: {{superposition: {{down: [sqrt(1/2), 0 deg], up: [sqrt(1/2), 0 deg]}}}}
record: {{at: [1.4001 us], coherence: [down, up]}}
accuracy: {{final: 1e-4, method: automatic}}
"
        )
    };
    let still = averaged(&text("sampling: {rule: gauss, points: 25}"));
    close(last(&still, "coherence_down_up_re"), 0.5, 1e-5);
    for (memory, memory_s) in [("0.5 us", 0.5e-6), ("5 us", 5e-6)] {
        let moving = averaged(&text(&format!("correlated: {{time: {memory}}}, sampling: {{rule: random, draws: 2500, seed: 8}}")));
        let x: f64 = 1.4e-6 / memory_s;
        let variance = 2.0 * (TAU * 220e3 * memory_s).powi(2) * (x - 3.0 - (-x).exp() + 4.0 * (-0.5 * x).exp());
        let want = 0.5 * (-0.5 * variance).exp();
        close(last(&moving, "coherence_down_up_re"), want, 1e-5 + 4.0 * sampling(&moving, "coherence_down_up_re"));
    }
}

/// A gap sqrt(d^2 + x^2) with x wandering so slowly that it stands still in a shot: the average over a slow x by nodes.
#[test]
fn prop_long_memory_is_slow_noise() {
    let text = |noise: &str| {
        format!(
            "format: 1
numbers: {{x: 0.2 MHz}}
system: {{levels: {{down: 0 MHz, up: sqrt(1 MHz * 1 MHz + x * x)}}}}
sequence: [{{wait: 4 us}}]
noise: [{{moves: x, spread: {{sigma: 0.3 MHz}}, {noise}}}]
start: {{superposition: {{down: [sqrt(1/2), 0 deg], up: [sqrt(1/2), 0 deg]}}}}
record: {{at: [2 us, 4 us], coherence: [down, up]}}
accuracy: {{final: 1e-3, method: automatic}}
"
        )
    };
    let slow = averaged(&text("sampling: {rule: gauss, points: 60}"));
    let long = averaged(&text("correlated: {time: 1 s}, sampling: {rule: random, draws: 3000, seed: 12}"));
    for name in ["coherence_down_up_re", "coherence_down_up_im"] {
        close(last(&long, name), last(&slow, name), 4.0 * sampling(&long, name));
    }
}

/// Two causes on a grid, one of them drawn: the mean of the product of both transforms.
#[test]
fn exact_grid_and_draws_together() {
    let text = "format: 1
numbers: {a: 0 kHz, b: 0 kHz, c: 0 kHz}
system: {levels: {down: 0 MHz, up: a + b + c}}
sequence: [{wait: 2 us}]
noise:
  - {moves: a, spread: {sigma: 60 kHz}, sampling: {rule: gauss, points: 14}}
  - {moves: b, spread: {histogram: {edges: [-50 kHz, 70 kHz], counts: [3]}}, sampling: {rule: gauss, points: 14}}
  - {moves: c, spread: {sigma: 40 kHz}, sampling: {rule: until accurate, seed: 6}}
start: {superposition: {down: [sqrt(1/2), 0 deg], up: [sqrt(1/2), 0 deg]}}
record: {at: [2 us], coherence: [down, up]}
accuracy: {final: 5e-3, method: automatic}
";
    let outcome = averaged(text);
    assert!(outcome.reached && outcome.sampling_error().unwrap() <= 5e-3);
    let bell = |sigma: f64| (-0.5 * (TAU * sigma * 2e-6).powi(2)).exp();
    let half = PI * 120e3 * 2e-6;
    let want = 0.5 * bell(60e3) * bell(40e3) * half.sin() / half;
    let (re, im) = (want * (TAU * 10e3 * 2e-6).cos(), want * (TAU * 10e3 * 2e-6).sin());
    close(last(&outcome, "coherence_down_up_re"), re, 4.0 * sampling(&outcome, "coherence_down_up_re"));
    close(last(&outcome, "coherence_down_up_im"), im, 4.0 * sampling(&outcome, "coherence_down_up_im"));
}

/// A. Einstein, Physikalische Zeitschrift 18, 121 (1917): down goes n + 1, up n times the rate; each shot has the n of its own gap.
#[test]
fn exact_bath_looks_at_the_gap_of_the_shot() {
    let outcome = averaged(
        "format: 1
numbers: {off: 0 MHz}
system: {levels: {g: 0 MHz, e: 300 MHz + off}}
sequence: [{wait: 1 us}]
decay: [{from: e, to: g, lifetime: 0.5 us, temperature: 20 mK}]
start: g
noise: [{moves: off, spread: {values: [-200 MHz, 200 MHz], weights: [0.5, 0.5]}}]
record: {at: [1 us], populations: all}
accuracy: {final: 1e-11}
",
    );
    // k/h, Hz per kelvin (CODATA 2022, exact by h and k)
    let thermal_hz = 0.02 * 1.380_649e-23 / 6.626_070_15e-34;
    let of_gap = |gap_hz: f64| {
        let n = 1.0 / ((gap_hz / thermal_hz).exp() - 1.0);
        n / (2.0 * n + 1.0) * (1.0 - (-2.0 * (2.0 * n + 1.0)).exp())
    };
    close(last(&outcome, "population_e"), 0.5 * (of_gap(100e6) + of_gap(500e6)), 1e-14);
}

/// Where nodes further out make no run, fewer nodes measure the rule; where its own nodes do not, the message says whose doing it is.
#[test]
fn regress_nodes_that_make_no_run() {
    let config = |points: usize| {
        ramsey("pause", "pause", "    spread: {values: [0 kHz], weights: [1]}", "1e-6")
            .replace("{drift: 0 kHz}", "{drift: 0 kHz, pause: 1 us}")
            .replace(
                "  - moves: drift",
                &format!("  - {{moves: pause, spread: {{sigma: 0.2 us}}, sampling: {{rule: gauss, points: {points}}}}}\n  - moves: drift"),
            )
    };
    let outcome = averaged(&config(7));
    close(last(&outcome, "population_up"), 0.5, 1e-14);
    let plan = Plan::new(document(&config(21), &[]));
    let point = plan.point().unwrap();
    let refused = compute(plan.document(), &point, &Draws::default()).expect_err("a wait below zero");
    let text = nutate::config::messages::render(&plan.document().sources, &[refused]);
    assert!(text.contains("with pause moved by -"), "{text}");
    assert!(text.contains("Write: a narrower spread"), "{text}");
}

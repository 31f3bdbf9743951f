//! What frames leave out, against published formulas: the counter-turning half, light shifts, two-photon couplings, polarisation.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

#[path = "rig/resonance.rs"]
mod resonance;
mod rig;

use nutate::plan::Plan;
use nutate::units::sin_cos_turns;
use resonance::shift;
use rig::{at, close, document, last, run};

// F. Bloch, A. Siegert, Physical Review 57, 522 (1940): resonance at a gap R^2/(4 f) below the carrier. With b = R/2 the series of
// J. H. Shirley, Physical Review 138, B979 (1965) for the carrier, gap + b^2/gap + b^4/(4 gap^3) (from memory), solved for the gap:
// f - gap = b^2/f + 5/4 b^4/f^3. SciPy (DOP853, rtol 1e-13, minimum of the splitting by brentq) gives f - gap = 0.0101269489 and
// 0.00250784304 for R/f = 0.2 and 0.1; both leave about 1.95 b^6/f^5.
#[test]
fn exact_shift_of_bloch_and_siegert_and_its_next_order() {
    for (rabi, scipy) in [(0.2, 0.010126948895739507), (0.1, 0.002507843038863866)] {
        let (found, b) = (shift(rabi, 0.0), rabi / 2.0);
        close(found, scipy, 1e-10);
        let first = b * b;
        close(found / first, 1.0, 1.4 * b * b);
        let second = first + 1.25 * b.powi(4);
        close(found, second, 2.2 * b.powi(6));
    }
}

/// Coherences of two levels with an untouched third after a far detuned pulse with soft edges, in turns of phase: (lower, upper).
fn light_shifts(rabi_mhz: f64, detuning_mhz: f64) -> (f64, f64) {
    let outcome = run(&format!(
        "format: 1
system:
  levels: {{idle: 0 MHz, down: 300 MHz, up: 1500 MHz}}
drives:
  far: {{pair: [down, up], form: one_sided, carrier: \"{detuning_mhz} MHz above gap(down, up)\"}}
envelopes:
  soft: {{shape: cosine edges, length: 2 us, rise: 0.8 us, peak: {rabi_mhz} MHz}}
sequence:
  - pulse: {{drive: far, envelope: soft}}
start:
  superposition: {{idle: [0.6, 0 deg], down: [0.6, 0 deg], up: [0.52915026221291805, 0 deg]}}
record: {{at: [2 us], populations: all, coherence: [[idle, down], [idle, up]]}}
frame: {{kind: rotating, follows: {{idle: 0 MHz, down: 300 MHz, up: 1500 MHz}}, drop_terms_faster_than: nothing}}
accuracy: {{final: 1e-10}}
"
    ));
    let phase = |level: &str| {
        let part = |part: &str| last(&outcome, &format!("coherence_idle_{level}_{part}"));
        part("im").atan2(part("re")) / nutate::units::RAD_PER_TURN
    };
    (phase("down"), phase("up"))
}

// Second order: each level moves by R^2/(4 D), the lower one up and the upper one down for a carrier above the line (A. Kastler,
// Journal of the Optical Society of America 53, 902 (1963); C. Cohen-Tannoudji, Annales de Physique 13, 423 (1962); from memory);
// to all orders, while the state follows, by (sqrt(R^2 + D^2) - D)/2. The sign: with a carrier above, the pair in the frame has
// the upper level below by D, and levels repel.
#[test]
fn exact_light_shift_of_a_far_detuned_drive() {
    // integral of the square of the envelope: flat 0.4 us, two edges of 0.8 us with 3/8 each
    let squared_s = 0.4e-6 + 2.0 * 0.8e-6 * 3.0 / 8.0;
    let envelope = |t: f64| if t < 0.8e-6 { (1.0 - sin_cos_turns(t / 1.6e-6).1) / 2.0 } else { 1.0 };
    for (rabi, detuning) in [(6.0f64, 120.0f64), (12.0, 120.0)] {
        let (down, up) = light_shifts(rabi, detuning);
        let second = rabi * rabi / (4.0 * detuning) * 1e6 * squared_s;
        let all = |t: f64| ((rabi * envelope(t)).hypot(detuning) - detuning) / 2.0 * 1e6;
        // Simpson over one half of the pulse, doubled
        let n = 2000;
        let weight = |k: i32| if k == 0 || k == n { 1.0 } else { f64::from(2 + 2 * (k % 2)) };
        let turned = 2.0 * (0..=n).map(|k| weight(k) * all(1e-6 * f64::from(k) / f64::from(n))).sum::<f64>() * 1e-6 / f64::from(n) / 3.0;
        // c_idle c_down* turns by plus the energy of down
        close(down, turned, 2e-6);
        close(up, -turned, 2e-6);
        let ratio = (rabi / detuning).powi(2) / 4.0;
        assert!((down / second - 1.0).abs() < ratio, "{} against {second}", down);
    }
}

/// Transfer over a middle level detuned by `detuning_mhz` with equal Rabi frequencies, after one two-photon flip D/(R1 R2).
fn two_photon(ladder: bool, rabi_mhz: f64, detuning_mhz: f64) -> (f64, f64) {
    let (levels, pump, dump) = if ladder {
        (
            "{a: 0 MHz, m: 700 MHz, c: 1620 MHz}",
            "{pair: [a, m], form: one_sided, carrier: \"gap(a, m) + d\"}",
            "{pair: [m, c], form: one_sided, carrier: \"gap(m, c) - d\"}",
        )
    } else {
        (
            "{a: 0 MHz, c: 90 MHz, m: 1620 MHz}",
            "{pair: [a, m], form: one_sided, carrier: \"gap(a, m) + d\"}",
            "{pair: [c, m], form: one_sided, carrier: \"gap(c, m) + d\"}",
        )
    };
    let outcome = run(&format!(
        "format: 1
numbers: {{r: {rabi_mhz} MHz, d: {detuning_mhz} MHz}}
system:
  levels: {levels}
drives:
  one: {pump}
  two: {dump}
envelopes:
  on: {{shape: square, length: 1 turn * d / (r * r), peak: r}}
sequence:
  - together:
      - pulse: {{drive: one, envelope: on}}
      - pulse: {{drive: two, envelope: on}}
start: a
record: {{populations: all}}
frame: {{kind: rotating, follows: drives, drop_terms_faster_than: nothing}}
accuracy: {{final: 1e-11}}
"
    ));
    let column = outcome.columns.iter().position(|column| column.name == "population_m").unwrap();
    let middle = outcome.rows.iter().skip(column).step_by(outcome.columns.len()).copied().fold(0.0, f64::max);
    (last(&outcome, "population_c"), middle)
}

// Two-photon Rabi frequency R1 R2/(2 D) (E. Arimondo, Progress in Optics 35, 257 (1996), from memory): a flip takes D/(R1 R2).
// Exactly, with R1 = R2 = R: the bright state has the amplitude b = exp(i pi D t) (cos pi W t - i D/W sin pi W t), W^2 = D^2 + 2 R^2
// (I. I. Rabi, Physical Review 51, 652 (1937)), and the far level the population |b - 1|^2/4; the middle level holds at most
// R^2/W^2.
#[test]
fn exact_two_photon_flip_of_a_lambda_and_a_ladder() {
    for ladder in [false, true] {
        let mut short_of_one = Vec::new();
        for rabi in [5.0f64, 2.5] {
            let detuning = 100.3f64;
            let (far, middle) = two_photon(ladder, rabi, detuning);
            let (w, t) = ((detuning * detuning + 2.0 * rabi * rabi).sqrt(), detuning / (rabi * rabi));
            let (s, c) = sin_cos_turns(w * t / 2.0);
            let (sd, cd) = sin_cos_turns(detuning * t / 2.0);
            let b = num_complex::Complex64::new(cd, sd) * num_complex::Complex64::new(c, -detuning / w * s);
            close(far, (b - 1.0).norm_sqr() / 4.0, 1e-10);
            assert!(middle <= (rabi / w).powi(2) * (1.0 + 1e-9), "{middle}");
            short_of_one.push(1.0 - far);
            assert!(1.0 - far < 2.0 * (rabi / detuning).powi(2), "flips: {far}");
        }
        assert!(short_of_one[1] < short_of_one[0] / 2.0, "the weaker, the truer: {short_of_one:?}");
    }
}

/// An equal superposition along the axis of the drive, looked at over three turns of a carrier of 200 MHz.
fn along_the_axis(form: &str, frame: &str, rabi_mhz: f64) -> String {
    format!(
        "format: 1
system:
  levels: {{down: 0 MHz, up: 200 MHz}}
drives:
  rf: {{pair: [down, up], form: {form}, carrier: 200 MHz}}
envelopes:
  on: {{shape: square, length: 15 ns, peak: {rabi_mhz} MHz}}
sequence:
  - pulse: {{drive: rf, envelope: on}}
start:
  superposition: {{down: [0.70710678118654752, 0 deg], up: [0.70710678118654752, 0 deg]}}
record: {{every: 0.025 ns, populations: all}}
frame: {frame}
accuracy: {{final: 1e-11}}
"
    )
}

// The circular drive is its own rotating wave; the linear one ripples by twice size/turning from crest to trough, as the ledger
// predicts to first order (integral of 2 pi s sin(2 pi v t) is s/v (1 - cos)).
#[test]
fn exact_circular_against_linear_polarisation() {
    const DROP: &str = "{kind: rotating, follows: drives, drop_terms_faster_than: 50 MHz}";
    let mut deviations = Vec::new();
    for rabi in [4.0, 2.0] {
        let circular = run(&along_the_axis("one_sided", "{kind: lab}", rabi));
        let wave = run(&along_the_axis("linear", DROP, rabi));
        assert_eq!(circular.rows.len(), wave.rows.len());
        for (a, b) in circular.rows.iter().zip(&wave.rows) {
            close(*a, *b, 1e-13);
        }
        let linear = run(&along_the_axis("linear", "{kind: lab}", rabi));
        let up = linear.columns.iter().position(|column| column.name == "population_up").unwrap();
        // the first turn of the ripple, before the shift of the line adds its slow part
        let first: Vec<f64> = linear.rows.iter().skip(up).step_by(linear.columns.len()).take(101).copied().collect();
        let swing = first.iter().copied().fold(f64::MIN, f64::max) - first.iter().copied().fold(f64::MAX, f64::min);
        let plan = Plan::new(document(&along_the_axis("linear", DROP, rabi), &[]));
        let point = plan.point().unwrap();
        let dropped = point.in_frame().unwrap().rotated.ledger.dropped().first().map(|line| line.predicted_ripple().unwrap());
        let predicted = dropped.unwrap();
        close(predicted, rabi / 2.0 / 400.0, 1e-15);
        deviations.push((swing / (2.0 * predicted) - 1.0).abs());
        assert!(at(&linear, "population_up", 15e-9) < 1.0);
    }
    assert!(deviations[0] < 0.01 && deviations[1] < 0.7 * deviations[0], "{deviations:?}");
}

/// Largest difference of the final populations of the two lower levels, eliminated against full.
fn eliminated_against_full(rabi_mhz: f64) -> f64 {
    let text = |eliminate: &str| {
        format!(
            "format: 1
numbers: {{r: {rabi_mhz} MHz, d: 400 MHz}}
system:
  levels: {{near: 0 GHz, far: 5.2 GHz, upper: 380 THz}}
drives:
  pump: {{pair: [near, upper], form: one_sided, carrier: \"gap(near, upper) + d\"}}
  dump: {{pair: [far, upper], form: one_sided, carrier: \"gap(far, upper) + d\"}}
envelopes:
  hump: {{shape: sine squared, length: 2 turn * d / (r * r), peak: r}}
  less: {{shape: sine squared, length: 2 turn * d / (r * r), peak: 0.8 * r}}
sequence:
  - together:
      - pulse: {{drive: pump, envelope: hump}}
      - pulse: {{drive: dump, envelope: less, phase: 40 deg}}
start: near
record: {{populations: [near, far]}}
frame: {{kind: rotating, follows: drives, drop_terms_faster_than: nothing{eliminate}}}
accuracy: {{final: 1e-11}}
"
        )
    };
    let (gone, full) = (run(&text(", eliminate: [upper]")), run(&text("")));
    ["population_near", "population_far"].iter().map(|name| (last(&gone, name) - last(&full, name)).abs()).fold(0.0, f64::max)
}

// J. R. Schrieffer, P. A. Wolff, Physical Review 149, 491 (1966): what is left out is of fourth order in the coupling, R^4/D^3, and
// acts for a time D/R^2, so halving R divides the deviation by 4.
#[test]
fn exact_elimination_tends_to_the_full_system() {
    let found = [eliminated_against_full(40.0), eliminated_against_full(20.0)];
    assert!(found[0] < 0.02 && found[0] > 1e-6, "{found:?}");
    let ratio = found[0] / found[1];
    assert!(ratio > 3.6 && ratio < 4.6, "{found:?}");
}

/// An idle level that meets the eliminated one in the frame gave a shift that was no number.
#[test]
fn regress_an_uncoupled_level_may_meet_the_eliminated_one() {
    let text = "format: 1
system:
  levels: {near: 0 MHz, far: 64 MHz, upper: 3000 MHz, idle: -400 MHz}
drives:
  pump: {pair: [near, upper], form: one_sided, carrier: 3400 MHz}
  dump: {pair: [far, upper], form: one_sided, carrier: 3336 MHz}
envelopes:
  on: {shape: square, length: 1.4 us, peak: 40 MHz}
sequence:
  - together:
      - pulse: {drive: pump, envelope: on}
      - pulse: {drive: dump, envelope: on}
start: near
frame: {kind: rotating, follows: drives, drop_terms_faster_than: 1 GHz, eliminate: [upper]}
record: {populations: [near, far, idle]}
";
    let plan = Plan::new(document(text, &[]));
    let point = plan.point().unwrap();
    let elimination = point.in_frame().unwrap().elimination.clone().unwrap();
    // 20^2/400 MHz on both legs, nothing on the idle level
    for (level, wanted) in [(0, 1e6), (1, 1e6), (3, 0.0)] {
        let shift = elimination.shifts_hz.iter().find(|(at, _)| *at == level).unwrap().1;
        close(shift, wanted, 1e-6);
    }
}

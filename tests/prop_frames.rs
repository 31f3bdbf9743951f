//! Laws of frames, over random systems, drives and sequences: a frame in which nothing is dropped is the laboratory seen from
//! elsewhere; the ledger's prediction is the limit of weak drives; the explanation names the term that was planted.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

#[path = "rig/resonance.rs"]
mod resonance;
mod rig;

use num_complex::Complex64;
use nutate::compare::{compare, plans};
use nutate::frame::ledger::Source;
use nutate::outcome::{compute, Outcome};
use nutate::plan::Plan;
use nutate::units::cis_turns;
use proptest::prelude::*;
use rig::{close, document};

/// Random choices drawn from a list of numbers between 0 and 1, so that proptest can make a failing case smaller.
struct Draw {
    numbers: Vec<f64>,
    next: usize,
}

impl Draw {
    fn unit(&mut self) -> f64 {
        self.next += 1;
        self.numbers[(self.next - 1) % self.numbers.len()]
    }

    fn between(&mut self, from: f64, to: f64) -> f64 {
        // few digits, so that the text of a failing case can be read
        ((from + (to - from) * self.unit()) * 1e3).round() / 1e3
    }

    fn below(&mut self, count: usize) -> usize {
        ((self.unit() * count as f64) as usize).min(count - 1)
    }

    fn chance(&mut self, share: f64) -> bool {
        self.unit() < share
    }
}

/// What a random experiment may contain beside one-sided drives that tie each level once.
#[derive(Clone, Copy, PartialEq)]
enum Zoo {
    OneSided,
    Everything,
}

/// The pair of the drive that ties level k: a chain, all from the lowest, or all to the highest.
fn tie(shape: usize, k: usize, size: usize) -> [usize; 2] {
    match shape {
        0 => [k - 1, k],
        1 => [0, k],
        _ => [k - 1, size - 1],
    }
}

/// The text of a random experiment, but for its frame, and its number of levels.
fn experiment(draw: &mut Draw, zoo: Zoo) -> (String, usize) {
    let size = 2 + draw.below(3);
    let all = zoo == Zoo::Everything;
    let mut energies = vec![draw.between(-20.0, 20.0)];
    for k in 1..size {
        energies.push(energies[k - 1] + draw.between(40.0, 95.0));
    }
    let mut rows = String::new();
    for (j, energy) in energies.iter().enumerate() {
        let mut entries = vec![format!("{energy:.3}")];
        for _ in j + 1..size {
            let coupled = all && draw.chance(0.3);
            entries.push(if coupled { format!("{:.3} + {:.3}i", draw.between(-3.0, 3.0), draw.between(-3.0, 3.0)) } else { "0".into() });
        }
        rows.push_str(&format!("      - [{}]\n", entries.join(", ")));
    }
    let names = (0..size).map(|j| format!("l{j}")).collect::<Vec<_>>().join(", ");
    let mut text =
        format!("format: 1\nsystem:\n  hamiltonian:\n    names: [{names}]\n    unit: MHz\n    rows:\n{rows}    lower: mirror\ndrives:\n");
    let shape = draw.below(3);
    let mut pairs: Vec<[usize; 2]> = (1..size).map(|k| tie(shape, k, size)).collect();
    if all {
        pairs.push([0, 1]);
        pairs.push([0, size - 1]);
    }
    let mut drives = Vec::new();
    for (d, [a, b]) in pairs.iter().enumerate() {
        let form = match (all, draw.below(4)) {
            (false, _) => "one_sided",
            (true, 0) => "one_sided",
            (true, 1) if d > 0 => "direct",
            _ => "linear",
        };
        let gap = format!("gap(l{a}, l{b}) + {:.3} MHz", draw.between(-6.0, 6.0));
        let (chirped, runs_on) = (draw.chance(0.3), draw.chance(0.5));
        text.push_str(&format!("  d{d}:\n    pair: [l{a}, l{b}]\n    form: {form}\n"));
        if form != "direct" {
            if chirped {
                let reach = draw.between(-8.0, 8.0);
                text.push_str(&format!(
                    "    carrier:\n      centre: {gap}\n      instantaneous: {gap} + {reach:.3} MHz * (t / 60 ns - 1)\n"
                ));
            } else {
                text.push_str(&format!("    carrier: {gap}\n"));
            }
            text.push_str(&format!("    carrier_phase: {}\n", if runs_on { "runs on" } else { "restarts" }));
        }
        drives.push((form, chirped, runs_on, [*a, *b]));
    }
    text.push_str("envelopes:\n");
    for (d, (form, ..)) in drives.iter().enumerate() {
        let size = if *form == "direct" { "matrix_element" } else { "peak" };
        let (length, peak) = (draw.between(50.0, 140.0), draw.between(0.5, 9.0));
        let curve = ["shape: square", "shape: raised cosine", "shape: cosine edges, rise: 20 ns"][draw.below(3)];
        text.push_str(&format!("  e{d}: {{{curve}, length: {length:.3} ns, {size}: {peak:.3} MHz}}\n"));
    }
    text.push_str("sequence:\n  - together:\n");
    let pulse = |draw: &mut Draw, d: usize, drives: &[(&str, bool, bool, [usize; 2])]| {
        let phase = if drives[d].0 == "direct" { String::new() } else { format!(", phase: {:.3} turn", draw.between(-0.5, 0.5)) };
        format!("pulse: {{drive: d{d}, envelope: e{d}{phase}}}\n")
    };
    for d in 0..drives.len() {
        text.push_str(&format!("      - {}", pulse(draw, d, &drives)));
    }
    text.push_str(&format!("  - wait: {:.3} ns\n", draw.between(5.0, 80.0)));
    text.push_str(&format!("  - turn_frame: {{drive: d0, angle: {:.3} turn}}\n", draw.between(-0.5, 0.5)));
    text.push_str(&format!("  - {}", pulse(draw, 0, &drives)));
    let (_, chirped, runs_on, [a, b]) = drives[0];
    if !chirped {
        let word = if draw.chance(0.5) { "continues" } else { "as if always on" };
        let phase = if runs_on { format!("      phase: {word}\n") } else { String::new() };
        text.push_str(&format!(
            "  - set_carrier:\n      drive: d0\n      carrier: gap(l{a}, l{b}) + {:.3} MHz\n{phase}",
            draw.between(-9.0, 9.0)
        ));
    }
    text.push_str("  - wait: 13 ns\n  - together:\n");
    text.push_str(&format!("      - {}", pulse(draw, 0, &drives)));
    let last = drives.len() - 1;
    if last > 0 {
        text.push_str(&format!("      - {}", pulse(draw, last, &drives)));
    }
    text.push_str("start: l0\nrecord: {every: 20 ns, populations: all}\naccuracy: {final: 1e-10}\n");
    (text, size)
}

/// The outcome, and the density matrix at the end as the laboratory sees it.
fn seen_from_the_laboratory(text: &str) -> (Outcome, Vec<Complex64>) {
    let plan = Plan::new(document(text, &[]));
    let point = plan.point().unwrap_or_else(|mistake| panic!("{mistake:?}\n{text}"));
    let outcome = compute(plan.document(), &point);
    assert!(outcome.reached, "the figure is {:e}\n{text}", outcome.error_figure);
    let state: Vec<Complex64> = outcome
        .end_state
        .amplitudes()
        .expect("a closed system ends pure")
        .iter()
        .zip(point.end_turns())
        .map(|(c, turns)| c * cis_turns(-turns))
        .collect();
    let entries = state.iter().flat_map(|a| state.iter().map(move |b| a * b.conj())).collect();
    (outcome, entries)
}

/// Populations at every moment and coherences at the end agree within the error figures of both.
fn same(text: &str, frame: &str) {
    let (lab, lab_end) = seen_from_the_laboratory(&format!("{text}frame: {{kind: lab}}\n"));
    let (turned, turned_end) = seen_from_the_laboratory(&format!("{text}frame: {frame}\n"));
    let bound = lab.error_figure + turned.error_figure + 1e-13;
    let rows = lab.rows.iter().zip(&turned.rows).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
    assert!(rows <= bound, "populations differ by {rows:e}, {bound:e} allowed, in {frame}\n{text}");
    // the figure answers for what is recorded; a coherence moves by the root of what a population near 0 or 1 moves
    let ends = lab_end.iter().zip(&turned_end).map(|(a, b)| (a - b).norm()).fold(0.0, f64::max);
    assert!(ends <= 10.0 * bound + 1e-11, "coherences differ by {ends:e} in {frame}\n{text}");
}

const NOTHING: &str = "{kind: rotating, follows: drives, drop_terms_faster_than: nothing}";

fn choices() -> impl Strategy<Value = Vec<f64>> {
    proptest::collection::vec(0.0..1.0f64, 97)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 24, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn prop_one_sided_drives_stand_still_exactly(numbers in choices()) {
        let (text, _) = experiment(&mut Draw { numbers, next: 0 }, Zoo::OneSided);
        same(&text, NOTHING);
        // the terms stand still in the frame, so no limit drops any; a carrier set anew keeps its own frame
        same(&text, "{kind: rotating, follows: drives, drop_terms_faster_than: 1 MHz}");
    }

    #[test]
    fn prop_a_frame_that_drops_nothing_is_the_laboratory(numbers in choices()) {
        let mut draw = Draw { numbers, next: 0 };
        let (text, size) = experiment(&mut draw, Zoo::Everything);
        same(&text, NOTHING);
        let table: Vec<String> = (0..size).map(|j| format!("l{j}: {:.3} MHz", draw.between(-150.0, 250.0))).collect();
        same(&text, &format!("{{kind: rotating, follows: {{{}}}, drop_terms_faster_than: nothing}}", table.join(", ")));
    }

    #[test]
    fn prop_the_explanation_names_the_planted_term(planted in 1..5usize, phase in -0.5..0.5f64, away in 25.0..40.0f64) {
        let mut text = String::from("format: 1\nsystem:\n  levels: {down: 0 MHz, up: 900 MHz}\ndrives:\n  main: {pair: [down, up], form: one_sided, carrier: 900 MHz}\n");
        let tones = [away, -away - 3.0, 1.7 * away, -1.9 * away];
        for (k, tone) in tones.iter().enumerate() {
            text.push_str(&format!("  spur{}: {{pair: [down, up], form: one_sided, carrier: {:.3} MHz}}\n", k + 1, 900.0 + tone));
        }
        text.push_str("envelopes:\n  on: {shape: square, length: 280 ns, peak: 2 MHz}\n  weak: {shape: square, length: 280 ns, peak: 0.15 MHz}\n  strong: {shape: square, length: 280 ns, peak: 6 MHz}\nsequence:\n  - together:\n      - pulse: {drive: main, envelope: on}\n");
        for k in 1..5 {
            let envelope = if k == planted { "strong" } else { "weak" };
            text.push_str(&format!("      - pulse: {{drive: spur{k}, envelope: {envelope}, phase: {phase:.3} turn}}\n"));
        }
        let frame = |limit: &str| format!("{{kind: rotating, follows: {{down: 0 MHz, up: 900 MHz}}, drop_terms_faster_than: {limit}}}");
        text.push_str(&format!("start: down\nrecord: {{at: [280 ns], populations: all, bloch: [down, up]}}\nframe: {}\ncompare:\n  tolerance: 1e-3\n  variants:\n    - {{name: slow ones, frame: {}}}\n", frame("nothing"), frame("10 MHz")));
        let document = document(&text, &[]);
        let asked = document.compare.clone().unwrap();
        let all = plans(&document, &asked).ok().unwrap();
        let comparison = compare(&asked, all).ok().unwrap();
        let held = &comparison.held[0];
        prop_assert_eq!(held.explanation.len(), 4);
        prop_assert_eq!(held.explanation[0].line.key.source, Source::Drive(planted), "{}", text);
        prop_assert!(held.explanation[1].remains.iter().map(|(_, left)| left.abs()).fold(0.0, f64::max) > 1e-3);
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 3, failure_persistence: None, ..ProptestConfig::default() })]

    // The ledger predicts to second order; what it leaves out is of fourth order, so relative to the shift it falls with the square.
    #[test]
    fn prop_the_predicted_shift_is_the_limit_of_weak_drives(rabi in 0.16..0.4f64, phase in -0.5..0.5f64) {
        let off = |rabi: f64| {
            let text = format!("format: 1\nsystem:\n  levels: {{down: 0 MHz, up: 10 MHz}}\ndrives:\n  rf: {{pair: [down, up], form: linear, carrier: 10 MHz}}\nenvelopes:\n  on: {{shape: square, length: 1 us, peak: {rabi:.17} * 10 MHz}}\nsequence:\n  - pulse: {{drive: rf, envelope: on}}\nstart: down\nframe: {{kind: rotating, follows: drives, drop_terms_faster_than: 5 MHz}}\n");
            let plan = Plan::new(document(&text, &[]));
            let point = plan.point().unwrap();
            let sums = point.in_frame().unwrap().rotated.ledger.by_pair();
            assert_eq!(sums.len(), 1);
            // the gap moves by twice what each level moves
            let predicted = 2.0 * sums[0].shift_hz / 10e6;
            close(predicted, rabi * rabi / 4.0, 1e-14);
            resonance::shift(rabi, phase) / predicted - 1.0
        };
        let (strong, weak) = (off(rabi), off(rabi / 2.0));
        prop_assert!(weak.abs() < strong.abs() / 3.9, "{strong} at {rabi}, {weak} at half of it");
    }
}

/// A lowering operator on a ladder whose gaps differ beats in a table frame: nothing of it may show in the populations (C.
/// Cohen-Tannoudji, J. Dupont-Roc, G. Grynberg, Atom-Photon Interactions, Wiley (1992), chapter IV, for what dropping it would do).
#[test]
fn prop_beats_of_a_jump_operator_do_not_depend_on_the_frame() {
    let text = |frame: &str| {
        format!(
            "format: 1\nsystem:\n  levels: {{a: 0 MHz, b: 7 MHz, c: 13 MHz}}\noperators:\n  lower:\n    rows: [[0, 1, 0], [0, 0, sqrt(2)], [0, 0, 0]]\n\
             drives:\n  rf: {{pair: [b, c], form: one_sided, carrier: 6 MHz}}\nenvelopes:\n  hump: {{shape: sine squared, length: 1 us, peak: 1.3 MHz}}\n\
             sequence:\n  - pulse: {{drive: rf, envelope: hump}}\ndecay:\n  - {{operator: lower, lifetime: 0.7 us}}\n\
             start: {{superposition: {{a: [0.6, 0 deg], b: [0.48, 0 deg], c: [0.64, 40 deg]}}}}\nframe: {frame}\n\
             record: {{at: [0.3 us, 1 us], populations: all, coherence: [[a, b]]}}\naccuracy: {{final: 1e-9}}\n"
        )
    };
    let run = |frame: &str| {
        let plan = Plan::new(document(&text(frame), &[]));
        let point = plan.point().unwrap_or_else(|mistake| panic!("{mistake:?}"));
        (compute(plan.document(), &point), point.warnings.len())
    };
    let (lab, _) = run("{kind: lab}");
    let table = "follows: {a: 0 MHz, b: 6.5 MHz, c: 12.5 MHz}";
    let (kept, _) = run(&format!("{{kind: rotating, {table}, drop_terms_faster_than: nothing}}"));
    // populations, and how large the coherence is; its phase belongs to the frame
    let seen = |outcome: &Outcome| -> Vec<f64> {
        outcome.rows.chunks_exact(5).flat_map(|row| [row[0], row[1], row[2], row[3].hypot(row[4])]).collect()
    };
    let apart = |other: &Outcome| seen(&lab).iter().zip(seen(other)).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
    assert!(apart(&kept) <= 2.0 * (lab.error_figure + kept.error_figure), "{:e} apart", apart(&kept));
    // b and c turn apart 0.5 MHz slower than a and b: faster than the limit, so the beat is dropped, and said to be; the drive stands
    let (dropped, warnings) = run(&format!("{{kind: rotating, {table}, drop_terms_faster_than: 0.1 MHz}}"));
    assert!(warnings == 1 && apart(&dropped) > 1e-2, "{warnings} warnings, {:e} apart", apart(&dropped));
}

//! What each method costs: problems that suit it, solved at both resolutions with their error figure, as `nutate run` does.
//!
//! `cargo bench --bench methods` prints for each problem and method the median time of a solution over batches, its steps and the time
//! of one, and the error figure. Steps and products are frozen by `propagate/tests/speed.rs`; this is their price.

use std::error::Error;
use std::hint::black_box;
use std::path::Path;
use std::time::Instant;

use nutate::config::document::read_str;
use nutate::outcome::compute;
use nutate::plan::Plan;

/// A problem in words, its config without `accuracy`, and the methods that it is solved by.
struct Case {
    name: &'static str,
    config: String,
    methods: &'static [&'static str],
}

/// A ladder in the laboratory frame under a linear drive of 98 ns.
fn ladder(levels: usize) -> String {
    format!(
        "frame: {{kind: lab}}\nsystem: {{ladder: {{levels: {levels}, first_gap: 5.02 GHz, anharmonicity: -2.47 MHz, couplings_grow: sqrt}}}}\n\
         drives: {{line: {{acts_on: ladder, reference_pair: [0, 1], carrier: 5.02 GHz}}}}\n\
         envelopes: {{pulse: {{shape: raised cosine, length: 98 ns, peak: 10 MHz}}}}\n\
         sequence: [{{pulse: {{drive: line, envelope: pulse, phase: 0.4 rad}}}}]\nrecord: {{at: 98 ns}}\n"
    )
}

/// Three levels in their turning frame, one coupling under `envelope`, the rest of the config in `more`.
fn turning(envelope: &str, more: &str) -> String {
    format!(
        "frame: {{kind: lab}}\nsystem: {{levels: {{0: 0 MHz, 1: 1.3 MHz, 2: -250 MHz}}}}\n\
         operators: {{x: {{rows: [[0, 1, 0], [1, 0, sqrt(2)], [0, sqrt(2), 0]]}}, down: {{rows: [[0, 1, 0], [0, 0, sqrt(2)], [0, 0, 0]]}}}}\n\
         drives: {{line: {{operator: x, form: direct}}}}\nenvelopes: {{pulse: {{{envelope}, matrix_element: 10 MHz}}}}\n\
         sequence: [{{pulse: {{drive: line, envelope: pulse}}}}]\nrecord: {{at: 100 ns}}\n{more}"
    )
}

fn cases() -> Vec<Case> {
    let held: Vec<String> = (0..1000).map(|k| format!("{:.6}", (0.02 * f64::from(k) - 10.0).abs().cos().abs())).collect();
    let held = format!("shape: samples, samples: [{}], between: hold, length: 100 ns", held.join(", "));
    let bell = "shape: gaussian, field_sigma: 20 ns, cut_at: 50 ns, edge: step";
    let decay = "decay: [{operator: down, lifetime: 20 us}]\n";
    vec![
        Case { name: "3 levels, 490 periods", config: ladder(3), methods: &["fast carrier", "collocation", "geometric", "smooth"] },
        Case { name: "16 levels, 490 periods", config: ladder(16), methods: &["fast carrier", "smooth"] },
        Case { name: "64 levels, 490 periods", config: ladder(64), methods: &["fast carrier"] },
        Case { name: "3 levels, smooth pulse", config: turning(bell, ""), methods: &["collocation", "geometric", "smooth"] },
        Case { name: "3 levels, 1000 slices", config: turning(&held, ""), methods: &["constant steps"] },
        Case { name: "3 levels that decay, smooth", config: turning(bell, decay), methods: &["smooth", "geometric"] },
        Case { name: "3 levels that decay, 1000 slices", config: turning(&held, decay), methods: &["constant steps"] },
    ]
}

/// Median of the times of 9 batches of about 50 ms, in us for each call.
fn median_us(mut call: impl FnMut()) -> f64 {
    let clock = Instant::now();
    call();
    let calls = (0.05 / clock.elapsed().as_secs_f64()).ceil().clamp(1.0, 1e4) as u32;
    let mut times: Vec<f64> = (0..9)
        .map(|_| {
            let clock = Instant::now();
            (0..calls).for_each(|_| call());
            clock.elapsed().as_secs_f64() * 1e6 / f64::from(calls)
        })
        .collect();
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}

fn main() -> Result<(), Box<dyn Error>> {
    println!("{:<34} {:<16} {:>10} {:>8} {:>12} {:>10}", "problem", "method", "median/us", "steps", "us per step", "figure");
    for case in cases() {
        for method in case.methods {
            let text = format!("format: 1\naccuracy: {{final: 1e-8, method: {method}}}\nstart: 0\n{}", case.config);
            let document = read_str("methods.yaml", &text, Path::new("."), &[]).map_err(|refusal| refusal.text())?;
            let plan = Plan::new(document);
            let point = plan.point().map_err(|mistake| format!("{mistake:?}"))?;
            let outcome = compute(plan.document(), &point);
            let us = median_us(|| {
                black_box(compute(plan.document(), &point));
            });
            println!(
                "{:<34} {:<16} {us:>10.1} {:>8} {:>12.3} {:>10.1e}",
                case.name,
                outcome.method.word(),
                outcome.steps,
                us / outcome.steps.max(1) as f64,
                outcome.error_figure
            );
        }
    }
    Ok(())
}

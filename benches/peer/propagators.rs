//! W4: two ladders of four levels, propagators of many sets of controls.

use std::error::Error;
use std::fmt::Write;
use std::path::Path;

use nutate::bundle::{Layout, Worker};
use nutate::config::document::read_str;
use nutate::plan::Plan;
use nutate::propagate::lanes::Width;

use crate::numbers::{written, Numbers};
use crate::Answer;

/// Levels of each ladder.
const LEVELS: usize = 4;

/// A matrix of both ladders as rows of text.
fn rows(entry: impl Fn(usize, usize) -> String) -> String {
    let size = LEVELS * LEVELS;
    let row = |j: usize| format!("[{}]", (0..size).map(|k| entry(j, k)).collect::<Vec<_>>().join(", "));
    format!("[{}]", (0..size).map(row).collect::<Vec<_>>().join(", "))
}

/// Entry of a + a' of one ladder between levels j and k.
fn step(j: usize, k: usize) -> f64 {
    if j.abs_diff(k) == 1 {
        (j.max(k) as f64).sqrt()
    } else {
        0.0
    }
}

pub fn propagators(numbers: &Numbers, _cores: usize) -> Result<Answer, Box<dyn Error>> {
    let (length, count, sines) = (numbers.of("duration_ns"), numbers.count("n_slices"), numbers.count("n_sines"));
    let text = config(numbers, length, count, sines)?;
    let document = read_str("peer", &text, Path::new(""), &[]).map_err(|refusal| refusal.text())?;
    let plan = Plan::new(document);
    let names: Vec<String> = (0..2 * sines).map(|k| format!("c{k}")).collect();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let points: Vec<Vec<f64>> = numbers.list("coeff_mhz").chunks(2 * sines).map(|set| set.iter().map(|mhz| mhz * 1e6).collect()).collect();
    let bounds: Vec<(f64, f64)> = (0..2 * sines)
        .map(|k| points.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), point| (low.min(point[k]), high.max(point[k]))))
        .collect();
    let layout = Layout::new(&plan, &names, &bounds, &points[..points.len().min(2)], Width::chosen())?;
    if std::env::var_os("PEER_WORDS").is_some() {
        eprintln!("{}", layout.words());
    }
    let mut worker = Worker::new(&plan, &names, &layout)?;
    let mut outputs = Vec::new();
    let each = 2 * LEVELS.pow(4);
    for group in points.chunks(8) {
        let numbers = worker.numbers(&layout, group, false)?;
        // the propagator comes after what is recorded of the state
        outputs.extend(numbers.chunks_exact(numbers.len() / group.len()).flat_map(|of| &of[of.len() - each..]));
    }
    Ok(outputs.into())
}

fn config(numbers: &Numbers, length: f64, count: usize, sines: usize) -> Result<String, Box<dyn Error>> {
    let size = LEVELS * LEVELS;
    let of = |j: usize| [j / LEVELS, j % LEVELS];
    let energy = |n: usize, which: &str| {
        let (det, anh) = (numbers.of(&format!("det_{which}_mhz")), numbers.of(&format!("anh_{which}_mhz")));
        det * n as f64 + anh / 2.0 * (n * n.saturating_sub(1)) as f64
    };
    let exchange = numbers.of("exchange_mhz");
    let statics = rows(|j, k| {
        let ([a, b], [c, d]) = (of(j), of(k));
        if j == k {
            return format!("{:e}", energy(a, "a") + energy(b, "b"));
        }
        let moves = (a + 1 == c && b == d + 1) || (a == c + 1 && b + 1 == d);
        if moves {
            format!("{:e}", exchange * step(a, c) * step(b, d))
        } else {
            "0".to_string()
        }
    });
    let names: Vec<String> = (0..size).map(|j| format!("{}{}", of(j)[0], of(j)[1])).collect();
    let mut text = "format: 1\nnumbers:\n".to_string();
    (0..2 * sines).try_for_each(|k| writeln!(text, "  c{k}: 1 MHz"))?;
    write!(text, "system:\n  hamiltonian: {{names: [{}], unit: MHz, rows: {statics}}}\noperators:\n", names.join(", "))?;
    for (ladder, word) in ["a", "b"].iter().enumerate() {
        let entry = |j: usize, k: usize| {
            let (p, q) = (of(j), of(k));
            let still = p[1 - ladder] == q[1 - ladder];
            if still {
                format!("{:e}", step(p[ladder], q[ladder]))
            } else {
                "0".to_string()
            }
        };
        writeln!(text, "  {word}: {{rows: {}}}", rows(entry))?;
    }
    text.push_str("drives:\n");
    for k in 0..2 * sines {
        let (operator, second) = if k < sines { ("a", "10") } else { ("b", "01") };
        writeln!(text, "  d{k}: {{operator: {operator}, reference_pair: [00, {second}], form: direct}}")?;
    }
    text.push_str("envelopes:\n");
    for m in 1..=sines {
        let sine = |k: usize| (m as f64 * std::f64::consts::PI * (k as f64 + 0.5) / count as f64).sin();
        for k in [m - 1, sines + m - 1] {
            let samples = written((0..count).map(sine));
            writeln!(text, "  e{k}: {{shape: samples, samples: {samples}, between: hold, length: {length} ns, matrix_element: c{k} / 2}}")?;
        }
    }
    text.push_str("sequence:\n  - together:\n");
    (0..2 * sines).try_for_each(|k| writeln!(text, "    - pulse: {{drive: d{k}, envelope: e{k}}}"))?;
    write!(text, "start: 00\nrecord: {{at: [{length} ns], propagator: true}}\naccuracy: {{final: {:e}}}\n", numbers.of("asked_error"))?;
    Ok(text)
}

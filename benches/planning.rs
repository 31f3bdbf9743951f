//! What planning one point costs: some named numbers get other values, and only what depends on them is replayed.
//!
//! `cargo bench --bench planning` prints, for each worked config, the median time of a replayed point over batches, beside that of
//! planning the same file anew and of reading it anew.

use std::hint::black_box;
use std::path::Path;
use std::time::Instant;

use nutate::config::document::read;
use nutate::plan::Plan;

/// Worked config and the numbers that are moved.
const CASES: [(&str, &[&str]); 5] = [
    ("configs/flip.yaml", &["miss"]),
    ("configs/flip.yaml", &["miss", "rabi"]),
    ("configs/leakage.yaml", &["slope_factor"]),
    ("configs/crossing.yaml", &["coupling"]),
    ("configs/echo.yaml", &["miss"]),
];

/// Median of the times of 15 batches, in ns for each call.
fn median_ns(calls: u32, mut call: impl FnMut(u32)) -> f64 {
    let mut times: Vec<f64> = (0..15)
        .map(|_| {
            let clock = Instant::now();
            for k in 0..calls {
                call(k);
            }
            clock.elapsed().as_secs_f64() * 1e9 / f64::from(calls)
        })
        .collect();
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}

fn main() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    println!("{:<24} {:<12} {:>12} {:>12} {:>12} {:>9}", "config", "moved", "replayed/us", "planned/us", "read/us", "segments");
    for (file, names) in CASES {
        let path = root.join(file);
        let document = match read(&path, &[]) {
            Ok(document) => document,
            Err(refusal) => {
                println!("{file}: {}", refusal.text());
                continue;
            }
        };
        let plan = Plan::new(document);
        let mut mover = match plan.mover(names) {
            Ok(mover) => mover,
            Err(mistake) => {
                println!("{file}: {mistake:?}");
                continue;
            }
        };
        let registers: Vec<usize> = names
            .iter()
            .filter_map(|name| plan.document().numbers.iter().find(|number| number.name == *name))
            .map(|n| n.register as usize)
            .collect();
        let base: Vec<f64> = registers.iter().map(|register| mover.point().values[*register]).collect();
        let mut moved = base.clone();
        let replayed = median_ns(400, |k| {
            for (value, base) in moved.iter_mut().zip(&base) {
                *value = base * (1.0 + 1e-6 * f64::from(k));
            }
            black_box(mover.at(&moved).is_ok());
        });
        let planned = median_ns(50, |_| {
            black_box(plan.point().is_ok());
        });
        let reread = median_ns(20, |_| {
            black_box(read(&path, &[]).is_ok());
        });
        let segments = mover.point().problem().segments.len();
        println!(
            "{file:<24} {:<12} {:>12.2} {:>12.2} {:>12.1} {segments:>9}",
            names.join(" "),
            replayed * 1e-3,
            planned * 1e-3,
            reread * 1e-3
        );
    }
}

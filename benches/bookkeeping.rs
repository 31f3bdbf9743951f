//! What a scan costs beside its points: storing a million rows, finding them again, summing them up and writing the table.
//!
//! `cargo bench --bench bookkeeping` prints each in microseconds a point, on one core, and their sum over a point of 10 us.

use std::path::Path;
use std::time::Instant;

use nutate::config::document::read_str;
use nutate::report::scan_csv;
use nutate::scan::begin::{head, order};
use nutate::scan::evaluate::Evaluator;
use nutate::scan::row::{Found, Row};
use nutate::scan::setup::Setup;
use nutate::scan::shelf::Shelf;
use nutate::scan::store::{inspect, Keep, Part, Store};
use nutate::scan::summary::Summary;

const CONFIG: &str = "\
format: 1
numbers: {offset: 0 MHz, length: 0.37 us, peak: 2 MHz}
system:
  levels: {down: 0 MHz, up: -offset}
drives:
  rf: {pair: [down, up], form: direct}
envelopes:
  on: {shape: square, length: length, matrix_element: peak / 2}
sequence:
  - pulse: {drive: rf, envelope: on}
start: down
record:
  final: {population: up}
scan:
  axes:
    - {number: offset, from: -2 MHz, to: 2 MHz, points: 1000}
    - {number: length, from: 0.1 us, to: 1.2 us, points: 1000}
";

/// A point as the aim states it, us.
const POINT_US: f64 = 10.0;
/// Rows of a frame: what 30 ms of such points are.
const CHUNK: u64 = 3000;

fn main() {
    let Ok(document) = read_str("bench.yaml", CONFIG, Path::new("."), &[]) else { return println!("the config is refused") };
    let Ok(setup) = Setup::new(document) else { return println!("the scan is refused") };
    let points = setup.grid.points();
    let mut evaluator = Evaluator::new(&setup, 1);
    let clock = Instant::now();
    let sample = 2000;
    for k in 0..sample {
        std::hint::black_box(evaluator.alone(k * 499 % points));
    }
    println!("a point of this config, at two resolutions: {:.2} us", clock.elapsed().as_secs_f64() * 1e6 / sample as f64);

    let Ok(folder) = tempfile::tempdir() else { return println!("no folder can be made") };
    let path = folder.path().join(Part::WHOLE.file_name(0));
    let Ok((mut store, _)) = Store::open(&path, &head(&setup, "bench", Part::WHOLE)) else { return println!("no store can be made") };
    let mut sum = 0.0;
    let mut step = |name: &str, seconds: f64| {
        let each = seconds * 1e6 / points as f64;
        sum += each;
        println!("{name:<44} {each:.3} us a point");
    };
    let clock = Instant::now();
    let all = order(&setup, Part::WHOLE);
    let mut rows = Vec::new();
    for point in all.all() {
        rows.push(Row { point, found: Found::Numbers { numbers: vec![1.0 / (point + 1) as f64], checked: None, trace: None } });
        if rows.len() as u64 == CHUNK {
            if store.append(&rows).is_err() {
                return println!("the store cannot be written");
            }
            rows.clear();
        }
    }
    if store.append(&rows).and_then(|()| store.sync()).is_err() {
        return println!("the store cannot be written");
    }
    step("handing out points, storing rows, one sync", clock.elapsed().as_secs_f64());
    let clock = Instant::now();
    let Ok(Some(content)) = inspect(&path) else { return println!("the store cannot be read") };
    let shelf = Shelf::new(&[content], points);
    step("finding them again", clock.elapsed().as_secs_f64());
    let clock = Instant::now();
    let Ok(summary) = Summary::of(&setup, &shelf) else { return println!("the rows cannot be read") };
    step("counts, extremes", clock.elapsed().as_secs_f64());
    let clock = Instant::now();
    if scan_csv::write(&setup, &shelf, &mut std::io::sink()).is_err() {
        return println!("the table cannot be written");
    }
    step("the table", clock.elapsed().as_secs_f64());
    println!("{} points: {sum:.3} us a point beside the point itself, {:.1} % of {POINT_US} us", summary.points, 100.0 * sum / POINT_US);
}

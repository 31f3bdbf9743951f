//! Workloads that are scans of pulses held in slices, or smooth.

use std::error::Error;
use std::path::Path;

use nutate::config::document::read_str;
use nutate::scan::engine::rows;
use nutate::scan::row::Found;
use nutate::scan::setup::Setup;

use crate::numbers::{bell, written, Numbers};
use crate::{cpu_s, Answer};

type Outcome<T> = Result<T, Box<dyn Error>>;

/// Rows of the table of a config with a scan, point after point.
pub fn table(text: &str, cores: usize, wanted: &[&str]) -> Outcome<Vec<Vec<f64>>> {
    let clock = cpu_s();
    let document = read_str("peer", text, Path::new(""), &[]).map_err(|refusal| refusal.text())?;
    let read = cpu_s();
    let setup = Setup::new(document).map_err(|mistake| format!("{mistake:?}"))?;
    let set_up = cpu_s();
    let words = setup.bundled().map(|bundled| bundled.words());
    let laid_out = cpu_s();
    let mut rows = rows(&setup, cores)?;
    // of a point that was computed twice, the row that counts more
    rows.sort_by_key(|row| (row.point, std::cmp::Reverse(row.rank())));
    rows.dedup_by_key(|row| row.point);
    let done = cpu_s();
    if std::env::var_os("PEER_WORDS").is_some() {
        let ms = [read - clock, set_up - read, laid_out - set_up, done - laid_out].map(|s| (s * 1e6).round() / 1e3);
        let names: Vec<&str> = setup.columns.iter().map(|column| column.name.as_str()).collect();
        eprintln!("read, set up, laid out, computed: {ms:?} ms; {words:?}; {names:?}");
    }
    let places: Vec<usize> = wanted.iter().filter_map(|name| setup.columns.iter().position(|column| column.name == *name)).collect();
    let numbers = rows.into_iter().map(|row| match row.found {
        Found::Numbers { numbers, .. } => Ok(places.iter().map(|k| numbers[*k]).collect()),
        Found::Failed(reason) => Err(reason),
    });
    Ok(numbers.collect::<Result<Vec<_>, _>>()?)
}

/// All numbers of a table, row after row.
pub fn flat(rows: Vec<Vec<f64>>) -> Vec<f64> {
    rows.into_iter().flatten().collect()
}

fn axis(numbers: &Numbers, name: &str, key: &str, unit: &str) -> String {
    let (first, last) = (numbers.of(&format!("{key}_first")), numbers.of(&format!("{key}_last")));
    let count = numbers.count(&format!("{}_count", key.split('_').next().unwrap_or(key)));
    format!("  - {{number: {name}, from: {first} {unit}, to: {last} {unit}, points: {count}}}\n")
}

/// Samples of a bell in the middles of its slices, and of its derivative times `factor`.
fn slices(numbers: &Numbers, factor: f64) -> (String, String) {
    let (count, length, width) = (numbers.count("n_slices"), numbers.of("duration_ns"), numbers.of("half_width_sigmas"));
    let at = move |k: usize| bell((k as f64 + 0.5) * length / count as f64, length, width);
    (written((0..count).map(|k| at(k).0)), written((0..count).map(|k| factor * at(k).1)))
}

/// W1: two levels, populations.
pub fn two_levels(numbers: &Numbers, cores: usize) -> Outcome<Answer> {
    let length = numbers.of("duration_ns");
    let (samples, _) = slices(numbers, 0.0);
    let text = format!(
        "format: 1\nnumbers: {{amp: 1 MHz, det: 1 MHz}}\nsystem:\n  levels: {{0: det / 2, 1: -det / 2}}\n\
         drives:\n  x: {{pair: [0, 1], form: direct}}\n\
         envelopes:\n  bell: {{shape: samples, samples: {samples}, between: hold, length: {length} ns, matrix_element: amp / 2}}\n\
         sequence:\n  - pulse: {{drive: x, envelope: bell}}\nstart: 0\nrecord: {{at: [{length} ns], populations: [1]}}\n\
         accuracy: {{final: {:e}}}\nscan:\n  axes:\n{}{}",
        numbers.of("asked_error"),
        axis(numbers, "amp", "amp_mhz", "MHz"),
        axis(numbers, "det", "det_mhz", "MHz"),
    );
    Ok(flat(table(&text, cores, &["population_1"])?).into())
}

/// Populations of three levels.
pub const POPULATIONS: [&str; 3] = ["population_0", "population_1", "population_2"];

/// Operators of a ladder of three levels.
const LADDER: &str = "operators:\n  x: {rows: [[0, 1, 0], [1, 0, sqrt(2)], [0, sqrt(2), 0]]}\n  y: {rows: [[0, -i, 0], [i, 0, -i * sqrt(2)], [0, i * sqrt(2), 0]]}\n";

/// The same with the lowering operator.
pub const LOWERING: &str = "operators:\n  x: {rows: [[0, 1, 0], [1, 0, sqrt(2)], [0, sqrt(2), 0]]}\n  y: {rows: [[0, -i, 0], [i, 0, -i * sqrt(2)], [0, i * sqrt(2), 0]]}\n  lower: {rows: [[0, 1, 0], [0, 0, sqrt(2)], [0, 0, 0]]}\n";

/// W2: three levels, gate error and leakage.
pub fn gate(numbers: &Numbers, cores: usize) -> Outcome<Answer> {
    let (length, anharmonicity) = (numbers.of("duration_ns"), numbers.of("anh_mhz"));
    // Oy = -w A b'/anh, anh in rad/ns
    let (x, y) = slices(numbers, -1.0 / (2e-3 * std::f64::consts::PI * anharmonicity));
    let text = format!(
        "format: 1\nnumbers: {{amp: 50 MHz, weight: 1}}\nsystem:\n  levels: {{0: 0 MHz, 1: 0 MHz, 2: {anharmonicity} MHz}}\n{LADDER}\
         drives:\n  x: {{operator: x, reference_pair: [0, 1], form: direct}}\n  y: {{operator: y, reference_pair: [0, 1], form: direct}}\n\
         envelopes:\n  x: {{shape: samples, samples: {x}, between: hold, length: {length} ns, matrix_element: amp / 2}}\n  \
         y: {{shape: samples, samples: {y}, between: hold, length: {length} ns, matrix_element: weight * amp / 2}}\n\
         sequence:\n  - together:\n    - pulse: {{drive: x, envelope: x}}\n    - pulse: {{drive: y, envelope: y}}\nstart: 0\n\
         record: {{at: [{length} ns], gate: {{within: [0, 1], target: {{turn: 180 deg, about: x}}, free_z: false}}}}\n\
         accuracy: {{final: {:e}}}\nscan:\n  axes:\n{}{}",
        numbers.of("asked_error"),
        axis(numbers, "amp", "amp_mhz", "MHz"),
        axis(numbers, "weight", "wt", ""),
    );
    let rows = table(&text, cores, &["gate_error", "gate_leakage"])?;
    let column = |k: usize| rows.iter().map(move |row| row[k]);
    Ok(column(0).chain(column(1)).collect::<Vec<f64>>().into())
}

/// W10: three levels, the same scan with slices and smooth, and a table of both.
pub fn evening(numbers: &Numbers, cores: usize) -> Outcome<Answer> {
    let length = numbers.of("duration_ns");
    let (samples, _) = slices(numbers, 0.0);
    let text = |envelope: &str| {
        format!(
            "format: 1\nnumbers: {{amp: 1 MHz, det: 1 MHz}}\nsystem:\n  levels: {{0: 0 MHz, 1: det, 2: 2 * det + {} MHz}}\n{LADDER}\
             drives:\n  x: {{operator: x, reference_pair: [0, 1], form: direct}}\nenvelopes:\n  bell: {{{envelope}, matrix_element: amp / 2}}\n\
             sequence:\n  - pulse: {{drive: x, envelope: bell}}\nstart: 0\nrecord: {{at: [{length} ns], populations: all}}\n\
             accuracy: {{final: {:e}}}\nscan:\n  axes:\n{}{}",
            numbers.of("anh_mhz"),
            numbers.of("asked_error"),
            axis(numbers, "det", "det_mhz", "MHz"),
            axis(numbers, "amp", "amp_mhz", "MHz"),
        )
    };
    let start = cpu_s();
    let sliced = table(&text(&format!("shape: samples, samples: {samples}, between: hold, length: {length} ns")), cores, &POPULATIONS)?;
    let middle = cpu_s();
    let sigma = length / (2.0 * numbers.of("half_width_sigmas"));
    let smooth =
        table(&text(&format!("shape: gaussian, field_sigma: {sigma} ns, cut_at: {} ns, edge: step", length / 2.0)), cores, &POPULATIONS)?;
    let end = cpu_s();
    let lines = [("sliced", &sliced), ("smooth", &smooth)].into_iter().flat_map(|(word, rows)| {
        let (dets, amps) = (numbers.count("det_count"), numbers.count("amp_count"));
        let at = |key: &str, k: usize, count: usize| {
            let (first, last) = (numbers.of(&format!("{key}_first")), numbers.of(&format!("{key}_last")));
            first + (last - first) * k as f64 / (count - 1).max(1) as f64
        };
        rows.iter().enumerate().map(move |(k, row)| {
            let (det, amp) = (at("det_mhz", k / amps, dets), at("amp_mhz", k % amps, amps));
            format!("{word},{det:.12e},{amp:.12e},{:.12e},{:.12e},{:.12e}\n", row[0], row[1], row[2])
        })
    });
    let csv = Some(std::iter::once("pulse,det_mhz,amp_mhz,p0,p1,p2\n".to_string()).chain(lines).collect());
    let outputs = sliced.iter().chain(&smooth).flatten().copied().collect();
    Ok(Answer { outputs, more: vec![("sliced_cpu_s", middle - start), ("smooth_cpu_s", end - middle)], csv })
}

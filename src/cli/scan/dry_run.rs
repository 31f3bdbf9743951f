//! What a scan will take: points, time measured on a sample, memory, disk.

use std::time::{Duration, Instant};

use serde_json::json;

use super::super::{print, Status};
use crate::config::run::Run;
use crate::report::scan_folder::spaced;
use crate::report::scan_text::{self, duration};
use crate::scan::bundled::GROUP;
use crate::scan::evaluate::Evaluator;
use crate::scan::limit;
use crate::scan::row::Found;
use crate::scan::setup::Setup;

/// Longest time that the sample may take, and most points of it.
const LONGEST: Duration = Duration::from_secs(3);
const MOST: u64 = 200;

/// Measures a sample and says what the whole will take.
pub(super) fn dry_run(setup: &Setup, run: &Run, as_json: bool) -> Status {
    let points = setup.grid.points();
    let mut evaluator = Evaluator::new(setup, 1);
    let (mut sampled, mut failed, mut bytes) = (0u64, 0u64, 0usize);
    let mut first_failure = None;
    // spread over the whole grid: steps by the golden section meet no axis in its own rhythm
    let count = points.min(MOST);
    if setup.bundled().is_ok() {
        // laid out before the clock is asked
        evaluator.together(&[0], false);
    }
    let clock = Instant::now();
    let stride = ((points as f64 * 0.618_033_988_75) as u64).max(1);
    for k in 0..count {
        if sampled >= 3 && clock.elapsed() > LONGEST {
            break;
        }
        let point = if points <= MOST { k } else { ((u128::from(k) * u128::from(stride)) % u128::from(points)) as u64 };
        // points that lie side by side cost what they cost together
        let rows = if setup.bundled().is_ok() {
            let first = point / GROUP * GROUP;
            if points <= MOST && point != first {
                continue;
            }
            evaluator.together(&(first..(first + GROUP).min(points)).collect::<Vec<u64>>(), false)
        } else {
            vec![evaluator.alone(point)]
        };
        for row in rows {
            let mut form = Vec::new();
            row.write(setup.width(), &mut form);
            bytes += form.len();
            sampled += 1;
            if let Found::Failed(reason) = row.found {
                failed += 1;
                first_failure.get_or_insert((row.point, reason));
            }
        }
    }
    let each_s = clock.elapsed().as_secs_f64() / sampled.max(1) as f64;
    let threads = limit::threads(run, |name| std::env::var(name).ok());
    let seconds = each_s * points as f64 / (threads as u64).min(points).max(1) as f64;
    let store = bytes as f64 / sampled.max(1) as f64 * points as f64;
    // digits of a double, its comma, and the axes
    let table = 19.0 * (setup.columns.len() + setup.grid.axes().len()) as f64 * points as f64;
    let memory = resident() + points as f64 * 3.0 / 8.0 + points as f64 / 40.0 * 32.0 / 48.0;
    if as_json {
        let said = json!({
            "points": points, "sampled": sampled, "sampled_failed": failed, "seconds_per_point": each_s, "threads": threads,
            "seconds": seconds, "memory_bytes": memory, "disk_bytes": store + table, "parts": run.split_into,
        });
        print(&format!("{}\n", serde_json::to_string_pretty(&said).unwrap_or_default()));
        return Status::Good;
    }
    let mut text = format!("{} points:\n{}", spaced(points), scan_text::axes(setup));
    text.push_str(&format!(
        "about {} on {threads} thread{}: {} a point, measured on {sampled} of them\n",
        duration(seconds),
        if threads == 1 { "" } else { "s" },
        duration(each_s)
    ));
    if let Some(parts) = run.split_into {
        text.push_str(&format!(
            "in {parts} parts (nutate scan FILE --part 1/{parts} ..): about {} each\n",
            duration(seconds / parts as f64)
        ));
    }
    text.push_str(&format!(
        "memory about {}, disk about {} (store {}, table {})\n",
        size(memory),
        size(store + table),
        size(store),
        size(table)
    ));
    if let Some((point, reason)) = first_failure {
        text.push_str(&format!("{failed} of the {sampled} failed; at {}: {reason}\n", scan_text::at(setup, point)));
    }
    print(&text);
    Status::Good
}

/// What this process holds now, bytes; 40 MB where the system does not say.
fn resident() -> f64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"));
    let kilobytes: Option<f64> = line.and_then(|line| line.trim().trim_end_matches("kB").trim().parse().ok());
    kilobytes.map_or(4e7, |kilobytes| kilobytes * 1024.0)
}

/// Bytes for people.
fn size(bytes: f64) -> String {
    let (factor, unit) = if bytes >= 1e9 {
        (1e9, "GB")
    } else if bytes >= 1e6 {
        (1e6, "MB")
    } else {
        (1e3, "kB")
    };
    let value = bytes / factor;
    if value >= 9.95 {
        format!("{value:.0} {unit}")
    } else {
        format!("{value:.1} {unit}")
    }
}

//! nutate beside its peers: does a workload of the peers' collection through the library's public door, and says how long it took.
//!
//! `peer WORKLOAD_FILE WORKLOAD_NAME CORES` prints `{"out_file": .., "kernel_wall_s": .., "kernel_cpu_s": ..}`; outputs go to the file
//! that `PEER_OUT` names, as one flat JSON list. The clock runs from the numbers of the workload to the finished outputs: the config is
//! written from them, read, planned and computed, as `nutate scan` does it, all within.

#[path = "peer/gradients.rs"]
mod gradients;
#[path = "peer/laboratory.rs"]
mod laboratory;
#[path = "peer/numbers.rs"]
mod numbers;
#[path = "peer/open.rs"]
mod open;
#[path = "peer/propagators.rs"]
mod propagators;
#[path = "peer/scans.rs"]
mod scans;

use std::error::Error;
use std::io::Write;
use std::time::Instant;

use numbers::Numbers;
use rustix::time::{clock_gettime, ClockId};
use serde_json::{json, Value};

/// What a workload gives.
pub struct Answer {
    /// The outputs, in order.
    pub outputs: Vec<f64>,
    /// Further numbers for the line.
    pub more: Vec<(&'static str, f64)>,
    /// Lines for the file of `PEER_CSV`, with their heading.
    pub csv: Option<String>,
}

impl From<Vec<f64>> for Answer {
    fn from(outputs: Vec<f64>) -> Answer {
        Answer { outputs, more: Vec::new(), csv: None }
    }
}

/// CPU time of the process, all threads, s.
pub fn cpu_s() -> f64 {
    let now = clock_gettime(ClockId::ProcessCPUTime);
    now.tv_sec as f64 + 1e-9 * now.tv_nsec as f64
}

fn main() -> Result<(), Box<dyn Error>> {
    let words: Vec<String> = std::env::args().collect();
    let [_, file, name, cores] = words.as_slice() else {
        return Err("usage: peer WORKLOAD_FILE WORKLOAD_NAME CORES".into());
    };
    let numbers = Numbers::new(serde_json::from_str(&std::fs::read_to_string(file)?)?);
    let cores: usize = cores.parse()?;
    let (wall, cpu) = (Instant::now(), cpu_s());
    let answer = match name.as_str() {
        "W1" => scans::two_levels(&numbers, cores),
        "W2" => scans::gate(&numbers, cores),
        "W3" => laboratory::scan(&numbers, cores),
        "W4" => propagators::propagators(&numbers, cores),
        "W5" => open::smooth(&numbers, cores),
        "W6" => gradients::gate_error(&numbers, cores),
        "W7" => laboratory::many_levels(&numbers, cores),
        "W8" | "W9" => laboratory::runs(&numbers, cores),
        "W11" => open::slices(&numbers, cores),
        "W10" => scans::evening(&numbers, cores),
        _ => return Err(format!("there is no {name} here yet").into()),
    }?;
    let (wall_s, kernel_cpu_s) = (wall.elapsed().as_secs_f64(), cpu_s() - cpu);
    let out = std::env::var("PEER_OUT").unwrap_or_else(|_| "peer.out".to_string());
    let list: Vec<Value> = answer.outputs.iter().map(|x| json!(x)).collect();
    std::fs::write(&out, serde_json::to_string(&list)?)?;
    if let (Some(csv), Ok(path)) = (answer.csv, std::env::var("PEER_CSV")) {
        std::fs::write(path, csv)?;
    }
    let mut line = json!({"out_file": out, "kernel_wall_s": wall_s, "kernel_cpu_s": kernel_cpu_s});
    for (key, value) in answer.more {
        line[key] = json!(value);
    }
    writeln!(std::io::stdout(), "{line}")?;
    Ok(())
}

//! The program that joins a table of peers: one workload file in, its outputs and the time of the computation out.
//!
//! `peer WORKLOAD_FILE WORKLOAD_NAME CORES` writes a config from the numbers of the workload, reads it, lays it out, moves its numbers
//! point by point and computes each as `nutate run` does, with its error figure. The last line on standard output is an object with
//! `out_file`, `kernel_wall_s`, `kernel_cpu_s` and the largest error figure of all points. W2, W4 and W6 are not among its workloads
//! yet.

use std::error::Error;
use std::fmt::Write as _;
use std::path::Path;
use std::time::Instant;

use nutate::config::document::read_str;
use nutate::outcome::compute;
use nutate::plan::Plan;
use serde_json::Value;

/// One config, the numbers that move, their values point by point, and the columns that are the outputs.
struct Job {
    config: String,
    moved: Vec<&'static str>,
    points: Vec<Vec<f64>>,
    columns: Vec<String>,
}

/// Numbers of a workload file.
struct Workload(Value);

impl Workload {
    fn number(&self, key: &str) -> f64 {
        self.0[key].as_f64().unwrap_or(f64::NAN)
    }

    fn count(&self, key: &str) -> usize {
        self.0[key].as_u64().unwrap_or(0) as usize
    }

    /// `count` values from first to last, both included.
    fn range(&self, stem: &str, count: &str) -> Vec<f64> {
        let (first, last) = (self.number(&format!("{stem}_first")), self.number(&format!("{stem}_last")));
        let steps = self.count(count).saturating_sub(1).max(1) as f64;
        (0..self.count(count)).map(|k| first + (last - first) * k as f64 / steps).collect()
    }

    /// Standard deviation of the Gaussian pulse of this length, ns.
    fn sigma(&self, length_ns: f64) -> f64 {
        length_ns / (2.0 * self.number("half_width_sigmas"))
    }
}

/// MHz in Hz: numbers are moved in SI.
const HZ_PER_MHZ: f64 = 1e6;

fn head(asked: f64, record: &str) -> String {
    format!("format: 1\nframe: {{kind: lab}}\naccuracy: {{final: {asked:e}}}\nrecord: {{{record}}}\nstart: 0\n")
}

fn populations(levels: usize) -> Vec<String> {
    (0..levels).map(|level| format!("population_{level}")).collect()
}

/// Values of `shape` in the middles of `n` equal parts of the pulse, as a list.
fn middles(n: usize, length: f64, shape: impl Fn(f64) -> f64) -> String {
    let values: Vec<String> = (0..n).map(|k| format!("{:e}", shape(length * (k as f64 + 0.5) / n as f64))).collect();
    values.join(", ")
}

/// A ladder in the laboratory frame under one linear drive.
fn ladder(w: &Workload, asked: f64, levels: usize, shape: &str, amplitudes: &[f64]) -> Job {
    let mut config = head(asked, &format!("at: {} ns", w.number("duration_ns")));
    let _ = write!(
        config,
        "numbers: {{size: 1 MHz}}\nsystem:\n  ladder: {{levels: {levels}, first_gap: {} GHz, anharmonicity: {} MHz, couplings_grow: sqrt}}\n\
         drives:\n  line: {{acts_on: ladder, reference_pair: [0, 1], carrier: {} GHz}}\n\
         envelopes:\n  pulse: {{{shape}, peak: size}}\n\
         sequence:\n  - pulse: {{drive: line, envelope: pulse, phase: {} rad}}\n",
        w.number("f01_ghz"),
        w.number("anh_mhz"),
        w.number("fd_ghz"),
        w.number("phase")
    );
    let config = if levels > 2 { config } else { config.replace(&format!(", anharmonicity: {} MHz", w.number("anh_mhz")), "") };
    let points = amplitudes.iter().map(|size| vec![size * HZ_PER_MHZ]).collect();
    Job { config, moved: vec!["size"], points, columns: populations(levels) }
}

fn gaussian(w: &Workload, length_ns: f64) -> String {
    format!("shape: gaussian, field_sigma: {} ns, cut_at: {} ns, edge: step", w.sigma(length_ns), length_ns / 2.0)
}

/// Three resonant levels with decay under a pulse and its derivative quadrature; sliced where `slices` says how often.
fn damped_ladder(w: &Workload, asked: f64, keys: &str, slices: Option<usize>) -> Job {
    let of = |key: &str| w.number(&format!("{keys}{key}"));
    let (length, anh, weight) = (of("duration_ns"), of("anh_mhz"), of("wt"));
    let sigma = w.sigma(length);
    let u = move |t: f64| (t - length / 2.0) / sigma;
    let (bell, slope) = match slices {
        Some(n) => (
            format!(
                "shape: samples, samples: [{}], between: hold, length: {length} ns",
                middles(n, length, |t| (-0.5 * u(t) * u(t)).exp())
            ),
            format!(
                "shape: samples, samples: [{}], between: hold, length: {length} ns",
                middles(n, length, |t| -u(t) * (-0.5 * u(t) * u(t)).exp())
            ),
        ),
        None => {
            let u = format!("((t - {} ns) / ({sigma} ns))", length / 2.0);
            (gaussian(w, length), format!("shape: formula, length: {length} ns, formula: -{u} * exp(-{u}^2 / 2)"))
        }
    };
    let mut config = head(asked, &format!("at: {length} ns"));
    let _ = write!(
        config,
        "numbers: {{size: 1 MHz}}\nsystem: {{levels: {{0: 0 MHz, 1: 0 MHz, 2: {anh} MHz}}}}\n\
         operators:\n  x: {{rows: [[0, 1, 0], [1, 0, sqrt(2)], [0, sqrt(2), 0]]}}\n\
         \x20 y: {{rows: [[0, i, 0], [-i, 0, sqrt(2)*i], [0, -sqrt(2)*i, 0]]}}\n\
         \x20 lower: {{rows: [[0, 1, 0], [0, 0, sqrt(2)], [0, 0, 0]]}}\n\
         drives:\n  in_phase: {{operator: x, form: direct}}\n  quadrature: {{operator: y, form: direct}}\n\
         envelopes:\n  bell: {{{bell}, matrix_element: size / 2}}\n\
         \x20 slope: {{{slope}, matrix_element: {weight} * size / ({anh} MHz) * 0.5 rad / ({sigma} ns)}}\n\
         sequence:\n  - together:\n      - pulse: {{drive: in_phase, envelope: bell}}\n      - pulse: {{drive: quadrature, envelope: slope}}\n\
         decay:\n  - {{operator: lower, lifetime: {} ns}}\n\
         dephasing:\n  - {{energy_of: {{1: 1, 2: 2}}, pure_time: {} ns}}\n",
        of("t1_ns"),
        of("tphi_ns")
    );
    let points = w.range(&format!("{keys}amp_mhz"), "point_count").into_iter().map(|size| vec![size * HZ_PER_MHZ]).collect();
    Job { config, moved: vec!["size"], points, columns: populations(3) }
}

/// Two levels with decay under a Gaussian pulse.
fn emitter(w: &Workload, asked: f64) -> Job {
    let length = w.number("e_duration_ns");
    let mut config = head(asked, &format!("at: {length} ns"));
    let _ = write!(
        config,
        "numbers: {{size: 1 MHz}}\nsystem: {{levels: {{0: 0 MHz, 1: {} MHz}}}}\n\
         drives:\n  line: {{pair: [0, 1], form: direct}}\nenvelopes:\n  bell: {{{}, matrix_element: size / 2}}\n\
         sequence:\n  - pulse: {{drive: line, envelope: bell}}\n\
         decay:\n  - {{from: 1, to: 0, lifetime: {} ns}}\ndephasing:\n  - {{energy_of: {{1: 1}}, pure_time: {} ns}}\n",
        w.number("e_det_mhz"),
        gaussian(w, length),
        w.number("e_t1_ns"),
        w.number("e_tphi_ns")
    );
    let points = w.range("e_amp_mhz", "point_count").into_iter().map(|size| vec![size * HZ_PER_MHZ]).collect();
    Job { config, moved: vec!["size"], points, columns: populations(2) }
}

/// Levels in a turning frame under a real pulse, over detuning and size; `slow` is the axis that moves last.
fn map(w: &Workload, asked: f64, levels: &str, couplings: &str, envelope: &str, columns: Vec<String>, detuning_slow: bool) -> Job {
    let mut config = head(asked, &format!("at: {} ns", w.number("duration_ns")));
    let _ = write!(
        config,
        "numbers: {{size: 1 MHz, off: 1 MHz}}\nsystem: {{levels: {levels}}}\noperators:\n  x: {{rows: {couplings}}}\n\
         drives:\n  line: {{operator: x, form: direct}}\nenvelopes:\n  bell: {{{envelope}, matrix_element: size / 2}}\n\
         sequence:\n  - pulse: {{drive: line, envelope: bell}}\n"
    );
    let (sizes, offs) = (w.range("amp_mhz", "amp_count"), w.range("det_mhz", "det_count"));
    let pair = |size: f64, off: f64| vec![size * HZ_PER_MHZ, off * HZ_PER_MHZ];
    let points = if detuning_slow {
        offs.iter().flat_map(|off| sizes.iter().map(|size| pair(*size, *off))).collect()
    } else {
        sizes.iter().flat_map(|size| offs.iter().map(|off| pair(*size, *off))).collect()
    };
    Job { config, moved: vec!["size", "off"], points, columns }
}

fn held_gaussian(w: &Workload) -> String {
    let length = w.number("duration_ns");
    let (sigma, n) = (w.sigma(length), w.count("n_slices"));
    let list = middles(n, length, |t| (-0.5 * ((t - length / 2.0) / sigma).powi(2)).exp());
    format!("shape: samples, samples: [{list}], between: hold, length: {length} ns")
}

fn jobs(name: &str, w: &Workload) -> Result<Vec<Job>, String> {
    let asked = w.number("asked_error");
    let length = w.number("duration_ns");
    let cosine = format!("shape: raised cosine, length: {length} ns");
    let one = [w.number("amp_mhz")];
    let dims = || w.0["dims"].as_array().into_iter().flatten().filter_map(Value::as_u64).map(|dim| dim as usize);
    Ok(match name {
        "W1" => {
            let levels = "{0: off / 2, 1: -off / 2}";
            vec![map(w, asked, levels, "[[0, 1], [1, 0]]", &held_gaussian(w), vec!["population_1".to_string()], false)]
        }
        "W3" => vec![ladder(w, asked, 3, &gaussian(w, length), &w.range("amp_mhz", "amp_count"))],
        "W5" => vec![emitter(w, asked), damped_ladder(w, asked, "l_", None)],
        "W7" => vec![ladder(w, asked, w.count("dim"), &gaussian(w, length), &one)],
        "W8" | "W9" => dims().map(|levels| ladder(w, asked, levels, &cosine, &one)).collect(),
        "W10" => {
            let levels = format!("{{0: 0 MHz, 1: off, 2: 2 * off + {} MHz}}", w.number("anh_mhz"));
            let x = "[[0, 1, 0], [1, 0, sqrt(2)], [0, sqrt(2), 0]]";
            let of = |envelope: &str| map(w, asked, &levels, x, envelope, populations(3), true);
            vec![of(&held_gaussian(w)), of(&gaussian(w, length))]
        }
        "W11" => vec![damped_ladder(w, asked, "", Some(w.count("n_slices")))],
        other => return Err(format!("{other} is not among the workloads of this program yet")),
    })
}

/// The outputs of a job in order, its points shared by the threads, and the largest error figure.
fn outputs(job: &Job, threads: usize) -> Result<(Vec<f64>, f64), String> {
    let document = read_str("peer.yaml", &job.config, Path::new("."), &[]).map_err(|refusal| refusal.text())?;
    let plan = Plan::new(document);
    let share = job.points.len().div_ceil(threads.max(1));
    let part = |points: &[Vec<f64>]| -> Result<(Vec<f64>, f64), String> {
        let mut mover = plan.mover(&job.moved).map_err(|mistake| format!("{mistake:?}"))?;
        let (mut numbers, mut error) = (Vec::new(), 0.0f64);
        for values in points {
            let outcome = compute(plan.document(), mover.at(values).map_err(|mistake| format!("{mistake:?}"))?);
            error = error.max(outcome.error_figure);
            for column in &job.columns {
                let found = outcome.finals.iter().find(|number| number.name == *column);
                numbers.push(found.map_or(f64::NAN, |number| number.value));
            }
        }
        Ok((numbers, error))
    };
    let parts: Vec<Result<(Vec<f64>, f64), String>> = std::thread::scope(|scope| {
        let running: Vec<_> = job.points.chunks(share).map(|points| scope.spawn(|| part(points))).collect();
        running.into_iter().map(|thread| thread.join().unwrap_or_else(|_| Err("a thread broke down".to_string()))).collect()
    });
    let (mut numbers, mut error) = (Vec::new(), 0.0f64);
    for part in parts {
        let (more, of_part) = part?;
        numbers.extend(more);
        error = error.max(of_part);
    }
    Ok((numbers, error))
}

/// Processor time of this process, all threads, s; of Linux alone.
fn cpu_s() -> Option<f64> {
    const TICKS_PER_S: f64 = 100.0;
    let stat = std::fs::read_to_string("/proc/self/stat").ok()?;
    let fields: Vec<&str> = stat.rsplit(')').next()?.split_whitespace().collect();
    Some((fields.get(11)?.parse::<f64>().ok()? + fields.get(12)?.parse::<f64>().ok()?) / TICKS_PER_S)
}

/// Header and one line per point.
fn table(jobs: &[Job], numbers: &[f64]) -> String {
    let mut csv = String::from("size_Hz,off_Hz,population_0,population_1,population_2\n");
    let points = jobs.iter().flat_map(|job| &job.points);
    for (values, row) in points.zip(numbers.chunks(3)) {
        let line: Vec<String> = values.iter().chain(row).map(|number| format!("{number:.12}")).collect();
        csv.push_str(&line.join(","));
        csv.push('\n');
    }
    csv
}

fn main() -> Result<(), Box<dyn Error>> {
    let words: Vec<String> = std::env::args().collect();
    let [_, file, name, cores] = words.as_slice() else {
        return Err("peer WORKLOAD_FILE WORKLOAD_NAME CORES".into());
    };
    let workload = Workload(serde_json::from_str(&std::fs::read_to_string(file)?)?);
    let threads: usize = cores.parse()?;
    let (clock, cpu) = (Instant::now(), cpu_s());
    let jobs = jobs(name, &workload)?;
    let (mut numbers, mut error) = (Vec::new(), 0.0f64);
    for job in &jobs {
        let (more, figure) = outputs(job, threads)?;
        numbers.extend(more);
        error = error.max(figure);
    }
    let wall_s = clock.elapsed().as_secs_f64();
    // ticks are coarse: one thread alone is busy all the time
    let busy_s = match (cpu, cpu_s()) {
        (Some(before), Some(after)) if threads > 1 => after - before,
        _ => wall_s,
    };
    if let Ok(csv) = std::env::var("PEER_CSV") {
        std::fs::write(csv, table(&jobs, &numbers))?;
    }
    let out = std::env::var("PEER_OUT").unwrap_or_else(|_| "peer-out.json".to_string());
    let list: Vec<Value> = numbers.iter().map(|number| serde_json::Number::from_f64(*number).map_or(Value::Null, Value::Number)).collect();
    std::fs::write(&out, serde_json::to_string(&list)?)?;
    println!("{}", serde_json::json!({"out_file": out, "kernel_wall_s": wall_s, "kernel_cpu_s": busy_s, "error_figure": error}));
    Ok(())
}

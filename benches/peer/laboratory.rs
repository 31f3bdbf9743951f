//! Workloads of single runs and small scans in the laboratory frame, point by point.

use std::error::Error;
use std::fmt::Write as _;
use std::path::Path;

use nutate::config::document::read_str;
use nutate::outcome::compute;
use nutate::plan::Plan;

use crate::numbers::Numbers;
use crate::Answer;

/// MHz in Hz: numbers are moved in SI.
const HZ_PER_MHZ: f64 = 1e6;

/// A ladder under one linear drive.
struct Ladder<'a> {
    numbers: &'a Numbers,
    levels: usize,
    shape: String,
    amplitudes_mhz: Vec<f64>,
}

fn gaussian(numbers: &Numbers) -> String {
    let length = numbers.of("duration_ns");
    let sigma = length / (2.0 * numbers.of("half_width_sigmas"));
    format!("shape: gaussian, field_sigma: {sigma} ns, cut_at: {} ns, edge: step", length / 2.0)
}

/// W3: three levels, a scan of the size.
pub fn scan(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let (first, last, count) = (numbers.of("amp_mhz_first"), numbers.of("amp_mhz_last"), numbers.count("amp_count"));
    let step = (last - first) / count.saturating_sub(1).max(1) as f64;
    let amplitudes_mhz = (0..count).map(|k| first + step * k as f64).collect();
    Ladder { numbers, levels: 3, shape: gaussian(numbers), amplitudes_mhz }.outputs(cores).map(Answer::from)
}

/// W7: many levels, one run.
pub fn many_levels(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let amplitudes_mhz = vec![numbers.of("amp_mhz")];
    Ladder { numbers, levels: numbers.count("dim"), shape: gaussian(numbers), amplitudes_mhz }.outputs(cores).map(Answer::from)
}

/// W8 and W9: one run for each number of levels.
pub fn runs(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let mut outputs = Vec::new();
    for levels in numbers.list("dims") {
        let shape = format!("shape: raised cosine, length: {} ns", numbers.of("duration_ns"));
        let amplitudes_mhz = vec![numbers.of("amp_mhz")];
        outputs.extend(Ladder { numbers, levels: levels as usize, shape, amplitudes_mhz }.outputs(cores)?);
    }
    Ok(outputs.into())
}

impl Ladder<'_> {
    fn config(&self) -> Result<String, std::fmt::Error> {
        let of = |key: &str| self.numbers.of(key);
        let length = of("duration_ns");
        let anharmonicity = if self.levels > 2 { format!(", anharmonicity: {} MHz", of("anh_mhz")) } else { String::new() };
        let mut config =
            format!("format: 1\nframe: {{kind: lab}}\naccuracy: {{final: {:e}}}\nrecord: {{at: {length} ns}}\n", of("asked_error"));
        write!(
            config,
            "start: 0\nnumbers: {{size: 1 MHz}}\nsystem:\n  ladder: {{levels: {}, first_gap: {} GHz{anharmonicity}, couplings_grow: sqrt}}\n\
             drives:\n  line: {{acts_on: ladder, reference_pair: [0, 1], carrier: {} GHz}}\n\
             envelopes:\n  pulse: {{{}, peak: size}}\n\
             sequence:\n  - pulse: {{drive: line, envelope: pulse, phase: {} rad}}\n",
            self.levels,
            of("f01_ghz"),
            of("fd_ghz"),
            self.shape,
            of("phase")
        )?;
        Ok(config)
    }

    /// Final populations, point after point, the points shared by the threads.
    fn outputs(&self, cores: usize) -> Result<Vec<f64>, Box<dyn Error>> {
        let document = read_str("peer", &self.config()?, Path::new(""), &[]).map_err(|refusal| refusal.text())?;
        let plan = Plan::new(document);
        let part = |amplitudes: &[f64]| -> Result<Vec<f64>, String> {
            let mut mover = plan.mover(&["size"]).map_err(|mistake| format!("{mistake:?}"))?;
            let mut numbers = Vec::new();
            for mhz in amplitudes {
                let outcome = compute(plan.document(), mover.at(&[mhz * HZ_PER_MHZ]).map_err(|mistake| format!("{mistake:?}"))?);
                for level in 0..self.levels {
                    let name = format!("population_{level}");
                    let found = outcome.finals.iter().find(|number| number.name == name);
                    numbers.push(found.map_or(f64::NAN, |number| number.value));
                }
            }
            Ok(numbers)
        };
        let share = self.amplitudes_mhz.len().div_ceil(cores.max(1));
        let parts: Vec<Result<Vec<f64>, String>> = std::thread::scope(|scope| {
            let running: Vec<_> = self.amplitudes_mhz.chunks(share).map(|some| scope.spawn(|| part(some))).collect();
            running.into_iter().map(|thread| thread.join().unwrap_or_else(|_| Err("a thread broke down".to_string()))).collect()
        });
        Ok(parts.into_iter().collect::<Result<Vec<_>, _>>()?.concat())
    }
}

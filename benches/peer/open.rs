//! Workloads with density matrices.

use std::error::Error;

use crate::numbers::{bell, written, Numbers};
use crate::scans::{flat, table, LOWERING, POPULATIONS};
use crate::Answer;

/// W11: three levels that decay and dephase, in slices.
pub fn slices(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let (count, length, width) = (numbers.count("n_slices"), numbers.of("duration_ns"), numbers.of("half_width_sigmas"));
    let at = |k: usize| bell((k as f64 + 0.5) * length / count as f64, length, width);
    let factor = quadrature(numbers.of("anh_mhz"));
    let x = format!("shape: samples, samples: {}, between: hold, length: {length} ns", written((0..count).map(|k| at(k).0)));
    let y = format!("shape: samples, samples: {}, between: hold, length: {length} ns", written((0..count).map(|k| factor * at(k).1)));
    Ok(flat(table(&ladder(numbers, "", &x, &y, length), cores, &POPULATIONS)?).into())
}

/// W5: two levels, then three, smooth.
pub fn smooth(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let (e_length, l_length, width) = (numbers.of("e_duration_ns"), numbers.of("l_duration_ns"), numbers.of("half_width_sigmas"));
    let gauss =
        |length: f64| format!("shape: gaussian, field_sigma: {} ns, cut_at: {} ns, edge: step", length / (2.0 * width), length / 2.0);
    let emitter = format!(
        "format: 1\nnumbers: {{amp: 20 MHz}}\nsystem:\n  levels: {{0: 0 MHz, 1: {} MHz}}\ndrives:\n  x: {{pair: [0, 1], form: direct}}\n\
         envelopes:\n  bell: {{{}, matrix_element: amp / 2}}\nsequence:\n  - pulse: {{drive: x, envelope: bell}}\n\
         decay:\n  - {{from: 1, to: 0, lifetime: {} ns}}\ndephasing:\n  - {{energy_of: {{1: 1}}, pure_time: {} ns}}\nstart: 0\n\
         record: {{at: [{e_length} ns], populations: all}}\naccuracy: {{final: {:e}}}\nscan:\n  axes:\n{}",
        numbers.of("e_det_mhz"),
        gauss(e_length),
        numbers.of("e_t1_ns"),
        numbers.of("e_tphi_ns"),
        numbers.of("asked_error"),
        amplitudes(numbers, "e_"),
    );
    // b' = -(t - T/2)/s^2 b as a formula of time, without dimension
    let sigma = l_length / (2.0 * width);
    let factor = quadrature(numbers.of("l_anh_mhz"));
    let slope = format!(
        "shape: formula, formula: {:e} * ((t - {half} ns) / {sigma} ns) * exp(-((t - {half} ns) / {sigma} ns)^2 / 2), length: {l_length} ns",
        -factor / sigma,
        half = l_length / 2.0
    );
    let mut outputs = flat(table(&emitter, cores, &POPULATIONS[..2])?);
    outputs.extend(flat(table(&ladder(numbers, "l_", &gauss(l_length), &slope, l_length), cores, &POPULATIONS)?));
    Ok(outputs.into())
}

/// What multiplies b' (1/ns) in Oy/(A w): -1/anh with anh in rad/ns.
fn quadrature(anharmonicity_mhz: f64) -> f64 {
    -1.0 / (2e-3 * std::f64::consts::PI * anharmonicity_mhz)
}

fn amplitudes(numbers: &Numbers, prefix: &str) -> String {
    let (first, last) = (numbers.of(&format!("{prefix}amp_mhz_first")), numbers.of(&format!("{prefix}amp_mhz_last")));
    format!("  - {{number: amp, from: {first} MHz, to: {last} MHz, points: {}}}\n", numbers.count("point_count"))
}

fn ladder(numbers: &Numbers, prefix: &str, x: &str, y: &str, length: f64) -> String {
    let of = |key: &str| numbers.of(&format!("{prefix}{key}"));
    format!(
        "format: 1\nnumbers: {{amp: 20 MHz}}\nsystem:\n  levels: {{0: 0 MHz, 1: 0 MHz, 2: {} MHz}}\n{LOWERING}\
         drives:\n  x: {{operator: x, reference_pair: [0, 1], form: direct}}\n  y: {{operator: y, reference_pair: [0, 1], form: direct}}\n\
         envelopes:\n  x: {{{x}, matrix_element: amp / 2}}\n  y: {{{y}, matrix_element: {} * amp / 2}}\n\
         sequence:\n  - together:\n    - pulse: {{drive: x, envelope: x}}\n    - pulse: {{drive: y, envelope: y}}\n\
         decay:\n  - {{operator: lower, lifetime: {} ns}}\n\
         dephasing:\n  - {{energy_of: {{1: 1, 2: 2}}, pure_time: {} ns}}\nstart: 0\nrecord: {{at: [{length} ns], populations: all}}\n\
         accuracy: {{final: {:e}}}\nscan:\n  axes:\n{}",
        of("anh_mhz"),
        of("wt"),
        of("t1_ns"),
        of("tphi_ns"),
        numbers.of("asked_error"),
        amplitudes(numbers, prefix),
    )
}

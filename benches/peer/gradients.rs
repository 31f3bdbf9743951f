//! W6: the error of a two-qubit gate and its gradient by all samples of four controls, for many sets of samples.

use std::error::Error;

use num_complex::Complex64;
use nutate::problem::Matrix;
use nutate::propagate::gradient::{gradients, Controlled, GateOverlap};
use nutate::units::rad_s;

use crate::numbers::Numbers;
use crate::Answer;

/// Seconds in a nanosecond: controls are moved in rad/s, outputs are per rad/ns.
const NS: f64 = 1e-9;

/// Control number k: the SplitMix64 finaliser of the workload's `generator` line, between -1 and 1.
fn uniform(seed: u64, k: u64) -> f64 {
    let mut z = seed.wrapping_add((k + 1).wrapping_mul(0x9E37_79B9_7F4A_7C15));
    z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    2.0 * ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64 - 1.0
}

/// Exchange and detuning of the second system, rad/s; index 2 i + j.
fn statics(numbers: &Numbers) -> Matrix {
    let (exchange, half) = (rad_s(1e6 * numbers.of("exchange_mhz")), 0.5 * rad_s(1e6 * numbers.of("det_mhz")));
    let mut h = Matrix::zeros(4, 4);
    h[(1, 2)] = exchange.into();
    h[(2, 1)] = exchange.into();
    (0..4).for_each(|k| h[(k, k)] = if k % 2 == 0 { half } else { -half }.into());
    h
}

pub fn gate_error(numbers: &Numbers, cores: usize) -> Result<Answer, Box<dyn Error>> {
    let (slices, sets) = (numbers.count("n_slices"), numbers.count("n_sets"));
    let c = Complex64::new;
    let x = Matrix::from_row_slice(2, 2, &[c(0.0, 0.0), c(0.5, 0.0), c(0.5, 0.0), c(0.0, 0.0)]);
    let y = Matrix::from_row_slice(2, 2, &[c(0.0, 0.0), c(0.0, -0.5), c(0.0, 0.5), c(0.0, 0.0)]);
    let one = Matrix::identity(2, 2);
    let controls = vec![x.kronecker(&one), y.kronecker(&one), one.kronecker(&x), one.kronecker(&y)];
    let amplitude = rad_s(1e6 * numbers.of("amp_mhz"));
    let samples: Vec<f64> = (0..(4 * slices * sets) as u64).map(|k| amplitude * uniform(numbers.count("seed") as u64, k)).collect();
    let length_s = NS * numbers.of("duration_ns") / slices as f64;
    let system = Controlled::new(statics(numbers), controls, vec![length_s; slices])?;
    // the first controls the second
    let mut target = Matrix::zeros(4, 4);
    [(0, 0), (1, 1), (2, 3), (3, 2)].into_iter().for_each(|place| target[place] = c(1.0, 0.0));
    let found = gradients(&system, &samples, &GateOverlap::new(target), cores)?;
    let mut outputs: Vec<f64> = found.gradients.iter().map(|gradient| gradient.value).collect();
    outputs.extend(found.gradients.iter().flat_map(|gradient| &gradient.by_samples).map(|derivative| derivative / NS));
    let error = found.value_error.max(found.derivative_error / NS);
    Ok(Answer { outputs, more: vec![("error_figure", error)], csv: None })
}

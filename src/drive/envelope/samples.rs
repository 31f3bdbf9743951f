//! Reads a list of samples, with or without times of its own, and says what stands between them.
//!
//! A list is spread over `length`: n equal parts where the values are held, n - 1 equal steps where the last value stands at
//! the end. With times, the last one is the end, but for `hold`, where `length` says where the last value ends.

use std::sync::Arc;

use super::band_limited::BandLimited;
use super::held::Held;
use super::linear::Linear;
use super::{Between, Curve, Parameters, ShapeFault};

/// By how much steps may differ, as a share of a step, and a length from the last time, as a share of it.
const EQUAL: f64 = 1e-9;

/// Reads `samples`, their times, `length` and `between`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    let between = parameters.between.ok_or(ShapeFault::Missing { key: "between" })?;
    let values = parameters.samples.clone().ok_or(ShapeFault::Missing { key: "samples" })?;
    let needed = if between == Between::Hold { 1 } else { 2 };
    if values.len() < needed {
        return Err(ShapeFault::TooFewSamples { found: values.len(), needed });
    }
    if let Some((index, value)) = values.iter().enumerate().find(|(_, value)| !value.is_finite()) {
        return Err(ShapeFault::SampleNotFinite { index, value: *value });
    }
    if let Some(times_s) = &parameters.sample_times_s {
        refuse_disorder(times_s, values.len())?;
    }
    match between {
        Between::Hold => {
            let length_s = parameters.length()?;
            let starts_s = match &parameters.sample_times_s {
                Some(times_s) => held_times(times_s, length_s)?,
                None => equal_parts(length_s, values.len()),
            };
            Ok(Arc::new(Held { starts_s, values, length_s }))
        }
        Between::Linear => {
            let times_s = match &parameters.sample_times_s {
                Some(times_s) => {
                    end_s(times_s, parameters.length_s)?;
                    times_s.clone()
                }
                None => equal_steps(parameters.length()?, values.len()),
            };
            Ok(Arc::new(Linear { times_s, values }))
        }
        Between::BandLimited => {
            let length_s = match &parameters.sample_times_s {
                Some(times_s) => {
                    let length_s = end_s(times_s, parameters.length_s)?;
                    refuse_unequal(times_s)?;
                    length_s
                }
                None => parameters.length()?,
            };
            Ok(Arc::new(BandLimited::new(values, length_s)))
        }
    }
}

/// Starts of `n` equal parts of `length_s`.
fn equal_parts(length_s: f64, n: usize) -> Arc<[f64]> {
    (0..n).map(|k| k as f64 * length_s / n as f64).collect()
}

/// `n` times in equal steps from 0 to `length_s`, which the last one is to the bit.
fn equal_steps(length_s: f64, n: usize) -> Arc<[f64]> {
    (0..n).map(|k| if k == n - 1 { length_s } else { k as f64 * length_s / (n - 1) as f64 }).collect()
}

/// The times are as many as the samples and ascend from 0.
fn refuse_disorder(times_s: &[f64], samples: usize) -> Result<(), ShapeFault> {
    if times_s.len() != samples {
        return Err(ShapeFault::TimesNotAsMany { times: times_s.len(), samples });
    }
    if times_s[0] != 0.0 {
        return Err(ShapeFault::FirstTimeNotZero { time_s: times_s[0] });
    }
    for (before, pair) in times_s.windows(2).enumerate() {
        if !(pair[1].is_finite() && pair[1] > pair[0]) {
            return Err(ShapeFault::TimesNotAscending { index: before + 1, time_s: pair[1] });
        }
    }
    Ok(())
}

/// The times as starts of values of which the last ends at `length_s`.
fn held_times(times_s: &Arc<[f64]>, length_s: f64) -> Result<Arc<[f64]>, ShapeFault> {
    let last_s = times_s[times_s.len() - 1];
    if length_s <= last_s {
        return Err(ShapeFault::EndsBeforeLastSample { length_s, last_s });
    }
    Ok(times_s.clone())
}

/// The last time, which a length beside it must not contradict, s.
fn end_s(times_s: &[f64], length_s: Option<f64>) -> Result<f64, ShapeFault> {
    let last_s = times_s[times_s.len() - 1];
    match length_s {
        Some(length_s) if (length_s - last_s).abs() > EQUAL * last_s || length_s.is_nan() => {
            Err(ShapeFault::LengthDisagrees { length_s, last_s })
        }
        _ => Ok(last_s),
    }
}

/// Every step is the mean one.
fn refuse_unequal(times_s: &[f64]) -> Result<(), ShapeFault> {
    let equal_s = times_s[times_s.len() - 1] / (times_s.len() - 1) as f64;
    for (before, pair) in times_s.windows(2).enumerate() {
        let step_s = pair[1] - pair[0];
        if (step_s - equal_s).abs() > EQUAL * equal_s {
            return Err(ShapeFault::UnequalSteps { index: before + 1, step_s, equal_s });
        }
    }
    Ok(())
}

//! Every family against outside numbers: `tests/reference/envelopes.py` (mpmath, 50 digits, from the defining formulas).
#![allow(clippy::unwrap_used)]

use std::sync::Arc;

use serde_json::Value;

use super::{build, Between, Curve, Edge, Parameters};

const REFERENCE: &str = include_str!("../../../tests/reference/envelopes.json");

pub(super) struct Case {
    pub name: String,
    pub curve: Arc<dyn Curve>,
    numbers: Value,
}

impl Case {
    fn number(&self, key: &str) -> f64 {
        self.numbers[key].as_f64().unwrap()
    }

    pub fn list(&self, key: &str) -> Arc<[f64]> {
        list(&self.numbers[key]).unwrap()
    }
}

fn list(value: &Value) -> Option<Arc<[f64]>> {
    value.as_array().map(|items| items.iter().map(|item| item.as_f64().unwrap()).collect())
}

fn parameters(keys: &Value) -> Parameters {
    Parameters {
        length_s: keys["length"].as_f64(),
        rise_s: keys["rise"].as_f64(),
        field_sigma_s: keys["field_sigma"].as_f64(),
        field_fwhm_s: keys["field_fwhm"].as_f64(),
        intensity_fwhm_s: keys["intensity_fwhm"].as_f64(),
        sech_time_s: keys["sech_time"].as_f64(),
        rise_10_90_s: keys["rise_10_90"].as_f64(),
        cut_at_s: keys["cut_at"].as_f64(),
        edge: keys["edge"].as_str().map(|word| if word == "lift" { Edge::Lift } else { Edge::Step }),
        samples: list(&keys["samples"]),
        sample_times_s: list(&keys["times"]),
        between: keys["between"].as_str().map(|word| match word {
            "hold" => Between::Hold,
            "linear" => Between::Linear,
            _ => Between::BandLimited,
        }),
    }
}

pub(super) fn cases() -> Vec<Case> {
    let table: Value = serde_json::from_str(REFERENCE).unwrap();
    let case = |entry: &Value| {
        let word = entry["word"].as_str().unwrap();
        let curve = build(word, &parameters(&entry["parameters"])).unwrap();
        Case { name: format!("{word} {}", entry["parameters"]), curve, numbers: entry.clone() }
    };
    table.as_array().unwrap().iter().map(case).collect()
}

#[track_caller]
pub(super) fn near(what: &str, got: f64, want: f64, tolerance: f64) {
    assert!((got - want).abs() <= tolerance, "{what}: {got:e} against {want:e}, {:.1e} apart", (got - want).abs());
}

/// Relative to the value itself, so also where it goes to 0 (down to 1e-60; the digits of exp go with its argument); reached
/// 2.4e-15. Sums that cancel there (lifted error-function
/// edges, band-limited samples) are held to the peak; reached 1.3e-15.
#[test]
fn ref_values() {
    for case in cases() {
        let cancels = case.name.starts_with("error") && case.name.contains("lift") || case.name.contains("band limited");
        for (t, value) in case.list("times").iter().zip(case.list("values").iter()) {
            let size = if cancels { 1.0 } else { value.abs().max(1e-60) };
            near(&format!("{} at {t:e}", case.name), case.curve.at(*t), *value, 8e-15 * size);
        }
    }
}

/// Relative to the steepest place; reached 1.5e-15.
#[test]
fn ref_slopes() {
    for case in cases() {
        let slopes = case.list("slopes");
        let steepest = slopes.iter().fold(0.0, |most: f64, slope| most.max(slope.abs()));
        for (t, slope) in case.list("times").iter().zip(slopes.iter()) {
            near(&format!("{} at {t:e}", case.name), case.curve.slope(*t), *slope, 8e-15 * steepest);
        }
    }
}

/// Relative; reached 2.7e-16.
#[test]
fn ref_lengths_areas_and_largest() {
    for case in cases() {
        let check = |key: &str, got: f64| near(&format!("{key} of {}", case.name), got, case.number(key), 2e-15 * case.number(key).abs());
        check("length", case.curve.length_s());
        check("area", case.curve.area_s());
        check("uncut_area", case.curve.uncut_area_s());
        check("largest", case.curve.largest());
    }
}

/// Microseconds, in s.
pub(super) fn us(value: f64) -> Option<f64> {
    Some(value * 1e-6)
}

/// Closed forms at 50 digits (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964)): signed area in turns at
/// a peak of 1.3 MHz, step at the start, area missing by the cut.
#[test]
fn exact_turns_of_shapes() {
    let flat = |length: f64| Parameters { length_s: us(length), ..Default::default() };
    let edges = |length: f64, rise: f64| Parameters { rise_s: us(rise), ..flat(length) };
    let cut = |cut_at: f64, edge: Edge| Parameters { cut_at_s: us(cut_at), edge: Some(edge), ..Default::default() };
    let samples = |length: f64, values: &[f64], between: Between| Parameters {
        samples: Some(Arc::from(values)),
        between: Some(between),
        ..flat(length)
    };
    let (step, lift) = (Edge::Step, Edge::Lift);
    type Row = (&'static str, Parameters, f64, Option<f64>, Option<f64>);
    let table: Vec<Row> = vec![
        ("square", flat(0.4), 0.52, None, Some(0.0)),
        ("raised cosine", flat(0.9), 0.585, Some(0.0), Some(0.0)),
        ("sine squared", flat(0.7), 0.455, Some(0.0), Some(0.0)),
        ("blackman", flat(1.0), 0.546, Some(0.0), Some(0.0)),
        ("cosine edges", edges(1.0, 0.3), 0.91, Some(0.0), Some(0.0)),
        ("trapezoid", edges(0.8, 0.15), 0.845, Some(0.0), Some(0.0)),
        (
            "gaussian",
            Parameters { field_sigma_s: us(0.21), ..cut(0.5, step) },
            0.6724929005245657,
            Some(0.058749824089630545),
            Some(0.01726794399617562),
        ),
        ("gaussian", Parameters { field_fwhm_s: us(0.4), ..cut(0.5, lift) }, 0.5417642171202375, Some(0.0), None),
        ("gaussian", Parameters { intensity_fwhm_s: us(0.3), ..cut(0.6, step) }, 0.586590168677679, None, None),
        (
            "sech",
            Parameters { sech_time_s: us(0.12), ..cut(0.6, step) },
            0.4858840386585279,
            Some(0.013475282221304558),
            Some(0.008578890744124561),
        ),
        ("sech", Parameters { sech_time_s: us(0.12), ..cut(0.4, lift) }, 0.423938432798187, Some(0.0), None),
        ("error-function edges", Parameters { length_s: us(0.8), rise_10_90_s: us(0.15), ..cut(0.6, step) }, 1.03998768154617, None, None),
        (
            "exponential edges",
            Parameters { length_s: us(0.8), rise_10_90_s: us(0.22), ..cut(1.2, step) },
            1.0399559067987088,
            Some(0.0),
            None,
        ),
        ("samples", samples(0.8, &[0.25, 1.0, -0.5, 0.5], Between::Hold), 0.325, Some(0.25), Some(0.0)),
        ("samples", samples(0.9, &[0.0, 1.0, 0.4, 0.0], Between::Linear), 0.546, Some(0.0), Some(0.0)),
    ];
    for (word, parameters, turn, edge_step, missing) in table {
        let curve = build(word, &parameters).unwrap();
        near(word, 1.3e6 * curve.area_s(), turn, 2e-15);
        if let Some(edge_step) = edge_step {
            near(word, curve.at(0.0) / curve.largest(), edge_step, 2e-16);
        }
        if let Some(missing) = missing {
            near(word, 1.0 - curve.area_s() / curve.uncut_area_s(), missing, 1e-15);
        }
    }
}

//! Every family against outside numbers (`tests/reference/envelopes.py`: mpmath, 50 digits, from the defining formulas), against
//! laws that hold for all of them, and the refusals.

use std::sync::Arc;

use serde_json::Value;

use super::quadrature::integral;
use super::{build, Between, Curve, Edge, Parameters, Pieces, ShapeFault, FAMILIES};

const REFERENCE: &str = include_str!("../../../tests/reference/envelopes.json");

struct Case {
    name: String,
    curve: Arc<dyn Curve>,
    numbers: Value,
}

impl Case {
    fn number(&self, key: &str) -> f64 {
        self.numbers[key].as_f64().unwrap()
    }

    fn list(&self, key: &str) -> Arc<[f64]> {
        list(&self.numbers[key]).unwrap()
    }
}

fn list(value: &Value) -> Option<Arc<[f64]>> {
    value
        .as_array()
        .map(|items| items.iter().map(|item| item.as_f64().unwrap()).collect())
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
        edge: keys["edge"]
            .as_str()
            .map(|word| if word == "lift" { Edge::Lift } else { Edge::Step }),
        samples: list(&keys["samples"]),
        sample_times_s: list(&keys["times"]),
        between: keys["between"].as_str().map(|word| match word {
            "hold" => Between::Hold,
            "linear" => Between::Linear,
            _ => Between::BandLimited,
        }),
    }
}

fn cases() -> Vec<Case> {
    let table: Value = serde_json::from_str(REFERENCE).unwrap();
    let case = |entry: &Value| {
        let word = entry["word"].as_str().unwrap();
        let curve = build(word, &parameters(&entry["parameters"])).unwrap();
        Case {
            name: format!("{word} {}", entry["parameters"]),
            curve,
            numbers: entry.clone(),
        }
    };
    table.as_array().unwrap().iter().map(case).collect()
}

#[track_caller]
fn near(what: &str, got: f64, want: f64, tolerance: f64) {
    assert!(
        (got - want).abs() <= tolerance,
        "{what}: {got:e} against {want:e}, {:.1e} apart",
        (got - want).abs()
    );
}

/// The stretches between the kinks (or the starts of held values), s.
fn stretches(curve: &dyn Curve) -> Vec<(f64, f64)> {
    let inner_s: Arc<[f64]> = match curve.pieces() {
        Pieces::Constant(_) => Arc::from([]),
        Pieces::Held { starts_s, .. } => Arc::from(&starts_s[1..]),
        Pieces::Smooth { kinks_s } => kinks_s,
    };
    let mut bounds = vec![0.0];
    bounds.extend(inner_s.iter());
    bounds.push(curve.length_s());
    bounds.windows(2).map(|pair| (pair[0], pair[1])).collect()
}

/// Gauss's rule on many panels of a stretch; their number is prime, so that no forgotten kink falls on a bound by chance.
fn integral_over((from, to): (f64, f64), f: impl Fn(f64) -> f64) -> f64 {
    const PANELS: usize = 1999;
    let bound = |panel: usize| from + (to - from) * panel as f64 / PANELS as f64;
    (0..PANELS).map(|panel| integral(bound(panel), bound(panel + 1), &f)).sum()
}

/// Relative to the value itself, so also where it goes to 0 (down to 1e-100, below which exp has fewer digits); reached
/// 2.4e-15. Sums that cancel there (lifted error-function
/// edges, band-limited samples) are held to the peak; reached 1.3e-15.
#[test]
fn ref_values() {
    for case in cases() {
        let cancels = case.name.starts_with("error") && case.name.contains("lift") || case.name.contains("band limited");
        for (t, value) in case.list("times").iter().zip(case.list("values").iter()) {
            let size = if cancels { 1.0 } else { value.abs().max(1e-100) };
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
        let check = |key: &str, got: f64| {
            near(
                &format!("{key} of {}", case.name),
                got,
                case.number(key),
                2e-15 * case.number(key).abs(),
            )
        };
        check("length", case.curve.length_s());
        check("area", case.curve.area_s());
        check("uncut_area", case.curve.uncut_area_s());
        check("largest", case.curve.largest());
    }
}

fn us(value: f64) -> Option<f64> {
    Some(value * 1e-6)
}

/// Closed forms at 50 digits (M. Abramowitz and I. A. Stegun, Handbook of Mathematical Functions (1964)): signed area in turns at
/// a peak of 1.3 MHz, step at the start, area missing by the cut.
#[test]
fn exact_turns_of_shapes() {
    let flat = |length: f64| Parameters {
        length_s: us(length),
        ..Default::default()
    };
    let edges = |length: f64, rise: f64| Parameters {
        rise_s: us(rise),
        ..flat(length)
    };
    let cut = |cut_at: f64, edge: Edge| Parameters {
        cut_at_s: us(cut_at),
        edge: Some(edge),
        ..Default::default()
    };
    let samples = |length: f64, values: &[f64], between: Between| Parameters {
        samples: Some(Arc::from(values)),
        between: Some(between),
        ..flat(length)
    };
    let (step, lift) = (Edge::Step, Edge::Lift);
    let table: Vec<(&str, Parameters, f64, Option<f64>, Option<f64>)> = vec![
        ("square", flat(0.4), 0.52, None, Some(0.0)),
        ("raised cosine", flat(0.9), 0.585, Some(0.0), Some(0.0)),
        ("sine squared", flat(0.7), 0.455, Some(0.0), Some(0.0)),
        ("blackman", flat(1.0), 0.546, Some(0.0), Some(0.0)),
        ("cosine edges", edges(1.0, 0.3), 0.91, Some(0.0), Some(0.0)),
        ("trapezoid", edges(0.8, 0.15), 0.845, Some(0.0), Some(0.0)),
        (
            "gaussian",
            Parameters {
                field_sigma_s: us(0.21),
                ..cut(0.5, step)
            },
            0.6724929005245657,
            Some(0.058749824089630545),
            Some(0.01726794399617562),
        ),
        (
            "gaussian",
            Parameters {
                field_fwhm_s: us(0.4),
                ..cut(0.5, lift)
            },
            0.5417642171202375,
            Some(0.0),
            None,
        ),
        (
            "gaussian",
            Parameters {
                intensity_fwhm_s: us(0.3),
                ..cut(0.6, step)
            },
            0.586590168677679,
            None,
            None,
        ),
        (
            "sech",
            Parameters {
                sech_time_s: us(0.12),
                ..cut(0.6, step)
            },
            0.4858840386585279,
            Some(0.013475282221304558),
            Some(0.008578890744124561),
        ),
        (
            "sech",
            Parameters {
                sech_time_s: us(0.12),
                ..cut(0.4, lift)
            },
            0.423938432798187,
            Some(0.0),
            None,
        ),
        (
            "error-function edges",
            Parameters {
                length_s: us(0.8),
                rise_10_90_s: us(0.15),
                ..cut(0.6, step)
            },
            1.03998768154617,
            None,
            None,
        ),
        (
            "exponential edges",
            Parameters {
                length_s: us(0.8),
                rise_10_90_s: us(0.22),
                ..cut(1.2, step)
            },
            1.0399559067987088,
            Some(0.0),
            None,
        ),
        (
            "samples",
            samples(0.8, &[0.25, 1.0, -0.5, 0.5], Between::Hold),
            0.325,
            Some(0.25),
            Some(0.0),
        ),
        (
            "samples",
            samples(0.9, &[0.0, 1.0, 0.4, 0.0], Between::Linear),
            0.546,
            Some(0.0),
            Some(0.0),
        ),
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

/// A kink that `pieces` forgot would cost the rule its order: the sharp tolerance is a test of the kinks too.
#[test]
fn prop_area_is_the_integral_of_the_value() {
    for case in cases() {
        let curve = case.curve.as_ref();
        let whole: f64 = stretches(curve)
            .into_iter()
            .map(|stretch| integral_over(stretch, |t| curve.at(t)))
            .sum();
        near(&case.name, whole, curve.area_s(), 1e-14 * curve.largest() * curve.length_s());
    }
}

/// Over each stretch, and over a part of it. Held values jump, and are left out.
#[test]
fn prop_slope_integrates_to_the_value() {
    for case in cases() {
        let curve = case.curve.as_ref();
        if matches!(curve.pieces(), Pieces::Held { .. }) {
            continue;
        }
        for (from, to) in stretches(curve) {
            for end in [to, from + 0.37 * (to - from)] {
                let rise = curve.at(end) - curve.at(from);
                near(
                    &case.name,
                    integral_over((from, end), |t| curve.slope(t)),
                    rise,
                    5e-14 * curve.largest(),
                );
            }
        }
    }
}

/// At each kink the slope or its derivative jumps; they ascend strictly inside the pulse, and a held value changes at its start.
#[test]
fn prop_pieces_stand_where_the_curve_breaks() {
    let mut kinks = 0;
    for case in cases() {
        let curve = case.curve.as_ref();
        let length_s = curve.length_s();
        for (from, to) in stretches(curve) {
            assert!(from < to, "{}: a stretch from {from:e} to {to:e}", case.name);
        }
        match curve.pieces() {
            Pieces::Constant(value) => assert_eq!(curve.at(0.3 * length_s), value),
            Pieces::Held { starts_s, values } => {
                for (start, value) in starts_s.iter().zip(values.iter()) {
                    assert_eq!(curve.at(*start), *value, "{} at {start:e}", case.name);
                }
                for (start, value) in starts_s[1..].iter().zip(values.iter()) {
                    assert_eq!(curve.at(start.next_down()), *value, "{} before {start:e}", case.name);
                }
            }
            Pieces::Smooth { kinks_s } => {
                let step_s = 1e-5 * length_s;
                let slope = |t: f64| length_s * curve.slope(t);
                for kink in kinks_s.iter() {
                    let jump = slope(kink + step_s) - slope(kink - step_s);
                    let left = slope(kink - step_s) - slope(kink - 2.0 * step_s);
                    let right = slope(kink + 2.0 * step_s) - slope(kink + step_s);
                    let bend = (right - left) / 1e-5;
                    assert!(jump.abs() > 0.1 || bend.abs() > 10.0, "{}: nothing breaks at {kink:e}", case.name);
                    // From the right at the kink itself.
                    near(&case.name, slope(*kink), slope(kink + 1e-9 * length_s), 1e-5);
                    kinks += 1;
                }
            }
        }
    }
    assert_eq!(
        kinks,
        2 + 2 + 1 + 2 + 2,
        "cosine edges, trapezoid, exponential edges, two lists with lines"
    );
}

/// Nothing on a fine grid is above `largest`, and something comes close to it.
#[test]
fn prop_largest_is_reached_and_not_passed() {
    for case in cases() {
        let curve = case.curve.as_ref();
        let times: Vec<f64> = (0..=40_000).map(|i| curve.length_s() * f64::from(i) / 40_000.0).collect();
        let mut values = vec![0.0; times.len()];
        curve.fill(&times, &mut values);
        let most = values.iter().fold(0.0, |most: f64, value| most.max(value.abs()));
        assert!(
            most <= curve.largest() * (1.0 + 4e-16),
            "{}: {most} passes {}",
            case.name,
            curve.largest()
        );
        near(&case.name, most, curve.largest(), 1e-4 * curve.largest());
    }
}

#[test]
fn prop_fill_is_at() {
    for case in cases() {
        let times = case.list("times");
        let mut out = vec![0.0; times.len()];
        case.curve.fill(&times, &mut out);
        for (t, value) in times.iter().zip(out) {
            assert_eq!(case.curve.at(*t), value, "{} at {t:e}", case.name);
        }
    }
}

/// The curves that are even about their centre, to a few roundings of the peak.
#[test]
fn prop_even_curves_are_even() {
    for case in cases() {
        if case.name.starts_with("samples") || case.name.starts_with("exponential") {
            continue;
        }
        let length_s = case.curve.length_s();
        for share in [0.01, 0.13, 0.29, 0.42, 0.4999] {
            let (early_s, late_s) = (share * length_s, length_s - share * length_s);
            // Two roundings of the time, seen through the slope.
            let slack = 4e-16 * (1.0 + length_s * case.curve.slope(early_s).abs());
            near(&case.name, case.curve.at(early_s), case.curve.at(late_s), slack);
        }
    }
}

/// One mistake each, and what must be said about it.
#[test]
fn every_fault_is_named() {
    let square = Parameters {
        length_s: Some(1e-6),
        ..Default::default()
    };
    let gaussian = Parameters {
        field_sigma_s: us(0.2),
        cut_at_s: us(0.5),
        edge: Some(Edge::Step),
        ..Default::default()
    };
    let list = |values: &[f64], times: Option<&[f64]>, between: Between| Parameters {
        samples: Some(Arc::from(values)),
        sample_times_s: times.map(Arc::from),
        between: Some(between),
        ..Default::default()
    };
    let fault = |word: &str, parameters: Parameters| build(word, &parameters).map(|_| ()).unwrap_err();
    let widths: &[&str] = &["field_sigma", "field_fwhm", "intensity_fwhm"];
    use ShapeFault::*;
    assert_eq!(fault("formula", square.clone()), UnknownShape { word: "formula".into() });
    assert_eq!(fault("square", Parameters::default()), Missing { key: "length" });
    assert_eq!(fault("trapezoid", square.clone()), Missing { key: "rise" });
    assert_eq!(
        fault(
            "gaussian",
            Parameters {
                edge: None,
                ..gaussian.clone()
            }
        ),
        Missing { key: "edge" }
    );
    assert_eq!(fault("sech", gaussian.clone()), Missing { key: "sech_time" });
    assert_eq!(
        fault(
            "samples",
            Parameters {
                between: None,
                ..list(&[1.0], None, Between::Hold)
            }
        ),
        Missing { key: "between" }
    );
    assert_eq!(fault("samples", list(&[1.0], None, Between::Hold)), Missing { key: "length" });
    assert_eq!(
        fault(
            "gaussian",
            Parameters {
                field_sigma_s: None,
                ..gaussian.clone()
            }
        ),
        NotOneOf {
            keys: widths,
            given: vec![]
        }
    );
    assert_eq!(
        fault(
            "gaussian",
            Parameters {
                intensity_fwhm_s: us(0.3),
                ..gaussian.clone()
            }
        ),
        NotOneOf {
            keys: widths,
            given: vec!["field_sigma", "intensity_fwhm"]
        }
    );
    for value in [0.0, -1e-9, f64::INFINITY] {
        assert_eq!(
            fault(
                "blackman",
                Parameters {
                    length_s: Some(value),
                    ..Default::default()
                }
            ),
            NotPositive { key: "length", value }
        );
        assert_eq!(
            fault(
                "gaussian",
                Parameters {
                    field_sigma_s: Some(value),
                    ..gaussian.clone()
                }
            ),
            NotPositive { key: "field_sigma", value }
        );
    }
    assert!(matches!(
        fault("square", Parameters { length_s: Some(f64::NAN), ..Default::default() }),
        NotPositive { key: "length", value } if value.is_nan()
    ));
    for word in ["cosine edges", "trapezoid"] {
        let long = Parameters {
            rise_s: us(0.51),
            ..square.clone()
        };
        assert_eq!(
            fault(word, long),
            EdgesTooLong {
                rise_s: 0.51e-6,
                length_s: 1e-6
            }
        );
    }
    let flat = Parameters {
        cut_at_s: us(1e-4),
        edge: Some(Edge::Lift),
        ..gaussian.clone()
    };
    assert!(matches!(fault("gaussian", flat.clone()), FlatLift { pedestal, peak: 1.0 } if pedestal > 0.999_999));
    assert!(matches!(
        fault(
            "sech",
            Parameters {
                sech_time_s: us(0.2),
                ..flat
            }
        ),
        FlatLift { peak: 1.0, .. }
    ));
    let inside = Parameters {
        rise_10_90_s: us(0.05),
        cut_at_s: us(0.3),
        edge: Some(Edge::Lift),
        ..square.clone()
    };
    assert!(matches!(fault("error-function edges", inside.clone()), FlatLift { .. }));
    assert_eq!(fault("exponential edges", inside), NothingToLift);
    assert_eq!(
        fault("samples", list(&[], None, Between::Hold)),
        TooFewSamples { found: 0, needed: 1 }
    );
    for between in [Between::Linear, Between::BandLimited] {
        assert_eq!(fault("samples", list(&[1.0], None, between)), TooFewSamples { found: 1, needed: 2 });
    }
    assert!(matches!(
        fault("samples", list(&[1.0, f64::NAN], None, Between::Linear)),
        SampleNotFinite { index: 1, value } if value.is_nan()
    ));
    assert_eq!(
        fault("samples", list(&[1.0, 0.5], Some(&[0.0]), Between::Linear)),
        TimesNotAsMany { times: 1, samples: 2 }
    );
    assert_eq!(
        fault("samples", list(&[1.0, 0.5], Some(&[0.1, 0.2]), Between::Linear)),
        FirstTimeNotZero { time_s: 0.1 }
    );
    assert_eq!(
        fault("samples", list(&[1.0, 0.5, 0.2], Some(&[0.0, 0.2, 0.2]), Between::Linear)),
        TimesNotAscending { index: 2, time_s: 0.2 }
    );
    assert!(matches!(
        fault("samples", list(&[1.0, 0.5, 0.2], Some(&[0.0, 0.2, 0.5]), Between::BandLimited)),
        UnequalSteps {
            index: 1,
            step_s: 0.2,
            equal_s: 0.25
        }
    ));
    let held = Parameters {
        length_s: Some(0.2),
        ..list(&[1.0, 0.5], Some(&[0.0, 0.2]), Between::Hold)
    };
    assert_eq!(
        fault("samples", held),
        EndsBeforeLastSample {
            length_s: 0.2,
            last_s: 0.2
        }
    );
    let longer = Parameters {
        length_s: Some(0.3),
        ..list(&[1.0, 0.5], Some(&[0.0, 0.2]), Between::Linear)
    };
    assert_eq!(
        fault("samples", longer),
        LengthDisagrees {
            length_s: 0.3,
            last_s: 0.2
        }
    );
}

/// Edges that fill the pulse but for the rounding of the two numbers are accepted, and steps of a decimal file are equal.
#[test]
fn regress_rounded_decimals_are_not_faults() {
    let edges = Parameters {
        length_s: us(0.3),
        rise_s: us(0.15),
        ..Default::default()
    };
    for word in ["cosine edges", "trapezoid"] {
        let curve = build(word, &edges).unwrap();
        near(word, curve.at(0.5 * curve.length_s()), 1.0, 0.0);
        near(word, curve.area_s(), 0.15e-6, 1e-21);
    }
    let times: Vec<f64> = (0..2000).map(|k| format!("{}e-10", 7 * k).parse().unwrap()).collect();
    let file = Parameters {
        samples: Some((0..2000).map(|k| f64::from(k).sin()).collect()),
        sample_times_s: Some(times.into()),
        between: Some(Between::BandLimited),
        ..Default::default()
    };
    assert!(build("samples", &file).is_ok());
}

/// Every word builds from the keys that its row names, and from no fewer.
#[test]
fn rows_of_the_table_name_their_keys() {
    let all = Parameters {
        length_s: us(0.8),
        rise_s: us(0.1),
        field_sigma_s: us(0.2),
        sech_time_s: us(0.2),
        rise_10_90_s: us(0.1),
        cut_at_s: us(0.6),
        edge: Some(Edge::Step),
        samples: Some(Arc::from([0.0, 1.0, 0.5])),
        between: Some(Between::BandLimited),
        ..Default::default()
    };
    for family in FAMILIES {
        let has = |key: &str| family.keys.contains(&key);
        let only = Parameters {
            length_s: all.length_s.filter(|_| has("length")),
            rise_s: all.rise_s.filter(|_| has("rise")),
            field_sigma_s: all.field_sigma_s.filter(|_| has("field_sigma")),
            sech_time_s: all.sech_time_s.filter(|_| has("sech_time")),
            rise_10_90_s: all.rise_10_90_s.filter(|_| has("rise_10_90")),
            cut_at_s: all.cut_at_s.filter(|_| has("cut_at")),
            edge: all.edge.filter(|_| has("edge")),
            samples: all.samples.clone().filter(|_| has("samples")),
            between: all.between.filter(|_| has("between")),
            ..Default::default()
        };
        let curve = build(family.word, &only).unwrap();
        assert_eq!(
            curve.area_s(),
            build(family.word, &all).unwrap().area_s(),
            "{} reads a key it does not name",
            family.word
        );
        assert!(build(family.word, &Parameters::default()).is_err());
    }
}

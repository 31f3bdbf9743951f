//! What is refused, what only looks like a mistake, and the keys of the table.
#![allow(clippy::unwrap_used)]

use std::sync::Arc;

use super::reference_tests::{near, us};
use super::{build, Between, Edge, Parameters, ShapeFault, FAMILIES};

/// One mistake each, and what must be said about it.
#[test]
fn every_fault_is_named() {
    let square = Parameters { length_s: Some(1e-6), ..Default::default() };
    let gaussian = Parameters { field_sigma_s: us(0.2), cut_at_s: us(0.5), edge: Some(Edge::Step), ..Default::default() };
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
    assert_eq!(fault("gaussian", Parameters { edge: None, ..gaussian.clone() }), Missing { key: "edge" });
    assert_eq!(fault("sech", gaussian.clone()), Missing { key: "sech_time" });
    assert_eq!(fault("samples", Parameters { between: None, ..list(&[1.0], None, Between::Hold) }), Missing { key: "between" });
    assert_eq!(fault("samples", list(&[1.0], None, Between::Hold)), Missing { key: "length" });
    assert_eq!(fault("gaussian", Parameters { field_sigma_s: None, ..gaussian.clone() }), NotOneOf { keys: widths, given: vec![] });
    assert_eq!(
        fault("gaussian", Parameters { intensity_fwhm_s: us(0.3), ..gaussian.clone() }),
        NotOneOf { keys: widths, given: vec!["field_sigma", "intensity_fwhm"] }
    );
    for value in [0.0, -1e-9, f64::INFINITY] {
        assert_eq!(fault("blackman", Parameters { length_s: Some(value), ..Default::default() }), NotPositive { key: "length", value });
        assert_eq!(
            fault("gaussian", Parameters { field_sigma_s: Some(value), ..gaussian.clone() }),
            NotPositive { key: "field_sigma", value }
        );
    }
    assert!(matches!(
        fault("square", Parameters { length_s: Some(f64::NAN), ..Default::default() }),
        NotPositive { key: "length", value } if value.is_nan()
    ));
    for word in ["cosine edges", "trapezoid"] {
        let long = Parameters { rise_s: us(0.51), ..square.clone() };
        assert_eq!(fault(word, long), EdgesTooLong { rise_s: 0.51e-6, length_s: 1e-6 });
    }
    let flat = Parameters { cut_at_s: us(1e-4), edge: Some(Edge::Lift), ..gaussian.clone() };
    assert!(matches!(fault("gaussian", flat.clone()), FlatLift { pedestal, peak: 1.0 } if pedestal > 0.999_999));
    assert!(matches!(fault("sech", Parameters { sech_time_s: us(0.2), ..flat }), FlatLift { peak: 1.0, .. }));
    let inside = Parameters { rise_10_90_s: us(0.05), cut_at_s: us(0.3), edge: Some(Edge::Lift), ..square.clone() };
    assert!(matches!(fault("error-function edges", inside.clone()), FlatLift { .. }));
    assert_eq!(fault("exponential edges", inside), NothingToLift);
    assert_eq!(fault("samples", list(&[], None, Between::Hold)), TooFewSamples { found: 0, needed: 1 });
    for between in [Between::Linear, Between::BandLimited] {
        assert_eq!(fault("samples", list(&[1.0], None, between)), TooFewSamples { found: 1, needed: 2 });
    }
    assert!(matches!(
        fault("samples", list(&[1.0, f64::NAN], None, Between::Linear)),
        SampleNotFinite { index: 1, value } if value.is_nan()
    ));
    assert_eq!(fault("samples", list(&[1.0, 0.5], Some(&[0.0]), Between::Linear)), TimesNotAsMany { times: 1, samples: 2 });
    assert_eq!(fault("samples", list(&[1.0, 0.5], Some(&[0.1, 0.2]), Between::Linear)), FirstTimeNotZero { time_s: 0.1 });
    assert_eq!(
        fault("samples", list(&[1.0, 0.5, 0.2], Some(&[0.0, 0.2, 0.2]), Between::Linear)),
        TimesNotAscending { index: 2, time_s: 0.2 }
    );
    assert!(matches!(
        fault("samples", list(&[1.0, 0.5, 0.2], Some(&[0.0, 0.2, 0.5]), Between::BandLimited)),
        UnequalSteps { index: 1, step_s: 0.2, equal_s: 0.25 }
    ));
    let held = Parameters { length_s: Some(0.2), ..list(&[1.0, 0.5], Some(&[0.0, 0.2]), Between::Hold) };
    assert_eq!(fault("samples", held), EndsBeforeLastSample { length_s: 0.2, last_s: 0.2 });
    let longer = Parameters { length_s: Some(0.3), ..list(&[1.0, 0.5], Some(&[0.0, 0.2]), Between::Linear) };
    assert_eq!(fault("samples", longer), LengthDisagrees { length_s: 0.3, last_s: 0.2 });
}

/// Edges that fill the pulse but for the rounding of the two numbers are accepted, and steps of a decimal file are equal.
#[test]
fn regress_rounded_decimals_are_not_faults() {
    let edges = Parameters { length_s: us(0.3), rise_s: us(0.15), ..Default::default() };
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
        assert_eq!(curve.area_s(), build(family.word, &all).unwrap().area_s(), "{} reads a key it does not name", family.word);
        assert!(build(family.word, &Parameters::default()).is_err());
    }
}

//! Laws that hold for every family, over the curves of the reference table.

use std::sync::Arc;

use super::reference_tests::{cases, near};
use super::{Curve, Pieces};
use crate::quadrature::integral;

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

/// A kink that `pieces` forgot would cost the rule its order: the sharp tolerance is a test of the kinks too.
#[test]
fn prop_area_is_the_integral_of_the_value() {
    for case in cases() {
        let curve = case.curve.as_ref();
        let whole: f64 = stretches(curve).into_iter().map(|stretch| integral_over(stretch, |t| curve.at(t))).sum();
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
                near(&case.name, integral_over((from, end), |t| curve.slope(t)), rise, 5e-14 * curve.largest());
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
    assert_eq!(kinks, 2 + 2 + 1 + 2 + 2, "cosine edges, trapezoid, exponential edges, two lists with lines");
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
        assert!(most <= curve.largest() * (1.0 + 4e-16), "{}: {most} passes {}", case.name, curve.largest());
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

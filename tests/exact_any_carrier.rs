//! Laboratory-frame pulses of 400 to 300 000 carrier periods, right to the 1e-9 that is asked for, with nothing else set by the user.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use nalgebra::Matrix2;
use num_complex::Complex64;
use nutate::units::{cis_turns, sin_cos_turns, RAD_PER_TURN};
use rig::{close, last, run};

type Two = Matrix2<Complex64>;

/// A square pulse of `periods` carrier periods in the laboratory frame; area and detuning in turns over the whole pulse.
fn pulse(form: &str, carrier: &str, periods: u32, area: f64, detuning: f64) -> f64 {
    let text = format!(
        "format: 1
numbers:
  carrier: {carrier}
  length: {periods} turn / carrier
system:
  levels: {{down: 0 Hz, up: carrier - {detuning} turn / length}}
drives:
  tone: {{pair: [down, up], form: {form}, carrier: carrier}}
envelopes:
  flat: {{shape: square, length: length, peak: {area} turn / length}}
sequence:
  - pulse: {{drive: tone, envelope: flat}}
start: down
accuracy: {{final: 1e-9}}
"
    );
    last(&run(&text), "population_up")
}

/// exp(-i a) - 1 by its series; `a` is small.
fn turn_less_one(a: &Two) -> Two {
    let step = a * Complex64::new(0.0, -1.0);
    let (mut power, mut sum) = (step, step);
    for k in 2..12 {
        power = power * step / Complex64::from(f64::from(k));
        sum += power;
    }
    sum
}

/// The same by an independent route: the propagator over one period in the frame of the carrier by the Magnus series of fourth
/// order at two Gauss points (W. Magnus, Communications on Pure and Applied Mathematics 7, 649 (1954)), less one so that small
/// turns keep their digits, then its power by repeated squaring.
fn by_powers(periods: u32, area: f64, detuning: f64) -> f64 {
    let (rabi, off) = (area / f64::from(periods), -detuning / f64::from(periods));
    let h = |t: f64| {
        let half = (Complex64::from(1.0) + cis_turns(-2.0 * t)) * (RAD_PER_TURN * rabi / 2.0);
        Two::new(Complex64::default(), half, half.conj(), Complex64::from(RAD_PER_TURN * off))
    };
    let steps = 2000;
    let dt = 1.0 / f64::from(steps);
    let mut less_one = Two::zeros();
    for k in 0..steps {
        let middle = (f64::from(k) + 0.5) * dt;
        let apart = dt * 3f64.sqrt() / 6.0;
        let (early, late) = (h(middle - apart), h(middle + apart));
        // exp(-i (dt/2 (H1 + H2)) - sqrt3/12 dt^2 [H2, H1])
        let bent = (late * early - early * late) * Complex64::new(0.0, -(3f64.sqrt()) / 12.0 * dt * dt);
        let step = turn_less_one(&((early + late) * Complex64::from(dt / 2.0) + bent));
        less_one = less_one + step + step * less_one;
    }
    let mut whole = Two::zeros();
    let mut bits = periods;
    while bits > 0 {
        if bits & 1 == 1 {
            whole = whole + less_one + less_one * whole;
        }
        less_one = less_one + less_one + less_one * less_one;
        bits >>= 1;
    }
    whole[(1, 0)].norm_sqr()
}

const CARRIERS: [(&str, u32); 3] = [("80 MHz", 400), ("6 GHz", 30_000), ("300 THz", 300_000)];

// I. I. Rabi, Physical Review 51, 652 (1937): R^2/W^2 sin^2(pi W t), W^2 = R^2 + D^2.
#[test]
fn exact_one_sided_at_any_carrier() {
    let (area, detuning) = (3.3f64, 1.7f64);
    let whole = area.hypot(detuning);
    let wanted = (area / whole).powi(2) * sin_cos_turns(whole / 2.0).0.powi(2);
    for (carrier, periods) in CARRIERS {
        // the gap is carrier less detuning in doubles: half a rounding unit of the carrier, over the pulse
        close(pulse("one_sided", carrier, periods, area, detuning), wanted, 1e-10);
    }
}

#[test]
fn exact_linear_at_any_carrier() {
    for (carrier, periods) in CARRIERS {
        close(pulse("linear", carrier, periods, 3.3, 1.7), by_powers(periods, 3.3, 1.7), 1e-9);
    }
}

// The route of the test itself, where a number is known: SciPy, solve_ivp DOP853, rtol 3e-14, atol 1e-15, in the laboratory frame.
#[test]
fn exact_the_power_route_is_right() {
    let whole = 3.3f64.hypot(1.7);
    let wave = (3.3 / whole).powi(2) * sin_cos_turns(whole / 2.0).0.powi(2);
    let off = (by_powers(300_000, 3.3, 1.7) - wave).abs();
    // what the wrong half does falls with the number of periods: pi R^2/(4 f) t is about 3e-5 here
    assert!(off < 1e-4 && off > 1e-7, "{off}");
    close(by_powers(20, 3.3, 1.7), SCIPY_20, 2e-12);
}

/// 20 periods, area 3.3 turns, 1.7 turns above the line.
const SCIPY_20: f64 = 0.6037773084987;

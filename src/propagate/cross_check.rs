//! The independent second route: it shares only `Problem::hamiltonian` with the methods above.
//!
//! i d(psi)/dt = H(t) psi in the frame of the problem itself, split into real and imaginary parts, by the Dormand-Prince 8(5,3) of the
//! crate `ode_solvers`. Its table has a wrong node for right-hand sides that depend on time, so time is carried as one more
//! component with derivative 1, which makes the system autonomous. From moment to moment, since only the last point of an
//! integration is as accurate as its steps. The middle of the static diagonal is taken off and comes back as a phase.

use num_complex::Complex64;
use ode_solvers::{DVector as RealVector, Dop853, OutputType, System};

use super::asked::{Demand, Recorder};
use super::load::Load;
use super::solved::CrossCheck;
use crate::problem::{Matrix, Problem, Segment, State, Vector};
use crate::units::{cis_turns, RAD_PER_TURN};

/// Most evaluations of H.
const MOST_EVALUATIONS: f64 = 2e7;
/// Longest part in expected steps, since the crate keeps every step of an integration.
const PART_STEPS: f64 = 200.0;

/// Columns of amplitudes, then times spent, then tau; all real.
struct Lab<'a> {
    problem: &'a Problem,
    segment: &'a Segment,
    middle_rad_s: f64,
    columns: usize,
    timed: bool,
    /// The unit of the time component, s, so that it is of order 1 like the amplitudes.
    unit_s: f64,
}

impl System<f64, RealVector<f64>> for Lab<'_> {
    fn system(&self, _: f64, y: &RealVector<f64>, dy: &mut RealVector<f64>) {
        let n = self.problem.dim();
        let tau_s = y[y.len() - 1] * self.unit_s;
        let h = self.problem.hamiltonian(self.segment, tau_s);
        for c in 0..self.columns {
            for j in 0..n {
                let mut sum = Complex64::default();
                for k in 0..n {
                    let entry = if j == k { h[(j, k)] - self.middle_rad_s } else { h[(j, k)] };
                    sum += entry * Complex64::new(y[2 * (c * n + k)], y[2 * (c * n + k) + 1]);
                }
                dy[2 * (c * n + j)] = sum.im * self.unit_s;
                dy[2 * (c * n + j) + 1] = -sum.re * self.unit_s;
            }
        }
        if self.timed {
            for j in 0..n {
                dy[2 * self.columns * n + j] = y[2 * j] * y[2 * j] + y[2 * j + 1] * y[2 * j + 1];
            }
        }
        let last = y.len() - 1;
        dy[last] = 1.0;
    }
}

/// Runs the second route, or says why not; `numbers` are those of the result.
pub(super) fn cross_check<R: Recorder>(
    problem: &Problem,
    demand: &Demand,
    load: &Load,
    accuracy: f64,
    numbers: &[f64],
    new_recorder: &impl Fn() -> R,
) -> CrossCheck<R> {
    let method = "Runge-Kutta 8(5,3) of another library, in the frame of the problem with nothing turned away".to_string();
    let turns = load.lab_rad / RAD_PER_TURN + load.carrier_turns;
    // What each step may err by; some steps for each turn add up.
    let tolerance = (0.1 * accuracy / (1.0 + turns)).clamp(1e-14, 1e-6);
    let steps = 3.0 * turns * (1e-8 / tolerance).powf(0.125) + 4.0 * (load.segments + load.moments) as f64 + 20.0;
    let evaluations = 12.0 * steps;
    if evaluations > MOST_EVALUATIONS || load.levels * load.columns > 1024 || evaluations * (load.levels.pow(2) * load.columns) as f64 > 4e9
    {
        let reason = format!(
            "it would take about {evaluations:.1e} evaluations of H ({turns:.0} turns in {} stretches with {} moments), \
             more than is worth waiting for",
            load.segments, load.moments
        );
        return CrossCheck::Skipped { method, reason };
    }
    if numbers.iter().any(|number| !number.is_finite()) {
        return CrossCheck::Skipped { method, reason: "the result itself holds what is not a number".to_string() };
    }
    let mut recorder = new_recorder();
    match walk(problem, demand, tolerance, steps, &mut recorder) {
        Err(reason) => CrossCheck::Skipped { method, reason },
        Ok(()) => {
            let found = recorder.numbers();
            let mut difference: f64 = if found.len() == numbers.len() { 0.0 } else { f64::INFINITY };
            for (a, b) in found.iter().zip(numbers) {
                let apart = (a - b).abs();
                difference = if apart.is_nan() { f64::INFINITY } else { difference.max(apart) };
            }
            CrossCheck::Done { method: format!("{method}, tolerance {tolerance:.0e}"), recorded: recorder, difference }
        }
    }
}

fn walk(problem: &Problem, demand: &Demand, tolerance: f64, steps: f64, recorder: &mut impl Recorder) -> Result<(), String> {
    let n = problem.dim();
    let diagonal: Vec<f64> = (0..n).map(|j| problem.statics[(j, j)].re).collect();
    let (low, high) = diagonal.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (v.min(low), v.max(high)));
    let middle_rad_s = if high >= low { low + 0.5 * (high - low) } else { 0.0 };
    let mut amplitudes: Vec<Complex64> = problem.start.amplitudes().expect("a closed problem starts pure").as_slice().to_vec();
    if demand.propagator {
        amplitudes.extend_from_slice(Matrix::identity(n, n).as_slice());
    }
    let mut time_in_s = vec![0.0; if demand.time_in { n } else { 0 }];
    let total_s = problem.length_s().max(f64::MIN_POSITIVE);
    let mut next = 0;
    for (index, segment) in problem.segments.iter().enumerate() {
        let mut tau_s = 0.0;
        loop {
            let here = next < problem.moments.len() && problem.moments[next].segment <= index;
            let stop_s = if here { problem.moments[next].offset_s.min(segment.length_s) } else { segment.length_s };
            let parts = (steps * (stop_s - tau_s) / total_s / PART_STEPS).ceil().max(1.0);
            let from_s = tau_s;
            let mut part = 0.0;
            while part < parts && stop_s > from_s {
                part += 1.0;
                let to_s = if part == parts { stop_s } else { from_s + (stop_s - from_s) * (part / parts) };
                let lab =
                    Lab { problem, segment, middle_rad_s, columns: amplitudes.len() / n, timed: demand.time_in, unit_s: to_s - tau_s };
                integrate(lab, tau_s, tolerance, &mut amplitudes, &mut time_in_s)?;
                tau_s = to_s;
            }
            if !here {
                break;
            }
            let since_s = segment.start.after(stop_s).seconds();
            let state = Vector::from_iterator(n, amplitudes[..n].iter().map(|a| a * back(middle_rad_s, since_s)));
            recorder.see(next, State::Pure(&state), &time_in_s);
            next += 1;
        }
    }
    let phase = back(middle_rad_s, problem.length_s());
    let propagator = demand.propagator.then(|| Matrix::from_column_slice(n, n, &amplitudes[n..]) * phase);
    recorder.finish(propagator.as_ref());
    Ok(())
}

/// The phase that the middle of the diagonal has turned by.
fn back(middle_rad_s: f64, since_s: f64) -> Complex64 {
    cis_turns(-crate::problem::Instant::at(since_s).turns(middle_rad_s / RAD_PER_TURN))
}

/// One integration in units of its own length, from 0 to 1.
fn integrate(lab: Lab, tau_s: f64, tolerance: f64, amplitudes: &mut [Complex64], time_in_s: &mut [f64]) -> Result<(), String> {
    let unit_s = lab.unit_s;
    let mut y: Vec<f64> = amplitudes.iter().flat_map(|a| [a.re, a.im]).collect();
    y.extend(time_in_s.iter().map(|_| 0.0));
    y.push(tau_s / unit_s);
    let start = RealVector::from_vec(y);
    let mut solver =
        Dop853::from_param(lab, 0.0, 1.0, 1.0, start, 0.0, tolerance, 0.9, 0.0, 0.333, 6.0, 1.0, 0.0, 20_000, u32::MAX, OutputType::Sparse);
    solver.integrate().map_err(|error| format!("the second route broke off: {error}"))?;
    let Some(end) = solver.y_out().last() else {
        return Err("the second route gave no result".to_string());
    };
    for (k, amplitude) in amplitudes.iter_mut().enumerate() {
        *amplitude = Complex64::new(end[2 * k], end[2 * k + 1]);
    }
    for (j, time) in time_in_s.iter_mut().enumerate() {
        *time += end[2 * amplitudes.len() + j] * unit_s;
    }
    Ok(())
}

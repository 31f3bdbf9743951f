//! The independent second route of open problems: it shares only `Problem::hamiltonian` and `Jump::at` with the methods.
//!
//! The whole density matrix, complex, entry by entry, in the frame of the problem, by the Dormand-Prince 8(5,3) of the crate
//! `ode_solvers`; time is one more component (see `../cross_check.rs`). Operators of a channel are carried as they are, |j><k|.

use num_complex::Complex64;
use ode_solvers::{DVector as RealVector, Dop853, OutputType, System};

use super::super::asked::{Demand, Recorder};
use super::super::load::Load;
use super::super::solved::CrossCheck;
use crate::problem::{Channel, Matrix, Problem, Segment, State};
use crate::units::RAD_PER_TURN;

/// Most multiplications.
const MOST_MULTIPLICATIONS: f64 = 4e9;
/// Longest part in expected steps, since the crate keeps every step of an integration.
const PART_STEPS: f64 = 200.0;

/// Matrices one after another, then times spent, then tau; all real.
struct Lab<'a> {
    problem: &'a Problem,
    segment: &'a Segment,
    columns: usize,
    timed: bool,
    /// The unit of the time component, s.
    unit_s: f64,
}

impl System<f64, RealVector<f64>> for Lab<'_> {
    fn system(&self, _: f64, y: &RealVector<f64>, dy: &mut RealVector<f64>) {
        let n = self.problem.dim();
        let tau_s = y[y.len() - 1] * self.unit_s;
        let h = self.problem.hamiltonian(self.segment, tau_s);
        let now = self.segment.start.after(tau_s);
        let jumps: Vec<(Matrix, bool)> = self.problem.jumps.iter().map(|jump| (jump.at(now), jump.keeps)).collect();
        let gone = jumps.iter().fold(Matrix::zeros(n, n), |sum, (l, _)| sum + l.adjoint() * l);
        // d(rho)/dt = k rho + rho k+ + sum L rho L+
        let k = h * Complex64::new(0.0, -1.0) - gone * Complex64::from(0.5);
        for c in 0..self.columns {
            let entry = |at: usize| Complex64::new(y[2 * (c * n * n + at)], y[2 * (c * n * n + at) + 1]);
            let rho = Matrix::from_fn(n, n, |a, b| entry(a + n * b));
            let mut slope = &k * &rho + &rho * k.adjoint();
            for (l, _) in jumps.iter().filter(|(_, keeps)| *keeps) {
                slope += l * &rho * l.adjoint();
            }
            for (at, value) in slope.iter().enumerate() {
                dy[2 * (c * n * n + at)] = value.re * self.unit_s;
                dy[2 * (c * n * n + at) + 1] = value.im * self.unit_s;
            }
        }
        if self.timed {
            for j in 0..n {
                dy[2 * self.columns * n * n + j] = y[2 * (j + n * j)];
            }
        }
        let last = y.len() - 1;
        dy[last] = 1.0;
    }
}

/// Runs the second route, or says why not; `numbers` are those of the result.
pub(in super::super) fn cross_check<R: Recorder>(
    problem: &Problem,
    demand: &Demand,
    load: &Load,
    accuracy: f64,
    numbers: &[f64],
    new_recorder: &impl Fn() -> R,
) -> CrossCheck<R> {
    let method = "Runge-Kutta 8(5,3) of another library on the whole density matrix, in the frame of the problem".to_string();
    // differences of levels swing coherences twice as fast as the bound of H says
    let turns = 2.0 * load.lab_rad / RAD_PER_TURN + load.carrier_turns + load.all_decays;
    let tolerance = (0.1 * accuracy / (1.0 + turns)).clamp(1e-14, 1e-6);
    let steps = 3.0 * turns * (1e-8 / tolerance).powf(0.125) + 4.0 * (load.segments + load.moments) as f64 + 20.0;
    let work = 12.0 * steps * (load.levels.pow(3) * (2 + problem.jumps.len()) * load.columns) as f64 * 4.0;
    if work > MOST_MULTIPLICATIONS {
        let reason = format!("it would take about {:.1e} evaluations ({turns:.0} turns), more than is worth waiting for", 12.0 * steps);
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
    let within: Vec<usize> = if demand.within.is_empty() { (0..n).collect() } else { demand.within.clone() };
    let mut entries: Vec<Complex64> = problem.start.density().as_slice().to_vec();
    if demand.propagator {
        for (k, j) in within.iter().flat_map(|k| within.iter().map(move |j| (*k, *j))) {
            entries.extend((0..n * n).map(|at| Complex64::from(if at == j + n * k { 1.0 } else { 0.0 })));
        }
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
                let lab = Lab { problem, segment, columns: entries.len() / (n * n), timed: demand.time_in, unit_s: to_s - tau_s };
                integrate(lab, tau_s, tolerance, &mut entries, &mut time_in_s)?;
                tau_s = to_s;
            }
            if !here {
                break;
            }
            recorder.see(next, State::Mixed(&Matrix::from_column_slice(n, n, &entries[..n * n])), &time_in_s);
            next += 1;
        }
    }
    recorder.finish(None);
    if demand.propagator {
        let images = entries[n * n..].chunks_exact(n * n).map(|image| Matrix::from_column_slice(n, n, image)).collect();
        recorder.finish_channel(&Channel { within, images });
    }
    Ok(())
}

/// One integration in units of its own length, from 0 to 1.
fn integrate(lab: Lab, tau_s: f64, tolerance: f64, entries: &mut [Complex64], time_in_s: &mut [f64]) -> Result<(), String> {
    let unit_s = lab.unit_s;
    let mut y: Vec<f64> = entries.iter().flat_map(|a| [a.re, a.im]).collect();
    y.extend(time_in_s.iter().map(|_| 0.0));
    y.push(tau_s / unit_s);
    let start = RealVector::from_vec(y);
    let mut solver =
        Dop853::from_param(lab, 0.0, 1.0, 1.0, start, 0.0, tolerance, 0.9, 0.0, 0.333, 6.0, 1.0, 0.0, 20_000, u32::MAX, OutputType::Sparse);
    solver.integrate().map_err(|error| format!("the second route broke off: {error}"))?;
    let Some(end) = solver.y_out().last() else {
        return Err("the second route gave no result".to_string());
    };
    for (k, entry) in entries.iter_mut().enumerate() {
        *entry = Complex64::new(end[2 * k], end[2 * k + 1]);
    }
    for (j, time) in time_in_s.iter_mut().enumerate() {
        *time += end[2 * entries.len() + j] * unit_s;
    }
    Ok(())
}

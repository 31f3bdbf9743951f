//! Solving at two resolutions, and tightening until the measured error is small enough.

use super::asked::{Asked, Demand, Recorder};
use super::choose::{choose, Method};
use super::cross_check::cross_check;
use super::load::Load;
use super::picture::Pictures;
use super::run::{run, Fineness, Work};
use super::solved::{Resolution, Solved};
use crate::problem::Problem;

/// Multiplications that all runs of one problem may use together: a minute or so on one core.
const MOST_MULTIPLICATIONS: f64 = 2e10;
/// First tolerance of the step control over the accuracy asked for: the estimates of order 5 and 3 exceed the error by some 1e4.
const FIRST_TOLERANCE: f64 = 10.0;
/// Most doublings of equal steps.
const MOST_DOUBLINGS: u32 = 22;

/// The error figure of one number: its change under refinement with a fifth on top, at least the floor of rounding.
pub fn figure(coarse: f64, fine: f64, floor: f64) -> f64 {
    let difference = (coarse - fine).abs();
    if difference.is_nan() {
        return f64::INFINITY;
    }
    (1.2 * difference).max(floor)
}

/// Largest figure of two lists of numbers; infinite where they do not match or hold what is not a number.
fn largest_figure(coarse: &[f64], fine: &[f64], floor: f64) -> f64 {
    if coarse.len() != fine.len() {
        return f64::INFINITY;
    }
    coarse.iter().zip(fine).map(|(c, f)| figure(*c, *f, floor)).fold(floor, f64::max)
}

/// One finished run.
struct Ran<R> {
    recorder: R,
    fineness: Fineness,
    work: Work,
}

/// Solves `problem` and measures the error of every recorded number; `new_recorder` is called once for each run.
pub fn solve<R: Recorder>(problem: &Problem, demand: &Demand, asked: &Asked, new_recorder: impl Fn() -> R) -> Solved<R> {
    let mut pictures = Pictures::new(problem);
    let load = Load::of(problem, demand, asked.accuracy, &mut pictures);
    let (method, reason) = choose(&load, asked.method);
    // Runge-Kutta sums are compensated; all other steps are products, one after the other.
    let floor_of = |work: &Work| load.floor(if load.changing > 0 && method != Method::Smooth { work.steps } else { load.segments as u64 });
    let mut left = MOST_MULTIPLICATIONS;
    let mut products = 0;
    let mut go = |fineness: Fineness| {
        let mut recorder = new_recorder();
        let work = run(problem, demand, method, &fineness, load.changing_s, &mut pictures, left, &mut recorder);
        left = work.left;
        products += work.products;
        Ran { recorder, fineness, work }
    };
    let least = least_tolerance(&load);
    let start = Fineness { tolerance: (FIRST_TOLERANCE * asked.accuracy).max(least), pieces: 1, doublings: 0 };
    let mut coarse = go(start);
    let mut fine = go(finer(start, method, least));
    let (error_figure, floor) = loop {
        let floor = floor_of(&coarse.work);
        let spoilt = coarse.work.exhausted() || fine.work.exhausted();
        let error_figure = if spoilt { f64::INFINITY } else { largest_figure(coarse.recorder.numbers(), fine.recorder.numbers(), floor) };
        if error_figure <= asked.accuracy || spoilt || !error_figure.is_finite() || load.changing == 0 {
            break (error_figure, floor);
        }
        let Some(wanted) = tighten(&coarse, &fine, error_figure / asked.accuracy, method, least) else {
            break (error_figure, floor);
        };
        let ahead = expected_cost(&coarse, &fine, wanted, method);
        if ahead > fine.work.left {
            break (error_figure, floor);
        }
        let (next_coarse, reused) = if wanted == fine.fineness { (None, true) } else { (Some(go(wanted)), false) };
        let next_fine = go(finer(wanted, method, least));
        let worse = next_fine.work.exhausted() || next_coarse.as_ref().is_some_and(|ran| ran.work.exhausted());
        if worse {
            break (error_figure, floor);
        }
        coarse = match next_coarse {
            Some(ran) if !reused => ran,
            _ => fine,
        };
        fine = next_fine;
    };
    let resolution = |ran: &Ran<R>| Resolution { words: words(method, &load, ran), steps: ran.work.steps };
    let resolutions = [resolution(&coarse), resolution(&fine)];
    let steps = coarse.work.steps;
    let cross_check =
        asked.cross_check.then(|| cross_check(problem, demand, &load, asked.accuracy, coarse.recorder.numbers(), &new_recorder));
    Solved {
        recorded: coarse.recorder,
        finer: fine.recorder,
        method,
        reason,
        resolutions,
        error_figure,
        floor,
        reached: error_figure <= asked.accuracy,
        cross_check,
        steps,
        products,
    }
}

/// Below this the error estimate of a step is rounding alone.
fn least_tolerance(load: &Load) -> f64 {
    4.0 * f64::EPSILON * (1.0 + load.coupling_turns * crate::units::RAD_PER_TURN)
}

/// The next finer resolution.
fn finer(of: Fineness, method: Method, least: f64) -> Fineness {
    let doublings = if method == Method::ConstantSteps { 2 } else { 1 };
    Fineness { tolerance: (of.tolerance / 30.0).max(least), pieces: of.pieces + 1, doublings: of.doublings + doublings }
}

/// The coarse resolution to try next where the error is `excess` times too large; `None` where nothing finer is left.
fn tighten<R>(coarse: &Ran<R>, fine: &Ran<R>, excess: f64, method: Method, least: f64) -> Option<Fineness> {
    match method {
        Method::Smooth => {
            if fine.fineness.tolerance <= least && coarse.fineness.tolerance <= least && coarse.fineness.pieces > 3 {
                return None;
            }
            if excess < 20.0 || coarse.fineness.tolerance <= least {
                return Some(fine.fineness);
            }
            Some(Fineness { tolerance: (coarse.fineness.tolerance / (3.0 * excess)).max(least), ..fine.fineness })
        }
        Method::Geometric | Method::ConstantSteps => {
            let (order, stride) = if method == Method::Geometric { (6.0, 1) } else { (2.0, 2) };
            let more = ((1.1 * excess).log2() / order).ceil().clamp(1.0, 8.0) as u32;
            let doublings = coarse.fineness.doublings + more.max(stride);
            if doublings + stride > MOST_DOUBLINGS {
                return None;
            }
            Some(Fineness { doublings, ..fine.fineness })
        }
    }
}

/// Multiplications of the next coarse and fine run, as far as they can be known beforehand.
fn expected_cost<R>(coarse: &Ran<R>, fine: &Ran<R>, wanted: Fineness, method: Method) -> f64 {
    let last = coarse.work.left - fine.work.left;
    match method {
        Method::Smooth => 2.0 * last,
        _ => {
            last * 2f64.powi(wanted.doublings as i32 - fine.fineness.doublings as i32) * if method == Method::Geometric { 3.0 } else { 5.0 }
        }
    }
}

fn words<R>(method: Method, load: &Load, ran: &Ran<R>) -> String {
    let steps = ran.work.steps;
    if load.changing == 0 {
        return match ran.fineness.pieces {
            1 => format!("one exponential for each constant stretch, {steps} steps"),
            pieces => format!("{pieces} exponentials for each constant stretch, {steps} steps"),
        };
    }
    match method {
        Method::Smooth => format!("tolerance {:.0e}, {steps} steps", ran.fineness.tolerance),
        Method::Geometric => format!("{steps} steps of order 6"),
        Method::ConstantSteps => format!("{steps} constant steps"),
    }
}

//! Solving at two resolutions, and tightening until the measured error is small enough.
//!
//! The coarser run is the result; its figure is its largest change under refinement with a fifth on top: tolerance over 30 and more
//! steps between moments (Runge-Kutta), twice the steps (Magnus), four times the slices (midpoint), two pieces for one (constant stretches).
//! At least it is the floor of rounding. Held against an independent collocation of order 16 in 1900 solutions of random problems
//! of 2 to 6 levels (test `calibrate_error_figure`, seeds not used for choosing any constant): the true error exceeded the figure
//! in 3 of them, once by less than a hundredth and twice, at 6e-14 and 5e-13 in constant stretches, up to threefold (how much
//! of that is rounding in the collocation is not known); the figure was never more than ten times the larger of the true error and 1e-12.

use std::collections::HashMap;

use super::asked::{Asked, Demand, Recorder};
use super::choose::{choose, Method, METHODS};
use super::cross_check::cross_check;
use super::load::Load;
use super::mixture::{self, Mixture};
use super::open;
use super::picture::Pictures;
use super::recipe::{Recipe, Resolved};
use super::run::{run, Fineness, Route, Work};
use super::solved::{Resolution, Solved};
use crate::problem::Problem;

/// Multiplications that all runs of one problem may use together: a minute or so on one core.
pub(super) const MOST_MULTIPLICATIONS: f64 = 8e9;
/// First tolerance of the step control over the accuracy asked for: the estimates of order 5 and 3 exceed the error by some 1e4.
const FIRST_TOLERANCE: f64 = 10.0;
/// The finer Runge-Kutta run takes so many times the steps of the coarser: at order 8 that is a tenth of its error.
const LEAST_STEP_RATIO: f64 = 1.35;
/// The same at order 16.
const LEAST_ELEMENT_RATIO: f64 = 1.15;
/// Where the estimate is beyond this, nothing is computed: an hour.
const HOPELESS_NS: f64 = 3.6e12;
/// Most equal steps of the coarser run.
const MOST_EVEN_STEPS: f64 = 4_194_304.0;

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

/// The runs of a problem: amplitudes where it is closed, a density matrix where it is open.
pub(super) enum Way<'p> {
    Closed(Box<Route<'p>>),
    Open(Box<open::Route<'p>>),
    Mixture(Mixture<'p>),
}

impl<'p> Way<'p> {
    /// The way, the load, the method and why.
    pub fn new(problem: &'p Problem, parts: &'p [(f64, Problem)], demand: &Demand, asked: &Asked) -> (Way<'p>, Load, Method, String) {
        if problem.is_open() && parts.is_empty() {
            let mut route = open::Route::new(problem, demand);
            let load = Load::of_open(problem, demand, asked.accuracy, &mut route);
            let (method, reason) = choose(&load, asked.method);
            route.carry(method, load.changing_s);
            return (Way::Open(Box::new(route)), load, method, reason);
        }
        let first = parts.first().map_or(problem, |(_, part)| part);
        let mut pictures = Pictures::new(first);
        // by its integral only where the choice is ours, and never where times are spent in levels
        let integrals = asked.method.is_none() && !demand.time_in;
        let (load, by_integral) = Load::of(first, demand, asked.accuracy, integrals, &mut pictures);
        let (method, reason) = choose(&load, asked.method);
        let route = |problem, pictures| Route {
            problem,
            demand: demand.clone(),
            method,
            by_integral: by_integral.clone(),
            changing_s: load.changing_s,
            pictures,
            paths: HashMap::new(),
        };
        let way = if parts.is_empty() {
            Way::Closed(Box::new(route(problem, pictures)))
        } else {
            Way::Mixture(Mixture::new(parts, demand, |part| route(part, Pictures::new(part))))
        };
        (way, load, method, reason)
    }

    pub fn run(&mut self, fineness: &Fineness, left: f64, recorder: &mut dyn Recorder) -> Work {
        match self {
            Way::Closed(route) => run(route, fineness, left, recorder),
            Way::Open(route) => route.run(fineness, left, recorder),
            Way::Mixture(mixture) => mixture.run(fineness, left, recorder),
        }
    }
}

/// One finished run.
struct Ran<R> {
    recorder: R,
    fineness: Fineness,
    work: Work,
}

/// Solves `problem` and measures the error of every recorded number; `new_recorder` is called once for each run.
pub fn solve<R: Recorder>(problem: &Problem, demand: &Demand, asked: &Asked, new_recorder: impl Fn() -> R) -> Solved<R> {
    solve_from(problem, demand, asked, &Recipe::default(), new_recorder)
}

/// The estimated time of a solution, ns, where it is beyond all patience.
pub(super) fn is_hopeless(load: &Load, method: Method) -> Option<f64> {
    let row = METHODS.iter().find(|row| row.method == method && load.changing > 0)?;
    Some((row.cost_ns)(load)).filter(|ns| *ns > HOPELESS_NS && method != Method::ConstantSteps)
}

/// The same, beginning at the resolution of a recipe where it has one for the method of this problem.
pub fn solve_from<R: Recorder>(
    problem: &Problem,
    demand: &Demand,
    asked: &Asked,
    recipe: &Recipe,
    new_recorder: impl Fn() -> R,
) -> Solved<R> {
    let parts = mixture::parts(problem);
    let (mut way, load, method, mut reason) = Way::new(problem, &parts, demand, asked);
    // Runge-Kutta sums are compensated; all other steps are products, one after the other.
    let floor_of = |work: &Work| load.floor(if load.changing > 0 && method != Method::Smooth { work.steps } else { load.segments as u64 });
    let mut left = MOST_MULTIPLICATIONS;
    if let Some(ns) = is_hopeless(&load, method) {
        // Only walks through the moments, so that the caller has his rows, and says so with an infinite figure.
        left = 0.0;
        reason += &format!("; it was not run, since it would take about {:.0e} s", ns * 1e-9);
    }
    let mut products = 0;
    let mut go = |fineness: Fineness| {
        let mut recorder = new_recorder();
        let work = way.run(&fineness, left, &mut recorder);
        left = work.left;
        products += work.products;
        Ran { recorder, fineness, work }
    };
    let least = least_tolerance(&load);
    let first = Fineness { tolerance: FIRST_TOLERANCE * asked.accuracy, pieces: 1, doublings: 0, halved: false };
    let start = recipe.of(method).unwrap_or(first).no_finer_than(least);
    let mut coarse = go(start);
    let mut fine = go_finer(&mut go, &coarse, method, least);
    let (error_figure, floor) = loop {
        let floor = floor_of(&coarse.work);
        let spoilt = coarse.work.exhausted() || fine.work.exhausted();
        let error_figure = if spoilt { f64::INFINITY } else { largest_figure(coarse.recorder.numbers(), fine.recorder.numbers(), floor) };
        if error_figure <= asked.accuracy.max(floor) || spoilt || !error_figure.is_finite() || load.changing + load.commuting == 0 {
            break (error_figure, floor);
        }
        let Some(wanted) = tighten(&coarse, &fine, error_figure / asked.accuracy.max(floor), method, least) else {
            break (error_figure, floor);
        };
        let (next_coarse, reused) = if wanted == fine.fineness { (None, true) } else { (Some(go(wanted)), false) };
        if next_coarse.as_ref().is_some_and(|ran| ran.work.exhausted()) {
            break (error_figure, floor);
        }
        let next_fine = go_finer(&mut go, next_coarse.as_ref().unwrap_or(&fine), method, least);
        if next_fine.work.exhausted() {
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
    let cross_check = asked.cross_check.then(|| {
        let numbers = coarse.recorder.numbers();
        if problem.is_open() {
            open::cross_check(problem, demand, &load, asked.accuracy, numbers, &new_recorder)
        } else {
            cross_check(problem, demand, &load, asked.accuracy, numbers, &new_recorder)
        }
    });
    Solved {
        resolved: Some(Resolved::new(method, coarse.fineness, error_figure / asked.accuracy, asked.accuracy)),
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

/// A run so much finer than `coarse` that the difference means something. Where caps and not the tolerance set the steps of
/// Runge-Kutta, a smaller tolerance alone may leave them as they were.
fn go_finer<R>(go: &mut impl FnMut(Fineness) -> Ran<R>, coarse: &Ran<R>, method: Method, least: f64) -> Ran<R> {
    let mut fine = go(finer(coarse.fineness, method, least));
    if method.is_adaptive() {
        let least_ratio = if method == Method::Smooth { LEAST_STEP_RATIO } else { LEAST_ELEMENT_RATIO };
        for _ in 0..3 {
            if fine.work.exhausted() || fine.work.steps as f64 >= least_ratio * coarse.work.steps as f64 {
                break;
            }
            fine = go(finer(fine.fineness, method, least));
        }
    }
    fine
}

/// Below this the error estimate of a step is rounding alone.
pub(super) fn least_tolerance(load: &Load) -> f64 {
    4.0 * f64::EPSILON * (1.0 + load.coupling_turns * crate::units::RAD_PER_TURN)
}

/// The next finer resolution.
fn finer(of: Fineness, method: Method, least: f64) -> Fineness {
    let doublings = if method == Method::ConstantSteps { 2 } else { 1 };
    Fineness {
        tolerance: (of.tolerance / 30.0).max(least),
        pieces: of.pieces + if method.is_adaptive() { 2 } else { 1 },
        doublings: of.doublings + doublings,
        halved: true,
    }
}

/// The coarse resolution to try next where the error is `excess` times too large; `None` where nothing finer is left.
fn tighten<R>(coarse: &Ran<R>, fine: &Ran<R>, excess: f64, method: Method, least: f64) -> Option<Fineness> {
    match method {
        Method::Collocation | Method::Carrier => {
            // halves of halves would be far finer than asked, and too short for what follows the carrier
            let tolerance = (coarse.fineness.tolerance / (3.0 * excess)).max(least);
            let fits = tolerance < coarse.fineness.tolerance && 6.0 * (coarse.work.left - fine.work.left) <= fine.work.left;
            fits.then_some(Fineness { tolerance, ..coarse.fineness })
        }
        Method::Smooth => {
            if fine.fineness.tolerance <= least && coarse.fineness.tolerance <= least && coarse.fineness.pieces > 3 {
                return None;
            }
            // The next runs cost about twice as much as the last one.
            if 4.0 * (coarse.work.left - fine.work.left) > fine.work.left {
                return None;
            }
            if excess < 20.0 || coarse.fineness.tolerance <= least {
                return Some(fine.fineness);
            }
            Some(Fineness { tolerance: (coarse.fineness.tolerance / (3.0 * excess)).max(least), halved: false, ..fine.fineness })
        }
        Method::Geometric | Method::ConstantSteps => {
            let (order, stride) = if method == Method::Geometric { (6.0, 1) } else { (2.0, 2) };
            let more = ((1.1 * excess).log2() / order).ceil().clamp(1.0, 40.0) as u32;
            // As many doublings as are wanted, or as can be afforded.
            let cost_now = (coarse.work.left - fine.work.left) / 2f64.powi(stride as i32);
            let affordable = |more: &u32| {
                let times = 2f64.powi(*more as i32);
                coarse.work.steps as f64 * times <= MOST_EVEN_STEPS && cost_now * times * (1.0 + 2f64.powi(stride as i32)) <= fine.work.left
            };
            let more = (stride..=more.max(stride)).rev().find(affordable)?;
            Some(Fineness {
                doublings: coarse.fineness.doublings + more,
                pieces: fine.fineness.pieces,
                tolerance: fine.fineness.tolerance,
                halved: false,
            })
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
        Method::Smooth | Method::Collocation | Method::Carrier => format!("tolerance {:.0e}, {steps} steps", ran.fineness.tolerance),
        Method::Geometric => format!("{steps} steps of order 6"),
        Method::ConstantSteps => format!("{steps} constant steps"),
    }
}

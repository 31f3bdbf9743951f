//! Everything that the points share, laid out once: entries as functions of the numbers, stretches, and the number of steps that the
//! accuracy asked for needs.
//!
//! The number of steps is found from samples (the corners of the box and points inside it): the numbers of the coarser run are held against
//! those of one with half as many steps again, and the steps are raised by the root that their order gives until the largest
//! figure is met. Steps that take several slices of a held profile together are held against every slice by itself, which is exact:
//! jumps within a step leave an error that falls slowly. Where such steps would cost as much, every slice is taken by itself throughout.

use std::sync::Arc;

use super::entries::Function;
use super::profiles::{profiles, Profiles};
use super::sizes::{frame, packed, sizes, Frame};
use super::wanted::{wanted, Wanted};
use super::worker::Worker;
use crate::config::document::Document;
use crate::config::settings::MethodWord;
use crate::model::built::Built;
use crate::outcome::compute;
use crate::plan::{Mover, Plan, Point};
use crate::problem::{Instant, Matrix, Problem};
use crate::propagate::lanes::{has_kernel, Recipe, Stretch, Width};
use crate::propagate::{figure, Method};

/// The finer run takes so many times the steps.
const FINER: f64 = 1.5;
/// The share of the accuracy that the samples must keep within.
pub(super) const SHARE: f64 = 0.4;
/// Order of the error in the number of steps, at least.
const ORDER: f64 = 6.0;
/// What a step over several slices costs, in slices taken by themselves: of two levels, of three, of more. (Our own measurements.)
const TOGETHER_COST: [f64; 3] = [4.0, 2.5, 4.0];
/// Rounds of raising the number of steps.
pub(super) const ROUNDS: usize = 14;

/// What is known of the point at which points were laid out; what is recorded of all of them is read off with it.
#[derive(Debug, Clone)]
pub(super) struct Place {
    pub built: Arc<Built>,
    pub values: Vec<f64>,
    pub energies_hz: Vec<f64>,
    pub problem: Problem,
}

/// What the points of a plan share.
#[derive(Debug, Clone)]
pub struct Layout {
    /// The point at which it was laid out.
    pub(super) place: Place,
    pub(super) timeline: Timeline,
    pub(super) wanted: Wanted,
    /// What rounding leaves in any number.
    pub(super) floor: f64,
    pub(super) dim: usize,
    pub(super) width: Width,
    /// Some points.
    pub(super) samples: Vec<Vec<f64>>,
    pub(super) recipe: Option<Arc<Recipe>>,
    /// Steps of the coarser and of the finer run; of points with their own timelines the most that any sample takes.
    pub(super) steps: [usize; 2],
}

/// How points lie in time.
#[derive(Debug, Clone)]
pub(super) enum Timeline {
    /// All alike.
    Shared(Box<SharedTime>),
    /// Each has its own; steps for a radian or so.
    Own { rate: f64 },
}

/// A timeline that all points share.
#[derive(Debug, Clone)]
pub(super) struct SharedTime {
    pub frame: Frame,
    pub profiles: Profiles,
    /// Entries as functions of the numbers; none where each point must be asked.
    pub function: Option<Function>,
    /// Stretches of the coarser and of the finer run.
    pub stretches: [Vec<Stretch>; 2],
    exact: bool,
}

impl Layout {
    /// Lays out the points of `plan` whose numbers `names` lie within `bounds` (SI); `samples` are some of them, the corners among
    /// them. `width` is the kind of instructions. The reason, where points must be computed one by one.
    pub fn new(plan: &Plan, names: &[&str], bounds: &[(f64, f64)], samples: &[Vec<f64>], width: Width) -> Result<Layout, String> {
        fits(plan)?;
        let wanted = wanted(plan, names)?;
        let (place, mut real, mut flat) = start(plan, names, samples)?;
        let point = real.at(&place).map_err(|_| refused())?;
        without_harmonics(plan.document(), point)?;
        let problem = point.problem();
        let flat_problem = flat.at(&place).map_err(|_| refused())?.problem();
        let frame = frame(flat_problem).ok_or_else(|| "a term is not held".to_string())?;
        let profiles = profiles(problem, &frame, &sizes(flat_problem))?;
        let place = Place::of(point);
        let function = if flat.has_no_followers() { function(&mut flat, &frame, &profiles, bounds, samples) } else { None };
        let shared = SharedTime { frame, profiles, function, stretches: [Vec::new(), Vec::new()], exact: false };
        let mut layout = Layout::at(plan.document(), place, wanted, Timeline::Shared(Box::new(shared)), samples, width)?;
        layout.settle(plan, names, samples, plan.document().accuracy.last)?;
        Ok(layout)
    }

    /// The same for points of which each has its own timeline: density matrices alone, as states go as fast by collocation. Samples that
    /// are refused are left out.
    pub fn own(plan: &Plan, names: &[&str], samples: &[Vec<f64>], width: Width) -> Result<Layout, String> {
        fits(plan)?;
        let wanted = wanted(plan, names)?;
        let mut good = Vec::new();
        let mut place = None;
        for sample in samples {
            if let Ok(mover) = plan.mover_from(names, sample) {
                without_harmonics(plan.document(), mover.point())?;
                place.get_or_insert_with(|| Place::of(mover.point()));
                good.push(sample.clone());
            }
        }
        let place = place.filter(|_| 2 * good.len() >= samples.len()).ok_or_else(refused)?;
        if !place.problem.is_open() {
            return Err("the shape or the length of a pulse moves".to_string());
        }
        let mut layout = Layout::at(plan.document(), place, wanted, Timeline::Own { rate: 1.0 }, &good, width)?;
        layout.settle_own(plan, names, plan.document().accuracy.last)?;
        Ok(layout)
    }

    pub(super) fn at(
        document: &Document,
        place: Place,
        wanted: Wanted,
        timeline: Timeline,
        samples: &[Vec<f64>],
        width: Width,
    ) -> Result<Layout, String> {
        let dim = place.problem.dim();
        if dim != document.system.names.len() || !has_kernel(dim, place.problem.is_open()) {
            return Err(format!("there is no kernel for {dim} levels"));
        }
        let recipe = recipe(&place.problem, &wanted)?;
        let samples = samples.to_vec();
        Ok(Layout { place, timeline, wanted, floor: 4.0 * f64::EPSILON, dim, width, samples, recipe, steps: [0; 2] })
    }

    /// Steps of the run whose numbers are given, in words.
    pub fn words(&self) -> String {
        let [coarse, fine] = self.steps;
        match &self.timeline {
            Timeline::Shared(shared) if shared.exact => format!("{coarse} slices"),
            Timeline::Shared(_) => format!("{coarse} steps of order 6 ({fine} in the finer run)"),
            Timeline::Own { .. } => format!("up to {coarse} steps of order 6 ({fine} in the finer run)"),
        }
    }

    /// Steps of the coarser and of the finer run.
    pub fn steps(&self) -> [usize; 2] {
        self.steps
    }

    /// Whether density matrices are carried.
    pub(super) fn is_density(&self) -> bool {
        self.recipe.as_ref().is_some_and(|recipe| recipe.is_density())
    }

    /// What rounding alone leaves in any number.
    pub fn floor(&self) -> f64 {
        self.floor
    }

    /// Makes the steps of both runs for `rate` steps per radian or so of the largest angle.
    fn cut(&mut self, angles: &[f64], rate: f64) {
        let cost = TOGETHER_COST[if self.recipe.is_some() { 2 } else { usize::from(self.dim == 3) }];
        let Timeline::Shared(shared) = &mut self.timeline else { return };
        let made = [1.0, FINER].map(|more| -> Vec<Stretch> {
            let all = shared.profiles.stretches.iter().zip(angles);
            all.map(|((channels, profile), angle)| {
                let count = (rate * more * (angle + 4.0)).ceil();
                // one exponential is exact where there is one slice, and two of them check it
                let count = match profile.most_steps().map(|most| most as f64) {
                    Some(most) if cost * rate * (angle + 4.0) >= most => most * if more > 1.0 { 2.0 } else { 1.0 },
                    Some(most) if more > 1.0 => most,
                    _ => count,
                };
                Stretch { channels: channels.clone(), steps: profile.steps(channels.len(), count) }
            })
            .collect()
        });
        self.steps = [0, 1].map(|k: usize| made[k].iter().map(|stretch| stretch.steps.lengths_s.len()).sum());
        shared.exact = made[0].iter().all(|stretch| stretch.steps.bare);
        shared.stretches = made;
    }

    fn settle(&mut self, plan: &Plan, names: &[&str], samples: &[Vec<f64>], accuracy: f64) -> Result<(), String> {
        let Timeline::Shared(shared) = &self.timeline else { return Ok(()) };
        let stretches = shared.profiles.stretches.len();
        // one step for each stretch tells the angles
        self.cut(&vec![0.0; stretches], 0.25);
        let mut worker = Worker::new(plan, names, self)?;
        let angles = samples.chunks(8).map(|some| worker.angles(self, some)).collect::<Result<Vec<_>, _>>()?;
        let largest: Vec<f64> = (0..stretches).map(|k| angles.iter().map(|of| of[k]).fold(0.0, f64::max)).collect();
        let mut rate = 1.0;
        for _ in 0..ROUNDS {
            self.cut(&largest, rate);
            self.floor = floor(largest.iter().sum(), self.steps[0]);
            let mut worst = 0.0f64;
            for some in samples.chunks(8) {
                worst = worst.max(self.figure_of(&mut worker, some)?);
            }
            if worst <= (SHARE * accuracy).max(self.floor) {
                // (our own measurements: twice as slow as collocation)
                let slow = self.recipe.as_ref().is_some_and(|recipe| !recipe.is_density());
                let exact = matches!(&self.timeline, Timeline::Shared(shared) if shared.exact);
                return if slow && !exact { Err("collocation serves more than three levels better".to_string()) } else { Ok(()) };
            }
            if matches!(&self.timeline, Timeline::Shared(shared) if shared.exact) {
                return Err("its slices are not exact to the accuracy asked for".to_string());
            }
            rate *= raised(worst, accuracy);
        }
        Err("the number of steps did not settle".to_string())
    }

    /// Every sample is looked at by itself, as its group has steps of its own.
    fn settle_own(&mut self, plan: &Plan, names: &[&str], accuracy: f64) -> Result<(), String> {
        let mut worker = Worker::new(plan, names, self)?;
        let samples = self.samples.clone();
        let mut rate = 1.0;
        for _ in 0..ROUNDS {
            self.timeline = Timeline::Own { rate };
            let (mut worst, mut angle) = (0.0f64, 0.0f64);
            self.steps = [0; 2];
            for sample in &samples {
                for finer in [false, true] {
                    let (turned, steps) = worker.own_steps(self, sample, finer)?;
                    angle = angle.max(turned);
                    self.steps[usize::from(finer)] = self.steps[usize::from(finer)].max(steps);
                }
                self.floor = floor(angle, self.steps[0]);
                worst = worst.max(self.figure_of(&mut worker, std::slice::from_ref(sample))?);
            }
            if worst <= (SHARE * accuracy).max(self.floor) {
                return Ok(());
            }
            rate *= raised(worst, accuracy);
        }
        Err("the number of steps did not settle".to_string())
    }

    /// Largest error figure of some points.
    fn figure_of(&self, worker: &mut Worker, points: &[Vec<f64>]) -> Result<f64, String> {
        let (coarse, fine) = (worker.numbers(self, points, false)?, worker.numbers(self, points, true)?);
        Ok(coarse.iter().zip(&fine).map(|(a, b)| figure(*a, *b, self.floor)).fold(0.0, f64::max))
    }

    /// Steps for a radian of the coarser or the finer run, where every point has its own timeline.
    pub(super) fn rate(&self, finer: bool) -> f64 {
        match self.timeline {
            Timeline::Own { rate } => rate * if finer { FINER } else { 1.0 },
            Timeline::Shared(_) => 1.0,
        }
    }
}

impl Place {
    pub(super) fn of(point: &Point) -> Place {
        Place {
            built: point.built.clone(),
            values: point.values.clone(),
            energies_hz: point.energies_hz.clone(),
            problem: point.problem().clone(),
        }
    }
}

/// What rounding leaves after so many steps through this angle.
pub(super) fn floor(angle: f64, steps: usize) -> f64 {
    f64::EPSILON * (4.0 + 1.05 * angle + 0.25 * steps as f64)
}

/// By how much more steps must be taken.
pub(super) fn raised(worst: f64, accuracy: f64) -> f64 {
    (worst / (0.5 * SHARE * accuracy)).powf(1.0 / ORDER).clamp(1.15, 3.0)
}

/// Fewest turns of the carriers that are worth the question which method serves.
const MANY_TURNS: f64 = 20.0;

/// Refused where the harmonics of fast carriers serve better: these steps would follow every turn.
pub(super) fn without_harmonics(document: &Document, point: &Point) -> Result<(), String> {
    let problem = point.problem();
    let fastest = |segment| problem.terms_of(segment).iter().map(|term| term.turns_hz.abs()).fold(0.0, f64::max);
    let turns: f64 = problem.segments.iter().map(|segment| fastest(segment) * segment.length_s).sum();
    if turns > MANY_TURNS && compute(document, point).method == Method::Carrier {
        return Err("its carriers are carried by their harmonics".to_string());
    }
    Ok(())
}

/// Whether a document asks for nothing that bundles do not do.
fn fits(plan: &Plan) -> Result<(), String> {
    let document = plan.document();
    if document.accuracy.method != MethodWord::Automatic || document.accuracy.cross_check {
        return Err("a method was asked for by name".to_string());
    }
    if !document.noise.is_empty() {
        return Err("it is averaged over noise".to_string());
    }
    Ok(())
}

/// How numbers are carried, where the kernels of two and three levels do not serve.
fn recipe(problem: &Problem, wanted: &Wanted) -> Result<Option<Arc<Recipe>>, String> {
    let dim = problem.dim();
    if !problem.is_open() {
        return Ok((dim > 3).then(|| Arc::new(Recipe::of_states(dim))));
    }
    if !wanted.columns.is_empty() {
        return Err("it records a gate of an open system".to_string());
    }
    if problem.jumps.iter().any(|jump| !jump.turning.is_empty()) {
        return Err("its jumps turn".to_string());
    }
    let jumps: Vec<(Matrix, bool)> = problem.jumps.iter().map(|jump| (jump.at(Instant::default()), jump.keeps)).collect();
    Ok(Some(Arc::new(Recipe::of_densities(dim, &jumps))))
}

fn refused() -> String {
    "a sample was refused".to_string()
}

/// A sample at which every drive has a size, and the movers with and without shapes.
fn start<'p>(plan: &'p Plan, names: &[&str], samples: &[Vec<f64>]) -> Result<(Vec<f64>, Mover<'p>, Mover<'p>), String> {
    // laid out at a sample, as the numbers as written need make no run
    let first = samples.first().ok_or_else(refused)?;
    let mover = || plan.mover_from(names, first).map_err(|_| refused());
    let real = mover()?;
    let Some(mut flat) = mover()?.flattened().map_err(|_| refused())? else {
        return Err("the shape of a pulse, the start or the surroundings move".to_string());
    };
    for sample in samples {
        let Ok(point) = flat.at(sample) else { return Err(refused()) };
        if sizes(point.problem()).iter().all(|size| size.norm_sqr() > 0.0) {
            return Ok((sample.clone(), real, flat));
        }
    }
    Err("no sample has all drives on".to_string())
}

/// The entries as a function, where they are sums of products of the numbers at every sample.
fn function(flat: &mut Mover, frame: &Frame, profiles: &Profiles, bounds: &[(f64, f64)], samples: &[Vec<f64>]) -> Option<Function> {
    let mut entries_at = |numbers: &[f64]| -> Option<(Vec<f64>, usize)> {
        let problem = flat.at(numbers).ok()?.problem();
        if super::sizes::frame(problem).as_ref() != Some(frame) {
            return None;
        }
        let mut entries = Vec::new();
        packed(problem, &profiles.channels, &mut entries);
        Some((entries, problem.dim() * problem.dim()))
    };
    let at_corners = Function::corners(bounds).iter().map(|corner| Some(entries_at(corner)?.0)).collect::<Option<Vec<_>>>()?;
    let function = Function::new(bounds, &at_corners);
    for sample in samples {
        let (entries, size) = entries_at(sample)?;
        if !function.agrees(sample, &entries, size) {
            return None;
        }
    }
    Some(function)
}

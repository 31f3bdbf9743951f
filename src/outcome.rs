//! One point computed: a plan's [`Point`] handed to the methods, its numbers measured at two resolutions, and all that is known
//! of their error, as plain data for the report.
//!
//! [`measure`] makes the runs, [`conclude`] the figures; an average over noise lies between the two.

pub mod budget;
pub mod sensitivity;

use std::time::Instant as Clock;

use crate::config::document::Document;
use crate::config::messages::{Fault, Mistake};
use crate::config::record::Item;
use crate::config::settings::MethodWord;
use crate::measure::{
    counts, observables, Column, Count, GateFigures, GateJudge, Last, QuasiEnergy, QuasiRecorder, Recorded, TraceRecorder,
};
use crate::plan::Point;
use crate::problem::{Channel, Matrix, Problem, Start};
use crate::propagate::{
    figure, machine_bytes, memory_bytes, solve, solve_from, solve_once, Asked, CrossCheck, Demand, Method, Recipe, Resolved, Solved, Steady,
};
use crate::units::rad_s;

/// A final number with its error.
#[derive(Debug, Clone, PartialEq)]
pub struct Final {
    /// Named like its column.
    pub name: String,
    /// `1`, `Hz` or `s`.
    pub unit: &'static str,
    /// The number, of the coarser resolution.
    pub value: f64,
    /// The same of the finer one.
    pub finer: f64,
    /// Its error figure, in its unit.
    pub error: f64,
    /// One standard error of the mean over random draws, in its unit; none where nothing was drawn.
    pub sampling_error: Option<f64>,
}

/// What the runs of a point recorded, before figures are made of it.
pub struct Measured {
    /// The runs at both resolutions, or their averages.
    pub solved: Solved<Recorded>,
    /// The average that the numbers are, if they are one.
    pub average: Option<Average>,
}

/// How an average over noise was taken.
#[derive(Debug, Clone, Default)]
pub struct Average {
    /// In words.
    pub words: String,
    /// Runs made for the result.
    pub runs: u64,
    /// Random draws, 0 where a rule of nodes served alone.
    pub draws: u64,
    /// Error of each recorded number, over its scale, beside its change under refinement; empty where there is none.
    pub besides: Vec<f64>,
    /// What another number of nodes changes in each recorded number, over its scale; empty where there is no rule.
    pub of_finer_rule: Vec<f64>,
    /// One standard error of each recorded number, over its scale; empty where nothing was drawn.
    pub sampling: Vec<f64>,
    /// The largest of them.
    pub sampling_error: Option<f64>,
    /// Whether the draws were to go on until the sampling error meets the accuracy.
    pub until_accurate: bool,
    /// Warnings.
    pub warnings: Vec<Mistake>,
}

/// The second, independent route.
#[derive(Debug, Clone, PartialEq)]
pub struct Crossing {
    /// What was done, or would have been.
    pub method: String,
    /// Largest difference from the result, or why there is none.
    pub difference: Result<f64, String>,
}

/// A computed point.
#[derive(Debug, Clone)]
pub struct Outcome {
    /// Columns of the traces.
    pub columns: Vec<Column>,
    /// Moments, s.
    pub times_s: Vec<f64>,
    /// Rows of the traces, one after another.
    pub rows: Vec<f64>,
    /// Every number at the end of the sequence: the columns, then the gate.
    pub finals: Vec<Final>,
    /// Figures of the gate.
    pub gate: Option<GateFigures>,
    /// The gate error split by cause; empty where that is not asked for.
    pub budget: Vec<budget::Share>,
    /// How the final numbers depend on the named ones, where that was asked for.
    pub sensitivity: Option<sensitivity::Sensitivity>,
    /// The steady state of the last stretch, if it is recorded.
    pub steady: Option<Steady>,
    /// Counts behind a read-out.
    pub counts: Vec<Count>,
    /// What the whole sequence does to the levels of the gate, wherever one is judged.
    pub channel: Option<Channel>,
    /// The propagator, where it is recorded, and its error figure.
    pub propagator: Option<(Matrix, f64)>,
    /// Levels of the driven system: period in s, what was found, and the error of q in turns.
    pub quasi_energies: Option<(f64, Vec<QuasiEnergy>, f64)>,
    /// The state at the end.
    pub end_state: Start,
    /// At which resolution it was computed; none where it is an average.
    pub resolved: Option<Resolved>,
    /// The method where H changes.
    pub method: Method,
    /// Why.
    pub reason: String,
    /// Steps of the run whose numbers are given.
    pub steps: u64,
    /// Both resolutions in words.
    pub resolutions: [String; 2],
    /// Largest error of any recorded number, over its scale.
    pub error_figure: f64,
    /// What rounding alone leaves.
    pub floor: f64,
    /// Whether `accuracy: final` is met.
    pub reached: bool,
    /// The second route, where asked for.
    pub cross_check: Option<Crossing>,
    /// How the numbers were averaged over noise, if they were.
    pub average: Option<Average>,
    /// Standard errors of the rows, like `rows`; empty where nothing was drawn.
    pub row_errors: Vec<f64>,
    /// Time taken, s.
    pub seconds: f64,
}

/// A final quantity before it is computed.
#[derive(Debug, Clone, PartialEq)]
pub struct FinalColumn {
    /// Named like its column.
    pub name: String,
    /// `1`, `Hz` or `s`.
    pub unit: &'static str,
    /// What its error is judged against.
    pub scale: f64,
}

/// The final quantities that [`compute`] gives of a point, in its order.
pub fn final_columns(document: &Document, point: &Point) -> Vec<FinalColumn> {
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, point.problem());
    let columns = observables.columns();
    let seen = columns.into_iter().map(|column| FinalColumn { name: column.name, unit: column.unit, scale: column.scale });
    let names = observables.last.iter().flat_map(|quantity| quantity.names()).filter(|name| !name.starts_with("propagator_"));
    let steady = if wants_steady(document) { document.system.names.as_slice() } else { &[] };
    let steady = steady.iter().map(|level| steady_name(level));
    seen.chain(names.chain(steady).map(|name| FinalColumn { name, unit: "1", scale: 1.0 })).collect()
}

/// Whether the steady state of the last stretch is recorded.
fn wants_steady(document: &Document) -> bool {
    document.record.items.iter().any(|item| matches!(item, Item::Steady(_)))
}

/// The final quantity that says how much of the steady state is in a level.
fn steady_name(level: &str) -> String {
    format!("steady_population_{level}")
}

impl Outcome {
    /// Warnings that came up with the runs.
    pub fn warnings(&self) -> &[Mistake] {
        self.average.as_ref().map_or(&[], |average| &average.warnings)
    }

    /// The same with its error budget, whose errors count like those of any recorded number.
    pub fn with_budget(mut self, document: &Document, shares: Vec<budget::Share>) -> Outcome {
        let largest = shares.iter().map(|share| share.error).fold(0.0, f64::max);
        self.error_figure = self.error_figure.max(largest);
        self.reached &= largest <= document.accuracy.last;
        self.budget = shares;
        self
    }

    /// The largest standard error of a recorded number, over its scale; none where nothing was drawn.
    pub fn sampling_error(&self) -> Option<f64> {
        self.average.as_ref()?.sampling_error
    }
}

/// What a config asks of the methods.
fn asked(document: &Document) -> Asked {
    Asked {
        accuracy: document.accuracy.last,
        method: match document.accuracy.method {
            MethodWord::Automatic => None,
            MethodWord::ConstantSteps => Some(Method::ConstantSteps),
            MethodWord::Smooth => Some(Method::Smooth),
            MethodWord::Geometric => Some(Method::Geometric),
            MethodWord::Collocation => Some(Method::Collocation),
            MethodWord::Carrier => Some(Method::Carrier),
        },
        cross_check: document.accuracy.cross_check,
    }
}

/// The numbers of a point at one resolution, without their errors.
#[derive(Debug, Clone, PartialEq)]
pub struct Once {
    /// The final quantities, in the order of [`final_columns`].
    pub finals: Vec<f64>,
    /// Moments, s.
    pub times_s: Vec<f64>,
    /// Rows of the traces, one after another.
    pub rows: Vec<f64>,
}

/// Computes a point without noise once, at the resolution of a recipe; none where the recipe does not cover it. The numbers are those
/// that [`compute_from`] gives where that resolution is fine enough, to the bit.
pub fn compute_once(document: &Document, point: &Point, recipe: &Recipe) -> Option<Once> {
    let problem = point.problem();
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    let scales: Vec<f64> = observables.columns().iter().map(|column| column.scale).collect();
    let recorder = TraceRecorder::new(&observables, problem, &scales);
    let recorded = solve_once(problem, &observables.demand, &asked(document), recipe, recorder)?.done();
    let rows: Vec<f64> = recorded.numbers[..recorded.in_rows].iter().enumerate().map(|(k, x)| x * scales[k % scales.len()]).collect();
    let names = observables.last.iter().flat_map(|quantity| quantity.names());
    let last = names.zip(recorded.last()).filter(|(name, _)| !name.starts_with("propagator_")).map(|(_, value)| *value);
    let mut finals: Vec<f64> = rows[rows.len() - scales.len()..].iter().copied().chain(last).collect();
    if wants_steady(document) {
        let found = steady_of(problem, recorded.end_state.as_ref().unwrap_or(&problem.start));
        let dim = document.system.names.len();
        finals.extend((0..dim).map(|level| found.as_ref().map_or(f64::NAN, |found| found.state[(level, level)].re)));
    }
    Some(Once { finals, times_s: problem.moments.iter().map(|moment| moment.time_s).collect(), rows })
}

/// Computes a point without noise, beginning at the resolution of a recipe.
pub fn compute_from(document: &Document, point: &Point, recipe: &Recipe) -> Outcome {
    let clock = Clock::now();
    let solved = measure_from(document, point, point.problem(), true, recipe);
    conclude(document, point, Measured { solved, average: None }, clock)
}

/// Runs a point at both resolutions. `problem` is that of the point, or one that noise has moved within the shot; `check` is
/// whether the second route is wanted too, where the config asks for it.
pub fn measure(document: &Document, point: &Point, problem: &Problem, check: bool) -> Solved<Recorded> {
    measure_from(document, point, problem, check, &Recipe::default())
}

fn measure_from(document: &Document, point: &Point, problem: &Problem, check: bool, recipe: &Recipe) -> Solved<Recorded> {
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    let scales: Vec<f64> = observables.columns().iter().map(|column| column.scale).collect();
    let mut asked = asked(document);
    asked.cross_check &= check;
    solve_from(problem, &observables.demand, &asked, recipe, || TraceRecorder::new(&observables, problem, &scales)).map(TraceRecorder::done)
}

/// Estimated memory that a run of a point takes, bytes.
pub fn run_bytes(document: &Document, point: &Point) -> f64 {
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, point.problem());
    memory_bytes(point.problem(), &observables.demand, observables.columns().len())
}

/// The run of a point refused where it would take more memory than the machine has.
///
/// # Errors
/// The estimate and what there is.
pub fn room_for(document: &Document, point: &Point) -> Result<(), Mistake> {
    let bytes = run_bytes(document, point);
    match machine_bytes().filter(|machine| bytes > *machine) {
        Some(machine) => Err(Mistake::error(document.system.place, Fault::NeedsMemory { bytes, machine })),
        None => Ok(()),
    }
}

/// Computes a point without noise.
pub fn compute(document: &Document, point: &Point) -> Outcome {
    let clock = Clock::now();
    let solved = measure(document, point, point.problem(), true);
    conclude(document, point, Measured { solved, average: None }, clock)
}

/// The steady state of the last stretch: where it is the only one by itself, so that it does not inherit the rounding of the run; else,
/// or where something had been lost before the start, the one that the end of the sequence runs into.
fn steady_of(problem: &Problem, end: &Start) -> Option<Steady> {
    let whole = (problem.start.state().trace() - 1.0).abs() < 1e-9;
    let alone = if whole { crate::propagate::steady(problem, None).ok() } else { None };
    alone.or_else(|| crate::propagate::steady(problem, Some(&end.density())).ok())
}

/// The counts behind the read-out, if they are recorded.
fn counts_of(document: &Document, point: &Point, end: &Start) -> Vec<Count> {
    let shots = document.record.items.iter().find_map(|item| if let Item::Shots(shots) = item { Some(shots) } else { None });
    let Some(shots) = shots else { return Vec::new() };
    let reads = shots.probabilities(&document.system.names, &point.values).unwrap_or_default();
    let named: Vec<(String, Vec<f64>)> = shots.reads.iter().map(|(name, _)| name.clone()).zip(reads).collect();
    counts(point.values[shots.number.register as usize], &named, end.state())
}

/// Figures that are not linear in the channel (the best free turn, coherent and incoherent shares) are those of the averaged channel,
/// not the averages of those of each draw; their change under refinement is the averaged one.
fn of_the_averaged_channel(finals: &mut [Final], judge: Option<&GateJudge>, figures: Option<&GateFigures>) {
    let Some((judge, figures)) = judge.zip(figures) else { return };
    for (name, number) in judge.names().iter().zip(figures.numbers()) {
        if let Some(last) = finals.iter_mut().find(|last| last.name == *name) {
            last.finer += number - last.value;
            last.value = number;
        }
    }
}

/// Makes figures of what was recorded at a point; `clock` was started with its first run.
pub fn conclude(document: &Document, point: &Point, measured: Measured, clock: Clock) -> Outcome {
    let Measured { solved, average } = measured;
    let problem = point.problem();
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    let columns = observables.columns();
    let scales: Vec<f64> = columns.iter().map(|column| column.scale).collect();
    let asked = asked(document);

    let quasi = document.record.items.iter().find_map(|item| match item {
        Item::QuasiEnergies(period) => Some(point.values[period.register as usize]),
        _ => None,
    });
    let quasi = quasi.map(|period_s| {
        let one = problem.first(period_s);
        let demand = Demand { propagator: true, ..Demand::default() };
        (period_s, solve(&one, &demand, &Asked { cross_check: false, ..asked }, QuasiRecorder::default))
    });

    let (recorded, finer) = (&solved.recorded, &solved.finer);
    // numbers of a run that was not made or broke down mean nothing
    let sound = solved.error_figure.is_finite();
    let end = problem.moments.len() - 1;
    // levels of a grid or an expansion are known to `error_hz`, and phases between them drift apart by as much
    let of_levels = rad_s(point.built.error_hz) * problem.length_s();
    let besides = |k: usize| of_levels + average.as_ref().and_then(|average| average.besides.get(k)).copied().unwrap_or(0.0);
    let of_finer_rule = |k: usize| average.as_ref().and_then(|average| average.of_finer_rule.get(k)).copied().unwrap_or(0.0);
    let sampling = |k: usize| average.as_ref().and_then(|average| average.sampling.get(k)).copied();
    let mut finals: Vec<Final> = columns
        .iter()
        .enumerate()
        .map(|(k, column)| {
            let at = end * columns.len() + k;
            let number = |of: &Recorded| of.numbers.get(at).copied().filter(|_| sound).unwrap_or(f64::NAN);
            let (value, finer) = (number(recorded), number(finer));
            let error = (figure(value, finer, solved.floor) + besides(at)) * column.scale;
            let sampling_error = sampling(at).map(|error| error * column.scale);
            let (value, finer) = (value * column.scale, (finer + of_finer_rule(at)) * column.scale);
            Final { name: column.name.clone(), unit: column.unit, value, finer, error, sampling_error }
        })
        .collect();
    let (last, finer_last) = (recorded.last(), finer.last());
    let names: Vec<String> = observables.last.iter().flat_map(|quantity| quantity.names()).collect();
    let mut whole_error = 0.0f64;
    for (k, ((name, value), finer)) in names.into_iter().zip(last).zip(finer_last).enumerate() {
        let (value, finer) = if sound { (*value, *finer) } else { (f64::NAN, f64::NAN) };
        let error = figure(value, finer, solved.floor) + besides(recorded.in_rows + k);
        if name.starts_with("propagator_") {
            whole_error = whole_error.max(error);
        } else {
            let finer = finer + of_finer_rule(recorded.in_rows + k);
            let sampling_error = sampling(recorded.in_rows + k);
            finals.push(Final { name, unit: "1", value, finer, error, sampling_error });
        }
    }
    let gate = observables.gate.as_ref().filter(|_| sound).zip(recorded.channel.as_ref()).map(|(judge, channel)| judge.judge(channel));
    if average.is_some() {
        of_the_averaged_channel(&mut finals, observables.gate.as_ref(), gate.as_ref());
    }
    let propagator = recorded.propagator.clone().filter(|_| observables.propagator && sound).map(|propagator| (propagator, whole_error));
    let in_rows = (end + 1) * columns.len();
    let scaled = |numbers: &[f64]| -> Vec<f64> {
        numbers.iter().take(in_rows).enumerate().map(|(k, x)| if sound { x * scales[k % scales.len()] } else { f64::NAN }).collect()
    };
    let rows = scaled(&recorded.numbers);
    let row_errors = average.as_ref().map_or_else(Vec::new, |average| scaled(&average.sampling));
    let cross_check = solved.cross_check.as_ref().map(|check| match check {
        CrossCheck::Done { method, difference, .. } => Crossing { method: method.clone(), difference: Ok(*difference) },
        CrossCheck::Skipped { method, reason } => Crossing { method: method.clone(), difference: Err(reason.clone()) },
    });
    let end_state = recorded.end_state.clone().unwrap_or_else(|| problem.start.clone());
    let steady = wants_steady(document).then(|| steady_of(problem, &end_state)).flatten();
    let mut error_figure = quasi.as_ref().map_or(solved.error_figure, |(_, quasi)| quasi.error_figure.max(solved.error_figure)) + of_levels;
    for (level, name) in document.system.names.iter().enumerate().filter(|_| steady.is_some()) {
        let (value, error) = steady.as_ref().map_or((f64::NAN, f64::NAN), |found| (found.state[(level, level)].re, found.error));
        let name = steady_name(name);
        finals.push(Final { name, unit: "1", value, finer: value, error, sampling_error: None });
        error_figure = error_figure.max(error);
    }
    Outcome {
        counts: counts_of(document, point, &end_state),
        budget: Vec::new(),
        sensitivity: None,
        times_s: problem.moments.iter().map(|moment| moment.time_s).collect(),
        rows,
        finals,
        channel: recorded.channel.clone(),
        gate,
        propagator,
        end_state,
        resolved: solved.resolved,
        method: solved.method,
        reason: solved.reason.clone(),
        steps: solved.steps,
        resolutions: solved.resolutions.clone().map(|resolution| resolution.words),
        error_figure,
        floor: solved.floor,
        reached: solved.reached
            && (of_levels == 0.0 || error_figure <= document.accuracy.last)
            && steady.as_ref().is_none_or(|found| found.error <= document.accuracy.last)
            && quasi.as_ref().is_none_or(|(_, quasi)| quasi.reached),
        quasi_energies: quasi.map(|(period_s, quasi)| (period_s, quasi.recorded.found.unwrap_or_default(), quasi.error_figure)),
        steady,
        cross_check,
        average,
        row_errors,
        seconds: clock.elapsed().as_secs_f64(),
        columns,
    }
}

//! One point computed: a plan's [`Point`] handed to the methods, its numbers measured at two resolutions, and all that is known
//! of their error, as plain data for the report.

use std::time::Instant as Clock;

use crate::config::document::Document;
use crate::config::record::Item;
use crate::config::settings::MethodWord;
use crate::measure::{observables, Column, GateFigures, QuasiEnergy, QuasiRecorder, TraceRecorder};
use crate::plan::Point;
use crate::problem::{Matrix, Start};
use crate::propagate::{figure, solve, Asked, CrossCheck, Demand, Method, Recorder};

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
    /// The propagator of the whole sequence, wherever one was computed.
    pub whole: Option<Matrix>,
    /// The propagator, where it is recorded, and its error figure.
    pub propagator: Option<(Matrix, f64)>,
    /// Levels of the driven system: period in s, what was found, and the error of q in turns.
    pub quasi_energies: Option<(f64, Vec<QuasiEnergy>, f64)>,
    /// The state at the end.
    pub end_state: Start,
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
    /// Time taken, s.
    pub seconds: f64,
}

/// Computes a point.
pub fn compute(document: &Document, point: &Point) -> Outcome {
    let clock = Clock::now();
    let problem = point.problem();
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    let columns = observables.columns();
    let scales: Vec<f64> = columns.iter().map(|column| column.scale).collect();
    let asked = Asked {
        accuracy: document.accuracy.last,
        method: match document.accuracy.method {
            MethodWord::Automatic => None,
            MethodWord::ConstantSteps => Some(Method::ConstantSteps),
            MethodWord::Smooth => Some(Method::Smooth),
            MethodWord::Geometric => Some(Method::Geometric),
        },
        cross_check: document.accuracy.cross_check,
    };
    let solved = solve(problem, &observables.demand, &asked, || TraceRecorder::new(&observables, problem, &scales));

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
    let mut finals: Vec<Final> = columns
        .iter()
        .enumerate()
        .map(|(k, column)| {
            let (value, finer) = (recorded.value(end, k), finer.value(end, k));
            let (value, finer) = if sound { (value, finer) } else { (f64::NAN, f64::NAN) };
            let error = figure(value / column.scale, finer / column.scale, solved.floor) * column.scale;
            Final { name: column.name.clone(), unit: column.unit, value, finer, error }
        })
        .collect();
    let (last, finer_last) = (recorded.last(), finer.last());
    let names: Vec<String> = observables.last.iter().flat_map(|quantity| quantity.names()).collect();
    let mut whole_error = 0.0f64;
    for ((name, value), finer) in names.into_iter().zip(last).zip(finer_last) {
        let (value, finer) = if sound { (*value, *finer) } else { (f64::NAN, f64::NAN) };
        let error = figure(value, finer, solved.floor);
        if name.starts_with("propagator_") {
            whole_error = whole_error.max(error);
        } else {
            finals.push(Final { name, unit: "1", value, finer, error });
        }
    }
    let gate =
        observables.gate.as_ref().filter(|_| sound).zip(recorded.propagator.as_ref()).map(|(judge, propagator)| judge.judge(propagator));
    let propagator = recorded.propagator.clone().filter(|_| observables.propagator && sound).map(|propagator| (propagator, whole_error));
    let rows = recorded.numbers()[..(end + 1) * columns.len()]
        .iter()
        .enumerate()
        .map(|(k, number)| if sound { number * scales[k % scales.len()] } else { f64::NAN })
        .collect();
    let cross_check = solved.cross_check.as_ref().map(|check| match check {
        CrossCheck::Done { method, difference, .. } => Crossing { method: method.clone(), difference: Ok(*difference) },
        CrossCheck::Skipped { method, reason } => Crossing { method: method.clone(), difference: Err(reason.clone()) },
    });
    Outcome {
        times_s: problem.moments.iter().map(|moment| moment.time_s).collect(),
        rows,
        finals,
        whole: recorded.propagator.clone(),
        gate,
        propagator,
        end_state: recorded.end_state.clone().unwrap_or_else(|| problem.start.clone()),
        method: solved.method,
        reason: solved.reason.clone(),
        steps: solved.steps,
        resolutions: solved.resolutions.clone().map(|resolution| resolution.words),
        error_figure: quasi.as_ref().map_or(solved.error_figure, |(_, quasi)| quasi.error_figure.max(solved.error_figure)),
        floor: solved.floor,
        reached: solved.reached && quasi.as_ref().is_none_or(|(_, quasi)| quasi.reached),
        quasi_energies: quasi.map(|(period_s, quasi)| (period_s, quasi.recorded.found.unwrap_or_default(), quasi.error_figure)),
        cross_check,
        seconds: clock.elapsed().as_secs_f64(),
        columns,
    }
}

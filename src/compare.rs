//! A file and its variants computed side by side: how far apart their final numbers are, with the error of the difference, and
//! which of the dropped terms explains it.
//!
//! What depends on the frame (coherences, Bloch vectors, fidelities, gates) is brought to the frame of the reference before it
//! is compared: psi_reference = exp(2 pi i (phi_reference - phi_variant)) psi_variant with phi the turns of each level's frame.

use num_complex::Complex64;

use crate::config::compare::{Compare, AS_WRITTEN};
use crate::config::document::{read_variant, Document, Refusal};
use crate::config::messages::Mistake;
use crate::frame::ledger::{LedgerLine, TermKey};
use crate::measure::{observables, Last, Seen};
use crate::noise::{compute, Draws};
use crate::outcome::Outcome;
use crate::plan::{Plan, Point};
use crate::problem::Matrix;
use crate::units::cis_turns;

/// Most dropped terms that are put back one by one.
const MOST_TERMS: usize = 8;

/// One variant, computed.
pub struct Computed {
    /// Its name.
    pub name: String,
    /// Its plan.
    pub plan: Plan,
    /// Its numbers, in its own frame.
    pub outcome: Outcome,
    /// Its final numbers with their errors, in the frame of the reference.
    finals: Vec<(String, f64, f64)>,
}

/// A difference of one final quantity, variant minus reference.
#[derive(Debug, Clone, PartialEq)]
pub struct Difference {
    /// The quantity, named like its column.
    pub quantity: String,
    /// Variant minus reference.
    pub value: f64,
    /// Sum of the errors of both.
    pub error: f64,
    /// One standard error of it where random draws were averaged, as if those of both were independent; draws of one seed do better.
    pub sampling_error: Option<f64>,
}

/// What is left of the differences with one dropped term put back.
#[derive(Debug, Clone, PartialEq)]
pub struct PutBack {
    /// The term, as the run that dropped it lists it.
    pub line: LedgerLine,
    /// Which of the two runs dropped it.
    pub in_reference: bool,
    /// What remains of each difference.
    pub remains: Vec<(String, f64)>,
}

/// A variant held against the reference.
#[derive(Debug, Clone, PartialEq)]
pub struct Held {
    /// The variant.
    pub name: String,
    /// Quantity by quantity.
    pub differences: Vec<Difference>,
    /// Whether the largest is above the tolerance; none where there is no tolerance.
    pub exceeds: Option<bool>,
    /// The largest dropped terms, the one that explains most first.
    pub explanation: Vec<PutBack>,
}

/// The whole comparison.
pub struct Comparison {
    /// The reference.
    pub against: String,
    /// The tolerance.
    pub tolerance: Option<f64>,
    /// The file as written, then the variants in their order.
    pub computed: Vec<Computed>,
    /// Every variant but the reference.
    pub held: Vec<Held>,
}

/// Why a comparison could not be made.
pub enum CompareFault {
    /// A variant could not be read.
    Refused(Box<Refusal>),
    /// A variant's numbers make no run.
    Mistaken(Box<(Document, Mistake)>),
}

/// Plans of the file as written and of every variant, by name; all are judged before any is computed.
pub fn plans(document: &Document, compare: &Compare) -> Result<Vec<(String, Plan)>, CompareFault> {
    let mut plans = vec![(AS_WRITTEN.to_string(), Plan::new(document.clone()))];
    for variant in &compare.variants {
        let read = read_variant(document, variant).map_err(|refusal| CompareFault::Refused(Box::new(refusal)))?;
        plans.push((variant.name.clone(), Plan::new(read)));
    }
    for (_, plan) in &plans {
        if let Err(mistake) = plan.point() {
            return Err(CompareFault::Mistaken(Box::new((plan.document().clone(), mistake))));
        }
    }
    Ok(plans)
}

/// Computes all plans and holds each against the reference.
pub fn compare(compare: &Compare, plans: Vec<(String, Plan)>) -> Result<Comparison, CompareFault> {
    let fault = |plan: &Plan, mistake: Mistake| CompareFault::Mistaken(Box::new((plan.document().clone(), mistake)));
    let reference_at = plans.iter().position(|(name, _)| *name == compare.against).unwrap_or(0);
    let reference_turns = plans[reference_at].1.point().map_err(|mistake| fault(&plans[reference_at].1, mistake))?.end_turns();
    let mut computed = Vec::new();
    for (name, plan) in plans {
        let point = plan.point().map_err(|mistake| fault(&plan, mistake))?;
        let outcome = compute(plan.document(), &point, &Draws::of(plan.document())).map_err(|mistake| fault(&plan, mistake))?;
        let finals = in_frame(plan.document(), &point, &outcome, &reference_turns);
        drop(point);
        computed.push(Computed { name, plan, outcome, finals });
    }
    let reference = &computed[reference_at];
    let asked = asked(reference.plan.document());
    let mut held = Vec::new();
    for variant in computed.iter().filter(|variant| variant.name != compare.against) {
        let mut differences: Vec<Difference> = differences(&variant.finals, &reference.finals, &asked);
        for difference in &mut differences {
            let of = |computed: &Computed| {
                let last = computed.outcome.finals.iter().find(|last| last.name == difference.quantity);
                last.and_then(|last| last.sampling_error)
            };
            let both = [of(variant), of(reference)];
            difference.sampling_error = both.iter().flatten().copied().reduce(f64::hypot);
        }
        let largest = differences.iter().map(|difference| difference.value.abs()).fold(0.0, f64::max);
        let explanation = explain(variant, reference, &reference_turns, &asked).map_err(|mistake| fault(&variant.plan, mistake))?;
        held.push(Held {
            name: variant.name.clone(),
            exceeds: compare.tolerance.map(|tolerance| largest > tolerance),
            differences,
            explanation,
        });
    }
    Ok(Comparison { against: compare.against.clone(), tolerance: compare.tolerance, computed, held })
}

/// The final quantities that are compared: those under `record: final`, or all.
fn asked(document: &Document) -> Box<dyn Fn(&str) -> bool> {
    let record = document.record.clone();
    Box::new(move |quantity: &str| record.takes(quantity))
}

fn differences(variant: &[(String, f64, f64)], reference: &[(String, f64, f64)], asked: &dyn Fn(&str) -> bool) -> Vec<Difference> {
    let of = |(name, value, error): &(String, f64, f64)| {
        let (_, other, other_error) = reference.iter().find(|(other, ..)| other == name)?;
        asked(name).then(|| Difference { quantity: name.clone(), value: value - other, error: error + other_error, sampling_error: None })
    };
    variant.iter().filter_map(of).collect()
}

/// Final numbers and errors, what depends on the frame brought to that of the reference.
fn in_frame(document: &Document, point: &Point, outcome: &Outcome, reference_turns: &[f64]) -> Vec<(String, f64, f64)> {
    let mut finals: Vec<(String, f64, f64)> = outcome.finals.iter().map(|last| (last.name.clone(), last.value, last.error)).collect();
    let own = point.end_turns();
    // a variant with another number of levels is compared where both have one
    let factors: Vec<Complex64> =
        own.iter().enumerate().map(|(j, turns)| cis_turns(reference_turns.get(j).map_or(0.0, |reference| reference - turns))).collect();
    if factors.iter().all(|factor| (factor - Complex64::from(1.0)).norm() == 0.0) {
        return finals;
    }
    let problem = point.problem();
    let observables = observables(document, &point.built, &point.values, &point.energies_hz, problem);
    let state = outcome.end_state.turned(&factors);
    let Some(moment) = problem.moments.last() else { return finals };
    let mut row = Vec::new();
    for quantity in &observables.quantities {
        let before = row.len();
        let columns = quantity.columns();
        // energies, times and adiabatic populations belong to their own frame
        let turned = columns.iter().all(|column| ["coherence", "Bloch vector", "fidelity", "mean"].contains(&column.panel));
        if turned {
            quantity.see(&Seen { moment, state: state.state(), time_in_s: &[] }, &mut row);
            for (column, value) in columns.iter().zip(&row[before..]) {
                if let Some(last) = finals.iter_mut().find(|(name, ..)| *name == column.name) {
                    last.1 = *value;
                }
            }
        }
    }
    if let (Some(judge), Some(channel)) = (&observables.gate, &outcome.channel) {
        let mut turned = channel.clone();
        for image in &mut turned.images {
            *image = Matrix::from_fn(image.nrows(), image.ncols(), |a, b| factors[a] * image[(a, b)] * factors[b].conj());
        }
        for (name, figure) in judge.names().iter().zip(judge.judge(&turned).numbers()) {
            if let Some((_, value, _)) = finals.iter_mut().find(|(other, ..)| other == name) {
                *value = figure;
            }
        }
    }
    finals
}

/// Puts the largest dropped terms back one by one, into the run that dropped what the other kept.
fn explain(
    variant: &Computed,
    reference: &Computed,
    reference_turns: &[f64],
    asked: &dyn Fn(&str) -> bool,
) -> Result<Vec<PutBack>, Mistake> {
    let (own, other) = (variant.plan.point()?, reference.plan.point()?);
    let dropped = |point: &Point| -> Vec<LedgerLine> {
        point.in_frame().map_or_else(Vec::new, |frame| frame.rotated.ledger.dropped().into_iter().cloned().collect())
    };
    let (mine, theirs) = (dropped(&own), dropped(&other));
    let only = |these: &[LedgerLine], those: &[LedgerLine]| -> Vec<LedgerLine> {
        these.iter().filter(|line| those.iter().all(|other| other.key != line.key)).cloned().collect()
    };
    let mut lines: Vec<(LedgerLine, bool)> = only(&mine, &theirs).into_iter().map(|line| (line, false)).collect();
    lines.extend(only(&theirs, &mine).into_iter().map(|line| (line, true)));
    lines.sort_by(|(a, _), (b, _)| b.predicted_ripple().unwrap_or(0.0).total_cmp(&a.predicted_ripple().unwrap_or(0.0)));
    let mut found = Vec::new();
    let mut done: Vec<(TermKey, bool)> = Vec::new();
    for (line, in_reference) in lines {
        if done.len() >= MOST_TERMS || done.contains(&(line.key, in_reference)) {
            continue;
        }
        done.push((line.key, in_reference));
        let plan = if in_reference { &reference.plan } else { &variant.plan };
        let point = plan.point_with(&[line.key])?;
        let outcome = compute(plan.document(), &point, &Draws::of(plan.document()))?;
        let finals = in_frame(plan.document(), &point, &outcome, reference_turns);
        let left = if in_reference { differences(&variant.finals, &finals, asked) } else { differences(&finals, &reference.finals, asked) };
        found.push(PutBack {
            line,
            in_reference,
            remains: left.into_iter().map(|difference| (difference.quantity, difference.value)).collect(),
        });
    }
    let size = |put: &PutBack| put.remains.iter().map(|(_, value)| value.abs()).fold(0.0, f64::max);
    found.sort_by(|a, b| size(a).total_cmp(&size(b)));
    Ok(found)
}

/// What the comparison comes to, in sentences.
pub fn sentences(document: &Document, comparison: &Comparison) -> Vec<String> {
    use crate::config::messages::short;
    let mut sentences = Vec::new();
    for held in &comparison.held {
        let Some(largest) = held.differences.iter().max_by(|a, b| a.value.abs().total_cmp(&b.value.abs())) else { continue };
        let mut text = format!(
            "{} differs from {} by up to {} ({}, +- {})",
            held.name,
            comparison.against,
            short(largest.value.abs()),
            largest.quantity,
            short(largest.error)
        );
        match (held.exceeds, comparison.tolerance) {
            (Some(true), Some(tolerance)) => text.push_str(&format!(", more than the tolerance of {}", short(tolerance))),
            (Some(false), Some(tolerance)) => text.push_str(&format!(", within the tolerance of {}", short(tolerance))),
            _ => {}
        }
        if let Some(first) = held.explanation.first() {
            let left = first.remains.iter().map(|(_, value)| value.abs()).fold(0.0, f64::max);
            // levels and drives as the run that dropped the term calls them
            let dropper = if first.in_reference { &comparison.against } else { &held.name };
            let its = comparison.computed.iter().find(|computed| computed.name == *dropper).map_or(document, |c| c.plan.document());
            let [a, b] = first.line.levels().map(|level| its.system.names[level].as_str());
            let drive = crate::plan::source_name(its, first.line.key.source);
            let turns = crate::config::messages::short_with_unit(first.line.turns_at_hz, "Hz");
            let share = if left < 0.5 * largest.value.abs() { "explains most of it" } else { "explains most among the dropped terms" };
            text.push_str(&format!(
                "; the dropped term of {drive} on {a} and {b} turning at {turns} {share}: with it put back {} is left",
                short(left)
            ));
        }
        sentences.push(text + ".");
    }
    sentences
}

//! `nutate run FILE`: evolves, records, and writes numbers and plots.

use clap::Args;

use super::{complain, complain_of, not_drawn, point, print, read_config, Common, Results, Status};
use crate::noise::{compute, Draws};
use crate::outcome::room_for;
use crate::outcome::sensitivity::Sensitivity;
use crate::plan::{Plan, Point};
use crate::report::folder::{default_folder, prepare};
use crate::report::{result_json, summary, write};
use crate::sensitivity::sensitivity;

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    #[command(flatten)]
    results: Results,
    /// Say how every final number depends on every named number, and how tightly each must be held
    #[arg(long)]
    sensitivity: bool,
    /// What a final number may change by, in place of the accuracy asked for
    #[arg(long, value_name = "SIZE", requires = "sensitivity", value_parser = tolerance)]
    tolerance: Option<f64>,
}

/// A tolerance: a number above 0.
fn tolerance(word: &str) -> Result<f64, String> {
    match word.trim().parse::<f64>() {
        Ok(size) if size > 0.0 && size.is_finite() => Ok(size),
        _ => Err("a number above 0 is needed, such as 1e-4".to_string()),
    }
}

/// The sensitivity of a point, or a complaint.
fn sensitivities(words: &Words, plan: &Plan, point: &Point) -> Result<Option<Sensitivity>, Status> {
    if !words.sensitivity {
        return Ok(None);
    }
    sensitivity(plan, point, words.tolerance).map(Some).map_err(|refusal| {
        let (why, write) = refusal.words();
        complain(&format!("error: {}: no sensitivity: {why}.\n  Write: {write}\n", words.common.config.display()));
        Status::Refused
    })
}

/// Runs the file.
pub(super) fn run(words: &Words) -> Status {
    match try_run(words) {
        Ok(status) | Err(status) => status,
    }
}

fn try_run(words: &Words) -> Result<Status, Status> {
    let plan = Plan::new(read_config(&words.common)?);
    let document = plan.document();
    let point = point(&plan)?;
    let sensitivity = sensitivities(words, &plan, &point)?;
    let folder = words.results.folder.clone().unwrap_or_else(|| default_folder(document));
    let staging = prepare(&folder, document, words.results.replace).map_err(|fault| {
        complain(&format!("{fault}\n"));
        Status::Refused
    })?;
    complain_of(document, &document.warnings);
    complain_of(document, &point.warnings);
    room_for(document, &point).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
    let mut outcome = compute(document, &point, &Draws::of(document)).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
    outcome.sensitivity = sensitivity;
    complain_of(document, outcome.warnings());
    let written = write::run(staging, document, &point, &outcome).map_err(|error| {
        complain(&format!("error: the results could not be written to {}: {error}.\n", folder.display()));
        Status::Machine
    })?;
    not_drawn(&written);
    if words.results.json {
        let result = result_json::result(document, &point, &outcome);
        print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default()));
    } else if !words.results.quiet {
        print(&summary::summary(document, &point, &outcome, Some(&written.place)));
    }
    if !outcome.reached {
        complain(&format!("warning: {}.\n", summary::not_reached(document, &outcome)));
        return Ok(Status::NotAccurate);
    }
    Ok(Status::Good)
}

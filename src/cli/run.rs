//! `nutate run FILE`: evolves, records, and writes numbers and plots.

use clap::Args;

use super::{complain, complain_of, not_drawn, point, print, read_config, Common, Results, Status};
use crate::noise::{compute, Draws};
use crate::plan::Plan;
use crate::report::folder::{default_folder, prepare};
use crate::report::{result_json, summary, write};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    #[command(flatten)]
    results: Results,
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
    let folder = words.results.folder.clone().unwrap_or_else(|| default_folder(document));
    let staging = prepare(&folder, document, words.results.replace).map_err(|fault| {
        complain(&format!("{fault}\n"));
        Status::Refused
    })?;
    complain_of(document, &document.warnings);
    complain_of(document, &point.warnings);
    let outcome = compute(document, &point, &Draws::of(document)).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
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

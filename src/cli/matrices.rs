//! `nutate matrices FILE`: every operator of a system as a matrix in the working basis, with levels, lines and strengths.

use clap::Args;

use super::{complain, complain_of, not_drawn, print, settings, Common, Results, Status};
use crate::config::document::read_system_alone;
use crate::config::messages::Mistake;
use crate::matrices::matrices;
use crate::plan::Plan;
use crate::report::folder::{default_folder, prepare};
use crate::report::{matrices_json, matrices_text, write};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    #[command(flatten)]
    results: Results,
}

/// Builds the matrices and writes them.
pub(super) fn run(words: &Words) -> Status {
    match try_run(words) {
        Ok(status) | Err(status) => status,
    }
}

fn try_run(words: &Words) -> Result<Status, Status> {
    let set = settings(&words.common.set)?;
    let document = read_system_alone(&words.common.config, &set).map_err(|refusal| {
        complain(&refusal.text());
        Status::Refused
    })?;
    let plan = Plan::new(document);
    let document = plan.document();
    let found = matrices(&plan).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
    let folder = words.results.folder.clone().unwrap_or_else(|| default_folder(document));
    let staging = prepare(&folder, document, words.results.replace).map_err(|fault| {
        complain(&format!("{fault}\n"));
        Status::Refused
    })?;
    complain_of(document, &document.warnings);
    let doubtful: Vec<Mistake> =
        found.still.built.doubtful.iter().map(|(_, mistake)| Mistake { warning: true, ..mistake.clone() }).collect();
    complain_of(document, &doubtful);
    let written = write::matrices(staging, document, &found).map_err(|error| {
        complain(&format!("error: the results could not be written to {}: {error}.\n", folder.display()));
        Status::Machine
    })?;
    not_drawn(&written);
    if words.results.json {
        print(&format!("{}\n", serde_json::to_string_pretty(&matrices_json::result(document, &found)).unwrap_or_default()));
    } else if !words.results.quiet {
        print(&matrices_text::summary(document, &found, &written.place));
    }
    Ok(Status::Good)
}

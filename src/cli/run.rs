//! `nutate run FILE`: evolves, records, and writes numbers and plots.

use std::path::PathBuf;

use clap::Args;

use super::{complain, complain_of, not_drawn, point, print, read_config, Common, Status};
use crate::outcome::compute;
use crate::plan::Plan;
use crate::report::folder::{default_folder, prepare};
use crate::report::{result_json, summary, write};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    /// Where the results go (in place of output / folder)
    #[arg(long, value_name = "DIR")]
    folder: Option<PathBuf>,
    /// Results of another config in that folder may go
    #[arg(long)]
    replace: bool,
    /// Print the result object in place of the screen text
    #[arg(long)]
    json: bool,
    /// Print nothing but warnings and errors
    #[arg(long, short)]
    quiet: bool,
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
    let folder = words.folder.clone().unwrap_or_else(|| default_folder(document));
    let staging = prepare(&folder, document, words.replace).map_err(|fault| {
        complain(&format!("{fault}\n"));
        Status::Refused
    })?;
    complain_of(document, &document.warnings);
    complain_of(document, &point.warnings);
    let outcome = compute(document, &point);
    let written = write::run(staging, document, &point, &outcome).map_err(|error| {
        complain(&format!("error: the results could not be written to {}: {error}.\n", folder.display()));
        Status::Machine
    })?;
    not_drawn(&written);
    if words.json {
        let result = result_json::result(document, &point, &outcome);
        print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default()));
    } else if !words.quiet {
        print(&summary::summary(document, &point, &outcome, Some(&written.place)));
    }
    if !outcome.reached {
        complain(&format!("warning: {}.\n", summary::not_reached(document, &outcome)));
        return Ok(Status::NotAccurate);
    }
    Ok(Status::Good)
}

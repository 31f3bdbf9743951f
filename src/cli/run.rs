//! `nutate run FILE`: evolves, records, and writes numbers and plots.

use std::fs::File;
use std::io::{self, BufWriter};
use std::path::PathBuf;

use clap::Args;

use super::{complain, complain_of, point, print, read_config, Common, Status};
use crate::outcome::{compute, Outcome};
use crate::plan::{Plan, Point};
use crate::report::folder::{default_folder, prepare, Staging};
use crate::report::{figures, result_json, summary, traces_csv};

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
    let written = write(staging, &plan, &point, &outcome).map_err(|error| {
        complain(&format!("error: the results could not be written to {}: {error}.\n", folder.display()));
        Status::Machine
    })?;
    if words.json {
        let result = result_json::result(document, &point, &outcome);
        print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default()));
    } else if !words.quiet {
        print(&summary::summary(document, &point, &outcome, Some(&written)));
    }
    if !outcome.reached {
        complain(&format!("warning: {}.\n", summary::not_reached(document, &outcome)));
        return Ok(Status::NotAccurate);
    }
    Ok(Status::Good)
}

/// Writes every file to the side and moves them into place; says where they are.
fn write(staging: Staging, plan: &Plan, point: &Point, outcome: &Outcome) -> io::Result<String> {
    let document = plan.document();
    let side = staging.side().to_path_buf();
    staging.archive(document)?;
    traces_csv::write(outcome, BufWriter::new(File::create(side.join("traces.csv"))?))?;
    let mut names = vec!["traces.csv".to_string(), "result.json".to_string()];
    for (name, figure) in figures::of_run(document, point, outcome) {
        match figure {
            Ok(drawn) => {
                names.extend(figures::save(&side, name, &drawn)?.into_iter().take(1));
            }
            Err(reason) => complain(&format!("warning: the plot {name} was not drawn: {reason}.\n")),
        }
    }
    let json = serde_json::to_string_pretty(&result_json::result(document, point, outcome))?;
    std::fs::write(side.join("result.json"), json + "\n")?;
    let folder = staging.finish()?;
    Ok(format!("{} in {}", names.join(", "), folder.display()))
}

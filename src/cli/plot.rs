//! `nutate plot FOLDER`: draws the plots of a result again, from its numbers and the config it keeps.

use std::path::PathBuf;

use clap::Args;

use super::scan::set_up;
use super::{complain, point, print, refuse, Status};
use crate::config::document::{read_archived, Document};
use crate::measure::observables;
use crate::plan::Plan;
use crate::report::scan_csv::Table;
use crate::report::scan_figures::{of_scan, Points};
use crate::report::{figures, traces_csv};
use crate::scan::summary::{cuts, Summary};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    /// A folder that a run has written
    folder: PathBuf,
    /// Print nothing but warnings and errors
    #[arg(long, short)]
    quiet: bool,
}

/// Draws again.
pub(super) fn plot(words: &Words) -> Status {
    match try_plot(words) {
        Ok(status) | Err(status) => status,
    }
}

fn try_plot(words: &Words) -> Result<Status, Status> {
    let shown = words.folder.display();
    let no_result = |reason: String| {
        complain(&format!("error: {shown} is no folder of a result: {reason}.\n  Write: the folder that nutate run has written\n"));
        Status::Refused
    };
    let bytes = std::fs::read(words.folder.join("result.json")).map_err(|_| no_result("it has no result.json".to_string()))?;
    let json: serde_json::Value = serde_json::from_slice(&bytes).map_err(|_| no_result("its result.json cannot be read".to_string()))?;
    if json.get("variants").is_some() {
        return Err(no_result("it holds a comparison; nutate compare draws its plots".to_string()));
    }
    let set: Vec<(String, String)> = json
        .pointer("/config/set")
        .and_then(|set| set.as_object())
        .map(|set| set.iter().filter_map(|(name, value)| Some((name.clone(), value.as_str()?.to_string()))).collect())
        .unwrap_or_default();
    let document = read_archived(&words.folder, &set).map_err(|refusal| {
        refuse(&refusal);
        Status::Refused
    })?;
    if json.get("points").is_some() {
        return plot_scan(words, document);
    }
    let plan = Plan::new(document);
    let point = point(&plan)?;
    let document = plan.document();
    let columns = observables(document, &point.built, &point.values, &point.energies_hz, point.problem()).columns();
    let (headings, mut values) = traces_csv::read(&words.folder.join("traces.csv"))
        .map_err(|reason| no_result(format!("its traces.csv cannot be read ({reason})")))?;
    let wanted: Vec<&str> = std::iter::once("time_s").chain(columns.iter().map(|column| column.name.as_str())).collect();
    let drawn: Vec<String> = wanted[1..].iter().map(|name| format!("{name}{}", traces_csv::SAMPLING_ERROR)).collect();
    let (plain, errors) = headings.split_at(wanted.len().min(headings.len()));
    if plain != wanted || !(errors.is_empty() || errors == drawn) {
        return Err(no_result("traces.csv has other columns than its config records".to_string()));
    }
    let bands = values.split_off(wanted.len());
    let times = values.remove(0);
    let mut names = Vec::new();
    for (name, figure) in figures::of_columns(document, &point, &columns, &times, values, bands) {
        match figure {
            Ok(drawn) => {
                let written = figures::save(&words.folder, name, &drawn).map_err(|error| {
                    complain(&format!("error: {name} could not be written to {shown}: {error}.\n"));
                    Status::Machine
                })?;
                names.extend(written);
            }
            Err(reason) => complain(&format!("warning: the plot {name} was not drawn: {reason}.\n")),
        }
    }
    if !words.quiet {
        print(&format!("{} in {shown}\n", names.join(", ")));
    }
    Ok(Status::Good)
}

/// Draws the plots of a scan again, from its table.
fn plot_scan(words: &Words, document: Document) -> Result<Status, Status> {
    let shown = words.folder.display();
    let setup = set_up(document)?;
    let failed = |error: std::io::Error| {
        complain(&format!("error: the plots of {shown} cannot be drawn again: {error}.\n"));
        if error.kind() == std::io::ErrorKind::InvalidData {
            Status::Refused
        } else {
            Status::Machine
        }
    };
    let table = Table { setup: &setup, path: words.folder.join("scan.csv") };
    let best = Summary::of(&setup, &table).map_err(failed)?.best;
    let through = best.as_ref().map(|best| cuts(&setup, &table, best.point)).transpose().map_err(failed)?;
    let points = Points::of(&setup, &table, best, through.unwrap_or_default()).map_err(failed)?;
    let mut names = Vec::new();
    for (name, figure) in of_scan(&points) {
        match figure {
            Ok(drawn) => names.extend(figures::save(&words.folder, &name, &drawn).map_err(failed)?),
            Err(reason) => complain(&format!("warning: the plot {name} was not drawn: {reason}.\n")),
        }
    }
    if !words.quiet {
        print(&format!("{} in {shown}\n", names.join(", ")));
    }
    Ok(Status::Good)
}

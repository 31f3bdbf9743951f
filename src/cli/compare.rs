//! `nutate compare FILE`: runs the file as written and each variant, and shows how far apart they are.

use std::path::PathBuf;
use std::time::Instant;

use clap::Args;

use super::{complain, complain_of, not_drawn, point, print, read_config, refuse, Common, Results, Status};
use crate::compare::{compare, plans, CompareFault};
use crate::config::document::Document;
use crate::config::messages::{render, Fault, Mistake};
use crate::config::place::Place;
use crate::plan::Plan;
use crate::report::folder::{default_folder, prepare};
use crate::report::{compare_json, compare_text, summary, write};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    #[command(flatten)]
    results: Results,
}

/// Compares.
pub(super) fn run(words: &Words) -> Status {
    match try_run(words) {
        Ok(status) | Err(status) => status,
    }
}

fn fault(fault: CompareFault) -> Status {
    match fault {
        CompareFault::Refused(refusal) => refuse(&refusal),
        CompareFault::Mistaken(inside) => complain_of(&inside.0, &[inside.1]),
    }
    Status::Refused
}

/// Warnings of one side of a comparison, under its name; what another side has said already is not said again.
fn complain_once(said: &mut Vec<String>, name: &str, document: &Document, warnings: &[Mistake]) {
    let fresh: Vec<String> = warnings
        .iter()
        .map(|warning| render(&document.sources, std::slice::from_ref(warning)))
        .filter(|text| !said.contains(text))
        .collect();
    if !fresh.is_empty() {
        complain(&format!("{name}:\n{}", fresh.concat()));
        said.extend(fresh);
    }
}

fn try_run(words: &Words) -> Result<Status, Status> {
    let clock = Instant::now();
    let document = read_config(&words.common)?;
    let Some(written) = document.compare.clone() else {
        complain_of(&document, &[Mistake::error(Place::whole_file(0), Fault::NothingToCompare)]);
        return Err(Status::Refused);
    };
    let base = Plan::new(document);
    point(&base)?;
    let document = base.document();
    let all = plans(document, &written).map_err(fault)?;
    let folder = words.results.folder.clone().unwrap_or_else(|| {
        // a run of the same file keeps its own folder
        let mut name = default_folder(document).into_os_string();
        name.push("-compare");
        PathBuf::from(name)
    });
    let staging = prepare(&folder, document, words.results.replace).map_err(|fault| {
        complain(&format!("{fault}\n"));
        Status::Refused
    })?;
    complain_of(document, &document.warnings);
    let mut said = Vec::new();
    for (name, plan) in &all {
        let warnings = plan.point().map_or_else(|_| Vec::new(), |point| point.warnings.clone());
        complain_once(&mut said, name, plan.document(), &warnings);
    }
    let comparison = compare(&written, all).map_err(fault)?;
    for computed in &comparison.computed {
        complain_once(&mut said, &computed.name, computed.plan.document(), computed.outcome.warnings());
    }
    let seconds = clock.elapsed().as_secs_f64();
    let files = write::comparison(staging, document, &comparison, seconds).map_err(|error| {
        complain(&format!("error: the results could not be written to {}: {error}.\n", folder.display()));
        Status::Machine
    })?;
    not_drawn(&files);
    if words.results.json {
        let result = compare_json::comparison(document, &comparison, seconds);
        print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default()));
    } else if !words.results.quiet {
        print(&compare_text::table(document, &comparison, Some(&files.place)));
    }
    let mut status = Status::Good;
    for computed in comparison.computed.iter().filter(|computed| !computed.outcome.reached) {
        complain(&format!("warning: {}: {}.\n", computed.name, summary::not_reached(computed.plan.document(), &computed.outcome)));
        status = Status::NotAccurate;
    }
    Ok(status)
}

//! `nutate merge FOLDER..`: joins the parts of a scan into one result, or tells what is missing.

use std::path::{Path, PathBuf};
use std::time::Instant;

use clap::Args;

use super::scan::{refuse_folder, set_up, Finishing};
use super::{complain, refuse, Status};
use crate::config::document::{read_archived, read_kept, Document};
use crate::report::folder::prepare;
use crate::report::scan_folder::{hold, spaced, ScanFault};
use crate::scan::bits::Bits;
use crate::scan::changed::change;
use crate::scan::lanes::Lanes;
use crate::scan::order::Order;
use crate::scan::shelf::{read_all, Shelf};
use crate::scan::store::{Content, Part, Store};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    /// Folders that hold parts
    #[arg(required = true)]
    folders: Vec<PathBuf>,
    /// Where the result goes (in place of the first folder)
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

/// Joins.
pub(super) fn merge(words: &Words) -> Status {
    match try_merge(words) {
        Ok(status) | Err(status) => status,
    }
}

fn try_merge(words: &Words) -> Result<Status, Status> {
    let began = Instant::now();
    let no_stores = |folder: &Path| {
        complain(&format!("error: {} holds no part of a scan.\n  Write: the folder given to nutate scan --part\n", folder.display()));
        Status::Refused
    };
    let (mut contents, mut guards): (Vec<Content>, Vec<std::fs::File>) = (Vec::new(), Vec::new());
    for folder in &words.folders {
        if !folder.is_dir() {
            return Err(no_stores(folder));
        }
        let found = read_all(folder).map_err(|fault| refuse_folder(&fault.into()))?;
        if found.is_empty() {
            return Err(no_stores(folder));
        }
        guards.push(hold(folder, true).map_err(|fault| refuse_folder(&fault))?);
        contents.extend(found);
    }
    let Some(first) = contents.first() else { return Err(Status::Refused) };
    let document = document_of(&words.folders[0], first)?;
    let damaged: Vec<_> = contents.iter().flat_map(|content| content.damaged.clone()).collect();
    if !damaged.is_empty() {
        return Err(refuse_folder(&ScanFault::Damaged(damaged)));
    }
    for content in &contents[1..] {
        if let Some(change) = change(&document, &content.head, &first.head) {
            complain(&format!(
                "error: {} and {} are parts of different scans.\n  Different: {change}.\n",
                first.path.display(),
                content.path.display()
            ));
            return Err(Status::Refused);
        }
    }
    let setup = set_up(document)?;
    // what is computed again at its end is computed as the first part was, if this machine can
    let lanes = Lanes::from_words(&first.head.lanes).filter(|lanes| lanes.is_here());
    let setup = setup.with_lanes(lanes.unwrap_or_else(Lanes::chosen));
    let shelf = Shelf::new(&contents, first.head.points);
    if shelf.double > 0 && !words.quiet {
        complain(&format!("{} points are there more than once; one row of each counts.\n", spaced(shelf.double)));
    }
    if shelf.done.count() < first.head.points {
        complain(&missing(&contents, &shelf.done));
        return Ok(Status::Stopped);
    }
    let folder = words.folder.as_ref().unwrap_or(&words.folders[0]);
    if !words.folders.contains(folder) {
        // judged as a run would judge it; made anew by the finish
        prepare(folder, setup.document(), words.replace).map_err(|fault| {
            complain(&format!("{fault}\n"));
            Status::Refused
        })?;
    }
    let finishing = Finishing {
        setup: &setup,
        folder,
        computed: 0,
        reused: first.head.points,
        threads: 1,
        began,
        json: words.json,
        quiet: words.quiet,
    };
    // what is computed again at its end goes into a store of the whole
    let mut whole = first.head.clone();
    whole.part = Part::WHOLE;
    let path = folder.join(Part::WHOLE.file_name(0));
    std::fs::create_dir_all(folder).map_err(|error| refuse_folder(&ScanFault::Io(folder.clone(), error)))?;
    let (mut store, _) = Store::open(&path, &whole).map_err(|fault| refuse_folder(&fault.into()))?;
    finishing.finish(contents, &mut store)
}

/// The config that the parts were computed from: the one kept in the folder, or the one in the head of a store.
fn document_of(folder: &Path, content: &Content) -> Result<Document, Status> {
    let same =
        std::fs::read(folder.join("config.yaml")).is_ok_and(|bytes| String::from_utf8_lossy(&bytes).ends_with(&content.head.config.1));
    let read = if same { read_archived(folder, &content.head.set) } else { read_kept(folder, &content.head.config.1, &content.head.set) };
    read.map_err(|refusal| {
        refuse(&refusal);
        Status::Refused
    })
}

/// What is missing, part by part, and how to get it.
fn missing(contents: &[Content], done: &Bits) -> String {
    let head = &contents[0].head;
    let of = contents.iter().map(|content| content.head.part.of).max().unwrap_or(1);
    let mut text = format!("not merged: {} of {} points are missing.\n", spaced(head.points - done.count()), spaced(head.points));
    let (mut shown, mut parts) = (0, 0);
    for number in 1..=of {
        let order = Order::of(head, Part { number, of });
        let left = order.pending(done).count() as u64;
        if left == 0 {
            continue;
        }
        parts += 1;
        if shown < 12 {
            let begun = if contents.iter().any(|content| content.head.part == order.part) { "" } else { ", not begun" };
            text.push_str(&format!("  part {number} of {of}: {} of {} points missing{begun}\n", spaced(left), spaced(order.count())));
            shown += 1;
        }
    }
    if parts > shown {
        text.push_str(&format!("  and {} more parts\n", parts - shown));
    }
    let word = if of == 1 { String::new() } else { format!(" --part K/{of}") };
    text.push_str(&format!(
        "  Write: nutate scan {}{word} --folder FOLDER      (goes on from what is stored), then merge again\n",
        head.config.0
    ));
    text
}

//! `nutate status FOLDER`: how far a scan is, from its stores alone; a process that is at work on them is not disturbed.

use std::path::{Path, PathBuf};
use std::time::SystemTime;

use clap::Args;
use serde_json::{json, Value};

use super::{complain, print, Status};
use crate::report::folder::read_result;
use crate::report::scan_folder::spaced;
use crate::report::scan_text::duration;
use crate::scan::order::Order;
use crate::scan::shelf::{read_all, Shelf};
use crate::scan::store::{is_locked, Content};

/// Parts that are shown one by one.
const SHOWN: usize = 40;

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    /// The folder of a scan
    folder: PathBuf,
    /// Print an object in place of text
    #[arg(long)]
    json: bool,
}

/// One store.
struct State {
    content: Content,
    at_work: bool,
    stored: u64,
    wanted: u64,
    since_s: Option<f64>,
}

/// Tells.
pub(super) fn status(words: &Words) -> Status {
    let contents = match read_all(&words.folder) {
        Ok(contents) => contents,
        Err(fault) => return super::scan::refuse_folder(&fault.into()),
    };
    if contents.is_empty() {
        return without_stores(words);
    }
    let points = contents[0].head.points;
    let shelf = Shelf::new(&contents, points);
    let states: Vec<State> = contents.into_iter().map(|content| state(content, &shelf)).collect();
    let told = if words.json { tree(&states, &shelf, points) } else { text(&words.folder, &states, &shelf, points) };
    print(&told);
    Status::Good
}

fn without_stores(words: &Words) -> Status {
    match read_result(&words.folder).filter(|result| result.get("points").is_some()) {
        Some(result) if words.json => print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default())),
        Some(result) => {
            let count = |key: &str| spaced(result[key].as_u64().unwrap_or(0));
            print(&format!("{}: complete, {} points, {} failed.\n", words.folder.display(), count("points"), count("failed")));
        }
        None => {
            complain(&format!("error: {} holds no scan.\n  Write: the folder of a nutate scan\n", words.folder.display()));
            return Status::Refused;
        }
    }
    Status::Good
}

fn state(content: Content, shelf: &Shelf) -> State {
    let order = Order::of(&content.head, content.head.part);
    let stored = order.all().filter(|point| shelf.done.has(*point)).count() as u64;
    let changed = std::fs::metadata(&content.path).and_then(|data| data.modified()).ok();
    let since_s = changed.and_then(|at| SystemTime::now().duration_since(at).ok()).map(|since| since.as_secs_f64());
    State { at_work: is_locked(&content.path), stored, wanted: order.count(), since_s, content }
}

fn text(folder: &Path, states: &[State], shelf: &Shelf, points: u64) -> String {
    let failed: u64 = states.iter().map(|state| state.content.failed).sum();
    let mut text = format!(
        "{}: {} of {} points stored ({:.1} %), {} failed\n",
        folder.display(),
        spaced(shelf.done.count()),
        spaced(points),
        100.0 * shelf.done.count() as f64 / points.max(1) as f64,
        spaced(failed)
    );
    for state in states.iter().take(SHOWN) {
        let part = state.content.head.part;
        let doing = match (state.at_work, state.stored == state.wanted) {
            (_, true) => "complete".to_string(),
            (true, _) => "a process is at work".to_string(),
            (false, _) => "no process is at work".to_string(),
        };
        let since = match state.since_s {
            Some(since) if since < 1.0 => ", written just now".to_string(),
            Some(since) => format!(", last written {} ago", duration(since.round())),
            None => String::new(),
        };
        text.push_str(&format!(
            "  part {} of {}: {} of {} points, {doing}{since}\n",
            part.number,
            part.of,
            spaced(state.stored),
            spaced(state.wanted)
        ));
        for damage in &state.content.damaged {
            text.push_str(&format!(
                "    bytes {} to {} cannot be read; nutate scan --repair computes their points again\n",
                damage.from, damage.to
            ));
        }
    }
    if states.len() > SHOWN {
        text.push_str(&format!("  and {} more parts\n", states.len() - SHOWN));
    }
    text
}

fn tree(states: &[State], shelf: &Shelf, points: u64) -> String {
    let parts: Vec<Value> = states
        .iter()
        .map(|state| {
            json!({
                "part": state.content.head.part.number, "of": state.content.head.part.of, "stored": state.stored, "points": state.wanted,
                "failed": state.content.failed, "at_work": state.at_work, "seconds_since_written": state.since_s,
                "damaged_bytes": state.content.damaged.iter().map(|damage| [damage.from, damage.to]).collect::<Vec<_>>(),
            })
        })
        .collect();
    let told = json!({
        "points": points, "stored": shelf.done.count(), "double": shelf.double,
        "failed": states.iter().map(|state| state.content.failed).sum::<u64>(), "parts": parts,
    });
    format!("{}\n", serde_json::to_string_pretty(&told).unwrap_or_default())
}

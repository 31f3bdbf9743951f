//! `nutate explain FILE`: says what a config means; computes no evolution and leaves no file.

use std::io::{BufWriter, Write};

use clap::Args;

use super::{complain_of, point, print, read_config, Common, Status};
use crate::plan::Plan;
use crate::report::explain::facts::Facts;
use crate::report::explain::{json, text};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    /// Print one JSON object in place of the page
    #[arg(long)]
    json: bool,
}

/// Explains the file.
pub(super) fn explain(words: &Words) -> Status {
    match try_explain(words) {
        Ok(()) => Status::Good,
        Err(status) => status,
    }
}

fn try_explain(words: &Words) -> Result<(), Status> {
    let plan = Plan::new(read_config(&words.common)?);
    let document = plan.document();
    let point = point(&plan)?;
    let facts = Facts::gather(document, &point).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
    if words.json {
        let mut out = BufWriter::new(std::io::stdout().lock());
        // a reader that has gone away is no failure
        let _ = json::write(&facts, &mut out).and_then(|()| out.flush());
    } else {
        print(&text::text(&facts));
    }
    Ok(())
}

//! `nutate check FILE`: reads and judges a config without running it.

use clap::Args;

use super::{complain_of, point, print, read_config, Common, Status};
use crate::plan::Plan;

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
}

/// Judges the file.
pub(super) fn check(words: &Words) -> Status {
    let document = match read_config(&words.common) {
        Ok(document) => document,
        Err(status) => return status,
    };
    let plan = Plan::new(document);
    let point = match point(&plan) {
        Ok(point) => point,
        Err(status) => return status,
    };
    let document = plan.document();
    complain_of(document, &document.warnings);
    complain_of(document, &point.warnings);
    let count = |n: usize, one: &str| format!("{n} {one}{}", if n == 1 { "" } else { "s" });
    print(&format!(
        "{}: no mistake, {}. {}, {}, {} over {}.\n",
        words.common.config.display(),
        count(document.warnings.len() + point.warnings.len(), "warning"),
        count(document.system.names.len(), "level"),
        count(document.drives.len(), "drive"),
        count(point.timeline.pulses.len(), "pulse"),
        crate::config::messages::short_with_unit(point.timeline.end.seconds(), "s"),
    ));
    Status::Good
}

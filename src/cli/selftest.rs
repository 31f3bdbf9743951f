//! `nutate selftest`: known problems on the user's own machine, by every method, with deviation, error figure and time.

use clap::Args;

use super::{print, Status};
use crate::known::KNOWN;

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    /// Print nothing but what fails
    #[arg(long, short)]
    quiet: bool,
}

/// Methods and the accuracy asked of each; equal slices converge slowly, so less is asked of them where H changes.
const ROUTES: [(&str, f64); 6] = [
    ("automatic", 1e-10),
    ("smooth", 1e-10),
    ("geometric", 1e-10),
    ("collocation", 1e-10),
    ("fast carrier", 1e-10),
    ("constant steps", 1e-7),
];

/// Runs the table.
pub(super) fn selftest(words: &Words) -> Status {
    let mut failed = 0;
    let mut run = 0;
    for known in KNOWN {
        if !words.quiet {
            print(&format!("{}\n  {}\n", known.name, known.source));
        }
        for (method, accuracy) in ROUTES {
            run += 1;
            let line = match known.run(method, accuracy) {
                Ok(verdict) => {
                    let good = verdict.good() && verdict.error_figure <= accuracy;
                    failed += usize::from(!good);
                    let word = if good { "good" } else { "FAILED" };
                    if words.quiet && good {
                        continue;
                    }
                    format!(
                        "  {word:<6} {method:<14} off by {:>7.1e}, error figure {:>7.1e} ({accuracy:.0e} asked), {:>9.1} us\n",
                        verdict.deviation,
                        verdict.error_figure,
                        verdict.seconds * 1e6
                    )
                }
                Err(reason) => {
                    failed += 1;
                    format!("  FAILED {method:<14} {reason}\n")
                }
            };
            print(&line);
        }
    }
    print(&format!("{} of {run} runs good.\n", run - failed));
    if failed > 0 {
        Status::Machine
    } else {
        Status::Good
    }
}

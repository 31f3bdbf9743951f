//! `nutate selftest`: known problems on the user's own machine, by every method, with deviation, error figure and time.

use clap::Args;

use super::{print, Status};
use crate::known::KNOWN;
use crate::propagate::lanes::{trials, Width, LANES_VARIABLE, WIDTHS};

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
    failed += speeds(words.quiet);
    print(&format!("{} of {run} runs good.\n", run - failed));
    if failed > 0 {
        Status::Machine
    } else {
        Status::Good
    }
}

/// The kernels that carry many points side by side: their speed beside the plain exponential. Gives how many sets of instructions disagree.
fn speeds(quiet: bool) -> usize {
    let mut wrong = 0;
    if !quiet {
        print(&format!("many points side by side, ns for each slice and point, with {}\n", Width::chosen().word()));
    }
    for width in WIDTHS.into_iter().filter(|width| !width.is_here() && !quiet) {
        print(&format!("  skipped {}: this processor does not have it\n", width.word()));
    }
    if let Ok(word) = std::env::var(LANES_VARIABLE) {
        if Width::from_word(word.trim()) != Some(Width::chosen()) {
            print(&format!("  {LANES_VARIABLE}={word} is not here, so {} serves\n", Width::chosen().word()));
        }
    }
    for trial in trials() {
        // all sets of instructions do the same arithmetic but for rounding
        let good = trial.apart < 1e-12;
        wrong += usize::from(!good);
        let speeds: Vec<String> = trial.lanes_ns.iter().map(|(width, ns)| format!("{} {ns:.1}", width.word())).collect();
        let plain = trial.plain_ns.map_or(String::new(), |ns| format!(", plain {ns:.0}"));
        if !quiet || !good {
            let word = if good { "good" } else { "FAILED" };
            print(&format!("  {word:<6} {:<44} {}{plain}; apart {:.1e}\n", trial.name, speeds.join(", "), trial.apart));
        }
    }
    wrong
}
